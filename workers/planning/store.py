"""A store as the models see it: limits per interval, state at the start, what a day may hold."""

from dataclasses import dataclass, replace
from math import ceil, floor

import numpy as np

from schemas.calendar import Calendar
from schemas.fleet import Storage
from schemas.job import OneWindow
from workers.planning.availability import Availability
from workers.planning.units import IDLE_MW, Booleans, Floats, OutOfService, outages_of, products_of


@dataclass(frozen=True)
class DayAllowance:
    """What a local day still allows: MWh discharged, or runs begun, in these intervals."""

    intervals: range
    amount: float


@dataclass(frozen=True)
class Store:
    """A store in arrays of T values; powers at the terminals in MW, energies inside it in MWh.

    `kept` is the share of stored energy left after one interval, `ramp_mw` the largest change of net power from
    one interval to the next (None: unlimited), binding into the intervals `ramp_binds`. `direction_before` is +1,
    0 or -1 for discharging, idle, charging before the window; `held_intervals` how many of the first intervals
    that run, or that rest, must still last. Set by a diagnosis alone: `is_initial_free` leaves open with what energy it
    starts, `target_price` is what a MWh short of the final target costs (None: it binds).
    """

    id: str
    discharge_limit_mw: Floats
    charge_limit_mw: Floats
    min_discharge_mw: float
    min_charge_mw: float
    rated_discharge_mw: float
    rated_charge_mw: float
    floor_mwh: Floats
    ceiling_mwh: Floats
    initial_mwh: float
    final_floor_mwh: float
    final_value_per_mwh: float
    kept: float
    charge_efficiency: float
    discharge_efficiency: float
    standby_load_mw: float
    wear_cost_per_mwh: float
    discharge_allowances: tuple[DayAllowance, ...]
    start_allowances: tuple[DayAllowance, ...]
    ramp_mw: float | None
    ramp_binds: Booleans
    power_before_mw: float
    min_run: int
    min_rest: int
    direction_before: int
    held_intervals: int
    outages: tuple[OutOfService, ...] = ()
    products: tuple[int, ...] = ()
    is_initial_free: bool = False
    target_price: float | None = None

    @property
    def least_initial_mwh(self) -> float:
        """Least energy it may start with, MWh; what it has, unless a diagnosis leaves that open."""
        return float(self.floor_mwh[0]) if self.is_initial_free else self.initial_mwh

    @property
    def most_initial_mwh(self) -> float:
        """Most energy it may start with, MWh."""
        return float(self.ceiling_mwh[0]) if self.is_initial_free else self.initial_mwh

    @property
    def can_discharge(self) -> Booleans:
        """Intervals in which at least the minimum power can be discharged."""
        limit = self.discharge_limit_mw
        possible: Booleans = (limit > IDLE_MW) & (limit >= self.min_discharge_mw - 1e-9)
        return possible

    @property
    def can_charge(self) -> Booleans:
        """Intervals in which at least the minimum power can be charged."""
        limit = self.charge_limit_mw
        possible: Booleans = (limit > IDLE_MW) & (limit >= self.min_charge_mw - 1e-9)
        return possible

    @property
    def most_out_mw(self) -> Floats:
        """Most that can be discharged, MW per interval."""
        return self.discharge_limit_mw * self.can_discharge

    @property
    def most_in_mw(self) -> Floats:
        """Most that can be charged, MW per interval."""
        return self.charge_limit_mw * self.can_charge

    @property
    def has_states(self) -> bool:
        """Tell whether being on matters: minimum powers, run and rest times, starts."""
        return (
            self.min_discharge_mw > 0
            or self.min_charge_mw > 0
            or self.min_run > 1
            or self.min_rest > 0
            or bool(self.start_allowances)
        )

    @property
    def is_lossless(self) -> bool:
        """Tell whether charging and discharging at once would change nothing but wear."""
        return self.charge_efficiency * self.discharge_efficiency == 1.0

    def with_any_initial_energy(self, asset: Storage) -> "Store":
        """Let it start with any energy between its floor and its ceiling, neither of them widened."""
        count = len(self.floor_mwh)
        floor, ceiling = np.full(count, asset.min_stored_mwh), np.full(count, _ceiling(asset))
        return replace(self, floor_mwh=floor, ceiling_mwh=ceiling, is_initial_free=True)


def whole_intervals(hours: float, interval_hours: float) -> int:
    """Round a time up to whole intervals."""
    return ceil(hours / interval_hours - 1e-9)


def initial_energy(job: OneWindow, asset: Storage) -> float:
    """Give the stored energy at the window's start, MWh; the middle of its range where nothing is known."""
    state = job.initial.get(asset.id)
    if state is None:
        return (asset.min_stored_mwh + _ceiling(asset)) / 2
    if state.stored_mwh is not None:
        stored = state.stored_mwh
    else:
        stored = (state.state_of_charge_percent or 0.0) / 100 * asset.energy_capacity_mwh
    return min(stored, asset.energy_capacity_mwh)


def store_of(job: OneWindow, asset: Storage, calendar: Calendar, available: Availability | None) -> Store:
    """Index one storage asset; `available` is what its outages leave, None where it has none."""
    count, hours = calendar.count, calendar.hours
    held_out = job.missing_initial == "hold_out" and asset.id not in job.initial
    kept = (1 - asset.self_discharge_per_hour) ** hours
    stored = initial_energy(job, asset)
    idle = stored * kept ** np.arange(1, count + 1)
    lowest, highest = asset.min_stored_mwh, _ceiling(asset)
    target = job.targets.get(asset.id)
    final = target.final_stored_mwh if target and target.final_stored_mwh is not None else float(idle[-1])
    value = (target.final_value_per_mwh or 0.0) if target else 0.0
    share = 0.0 if held_out else 1.0
    direction, elapsed, before = _state_before(job, asset.id)
    min_run, min_rest = whole_intervals(asset.min_run_hours, hours), whole_intervals(asset.min_rest_hours, hours)
    return Store(
        id=asset.id,
        discharge_limit_mw=_left(asset.discharge_limit_mw * share, available.discharge if available else None, count),
        charge_limit_mw=_left(asset.charge_limit_mw * share, available.charge if available else None, count),
        min_discharge_mw=asset.min_discharge_mw,
        min_charge_mw=asset.min_charge_mw,
        rated_discharge_mw=asset.discharge_limit_mw,
        rated_charge_mw=asset.charge_limit_mw,
        floor_mwh=np.minimum(lowest, idle) if stored < lowest or held_out else np.full(count, lowest),
        ceiling_mwh=np.maximum(highest, idle) if stored > highest else np.full(count, highest),
        initial_mwh=stored,
        final_floor_mwh=0.0 if held_out else final,
        final_value_per_mwh=0.0 if held_out else value,
        kept=kept,
        charge_efficiency=asset.charge_efficiency,
        discharge_efficiency=asset.discharge_efficiency,
        standby_load_mw=asset.standby_load_mw,
        wear_cost_per_mwh=asset.wear_cost_per_mwh,
        discharge_allowances=_discharge_allowances(job, asset, calendar),
        start_allowances=_start_allowances(job, asset, calendar),
        ramp_mw=None if asset.ramp_mw_per_hour is None else asset.ramp_mw_per_hour * hours,
        ramp_binds=np.full(count, not held_out) if available is None else ~available.is_lowered & (not held_out),
        power_before_mw=before,
        min_run=max(1, min_run),
        min_rest=min_rest,
        direction_before=direction,
        held_intervals=_held(min_run if direction else min_rest, elapsed, hours),
        outages=outages_of(job, asset.id, calendar) if available is not None else (),
        products=() if held_out else products_of(job, asset.reserve_products),
    )


def _ceiling(asset: Storage) -> float:
    return asset.energy_capacity_mwh if asset.max_stored_mwh is None else asset.max_stored_mwh


def _left(limit: float, fraction: Floats | None, count: int) -> Floats:
    return np.full(count, limit, dtype=float) if fraction is None else limit * fraction


def _state_before(job: OneWindow, asset: str) -> tuple[int, float, float]:
    """Give direction, hours in it (infinite by default) and net power of the interval before the window."""
    state = job.initial.get(asset)
    power = state.power_mw if state is not None and state.power_mw is not None else 0.0
    elapsed = state.hours_in_state if state is not None and state.hours_in_state is not None else np.inf
    direction = 0 if abs(power) <= IDLE_MW else (1 if power > 0 else -1)
    return direction, elapsed, power


def _held(needed: int, elapsed: float, hours: float) -> int:
    if not np.isfinite(elapsed):
        return 0
    return max(0, needed - floor(elapsed / hours + 1e-9))


def _discharge_allowances(job: OneWindow, asset: Storage, calendar: Calendar) -> tuple[DayAllowance, ...]:
    if asset.max_cycles_per_day is None:
        return ()
    counted = job.counted_before.assets.get(asset.id)
    before = counted.discharged_mwh if counted else 0.0
    return _allowances(calendar, asset.max_cycles_per_day * asset.energy_capacity_mwh, before)


def _start_allowances(job: OneWindow, asset: Storage, calendar: Calendar) -> tuple[DayAllowance, ...]:
    if asset.max_starts_per_day is None:
        return ()
    counted = job.counted_before.assets.get(asset.id)
    return _allowances(calendar, float(asset.max_starts_per_day), float(counted.starts) if counted else 0.0)


def _allowances(calendar: Calendar, amount: float, before: float) -> tuple[DayAllowance, ...]:
    """Give each day its allowance; what the first day has used up is gone, and no day owes any back."""
    return tuple(
        DayAllowance(members, max(0.0, amount - (before if order == 0 else 0.0)))
        for order, (_, members) in enumerate(calendar.day_ranges)
    )
