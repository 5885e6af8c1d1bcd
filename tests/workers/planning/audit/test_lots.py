"""Lots: net power in whole numbers of them."""

import pytest

from tests.workers.planning.audit.small_jobs import audit, broken, job, only, store, window


def test_a_site_runs_in_whole_lots() -> None:
    assets = [store(site="quay", standby_load_mw=0.25), store("quay-b2", site="quay")]
    document = job(assets, window([0.0] * 3), sites=[{"id": "quay", "lot_mw": 0.5}])
    # 1.5 + 0.25 - 0.25 = three lots, -1 = two the other way, none.
    assert broken(audit(document, {"quay-b1": [1.5, -1.0, 0.25], "quay-b2": [0.25, 0.25, 0.0]})) == []
    found = only(audit(document, {"quay-b1": [1.5, -1.0, 0.25], "quay-b2": [0.25, 0.35, 0.0]}))
    assert (found.rule, found.pointer, found.site, found.unit) == ("lot", "/fleet/sites/0/lot_mw", "quay", "MW")
    assert found.amount == pytest.approx(0.1)
    assert found.interval_start is not None
    assert found.interval_start.hour == 1


def test_the_fleet_runs_in_whole_lots_whatever_its_sites_do() -> None:
    document = job([store(), store("mole-b1")], window([0.0]), fleet={"lot_mw": 1.0})
    assert broken(audit(document, {"quay-b1": [0.4], "mole-b1": [0.6]})) == []
    found = only(audit(document, {"quay-b1": [0.4], "mole-b1": [0.4]}))
    assert (found.rule, found.pointer, found.site) == ("lot", "/fleet/lot_mw", None)
    assert found.amount == pytest.approx(0.2)


def test_a_lot_is_held_to_a_millionth() -> None:
    document = job([store()], window([0.0]), fleet={"lot_mw": 0.1})
    assert broken(audit(document, {"quay-b1": [0.3]})) == []
    assert broken(audit(document, {"quay-b1": [0.3000009]})) == []
    assert broken(audit(document, {"quay-b1": [0.300002]})) == ["lot"]


def test_what_counts_as_idle_is_no_part_of_a_lot_and_is_remembered() -> None:
    result = audit(job([store()], window([0.0]), fleet={"lot_mw": 1.0}), {"quay-b1": [1e-6]})
    assert broken(result) == []
    assert result.verification.largest_residual == 1e-6


def test_a_large_lot_is_held_to_a_millionth_of_the_power() -> None:
    large = store(discharge_limit_mw=200.0, energy_capacity_mwh=500.0)
    document = job([large], window([0.0]), initial={"quay-b1": {"stored_mwh": 400.0}}, fleet={"lot_mw": 50.0})
    assert broken(audit(document, {"quay-b1": [100.00009]})) == []
    assert broken(audit(document, {"quay-b1": [100.0002]})) == ["lot"]


@pytest.mark.parametrize("lot", [1e-3, 0.5, 1e9])
def test_lots_of_any_size_are_read(lot: float) -> None:
    document = job([store()], window([0.0]), fleet={"lot_mw": lot})
    assert broken(audit(document, {"quay-b1": [1.0]})) == (["lot"] if lot == 1e9 else [])
