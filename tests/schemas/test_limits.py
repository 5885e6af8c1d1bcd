"""Each limit of the contract: the most it allows is read, one more is refused, and the answer names it."""

from collections.abc import Callable

import pytest

from schemas import quantities
from schemas.keyed import MAX_METERS
from tests.schemas.documents import Json, full, plain, with_put
from tests.schemas.refusals import faults_of

STORE = plain()["fleet"]["assets"][0]
ROW = {"kind": "hours_at_least", "applies_to": {"assets": ["b1"]}, "threshold": {"mw": 1}, "hours": 1}
OUTAGE = {"asset": "b1", "kind": "planned", "from": "2027-03-14T00:00:00Z"}


def with_assets(count: int) -> Json:
    document = with_put(plain(), "/window/price_per_mwh", [1.0])
    document["fleet"]["assets"] = [{**STORE, "id": f"b{number}"} for number in range(count)]
    document["missing_initial"] = "assume_middle"
    return {**document, "initial": {}}


def with_sites(count: int) -> Json:
    return with_put(plain(), "/fleet/sites", [{"id": f"s{number}"} for number in range(count)])


def with_intervals(count: int) -> Json:
    return with_put(plain(), "/window/price_per_mwh", [1.0] * count)


def with_asset_intervals(count: int) -> Json:
    document = with_assets(1_000)
    document["window"]["price_per_mwh"] = [1.0] * -(-count // 1_000)
    return document


def with_rows(count: int) -> Json:
    """Rows of commitments on each of ten assets on each of ten days, one asset less where the count asks."""
    document = with_assets(10)
    document["window"] |= {"interval": "PT12H", "price_per_mwh": [1.0] * 20}
    names = [f"b{number}" for number in range(10)]
    row = {**ROW, "each_day": True, "hours": 12, "applies_to": {"assets": names}}
    rows = [{**row, "id": f"c{number}"} for number in range(count // 100)]
    if rest := count % 100:
        rows += [{**ROW, "hours": 12, "id": f"d{number}", "applies_to": {"fleet": True}} for number in range(rest)]
    return {**document, "commitments": rows}


def with_commitments(count: int) -> Json:
    return with_put(plain(), "/commitments", [{**ROW, "id": f"c{number}"} for number in range(count)])


def with_outages(count: int) -> Json:
    return with_put(plain(), "/outages", [OUTAGE] * count)


def with_products(count: int) -> Json:
    product = {"direction": "up", "sustain_minutes": 15, "price_per_mw_per_hour": 1}
    return with_put(plain(), "/window/reserve_products", [{**product, "id": f"p{number}"} for number in range(count)])


LIMITS: list[tuple[Callable[[int], Json], int, str]] = [
    (with_assets, quantities.MAX_ASSETS, "/fleet/assets"),
    (with_sites, quantities.MAX_SITES, "/fleet/sites"),
    (with_intervals, quantities.MAX_INTERVALS, "/window/price_per_mwh"),
    (with_asset_intervals, quantities.MAX_ASSET_INTERVALS, "/fleet/assets"),
    (with_rows, quantities.MAX_COMMITMENT_ROWS, "/commitments"),
    (with_commitments, quantities.MAX_COMMITMENTS, "/commitments"),
    (with_outages, quantities.MAX_OUTAGES, "/outages"),
    (with_products, quantities.MAX_RESERVE_PRODUCTS, "/window/reserve_products"),
]


def test_the_limits_are_those_of_the_contract() -> None:
    """Stated in the contract, section 1."""
    assert [most for _, most, _ in LIMITS] == [20_000, 2_000, 3_000, 2_000_000, 50_000, 50_000, 20_000, 16]


@pytest.mark.parametrize(("build", "most", "pointer"), LIMITS, ids=[build.__name__ for build, _, _ in LIMITS])
def test_the_most_is_read_and_one_more_is_refused(build: Callable[[int], Json], most: int, pointer: str) -> None:
    assert faults_of(build(most)) == ()
    (fault,) = faults_of(build(most + 1))
    assert (fault.pointer, fault.code) == (pointer, "too-large")
    assert str(most) in fault.detail


@pytest.mark.parametrize(
    ("member", "most"),
    [
        ("initial", quantities.MAX_ASSETS),
        ("forecasts", quantities.MAX_ASSETS),
        ("positions", MAX_METERS),
        ("counted_before/sites", quantities.MAX_SITES),
    ],
)
def test_a_mapping_with_too_many_members_is_one_fault(member: str, most: int) -> None:
    faults = faults_of(with_put(plain(), f"/{member}", {f"!{number}": "x" for number in range(most + 1)}))
    assert [(fault.pointer, fault.code) for fault in faults] == [(f"/{member}", "too-large")]
    assert str(most) in faults[0].detail


def test_a_sequence_holds_no_more_intervals_than_a_window() -> None:
    document = full("sequence")
    for window in document["windows"]:
        window["price_per_mwh"] = [1.0] * 1_501
    named = {(fault.pointer, fault.code) for fault in faults_of(document)}
    assert ("/windows", "too-large") in named


@pytest.mark.parametrize(
    ("pointer", "least", "most"),
    [("/time_limit_seconds", 1, 3600), ("/relative_gap", 1e-7, 0.1), ("/seed", 0, 2**31 - 1)],
)
def test_a_value_within_its_range_is_read_and_one_beyond_is_refused(pointer: str, least: float, most: float) -> None:
    step = 1 if isinstance(most, int) else 1e-9
    for value in (least, most):
        assert faults_of(with_put(plain(), pointer, value)) == ()
    for value, named in ((least - step, least), (most + step, most)):
        (fault,) = faults_of(with_put(plain(), pointer, value))
        assert (fault.pointer, fault.code) == (pointer, "out-of-range")
        assert f"{named:.10g}" in fault.detail
