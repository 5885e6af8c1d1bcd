"""What outages leave of a store or a load, in hourly intervals."""

from typing import Any

import pytest

from tests.workers.planning.audit.small_jobs import (
    Document,
    audit,
    broken,
    facts,
    job,
    load,
    one_store,
    only,
    store,
    window,
)


def outage(begin: str, end: str | None, asset: str = "quay-b1", **left: Any) -> Document:
    return {
        "asset": asset,
        "kind": "planned",
        "from": f"2027-03-10T{begin}Z",
        "to": end and f"2027-03-10T{end}Z",
        **left,
    }


def test_a_store_that_is_out_stands_idle_or_breaks_it() -> None:
    outages = [outage("01:00:00", "02:00:00")]
    assert broken(one_store([1.0, 0.0, 1.0], outages=outages)) == []
    found = only(one_store([0.0, -0.5, 0.0], outages=outages))
    assert (found.rule, found.pointer, found.amount) == ("charge_limit", "/outages/0", 0.5)
    assert "planned outage" in found.text


def test_what_is_left_of_a_store_may_be_used() -> None:
    outages = [outage("00:00:00", "01:00:00", available_fraction=0.25)]
    assert broken(one_store([0.5], outages=outages)) == []
    assert broken(one_store([-0.5], outages=outages)) == []
    assert broken(one_store([0.6], outages=outages)) == ["discharge_limit"]
    assert broken(one_store([-0.6], outages=outages)) == ["charge_limit"]


def test_an_outage_is_widened_outwards_to_interval_borders() -> None:
    outages = [outage("01:59:59", "02:00:01")]
    assert broken(one_store([1.0, 0.0, 0.0, 1.0], outages=outages)) == []
    assert broken(one_store([0.0, 1.0, 0.0, 0.0], outages=outages)) == ["discharge_limit"]
    assert broken(one_store([0.0, 0.0, 1.0, 0.0], outages=outages)) == ["discharge_limit"]


def test_an_outage_on_borders_is_not_widened() -> None:
    assert broken(one_store([1.0, 0.0, 1.0], outages=[outage("01:00:00", "02:00:00")])) == []


def test_an_outage_without_an_end_lasts_to_the_windows_end() -> None:
    assert broken(one_store([1.0, 0.0, 0.0], outages=[outage("01:00:00", None)])) == []
    assert broken(one_store([1.0, 0.0, 0.5], outages=[outage("01:00:00", None)])) == ["discharge_limit"]


def test_an_outage_may_lie_partly_or_wholly_outside_the_window() -> None:
    early = {**outage("00:00:00", "01:00:00"), "from": "2027-03-01T00:00:00Z"}
    assert broken(one_store([0.0, 1.0], outages=[early])) == []
    assert broken(one_store([1.0, 0.0], outages=[early])) == ["discharge_limit"]
    for begin, end in (("2027-03-01", "2027-03-10"), ("2027-03-11", "2027-03-12"), ("2027-03-11", None)):
        elsewhere = {**early, "from": f"{begin}T00:00:00Z", "to": end and f"{end}T00:00:00Z"}
        assert broken(one_store([1.0, 0.0], outages=[elsewhere])) == []


def test_an_outage_that_ends_before_it_begins_takes_nothing() -> None:
    assert broken(one_store([1.0, 1.0], outages=[outage("01:30:00", "01:30:00")])) == []


def test_of_overlapping_outages_the_smallest_fraction_holds() -> None:
    outages = [
        outage("00:00:00", "02:00:00", available_fraction=0.5),
        outage("01:00:00", "03:00:00", available_fraction=0.25),
    ]
    assert broken(one_store([1.0, 0.5, 0.5], outages=outages)) == []
    assert broken(one_store([1.0, 0.5, 0.5], outages=outages[::-1])) == []
    found = only(one_store([1.0, 0.6, 0.5], outages=outages))
    assert (found.rule, found.pointer) == ("discharge_limit", "/outages/1")
    found = only(one_store([1.1, 0.5, 0.5], outages=outages))
    assert (found.rule, found.pointer) == ("discharge_limit", "/outages/0")


def test_of_outages_that_leave_as_little_the_first_in_the_request_is_named() -> None:
    outages = [outage("00:00:00", "02:00:00", available_fraction=0.5)] * 2
    assert only(one_store([1.0, 1.25], outages=outages)).pointer == "/outages/0"


def test_an_outage_that_takes_nothing_is_not_what_a_limit_is_broken_by() -> None:
    outages = [outage("00:00:00", None, available_fraction=1.0)]
    assert only(one_store([2.25], outages=outages)).pointer == "/fleet/assets/0/discharge_limit_mw"


def test_a_breach_of_an_outage_names_the_store_its_interval_and_mw() -> None:
    outages = [outage("01:00:00", "02:00:00", available_fraction=0.5)]
    # Half of 2 MW is left.
    found = only(one_store([0.0, 1.25, 0.0], outages=outages))
    assert facts(found) == ("discharge_limit", "/outages/0", "quay-b1", 1, 0.25, "MW")


def test_a_direction_has_its_own_fraction_and_the_other_is_untouched() -> None:
    outages = [outage("00:00:00", None, available_charge_fraction=0.5)]
    assert broken(one_store([2.0, -1.0], outages=outages)) == []
    assert broken(one_store([2.0, -1.1], outages=outages)) == ["charge_limit"]
    both = [outage("00:00:00", None, available_fraction=0.5, available_discharge_fraction=0.25)]
    assert broken(one_store([0.5, -1.0], outages=both)) == []
    assert broken(one_store([0.6, -1.0], outages=both)) == ["discharge_limit"]
    assert broken(one_store([0.5, -1.1], outages=both)) == ["charge_limit"]


def test_an_outage_never_lowers_minimum_power_or_energy() -> None:
    outages = [outage("00:00:00", None, available_fraction=0.25)]
    assert broken(one_store([0.5], asset=store(min_discharge_mw=0.5), outages=outages)) == []
    assert broken(one_store([0.4], asset=store(min_discharge_mw=0.5), outages=outages)) == ["min_discharge"]


def test_an_outage_of_one_store_leaves_the_others() -> None:
    outages = [outage("00:00:00", None, asset="quay-b2")]
    document = job([store(), store("quay-b2")], window([0.0]), outages=outages)
    assert broken(audit(document, {"quay-b1": [1.0], "quay-b2": [0.0]})) == []
    assert only(audit(document, {"quay-b1": [1.0], "quay-b2": [1.0]})).asset == "quay-b2"


def test_a_load_draws_its_forecast_without_a_decision() -> None:
    document = job([load()], window([0.0, 0.0]), forecasts={"quay-cranes": [0.75, 0.0]})
    result = audit(document, {})
    assert broken(result) == []
    assert result.assets[0].power_mw == [-0.75, 0.0]
    assert result.assets[0].stored_mwh is None
    assert str(result.assets[0].power_mw[1]) == "0.0"


def test_a_load_decided_to_draw_its_forecast_holds_and_anything_else_breaks_it() -> None:
    document = job([load()], window([0.0, 0.0]), forecasts={"quay-cranes": 0.75})
    assert broken(audit(document, {"quay-cranes": [-0.75, -0.75]})) == []
    for drawn, gap in ((-0.5, 0.25), (-0.8, 0.05), (0.75, 1.5)):
        found = only(audit(document, {"quay-cranes": [-0.75, drawn]}))
        amount = pytest.approx(gap)
        assert facts(found) == ("forecast", "/forecasts/quay-cranes", "quay-cranes", 1, amount, "MW")


def test_an_outage_scales_what_a_load_draws() -> None:
    outages = [outage("01:00:00", "02:00:00", asset="quay-cranes", available_fraction=0.4)]
    document = job([load()], window([0.0] * 3), forecasts={"quay-cranes": [0.5, 0.5, 0.5]}, outages=outages)
    assert audit(document, {}).assets[0].power_mw == pytest.approx([-0.5, -0.2, -0.5])
    assert broken(audit(document, {"quay-cranes": [-0.5, -0.2, -0.5]})) == []
    assert broken(audit(document, {"quay-cranes": [-0.5, -0.5, -0.5]})) == ["forecast"]


def test_a_load_without_a_forecast_is_refused() -> None:
    with pytest.raises(ValueError, match="quay-cranes"):
        audit(job([load()], window([0.0])), {})
