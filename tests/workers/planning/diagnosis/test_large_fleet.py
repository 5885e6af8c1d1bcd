"""A fleet of 500 assets in which six things cannot be: all six are named, and nobody else."""

from typing import Any

from schemas.diagnosis import Diagnosis
from tests.workers.planning.jobs import answer

INTERVALS = 48
ALONE, SITES, AT_EACH = 400, 20, 5
FAULTY = ("b17", "b80", "b133", "b256", "b399")
"""Stores that hold 4 MWh and were promised for 9 h at full power."""


def store(name: str, site: str | None) -> dict[str, Any]:
    number = int(name.removeprefix("b"))
    return {
        "id": name,
        "kind": "storage",
        "site": site,
        "discharge_limit_mw": 1.0 + number % 3,
        "charge_limit_mw": 1.0 + number % 3,
        "energy_capacity_mwh": 4.0 + 2.0 * (number % 3),
        "charge_efficiency": 0.95,
        "discharge_efficiency": 0.95,
        "wear_cost_per_mwh": 2.0 + number % 5,
    }


def evening(name: str, applies_to: dict[str, Any], hours: float, **threshold: float) -> dict[str, Any]:
    return {
        "id": name,
        "kind": "hours_at_least",
        "applies_to": applies_to,
        "threshold": threshold,
        "hours": hours,
        "from": "2027-03-16T12:00:00Z",
    }


def fleet_of_500() -> dict[str, Any]:
    names = [f"b{number}" for number in range(ALONE + SITES * AT_EACH)]
    sites = [f"s{number}" for number in range(SITES)]
    homes = [None] * ALONE + [sites[number // AT_EACH] for number in range(SITES * AT_EACH)]
    promises = [evening(f"too-long-{name}", {"assets": [name]}, 9.0, fraction_of_rated=1.0) for name in FAULTY]
    promises += [evening(f"kept-{name}", {"assets": [name]}, 1.0, fraction_of_rated=0.5) for name in names[::7]]
    # s3 lets 4 MW out; its five stores were promised for 5 MW as a group
    promises.append(evening("too-much", {"group": names[ALONE + 15 : ALONE + 20]}, 1.0, mw=5.0))
    return {
        "task": "schedule",
        "fleet": {
            "sites": [{"id": site, "export_limit_mw": 4.0, "import_limit_mw": 9.0} for site in sites],
            "assets": [store(name, home) for name, home in zip(names, homes, strict=True)],
        },
        "window": {
            "start": "2027-03-16T00:00:00Z",
            "interval": "PT30M",
            "timezone": "Europe/Lisbon",
            "currency": "EUR",
            "price_basis": "forecast",
            "price_per_mwh": [60.0 + 30.0 * ((t % 24) / 24) - 20.0 * (t % 5) for t in range(INTERVALS)],
        },
        "initial": {name: {"stored_mwh": 2.0} for name in names},
        "commitments": promises,
        "time_limit_seconds": 120,
        "relative_gap": 0.001,
    }


def test_of_500_assets_the_six_that_cannot_be_met_are_named_and_nobody_else() -> None:
    document = fleet_of_500()
    found = answer(document)
    assert isinstance(found, Diagnosis)
    promises = [promise["id"] for promise in document["commitments"]]
    named = [
        {promises[int(member.pointer.split("/")[2])] for member in conflict.members if "commitments" in member.pointer}
        for conflict in found.conflicts
    ]
    assert all(conflict.irreducible for conflict in found.conflicts)
    assert set().union(*named) == {*(f"too-long-{name}" for name in FAULTY), "too-much"}
    assert all(each for each in named), "every conflict here has a promise in it"
    innocent = {f"b{number}" for number in range(500)} - set(FAULTY)
    words = " ".join(member.text + member.pointer for conflict in found.conflicts for member in conflict.members)
    assert not innocent & set(words.replace("/", " ").replace(":", " ").split())
    [of_site] = [conflict for conflict in found.conflicts if any("sites" in m.pointer for m in conflict.members)]
    assert {member.pointer for member in of_site.members} == {
        f"/commitments/{promises.index('too-much')}",
        "/fleet/sites/3/export_limit_mw",
    }
    assert found.repairs
    assert len(found.repairs[0].changes) == 6
    assert found.nearest_schedule is not None
    assert {shortfall.pointer for shortfall in found.nearest_schedule.shortfalls} == {
        f"/commitments/{number}" for number in (*range(5), len(promises) - 1)
    }
