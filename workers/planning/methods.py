"""How a request is solved: unit by unit, part by part, or all at once."""

from collections.abc import Callable, Iterable
from concurrent.futures import ThreadPoolExecutor
from dataclasses import dataclass, replace
from math import inf

from workers.planning.assembly import UnitPlan
from workers.planning.earlier import Earlier, plans_for
from workers.planning.instance import Instance
from workers.planning.joint import Solution, is_within_gap, solve_by_cp_sat, solve_jointly
from workers.planning.limits import Limits, Watch
from workers.planning.parts import independent_parts
from workers.planning.solvers.ending import Stopped

LONGEST_SHARE = 4.0
"""A part may take up to so many times its even share of the time, so that one hard part cannot starve the rest."""

CP_SAT_SHARE = 0.6
"""Share of the time that CP-SAT has before the joint model is tried."""

TIGHTER = 10.0
SECOND_LOOKS = 3


@dataclass(frozen=True)
class Choice:
    """A method by its name in the contract, the parts it solves, and why it was taken."""

    method: str
    parts: tuple[Instance, ...]
    why: str


@dataclass(frozen=True)
class Found:
    """What a method found: a solution per part, in the order of `Choice.parts`."""

    choice: Choice
    solutions: tuple[Solution, ...]

    @property
    def bound(self) -> float:
        """Sum of the parts' bounds: a proven upper bound of the whole margin."""
        return sum(solution.bound for solution in self.solutions)

    @property
    def why(self) -> str:
        """Why the method was taken, and where it had to fall back on another."""
        fallen = sum(solution.fell_back for solution in self.solutions)
        if not fallen:
            return self.choice.why
        return f"{self.choice.why}; {fallen} of them by milp: CP-SAT left no exact schedule in its share of the time"

    @property
    def infeasible_parts(self) -> list[Instance]:
        """Parts proven to have no schedule."""
        pairs = zip(self.choice.parts, self.solutions, strict=True)
        return [part for part, solution in pairs if solution.stopped is Stopped.INFEASIBLE]

    @property
    def has_schedule(self) -> bool:
        """Tell whether every part has a feasible schedule in hand."""
        return all(solution.plans is not None for solution in self.solutions)


@dataclass(frozen=True)
class Effort:
    """What the solve of a part may take and begins from; `careful` puts in every binary from the start."""

    seed: int
    seconds: float
    careful: bool = False
    earlier: tuple[UnitPlan, ...] | None = None


def choose(instance: Instance, asked: str) -> Choice:
    """Choose parts and method from the request alone."""
    parts = tuple(independent_parts(instance))
    alone = all(len(part.units) <= 1 for part in parts)
    if asked == "cp_sat":
        return Choice("cp_sat", parts, f"asked for by name: {_counted(parts)}")
    if asked == "milp":
        if alone:
            return Choice("milp", (instance,), "asked for by name: one joint model")
        return Choice("milp", parts, f"asked for by name: {_counted(parts)}")
    if alone:
        why = "asked for by name" if asked == "per_asset" else "nothing couples the assets"
        return Choice("per_asset", parts, why)
    return Choice("milp", parts, f"assets are coupled: {_counted(parts)}")


def _counted(parts: Iterable[Instance]) -> str:
    sizes = [len(part.units) for part in parts]
    return f"{len(sizes)} independent part(s), the largest with {max(sizes)} plant(s)"


def solve(
    choice: Choice, limits: Limits, watch: Watch, *, seed: int, careful: bool = False, earlier: Earlier | None = None
) -> Found:
    """Solve every part, side by side on the threads allowed; an infeasible part ends the work early.

    What units did in an `earlier` schedule is where the search of a part begins, as far as it has a plan for each of
    them and the part allows it; a part that time leaves out has that at least.
    """
    solutions: dict[int, Solution] = {}
    is_over = _over(solutions, limits, watch)

    def one(number: int) -> None:
        part = choice.parts[number]
        effort = Effort(seed, 0.0, careful, plans_for(part, earlier))
        if is_over():
            solutions[number] = _in_hand(part, effort, limits, watch)
            return
        waiting = len(choice.parts) - len(solutions)
        share = limits.left_to_solve() * limits.threads / waiting
        effort = replace(effort, seconds=min(limits.left_to_solve(), LONGEST_SHARE * share))
        solutions[number] = solve_part(choice.method, part, limits, watch, effort)
        watch.progress("solving", len(solutions) / len(choice.parts))

    if limits.threads == 1 or len(choice.parts) == 1:
        for number in range(len(choice.parts)):
            one(number)
    else:
        with ThreadPoolExecutor(limits.threads, thread_name_prefix="part") as pool:
            for _ in pool.map(one, range(len(choice.parts))):
                pass
    found = Found(choice, tuple(solutions[number] for number in range(len(choice.parts))))
    return _closed(found, limits, watch, seed)


def solve_part(method: str, part: Instance, limits: Limits, watch: Watch, effort: Effort) -> Solution:
    """Solve one part by a method; where CP-SAT leaves no schedule in its share, the joint model has a go."""
    seed, seconds, earlier = effort.seed, effort.seconds, effort.earlier
    if method == "cp_sat" and not effort.careful:
        ends = limits.clock() + seconds
        found = solve_by_cp_sat(part, limits, watch, seed=seed, seconds=seconds * CP_SAT_SHARE, earlier=earlier)
        if found.plans is not None or found.stopped is Stopped.INFEASIBLE or watch.is_stop_asked():
            return found
        joint = solve_jointly(part, limits, watch, seed=seed, seconds=ends - limits.clock(), earlier=earlier)
        return replace(_better(found, joint), fell_back=True)
    return solve_jointly(part, limits, watch, seed=seed, seconds=seconds, everywhere=effort.careful, earlier=earlier)


def _over(solutions: dict[int, Solution], limits: Limits, watch: Watch) -> Callable[[], bool]:
    def is_over() -> bool:
        proven = any(solution.stopped is Stopped.INFEASIBLE for solution in list(solutions.values()))
        return proven or watch.is_stop_asked() or limits.left_to_solve() <= 0

    return is_over


def _in_hand(part: Instance, effort: Effort, limits: Limits, watch: Watch) -> Solution:
    """Give what an earlier schedule leaves of a part that is not searched, while there is time to look at it."""
    if effort.earlier is not None and limits.left_to_solve() <= 0 < limits.left_to_hand_over():
        return solve_jointly(part, limits, watch, seed=effort.seed, seconds=0.0, earlier=effort.earlier)
    return _nothing(limits)


def _nothing(limits: Limits) -> Solution:
    stopped = Stopped.OUT_OF_TIME if limits.left_to_solve() <= 0 else Stopped.INTERRUPTED
    return Solution(stopped, None, None, inf, 0.0, 0.0)


def _closed(found: Found, limits: Limits, watch: Watch, seed: int) -> Found:
    """Look again at the parts with the widest gaps while their sum is wider than the gap of the whole.

    Each part is solved to the gap asked for, but margins of opposite signs cancel in the sum they are measured by.
    """
    instance, gap = found.choice.parts[0], found.choice.parts[0].relative_gap
    for _ in range(SECOND_LOOKS):
        margins = [solution.margin for solution in found.solutions]
        if not found.has_schedule or is_within_gap(instance, sum(m for m in margins if m is not None), found.bound):
            return found
        gap /= TIGHTER
        found = _second_look(found, limits, watch, seed, gap)
    return found


def _second_look(found: Found, limits: Limits, watch: Watch, seed: int, gap: float) -> Found:
    solutions = list(found.solutions)
    widest = sorted(
        range(len(solutions)), key=lambda k: solutions[k].bound - (solutions[k].margin or 0.0), reverse=True
    )
    for number in widest:
        left = limits.left_to_solve()
        if left <= 0 or watch.is_stop_asked():
            break
        part = replace(found.choice.parts[number], relative_gap=gap, absolute_gap=0.0)
        again = solve_jointly(part, limits, watch, seed=seed, seconds=left)
        solutions[number] = _better(solutions[number], again)
        total = sum(solution.margin or 0.0 for solution in solutions)
        if is_within_gap(found.choice.parts[0], total, sum(solution.bound for solution in solutions)):
            break
    return Found(found.choice, tuple(solutions))


def _better(first: Solution, second: Solution) -> Solution:
    """Keep the better schedule and the tighter bound of two solves of the same part; a proof ends the matter."""
    if second.stopped is Stopped.INFEASIBLE:
        return second
    worse = second.margin is None or (first.margin is not None and first.margin >= second.margin)
    kept = first if worse else second
    return replace(
        kept,
        bound=min(first.bound, second.bound),
        build_seconds=first.build_seconds + second.build_seconds,
        solver_seconds=first.solver_seconds + second.solver_seconds,
    )
