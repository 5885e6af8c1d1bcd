"""Repairs: cures written as patches of the request, planned once more, and only then offered."""

from collections.abc import Iterator, Sequence

from schemas.diagnosis import Change, Repair
from workers.planning.diagnosis.again import Planner
from workers.planning.diagnosis.cures import Cure, Move, places
from workers.planning.diagnosis.feasibility import Solving
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
    tried: set[Joined],
) -> Iterator[Repair]:
    """Plan the request with each cure (one of every part that needs one) in place, but for those tried before.

    Raises CutShort.
    """
    if not cures or not all(cures):
        return
    document = document_of(question.job)
    for moves in _together(cures):
        joined = frozenset((move.lever.pointer, move.lever.unit, move.step) for move in moves)
        if joined in tried:
            continue
        tried.add(joined)
        values: Values = {}
        for move in moves:
            values |= move.values
        operations = patch_of(document, values)
        job = patched_job(document, operations)
        schedule = planner.plan(job.model_copy(update={"relative_gap": max(job.relative_gap, GAP)}), solving)
        if schedule is None or schedule.margin_bound is None:
            continue
        changes = [_change(move) for move in moves]
        yield Repair(
            text="; ".join(move.lever.words(move.step) for move in moves),
            change=changes[0],
            changes=changes,
            patch=operations,
            verified=True,
            margin=schedule.margin,
            margin_bound=schedule.margin_bound,
        )


def _together(cures: Sequence[Sequence[Cure]]) -> Iterator[list[Move]]:
    """Join one cure of every part: the first of each, then each further one of a part with those like it of the others.

    A commitment may bind assets of several parts: it is not eased by its hours in one and its threshold in another.
    """
    for wanted in [cures[0][0], *(cure for of_part in cures for cure in of_part[1:])][:MOST_REPAIRS]:
        chosen = [next((cure for cure in of_part if places(cure) == places(wanted)), of_part[0]) for of_part in cures]
        yield _joined(chosen)


def _joined(cures: Sequence[Cure]) -> list[Move]:
    """Put moves of several parts side by side; of two of the same lever the further one stays."""
    moves: dict[tuple[str, str], Move] = {}
    for move in (move for cure in cures for move in cure):
        place = (move.lever.pointer, move.lever.unit)
        if place not in moves or moves[place].step < move.step:
            moves[place] = move
    return list(moves.values())


def _change(move: Move) -> Change:
    lever = move.lever
    changed = {"from": lever.shown(0), "to": lever.shown(move.step)}
    return Change.model_validate({"lever": lever.name, "pointer": lever.pointer, "unit": lever.unit, **changed})
