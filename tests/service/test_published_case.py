"""A published case from outside, all the way over HTTP: ten units, 24 hours, 10 % reserve.

Kazarlis, Bakirtzis and Petridis, A genetic algorithm solution to the unit commitment problem, IEEE Transactions on
Power Systems 11(1), 1996; best published cost 563,938, the exact one 563,937.69 (sources in the reference file).
"""

import pytest

from service.demo.own_service import own_service
from tests.workers.planning.test_unit_commitment import system

EXACT_COST = 563_937.69
GAP = 1e-4


def test_the_published_ten_units_are_planned_over_http_to_the_cent_with_a_proven_bound() -> None:
    with own_service() as api:
        accepted = api.ask("POST", "/v1/jobs", system(10, 0.1), Prefer="wait=30")
        assert accepted.status == 202
        record = accepted.document
        while record["state"] != "finished":
            assert record["state"] in {"queued", "running"}, record
            record = api.ask("GET", f"/v1/jobs/{record['id']}", Prefer="wait=30").document
        schedule = api.ask("GET", f"/v1/jobs/{record['id']}/schedule").document
    assert record["outcome"] == schedule["outcome"] == "optimal"
    assert -schedule["margin"] == pytest.approx(EXACT_COST, abs=0.01)
    assert -schedule["margin_bound"] >= EXACT_COST * (1 - GAP)
    assert schedule["verification"]["violations"] == []
    assert schedule["cautions"]
