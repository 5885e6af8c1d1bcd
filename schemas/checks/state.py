"""The state of the plant at the window's start, and what it should hold at the end."""

from collections.abc import Iterator

from schemas.checks.request import IDLE_MW, Request, fault
from schemas.fleet import Asset, Generator, Storage
from schemas.job import Initial
from schemas.problems import Fault

ABOVE_RATING = 1.02
"""What a meter may read above a rating: 2 %. The contract says so of energy; powers are given the same."""

MEMBERS_BY_KIND = {
    "storage": {"stored_mwh", "state_of_charge_percent", "power_mw", "hours_in_state"},
    "generator": {"on", "output_mw", "hours_in_state"},
}
_ROUNDING = 1 + 1e-9


def faults(request: Request) -> Iterator[Fault]:
    """Name states that are missing, of the wrong kind or beyond the plant, and targets no store can hold."""
    if request.fleet is None:
        return
    for name, initial in request.job.initial.items():
        asset = request.assets.get(name)
        if asset is None:
            yield fault("unknown-reference", f"there is no asset `{name}`", "initial", name)
        else:
            yield from _initial(asset, initial)
    yield from _missing(request)
    yield from _targets(request)


def _initial(asset: Asset, initial: Initial) -> Iterator[Fault]:
    steps = ("initial", asset.id)
    fitting = MEMBERS_BY_KIND.get(asset.kind)
    if fitting is None:
        yield fault("wrong-kind", f"an asset of kind `{asset.kind}` has no state at the start", *steps)
        return
    for member in Initial.model_fields:
        if member not in fitting and getattr(initial, member) is not None:
            detail = f"says nothing about an asset of kind `{asset.kind}`"
            yield fault("wrong-kind", detail, *steps, member)
    if isinstance(asset, Storage):
        yield from _store(asset, initial)
    elif isinstance(asset, Generator):
        yield from _generator(asset, initial)


def _store(store: Storage, initial: Initial) -> Iterator[Fault]:
    steps = ("initial", store.id)
    if (initial.stored_mwh is None) == (initial.state_of_charge_percent is None):
        detail = "exactly one of `stored_mwh` and `state_of_charge_percent` is required"
        yield fault("exactly-one", detail, *steps)
    capacity = store.energy_capacity_mwh
    if initial.stored_mwh is not None and initial.stored_mwh > ABOVE_RATING * _ROUNDING * capacity:
        detail = f"more than 2 % above the capacity of {capacity:.10g} MWh"
        yield fault("out-of-range", detail, *steps, "stored_mwh")
    power = initial.power_mw or 0.0
    limit, rating = ("discharge", store.discharge_limit_mw) if power > 0 else ("charge", store.charge_limit_mw)
    if abs(power) > ABOVE_RATING * rating + IDLE_MW:
        yield fault("out-of-range", f"beyond `{limit}_limit_mw`, {rating:.10g}", *steps, "power_mw")


def _generator(generator: Generator, initial: Initial) -> Iterator[Fault]:
    steps = ("initial", generator.id)
    if initial.on is None:
        yield fault("missing", "whether the generator is on is required", *steps, "on")
    output = initial.output_mw or 0.0
    if initial.on is False and output > IDLE_MW:
        yield fault("inconsistent", "a generator that is off has no output", *steps, "output_mw")
    if output > ABOVE_RATING * generator.max_output_mw + IDLE_MW:
        detail = f"beyond `max_output_mw`, {generator.max_output_mw:.10g}"
        yield fault("out-of-range", detail, *steps, "output_mw")


def _missing(request: Request) -> Iterator[Fault]:
    job = request.job
    settled_otherwise = job.missing_initial != "refuse" or job.initial_from_job_id is not None
    if settled_otherwise or request.unread & {"initial", "missing_initial", "initial_from_job_id"}:
        return
    for name, asset in request.assets.items():
        if isinstance(asset, Storage) and name not in job.initial:
            yield fault("missing", f"the state of the store `{name}` at the start is required", "initial", name)


def _targets(request: Request) -> Iterator[Fault]:
    for name, target in request.job.targets.items():
        asset = request.assets.get(name)
        if asset is None:
            yield fault("unknown-reference", f"there is no asset `{name}`", "targets", name)
        elif not isinstance(asset, Storage):
            yield fault("wrong-kind", f"an asset of kind `{asset.kind}` stores nothing", "targets", name)
        elif (target.final_stored_mwh or 0.0) > asset.energy_capacity_mwh * _ROUNDING:
            detail = f"above the capacity of {asset.energy_capacity_mwh:.10g} MWh"
            yield fault("out-of-range", detail, "targets", name, "final_stored_mwh")
