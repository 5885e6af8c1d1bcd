"""Whether something is possible at all, money aside: the question that a diagnosis asks over and over."""

from dataclasses import dataclass, field, replace
from math import inf

import numpy as np

from workers.planning.assembly import UnitPlan
from workers.planning.diagnosis import lone_store
from workers.planning.earlier import Earlier, plans_by_unit
from workers.planning.flows import FlexibleLoadUnit, RenewableUnit
from workers.planning.generator import GeneratorUnit
from workers.planning.instance import Instance, Meter
from workers.planning.joint import Solution, solve_jointly
from workers.planning.limits import Limits, Watch
from workers.planning.screening import screen
from workers.planning.solvers.ending import Stopped
from workers.planning.store import Store
from workers.planning.units import Floats, Unit

ANY_GAP = 1e9
"""Any schedule will do."""


class CutShort(Exception):  # noqa: N818 - it says that there is no time left, not that something went wrong
    """Time ran out, or the caller asked to stop, before a question was decided."""


@dataclass(frozen=True)
class Possible:
    """Whether something is possible, and what the units did where a solver found that out."""

    is_possible: bool
    plans: Earlier = field(default_factory=dict)


@dataclass
class Solving:
    """What a diagnosis may take: its limits, and until when it may ask solvers."""

    limits: Limits
    watch: Watch
    seed: int
    ends: float

    @property
    def seconds_left(self) -> float:
        """Seconds until the end; below zero there is none."""
        return self.ends - self.limits.clock()

    def until(self, share: float, most: float) -> "Solving":
        """Give a budget that ends after a share of what is left, or after so many seconds."""
        seconds = min(max(self.seconds_left, 0.0) * share, most)
        return replace(self, ends=self.limits.clock() + seconds)

    def solve(
        self,
        instance: Instance,
        most: float = inf,
        earlier: tuple[UnitPlan, ...] | None = None,
        *,
        is_plan: bool = False,
        any_will_do: bool = False,
    ) -> Solution:
        """Solve an instance, from `earlier` plans where given, with the time left or `most` seconds of it.

        A plan to be shown goes through Pyomo like any other. Raises CutShort where there is no time left.
        """
        self.require_time()
        seconds = min(self.seconds_left, most)
        return solve_jointly(
            instance,
            self.limits,
            self.watch,
            seed=self.seed,
            seconds=seconds,
            earlier=earlier,
            by_pyomo=is_plan,
            any_will_do=any_will_do,
        )

    def require_time(self) -> None:
        """Raise CutShort where there is no time left, or the caller asked to stop."""
        if self.seconds_left <= 0 or self.watch.is_stop_asked():
            raise CutShort("no time left")

    @staticmethod
    def cut_short() -> CutShort:
        """Say that a question is not decided."""
        return CutShort("neither a schedule nor a proof")

    @staticmethod
    def is_hopeless(instance: Instance) -> bool:
        """Tell whether arithmetic refuses an instance; where it does not, that says nothing."""
        return lone_store.is_possible(instance) is False or bool(screen(instance))

    def is_possible(self, instance: Instance) -> bool:
        """Tell whether an instance has any schedule; raises CutShort where time does not decide it."""
        return self.possible(instance).is_possible

    def possible(self, instance: Instance, most: float = inf) -> Possible:
        """Tell whether an instance has any schedule, and give one where a solver found it.

        Raises CutShort where the time left, or `most` seconds of it, does not decide it.
        """
        self.require_time()
        alone = lone_store.is_possible(instance)
        if alone is not None:
            return Possible(alone)
        if screen(instance):
            return Possible(False)
        if not instance.units and not instance.rows:
            return Possible(True)
        found = self.solve(without_money(instance), most, any_will_do=True)
        if found.plans is not None:
            return Possible(True, plans_by_unit(instance, found.plans))
        if found.stopped is Stopped.INFEASIBLE:
            return Possible(False)
        raise self.cut_short()


def without_money(instance: Instance, small: float = 1.0) -> Instance:
    """Drop all money and all priced rows; power flowing costs `small` per MWh, so that nothing is burned for nothing.

    One price at which charging costs and discharging wears more than it earns: no answer gains by doing both at once.
    """
    price = np.full(instance.intervals, small)
    nothing = np.zeros(instance.intervals)
    return replace(
        instance,
        buy=price,
        sell=price,
        units=tuple(_unpriced(unit, small) for unit in instance.units),
        meters=tuple(_without_fees(meter, nothing) for meter in instance.meters),
        fleet=replace(instance.fleet, position_mw=nothing),
        rows=tuple(row for row in instance.rows if row.price is None),
        products=tuple(replace(product, price_per_mw_per_hour=nothing) for product in instance.products),
        relative_gap=ANY_GAP,
        absolute_gap=0.0,
    )


def _without_fees(meter: Meter, nothing: Floats) -> Meter:
    return replace(
        meter,
        position_mw=nothing,
        export_fee_per_mwh=0.0,
        import_fee_per_mwh=0.0,
        peak_import_charge_per_mw=0.0,
    )


def _unpriced(unit: Unit, small: float) -> Unit:
    if isinstance(unit, Store):
        return replace(unit, wear_cost_per_mwh=2 * small, final_value_per_mwh=0.0)
    if isinstance(unit, GeneratorUnit):
        return replace(unit, constant_per_hour=0.0, linear_per_mwh=0.0, quadratic_per_mw2h=0.0, start_costs=())
    if isinstance(unit, RenewableUnit):
        return replace(unit, cost_per_mwh=0.0)
    assert isinstance(unit, FlexibleLoadUnit)
    return unit


def most_energy(instance: Instance) -> float:
    """Give the most energy that could flow in the window, MWh."""
    power = sum((unit.most_out_mw + unit.most_in_mw for unit in instance.units), np.zeros(instance.intervals))
    return float(power.sum()) * instance.hours
