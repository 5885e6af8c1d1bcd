"""Leave elements out of small jobs whose conflicts are known by hand, and find all of those by force."""

from __future__ import annotations

import json
from collections import Counter
from pathlib import Path
from typing import Any

import pytest

from schemas.reading import read_job
from tests.oracles.conflicts_by_force import always_relaxes, conflicts_by_force
from tests.oracles.elements import Element, elements, kind_of, out_of_touch
from tests.oracles.formulation import solve
from tests.oracles.formulation_program import Program, Solution
from tests.oracles.leaving_out import amount_due, is_possible_alone, is_possible_without, most_of
from tests.oracles.plain_jobs import at, generator, job, owed, product, store
from tests.oracles.random_infeasible import AIMS, a_conflict, infeasible_request
from tests.oracles.random_mixed import mixed_request

REFERENCE = Path(__file__).parents[1] / "reference" / "infeasible_systems.json"

TARGET = Element("/targets/wharf-b1/final_stored_mwh")
STORED = Element("/initial/wharf-b1/stored_mwh")


def row(number: int, asset: str | None = "wharf-b1", day: str | None = None) -> Element:
    return Element(f"/commitments/{number}", asset, day)


def firm(hour: int, power_mw: float, hours: int = 6) -> dict[str, Any]:
    due = [power_mw if t == hour else 0.0 for t in range(hours)]
    return owed("firm_delivery", id=f"hour-{hour + 1}", power_mw=due)


def conflicts(request: dict[str, Any]) -> set[frozenset[Element]]:
    return conflicts_by_force(request)


def are(*sets: set[Element]) -> set[frozenset[Element]]:
    return {frozenset(members) for members in sets}


# The published example: six hours, 1 MW, 2 MWh, lossless, empty, at least 0.5 MW in each of hours 2 to 6.
RESERVOIR = job([10.0] * 6, store(), commitments=[firm(hour, 0.5) for hour in range(1, 6)])


def test_the_reference_example_has_its_two_conflicts() -> None:
    # Its groups 1 (capacity) and 3 (power limits, exclusive) are physics here, 2 is the energy at the start, 4.. rows.
    known = json.loads(REFERENCE.read_text(encoding="utf-8"))["storage_commitment"]
    named = {2: STORED} | {group: row(group - 4) for group in range(4, 9)}
    assert conflicts(RESERVOIR) == {frozenset(named[g] for g in groups if g in named) for groups in known["MUS"]}
    assert not is_possible_without(RESERVOIR, [])


def test_the_reference_example_is_cured_as_it_says() -> None:
    known = json.loads(REFERENCE.read_text(encoding="utf-8"))["storage_commitment"]
    named = {2: STORED} | {group: row(group - 4) for group in range(4, 9)}
    cures = [[named[g] for g in groups] for groups in known["MCS"] if set(groups) <= named.keys()]
    assert cures == [[row(0)], [row(1)], [row(2)], [STORED, row(3)], [STORED, row(4)]]
    for cure in cures:
        assert is_possible_without(RESERVOIR, cure)
        assert all(not is_possible_without(RESERVOIR, [e for e in cure if e != spared]) for spared in cure)


def test_energy_at_the_start_is_free_within_the_range_of_the_store() -> None:
    limits: dict[str, Any] = {"min_stored_mwh": 0.4, "max_stored_mwh": 1.6}
    for power_mw, possible in ((1.2, True), (1.21, False)):
        request = job([10.0], store(discharge_limit_mw=2.0, **limits), stored=0.4, commitments=[firm(0, power_mw, 1)])
        assert is_possible_without(request, [STORED]) is possible
    # Without the floor, 0.4 MWh more.
    request = job([10.0], store(discharge_limit_mw=2.0, **limits), stored=0.4, commitments=[firm(0, 1.6, 1)])
    floor = Element("/fleet/assets/0/min_stored_mwh")
    assert not is_possible_without(request, [STORED])
    assert is_possible_without(request, [STORED, floor])
    assert conflicts(request) == are({row(0), STORED}, {row(0), floor})


def test_a_default_target_is_an_element_and_keeps_its_number_when_the_start_is_free() -> None:
    request = job([10.0], store(), stored=1.5, commitments=[firm(0, 0.8, 1)])
    del request["targets"]
    assert TARGET in elements(request)
    assert is_possible_without(request, [TARGET])
    # 2 MWh at the start, 0.8 delivered: 1.2 are left, and 1.5 must be.
    assert not is_possible_without(request, [STORED])
    assert conflicts(request) == are({row(0), TARGET})


def test_an_assumed_start_is_an_element_without_a_member_and_stays_when_the_floor_goes() -> None:
    request = job([10.0], store(min_stored_mwh=1.0), commitments=[firm(0, 0.6, 1)])
    del request["initial"]["wharf-b1"], request["targets"]
    request["missing_initial"] = "assume_middle"
    floor, start = Element("/fleet/assets/0/min_stored_mwh"), Element("/initial/wharf-b1")
    assert {floor, start, TARGET} < set(elements(request))
    # 1.5 MWh, the middle of 1..2; from the middle of 0..2 the target would be 1.0 and 0.6 could not be delivered.
    assert not is_possible_without(request, [TARGET])
    assert is_possible_without(request, [TARGET, floor])


def test_a_store_held_out_has_neither_target_nor_start() -> None:
    request = job([10.0], store(), commitments=[firm(0, 0.5, 1)])
    request["initial"], request["missing_initial"] = {}, "hold_out"
    del request["targets"]
    assert elements(request) == [row(0)]
    assert not is_possible_alone(request, [row(0)])


def test_an_outage_left_out_leaves_full_power() -> None:
    outage = {"asset": "wharf-b1", "kind": "planned", "from": at(0), "to": at(1), "available_fraction": 0.4}
    request = job([10.0], store(), stored=2.0, outages=[outage], commitments=[firm(0, 0.5, 1)])
    assert conflicts(request) == are({row(0), Element("/outages/0")})
    assert kind_of(request, Element("/outages/0")) == "planned outage"


def test_a_limit_left_out_is_todays_and_the_fleets_own() -> None:
    sites = [{"id": "quay", "export_limit_mw": 0.5, "import_limit_mw": 3.0}]
    request = job([10.0], store(site="quay"), stored=2.0, sites=sites, commitments=[firm(0, 0.8, 1)])
    request["limits"] = {"quay": {"export_limit_mw": [0.6]}}
    today = Element("/limits/quay/export_limit_mw")
    assert {today, Element("/fleet/sites/0/import_limit_mw")} < set(elements(request))
    assert conflicts(request) == are({row(0), today})
    request["fleet"]["export_limit_mw"] = 0.7
    assert conflicts(request) == are({row(0), today}, {row(0), Element("/fleet/export_limit_mw")})


def test_without_its_need_a_load_draws_nothing() -> None:
    load = {"id": "mill-p1", "kind": "flexible_load", "draw_limit_mw": 2.0}
    drawn = owed("energy_at_least", {"assets": ["mill-p1"]}, direction="charge", energy_mwh=1.0)
    need = Element("/energy_needs/mill-p1/0")
    request = job([10.0, 10.0], load, energy_needs={"mill-p1": [{"energy_mwh": 1.0}]}, commitments=[drawn])
    assert is_possible_without(request, [])
    assert not is_possible_without(request, [need])
    assert is_possible_without(request, [need, row(0, "mill-p1")])
    # What the rest of the job makes possible is no conflict worth a name.
    assert conflicts(request) == set()
    assert not always_relaxes(request)


def test_times_ramps_cycles_and_starts_are_elements_of_their_own() -> None:
    plant = generator(min_down_hours=3, ramp_up_mw_per_hour=0.2, min_up_hours=1)
    state = {"mill-g1": {"on": False, "hours_in_state": 1}}
    due = owed("firm_delivery", {"assets": ["mill-g1"]}, power_mw=[0.0, 1.5, 0.0, 0.0])
    request = job([10.0] * 4, plant, initial=state, commitments=[due])
    needed = row(0, "mill-g1")
    down, ramp = (Element(f"/fleet/assets/0/{name}") for name in ("min_down_hours", "ramp_up_mw_per_hour"))
    assert conflicts(request) == are({needed, down}, {needed, ramp})
    reservoir = store(max_cycles_per_day=0.25, max_starts_per_day=0, min_discharge_mw=0.1, min_charge_mw=0.1)
    request = job([10.0], reservoir, stored=2.0, commitments=[firm(0, 0.6, 1)])
    caps = [Element(f"/fleet/assets/0/{name}") for name in ("max_cycles_per_day", "max_starts_per_day")]
    assert conflicts(request) == are(*({row(0), cap} for cap in caps))


def test_rows_of_one_commitment_are_told_apart_by_asset_and_day() -> None:
    daily = owed("hours_at_least", {"assets": ["wharf-b1", "wharf-b2"]}, threshold={"mw": 1.0}, hours=3, each_day=True)
    request = job([10.0] * 26, store(), store("wharf-b2", energy_capacity_mwh=20.0), stored=2.0, commitments=[daily])
    rows = [row(0, asset, day) for asset in ("wharf-b1", "wharf-b2") for day in ("2027-02-09", "2027-02-10")]
    assert [element for element in elements(request) if element.pointer == "/commitments/0"] == rows
    # Of the second day two hours are in the window.
    assert not is_possible_alone(request, [rows[1]])
    assert not is_possible_without(request, [rows[1]])
    assert is_possible_without(request, [rows[1], rows[3]])
    assert most_of(request, rows[1], [rows[3]]) == pytest.approx(2.0)
    assert most_of(request, rows[2], [rows[1], rows[3]]) == pytest.approx(13.0)


def test_a_priced_row_is_no_element() -> None:
    request = job([10.0], store(), commitments=[firm(0, 0.5, 1) | {"shortfall_price_per_mwh": 5.0}])
    assert elements(request) == [STORED]
    assert is_possible_without(request, [])


def test_the_most_of_a_row_counts_what_was_counted_before() -> None:
    asked = owed("hours_at_least", threshold={"mw": 0.5}, hours=5)
    request = job([10.0] * 4, store(charge_limit_mw=0.0), stored=1.2, commitments=[asked])
    assert most_of(request, row(0), []) == pytest.approx(2.0)
    request["counted_before"] = {"commitments": {"firm-1": 1.0}}
    assert most_of(request, row(0), []) == pytest.approx(3.0)
    request["commitments"][0]["hours"] = 1.0
    assert most_of(request, row(0), []) == pytest.approx(3.0)
    assert most_of(request, row(0), [STORED]) == pytest.approx(5.0)


def test_the_most_of_a_row_is_none_where_the_rest_cannot_hold() -> None:
    asked = owed("hours_at_least", threshold={"mw": 0.5}, hours=1)
    request = job([10.0] * 2, store(), commitments=[asked, firm(0, 0.5, 2)])
    assert most_of(request, row(0), []) is None
    assert most_of(request, row(0), [row(1)]) == pytest.approx(1.0)


@pytest.mark.parametrize(
    ("commitment", "most"),
    [
        (owed("energy_at_least", energy_mwh=5.0), 1.5),
        (owed("energy_at_least", energy_mwh=0.5), 0.5),
        (owed("firm_delivery", power_mw=[1.0, 1.0, 1.0]), 1.5),
        (owed("firm_delivery", power_mw=[1.0, 1.0, 1.0], excused=[{"from": at(1), "to": at(3)}]), 1.0),
        (owed("reserve_holding", product="up", power_mw=4.0), 3.0),
        (owed("energy_at_most", energy_mwh=0.1), 0.0),
        (owed("hours_at_most", threshold={"mw": 0.1}, hours=0), 0.0),
    ],
)
def test_the_most_of_each_kind_of_row(commitment: dict[str, Any], most: float) -> None:
    plant = store(charge_limit_mw=0.0)
    request = job([10.0] * 3, plant, stored=1.5, commitments=[commitment], products=[product("up")])
    assert most_of(request, row(0), []) == pytest.approx(most)


def test_the_least_of_an_at_most_is_what_the_rest_demands() -> None:
    few = owed("hours_at_most", id="quiet", threshold={"mw": 0.3}, hours=0)
    little = owed("energy_at_most", id="little", energy_mwh=0.1)
    request = job([10.0] * 6, store(), stored=2.0, commitments=[few, little, firm(1, 0.5), firm(3, 0.5)])
    assert most_of(request, row(0), [row(1)]) == pytest.approx(2.0)
    assert most_of(request, row(1), [row(0)]) == pytest.approx(1.0)
    assert most_of(request, row(1), []) is None


def test_bisecting_finds_what_optimising_finds(monkeypatch: pytest.MonkeyPatch) -> None:
    asked = owed("hours_at_least", threshold={"mw": 0.5}, hours=2)
    request = job([10.0] * 5, store(), stored=1.2, commitments=[asked, owed("energy_at_least", id="e", energy_mwh=9.0)])
    before = [most_of(request, row(0), [row(1)]), most_of(request, row(1), [row(0)]), most_of(request, row(0), [])]
    assert before == [pytest.approx(4.0), pytest.approx(3.0), None]
    monkeypatch.setattr(Program, "solve", lambda *_: Solution(4, None, None, None))
    after = [most_of(request, row(0), [row(1)]), most_of(request, row(1), [row(0)]), most_of(request, row(0), [])]
    assert after == [pytest.approx(4.0, abs=2e-3), pytest.approx(3.0, abs=2e-3), None]


def test_the_amount_due_of_a_row_leaves_out_what_is_excused() -> None:
    due = owed("firm_delivery", power_mw=[1.0, 2.0, 4.0], excused=[{"from": at(1), "to": at(2)}])
    request = job([10.0] * 3, store(), commitments=[due])
    assert amount_due(request, row(0)) == 5.0


def test_what_nothing_links_to_a_row_is_out_of_touch_with_it() -> None:
    request = job([10.0], store(site="quay"), store("wharf-b2", site="quay"), store("wharf-b3"), stored=1.0)
    request["targets"] = {}
    request["commitments"] = [firm(0, 0.5, 1)]
    request["fleet"]["sites"] = [{"id": "quay"}]

    def apart() -> set[str]:
        return {element.pointer.split("/")[2] for element in out_of_touch(request, row(0))}

    assert apart() == {"wharf-b2", "wharf-b3"}
    request["fleet"]["sites"][0]["export_limit_mw"] = 2.0
    assert apart() == {"wharf-b3"}
    request["fleet"]["lot_mw"] = 0.1
    assert apart() == set()


def test_only_elements_of_the_job_can_be_left_out_or_kept() -> None:
    with pytest.raises(ValueError, match="no elements"):
        is_possible_without(RESERVOIR, [row(9)])
    with pytest.raises(ValueError, match="no elements"):
        is_possible_alone(RESERVOIR, [TARGET])


def test_leaving_nothing_out_asks_what_the_formulation_asks() -> None:
    for seed in range(40):
        request = mixed_request(seed, assets=3, intervals=5)
        assert is_possible_without(request, []) == (solve(request).outcome != "infeasible"), seed


def test_elements_resolve_in_the_job_or_are_defaults() -> None:
    for seed in range(60):
        request = mixed_request(seed)
        for element in elements(request):
            found: Any = request
            for step in element.steps:
                found = found[int(step)] if isinstance(found, list) else (found or {}).get(step)
            assert found is not None or element.steps[0] in ("targets", "initial"), (seed, element)


def test_the_same_seed_gives_the_same_infeasible_request() -> None:
    assert infeasible_request(3) == infeasible_request(3)
    assert infeasible_request(3) != infeasible_request(3 + len(AIMS))


def _mixture(seeds: range) -> Counter[str]:
    """Draw infeasible requests, each valid and not physics' fault; count the kinds of element in a conflict of each."""
    seen: Counter[str] = Counter()
    for seed in seeds:
        request = infeasible_request(seed)
        read_job(request)
        assert 1 <= len(request["fleet"]["assets"]) <= 4
        found = a_conflict(request, list(AIMS)[seed % len(AIMS)])
        assert found
        assert not is_possible_alone(request, found)
        seen.update({kind_of(request, element) for element in found})
        seen.update({asset["kind"] for asset in request["fleet"]["assets"]})
    for kind in AIMS:
        print(f"{kind:24}{seen[kind]:5}")
    return seen


def test_infeasible_requests_are_valid_and_of_many_kinds() -> None:
    seen = _mixture(range(0, len(AIMS), 2))
    assert sum(seen[kind] > 0 for kind in AIMS) > len(AIMS) // 3


@pytest.mark.full
def test_every_kind_of_element_is_to_blame_in_some_infeasible_requests() -> None:
    seen = _mixture(range(253))
    assert all(seen[kind] >= 3 for kind in AIMS), {kind: seen[kind] for kind in AIMS}
    assert all(seen[kind] > 20 for kind in ("storage", "generator", "renewable", "flexible_load", "fixed_load"))
