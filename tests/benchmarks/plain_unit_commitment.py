"""What a careful engineer writes by hand today: one Pyomo model of the ten-unit system, replicated, solved by HiGHS.

    python plain_unit_commitment.py [--units 40] [--gap 5e-4] [--limit 600]

Each of the ten units and the load are taken units/10 times; reserve as in the data. A plain three-binary commitment:
on, start and stop; minimum up and down times pair by pair; start costs hot and cold; fuel cost by tangents from below.
Prints one JSON line: seconds to build and to solve, status, exact cost of the dispatch found, proven lower bound.
Frozen, so that ratios against it mean the same thing from one release to the next.

Data and conventions: S. A. Kazarlis, A. G. Bakirtzis, V. Petridis, IEEE Trans. Power Systems 11(1):83-92, 1996, as
in ../reference/unit_commitment_ten_units.json.
"""

import argparse
import json
import time
from pathlib import Path
from typing import Any

import pyomo.environ as pyo
from pyomo.contrib.appsi.solvers import Highs

DATA = Path(__file__).parents[1] / "reference" / "unit_commitment_ten_units.json"
TANGENTS = 9


def model(units: list[dict[str, Any]], load: list[float], reserve: float) -> Any:
    """Build the model; cost in USD, power in MW, hourly intervals."""
    m = pyo.ConcreteModel()
    m.U = pyo.RangeSet(0, len(units) - 1)
    m.T = pyo.RangeSet(0, len(load) - 1)
    m.on = pyo.Var(m.U, m.T, within=pyo.Binary)
    m.start = pyo.Var(m.U, m.T, within=pyo.Binary)
    m.stop = pyo.Var(m.U, m.T, within=pyo.Binary)
    m.p = pyo.Var(m.U, m.T, bounds=lambda _m, g, _t: (0, units[g]["pmax_MW"]))
    m.fuel = pyo.Var(m.U, m.T, within=pyo.NonNegativeReals)
    m.start_cost = pyo.Var(m.U, m.T, within=pyo.NonNegativeReals)

    def was_on(g: int, t: int) -> Any:
        if t >= 0:
            return m.on[g, t]
        # Hours before the window: on or off for as long as the status says, the other way round before that.
        status = units[g]["init_status_h"]
        return int((status > 0) == (-t <= abs(status)))

    m.logic = pyo.Constraint(
        m.U, m.T, rule=lambda m, g, t: m.on[g, t] - was_on(g, t - 1) == m.start[g, t] - m.stop[g, t]
    )
    m.one = pyo.Constraint(m.U, m.T, rule=lambda m, g, t: m.start[g, t] + m.stop[g, t] <= 1)
    m.least = pyo.Constraint(m.U, m.T, rule=lambda m, g, t: m.p[g, t] >= units[g]["pmin_MW"] * m.on[g, t])
    m.most = pyo.Constraint(m.U, m.T, rule=lambda m, g, t: m.p[g, t] <= units[g]["pmax_MW"] * m.on[g, t])
    m.balance = pyo.Constraint(m.T, rule=lambda m, t: sum(m.p[g, t] for g in m.U) == load[t])
    m.reserve = pyo.Constraint(
        m.T, rule=lambda m, t: sum(units[g]["pmax_MW"] * m.on[g, t] for g in m.U) >= (1 + reserve) * load[t]
    )
    m.times = pyo.ConstraintList()
    m.costs = pyo.ConstraintList()
    for g, unit in enumerate(units):
        up, down, status = unit["min_up_h"], unit["min_down_h"], unit["init_status_h"]
        for t in m.T:
            for later in range(t + 1, min(t + up, len(load))):
                m.times.add(m.start[g, t] <= m.on[g, later])
            for later in range(t + 1, min(t + down, len(load))):
                m.times.add(m.stop[g, t] <= 1 - m.on[g, later])
            if 0 < status < up and t < up - status:
                m.times.add(m.on[g, t] == 1)
            if 0 < -status < down and t < down + status:
                m.times.add(m.on[g, t] == 0)
            # Cold where it has been off for more than minimum down time and cold start hours.
            recent = sum(was_on(g, t - back) for back in range(1, down + unit["cold_start_h"] + 2))
            m.costs.add(m.start_cost[g, t] >= unit["hot_start_usd"] * m.start[g, t])
            m.costs.add(m.start_cost[g, t] >= unit["cold_start_usd"] * (m.start[g, t] - recent))
            a, b, c = unit["a_usd_per_h"], unit["b_usd_per_MWh"], unit["c_usd_per_MW2h"]
            for n in range(TANGENTS):
                q = unit["pmin_MW"] + (unit["pmax_MW"] - unit["pmin_MW"]) * n / (TANGENTS - 1)
                m.costs.add(m.fuel[g, t] >= (a - c * q * q) * m.on[g, t] + (b + 2 * c * q) * m.p[g, t])
    m.cost = pyo.Objective(expr=sum(m.fuel[g, t] + m.start_cost[g, t] for g in m.U for t in m.T))
    return m


def exact_cost(m: Any, units: list[dict[str, Any]]) -> float:
    """Return fuel and start cost of the schedule in the model's variables, the squares as they are."""
    cost = 0.0
    for g, unit in enumerate(units):
        on = [unit["init_status_h"] > 0, *(m.on[g, t].value > 0.5 for t in m.T)]
        off = max(0, -unit["init_status_h"])
        for t in m.T:
            p = m.p[g, t].value
            if on[t + 1]:
                cost += unit["a_usd_per_h"] + unit["b_usd_per_MWh"] * p + unit["c_usd_per_MW2h"] * p * p
                if not on[t]:
                    hot = off <= unit["min_down_h"] + unit["cold_start_h"]
                    cost += unit["hot_start_usd"] if hot else unit["cold_start_usd"]
            off = 0 if on[t + 1] else off + 1
    return cost


def main() -> None:
    """Read the command line, solve, print one JSON line."""
    parser = argparse.ArgumentParser()
    parser.add_argument("--units", type=int, default=40)
    parser.add_argument("--gap", type=float, default=5e-4)
    parser.add_argument("--limit", type=float, default=600)
    asked = parser.parse_args()
    if asked.units < 10 or asked.units % 10:
        parser.error("--units must be a multiple of 10")
    data = json.loads(DATA.read_text())
    times = asked.units // 10
    units = data["units"] * times
    load = [times * mw for mw in data["load_MW"]]
    t = time.perf_counter()
    m = model(units, load, data["reserve_fraction"])
    build = time.perf_counter() - t
    solver = Highs()
    solver.config.load_solution = False
    solver.config.time_limit = asked.limit
    solver.highs_options = {"mip_rel_gap": asked.gap, "output_flag": False}
    t = time.perf_counter()
    result = solver.solve(m)
    solve = time.perf_counter() - t
    cost = None
    if result.best_feasible_objective is not None:
        result.solution_loader.load_vars()
        cost = exact_cost(m, units)
    print(
        json.dumps(
            {
                "units": len(units),
                "build_s": round(build, 3),
                "solve_s": round(solve, 3),
                "status": result.termination_condition.name,
                "cost": cost,
                "bound": result.best_objective_bound,
            }
        )
    )


if __name__ == "__main__":
    main()
