"""Reserve of a generator: between its minimum and maximum output, and only while it is on."""

from tests.workers.planning.audit.small_jobs import (
    broken,
    facts,
    generator,
    one_generator,
    only,
    outage,
    product,
    window,
)

UP = product()
DOWN = product("down-15", direction="down")
BOTH = product("both", direction="symmetric", price_per_mw_per_hour=3.0)


def holds(power: float, on: bool = True, left: float = 1.0, **held: float) -> list[str]:
    market = window([0.0], reserve_products=[UP, DOWN, BOTH])
    names = {"up": "up-15", "down": "down-15", "both": "both"}
    reserve = {names[name]: [mw] for name, mw in held.items()}
    return broken(
        one_generator([power], [on], window=market, reserve_mw=reserve, outages=[outage("quay-g1", 0, 1, left)])
    )


def test_output_and_up_reserve_stay_within_the_maximum() -> None:
    assert holds(2.0, up=2.0) == []
    assert holds(2.0, up=2.1) == ["reserve_up_power"]
    assert holds(2.0, left=0.75, up=1.0) == []
    assert holds(2.0, left=0.75, up=1.1) == ["reserve_up_power"]


def test_output_less_down_reserve_stays_above_the_minimum() -> None:
    assert holds(2.0, down=1.0) == []
    assert holds(2.0, down=1.1) == ["reserve_down_power"]


def test_products_add_up_and_a_symmetric_one_counts_both_ways() -> None:
    assert holds(2.5, both=1.5) == []
    assert holds(2.0, both=1.5) == ["reserve_down_power"]
    assert holds(3.0, both=1.5) == ["reserve_up_power"]
    assert holds(2.5, both=1.0, up=0.5, down=0.5) == []
    assert holds(2.5, both=1.0, up=0.75, down=0.5) == ["reserve_up_power"]


def test_a_generator_that_is_off_holds_none() -> None:
    assert holds(0.0, on=False, up=0.0) == []
    assert holds(0.0, on=False, up=0.5) == ["reserve_off"]
    assert holds(0.0, on=False, both=0.5) == ["reserve_off"]


def test_a_breach_names_what_binds() -> None:
    market = window([0.0], reserve_products=[BOTH])
    result = one_generator([2.0], window=market, reserve_mw={"both": [1.25]})
    found = only(result)
    assert (found.rule, found.pointer, found.asset, found.amount, found.unit) == (
        "reserve_down_power",
        "/fleet/assets/0/min_output_mw",
        "quay-g1",
        0.25,
        "MW",
    )
    assert result.totals.reserve_income == 3.75


def test_a_breach_names_the_generator_its_interval_and_mw() -> None:
    market = window([0.0, 0.0], reserve_products=[UP, DOWN])
    # 4 MW at most leave 0.5 MW above 3.5 MW; 1 MW at least leaves 0.5 MW below 1.5 MW.
    found = only(one_generator([2.0, 3.5], window=market, reserve_mw={"up-15": [0.0, 0.75]}))
    assert facts(found) == ("reserve_up_power", "/fleet/assets/0/max_output_mw", "quay-g1", 1, 0.25, "MW")
    found = only(one_generator([2.0, 1.5], window=market, reserve_mw={"down-15": [0.0, 0.75]}))
    assert facts(found) == ("reserve_down_power", "/fleet/assets/0/min_output_mw", "quay-g1", 1, 0.25, "MW")
    found = only(one_generator([2.0, 0.0], window=market, reserve_mw={"up-15": [0.0, 0.5]}))
    assert facts(found) == ("reserve_off", "/fleet/assets/0", "quay-g1", 1, 0.5, "MW")


def test_a_generator_beyond_its_limits_without_reserve_breaks_its_own_rules_only() -> None:
    market = window([0.0], reserve_products=[UP, DOWN])
    assert broken(one_generator([4.5], window=market, reserve_mw={"up-15": [0.0]})) == ["max_output"]
    assert broken(one_generator([0.5], window=market, reserve_mw={"down-15": [0.0]})) == ["min_output"]


def test_ramps_do_not_bind_reserve() -> None:
    market = window([0.0, 0.0], reserve_products=[UP])
    asset = generator(ramp_up_mw_per_hour=0.5, ramp_down_mw_per_hour=0.5)
    assert broken(one_generator([1.0, 1.0], asset=asset, window=market, reserve_mw={"up-15": [3.0, 3.0]})) == []
