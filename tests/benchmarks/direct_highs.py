"""The baseline's formulation written straight into the solver's arrays, with nothing between: the floor of the cost.

    maximise  sum of h * (p[t] * (d - c)[a,t] - w[a] * d[a,t])
    s[a,t] = s[a,t-1] + h * (eta_c[a] * c[a,t] - d[a,t] / eta_d[a]),   s[a,last] >= s[a,-1]        (1)
    c[a,t] <= C[a] * (1 - u[a,t]),   d[a,t] <= D[a] * u[a,t]                                       (2)
    sum of h * d[a,t] over a day <= cycles[a] * capacity[a]                                        (3)
    -import <= sum of (d - c)[a,t] over a site or the fleet <= export                              (4)
    (d - c)[a,t] >= need - (need + C[a]) * (1 - y[t]),   sum of h * y[t] >= hours                  (5)

    python -m tests.benchmarks.direct_highs request.json [--gap 1e-3] [--limit 600] [--each] [--first N]

Prints one JSON line, the members as in `plain_pyomo`, with each part's margin and bound beside their sums.
"""

import argparse
import json
import re
from collections.abc import Sequence
from dataclasses import dataclass, field
from pathlib import Path
from time import perf_counter
from typing import Any

import highspy
import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy.sparse import coo_matrix

Request = dict[str, Any]
Numbers = NDArray[np.int64]
INFINITE = float("inf")


@dataclass
class Rows:
    """Rows so far, as triplets and bounds."""

    count: int = 0
    where: list[Numbers] = field(default_factory=list)
    columns: list[Numbers] = field(default_factory=list)
    values: list[NDArray[np.float64]] = field(default_factory=list)
    lower: list[NDArray[np.float64]] = field(default_factory=list)
    upper: list[NDArray[np.float64]] = field(default_factory=list)

    def family(self, lower: ArrayLike, upper: ArrayLike, *terms: tuple[Numbers, float]) -> None:
        """Add a row per entry of the terms, all of one length."""
        size = len(terms[0][0])
        for columns, value in terms:
            self._term(np.arange(self.count, self.count + size), columns, value)
        self._bounds(size, lower, upper)

    def sum(self, lower: float, upper: float, columns: Numbers, value: float) -> None:
        """Add one row over all columns given."""
        self._term(np.full(len(columns), self.count), columns, value)
        self._bounds(1, lower, upper)

    def _term(self, where: Numbers, columns: Numbers, value: float) -> None:
        self.where.append(where)
        self.columns.append(columns)
        self.values.append(np.full(len(columns), value))

    def _bounds(self, size: int, lower: ArrayLike, upper: ArrayLike) -> None:
        self.lower.append(np.broadcast_to(np.asarray(lower, dtype=float), size))
        self.upper.append(np.broadcast_to(np.asarray(upper, dtype=float), size))
        self.count += size


def program(request: Request, assets: list[Request]) -> highspy.HighsLp:
    """Write (1) to (5) for some assets of a request; columns c, d, s, u by asset, then y by commitment row."""
    window = request["window"]
    found = re.fullmatch(r"PT(\d+)M", window["interval"])
    if found is None:
        raise ValueError(f"an interval in minutes is expected, not {window['interval']}")
    hours, price = int(found.group(1)) / 60, np.asarray(window["price_per_mwh"], dtype=float)
    rows, count = Rows(), len(price)
    numbers = {asset["id"]: number for number, asset in enumerate(assets)}
    block = np.arange(4 * len(assets) * count).reshape(len(assets), 4, count)
    for asset, columns in zip(assets, block, strict=True):
        _store(rows, asset, columns, request["initial"][asset["id"]]["stored_mwh"], hours)
    _connections(rows, request["fleet"], assets, block)
    counted = _hours(rows, request["commitments"], assets, numbers, block, hours)
    money = [np.concatenate(_money(asset, price, hours)) for asset in assets]
    bounds = [_upper(asset, count) for asset in assets]
    floors = [np.repeat([0.0, 0.0, asset.get("min_stored_mwh", 0.0), 0.0], count) for asset in assets]
    whole = np.concatenate([np.tile(np.repeat([0, 0, 0, 1], count), len(assets)), np.ones(counted, dtype=int)])
    return _as_highs(
        rows,
        np.concatenate([*money, np.zeros(counted)]),
        np.concatenate([*floors, np.zeros(counted)]),
        np.concatenate([*bounds, np.ones(counted)]),
        whole,
    )


def _store(rows: Rows, asset: Request, columns: Numbers, start_mwh: float, hours: float) -> None:
    charge, discharge, stored, mode = columns
    into, out_of = -hours * asset["charge_efficiency"], hours / asset["discharge_efficiency"]
    rows.family(start_mwh, start_mwh, (stored[:1], 1.0), (charge[:1], into), (discharge[:1], out_of))
    rows.family(0.0, 0.0, (stored[1:], 1.0), (stored[:-1], -1.0), (charge[1:], into), (discharge[1:], out_of))
    limit_c, limit_d = asset["charge_limit_mw"], asset["discharge_limit_mw"]
    rows.family(-INFINITE, limit_c, (charge, 1.0), (mode, limit_c))
    rows.family(-INFINITE, 0.0, (discharge, 1.0), (mode, -limit_d))
    rows.family(start_mwh, INFINITE, (stored[-1:], 1.0))
    if asset.get("max_cycles_per_day") is not None:
        most, per_day = asset["max_cycles_per_day"] * asset["energy_capacity_mwh"], round(24 / hours)
        for first in range(0, len(discharge), per_day):
            rows.sum(-INFINITE, most, discharge[first : first + per_day], hours)


def _connections(rows: Rows, fleet: Request, assets: list[Request], block: Numbers) -> None:
    everything = list(range(len(assets)))
    groups = [
        (site, [number for number in everything if assets[number].get("site") == site["id"]])
        for site in fleet.get("sites", [])
    ]
    for limits, members in [*groups, (fleet, everything)]:
        out, into = limits.get("export_limit_mw"), limits.get("import_limit_mw")
        if not members or (out is None and into is None):
            continue
        terms = [term for number in members for term in ((block[number, 1], 1.0), (block[number, 0], -1.0))]
        rows.family(-INFINITE if into is None else -into, INFINITE if out is None else out, *terms)


def _hours(
    rows: Rows,
    commitments: list[Request],
    assets: list[Request],
    numbers: dict[str, int],
    block: Numbers,
    hours: float,
) -> int:
    """Add (5) for every row of the commitments; return how many columns y there are."""
    first, count = block.size, block.shape[2]
    for commitment in commitments:
        over = commitment["applies_to"]
        if "assets" in over:
            bound = [[numbers[asset]] for asset in over["assets"] if asset in numbers]
        else:
            bound = [list(range(len(assets)))]
        for members in bound:
            rated = sum(assets[number]["discharge_limit_mw"] for number in members)
            low = sum(assets[number]["charge_limit_mw"] for number in members)
            need = commitment["threshold"].get("mw", commitment["threshold"].get("fraction_of_rated", 0.0) * rated)
            yes = np.arange(first, first + count)
            first += count
            terms = [term for number in members for term in ((block[number, 1], 1.0), (block[number, 0], -1.0))]
            rows.family(-low, INFINITE, *terms, (yes, -(need + low)))
            rows.sum(commitment["hours"] / hours, INFINITE, yes, 1.0)
    return first - block.size


def _money(asset: Request, price: NDArray[np.float64], hours: float) -> list[NDArray[np.float64]]:
    wear, nothing = asset.get("wear_cost_per_mwh", 0.0), np.zeros(len(price))
    return [-hours * price, hours * (price - wear), nothing, nothing]


def _upper(asset: Request, count: int) -> NDArray[np.float64]:
    ceiling = asset.get("max_stored_mwh", asset["energy_capacity_mwh"])
    return np.repeat([asset["charge_limit_mw"], asset["discharge_limit_mw"], ceiling, 1.0], count)


def _as_highs(
    rows: Rows,
    money: NDArray[np.float64],
    lower: NDArray[np.float64],
    upper: NDArray[np.float64],
    whole: NDArray[np.int64],
) -> highspy.HighsLp:
    triplets = (np.concatenate(rows.values), (np.concatenate(rows.where), np.concatenate(rows.columns)))
    matrix = coo_matrix(triplets, shape=(rows.count, len(money))).tocsr()
    found = highspy.HighsLp()
    found.num_col_, found.num_row_ = len(money), rows.count
    found.sense_ = highspy.ObjSense.kMaximize
    found.col_cost_, found.col_lower_, found.col_upper_ = money, lower, upper
    found.row_lower_, found.row_upper_ = np.concatenate(rows.lower), np.concatenate(rows.upper)
    found.a_matrix_.format_ = highspy.MatrixFormat.kRowwise
    found.a_matrix_.num_col_, found.a_matrix_.num_row_ = found.num_col_, found.num_row_
    found.a_matrix_.start_, found.a_matrix_.index_ = matrix.indptr, matrix.indices
    found.a_matrix_.value_ = matrix.data
    kinds = (highspy.HighsVarType.kContinuous, highspy.HighsVarType.kInteger)
    found.integrality_ = [kinds[integer] for integer in whole.tolist()]
    return found


def solve(written: highspy.HighsLp, *, gap: float, limit: float) -> tuple[str, float | None, float]:
    """Solve on one thread; return HiGHS' word for how it ended, the margin (None without a plan), the bound."""
    solver = highspy.Highs()
    solver.setOptionValue("output_flag", False)
    solver.setOptionValue("threads", 1)
    solver.setOptionValue("mip_rel_gap", gap)
    solver.setOptionValue("time_limit", limit)
    solver.passModel(written)
    solver.run()
    information = solver.getInfo()
    has_plan = information.primal_solution_status == highspy.SolutionStatus.kSolutionStatusFeasible
    margin = float(information.objective_function_value) if has_plan else None
    return solver.getModelStatus().name, margin, float(information.mip_dual_bound)


def main(arguments: Sequence[str] | None = None) -> None:
    """Solve a request and print one line."""
    parser = argparse.ArgumentParser(prog="python -m tests.benchmarks.direct_highs")
    parser.add_argument("request", type=Path)
    parser.add_argument("--gap", type=float, default=1e-3)
    parser.add_argument("--limit", type=float, default=600)
    parser.add_argument("--each", action="store_true", help="loop over the assets, for requests that nothing couples")
    parser.add_argument("--first", type=int, default=None, help="with --each: only so many assets")
    asked = parser.parse_args(arguments)
    request = json.loads(asked.request.read_text(encoding="utf-8"))
    assets = request["fleet"]["assets"]
    parts = [[asset] for asset in assets[: asked.first]] if asked.each else [assets]
    build = solving = 0.0
    endings = []
    for part in parts:
        began = perf_counter()
        written = program(request, part)
        built = perf_counter()
        endings.append(solve(written, gap=asked.gap, limit=asked.limit))
        build, solving = build + built - began, solving + perf_counter() - built
    margins = [margin for _, margin, _ in endings]
    print(
        json.dumps(
            {
                "assets": sum(map(len, parts)),
                "build_s": build,
                "solve_s": solving,
                "status": sorted({status for status, _, _ in endings}),
                "margin": None if None in margins else sum(margin or 0.0 for margin in margins),
                "bound": sum(bound for _, _, bound in endings),
                "margins": margins,
                "bounds": [bound for _, _, bound in endings],
            }
        )
    )


if __name__ == "__main__":
    main()
