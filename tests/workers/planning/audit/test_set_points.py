"""Decisions that are missing, too short, too long or no numbers: reported, never raised."""

import math
from collections.abc import Sequence
from typing import Any

import pytest

from schemas.job import ScheduleAsset
from tests.workers.planning.audit.small_jobs import (
    audit,
    broken,
    facts,
    generator,
    job,
    load,
    one_generator,
    only,
    read,
    store,
    window,
)
from workers.planning.audit import Decision, Replay, replay


def decided(power: Any, **members: Any) -> Replay:
    document = job([store()], window([50.0, 50.0]))
    return replay(read(document), {"quay-b1": Decision(power, **members)})


def test_a_missing_decision_is_reported_and_taken_as_idle() -> None:
    result = audit(job([store()], window([50.0, 50.0])), {})
    found = only(result)
    assert (found.rule, found.pointer, found.asset, found.amount) == (
        "decision_missing",
        "/fleet/assets/0",
        "quay-b1",
        2.0,
    )
    assert result.assets[0].power_mw == [0.0, 0.0]
    assert result.margin == 0.0


@pytest.mark.parametrize("power", [[1.0], [1.0, 0.0, 0.0], []])
def test_a_wrong_number_of_powers_is_reported(power: list[float]) -> None:
    result = decided(power)
    found = only(result)
    missing = abs(len(power) - 2)
    assert facts(found) == ("decision_length", "/fleet/assets/0", "quay-b1", None, missing, "intervals")
    assert len(result.assets[0].power_mw) == 2


@pytest.mark.parametrize(
    "power", [math.nan, math.inf, -math.inf, 1e300, -1.1e9, 10**400, None, "1.0", [1.0], 1 + 1j, object()]
)
def test_what_is_no_power_is_reported_and_taken_as_idle(power: Any) -> None:
    result = decided([1.0, power])
    found = only(result)
    assert facts(found) == ("decision_unreadable", "/fleet/assets/0", "quay-b1", 1, 1.0, "values")
    assert result.assets[0].power_mw == [1.0, 0.0]
    assert result.margin == 50.0


@pytest.mark.parametrize("powers", [None, 1.0, object(), "ab", {"power": 1}, [math.inf, -math.inf], [1e308, 1e308]])
def test_what_is_no_series_of_powers_is_reported(powers: Any) -> None:
    result = decided(powers)
    assert set(broken(result)) <= {"decision_length", "decision_unreadable"}
    assert broken(result)
    assert result.assets[0].power_mw == [0.0, 0.0]


def test_the_largest_power_of_the_contract_is_read_and_breaks_what_it_breaks() -> None:
    result = decided([1e9, -1e9])
    assert broken(result) == ["discharge_limit", "charge_limit", "min_stored"]
    assert math.isfinite(result.margin)


def test_the_largest_power_is_read_beside_what_is_none() -> None:
    assert decided([1e9, None]).assets[0].power_mw == [1e9, 0.0]


def test_what_has_no_length_may_have_no_end_and_is_not_read() -> None:
    found = only(decided(iter([1.0, -1.0])))
    assert facts(found) == ("decision_length", "/fleet/assets/0", "quay-b1", None, 2.0, "intervals")
    states: Any = iter([True, False])
    found = only(one_generator([1.0, 0.0], states))
    assert facts(found) == ("decision_length", "/fleet/assets/0", "quay-g1", None, 2.0, "intervals")


def test_a_store_of_next_to_no_efficiency_ends_in_no_infinity() -> None:
    document = job([store(discharge_efficiency=1e-306)], window([0.0, 0.0], interval="PT24H"))
    result = audit(document, {"quay-b1": [0.0, 1e9]})
    assert broken(result) == ["discharge_limit", "min_stored", "final_stored"]
    assert all(math.isfinite(violation.amount) for violation in result.verification.violations)


class Powers(Sequence[float]):
    """A sequence of another kind, as arrays are."""

    def __len__(self) -> int:
        return 2

    def __getitem__(self, index: Any) -> Any:
        return [1.0, -1.0][index]


@pytest.mark.parametrize("power", [[1, -1], (1.0, -1.0), [True, -1.0], Powers()])
def test_any_sequence_of_numbers_is_read(power: Any) -> None:
    result = decided(power)
    assert broken(result) == []
    assert result.assets[0].power_mw == [1.0, -1.0]
    assert all(type(mw) is float for mw in result.assets[0].power_mw)


def test_a_decision_for_an_unknown_asset_is_reported() -> None:
    document = job([store()], window([0.0]))
    result = audit(document, {"quay-b1": [0.0], "mole-b9": [1.0]})
    found = only(result)
    assert facts(found) == ("asset_unknown", "/fleet/assets", None, None, 1.0, "assets")
    assert "mole-b9" in found.text
    assert result.fleet.power_mw == [0.0]


def test_reserve_of_a_product_the_window_does_not_have_is_reported() -> None:
    found = only(decided([0.0, 0.0], reserve_mw={"up-15": [1.0, 1.0]}))
    assert (found.rule, found.asset, found.amount) == ("reserve_product_unknown", "quay-b1", 1.0)


def test_an_unreadable_power_of_a_load_is_reported_and_taken_as_its_forecast() -> None:
    document = job([generator(), load()], window([0.0, 0.0]), forecasts={"quay-cranes": 0.5})
    result = audit(document, {"quay-g1": [0.0, 0.0], "quay-cranes": [-0.5, math.nan]})
    assert facts(only(result)) == ("decision_unreadable", "/fleet/assets/1", "quay-cranes", 1, 1.0, "values")
    assert result.assets[1].power_mw == [-0.5, -0.5]


def test_a_schedule_sent_for_a_check_is_replayed_as_it_stands() -> None:
    document = job([store()], window([10.0, 60.0]), task="check")
    document["schedule"] = {"assets": [{"id": "quay-b1", "power_mw": [-1.0, 2.5], "stored_mwh": [9.0, 9.0]}]}
    check = read(document)
    sent: list[ScheduleAsset] = check.schedule.assets  # type: ignore[attr-defined]
    decisions = {asset.id: Decision(asset.power_mw) for asset in sent if isinstance(asset.power_mw, list)}
    result = replay(check, decisions)
    assert broken(result) == ["discharge_limit"]
    assert result.assets[0].stored_mwh == [6.0, 3.5]
    assert result.margin == 140.0
