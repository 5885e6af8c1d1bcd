"""Rows of `hours_at_least`, in hourly intervals where nothing else is said."""

from typing import Any

import pytest

from schemas.schedule import CommitmentResult
from tests.workers.planning.audit.small_jobs import Document, audit, broken, job, load, one_store, only, store, window


def promise(**members: Any) -> Document:
    """Return two hours at 1 MW or more of the one store."""
    plain = {"id": "firm", "kind": "hours_at_least", "applies_to": {"assets": ["quay-b1"]}, "hours": 2.0}
    return {**plain, "threshold": {"mw": 1.0}, **members}


def delivered(
    power: list[float], market: Document | None = None, begin: str | None = None, end: str | None = None, **members: Any
) -> list[float | None]:
    """Return the hours of each row of one commitment by one store that nothing else binds."""
    counted = members.pop("counted_before", {})
    big = store(energy_capacity_mwh=1000.0)
    result = one_store(
        power,
        asset=big,
        initial={"quay-b1": {"stored_mwh": 500.0}},
        window=market or window([0.0] * len(power)),
        commitments=[promise(**{"shortfall_price_per_hour": 0.0, "from": begin, "to": end, **members})],
        counted_before=counted,
    )
    assert broken(result) == []
    return [row.delivered_hours for row in result.commitments]


def test_as_many_hours_at_the_threshold_as_asked_hold() -> None:
    result = one_store([1.0, 0.0, 1.5], commitments=[promise()])
    assert broken(result) == []
    assert result.commitments == [
        CommitmentResult(id="firm", asset="quay-b1", day=None, required_hours=2.0, delivered_hours=2.0, met=True)
    ]


def test_fewer_hours_break_a_binding_commitment() -> None:
    result = one_store([1.0, 0.999, 0.0], commitments=[promise()])
    found = only(result)
    assert (found.rule, found.pointer, found.asset, found.amount, found.unit) == (
        "hours_at_least",
        "/commitments/0",
        "quay-b1",
        1.0,
        "h",
    )
    assert found.text == "firm: quay-b1 discharges 1 MW or more for 1 h, 1 h short of 2 h"
    assert (result.commitments[0].delivered_hours, result.commitments[0].met) == (1.0, False)
    assert result.totals.shortfall_cost == 0.0


def test_a_millionth_of_a_mw_below_the_threshold_counts_and_is_remembered() -> None:
    result = one_store([0.9999998, 0.9999995], commitments=[promise()])
    assert broken(result) == []
    assert result.verification.largest_residual == pytest.approx(5e-7)
    assert broken(one_store([1.0, 0.999998], commitments=[promise()])) == ["hours_at_least"]


def test_power_just_at_the_edge_of_tolerance_counts_and_is_remembered() -> None:
    result = one_store([1.0 - 1e-6], commitments=[promise(hours=1.0)])
    assert broken(result) == []
    assert result.verification.largest_residual == pytest.approx(1e-6)


def test_a_priced_shortfall_is_paid_and_breaks_nothing() -> None:
    result = one_store([1.0, 0.0], commitments=[promise(hours=1.5, shortfall_price_per_hour=80.0)])
    assert broken(result) == []
    assert not result.commitments[0].met
    assert result.totals.shortfall_cost == 40.0
    assert result.margin == -40.0


def test_more_than_asked_pays_nothing_back() -> None:
    result = one_store([1.0, 1.0, 1.0], commitments=[promise(shortfall_price_per_hour=80.0)])
    assert result.totals.shortfall_cost == 0.0


def test_each_row_pays_its_own_shortfall() -> None:
    market = window([0.0] * 4, start="2027-03-10T22:00:00Z")
    row = promise(hours=2.0, each_day=True, shortfall_price_per_hour=10.0)
    result = one_store([1.0, 1.0, 1.0, 0.0], window=market, commitments=[row])
    assert [(row.day, row.met) for row in result.commitments] == [("2027-03-10", True), ("2027-03-11", False)]
    assert result.totals.shortfall_cost == 10.0


def test_headroom_is_part_of_what_is_asked_but_hours_are_told_at_the_threshold() -> None:
    row = promise(headroom_mw=0.25)
    assert broken(one_store([1.25, 1.25], commitments=[row])) == []
    result = one_store([1.25, 1.2], commitments=[row])
    assert only(result).amount == 1.0
    assert "1.25 MW (0.25 MW of it headroom)" in only(result).text
    assert (result.commitments[0].delivered_hours, result.commitments[0].met) == (2.0, False)
    paid = one_store([1.25, 1.2], commitments=[promise(headroom_mw=0.25, shortfall_price_per_hour=30.0)])
    assert paid.totals.shortfall_cost == 30.0


def test_a_fraction_is_of_rated_power_and_outages_do_not_change_it() -> None:
    asset = store(discharge_limit_mw=3.0)
    outages = [{"asset": "quay-b1", "kind": "forced", "from": "2027-03-10T00:00:00Z", "available_fraction": 0.5}]
    row = promise(threshold={"fraction_of_rated": 0.5}, hours=1.0)
    assert broken(one_store([1.5], asset=asset, commitments=[row], outages=outages)) == []
    assert broken(one_store([1.4], asset=asset, commitments=[row], outages=outages)) == ["hours_at_least"]


def test_charging_counts_as_its_own_direction_at_its_own_rated_power() -> None:
    asset = store(charge_limit_mw=1.5)
    row = promise(direction="charge", threshold={"fraction_of_rated": 0.5}, hours=1.0)
    assert broken(one_store([-0.75], asset=asset, commitments=[row])) == []
    assert "quay-b1 charges 0.75 MW or more" in only(one_store([-0.7], asset=asset, commitments=[row])).text
    assert broken(one_store([1.0], asset=asset, commitments=[row])) == ["hours_at_least"]


def test_a_fixed_load_may_be_held_to_its_charging() -> None:
    row = promise(applies_to={"assets": ["quay-cranes"]}, direction="charge")
    for draw, rules in (([1.0, 1.0], []), ([1.0, 0.9], ["hours_at_least"])):
        document = job([load()], window([0.0, 0.0]), forecasts={"quay-cranes": draw}, commitments=[row])
        assert broken(audit(document, {})) == rules


def test_each_asset_stands_for_itself_at_its_terminals() -> None:
    row = promise(applies_to={"assets": ["quay-b1", "quay-b2"]}, hours=1.0)
    assets = [store(standby_load_mw=0.5), store("quay-b2")]
    document = job(assets, window([0.0]), commitments=[row])
    result = audit(document, {"quay-b1": [1.0], "quay-b2": [0.9]})
    assert only(result).asset == "quay-b2"
    assert [(row.asset, row.delivered_hours) for row in result.commitments] == [("quay-b1", 1.0), ("quay-b2", 0.0)]


def test_a_group_delivers_its_net_sum_with_standby_loads() -> None:
    row = promise(applies_to={"group": ["quay-b1", "quay-b2"]}, threshold={"fraction_of_rated": 0.5}, hours=1.0)
    assets = [store(standby_load_mw=0.25), store("quay-b2"), store("quay-b3")]
    document = job(assets, window([0.0]), commitments=[row])
    # Half of 2 + 2 MW, the third store being no part of it.
    assert broken(audit(document, {"quay-b1": [1.0], "quay-b2": [1.25], "quay-b3": [0.0]})) == []
    found = only(audit(document, {"quay-b1": [1.0], "quay-b2": [1.2], "quay-b3": [2.0]}))
    assert (found.rule, found.asset) == ("hours_at_least", None)


@pytest.mark.parametrize("over", [{"site": "quay"}, {"fleet": True}])
def test_a_site_or_the_fleet_delivers_what_its_meter_reads(over: Document) -> None:
    row = promise(applies_to=over, threshold={"fraction_of_rated": 0.5}, hours=1.0)
    assets = [store(site="quay", standby_load_mw=0.25), load(site="quay")]
    document = job(assets, window([0.0]), sites=[{"id": "quay"}], forecasts={"quay-cranes": 0.5}, commitments=[row])
    # Half of the store's 2 MW: the load has no rated power. 1.75 - 0.25 - 0.5 = 1.
    assert broken(audit(document, {"quay-b1": [1.75]})) == []
    assert broken(audit(document, {"quay-b1": [1.7]})) == ["hours_at_least"]


def test_the_fleet_nets_its_meters() -> None:
    row = promise(applies_to={"fleet": True}, hours=1.0)
    document = job([store(), store("mole-b1")], window([0.0]), commitments=[row])
    assert broken(audit(document, {"quay-b1": [2.0], "mole-b1": [-1.0]})) == []
    assert broken(audit(document, {"quay-b1": [2.0], "mole-b1": [-1.1]})) == ["hours_at_least"]


def test_only_intervals_from_and_before_to_count() -> None:
    borders: Document = {"begin": "2027-03-10T01:00:00Z", "end": "2027-03-10T03:00:00Z"}
    assert delivered([1.0, 1.0, 1.0, 1.0], **borders) == [2.0]
    assert delivered([1.0, 0.0, 1.0, 1.0], **borders) == [1.0]
    assert delivered([1.0, 1.0], begin="2027-03-09T00:00:00Z", end="2027-03-12T00:00:00Z") == [2.0]


def test_a_row_outside_the_window_is_owed_all_the_same() -> None:
    later = promise(**{"from": "2027-03-12T00:00:00Z"})
    assert only(one_store([1.0, 1.0], commitments=[later])).amount == 2.0


def test_hours_counted_before_are_credited_to_the_first_row_of_each_asset() -> None:
    market = window([0.0] * 4, start="2027-03-10T22:00:00Z")
    assert delivered([1.0, 0.0, 1.0, 0.0], market, each_day=True) == [1.0, 1.0]
    one_number = {"commitments": {"firm": 0.5}}
    assert delivered([1.0, 0.0, 1.0, 0.0], market, each_day=True, counted_before=one_number) == [1.5, 1.0]
    by_asset = {"commitments": {"firm": {"quay-b1": 0.5, "quay-b2": 7.0}}}
    assert delivered([1.0, 0.0, 1.0, 0.0], market, each_day=True, counted_before=by_asset) == [1.5, 1.0]
    other = {"commitments": {"firm": {"quay-b2": 7.0}, "other": 3.0}}
    assert delivered([1.0, 0.0, 1.0, 0.0], market, each_day=True, counted_before=other) == [1.0, 1.0]


def test_hours_counted_before_meet_a_row_just_so() -> None:
    for counted, rules in ((1.0, []), (0.9, ["hours_at_least"])):
        result = one_store([1.0, 0.0], commitments=[promise()], counted_before={"commitments": {"firm": counted}})
        assert broken(result) == rules
        assert result.commitments[0].delivered_hours == 1.0 + counted


def test_hours_by_asset_counted_before_for_a_sum_are_refused() -> None:
    document = job(
        [store()],
        window([0.0]),
        commitments=[promise(applies_to={"fleet": True})],
        counted_before={"commitments": {"firm": {"quay-b1": 1.0}}},
    )
    with pytest.raises(ValueError, match="firm"):
        audit(document, {"quay-b1": [0.0]})


def test_a_commitment_on_an_unknown_asset_or_site_is_refused() -> None:
    for over in ({"assets": ["mole-b1"]}, {"group": ["quay-b1", "mole-b1"]}, {"site": "mole-b1"}):
        document = job([store()], window([0.0]), commitments=[promise(applies_to=over)])
        with pytest.raises(ValueError, match="mole-b1"):
            audit(document, {"quay-b1": [0.0]})


@pytest.mark.parametrize(
    ("power", "hours"),
    [
        ([1, 1, 0, 1, 0, 1, 1, 1], 5.0),
        ([1, 0, 1, 0, 1, 0, 1, 0], 0.0),
        ([0, 0, 0, 0, 0, 0, 1, 1], 2.0),
        ([0, 0, 0, 0, 0, 0, 0, 1], 0.0),
        ([1, 1, 1, 1, 1, 1, 1, 1], 8.0),
    ],
)
def test_stretches_shorter_than_a_block_do_not_count(power: list[int], hours: float) -> None:
    assert delivered([float(mw) for mw in power], min_block_hours=2.0) == [hours]


def test_a_block_just_long_enough_holds_and_a_shorter_one_breaks() -> None:
    row = promise(hours=1.0, min_block_hours=1.0)
    quarters = window([0.0] * 5, interval="PT15M")
    assert broken(one_store([1.0, 1.0, 1.0, 1.0, 0.0], window=quarters, commitments=[row])) == []
    found = only(one_store([1.0, 1.0, 1.0, 0.0, 1.0], window=quarters, commitments=[row]))
    assert found.amount == 1.0
    assert "in blocks of at least 1 h" in found.text


def test_nothing_outside_a_row_lengthens_a_block() -> None:
    borders: Document = {"begin": "2027-03-10T01:00:00Z", "end": "2027-03-10T04:00:00Z"}
    assert delivered([1.0, 1.0, 0.0, 1.0, 1.0], min_block_hours=2.0, **borders) == [0.0]
    over_midnight = window([0.0] * 4, start="2027-03-10T22:00:00Z")
    assert delivered([0.0, 1.0, 1.0, 1.0], over_midnight, min_block_hours=2.0, each_day=True) == [0.0, 2.0]


def test_excused_intervals_count_and_join_blocks_whatever_the_power() -> None:
    excused = [{"from": "2027-03-10T01:00:00Z", "to": "2027-03-10T02:00:00Z"}]
    assert delivered([1.0, -1.0, 1.0], excused=excused) == [3.0]
    assert delivered([1.0, -1.0, 1.0], excused=excused, min_block_hours=3.0) == [3.0]
    assert delivered([1.0, 0.0, 0.0], excused=excused, min_block_hours=3.0) == [0.0]
    assert delivered([1.0, 1.0, 0.0], excused=excused) == [2.0]
    assert delivered([1.0, 0.0, 1.0], excused=excused, begin="2027-03-10T02:00:00Z") == [1.0]


def test_each_day_is_a_row_of_its_own_in_local_time() -> None:
    # 22:00Z is 23:00 in Berlin: one interval of the 10th, then the 11th.
    market = window([0.0] * 3, start="2027-03-10T22:00:00Z", timezone="Europe/Berlin")
    assert delivered([1.0, 1.0, 1.0], market, each_day=True) == [1.0, 2.0]
    utc = window([0.0] * 3, start="2027-03-10T22:00:00Z")
    assert delivered([1.0, 1.0, 1.0], utc, each_day=True) == [2.0, 1.0]


def test_a_day_without_an_interval_inside_the_borders_is_no_row() -> None:
    market = window([0.0] * 4, start="2027-03-10T22:00:00Z")
    assert delivered([1.0] * 4, market, each_day=True, begin="2027-03-11T00:00:00Z") == [2.0]
    assert delivered([1.0] * 4, market, each_day=True, end="2027-03-10T23:00:00Z") == [1.0]


def test_a_broken_row_names_its_day() -> None:
    market = window([0.0] * 4, start="2027-03-10T22:00:00Z")
    result = one_store([1.0, 1.0, 1.0, 0.0], window=market, commitments=[promise(each_day=True)])
    assert "on 2027-03-11" in only(result).text


def test_between_takes_wall_times_from_and_before() -> None:
    market = window([0.0] * 24)
    power = [1.0] * 24
    assert delivered(power, market, each_day=True, between=["16:00", "22:00"]) == [6.0]
    power[16] = power[21] = 0.0
    assert delivered(power, market, each_day=True, between=["16:00", "22:00"]) == [4.0]
    assert delivered(power, market, each_day=True, between=["15:00", "16:00"]) == [1.0]


def test_between_over_midnight_belongs_to_the_day_it_starts_in() -> None:
    market = window([0.0] * 48)
    # 22-02 of the 10th, 22-24 of the 11th, cut off; 00-02 of the 10th began the day before and is no row.
    result = one_store(
        [0.0] * 48,
        window=market,
        commitments=[promise(each_day=True, between=["22:00", "02:00"], shortfall_price_per_hour=1.0)],
    )
    assert [row.day for row in result.commitments] == ["2027-03-10", "2027-03-11"]
    assert result.totals.shortfall_cost == 4.0
    power = [0.0] * 48
    power[0] = power[25] = power[47] = 1.0
    assert delivered(power, market, each_day=True, between=["22:00", "02:00"]) == [1.0, 1.0]


def test_a_stretch_that_begins_with_the_window_is_a_row_and_one_that_began_before_is_none() -> None:
    market = window([0.0] * 3, start="2027-03-10T16:00:00Z")
    assert delivered([1.0] * 3, market, each_day=True, between=["16:00", "18:00"]) == [2.0]
    assert delivered([1.0] * 3, market, each_day=True, between=["15:00", "18:00"]) == []


def test_between_that_ends_at_midnight_ends_its_day() -> None:
    market = window([0.0] * 5, start="2027-03-10T21:00:00Z")
    assert delivered([1.0] * 5, market, each_day=True, between=["22:00", "00:00"]) == [2.0]


def test_credit_goes_to_the_first_stretch_that_is_a_row() -> None:
    market = window([0.0] * 30, start="2027-03-10T20:00:00Z")
    counted = {"commitments": {"firm": 0.5}}
    rows = delivered([1.0] * 30, market, each_day=True, between=["18:00", "21:00"], counted_before=counted)
    # The 10th's stretch began before the window; the 11th's has three hours.
    assert rows == [3.5]


def test_between_that_ends_when_it_begins_lasts_to_the_next_day() -> None:
    # From 16:00 to 16:00: the 10th's 24 h and 8 h of the 11th's, cut off; the 9th's began before the window.
    assert delivered([1.0] * 48, window([0.0] * 48), each_day=True, between=["16:00", "16:00"]) == [24.0, 8.0]
