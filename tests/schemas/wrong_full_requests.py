"""Ways to spoil a request that uses the whole contract, each with the exact faults it is to be answered with."""

from tests.schemas.documents import ABSENT, HOURS, full
from tests.schemas.wrong_plain_requests import START, Edits, Faults


def of_a_full_request() -> dict[str, tuple[str, Edits, Faults]]:
    """List a task, edits of its full request, and what they are answered with."""
    pumps, g1 = "/fleet/assets/3", "/fleet/assets/1"
    needs = "/energy_needs/cs-pumps"
    return {
        "a generator's state of a store": (
            "schedule",
            {"/initial/cs-g1/stored_mwh": 1, "/initial/cs-g1/power_mw": 1},
            {("/initial/cs-g1/stored_mwh", "wrong-kind"), ("/initial/cs-g1/power_mw", "wrong-kind")},
        ),
        "a generator off and running": (
            "schedule",
            {"/initial/cs-g1/on": False},
            {("/initial/cs-g1/output_mw", "inconsistent")},
        ),
        "a generator beyond its output": (
            "schedule",
            {"/initial/cs-g1/output_mw": 2.1},
            {("/initial/cs-g1/output_mw", "out-of-range")},
        ),
        "supply for nothing": (
            "schedule",
            {"/energy_needs/x": [], "/forecasts/x": 1},
            {("/energy_needs/x", "unknown-reference"), ("/forecasts/x", "unknown-reference")},
        ),
        "a share of what nobody at a site can charge": (
            "schedule",
            {
                "/commitments/2/applies_to": {"site": "quay"},
                "/fleet/assets/2/site": "quay",
            },
            {("/commitments/2/threshold/fraction_of_rated", "wrong-kind")},
        ),
        "a share of what nobody in the fleet can charge": (
            "schedule",
            {
                "/commitments/2/applies_to": {"fleet": True},
                "/fleet/assets/0/charge_limit_mw": 0,
                "/fleet/assets/0/min_charge_mw": 0,
                "/fleet/assets/5/charge_limit_mw": 0,
            },
            {("/commitments/2/threshold/fraction_of_rated", "wrong-kind")},
        ),
        "a generator neither on nor off": (
            "schedule",
            {"/initial/cs-g1/on": ABSENT},
            {("/initial/cs-g1/on", "missing")},
        ),
        "the state of a load": ("schedule", {"/initial/cs-base": {}}, {("/initial/cs-base", "wrong-kind")}),
        "a target of a generator": ("schedule", {"/targets/cs-g1": {}}, {("/targets/cs-g1", "wrong-kind")}),
        "a need of a store": (
            "schedule",
            {"/energy_needs/cs-b1": [{"energy_mwh": 1}]},
            {("/energy_needs/cs-b1", "wrong-kind")},
        ),
        "needs that overlap": (
            "schedule",
            {f"{needs}/1/from": "2027-03-14T07:00:00Z"},
            {(f"{needs}/1", "overlap")},
        ),
        "a need off the borders": (
            "schedule",
            {f"{needs}/0/from": "2027-03-14T01:01:00Z"},
            {(f"{needs}/0/from", "off-border")},
        ),
        "a need that ends first": (
            "schedule",
            {f"{needs}/0/to": "2027-03-14T01:00:00Z"},
            {(f"{needs}/0", "inconsistent")},
        ),
        "a load that cannot be interrupted, at any power": (
            "schedule",
            {f"{pumps}/min_draw_mw": 0},
            {(f"{pumps}/interruptible", "inconsistent")},
        ),
        "a load that draws more at least than at most": (
            "schedule",
            {f"{pumps}/min_draw_mw": 1.3},
            {(f"{pumps}/min_draw_mw", "inconsistent")},
        ),
        "a generator that cannot run": (
            "schedule",
            {f"{g1}/min_output_mw": 2.1},
            {(f"{g1}/min_output_mw", "inconsistent")},
        ),
        "start costs that do not begin, ascend or rise": (
            "schedule",
            {f"{g1}/start_costs": [{"after_hours_off": 1, "cost": 9}, {"after_hours_off": 1, "cost": 8}]},
            {
                (f"{g1}/start_costs/0/after_hours_off", "inconsistent"),
                (f"{g1}/start_costs/1/after_hours_off", "inconsistent"),
                (f"{g1}/start_costs/1/cost", "inconsistent"),
            },
        ),
        "an outage of one direction of a load": (
            "schedule",
            {"/outages/0/asset": "cs-base"},
            {
                ("/outages/0/available_charge_fraction", "wrong-kind"),
                ("/outages/0/available_discharge_fraction", "wrong-kind"),
            },
        ),
        "series of other lengths": (
            "schedule",
            {
                "/forecasts/cs-pv": [1.0],
                "/positions/cold-store": [1.0] * 25,
                "/commitments/3/power_mw": [1.0] * 23,
                "/window/reserve_products/1/price_per_mw_per_hour": [1.0],
            },
            {
                ("/forecasts/cs-pv", "wrong-length"),
                ("/positions/cold-store", "wrong-length"),
                ("/commitments/3/power_mw", "wrong-length"),
                ("/window/reserve_products/1/price_per_mw_per_hour", "wrong-length"),
            },
        ),
        "reserve of an unknown product": (
            "schedule",
            {"/commitments/7/product": "up-99"},
            {("/commitments/7/product", "unknown-reference"), ("/commitments/7/applies_to/assets/0", "wrong-kind")},
        ),
        "reserve of a load": (
            "schedule",
            {"/commitments/7/applies_to/assets/1": "cs-base"},
            {("/commitments/7/applies_to/assets/1", "wrong-kind")},
        ),
        "two products and two commitments of one name": (
            "schedule",
            {"/window/reserve_products/1/id": "up-15", "/commitments/7/id": "firm-evening"},
            {("/window/reserve_products/1/id", "duplicate"), ("/commitments/7/id", "duplicate")},
        ),
        "history of a generator": (
            "schedule",
            {"/counted_before/assets/cs-g1": {"starts": 1}},
            {("/counted_before/assets/cs-g1", "wrong-kind")},
        ),
        "a schedule with a stranger, a twin and one left out": (
            "check",
            {"/schedule/assets/0/id": "x", "/schedule/assets/1/id": "quay-b2"},
            {
                ("/schedule/assets/0/id", "unknown-reference"),
                ("/schedule/assets/3/id", "duplicate"),
                ("/schedule/assets/5", "missing"),
            },
        ),
        "decisions that do not fit": (
            "check",
            {
                "/schedule/assets/0/power_mw": [1.0],
                "/schedule/assets/0/on": [True] * HOURS,
                "/schedule/assets/4/on": [True],
                "/schedule/assets/4/reserve_mw": {"up-99": 1},
            },
            {
                ("/schedule/assets/0/power_mw", "wrong-length"),
                ("/schedule/assets/0/on", "wrong-kind"),
                ("/schedule/assets/4/on", "wrong-length"),
                ("/schedule/assets/4/reserve_mw/up-99", "unknown-reference"),
            },
        ),
        "a misspelt decision": (
            "check",
            {"/schedule/assets/0/reserve_mv": {}, "/schedule/asset": []},
            {("/schedule/assets/0/reserve_mv", "unknown-field"), ("/schedule/asset", "unknown-field")},
        ),
        "the price of no commitment": (
            "commitment_costs",
            {"/commitment": "x"},
            {("/commitment", "unknown-reference")},
        ),
        "the price of another kind": (
            "commitment_costs",
            {"/commitment": "kept-ready"},
            {("/commitment", "wrong-kind")},
        ),
        "steps of half an interval": (
            "commitment_costs",
            {"/step_hours": 0.5, "/window": full("schedule")["window"], "/window_id": ABSENT},
            {("/step_hours", "off-border")},
        ),
        "a lock between borders, actuals from outside": (
            "reschedule",
            {
                "/locked_until": "2027-03-14T03:30:00Z",
                "/actuals/cs-b1/until": "2027-03-15T03:00:00Z",
                "/actuals/cs-g1/on": [True],
                "/actuals/cs-g1/stored_mwh": 1,
                "/actuals/nobody": {"until": START, "power_mw": []},
            },
            {
                ("/locked_until", "off-border"),
                ("/actuals/cs-b1/until", "out-of-range"),
                ("/actuals/cs-g1/on", "wrong-length"),
                ("/actuals/cs-g1/stored_mwh", "wrong-kind"),
                ("/actuals/nobody", "unknown-reference"),
            },
        ),
        "metered switching of a store": (
            "reschedule",
            {"/actuals/cs-b1/on": [True, True, True]},
            {("/actuals/cs-b1/on", "wrong-kind")},
        ),
        "windows that do not follow one another": (
            "sequence",
            {
                "/windows/1/start": "2027-03-14T13:00:00Z",
                "/windows/1/currency": "USD",
                "/windows/1/reserve_products/1/id": "b",
            },
            {
                ("/windows/1/start", "inconsistent"),
                ("/windows/1/currency", "inconsistent"),
                ("/windows/1/reserve_products", "inconsistent"),
            },
        ),
        "a series over one of two windows": (
            "sequence",
            {"/forecasts/cs-pv": [1.0] * 12},
            {("/forecasts/cs-pv", "wrong-length")},
        ),
        "a window that is given by a faulty id": (
            "sequence",
            {"/windows/1": "not an id"},
            {("/windows/1", "bad-format")},
        ),
    }
