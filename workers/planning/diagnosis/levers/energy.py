"""Levers of stored energy: a lower final target; more, or less, at the start where a job allows that."""

from collections.abc import Iterator
from functools import partial

from schemas.fleet import Storage
from schemas.job import ScheduleJob, Target
from workers.planning.diagnosis.elements import Element
from workers.planning.diagnosis.levers.lever import Grid, Lever, Values
from workers.planning.diagnosis.scope import Scope
from workers.planning.store import Store


def of_target(scope: Scope, element: Element) -> Iterator[Lever]:
    """Give the lever of a final target: a lower one."""
    asset, grid = element.subject, Grid(_store(scope, element.subject).final_floor_mwh, 0.0)

    def apply(job: ScheduleJob, step: int) -> ScheduleJob:
        return with_target(job, asset, grid.at(step))

    def values(step: int) -> Values:
        return {element.pointer: grid.at(step)}

    def words(step: int) -> str:
        return f"{asset}: end with {grid.at(step):g} MWh instead of {grid.now:.6g}"

    yield Lever("targets", element.pointer, "MWh", grid.steps, frozenset({element}), apply, values, grid.at, words)


def of_initial_energy(scope: Scope, element: Element) -> Iterator[Lever]:
    """Give the levers of initial energy: more of it, or less; nothing where the request does not know it."""
    store = _store(scope, element.subject)
    if element.subject in scope.job.initial:
        free = store.with_any_initial_energy(_asset(scope, element.subject))
        yield _initial(scope, element, store, Grid(store.initial_mwh, max(store.initial_mwh, free.most_initial_mwh)))
        yield _initial(scope, element, store, Grid(store.initial_mwh, min(store.initial_mwh, free.least_initial_mwh)))


def _initial(scope: Scope, element: Element, store: Store, grid: Grid) -> Lever:
    """Give one direction; a final target that is only the default stays the number it was."""
    asset, state = element.subject, f"/initial/{element.subject}"
    given = scope.job.targets.get(asset)
    is_default = given is None or given.final_stored_mwh is None
    keep = partial(with_target, asset=asset, final_mwh=store.final_floor_mwh)

    def apply(job: ScheduleJob, step: int) -> ScheduleJob:
        known = {"stored_mwh": grid.at(step), "state_of_charge_percent": None}
        changed = job.model_copy(
            update={"initial": {**job.initial, asset: job.initial[asset].model_copy(update=known)}}
        )
        return keep(changed) if is_default else changed

    def values(step: int) -> Values:
        known: Values = {f"{state}/stored_mwh": grid.at(step), f"{state}/state_of_charge_percent": None}
        return known | ({f"/targets/{asset}/final_stored_mwh": store.final_floor_mwh} if is_default else {})

    def words(step: int) -> str:
        return f"{asset}: start with {grid.at(step):g} MWh instead of {grid.now:.6g}"

    pointer = f"{state}/stored_mwh"
    return Lever("initial_energy", pointer, "MWh", grid.steps, frozenset({element}), apply, values, grid.at, words)


def with_target(job: ScheduleJob, asset: str, final_mwh: float) -> ScheduleJob:
    """Give a job with another final target for one store."""
    target = job.targets.get(asset, Target()).model_copy(update={"final_stored_mwh": final_mwh})
    return job.model_copy(update={"targets": {**job.targets, asset: target}})


def _store(scope: Scope, asset: str) -> Store:
    return next(store for store in scope.instance.stores if store.id == asset)


def _asset(scope: Scope, asset: str) -> Storage:
    assets = scope.job.fleet.assets if scope.job.fleet else []
    return next(known for known in assets if isinstance(known, Storage) and known.id == asset)
