"""What the audit refuses: requests it cannot replay in full."""

import copy

import pytest

from schemas.job import OneWindow
from tests.workers.planning.audit.small_jobs import Document, audit, job, product, read, store, window
from workers.planning.audit import NotAuditedError, replay


def refused(document: Document) -> NotAuditedError:
    with pytest.raises(NotAuditedError) as caught:
        replay(read(document), {})
    return caught.value


def test_a_job_planned_again_within_the_day_is_refused() -> None:
    fault = refused(job([store()], window([0.0]), task="reschedule", previous_job_id="j1"))
    assert (fault.what, fault.pointer) == ("task reschedule", "/task")
    assert "reschedule" in str(fault)


def test_a_refusal_can_be_made_anew_from_its_arguments() -> None:
    fault = refused(job([store()], window([0.0]), task="reschedule", previous_job_id="j1"))
    twin = copy.copy(fault)  # made anew from the exception's arguments, as unpickling does
    assert (twin.what, twin.pointer) == (fault.what, fault.pointer)
    assert fault.args == (fault.what, fault.pointer)


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
        {"window": window([0.0, 0.0], reserve_products=[product(price_per_mw_per_hour=[1.0])])},
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
