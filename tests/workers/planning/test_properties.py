"""Facts that hold for every request (Hypothesis): order does not matter, less asked never costs, more never hurts."""

import copy
import random
from typing import Any

from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from schemas.schedule import Schedule
from tests.oracles.random_requests import request
from tests.workers.planning.jobs import answer

SLACK = 1e-5
few = settings(max_examples=12, deadline=None, derandomize=True, suppress_health_check=[HealthCheck.too_slow])
seeds = st.integers(min_value=0, max_value=4000)


def small(seed: int) -> dict[str, Any]:
    return request(seed, assets=2, intervals=8) | {"relative_gap": 1e-6}


def margin(document: dict[str, Any]) -> float | None:
    found = answer(document)
    if not isinstance(found, Schedule):
        assert found.outcome == "infeasible"
        return None
    assert found.verification.violations == []
    assert found.margin_bound is not None
    assert found.margin_bound >= found.margin
    return found.margin


def tolerance(value: float) -> float:
    return 3e-6 * max(1.0, abs(value)) + SLACK


@given(seeds)
@few
def test_the_order_of_assets_does_not_matter(seed: int) -> None:
    document = small(seed)
    shuffled = copy.deepcopy(document)
    random.Random(seed).shuffle(shuffled["fleet"]["assets"])
    first, second = margin(document), margin(shuffled)
    assert (first is None) == (second is None)
    if first is not None and second is not None:
        assert abs(first - second) <= tolerance(first)


@given(seeds)
@few
def test_a_dropped_commitment_never_lowers_the_margin(seed: int) -> None:
    document = small(seed)
    with_all = margin(document)
    if with_all is None or not document.get("commitments"):
        return
    freer = copy.deepcopy(document)
    dropped = freer["commitments"].pop(0)
    freer.get("counted_before", {}).get("commitments", {}).pop(dropped["id"], None)
    without = margin(freer)
    assert without is not None
    assert without >= with_all - tolerance(with_all)


@given(seeds)
@few
def test_a_wider_connection_never_hurts(seed: int) -> None:
    document = small(seed)
    narrow = margin(document)
    wide = copy.deepcopy(document)
    wide["limits"] = {}
    for place in (wide["fleet"], *wide["fleet"].get("sites", [])):
        place.pop("export_limit_mw", None)
        place.pop("import_limit_mw", None)
    free = margin(wide)
    if narrow is not None:
        assert free is not None
        assert free >= narrow - tolerance(narrow)


@given(seeds)
@few
def test_a_lower_final_target_never_hurts(seed: int) -> None:
    document = small(seed)
    owed = margin(document)
    lower = copy.deepcopy(document)
    if any(target.get("final_value_per_mwh") for target in lower.get("targets", {}).values()):
        return
    stores = [asset["id"] for asset in lower["fleet"]["assets"] if asset["kind"] == "storage"]
    lower["targets"] = {asset: {"final_stored_mwh": 0.0} for asset in stores}
    free = margin(lower)
    if owed is not None:
        assert free is not None
        assert free >= owed - tolerance(owed)
