"""Ways to spoil a request for one store, each with the exact faults it is to be answered with."""

from typing import Any

from tests.schemas.documents import ABSENT, plain

Edits = dict[str, Any]
Faults = set[tuple[str, str]]

START = "2027-03-14T00:00:00Z"
SECOND_STORE = {**plain()["fleet"]["assets"][0], "id": "b2"}
HOURS_ROW = {"id": "c1", "kind": "hours_at_least", "applies_to": {"assets": ["b1"]}, "threshold": {"mw": 1}, "hours": 1}


def of_a_plain_request() -> dict[str, tuple[Edits, Faults]]:
    """List edits of the plain request, and what each is answered with."""
    b1 = "/fleet/assets/0"
    return {
        "a price array of another length than its pair": (
            {
                "/window/price_per_mwh": ABSENT,
                "/window/buy_price_per_mwh": [1, 2, 3],
                "/window/sell_price_per_mwh": [1, 2],
            },
            {("/window/sell_price_per_mwh", "wrong-length")},
        ),
        "no price that is an array": ({"/window/price_per_mwh": 5}, {("/window/price_per_mwh", "wrong-length")}),
        "no price": ({"/window/price_per_mwh": ABSENT}, {("/window", "exactly-one")}),
        "a price to buy alone": (
            {"/window/price_per_mwh": ABSENT, "/window/buy_price_per_mwh": [1, 2]},
            {("/window/sell_price_per_mwh", "missing")},
        ),
        "one price and a pair": (
            {"/window/buy_price_per_mwh": 1, "/window/sell_price_per_mwh": 1},
            {("/window", "exactly-one")},
        ),
        "neither fleet nor window": (
            {"/fleet": ABSENT, "/window": ABSENT},
            {("/fleet", "missing"), ("/window", "missing")},
        ),
        "fleet and window twice": (
            {"/fleet_id": "f", "/window_id": "w"},
            {("/fleet_id", "exactly-one"), ("/window_id", "exactly-one")},
        ),
        "a start without an offset": ({"/window/start": "2027-03-14T00:00:00"}, {("/window/start", "bad-format")}),
        "a start as a number": ({"/window/start": 1805000000}, {("/window/start", "wrong-type")}),
        "a start with a blank": ({"/window/start": "2027-03-14 00:00:00Z"}, {("/window/start", "bad-format")}),
        "a start in digits of another script": (
            {"/window/start": "٢٠٢٧-03-14T00:00:00Z"},
            {("/window/start", "bad-format")},
        ),
        "a start with a zone in brackets": (
            {"/window/start": "2027-03-14T00:00:00Z[Europe/Lisbon]"},
            {("/window/start", "bad-format")},
        ),
        "a leap second": ({"/window/start": "2027-03-14T23:59:60Z"}, {("/window/start", "bad-format")}),
        "a start long ago": ({"/window/start": "1066-10-14T00:00:00Z"}, {("/window/start", "out-of-range")}),
        "an unknown zone": ({"/window/timezone": "Europe/Nowhere"}, {("/window/timezone", "not-allowed")}),
        "the zone of this machine": ({"/window/timezone": "localtime"}, {("/window/timezone", "not-allowed")}),
        "an interval of a month": ({"/window/interval": "P1M"}, {("/window/interval", "bad-format")}),
        "a negative interval": ({"/window/interval": "-PT15M"}, {("/window/interval", "bad-format")}),
        "an interval of no time": ({"/window/interval": "PT0M"}, {("/window/interval", "out-of-range")}),
        "a currency in small letters": ({"/window/currency": "eur"}, {("/window/currency", "bad-format")}),
        "a null in a series": (
            {"/window/price_per_mwh": [1, None, 3, None]},
            {("/window/price_per_mwh/1", "wrong-type")},
        ),
        "an empty series": ({"/window/price_per_mwh": []}, {("/window/price_per_mwh", "too-few")}),
        "an unknown task": ({"/task": "dream"}, {("/task", "not-allowed")}),
        "an unknown kind": ({f"{b1}/kind": "flywheel"}, {(f"{b1}/kind", "not-allowed")}),
        "an asset without a kind": ({f"{b1}/kind": ABSENT}, {(f"{b1}/kind", "missing")}),
        "a misspelt member": ({f"{b1}/min_stord_mwh": 1}, {(f"{b1}/min_stord_mwh", "unknown-field")}),
        "a member whose name needs escapes": ({f"{b1}/a~1b~0c": 1}, {(f"{b1}/a~1b~0c", "unknown-field")}),
        "a member named like a tag of ours": (
            {f"{b1}/<storage>": 1, "/initial/<storage>": {"[key]": 1}},
            {
                (f"{b1}/<storage>", "unknown-field"),
                ("/initial/<storage>", "bad-format"),
                ("/initial/<storage>/[key]", "unknown-field"),
            },
        ),
        "a member with a name too long to give back": (
            {f"{b1}/{'x' * 101}": 1},
            {(b1, "unknown-field")},
        ),
        "an efficiency above one": ({f"{b1}/charge_efficiency": 1.01}, {(f"{b1}/charge_efficiency", "out-of-range")}),
        "an efficiency of zero": ({f"{b1}/charge_efficiency": 0}, {(f"{b1}/charge_efficiency", "out-of-range")}),
        "all self-discharge": (
            {f"{b1}/self_discharge_per_hour": 1},
            {(f"{b1}/self_discharge_per_hour", "out-of-range")},
        ),
        "text for a number": ({f"{b1}/charge_limit_mw": "4"}, {(f"{b1}/charge_limit_mw", "wrong-type")}),
        "true for a number": ({f"{b1}/charge_limit_mw": True}, {(f"{b1}/charge_limit_mw", "wrong-type")}),
        "a count with a decimal point": (
            {f"{b1}/max_starts_per_day": 1.0},
            {(f"{b1}/max_starts_per_day", "wrong-type")},
        ),
        "a minimum power above its limit": ({f"{b1}/min_charge_mw": 4.1}, {(f"{b1}/min_charge_mw", "inconsistent")}),
        "more stored at most than fits": ({f"{b1}/max_stored_mwh": 9}, {(f"{b1}/max_stored_mwh", "inconsistent")}),
        "more stored at least than at most": (
            {f"{b1}/min_stored_mwh": 5, f"{b1}/max_stored_mwh": 4},
            {(f"{b1}/min_stored_mwh", "inconsistent")},
        ),
        "runs without minimum powers": (
            {f"{b1}/min_run_hours": 1, f"{b1}/min_rest_hours": 1, f"{b1}/max_starts_per_day": 0},
            {
                (f"{b1}/min_run_hours", "inconsistent"),
                (f"{b1}/min_rest_hours", "inconsistent"),
                (f"{b1}/max_starts_per_day", "inconsistent"),
            },
        ),
        "runs with a minimum power in one direction only": (
            {f"{b1}/min_run_hours": 1, f"{b1}/min_discharge_mw": 1},
            {(f"{b1}/min_run_hours", "inconsistent")},
        ),
        "a site that is not there": ({f"{b1}/site": "attic"}, {(f"{b1}/site", "unknown-reference")}),
        "a site and an asset with one name": (
            {"/fleet/sites": [{"id": "b1"}]},
            {(f"{b1}/id", "duplicate")},
        ),
        "an asset named fleet": (
            {"/fleet/assets/1": {**SECOND_STORE, "id": "fleet"}, "/initial/fleet": {"stored_mwh": 1}},
            {("/fleet/assets/1/id", "not-allowed")},
        ),
        "two assets with one name": (
            {"/fleet/assets/1": {**SECOND_STORE, "id": "b1"}},
            {("/fleet/assets/1/id", "duplicate")},
        ),
        "an id with a line end": ({f"{b1}/id": "b1\n"}, {(f"{b1}/id", "bad-format")}),
        "an id with a null character": ({f"{b1}/id": "b\u00001"}, {(f"{b1}/id", "bad-format")}),
        "every store's state missing": (
            {"/fleet/assets/1": SECOND_STORE, "/initial": ABSENT},
            {("/initial/b1", "missing"), ("/initial/b2", "missing")},
        ),
        "energy given twice": (
            {"/initial/b1/state_of_charge_percent": 50},
            {("/initial/b1", "exactly-one")},
        ),
        "no energy in a state": ({"/initial/b1": {"power_mw": 1}}, {("/initial/b1", "exactly-one")}),
        "much more energy than fits": ({"/initial/b1/stored_mwh": 8.17}, {("/initial/b1/stored_mwh", "out-of-range")}),
        "much more charge than fits": (
            {"/initial/b1": {"state_of_charge_percent": 102.1}},
            {("/initial/b1/state_of_charge_percent", "out-of-range")},
        ),
        "more power before than the store has": (
            {"/initial/b1/power_mw": -4.2},
            {("/initial/b1/power_mw", "out-of-range")},
        ),
        "a store that is on": ({"/initial/b1/on": True}, {("/initial/b1/on", "wrong-kind")}),
        "the state of nothing": ({"/initial/b9": {"stored_mwh": 1}}, {("/initial/b9", "unknown-reference")}),
        "a target for nothing": ({"/targets": {"b9": {}}}, {("/targets/b9", "unknown-reference")}),
        "a target above the capacity": (
            {"/targets": {"b1": {"final_stored_mwh": 8.1}}},
            {("/targets/b1/final_stored_mwh", "out-of-range")},
        ),
        "a forecast for a store": ({"/forecasts": {"b1": 1}}, {("/forecasts/b1", "wrong-kind")}),
        "a forecast below zero": ({"/forecasts": {"b1": [1, -1, -1]}}, {("/forecasts/b1/1", "out-of-range")}),
        "a load without a forecast": (
            {"/fleet/assets/1": {"id": "l1", "kind": "fixed_load"}},
            {("/forecasts/l1", "missing")},
        ),
        "a position of nothing": ({"/positions": {"b9": 1}}, {("/positions/b9", "unknown-reference")}),
        "a position of the fleet, settled at sites": (
            {"/positions": {"fleet": 1}},
            {("/positions/fleet", "wrong-kind")},
        ),
        "a position of a meter, settled at the fleet": (
            {"/positions": {"b1": 1}, "/window/settled_at": "fleet"},
            {("/positions/b1", "wrong-kind")},
        ),
        "a position of an asset behind a site's meter": (
            {"/fleet/sites": [{"id": "s"}], f"{b1}/site": "s", "/positions": {"b1": 1}},
            {("/positions/b1", "wrong-kind")},
        ),
        "limits of an asset": ({"/limits": {"b1": {}}}, {("/limits/b1", "unknown-reference")}),
        "a limit of another length": (
            {"/limits": {"fleet": {"export_limit_mw": [1, 2]}}},
            {("/limits/fleet/export_limit_mw", "wrong-length")},
        ),
        "an outage of nothing that ends before it begins": (
            {"/outages": [{"asset": "b9", "kind": "forced", "from": "2027-03-14T02:00:00Z", "to": START}]},
            {("/outages/0/asset", "unknown-reference"), ("/outages/0/to", "inconsistent")},
        ),
        "history of nothing": (
            {"/counted_before": {"commitments": {"c9": 1}, "assets": {"b9": {}}, "sites": {"s9": {}}}},
            {
                ("/counted_before/commitments/c9", "unknown-reference"),
                ("/counted_before/assets/b9", "unknown-reference"),
                ("/counted_before/sites/s9", "unknown-reference"),
            },
        ),
        "history of an asset that is not bound": (
            {"/commitments": [HOURS_ROW], "/counted_before": {"commitments": {"c1": {"b9": 1}}}},
            {("/counted_before/commitments/c1/b9", "unknown-reference")},
        ),
        "history by asset of a commitment on a sum": (
            {
                "/commitments": [{**HOURS_ROW, "applies_to": {"group": ["b1"]}}],
                "/counted_before": {"commitments": {"c1": {"b1": 1}}},
            },
            {("/counted_before/commitments/c1", "wrong-kind")},
        ),
        "a lever pulled twice": ({"/levers": ["targets", "targets"]}, {("/levers/1", "duplicate")}),
        "a fault of a member and one across members": (
            {"/time_limit_seconds": 0, "/fleet/assets/1": SECOND_STORE},
            {("/time_limit_seconds", "out-of-range"), ("/initial/b2", "missing")},
        ),
        "a state that is faulty is not missing too": (
            {"/initial/b1/stored_mwh": -1},
            {("/initial/b1/stored_mwh", "out-of-range")},
        ),
        "too many seconds": ({"/time_limit_seconds": 3600.1}, {("/time_limit_seconds", "out-of-range")}),
        "a callback to no web address": ({"/callback": {"url": "ftp://x"}}, {("/callback/url", "bad-format")}),
        "a fleet limit with assets planned one by one": (
            {
                "/method": "per_asset",
                "/fleet/assets/1": {**SECOND_STORE},
                "/initial/b2": {"stored_mwh": 1},
                "/fleet/export_limit_mw": 5,
            },
            {("/fleet/export_limit_mw", "coupled")},
        ),
        "not an object": ({"": [1]}, {("", "wrong-type")}),
    }
