"""Read the state of a store at the window's start, and what its energy may be from then on.

s[-1] = given energy, at most the capacity; the middle of its range where it is missing and may be assumed
floor[t]   = min_stored_mwh, or s[-1] * (1-f)^(h*(t+1)) where the store starts below it
ceiling[t] = max_stored_mwh, or s[-1] * (1-f)^(h*(t+1)) where the store starts above it and that is more
"""

from collections.abc import Sequence
from dataclasses import dataclass

from schemas.fleet import Storage
from schemas.job import Initial, OneWindow
from workers.planning.audit.clock import Clock
from workers.planning.audit.ledger import IDLE_MW


@dataclass(frozen=True)
class StartState:
    """A store at the window's start: energy inside it, the power of the interval before, how long that state lasted.

    `intervals_in_state` None: for longer than any rule asks. `is_held_out`: its energy is unknown and it is left alone.
    """

    stored_mwh: float
    power_mw: float
    intervals_in_state: int | None
    is_held_out: bool


def read_start(store: Storage, job: OneWindow, clock: Clock) -> StartState:
    """Return a store's state at the window's start; raise ValueError when it is unknown and must not be assumed."""
    initial = job.initial.get(store.id, Initial())
    power = initial.power_mw or 0.0
    hours = initial.hours_in_state
    passed = None if hours is None else clock.intervals_passed(hours)
    energy = _energy(store, initial)
    if energy is not None:
        return StartState(min(energy, store.energy_capacity_mwh), power, passed, is_held_out=False)
    middle = (store.min_stored_mwh + most_stored_mwh(store)) / 2
    if job.missing_initial == "assume_middle":
        return StartState(middle, power, passed, is_held_out=False)
    if job.missing_initial == "hold_out":
        return StartState(middle, 0.0, None, is_held_out=True)
    raise ValueError(f"the stored energy of {store.id} at the start is not given")


def _energy(store: Storage, initial: Initial) -> float | None:
    if initial.stored_mwh is not None:
        return initial.stored_mwh
    if initial.state_of_charge_percent is not None:
        return initial.state_of_charge_percent / 100 * store.energy_capacity_mwh
    return None


def direction_of(power_mw: float) -> int:
    """Return 1 for discharging, -1 for charging, 0 for idle."""
    if power_mw > IDLE_MW:
        return 1
    return -1 if power_mw < -IDLE_MW else 0


def most_stored_mwh(store: Storage) -> float:
    """Return the most a store should hold: its capacity where nothing less is said."""
    return store.energy_capacity_mwh if store.max_stored_mwh is None else store.max_stored_mwh


def kept_per_interval(store: Storage, hours: float) -> float:
    """Return the part of its energy that an idle store still holds after one interval."""
    return float((1.0 - store.self_discharge_per_hour) ** hours)


def idle_energy(store: Storage, start: StartState, clock: Clock, intervals: int) -> float:
    """Return the energy an idle store would hold after so many intervals, MWh."""
    return float(start.stored_mwh * kept_per_interval(store, clock.hours) ** intervals)


def floor_mwh(store: Storage, start: StartState, clock: Clock) -> float | Sequence[float]:
    """Return the least that must be stored at the end of each interval; one number where it is the same in all."""
    least = store.min_stored_mwh
    if start.stored_mwh >= least and not start.is_held_out:
        return least
    return [min(least, idle_energy(store, start, clock, t + 1)) for t in range(clock.count)]


def ceiling_mwh(store: Storage, start: StartState, clock: Clock) -> float | Sequence[float]:
    """Return the most that may be stored at the end of each interval; one number where it is the same in all."""
    most = most_stored_mwh(store)
    if start.stored_mwh <= most:
        return most
    return [max(most, idle_energy(store, start, clock, t + 1)) for t in range(clock.count)]


def final_target_mwh(store: Storage, start: StartState, job: OneWindow, clock: Clock) -> float | None:
    """Return the least a store must hold at the end; None for a store that is held out."""
    if start.is_held_out:
        return None
    target = job.targets.get(store.id)
    if target is not None and target.final_stored_mwh is not None:
        return target.final_stored_mwh
    return idle_energy(store, start, clock, clock.count)
