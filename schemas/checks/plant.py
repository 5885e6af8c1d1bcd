"""Sites and assets: figures that contradict one another."""

from collections.abc import Iterator

from schemas.checks.request import IDLE_MW, Request, Steps, fault
from schemas.fleet import FlexibleLoad, Generator, Storage
from schemas.problems import Fault


def faults(request: Request) -> Iterator[Fault]:
    """Name what no plant can be: a minimum above its maximum, a rule that cannot be kept, a site that is not there."""
    if request.fleet is None:
        return
    for position, asset in enumerate(request.fleet.assets):
        steps = ("fleet", "assets", position)
        if asset.site is not None and asset.site not in request.sites:
            yield fault("unknown-reference", f"there is no site `{asset.site}`", *steps, "site")
        if isinstance(asset, Storage):
            yield from _storage(asset, steps)
        elif isinstance(asset, Generator):
            yield from _at_most(asset, "min_output_mw", "max_output_mw", steps)
            yield from _start_costs(asset, steps)
        elif isinstance(asset, FlexibleLoad):
            yield from _at_most(asset, "min_draw_mw", "draw_limit_mw", steps)
            if not asset.interruptible and asset.min_draw_mw <= IDLE_MW:
                detail = "a load that cannot be interrupted needs `min_draw_mw` above 0"
                yield fault("inconsistent", detail, *steps, "interruptible")


def _storage(store: Storage, steps: Steps) -> Iterator[Fault]:
    yield from _at_most(store, "min_discharge_mw", "discharge_limit_mw", steps)
    yield from _at_most(store, "min_charge_mw", "charge_limit_mw", steps)
    yield from _at_most(store, "max_stored_mwh", "energy_capacity_mwh", steps)
    highest = "energy_capacity_mwh" if store.max_stored_mwh is None else "max_stored_mwh"
    yield from _at_most(store, "min_stored_mwh", highest, steps)
    needed = _minimum_power_needed(store)
    if needed is None:
        return
    asked = {
        "min_run_hours": store.min_run_hours > 0,
        "min_rest_hours": store.min_rest_hours > 0,
        "max_starts_per_day": store.max_starts_per_day is not None,
    }
    for name in (name for name, is_asked in asked.items() if is_asked):
        yield fault(
            "inconsistent", f"needs `{needed}` above 0: without it nobody can say when a run begins", *steps, name
        )


def _minimum_power_needed(store: Storage) -> str | None:
    """Name a direction in which the store can run at any power, however small."""
    if store.discharge_limit_mw > IDLE_MW >= store.min_discharge_mw:
        return "min_discharge_mw"
    if store.charge_limit_mw > IDLE_MW >= store.min_charge_mw:
        return "min_charge_mw"
    return None


def _at_most(asset: object, minimum: str, maximum: str, steps: Steps) -> Iterator[Fault]:
    low, high = getattr(asset, minimum), getattr(asset, maximum)
    if low is not None and low > high:
        yield fault("inconsistent", f"{low:.10g} is above `{maximum}`, {high:.10g}", *steps, minimum)


def _start_costs(generator: Generator, steps: Steps) -> Iterator[Fault]:
    hours, cost = None, 0.0
    for position, entry in enumerate(generator.start_costs):
        place = (*steps, "start_costs", position)
        if hours is None and entry.after_hours_off != 0:
            yield fault("inconsistent", "the first start cost holds from 0 hours off", *place, "after_hours_off")
        elif hours is not None and entry.after_hours_off <= hours:
            yield fault("inconsistent", "`after_hours_off` must ascend", *place, "after_hours_off")
        if entry.cost < cost:
            yield fault("inconsistent", "the cost of a start cannot fall with the hours off", *place, "cost")
        hours, cost = entry.after_hours_off, entry.cost
