"""Find every irreducible conflict of a job by trying sets of its elements, with the oracle as the judge."""

from __future__ import annotations

from collections.abc import Callable
from functools import cache

from tests.oracles.elements import Element, elements
from tests.oracles.formulation_clock import Job, given
from tests.oracles.leaving_out import is_possible_alone


def conflicts_by_force(job: Job) -> set[frozenset[Element]]:
    """Return every irreducible conflict of a job with few elements; one of no members where physics is to blame.

    Where leaving out always relaxes, sets above an impossible and below a possible one need no trial. Where it may not,
    every set is tried, and a conflict counts that is impossible whatever else is held, and possible with any less.
    """
    listed = elements(job)

    @cache
    def is_possible(mask: int) -> bool:
        return is_possible_alone(job, [element for n, element in enumerate(listed) if mask >> n & 1])

    masks = sorted(range(1 << len(listed)), key=int.bit_count)
    found = _shrunk(masks, is_possible) if always_relaxes(job) else _lasting(masks, is_possible)
    return {frozenset(element for n, element in enumerate(listed) if mask >> n & 1) for mask in found}


def _shrunk(masks: list[int], is_possible: Callable[[int], bool]) -> list[int]:
    """Decide the largest open set: below a possible one nothing is left to find, an impossible one holds a conflict."""
    found, is_open = [], set(masks)
    for mask in reversed(masks):
        if mask not in is_open:
            continue
        if is_possible(mask):
            is_open = {other for other in is_open if other & ~mask}
            continue
        core = mask
        for n in range(mask.bit_length()):
            if core >> n & 1 and not is_possible(core & ~(1 << n)):
                core &= ~(1 << n)
        found.append(core)
        is_open = {other for other in is_open if core & ~other}
    return found


def _lasting(masks: list[int], is_possible: Callable[[int], bool]) -> list[int]:
    """Return the sets that stay impossible with whatever else is held, and all of whose subsets are possible."""
    found: list[int] = []
    possible = [mask for mask in masks if is_possible(mask)]
    for mask in masks:
        if all(smaller & ~mask for smaller in found) and all(mask & ~other for other in possible):
            found.append(mask)
    return found


def always_relaxes(job: Job) -> bool:
    """Tell whether leaving out elements can only ever make more possible; false where it cannot easily be told.

    See `leaving_out` for where it may not.
    """
    assets = job["fleet"]["assets"]
    out = {outage["asset"] for outage in given(job, "outages", [])}
    if any(_is_freed_by_outages(asset) for asset in assets if asset["id"] in out):
        return False
    if any(given(job, "energy_needs", {}).values()):
        return False
    limits = [element for element in elements(job) if element.pointer.endswith("port_limit_mw")]
    if limits and given(job["window"], "reserve_products", []):
        return False
    return all(_starts_in_range(job, asset) for asset in assets if asset["kind"] == "storage")


def _is_freed_by_outages(asset: Job) -> bool:
    """Tell whether an outage can free an asset of what would bind it else: ramps, a run under way, forced output."""
    if not given(asset, "curtailable", True):
        return True
    return any(name.startswith(("ramp_", "min_run_hours", "min_up_hours")) for name in asset)


def _starts_in_range(job: Job, store: Job) -> bool:
    state, capacity = given(given(job, "initial"), store["id"]), store["energy_capacity_mwh"]
    if state is None:
        return True
    stored = given(state, "stored_mwh", given(state, "state_of_charge_percent", 0.0) / 100.0 * capacity)
    return bool(given(store, "min_stored_mwh", 0.0) <= stored <= given(store, "max_stored_mwh", capacity))
