"""Reserve of a store: backed by its power limits and by what it has stored at both ends of the interval."""

from typing import Any

import pytest

from tests.workers.planning.audit.small_jobs import (
    Document,
    audit_decisions,
    broken,
    facts,
    job,
    only,
    outage,
    product,
    store,
    window,
)
from workers.planning.audit import Decision, Replay

UP = product(sustain_minutes=60.0)
DOWN = product("down-60", direction="down", sustain_minutes=60.0)
BOTH = product("both", direction="symmetric", sustain_minutes=60.0)


def holds(
    power: list[float], held: Document, *, stored: float = 5.0, products: Any = (UP, DOWN, BOTH), **members: Any
) -> Replay:
    outages = members.pop("outages", [])
    market = window([0.0] * len(power), reserve_products=list(products))
    initial = {"quay-b1": {"stored_mwh": stored}}
    document = job([store(**members)], market, initial=initial, outages=outages)
    return audit_decisions(document, {"quay-b1": Decision(power, reserve_mw=held)})


def test_power_and_up_reserve_stay_within_the_discharge_limit() -> None:
    assert broken(holds([0.5], {"up-15": [1.5]})) == []
    assert broken(holds([-1.0], {"up-15": [3.0]})) == []
    found = only(holds([0.5], {"up-15": [1.75]}))
    assert (found.rule, found.pointer, found.asset, found.amount, found.unit) == (
        "reserve_up_power",
        "/fleet/assets/0/discharge_limit_mw",
        "quay-b1",
        0.25,
        "MW",
    )


def test_power_less_down_reserve_stays_within_the_charge_limit() -> None:
    assert broken(holds([-0.5], {"down-60": [1.5]})) == []
    assert broken(holds([1.0], {"down-60": [3.0]})) == []
    found = only(holds([-0.5], {"down-60": [1.75]}))
    assert (found.rule, found.pointer, found.amount) == (
        "reserve_down_power",
        "/fleet/assets/0/charge_limit_mw",
        0.25,
    )


def test_products_add_up_and_a_symmetric_one_counts_both_ways() -> None:
    assert broken(holds([0.0], {"up-15": [1.0], "both": [1.0], "down-60": [1.0]})) == []
    assert broken(holds([0.0], {"up-15": [1.25], "both": [1.0]})) == ["reserve_up_power"]
    assert broken(holds([0.0], {"down-60": [1.25], "both": [1.0]})) == ["reserve_down_power"]
    assert broken(holds([0.0], {"up-15": [2.0], "down-60": [2.0]})) == []


def test_an_outage_lowers_the_reserve_too() -> None:
    outages = [outage("quay-b1", 0, 1, 0.5)]
    assert broken(holds([0.0], {"both": [1.0]}, outages=outages)) == []
    assert broken(holds([0.0], {"both": [1.25]}, outages=outages)) == ["reserve_up_power", "reserve_down_power"]
    assert broken(holds([0.0], {"up-15": [0.5]}, outages=[outage("quay-b1", 0, 1)])) == ["reserve_up_power"]


def test_up_reserve_is_stored_above_the_floor() -> None:
    floor = {"min_stored_mwh": 1.0}
    assert broken(holds([0.0], {"up-15": [1.5]}, stored=2.5, **floor)) == []
    found = only(holds([0.0], {"up-15": [1.75]}, stored=2.5, **floor))
    assert (found.rule, found.pointer, found.amount, found.unit) == (
        "reserve_up_energy",
        "/fleet/assets/0/min_stored_mwh",
        0.25,
        "MWh",
    )


def test_down_reserve_has_room_below_the_ceiling() -> None:
    ceiling = {"max_stored_mwh": 9.0}
    assert broken(holds([0.0], {"down-60": [1.5]}, stored=7.5, **ceiling)) == []
    found = only(holds([0.0], {"down-60": [1.75]}, stored=7.5, **ceiling))
    assert (found.rule, found.pointer, found.amount) == (
        "reserve_down_energy",
        "/fleet/assets/0/max_stored_mwh",
        0.25,
    )


def test_reserve_is_backed_at_the_start_and_at_the_end_of_the_interval() -> None:
    # Charging: little at the start. Discharging: little at the end.
    assert broken(holds([-1.0], {"up-15": [1.0]}, stored=1.0)) == []
    assert broken(holds([-1.0], {"up-15": [1.25]}, stored=1.0)) == ["reserve_up_energy"]
    assert broken(holds([1.0], {"up-15": [1.0]}, stored=2.0)) == []
    assert broken(holds([1.0], {"up-15": [1.0]}, stored=1.75)) == ["reserve_up_energy"]
    # The other way round for room.
    assert broken(holds([1.0], {"down-60": [1.0]}, stored=9.0)) == []
    assert broken(holds([1.0], {"down-60": [1.25]}, stored=9.0)) == ["reserve_down_energy"]
    assert broken(holds([-1.0], {"down-60": [1.0]}, stored=8.0)) == []
    assert broken(holds([-1.0], {"down-60": [1.0]}, stored=8.25)) == ["reserve_down_energy"]


def test_what_is_stored_pays_for_losses_and_the_minutes_a_product_lasts() -> None:
    losses = {"charge_efficiency": 0.5, "discharge_efficiency": 0.5}
    quarter = (product(), product("down-15", direction="down"))
    # Up: 2 MW for a quarter of an hour are 0.5 MWh, 1 MWh inside. Down: 0.25 MWh inside.
    assert broken(holds([0.0], {"up-15": [2.0]}, stored=1.0, products=quarter, **losses)) == []
    assert broken(holds([0.0], {"up-15": [2.0]}, stored=0.9, products=quarter, **losses)) == ["reserve_up_energy"]
    assert broken(holds([0.0], {"down-15": [2.0]}, stored=9.75, products=quarter, **losses)) == []
    assert broken(holds([0.0], {"down-15": [2.0]}, stored=9.8, products=quarter, **losses)) == ["reserve_down_energy"]


def test_energy_of_several_products_adds_up_by_their_own_minutes() -> None:
    products = (UP, product("up-30", sustain_minutes=30.0))
    assert broken(holds([0.0], {"up-15": [1.0], "up-30": [1.0]}, stored=1.5, products=products)) == []
    assert broken(holds([0.0], {"up-15": [1.0], "up-30": [1.0]}, stored=1.4, products=products)) == [
        "reserve_up_energy"
    ]


def test_a_floor_widened_at_the_start_is_the_floor_of_reserve() -> None:
    # It starts 0.5 MWh below its floor of 2 MWh: it may hold nothing until it has charged.
    floor = {"min_stored_mwh": 2.0}
    assert broken(holds([0.0, -1.0, 0.0], {"up-15": [0.0, 0.0, 1.0]}, stored=1.5, **floor)) == []
    assert broken(holds([0.0], {"up-15": [0.25]}, stored=1.5, **floor)) == ["reserve_up_energy"]


def test_a_breach_names_the_interval_in_which_reserve_is_not_backed() -> None:
    # 2 MW either way, 5 MWh stored, 10 MWh at most; each is 0.25 short in the second hour.
    up, down = "/fleet/assets/0/discharge_limit_mw", "/fleet/assets/0/charge_limit_mw"
    found = only(holds([0.0, 0.0], {"up-15": [0.0, 2.25]}))
    assert facts(found) == ("reserve_up_power", up, "quay-b1", 1, 0.25, "MW")
    found = only(holds([0.0, 0.0], {"down-60": [0.0, 2.25]}))
    assert facts(found) == ("reserve_down_power", down, "quay-b1", 1, 0.25, "MW")
    floor, ceiling = "/fleet/assets/0/min_stored_mwh", "/fleet/assets/0/max_stored_mwh"
    found = only(holds([0.0, 0.0], {"up-15": [0.0, 1.25]}, stored=1.0))
    assert facts(found) == ("reserve_up_energy", floor, "quay-b1", 1, 0.25, "MWh")
    found = only(holds([0.0, 0.0], {"down-60": [0.0, 1.25]}, stored=9.0))
    assert facts(found) == ("reserve_down_energy", ceiling, "quay-b1", 1, 0.25, "MWh")


def test_an_idle_store_holds_reserve_whatever_its_minimum_powers() -> None:
    asset = {"min_discharge_mw": 1.0, "min_charge_mw": 1.0, "ramp_mw_per_hour": 0.0, "min_run_hours": 5.0}
    assert broken(holds([0.0], {"both": [0.5]}, **asset)) == []


def test_a_store_that_is_held_out_holds_none() -> None:
    market = window([0.0, 0.0], reserve_products=[BOTH])
    document = {**job([store()], market), "initial": {}, "targets": {}, "missing_initial": "hold_out"}
    assert broken(audit_decisions(document, {"quay-b1": Decision([0.0, 0.0], reserve_mw={"both": 0.0})})) == []
    found = only(audit_decisions(document, {"quay-b1": Decision([0.0, 0.0], reserve_mw={"both": [0.0, 0.5]})}))
    assert facts(found) == ("hold_out", "/missing_initial", "quay-b1", 1, 0.5, "MW")


@pytest.mark.parametrize("held", [{}, {"up-15": [0.0]}])
def test_a_store_beyond_its_limit_without_reserve_breaks_its_own_rules_only(held: Document) -> None:
    assert broken(holds([2.5], held, stored=2.0)) == ["discharge_limit", "min_stored", "final_stored"]
