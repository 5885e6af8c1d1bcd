"""What the audit refuses: requests it cannot replay in full."""

import copy
from typing import Any

import pytest

from schemas.job import OneWindow
from tests.workers.planning.audit.small_jobs import Document, audit, job, read, store, window
from workers.planning.audit import NotAuditedError, replay

PRODUCT = {"id": "up-15", "direction": "up", "sustain_minutes": 15.0, "price_per_mw_per_hour": 4.0}


def refused(document: Document) -> NotAuditedError:
    with pytest.raises(NotAuditedError) as caught:
        replay(read(document), {})
    return caught.value


@pytest.mark.parametrize(
    ("asset", "kind"),
    [
        ({"id": "g1", "kind": "generator", "max_output_mw": 1.0}, "generator"),
        ({"id": "pv", "kind": "renewable"}, "renewable"),
        ({"id": "pumps", "kind": "flexible_load", "draw_limit_mw": 1.0}, "flexible_load"),
    ],
)
def test_an_asset_of_another_kind_is_refused_by_name(asset: Document, kind: str) -> None:
    fault = refused(job([store(), asset], window([0.0])))
    assert (fault.what, fault.pointer) == (f"asset kind {kind}", "/fleet/assets/1/kind")
    assert kind in str(fault)


def test_a_commitment_of_another_kind_is_refused_by_name() -> None:
    promise: dict[str, Any] = {"id": "c", "kind": "energy_at_most", "applies_to": {"fleet": True}, "energy_mwh": 1.0}
    fault = refused(job([store()], window([0.0]), commitments=[promise]))
    assert (fault.what, fault.pointer) == ("commitment kind energy_at_most", "/commitments/0/kind")


def test_lots_and_reserve_products_are_refused() -> None:
    assert refused(job([store()], window([0.0]), fleet={"lot_mw": 1.0})).pointer == "/fleet/lot_mw"
    sites: list[Document] = [{"id": "quay"}, {"id": "mole", "lot_mw": 0.5}]
    assert refused(job([store()], window([0.0]), sites=sites)).pointer == "/fleet/sites/1/lot_mw"
    fault = refused(job([store()], window([0.0], reserve_products=[PRODUCT])))
    assert fault.pointer == "/window/reserve_products"


def test_a_job_planned_again_within_the_day_is_refused() -> None:
    assert refused(job([store()], window([0.0]), task="reschedule", previous_job_id="j1")).pointer == "/task"


def test_a_refusal_can_be_made_anew_from_its_arguments() -> None:
    fault = refused(job([store()], window([0.0]), fleet={"lot_mw": 1.0}))
    twin = copy.copy(fault)  # made anew from the exception's arguments, as unpickling does
    assert (twin.what, twin.pointer) == (fault.what, fault.pointer)


def test_fleet_and_window_must_be_inline() -> None:
    document = job([store()], window([0.0]))
    for inline, by_id in (("fleet", "fleet_id"), ("window", "window_id")):
        elsewhere = {**document, by_id: "quay"}
        del elsewhere[inline]
        with pytest.raises(ValueError, match="inline"):
            replay(read(elsewhere), {})


def test_a_window_of_unknown_length_is_refused() -> None:
    with pytest.raises(ValueError, match="no price"):
        audit(job([store()], window(price_per_mwh=30.0)), {"quay-b1": []})


@pytest.mark.parametrize(
    "members",
    [
        {"positions": {"quay-b1": [1.0]}},
        {"limits": {"fleet": {"export_limit_mw": [1.0, 1.0, 1.0]}}},
        {"window": {**window(buy_price_per_mwh=[1.0, 1.0], sell_price_per_mwh=[1.0])}},
    ],
)
def test_a_series_of_another_length_is_refused(members: Document) -> None:
    document = {**job([store()], window([0.0, 0.0])), **members}
    with pytest.raises(ValueError, match="for 2 intervals"):
        audit(document, {"quay-b1": [0.0, 0.0]})


def test_a_window_with_half_a_pair_of_prices_is_refused() -> None:
    with pytest.raises(ValueError, match="neither one price"):
        audit(job([store()], window(buy_price_per_mwh=[1.0])), {"quay-b1": [0.0]})


def test_a_job_is_only_read() -> None:
    request: OneWindow = read(job([store()], window([0.0])))
    before = request.model_dump()
    replay(request, {})
    assert request.model_dump() == before
