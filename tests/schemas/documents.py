"""Requests of an invented co-operative, with every member, kind and task of the contract, and ways to spoil them."""

import copy
from typing import Any

Json = dict[str, Any]
HOURS = 24
ABSENT = object()
"""Put in a place: the member is taken away."""


def fleet() -> Json:
    return {
        "name": "Pellow Bay co-operative",
        "note": "cs-b1 back from service",
        "export_limit_mw": 30.0,
        "import_limit_mw": 30.0,
        "lot_mw": 0.1,
        "sites": [
            {
                "id": "cold-store",
                "export_limit_mw": 5.0,
                "import_limit_mw": 6.0,
                "lot_mw": 0.1,
                "peak_import_charge_per_mw": 100.0,
                "import_fee_per_mwh": 2.0,
                "export_fee_per_mwh": 1.0,
            },
            {"id": "quay"},
        ],
        "assets": [
            {
                "id": "cs-b1",
                "kind": "storage",
                "site": "cold-store",
                "discharge_limit_mw": 4.0,
                "charge_limit_mw": 4.0,
                "min_discharge_mw": 0.5,
                "min_charge_mw": 0.5,
                "energy_capacity_mwh": 8.0,
                "min_stored_mwh": 0.4,
                "max_stored_mwh": 7.9,
                "charge_efficiency": 0.95,
                "discharge_efficiency": 0.95,
                "self_discharge_per_hour": 0.001,
                "standby_load_mw": 0.02,
                "wear_cost_per_mwh": 3.0,
                "max_cycles_per_day": 2.5,
                "ramp_mw_per_hour": 16.0,
                "min_run_hours": 1,
                "min_rest_hours": 1,
                "max_starts_per_day": 4,
                "reserve_products": ["up-15"],
            },
            {
                "id": "cs-g1",
                "kind": "generator",
                "site": "cold-store",
                "min_output_mw": 0.6,
                "max_output_mw": 2.0,
                "cost": {"constant_per_hour": 18.0, "linear_per_mwh": 95.0, "quadratic_per_mw2h": 4.0},
                "start_costs": [{"after_hours_off": 0, "cost": 40.0}, {"after_hours_off": 6, "cost": 90.0}],
                "min_up_hours": 2,
                "min_down_hours": 2,
                "ramp_up_mw_per_hour": 2.0,
                "ramp_down_mw_per_hour": 2.0,
                "reserve_products": ["up-15", "both-5"],
            },
            {"id": "cs-pv", "kind": "renewable", "site": "cold-store", "curtailable": True, "cost_per_mwh": 0.5},
            {
                "id": "cs-pumps",
                "kind": "flexible_load",
                "site": "cold-store",
                "draw_limit_mw": 1.2,
                "min_draw_mw": 0.3,
                "interruptible": False,
            },
            {"id": "cs-base", "kind": "fixed_load", "site": "cold-store"},
            {
                "id": "quay-b2",
                "kind": "storage",
                "discharge_limit_mw": 2,
                "charge_limit_mw": 1,
                "energy_capacity_mwh": 4,
                "charge_efficiency": 0.9,
                "discharge_efficiency": 0.9,
            },
        ],
    }


def window() -> Json:
    return {
        "start": "2027-03-14T00:00:00+00:00",
        "interval": "PT60M",
        "timezone": "Europe/Lisbon",
        "currency": "EUR",
        "buy_price_per_mwh": [61.2 + hour for hour in range(HOURS)],
        "sell_price_per_mwh": [58.9 + hour for hour in range(HOURS)],
        "price_basis": "forecast",
        "settled_at": "site",
        "reserve_products": [
            {
                "id": "up-15",
                "direction": "up",
                "sustain_minutes": 15,
                "block_hours": 4,
                "price_per_mw_per_hour": [4.1] * HOURS,
            },
            {"id": "both-5", "direction": "symmetric", "sustain_minutes": 5.0, "price_per_mw_per_hour": 3.0},
        ],
    }


def commitments() -> list[Json]:
    always = {"from": "2027-03-14T02:00:00Z", "to": "2027-03-14T23:00:00+00:00"}
    stretch = [{"from": "2027-03-14T05:00:00Z", "to": "2027-03-14T06:00:00Z"}]
    daily = {"each_day": True, "between": ["16:00", "22:00"]}
    return [
        {
            "id": "firm-evening",
            "kind": "hours_at_least",
            "applies_to": {"assets": ["cs-b1", "quay-b2"]},
            "threshold": {"fraction_of_rated": 0.5},
            "direction": "discharge",
            "headroom_mw": 0.1,
            "hours": 2,
            "min_block_hours": 1,
            "excused": stretch,
            "shortfall_price_per_hour": 500.0,
            **daily,
            **always,
        },
        {
            "id": "long-haul",
            "kind": "hours_at_least",
            "applies_to": {"fleet": True},
            "threshold": {"mw": 2.0},
            "hours": 2,
        },
        {
            "id": "quiet-night",
            "kind": "hours_at_most",
            "applies_to": {"site": "cold-store"},
            "threshold": {"fraction_of_rated": 0.75},
            "direction": "charge",
            "headroom_mw": 0.1,
            "hours": 3,
            "excused": stretch,
            "shortfall_price_per_hour": 20.0,
            **daily,
            **always,
        },
        {
            "id": "ship-power",
            "kind": "firm_delivery",
            "applies_to": {"group": ["cs-b1", "cs-g1"]},
            "power_mw": [0.5] * HOURS,
            "direction": "discharge",
            "excused": stretch,
            "shortfall_price_per_mwh": 300.0,
            **daily,
            **always,
        },
        {
            "id": "some-energy",
            "kind": "energy_at_least",
            "applies_to": {"fleet": True},
            "energy_mwh": 3.0,
            "direction": "discharge",
            "shortfall_price_per_mwh": 100.0,
            **daily,
            **always,
        },
        {
            "id": "seldom-loud",
            "kind": "hours_at_most",
            "applies_to": {"assets": ["cs-pumps"]},
            "threshold": {"mw": 0},
            "direction": "charge",
            "hours": 20,
        },
        {
            "id": "not-too-much",
            "kind": "energy_at_most",
            "applies_to": {"assets": ["cs-b1"]},
            "energy_mwh": 9.0,
            "direction": "charge",
            "shortfall_price_per_mwh": 100.0,
            **daily,
            **always,
        },
        {
            "id": "kept-ready",
            "kind": "reserve_holding",
            "applies_to": {"assets": ["cs-b1"]},
            "product": "up-15",
            "power_mw": 0.5,
            "shortfall_price_per_mw_per_hour": 50.0,
            **daily,
            **always,
        },
    ]


def question() -> Json:
    """Return what every task shares, the fleet inline."""
    return {
        "label": "day ahead",
        "note": "second run",
        "fleet": fleet(),
        "initial": {
            "cs-b1": {"stored_mwh": 4.0, "power_mw": 1.0, "hours_in_state": 3},
            "quay-b2": {"state_of_charge_percent": 50.0},
            "cs-g1": {"on": True, "hours_in_state": 9, "output_mw": 1.0},
        },
        "missing_initial": "refuse",
        "initial_from_job_id": "yesterday",
        "targets": {"cs-b1": {"final_stored_mwh": 4.0, "final_value_per_mwh": 50.0}},
        "forecasts": {"cs-pv": [0.0] * HOURS, "cs-base": 0.8},
        "energy_needs": {
            "cs-pumps": [
                {"energy_mwh": 3.0, "from": "2027-03-14T01:00:00Z", "to": "2027-03-14T08:00:00Z"},
                {"energy_mwh": 1.0, "from": "2027-03-14T08:00:00Z"},
            ]
        },
        "positions": {"cold-store": [1.0] * HOURS, "quay-b2": -0.5},
        "outages": [
            {
                "asset": "cs-b1",
                "kind": "forced",
                "from": "2027-03-14T14:07:00Z",
                "to": "2027-03-14T15:00:00Z",
                "available_fraction": 0.9,
                "available_charge_fraction": 0.0,
                "available_discharge_fraction": 0.5,
            }
        ],
        "limits": {"cold-store": {"export_limit_mw": [5.0] * HOURS, "import_limit_mw": 5.0}, "fleet": {}},
        "counted_before": {
            "commitments": {"firm-evening": {"cs-b1": 1.0}, "ship-power": 1.0},
            "assets": {"cs-b1": {"discharged_mwh": 3.0, "starts": 1}},
            "sites": {"cold-store": {"peak_import_mw": 3.2}},
        },
        "commitments": commitments(),
        "method": "auto",
        "time_limit_seconds": 60,
        "needed_by": "2027-03-13T12:00:00+01:00",
        "urgent": True,
        "relative_gap": 0.001,
        "absolute_gap": 1.0,
        "seed": 7,
        "explain_commitments": True,
        "levers": ["commitments", "targets", "planned_outages", "initial_energy", "limits"],
        "callback": {"url": "https://ems.example/hooks/schedules"},
    }


def second_window() -> Json:
    later = window()
    later["start"] = "2027-03-14T12:00:00+00:00"
    return later


def full(task: str) -> Json:
    """Return a valid request for one task with every member the task has."""
    job = {"task": task, **question(), "window": window()}
    if task == "check":
        job["schedule"] = {
            "assets": [
                {"id": name, "power_mw": [0.0] * HOURS, "stored_mwh": [4.0] * HOURS, "totals": {}}
                for name in ("cs-b1", "cs-pv", "cs-pumps", "quay-b2")
            ],
            "margin": 12.0,
        }
        generator = {"id": "cs-g1", "power_mw": 1.0, "on": [True] * HOURS, "reserve_mw": {"up-15": [0.1] * HOURS}}
        job["schedule"]["assets"].append(generator)
    elif task == "commitment_costs":
        job |= {"commitment": "firm-evening", "step_hours": 1, "fleet_id": "pellow-bay", "window_id": "day-ahead"}
        del job["fleet"], job["window"]
    elif task == "reschedule":
        actuals = {"until": "2027-03-14T03:00:00Z", "power_mw": [0.0, 1.0, -1.0]}
        job["previous_job_id"] = "morning"
        job["actuals"] = {"cs-b1": {**actuals, "stored_mwh": 3.1}, "cs-g1": {**actuals, "on": [True, True, False]}}
        job |= {"locked_until": "2027-03-14T04:00:00Z", "deviation_price_per_mwh": 5.0}
    elif task == "sequence":
        del job["window"]
        first, second = window(), second_window()
        for part in (first, second):
            del part["buy_price_per_mwh"]
            part["price_per_mwh"] = part.pop("sell_price_per_mwh")[:12]
            part["reserve_products"][0]["price_per_mw_per_hour"] = [4.0] * 12
        job["windows"] = [first, second]
    return job


TASKS = ("schedule", "check", "commitment_costs", "reschedule", "sequence")


def plain() -> Json:
    """One store, four hours, nothing else."""
    return {
        "fleet": {
            "assets": [
                {
                    "id": "b1",
                    "kind": "storage",
                    "discharge_limit_mw": 4.0,
                    "charge_limit_mw": 4.0,
                    "energy_capacity_mwh": 8.0,
                    "charge_efficiency": 0.95,
                    "discharge_efficiency": 0.95,
                }
            ]
        },
        "window": {
            "start": "2027-03-14T00:00:00+00:00",
            "interval": "PT60M",
            "timezone": "Europe/Lisbon",
            "currency": "EUR",
            "price_per_mwh": [50.0, 60.0, 70.0, 80.0],
            "price_basis": "forecast",
        },
        "initial": {"b1": {"stored_mwh": 4.0}},
    }


def steps_of(pointer: str) -> list[str]:
    """Split an RFC 6901 pointer."""
    return [part.replace("~1", "/").replace("~0", "~") for part in pointer.split("/")[1:]]


def at(document: Any, pointer: str) -> Any:
    """Resolve a pointer; raises `KeyError`, `IndexError` or `TypeError` where nothing lies there."""
    for step in steps_of(pointer):
        document = document[int(step)] if isinstance(document, list) else document[step]
    return document


def with_put(document: Json, pointer: str, value: Any) -> Json:
    """Copy a document with a value in one place; parents that are not there are made; `ABSENT` takes it away."""
    copied = copy.deepcopy(document)
    steps = steps_of(pointer)
    if not steps:
        return value  # type: ignore[no-any-return]  # a test's own idea of a document
    holder: Any = copied
    for step in steps[:-1]:
        holder = holder[int(step)] if isinstance(holder, list) else holder.setdefault(step, {})
    key: Any = int(steps[-1]) if isinstance(holder, list) else steps[-1]
    if value is ABSENT:
        del holder[key]
    elif isinstance(holder, list) and key == len(holder):
        holder.append(value)
    else:
        holder[key] = value
    return copied


def edited(document: Json, edits: dict[str, Any]) -> Json:
    """Copy a document with several places changed, in order."""
    for pointer, value in edits.items():
        document = with_put(document, pointer, value)
    return document
