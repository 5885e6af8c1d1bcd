"""The audit bites for every kind: a fault planted in the indexing of generators, flows, rows or reserve is refused.

As in `test_planted_faults`, the planner solves the wrong problem and the audit, which shares no code with it, refuses
the answer. Faults that only ask for too much are not among them: the plan they lead to is sound and merely dearer, or
is refused; rule tests and the agreement with the oracle find those.
"""

from collections.abc import Callable
from dataclasses import replace

import numpy as np
import pytest

from tests.workers.planning.fault_jobs import (
    AT_THE_METER,
    BACKED,
    BLOCKED,
    BOTH_WAYS,
    BROKEN_UP,
    CAPPED,
    CAPPED_LATE,
    CEILING,
    COLD,
    COSTLY,
    DUE,
    FALLING,
    FIRM,
    FORCED_SUN,
    HALF_OUT,
    HELD,
    KEPT_DOWN,
    KEPT_UP,
    LASTING,
    OUT_AND_BACK,
    PAUSING,
    PRICED,
    PUMPS,
    RISING,
    SPARE,
    SUNNY,
    TOKYO,
    USED_UP,
    Change,
    Document,
    caught,
    paid,
    planted,
    pumping,
    resting,
    running,
)
from tests.workers.planning.jobs import (
    generator,
    job,
    outage,
    planned,
)
from workers.planning.flows import FlexibleLoadUnit, Need, RenewableUnit
from workers.planning.generator import GeneratorUnit
from workers.planning.instance import Instance
from workers.planning.reserve import Product
from workers.planning.rows import CeilingRow, EnergyRow, FirmRow, HoldingRow


def with_units(found: Instance, kind: type, change: Change) -> Instance:
    return replace(found, units=tuple(change(unit) if isinstance(unit, kind) else unit for unit in found.units))


def with_rows(found: Instance, kind: type, change: Change) -> Instance:
    return replace(found, rows=tuple(change(row) if isinstance(row, kind) else row for row in found.rows))


GENERATORS: dict[str, tuple[Change, Document]] = {
    "the minimum output forgotten": (
        lambda g: replace(g, min_output_mw=0.0),
        job([9.0], generator(cost={"linear_per_mwh": 8.0, "quadratic_per_mw2h": 1.0})),
    ),
    "an outage forgotten": (lambda g: replace(g, limit_mw=np.full_like(g.limit_mw, 4.0)), HALF_OUT),
    "an outage one interval late": (lambda g: replace(g, limit_mw=np.roll(g.limit_mw, 1)), HALF_OUT),
    "the constant cost forgotten": (lambda g: replace(g, constant_per_hour=0.0), COSTLY),
    "the linear cost halved": (lambda g: replace(g, linear_per_mwh=g.linear_per_mwh / 2), COSTLY),
    "the square forgotten": (lambda g: replace(g, quadratic_per_mw2h=0.0), COSTLY),
    "start costs forgotten": (lambda g: replace(g, start_costs=()), COLD),
    "every start taken for a hot one": (lambda g: replace(g, start_costs=g.start_costs[:1]), COLD),
    "hours off forgotten": (lambda g: replace(g, hours_off=0.0), COLD),
    "a cold start one hour late": (
        lambda g: replace(g, start_costs=tuple((after + 1 if after else 0.0, cost) for after, cost in g.start_costs)),
        resting(COLD, hours_in_state=3),
    ),
    "a run taken for under way": (lambda g: replace(g, was_on=True), COLD),
    "the least up time one short": (lambda g: replace(g, min_up=g.min_up - 1), LASTING),
    "the least down time one short": (lambda g: replace(g, min_down=g.min_down - 1), PAUSING),
    "the run before the window forgotten": (lambda g: replace(g, held_intervals=0), KEPT_UP),
    "the run before the window one short": (lambda g: replace(g, held_intervals=g.held_intervals - 1), KEPT_UP),
    "the rest before the window forgotten": (lambda g: replace(g, held_intervals=0), KEPT_DOWN),
    "the ramp up per hour taken for one per interval": (lambda g: replace(g, ramp_up_mw=g.ramp_up_mw * 4), RISING),
    "the ramp down per hour taken for one per interval": (
        lambda g: replace(g, ramp_down_mw=g.ramp_down_mw * 4),
        FALLING,
    ),
    "ramps the wrong way round": (
        lambda g: replace(g, ramp_up_mw=g.ramp_down_mw, ramp_down_mw=g.ramp_up_mw),
        running(job([10.0], generator(ramp_up_mw_per_hour=0.5, ramp_down_mw_per_hour=2.0))),
    ),
    "output before the window taken for the most": (lambda g: replace(g, output_before_mw=4.0), RISING),
    "ramps that do not bind out of an outage": (
        lambda g: replace(g, ramp_binds=np.array([True, False, False])),
        OUT_AND_BACK,
    ),
    "reserve of products it may not hold": (lambda g: replace(g, products=(0,)), SPARE),
}


@pytest.mark.parametrize("fault", GENERATORS)
def test_a_generator_indexed_wrongly_is_caught(fault: str, monkeypatch: pytest.MonkeyPatch) -> None:
    change, document = GENERATORS[fault]
    planned(document)
    planted(monkeypatch, lambda found: with_units(found, GeneratorUnit, change))
    caught(document)


def moved(load: FlexibleLoadUnit, first: int = 0, end: int = 0, energy: float = 0.0) -> FlexibleLoadUnit:
    [need] = load.needs
    intervals = range(need.intervals.start + first, need.intervals.stop + end)
    return replace(load, needs=(Need(intervals, need.energy_mwh + energy),))


FLOWS: dict[str, tuple[Change, Document]] = {
    "a forecast without its outage": (lambda u: replace(u, available_mw=np.array([1.0, 3.0])), SUNNY),
    "a forecast shifted by an interval": (lambda u: replace(u, available_mw=np.roll(u.available_mw, 1)), SUNNY),
    "the cost of output forgotten": (lambda u: replace(u, cost_per_mwh=0.0), SUNNY),
    "what cannot be curtailed held back": (lambda u: replace(u, curtailable=True), FORCED_SUN),
    "a draw limit without its outage": (
        lambda u: replace(u, limit_mw=np.full_like(u.limit_mw, 2.0)),
        pumping([10.0, 30.0], 0, 2, 2.0, outages=[outage(PUMPS, 0, 1, 0.5)]),
    ),
    "the minimum draw forgotten": (
        lambda u: replace(u, min_draw_mw=0.0),
        pumping([10.0, 30.0], 0, 2, 2.5, min_draw_mw=1.0),
    ),
    "a stretch that may not be broken up broken up": (lambda u: replace(u, interruptible=True), BROKEN_UP),
    "a need with one interval too many at its end": (
        lambda u: moved(u, end=1),
        pumping([30.0, 10.0], 0, 1, 1.0),
    ),
    "a need with one interval too many at its start": (
        lambda u: moved(u, first=-1),
        pumping([10.0, 30.0], 1, 2, 1.0),
    ),
    "a need a little short": (lambda u: moved(u, energy=-0.01), pumping([10.0, 30.0], 0, 2, 1.0)),
    "a need forgotten": (lambda u: replace(u, needs=()), pumping([10.0, 30.0], 0, 2, 1.0)),
}


@pytest.mark.parametrize("fault", FLOWS)
def test_a_renewable_or_a_flexible_load_indexed_wrongly_is_caught(fault: str, monkeypatch: pytest.MonkeyPatch) -> None:
    change, document = FLOWS[fault]
    planned(document)
    planted(monkeypatch, lambda found: with_units(with_units(found, RenewableUnit, change), FlexibleLoadUnit, change))
    caught(document)


ROWS: dict[str, tuple[type, Change, Document]] = {
    "headroom added to a ceiling instead of taken off": (
        CeilingRow,
        lambda r: replace(r, threshold_mw=r.threshold_mw + 0.5),
        CEILING,
    ),
    "an hour more allowed": (CeilingRow, lambda r: replace(r, allowed_hours=r.allowed_hours + 1), CEILING),
    "hours counted before forgotten": (CeilingRow, lambda r: replace(r, allowed_hours=1.0), USED_UP),
    "everything excused under a ceiling": (
        CeilingRow,
        lambda r: replace(r, excused=frozenset(r.intervals)),
        CEILING,
    ),
    "a ceiling in the wrong direction": (CeilingRow, lambda r: replace(r, sign=-r.sign), CEILING),
    "power due an interval late": (FirmRow, lambda r: replace(r, due_mw=np.roll(r.due_mw, 1)), FIRM),
    "power due a little short": (FirmRow, lambda r: replace(r, due_mw=r.due_mw * 0.99), FIRM),
    "power due excused": (FirmRow, lambda r: replace(r, excused=frozenset(r.intervals)), FIRM),
    "a binding row taken for a priced one": (FirmRow, lambda r: replace(r, price=1.0), FIRM),
    "a shortfall price forgotten": (FirmRow, lambda r: replace(r, price=0.0), PRICED),
    "the load of a sum forgotten": (FirmRow, lambda r: replace(r, load_mw=np.zeros_like(r.load_mw)), AT_THE_METER),
    "energy due a little short": (EnergyRow, lambda r: replace(r, energy_mwh=r.energy_mwh - 0.01), DUE),
    "a floor taken for a cap": (EnergyRow, lambda r: replace(r, at_least=False), DUE),
    "a cap taken for a floor": (EnergyRow, lambda r: replace(r, at_least=True), CAPPED),
    "a cap a little high": (EnergyRow, lambda r: replace(r, energy_mwh=r.energy_mwh + 0.01), CAPPED),
    "a cap in the wrong direction": (EnergyRow, lambda r: replace(r, sign=-r.sign), CAPPED),
    "a cap over the wrong hours": (EnergyRow, lambda r: replace(r, intervals=(1,)), CAPPED_LATE),
    "another product held": (HoldingRow, lambda r: replace(r, product=1), HELD),
    "reserve due a little short": (HoldingRow, lambda r: replace(r, due_mw=r.due_mw * 0.99), HELD),
    "reserve due in fewer hours": (HoldingRow, lambda r: replace(r, intervals=(0,)), HELD),
}


@pytest.mark.parametrize("fault", ROWS)
def test_a_commitment_indexed_wrongly_is_caught(fault: str, monkeypatch: pytest.MonkeyPatch) -> None:
    kind, change, document = ROWS[fault]
    planned(document)
    planted(monkeypatch, lambda found: with_rows(found, kind, change))
    caught(document)


RESERVE: dict[str, tuple[Callable[[Product], Product], Document]] = {
    "minutes taken for hours the wrong way": (lambda p: replace(p, sustain_hours=p.sustain_hours / 60), BACKED),
    "how long it lasts forgotten": (lambda p: replace(p, sustain_hours=0.0), BACKED),
    "a price too high": (lambda p: replace(p, price_per_mw_per_hour=p.price_per_mw_per_hour * 2), BACKED),
    "a price too low": (lambda p: replace(p, price_per_mw_per_hour=p.price_per_mw_per_hour / 2), BACKED),
    "up taken for down": (lambda p: replace(p, up=False, down=True), paid([9.0], generator())),
    "symmetric taken for up": (lambda p: replace(p, down=False), BOTH_WAYS),
    "blocks forgotten": (lambda p: replace(p, block=np.arange(len(p.block))), BLOCKED),
    "blocks an interval late": (lambda p: replace(p, block=np.array([0, 1, 1])), BLOCKED),
    "blocks from midnight UTC": (lambda p: replace(p, block=np.array([0, 1, 2])), TOKYO),
}


@pytest.mark.parametrize("fault", RESERVE)
def test_a_reserve_product_indexed_wrongly_is_caught(fault: str, monkeypatch: pytest.MonkeyPatch) -> None:
    change, document = RESERVE[fault]
    planned(document)
    planted(monkeypatch, lambda found: replace(found, products=tuple(change(entry) for entry in found.products)))
    caught(document)
