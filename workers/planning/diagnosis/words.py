"""The sentence of a diagnosis: what is asked, what can be had, and what stands in the way, with numbers and units."""

from collections.abc import Iterable, Iterator, Sequence

import numpy as np

from workers.planning.diagnosis.attainable import Reached, is_ceiling, unit_of
from workers.planning.diagnosis.elements import Element
from workers.planning.diagnosis.localise import Conflict, Trouble
from workers.planning.diagnosis.scope import row_of
from workers.planning.flows import FlexibleLoadUnit, Need
from workers.planning.instance import Instance
from workers.planning.rows import CommitmentRow, HoursRow
from workers.planning.screening import screen
from workers.planning.store import Store, whole_intervals

MOST_SENTENCES = 6


def summary_of(troubles: Iterable[Trouble], reached: Sequence[Reached]) -> str:
    """Write a sentence per conflict, the first few of them."""
    sentences: list[str] = []
    for trouble in troubles:
        for conflict in trouble.conflicts:
            sentence = _sentence(trouble, conflict, reached)
            if sentence not in sentences:
                sentences.append(sentence)
    more = len(sentences) - MOST_SENTENCES
    shown = sentences[:MOST_SENTENCES]
    return " ".join([*shown, f"And {more} more."] if more > 0 else shown)


def _sentence(trouble: Trouble, conflict: Conflict, reached: Sequence[Reached]) -> str:
    """Say why a conflict is one: by arithmetic where that shows it, else by what stands against what."""
    had = _had(conflict, reached)
    alone = trouble.scope.without(frozenset(trouble.scope.elements) - conflict)
    if sentences := screen(alone):
        return " ".join([sentences[0], *had])
    members = [element for element in reversed(trouble.scope.elements) if element in conflict]
    if not members:
        return " ".join(["Even with everything asked left out there is no schedule.", *_physics(alone)])
    opening = "These cannot hold together" if len(members) > 1 else "This cannot be met"
    return " ".join([f"{opening}: {_listed(members)}.", *_physics(alone), *had])


def _physics(alone: Instance) -> Iterator[str]:
    """Quote what no schedule can escape, for what is left when a conflict stands alone."""
    yield from (text for row in alone.rows if row.price is None and (text := _energy(alone, row)))
    for unit in alone.units:
        if isinstance(unit, FlexibleLoadUnit):
            yield from (_draw(unit, need, alone.hours) for need in unit.needs)
    for meter in (*alone.meters, alone.fleet):
        if meter.lot_mw is not None:
            yield f"{meter.id} trades in lots of {meter.lot_mw:g} MW."
        if meter.is_limited and meter.load_mw.any():
            yield f"Loads at {meter.id} draw {meter.load_mw.min():.4g} to {meter.load_mw.max():.4g} MW."


def _draw(unit: FlexibleLoadUnit, need: Need, hours: float) -> str:
    most = float(unit.most_in_mw[list(need.intervals)].sum()) * hours
    return (
        f"{unit.id} draws nothing or at least {unit.min_draw_mw:g} MW in an interval of {hours:g} h, and at most "
        f"{most:.4g} MWh within its need of {need.energy_mwh:g} MWh."
    )


def _energy(instance: Instance, row: CommitmentRow) -> str | None:
    """Weigh the energy that hours of discharge take from a store against what it holds."""
    only = instance.units[row.units[0]] if row.asset is not None and row.units else None
    if not isinstance(row, HoursRow) or not isinstance(only, Store) or row.sign < 0:
        return None
    hours = instance.hours
    due = whole_intervals(row.due_hours, hours) * hours
    needed = due * row.threshold_mw / only.discharge_efficiency
    able = only.can_charge | only.can_discharge
    beside = max(0, int(able.sum()) - whole_intervals(row.due_hours, hours))
    charged = float(np.sort(only.most_in_mw)[::-1][:beside].sum()) * hours * only.charge_efficiency
    start = f"{only.initial_mwh:.4g} MWh" if not only.is_initial_free else f"up to {only.most_initial_mwh:.4g} MWh"
    return (
        f"{due:g} h at {row.threshold_mw:g} MW need {needed:.4g} MWh from {only.id}: it starts with {start}, holds at "
        f"most {only.ceiling_mwh.max():.4g} MWh, and in service for {able.sum() * hours:g} h it can charge for "
        f"{beside * hours:g} h beside, at most {charged:.4g} MWh."
    )


def _had(conflict: Conflict, reached: Sequence[Reached]) -> list[str]:
    """Say how far the rows of a conflict can be met."""
    return [_figure(one) for one in reached if row_of(one.row) in conflict and one.attainable != one.required]


def _figure(one: Reached) -> str:
    unit, whose = unit_of(one.row), f"{one.row.id}{one.row.where}"
    without = f", and that only without: {_listed(one.left_out)}" if one.left_out else ""
    if is_ceiling(one.row):
        return f"{whose} cannot be kept below {one.attainable:.6g} {unit}, and allows {one.required:g}{without}."
    return f"At most {one.attainable:.6g} of the {one.required:g} {unit} of {whose} can be had{without}."


def _listed(elements: Sequence[Element]) -> str:
    return "; ".join(element.text for element in elements)
