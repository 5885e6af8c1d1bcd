"""Measure how long plans take beside a hand-written joint model and the bare solver, and how good they are.

    python -m tests.benchmarks.run [--quick] [--out results.json]

Every round draws a fleet of its own; in it each tool solves the same request in a process of its own, one after the
other (A B C D, A B C D, ...), so that a busy minute of the machine meets them all. Ratios are taken round by round;
medians are reported. Seconds are those of model and solver, and for ours of the whole plan; imports, reading and
validation are left out. Ends with exit status 1 where the tools contradict each other.
"""

import argparse
import json
import os
import platform
import subprocess
import sys
import tempfile
from collections.abc import Callable, Sequence
from dataclasses import asdict, dataclass
from importlib.metadata import version
from pathlib import Path
from statistics import median
from typing import Any

from tests.benchmarks import fleets

HERE = Path(__file__).resolve().parent
ROOT = HERE.parents[1]
BASELINE, DIRECT, OURS, OURS_ON_ALL = "baseline", "direct", "ours", "ours-all"
TOOLS = (BASELINE, DIRECT, OURS, OURS_ON_ALL)
OUT_OF_TIME = {"maxTimeLimit", "kTimeLimit", "feasible"}
"""How the tools say that the time limit ended the search."""

ROUND_OFF = 1e-6
"""A margin may lie above another tool's bound by this share: solvers let rows and whole numbers be off by as much."""

_PRELOADED = "import highspy, runpy, sys; sys.argv = sys.argv[1:]; runpy.run_path(sys.argv[0], run_name='__main__')"
"""Runs the frozen script as it is; Pyomo would import the solver late, within the seconds that the script counts."""


@dataclass(frozen=True)
class Case:
    """A size of request: `first`, where the loops of the other tools are cut short and scaled to the whole."""

    name: str
    invent: Callable[..., fleets.Request]
    assets: int
    rounds: int
    each: bool = False
    first: int | None = None
    intervals: int = fleets.QUARTER_HOURS


@dataclass(frozen=True)
class Measured:
    """What one tool made of one request.

    `margin` and `bound` are those of the assets that all tools have solved, `relative_gap` that of all the tool has.
    """

    tool: str
    seconds: float
    build_seconds: float
    solver_seconds: float
    margin: float | None
    bound: float
    relative_gap: float
    ran_out_of_time: bool
    read_seconds: float | None = None


FULL = (
    Case("1 uncoupled", fleets.uncoupled, 1, rounds=9, each=True),
    Case("100 uncoupled", fleets.uncoupled, 100, rounds=3, each=True),
    Case("1000 uncoupled", fleets.uncoupled, 1000, rounds=2, each=True, first=100),
    Case("5 coupled", fleets.coupled, 5, rounds=5),
    Case("20 coupled", fleets.coupled, 20, rounds=3),
    Case("20 coupled, sites", fleets.coupled_with_sites, 20, rounds=3),
    Case("50 coupled", fleets.coupled, 50, rounds=3),
)
QUICK = (
    Case("1 uncoupled", fleets.uncoupled, 1, rounds=1, each=True, intervals=24),
    Case("10 uncoupled", fleets.uncoupled, 10, rounds=1, each=True, first=5, intervals=24),
    Case("5 coupled, sites", fleets.coupled_with_sites, 5, rounds=1, intervals=24),
)


def measure(case: Case, seed: int, tools: Sequence[str] = TOOLS) -> list[Measured]:
    """Have each tool solve one request, in turn."""
    request = case.invent(case.assets, seed=seed, intervals=case.intervals)
    with tempfile.TemporaryDirectory() as folder:
        path = Path(folder) / "request.json"
        path.write_text(json.dumps(request), encoding="utf-8")
        return [_measured(tool, case, _told(_command(tool, path, case))) for tool in tools]


def relative_gap(margin: float | None, bound: float) -> float:
    """Measure a bound against a margin; infinite without a plan."""
    if margin is None:
        return float("inf")
    return max(0.0, bound - margin) / max(abs(margin), 1.0)


def contradictions(measured: Sequence[Measured]) -> list[str]:
    """Say where the tools cannot all be right: a margin above a bound proven by any of them.

    No margin above any bound also means that two margins differ by no more than their gaps together.
    """
    found = []
    for one in measured:
        for other in measured:
            if one.margin is None:
                continue
            excess = one.margin - other.bound
            if not excess <= ROUND_OFF * max(1.0, abs(one.margin)):  # a bound that is no number contradicts as well
                found.append(f"{one.tool} earns {one.margin:.6f}, above the {other.bound:.6f} that {other.tool} proves")
    return found


def _command(tool: str, request: Path, case: Case) -> list[str]:
    if tool in (OURS, OURS_ON_ALL):
        threads = "1" if tool == OURS else "0"
        return [sys.executable, "-m", "tests.benchmarks.planned", str(request), "--threads", threads]
    script = ["-m", "tests.benchmarks.direct_highs"]
    if tool == BASELINE:
        script = ["-c", _PRELOADED, str(HERE / "plain_pyomo.py")]
    limits = ["--gap", str(fleets.RELATIVE_GAP), "--limit", str(fleets.TIME_LIMIT_SECONDS)]
    loop = ["--each"] if case.each else []
    first = ["--first", str(case.first)] if case.first is not None else []
    return [sys.executable, *script, str(request), *limits, *loop, *first]


def _told(command: Sequence[str]) -> dict[str, Any]:
    """Run a child and read its last line: HiGHS may print a banner before it."""
    outcome = subprocess.run(command, cwd=ROOT, capture_output=True, text=True, check=False)
    if outcome.returncode != 0:
        raise RuntimeError(f"{command[1:]} ended with {outcome.returncode}: {outcome.stderr[-2000:]}")
    told: dict[str, Any] = json.loads(outcome.stdout.splitlines()[-1])
    return told


def _measured(tool: str, case: Case, told: dict[str, Any]) -> Measured:
    if tool in (OURS, OURS_ON_ALL):
        return _of_ours(tool, case, told)
    scale = case.assets / told["assets"]
    build, solver = scale * told["build_s"], scale * told["solve_s"]
    return Measured(
        tool=tool,
        seconds=build + solver,
        build_seconds=build,
        solver_seconds=solver,
        margin=told["margin"],
        bound=told["bound"],
        relative_gap=relative_gap(told["margin"], told["bound"]),
        ran_out_of_time=bool(OUT_OF_TIME.intersection(told["status"])),
    )


def _of_ours(tool: str, case: Case, told: dict[str, Any]) -> Measured:
    """Read our own child; where the others stop at the first assets, take what the rest earns off margin and bound.

    The bound of the whole less what the rest is known to reach bounds what the first can: nothing couples them.
    """
    rest = sum(told["margins"][case.first :]) if case.first is not None else 0.0
    if abs(sum(told["margins"]) - told["margin"]) > ROUND_OFF * max(1.0, abs(told["margin"])):
        raise RuntimeError(f"powers earn {sum(told['margins'])}, the plan says {told['margin']}")
    bound = float("inf") if told["bound"] is None else told["bound"]
    return Measured(
        tool=tool,
        seconds=told["total_s"],
        build_seconds=told["build_s"],
        solver_seconds=told["solve_s"],
        margin=told["margin"] - rest,
        bound=bound - rest,
        relative_gap=relative_gap(told["margin"], bound),
        ran_out_of_time=bool(OUT_OF_TIME.intersection(told["status"])),
        read_seconds=told["read_s"],
    )


def _line(case: Case, rounds: Sequence[Sequence[Measured]]) -> str:
    by_tool = {one.tool: [found[k] for found in rounds] for k, one in enumerate(rounds[0])}

    def seconds(tool: str) -> str:
        late = sum(one.ran_out_of_time for one in by_tool[tool])
        return f"{median(one.seconds for one in by_tool[tool]):.3f}" + (f" ({late} ran out of time)" if late else "")

    def ratio(tool: str, ours: str) -> str:
        pairs = zip(by_tool[tool], by_tool[ours], strict=True)
        return f"{median(one.seconds / other.seconds for one, other in pairs):.2f}"

    gaps = " / ".join(f"{median(one.relative_gap for one in by_tool[tool]):.1e}" for tool in TOOLS)
    share = median(one.build_seconds / one.seconds for one in by_tool[OURS])
    cells = [case.name, str(len(rounds)), *(seconds(tool) for tool in TOOLS)]
    cells += [ratio(BASELINE, OURS), ratio(DIRECT, OURS), ratio(BASELINE, OURS_ON_ALL), ratio(DIRECT, OURS_ON_ALL)]
    return f"| {' | '.join([*cells, gaps, f'{share:.0%}'])} |"


def _heading() -> str:
    names = ["case", "rounds", "baseline s", "direct s", "ours s", "ours, all CPUs s"]
    names += ["baseline/ours", "direct/ours", "baseline/ours-all", "direct/ours-all"]
    names += ["gaps reached: baseline / direct / ours / ours-all", "build share of ours"]
    return f"| {' | '.join(names)} |\n|{'---|' * len(names)}"


def _circumstances(cases: Sequence[Case]) -> list[str]:
    versions = ", ".join(f"{name} {version(name)}" for name in ("highspy", "pyomo", "numpy", "scipy", "pydantic"))
    cores = len(os.sched_getaffinity(0))
    lines = [
        f"{platform.python_implementation()} {platform.python_version()}, {versions}; {cores} processors",
        f"relative gap {fleets.RELATIVE_GAP:g} and time limit {fleets.TIME_LIMIT_SECONDS:g} s for all",
        "threads: 'ours' and 'direct' 1, 'baseline' what HiGHS takes by itself, 'ours-all' one for each processor",
        "medians over the rounds, ratios round by round; ours indexes, screens and audits, the others solve only",
    ]
    for case in cases:
        if case.first is not None:
            share = f"the first {case.first} of {case.assets} assets and are scaled by {case.assets / case.first:g}"
            lines.append(f"{case.name}: baseline and direct loop over {share}; ours plans all")
    return lines


def main(arguments: Sequence[str] | None = None) -> int:
    """Measure all cases; return 0 only if the tools do not contradict each other."""
    parser = argparse.ArgumentParser(prog="python -m tests.benchmarks.run")
    parser.add_argument("--quick", action="store_true", help="small cases, once: does it run?")
    parser.add_argument("--out", type=Path, default=None, help="write every single measurement there, as JSON")
    asked = parser.parse_args(arguments)
    cases = QUICK if asked.quick else FULL
    print(*_circumstances(cases), "", _heading(), sep="\n", flush=True)
    wrong: list[str] = []
    kept: dict[str, list[list[dict[str, Any]]]] = {}
    for case in cases:
        rounds = [measure(case, seed) for seed in range(case.rounds)]
        print(_line(case, rounds), flush=True)
        wrong += [f"{case.name}, round {k}: {text}" for k, found in enumerate(rounds) for text in contradictions(found)]
        kept[case.name] = [[asdict(one) for one in found] for found in rounds]
    if asked.out is not None:
        asked.out.write_text(json.dumps({"circumstances": _circumstances(cases), "cases": kept}), encoding="utf-8")
    print("", *(wrong or ["no tool's margin lies above a bound of any tool"]), sep="\n")
    return 1 if wrong else 0


if __name__ == "__main__":
    sys.exit(main())
