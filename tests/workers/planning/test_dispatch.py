"""Hold published economic dispatch as one hour of an island: who gives how much, at which incremental cost.

Wood and Wollenberg, Power Generation, Operation and Control, second edition 1996, examples 3A, 3B and 5A. Curves,
limits and printed figures are those of tests/reference/economic_dispatch.json, typed from memory; each was computed
there a second time by lambda iteration.
"""

import json
from pathlib import Path
from typing import Any

import pytest

from schemas.schedule import Schedule
from tests.workers.planning.jobs import fixed_load, generator, job, on_of, planned, power_of

Document = dict[str, Any]

FILE = Path(__file__).parents[2] / "reference" / "economic_dispatch.json"
REFERENCE: dict[str, Any] = json.loads(FILE.read_text(encoding="utf-8"))
A3, B3, A5 = REFERENCE["ed_ex3A"], REFERENCE["ed_ex3B"], REFERENCE["uc_ex5A"]
LIMITS: list[list[float]] = A3["limits"]
UNLIMITED = [[0.0, 2000.0]] * 3


def island(curves: list[list[float]], limits: list[list[float]], load: float, numbers: list[int]) -> Document:
    """Return an hour of an island with some of the units."""
    units = []
    for number in numbers:
        (constant, linear, quadratic), (least, most) = curves[number - 1], limits[number - 1]
        cost = {"constant_per_hour": constant, "linear_per_mwh": linear, "quadratic_per_mw2h": quadratic}
        units.append(
            generator(f"g{number}", site="isle", min_output_mw=least, max_output_mw=most, cost=cost, min_up_hours=2)
        )
    site = {"id": "isle", "export_limit_mw": 0.0, "import_limit_mw": 0.0}
    return job([0.0], fixed_load(site="isle"), *units, sites=[site], forecasts={"quay-mill": load})


def all_on(document: Document) -> Document:
    """Return the job with every unit held on: started an hour ago, with two hours to run at least."""
    units = [asset["id"] for asset in document["fleet"]["assets"] if asset["kind"] == "generator"]
    return document | {"initial": {unit: {"on": True, "hours_in_state": 1.0} for unit in units}}


def outputs(found: Schedule) -> list[float]:
    return [power_of(found, f"g{number}")[0] for number in (1, 2, 3)]


def incremental_costs(found: Schedule, curves: list[list[float]], numbers: list[int]) -> list[float]:
    """Return dF/dP of some units at their output, money per MWh."""
    return [curves[n - 1][1] + 2 * curves[n - 1][2] * power_of(found, f"g{n}")[0] for n in numbers]


def test_example_3a_shares_850_mw_at_equal_incremental_cost() -> None:
    # Printed: lambda 9.148, outputs 393.2, 334.6 and 122.2 MW.
    found = planned(all_on(island(A3["F"], LIMITS, A3["load_MW"], [1, 2, 3])))
    assert [round(power, 1) for power in outputs(found)] == [393.2, 334.6, 122.2]
    assert [round(cost, 3) for cost in incremental_costs(found, A3["F"], [1, 2, 3])] == [9.148] * 3
    assert found.totals.fuel_cost == pytest.approx(A3["computed"]["cost"], rel=1e-7)


def test_example_3b_without_limits_takes_the_cheap_unit_beyond_its_limit() -> None:
    # Printed: lambda 8.284; outputs computed beside it.
    found = planned(all_on(island(B3["F"], UNLIMITED, A3["load_MW"], [1, 2, 3])))
    assert [round(power, 1) for power in outputs(found)] == [705.7, 111.8, 32.5]
    assert [round(cost, 3) for cost in incremental_costs(found, B3["F"], [1, 2, 3])] == [8.284] * 3


def test_example_3b_with_limits_pins_the_cheap_unit_and_shares_the_rest() -> None:
    # Printed: lambda 8.576, outputs 600, 187.1 and 62.9 MW; unit 1 at its limit costs less at the margin.
    found = planned(all_on(island(B3["F"], LIMITS, A3["load_MW"], [1, 2, 3])))
    assert [round(power, 1) for power in outputs(found)] == [600.0, 187.1, 62.9]
    assert [round(cost, 3) for cost in incremental_costs(found, B3["F"], [2, 3])] == [8.576] * 2
    assert incremental_costs(found, B3["F"], [1])[0] < 8.576
    assert found.totals.fuel_cost == pytest.approx(B3["computed_with_limits"]["cost"], rel=1e-7)


@pytest.mark.parametrize("numbers", [[1], [1, 2], [1, 3], [2, 3], [1, 2, 3]])
def test_example_5a_costs_what_each_choice_of_units_is_printed_to_cost(numbers: list[int]) -> None:
    # Printed without decimals, and cut rather than rounded (5,497.8 as 5,497).
    printed = A5["published_from_memory"]["+".join(str(number) for number in numbers)]
    found = planned(all_on(island(A5["F"], LIMITS, A5["load_MW"], numbers)))
    assert int(found.totals.fuel_cost) == printed


def test_example_5a_runs_unit_1_alone_when_it_may_choose() -> None:
    found = planned(island(A5["F"], LIMITS, A5["load_MW"], [1, 2, 3]))
    assert [on_of(found, f"g{number}") for number in (1, 2, 3)] == [[True], [False], [False]]
    assert int(found.totals.fuel_cost) == A5["published_from_memory"]["1"]
