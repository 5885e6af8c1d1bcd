"""Reserve as decided: who may hold it, blocks, income. Hourly intervals where nothing else is said."""

import math
from typing import Any

import pytest

from tests.workers.planning.audit.small_jobs import (
    Document,
    audit_decisions,
    broken,
    facts,
    flexible_load,
    generator,
    job,
    load,
    only,
    product,
    read,
    renewable,
    store,
    window,
)
from workers.planning.audit import Decision, Replay
from workers.planning.audit.clock import Clock


def holds(held: Any, *products: Document, asset: Document | None = None, **members: Any) -> Replay:
    """Audit a store with 5 MWh that idles through four hours and holds reserve."""
    members.setdefault("start", "2027-03-10T00:00:00Z")
    market = window([0.0] * 4, reserve_products=list(products or (product(),)), **members)
    document = job([store() if asset is None else asset], market)
    return audit_decisions(document, {"quay-b1": Decision([0.0] * 4, reserve_mw=held)})


def test_all_reserve_held_earns_its_price_by_the_hour() -> None:
    up = product(price_per_mw_per_hour=[1.0, 2.0, 3.0, 4.0])
    result = holds({"up-15": [1.0, 0.5, 0.0, 2.0], "down-60": [1.0] * 4}, up, product("down-60", direction="down"))
    assert broken(result) == []
    # 1 + 1 + 0 + 8, the other product paying nothing.
    assert result.totals.reserve_income == result.assets[0].totals.reserve_income == 10.0
    assert result.margin == 10.0
    assert result.assets[0].reserve_mw == {"up-15": [1.0, 0.5, 0.0, 2.0], "down-60": [1.0] * 4}
    quarters = holds({"up-15": [1.0, 0.5, 0.0, 2.0]}, up, interval="PT15M")
    assert quarters.totals.reserve_income == 2.5


def test_one_figure_stands_for_all_intervals() -> None:
    result = holds({"up-15": 1})
    assert broken(result) == []
    assert result.assets[0].reserve_mw == {"up-15": [1.0] * 4}


def test_reserve_below_nothing_is_reported() -> None:
    result = holds({"up-15": [0.25, -0.5, 0.0, 0.0]}, product(price_per_mw_per_hour=1.0))
    assert facts(only(result)) == ("reserve_negative", "/fleet/assets/0", "quay-b1", 1, 0.5, "MW")
    # It counts as none and takes nothing back.
    assert result.assets[0].reserve_mw == {"up-15": [0.25, 0.0, 0.0, 0.0]}
    assert result.totals.reserve_income == 0.25
    assert broken(holds({"up-15": [0.0, -1e-6, 0.0, 0.0]})) == []


def test_an_asset_holds_its_own_products_only() -> None:
    products = (product(price_per_mw_per_hour=1.0), product("down-60", direction="down"))
    asset = store(reserve_products=["down-60"])
    assert broken(holds({"down-60": [1.0] * 4}, *products, asset=asset)) == []
    result = holds({"up-15": [1e-6, 1.0, 0.0, 0.0]}, *products, asset=asset)
    # Up to 1e-6 MW is none: what is not allowed begins in the second hour.
    where = "/fleet/assets/0/reserve_products"
    assert facts(only(result)) == ("reserve_not_allowed", where, "quay-b1", 1, 1.0, "MW")
    assert result.totals.reserve_income == 0.0
    assert broken(holds({"up-15": [0.0] * 4}, *products, asset=asset)) == []
    assert broken(holds({"up-15": [1e-6] * 4}, *products, asset=asset)) == []
    assert broken(holds({"up-15": [1.0] * 4}, *products, asset=store(reserve_products=[]))) == ["reserve_not_allowed"]


@pytest.mark.parametrize("asset", [renewable(), flexible_load(), load()])
def test_nothing_but_stores_and_generators_holds_reserve(asset: Document) -> None:
    market = window([0.0], reserve_products=[product(price_per_mw_per_hour=9.0)])
    forecasts = {} if asset["kind"] == "flexible_load" else {asset["id"]: 0.0}
    result = audit_decisions(
        job([asset], market, forecasts=forecasts), {asset["id"]: Decision([0.0], reserve_mw={"up-15": [1.0]})}
    )
    found = only(result)
    assert (found.rule, found.pointer) == ("reserve_not_allowed", "/fleet/assets/0/kind")
    assert result.margin == 0.0


def test_reserve_is_constant_within_each_block() -> None:
    up = product(block_hours=2.0)
    assert broken(holds({"up-15": [1.0, 1.0, 0.5, 0.5]}, up)) == []
    found = only(holds({"up-15": [1.0, 1.0, 0.5, 0.75]}, up))
    assert facts(found) == ("reserve_block", "/window/reserve_products/0/block_hours", "quay-b1", 3, 0.25, "MW")
    assert broken(holds({"up-15": [1.0, 0.5, 1.0, 0.75]}, product())) == []


def test_a_block_is_constant_to_a_millionth_of_a_mw() -> None:
    up = product(block_hours=4.0)
    result = holds({"up-15": [0.0, 1e-6, 0.0, 0.0]}, up)
    assert broken(result) == []
    assert result.verification.largest_residual == 1e-6
    found = only(holds({"up-15": [0.0, 1e-6, 0.5, 0.0]}, up))
    where = "/window/reserve_products/0/block_hours"
    assert facts(found) == ("reserve_block", where, "quay-b1", 2, 0.5, "MW")


def test_blocks_count_from_local_midnight_and_a_cut_block_is_constant_in_what_is_left() -> None:
    up = product(block_hours=4.0)
    # 23:00 in UTC is midnight in Berlin: four hours are one block. In UTC the first is what is left of a day.
    start = "2027-03-10T23:00:00Z"
    held = {"up-15": [1.0, 0.5, 0.5, 0.5]}
    assert broken(holds(held, up, start=start, timezone="Europe/Berlin")) == ["reserve_block"]
    assert broken(holds(held, up, start=start)) == []
    assert broken(holds({"up-15": [1.0, 0.5, 1.0, 1.0]}, up, start="2027-03-10T02:00:00Z")) == ["reserve_block"]
    assert broken(holds({"up-15": [1.0, 1.0, 0.5, 0.5]}, up, start="2027-03-10T02:00:00Z")) == []


@pytest.mark.parametrize(("day", "lengths"), [("2027-03-28", [4] * 5 + [3]), ("2027-10-31", [4] * 6 + [1])])
def test_on_a_day_of_a_clock_change_blocks_keep_their_length(day: str, lengths: list[int]) -> None:
    # Clock changes of 2027 in Europe/Berlin: 28 March at 01:00Z, 31 October at 01:00Z (IANA time zone database).
    hours = sum(lengths)
    offset = "+01:00" if day == "2027-03-28" else "+02:00"
    market = window([0.0] * hours, start=f"{day}T00:00:00{offset}", timezone="Europe/Berlin")
    document = read(job([store()], market))
    assert document.window is not None
    clock = Clock(document.window)
    assert list(clock.days.values()) == [list(range(hours))]
    assert [len(block) for block in clock.blocks(4.0)] == lengths


def test_blocks_shorter_than_an_interval_or_off_its_borders_ask_nothing_or_what_they_can() -> None:
    assert broken(holds({"up-15": [1.0, 0.5, 1.0, 0.5]}, product(block_hours=0.25))) == []
    assert broken(holds({"up-15": [1.0, 0.5, 1.0, 0.5]}, product(block_hours=1e-9))) == []
    # Blocks of 90 minutes begin at 0:00, 1:30 and 3:00: the hours that begin at 0 and 1 lie in the first.
    assert broken(holds({"up-15": [1.0, 1.0, 0.5, 0.0]}, product(block_hours=1.5))) == []
    assert broken(holds({"up-15": [1.0, 0.5, 0.5, 0.5]}, product(block_hours=1.5))) == ["reserve_block"]


@pytest.mark.parametrize(
    "held",
    [
        {"up-15": [1.0]},
        {"up-15": None},
        {"up-15": [math.nan, 0.0, 0.0, 0.0]},
        {"up-15": [math.inf] * 4},
        {"up-15": math.inf},
        {"up-15": "abcd"},
        {"up-15": [1e9] * 4},
        {"up-15": [-1e9] * 4},
        {"other": [1.0] * 4},
        {None: [1.0] * 4},
        {("up", 15): object()},
        5,
        "up-15",
        ["up-15"],
    ],
)
def test_hostile_reserve_is_reported_and_never_raised(held: Any) -> None:
    symmetric = product(direction="symmetric", price_per_mw_per_hour=1e9, sustain_minutes=1440.0, block_hours=2.0)
    for result in (holds(held), holds(held, symmetric)):
        assert broken(result)
        assert math.isfinite(result.margin)
    document = job([generator()], window([0.0] * 4, reserve_products=[symmetric]))
    assert broken(audit_decisions(document, {"quay-g1": Decision([2.0] * 4, reserve_mw=held)}))


def test_reserve_that_is_no_figure_is_reported_and_counts_as_none() -> None:
    result = holds({"up-15": [0.5, math.nan, 0.5, 0.5]}, product(price_per_mw_per_hour=1.0))
    assert facts(only(result)) == ("decision_unreadable", "/fleet/assets/0", "quay-b1", 1, 1.0, "values")
    assert result.assets[0].reserve_mw == {"up-15": [0.5, 0.0, 0.5, 0.5]}
    assert result.totals.reserve_income == 1.5


def test_reserve_that_is_no_list_of_products_is_reported_once() -> None:
    found = only(holds(["up-15"]))
    assert facts(found) == ("decision_unreadable", "/fleet/assets/0", "quay-b1", None, 1.0, "values")


def test_a_product_the_window_does_not_have_is_named_and_leaves_the_others() -> None:
    result = holds({"up-99": [1.0] * 4, "up-15": [0.5] * 4}, product(price_per_mw_per_hour=1.0))
    found = only(result)
    assert facts(found) == ("reserve_product_unknown", "/fleet/assets/0", "quay-b1", None, 1.0, "products")
    assert "'up-99'" in found.text
    assert result.totals.reserve_income == 2.0
