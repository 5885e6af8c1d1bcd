"""Repairs: cures written as patches of the request, planned once more, and only then offered."""

from collections.abc import Collection, Iterator, Sequence

from schemas.diagnosis import Change, Repair
from workers.planning.diagnosis.again import Planner
from workers.planning.diagnosis.cures import Cure, Move
from workers.planning.diagnosis.feasibility import CutShort, Solving
from workers.planning.diagnosis.levers.lever import Values
from workers.planning.diagnosis.patches import document_of, patch_of, patched_job
from workers.planning.diagnosis.scope import Question

MOST_REPAIRS = 12

GAP = 0.005
"""A repair is planned to this gap or to the job's own, the wider: its margin and bound say how good it can be."""

Joined = frozenset[tuple[str, str, int]]
"""What is moved together: pointers with units, and steps."""


def repairs_of(
    question: Question,
    cures: Sequence[Sequence[Cure]],
    planner: Planner,
    solving: Solving,
    known: Collection[Joined],
) -> Iterator[tuple[Joined, Repair | None]]:
    """Plan the request with each cure (one of every part that needs one) in place, but for those known already.

    None stands for one that has no schedule. What the units did when the cure was found is the start. Raises CutShort
    when all were tried and time did not decide some.
    """
    if not cures or not all(cures):
        return
    document, undecided = document_of(question.job), False
    for chosen in _together(cures):
        moves = _joined(chosen)
        joined = frozenset(place_of(move) for move in moves)
        if joined in known:
            continue
        values: Values = {}
        for move in moves:
            values |= move.values
        operations = patch_of(document, values)
        job = patched_job(document, operations)
        earlier = {unit: plan for cure in chosen for unit, plan in cure.plans.items()}
        try:
            wide = job.model_copy(update={"relative_gap": max(job.relative_gap, GAP)})
            schedule = planner.plan(wide, solving, earlier)
        except CutShort:
            undecided = True
            continue
        if schedule is None or schedule.margin_bound is None:
            yield joined, None
            continue
        changes = [_change(move) for move in moves]
        yield (
            joined,
            Repair(
                text="; ".join(move.lever.words(move.step) for move in moves),
                change=changes[0],
                changes=changes,
                patch=operations,
                verified=True,
                margin=schedule.margin,
                margin_bound=schedule.margin_bound,
            ),
        )
    if undecided:
        raise solving.cut_short()


def place_of(move: Move) -> tuple[str, str, int]:
    """Name what is moved, and to which step."""
    return move.lever.pointer, move.lever.unit, move.step


def _together(cures: Sequence[Sequence[Cure]]) -> Iterator[list[Cure]]:
    """Join one cure of every part: the first of each, then each further one of a part with those like it of the others.

    A commitment may bind assets of several parts: it is not eased by its hours in one and its threshold in another.
    """
    for wanted in [cures[0][0], *(cure for of_part in cures for cure in of_part[1:])][:MOST_REPAIRS]:
        yield [next((cure for cure in of_part if cure.places == wanted.places), of_part[0]) for of_part in cures]


def _joined(cures: Sequence[Cure]) -> list[Move]:
    """Put moves of several parts side by side; of two of the same lever the further one stays."""
    moves: dict[tuple[str, str], Move] = {}
    for move in (move for cure in cures for move in cure.moves):
        place = (move.lever.pointer, move.lever.unit)
        if place not in moves or moves[place].step < move.step:
            moves[place] = move
    return list(moves.values())


def _change(move: Move) -> Change:
    lever = move.lever
    changed = {"from": lever.shown(0), "to": lever.shown(move.step)}
    return Change.model_validate({"lever": lever.name, "pointer": lever.pointer, "unit": lever.unit, **changed})
