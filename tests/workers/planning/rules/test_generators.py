"""For each rule of a generator the smallest case where it just holds, and the same where it just breaks or costs.

Every figure is worked out by hand in the test; the audit has passed every schedule.
"""

from typing import Any

import pytest

from tests.workers.planning.jobs import generator, job, on_of, outage, planned, power_of

Document = dict[str, Any]
G1 = "quay-g1"


def steady(**changes: Any) -> Document:
    """Return a generator that gives 1 MW whenever it is on."""
    return generator(max_output_mw=1.0, **changes)


def running(document: Document, **state: Any) -> Document:
    """Return the job with its generator on before the window."""
    return document | {"initial": {G1: {"on": True} | state}}


def resting(document: Document, **state: Any) -> Document:
    """Return the job with its generator off before the window."""
    return document | {"initial": {G1: {"on": False} | state}}


# output, running cost


def test_output_goes_up_to_the_maximum_and_earns_above_its_cost() -> None:
    found = planned(job([10.0], generator(cost={"linear_per_mwh": 4.0})))
    assert power_of(found, G1) == pytest.approx([4.0])
    assert found.totals.fuel_cost == pytest.approx(16.0)
    assert found.margin == pytest.approx(24.0)


@pytest.mark.parametrize(("least", "power"), [(0.5, 0.5), (0.75, 0.75), (1.0, 0.0)])
def test_a_minimum_output_costs_until_it_is_not_worth_running(least: float, power: float) -> None:
    # Each MWh earns 9 - 8 and P^2 costs as much at 1 MW; 0.5 MW is best. A constant 0.1 makes 1 MW not worth while.
    curve = {"constant_per_hour": 0.1, "linear_per_mwh": 8.0, "quadratic_per_mw2h": 1.0}
    found = planned(job([9.0], generator(min_output_mw=least, cost=curve)))
    assert power_of(found, G1) == pytest.approx([power], abs=1e-3)
    assert found.margin == pytest.approx(power - power**2 - 0.1 if power else 0.0, abs=1e-6)


@pytest.mark.parametrize(("left", "power"), [(0.25, 1.0), (0.24, 0.0)])
def test_an_outage_scales_the_maximum_until_less_than_the_minimum_is_left(left: float, power: float) -> None:
    document = job([10.0], generator(), outages=[outage(G1, 0, 1, left)])
    assert power_of(planned(document), G1) == pytest.approx([power])


def test_the_quadratic_cost_is_exact_in_the_answer() -> None:
    # 10 - 5 = 2 * 0.7 * P at the best output of 3.5714 MW, which no first tangent touches: 25 / 2.8 - 3 are left.
    curve = {"constant_per_hour": 3.0, "linear_per_mwh": 5.0, "quadratic_per_mw2h": 0.7}
    found = planned(job([10.0], generator(cost=curve)))
    [power] = power_of(found, G1)
    assert power == pytest.approx(25 / 7, abs=1e-3)
    assert found.totals.fuel_cost == pytest.approx(3.0 + 5.0 * power + 0.7 * power**2, abs=1e-9)
    assert found.margin == pytest.approx(25 / 2.8 - 3.0, rel=1e-6)


@pytest.mark.parametrize("most", [40.0, 2000.0])
def test_the_quadratic_cost_is_proven_to_the_tightest_gap_however_wide_the_range(most: float) -> None:
    # 10 - 4 = P: 36 - 18 - 1 are left, far from the first tangents of a wide range.
    curve = {"constant_per_hour": 1.0, "linear_per_mwh": 4.0, "quadratic_per_mw2h": 0.5}
    found = planned(job([10.0], generator(max_output_mw=most, cost=curve), relative_gap=1e-7))
    assert found.outcome == "optimal"
    assert power_of(found, G1) == pytest.approx([6.0], abs=1e-3)
    assert found.margin == pytest.approx(17.0)


@pytest.mark.parametrize(("constant", "margin"), [(23.0, 1.0), (25.0, 0.0)])
def test_a_constant_cost_above_what_is_earned_keeps_it_off(constant: float, margin: float) -> None:
    curve = {"constant_per_hour": constant, "linear_per_mwh": 4.0}
    assert planned(job([10.0], generator(cost=curve))).margin == pytest.approx(margin)


def test_running_costs_are_per_hour_and_not_per_interval() -> None:
    # Half an hour of 4 MW at 10 - 4, less half an hour of 7 and of 0.5 * 4^2: 12 - 3.5 - 4.
    curve = {"constant_per_hour": 7.0, "linear_per_mwh": 4.0, "quadratic_per_mw2h": 0.5}
    found = planned(job([10.0], generator(min_output_mw=4.0, cost=curve), window={"interval": "PT30M"}))
    assert found.margin == pytest.approx(4.5)


# least up and down times


@pytest.mark.parametrize(("least", "margin"), [(1, 30.0), (2, 20.0), (2.5, 10.0), (4, 10.0)])
def test_a_run_lasts_its_least_time_unless_the_window_ends(least: float, margin: float) -> None:
    # One good hour: each further one costs 10. 2.5 h are three intervals; of four, the window's end cuts one off.
    document = job([-10.0, 30.0, -10.0, -10.0], steady(min_up_hours=least))
    assert planned(document).margin == pytest.approx(margin)


@pytest.mark.parametrize(("least", "margin"), [(1, 20.0), (2, 15.0)])
def test_a_pause_shorter_than_the_least_down_time_is_run_through(least: int, margin: float) -> None:
    assert planned(job([10.0, -5.0, 10.0], steady(min_down_hours=least))).margin == pytest.approx(margin)


@pytest.mark.parametrize(("least", "margin"), [(2, 20.0), (3, 10.0)])
def test_a_least_down_time_that_the_hours_off_just_fill(least: int, margin: float) -> None:
    # Two hours off cost nothing; with three asked for, one of the good hours is given up.
    document = job([10.0, -50.0, -50.0, 10.0], steady(min_down_hours=least))
    assert planned(document).margin == pytest.approx(margin)


@pytest.mark.parametrize(("elapsed", "kept_up"), [(1, 2), (2, 1), (2.5, 1), (3, 0), (None, 0)])
def test_a_run_under_way_is_kept_up_until_it_has_lasted(elapsed: float | None, kept_up: int) -> None:
    document = running(job([-10.0] * 3, steady(min_up_hours=3)), hours_in_state=elapsed)
    assert sum(on_of(planned(document), G1)) == kept_up
    assert planned(document).margin == pytest.approx(-10.0 * kept_up)


@pytest.mark.parametrize(("elapsed", "waited"), [(1, 2), (2, 1), (2.5, 1), (3, 0), (None, 0)])
def test_a_rest_under_way_is_finished_first(elapsed: float | None, waited: int) -> None:
    document = resting(job([10.0] * 3, steady(min_down_hours=3)), hours_in_state=elapsed)
    assert on_of(planned(document), G1) == [hour >= waited for hour in range(3)]


def test_a_generator_without_a_state_has_been_off_for_long() -> None:
    assert on_of(planned(job([10.0], steady(min_down_hours=500))), G1) == [True]


def test_a_trip_ends_a_run_before_its_least_time() -> None:
    document = job([10.0, 10.0, -5.0, -5.0], steady(min_up_hours=3), outages=[outage(G1, 1, 2)])
    assert on_of(planned(document), G1) == [True, False, False, False]


def test_a_trip_ends_a_run_from_before_the_window() -> None:
    document = job([-10.0] * 3, steady(min_up_hours=4), outages=[outage(G1, 1, 2)])
    assert on_of(planned(running(document, hours_in_state=1)), G1) == [True, False, False]


def test_an_outage_that_leaves_the_minimum_is_no_trip() -> None:
    document = job([10.0, -5.0, -5.0], generator(min_up_hours=3), outages=[outage(G1, 1, 2, 0.25)])
    assert on_of(planned(document), G1) == [True, True, True]


@pytest.mark.parametrize(("least", "on"), [(1, [True, False, True, True]), (2, [True, False, False, True])])
def test_after_a_trip_the_least_down_time_is_kept(least: int, on: list[bool]) -> None:
    document = job([20.0, 10.0, 10.0, 10.0], steady(min_down_hours=least), outages=[outage(G1, 1, 2)])
    assert on_of(planned(document), G1) == on


@pytest.mark.parametrize(("cost", "margin"), [(40.0, 60.0), (60.0, 50.0)])
def test_after_a_trip_the_next_start_is_paid(cost: float, margin: float) -> None:
    once = steady(start_costs=[{"after_hours_off": 0, "cost": cost}])
    document = job([50.0] * 3, once, outages=[outage(G1, 1, 2)])
    assert planned(running(document)).margin == pytest.approx(margin)


def test_half_a_start_during_a_trip_does_not_make_the_next_one_cheap() -> None:
    by_hours_off = steady(start_costs=[{"after_hours_off": 0, "cost": 10.0}, {"after_hours_off": 2, "cost": 40.0}])
    document = job([50.0] * 4, by_hours_off, outages=[outage(G1, 0, 3)])
    assert planned(running(document)).margin == pytest.approx(10.0)


# ramps


@pytest.mark.parametrize(("ramp", "powers"), [(0.5, [1.0, 1.5, 2.0]), (2.0, [2.0, 4.0, 4.0])])
def test_a_run_begins_at_the_minimum_or_the_ramp_and_rises_by_it(ramp: float, powers: list[float]) -> None:
    found = planned(job([10.0] * 3, generator(ramp_up_mw_per_hour=ramp)))
    assert power_of(found, G1) == pytest.approx(powers)


def test_a_run_ends_at_the_minimum_or_the_ramp_and_falls_to_it() -> None:
    found = planned(job([10.0, 10.0, -100.0], generator(ramp_down_mw_per_hour=0.5)))
    assert power_of(found, G1) == pytest.approx([1.5, 1.0, 0.0])
    found = planned(job([10.0, 10.0, -100.0], generator(ramp_down_mw_per_hour=1.5)))
    assert power_of(found, G1) == pytest.approx([3.0, 1.5, 0.0])


def test_a_run_of_one_interval_begins_and_ends_within_both_ramps() -> None:
    both = generator(ramp_up_mw_per_hour=2.0, ramp_down_mw_per_hour=1.5)
    assert power_of(planned(job([-100.0, 10.0, -100.0], both)), G1) == pytest.approx([0.0, 1.5, 0.0])


def test_a_run_cut_by_the_end_of_the_window_has_no_last_interval() -> None:
    found = planned(job([10.0, 10.0], generator(ramp_down_mw_per_hour=0.5)))
    assert power_of(found, G1) == pytest.approx([4.0, 4.0])


@pytest.mark.parametrize(("before", "powers"), [(2.0, [2.5, 3.0]), (None, [1.5, 2.0])])
def test_output_rises_from_what_it_was_before_the_window(before: float | None, powers: list[float]) -> None:
    document = running(job([10.0, 10.0], generator(ramp_up_mw_per_hour=0.5)), output_mw=before)
    assert power_of(planned(document), G1) == pytest.approx(powers)


@pytest.mark.parametrize(("before", "powers"), [(3.0, [2.5, 2.0]), (1.25, [1.0, 0.0]), (1.0, [0.0, 0.0])])
def test_output_falls_from_what_it_was_before_the_window(before: float, powers: list[float]) -> None:
    # Above max(1, 0.5) MW it cannot stop at once.
    document = running(job([-10.0, -10.0], generator(ramp_down_mw_per_hour=0.5)), output_mw=before)
    assert power_of(planned(document), G1) == pytest.approx(powers)


def test_a_ramp_per_hour_is_a_quarter_of_it_per_quarter_of_an_hour() -> None:
    document = job([10.0, 10.0], generator(ramp_up_mw_per_hour=2.0), window={"interval": "PT15M"})
    assert power_of(planned(running(document, output_mw=1.0)), G1) == pytest.approx([1.5, 2.0])


@pytest.mark.parametrize(("left", "powers"), [(0.25, [4.0, 1.0, 1.5]), (0.0, [4.0, 0.0, 1.0])])
def test_ramps_do_not_bind_into_an_outage_but_out_of_it(left: float, powers: list[float]) -> None:
    slow = generator(ramp_up_mw_per_hour=0.5, ramp_down_mw_per_hour=0.5)
    document = job([10.0] * 3, slow, outages=[outage(G1, 1, 2, left)])
    assert power_of(planned(running(document, output_mw=4.0)), G1) == pytest.approx(powers)


def test_ramps_do_not_bind_into_an_outage_at_the_start_of_the_window() -> None:
    slow = generator(ramp_up_mw_per_hour=0.5, ramp_down_mw_per_hour=0.5)
    document = job([10.0, 10.0], slow, outages=[outage(G1, 0, 1, 0.5)])
    assert power_of(planned(running(document, output_mw=4.0)), G1) == pytest.approx([2.0, 2.5])


# start costs


HOT_OR_COLD = [{"after_hours_off": 0, "cost": 10.0}, {"after_hours_off": 3, "cost": 50.0}]


@pytest.mark.parametrize(
    ("off", "margin"), [(0.0, 30.0), (0.5, 30.0), (2.0, 30.0), (2.9, 30.0), (3.0, 0.0), (None, 0.0)]
)
def test_a_start_costs_what_the_hours_off_before_the_window_say(off: float | None, margin: float) -> None:
    # The hour earns 40: a hot start leaves 30, a cold one is not worth while.
    document = resting(job([40.0], steady(start_costs=HOT_OR_COLD)), hours_in_state=off)
    found = planned(document)
    assert found.margin == pytest.approx(margin)
    assert found.totals.start_cost == pytest.approx(10.0 if margin else 0.0)


@pytest.mark.parametrize(("off", "margin"), [(1.0, 30.0), (1.5, 30.0), (2.0, 0.0)])
def test_hours_off_go_on_counting_into_the_window(off: float, margin: float) -> None:
    document = resting(job([-100.0, 40.0], steady(start_costs=HOT_OR_COLD)), hours_in_state=off)
    assert planned(document).margin == pytest.approx(margin)


@pytest.mark.parametrize(("pause", "margin"), [(2, 30.0), (3, 0.0)])
def test_hours_off_count_from_the_last_stop(pause: int, margin: float) -> None:
    document = running(job([-100.0] * pause + [40.0], steady(start_costs=HOT_OR_COLD)))
    assert planned(document).margin == pytest.approx(margin)


def test_hours_off_are_hours_and_not_intervals() -> None:
    # Off for six half hours, which are 3 h: the half hour at 90 earns 45 and a cold start costs 50.
    def off_for(halves: int) -> Document:
        window = {"interval": "PT30M"}
        return running(job([-100.0] * halves + [90.0], steady(start_costs=HOT_OR_COLD), window=window))

    assert planned(off_for(5)).margin == pytest.approx(45.0 - 10.0)
    assert planned(off_for(6)).margin == pytest.approx(0.0)


@pytest.mark.parametrize(("off", "cost"), [(1.0, 10.0), (2.0, 20.0), (3.0, 20.0), (4.0, 50.0), (9.0, 50.0)])
def test_a_start_pays_the_last_entry_reached_of_several(off: float, cost: float) -> None:
    three = [{"after_hours_off": after, "cost": cost} for after, cost in ((0, 10.0), (2, 20.0), (4, 50.0))]
    document = resting(job([100.0], steady(start_costs=three)), hours_in_state=off)
    assert planned(document).totals.start_cost == pytest.approx(cost)


@pytest.mark.parametrize(("off", "cost"), [(2.25, 10.0), (2.5, 50.0), (2.75, 50.0)])
def test_hours_off_reach_an_entry_between_two_whole_intervals(off: float, cost: float) -> None:
    entries = [{"after_hours_off": 0, "cost": 10.0}, {"after_hours_off": 2.5, "cost": 50.0}]
    document = resting(job([100.0], steady(start_costs=entries)), hours_in_state=off)
    assert planned(document).totals.start_cost == pytest.approx(cost)


@pytest.mark.parametrize(("price", "starts"), [(11.0, 2), (9.0, 1)])
def test_running_on_is_weighed_against_another_start(price: float, starts: int) -> None:
    # The bad hour costs `price`, another start 10.
    once = steady(start_costs=[{"after_hours_off": 0, "cost": 10.0}])
    found = planned(job([50.0, -price, 50.0], once))
    assert found.totals.start_cost == pytest.approx(10.0 * starts)


def test_a_run_under_way_is_no_start() -> None:
    once = steady(start_costs=[{"after_hours_off": 0, "cost": 10.0}])
    assert planned(running(job([5.0], once))).margin == pytest.approx(5.0)
    assert planned(job([5.0], once)).margin == pytest.approx(0.0)


def test_starts_without_costs_are_free() -> None:
    assert planned(job([5.0, -5.0, 5.0], steady())).margin == pytest.approx(10.0)
