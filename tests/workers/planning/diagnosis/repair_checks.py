"""Judge the repairs of a diagnosis by the oracle: applied they cure, one step less does not, no lever is missing."""

from __future__ import annotations

from collections.abc import Iterator
from copy import deepcopy
from datetime import datetime
from itertools import pairwise
from typing import Any

import jsonpatch

from schemas.diagnosis import Change, Diagnosis, Repair
from schemas.problems import InvalidRequest
from schemas.reading import read_job
from tests.oracles.elements import elements, target_mwh
from tests.oracles.formulation import solve
from tests.oracles.formulation_clock import Clock, given, instant, read_clock
from tests.oracles.formulation_storage import opening
from tests.oracles.leaving_out import is_possible_without

Document = dict[str, Any]
Path = tuple[str | int, ...]

GAP = 1e-6
ROUND_OFF = 1e-5
STEP = 0.01
DEFAULT_LEVERS = ["commitments", "targets", "planned_outages"]


def wrong_repairs(document: Document, diagnosis: Diagnosis) -> Iterator[str]:
    """Name repairs that do not what they say, a better one behind a worse, and levers that cure but are not offered."""
    margins = [repair.margin for repair in diagnosis.repairs]
    if any(later > earlier + ROUND_OFF for earlier, later in pairwise(margins)):
        yield f"repairs are not sorted by margin, best first: {margins}"
    for repair in diagnosis.repairs:
        yield from (f"repair {repair.text!r}: {fault}" for fault in _wrong_repair(document, repair))
    offered = {frozenset(change.lever for change in repair.changes) for repair in diagnosis.repairs}
    for lever, what in levers_that_cure(document):
        if frozenset({lever}) not in offered:
            yield f"{what} cures, but no repair of the lever {lever} is offered"


def _wrong_repair(document: Document, repair: Repair) -> Iterator[str]:
    if not repair.verified:
        yield "not verified"
    if not repair.changes or repair.changes[0] != repair.change:
        yield "its change is not the first of its changes"
    try:
        patched = jsonpatch.apply_patch(document, repair.patch)
        read_job(patched)
    except (jsonpatch.JsonPatchException, jsonpatch.JsonPointerException, InvalidRequest) as wrong:
        yield f"the patch gives no valid job: {wrong}"
        return
    changed = differences(document, patched)
    yield from _wrong_changes(document, patched, repair, changed)
    yield from _wrong_margin(patched, repair)
    if len(repair.changes) == 1:
        smaller = one_step_back(document, patched, changed)
        if smaller is not None and solve(smaller, gap=GAP).outcome != "infeasible":
            yield f"one step less cures, too: {differences(document, smaller)}"
        return
    for change in repair.changes:
        without = _reverted(patched, changed, change)
        if without is not None and solve(without, gap=GAP).outcome != "infeasible":
            yield f"cures without the change at {change.pointer}, too"


def _wrong_margin(patched: Document, repair: Repair) -> Iterator[str]:
    oracle = solve(patched, gap=GAP, time_limit=120)
    if oracle.margin is None or oracle.bound is None:
        yield f"the oracle says {oracle.outcome}"
        return
    slack = 2 * GAP * max(1.0, abs(oracle.margin)) + ROUND_OFF
    if repair.margin > repair.margin_bound + ROUND_OFF:
        yield f"margin {repair.margin} above its bound {repair.margin_bound}"
    if repair.margin > oracle.bound + slack or oracle.margin > repair.margin_bound + slack:
        yield f"margin {repair.margin}..{repair.margin_bound}, the oracle says {oracle.margin}..{oracle.bound}"


def _wrong_changes(
    document: Document, patched: Document, repair: Repair, changed: dict[Path, tuple[Any, Any]]
) -> Iterator[str]:
    """Name what a patch touches beyond its changes, levers that were not allowed, and figures that are not those."""
    allowed = given(document, "levers", DEFAULT_LEVERS)
    for change in repair.changes:
        if change.lever not in allowed:
            yield f"the lever {change.lever} was not asked for"
        if not _belongs(document, change):
            yield f"{change.pointer} is nothing the lever {change.lever} may change"
        old, new = _value(document, change.pointer), _value(patched, change.pointer)
        if not isinstance(new, dict | list) and new is not None and not _is_same(new, change.to):
            yield f"{change.pointer} becomes {new}, not {change.to}"
        if not isinstance(old, dict | list) and old is not None and not _is_same(old, change.from_):
            yield f"{change.pointer} is {old}, not {change.from_}"
    places, clock = [change.pointer for change in repair.changes], read_clock(document["window"])
    for path, (old, new) in changed.items():
        if old is None and _is_same(_meant(document, clock, path, old), new):
            continue  # A default is written down, so that it stays where what it follows from is changed.
        where = "/" + "/".join(str(step) for step in path)
        if not any(where.startswith(_thing(place)) or place.startswith(where) for place in places):
            yield f"the patch changes {where}, which no change names"


def _thing(pointer: str) -> str:
    """Return what a pointer is about: an outage as a whole, elsewhere the member itself, a target as a whole."""
    steps = pointer.split("/")
    return "/".join(steps[:3]) if steps[1] in ("outages", "targets", "initial", "commitments") else pointer


def _belongs(document: Document, change: Change) -> bool:
    steps = change.pointer.split("/")[1:]
    if change.lever == "planned_outages":
        return steps[0] == "outages" and bool(document["outages"][int(steps[1])]["kind"] == "planned")
    if change.lever == "limits":
        return steps[0] in ("limits", "fleet") and steps[-1].endswith("port_limit_mw")
    return steps[0] == {"commitments": "commitments", "targets": "targets", "initial_energy": "initial"}[change.lever]


def _value(document: Any, pointer: str) -> Any:
    """Return what a pointer names, None where it is absent."""
    for step in pointer.split("/")[1:]:
        if isinstance(document, list):
            document = document[int(step)] if step.isdigit() and int(step) < len(document) else None
        else:
            document = given(document, step) if isinstance(document, dict) else None
    return document


def _is_same(one: Any, other: Any) -> bool:
    if isinstance(one, int | float) and isinstance(other, int | float):
        return abs(one - other) <= 1e-9 * max(1.0, abs(one))
    if isinstance(one, str) and isinstance(other, str) and "T" in one and "T" in other:
        return instant(one) == instant(other)
    return bool(one == other)


def differences(before: Any, after: Any, path: Path = ()) -> dict[Path, tuple[Any, Any]]:
    """Return the members that differ, each with what it was and what it is; None: absent."""
    if isinstance(before, dict | None) and isinstance(after, dict):
        names = dict.fromkeys([*(before or {}), *after])
        pairs: list[tuple[str | int, Any, Any]] = [(n, given(before, n), given(after, n)) for n in names]
    elif isinstance(before, list) and isinstance(after, list) and len(before) == len(after):
        pairs = [(n, old, new) for n, (old, new) in enumerate(zip(before, after, strict=True))]
    else:
        return {} if before == after else {path: (before, after)}
    found: dict[Path, tuple[Any, Any]] = {}
    for step, old, new in pairs:
        found |= differences(old, new, (*path, step))
    return found


def one_step_back(document: Document, patched: Document, changed: dict[Path, tuple[Any, Any]]) -> Document | None:
    """Return the patched job with every changed member one step nearer to what it was; None where there is no step."""
    smaller, clock = deepcopy(patched), read_clock(document["window"])
    for path, (old, new) in changed.items():
        stepped = _stepped(clock, path, _meant(document, clock, path, old), new)
        if stepped is None:
            return None
        _set(smaller, path, stepped)
    return smaller


def _meant(document: Document, clock: Clock, path: Path, old: Any) -> Any:
    """Return what was, in the contract's defaults where it was not said."""
    if old is not None:
        return old
    if path[0] == "targets":
        return target_mwh(document, _asset(document, str(path[1])), clock)
    if path[0] == "initial":
        return opening(document, _asset(document, str(path[1])), clock).stored_mwh
    if path[0] == "outages" and str(path[-1]).startswith("available"):
        return given(document["outages"][int(path[1])], "available_fraction", 0.0)
    if path[0] == "outages" and path[-1] == "to":
        return clock.text(clock.starts[-1] + clock.step)
    return None


def _asset(document: Document, asset_id: str) -> Document:
    return next(asset for asset in document["fleet"]["assets"] if asset["id"] == asset_id)


def _stepped(clock: Clock, path: Path, old: Any, new: Any) -> Any:
    """Return a value one step from `new` towards `old`, not beyond it; None where no step is known."""
    if isinstance(old, str) and isinstance(new, str) and path[-1] in ("from", "to"):
        return clock.text(_moment_nearer(instant(new), instant(old), clock))
    if isinstance(old, bool) or not isinstance(old, int | float) or not isinstance(new, int | float):
        return None
    step = clock.hours if path[-1] in ("hours", "min_block_hours") else STEP
    step *= 100.0 if path[-1] == "state_of_charge_percent" else 1.0
    return min(new + step, old) if old > new else max(new - step, old)


def _moment_nearer(new: datetime, old: datetime, clock: Clock) -> datetime:
    return min(new + clock.step, old) if old > new else max(new - clock.step, old)


def _set(document: Any, path: Path, value: Any) -> None:
    for step in path[:-1]:
        document = document[step]
    document[path[-1]] = value


def _reverted(patched: Document, changed: dict[Path, tuple[Any, Any]], change: Change) -> Document | None:
    """Return the patched job with one of its changes taken back; None where something was added or taken away."""
    without = deepcopy(patched)
    place = _thing(change.pointer) if change.lever != "commitments" else change.pointer
    for path, (old, _) in changed.items():
        where = "/" + "/".join(str(step) for step in path)
        if not (where + "/").startswith(place + "/"):
            continue
        if len(path) == 1:
            return None
        _set(without, path, old)
    return without


def levers_that_cure(document: Document) -> Iterator[tuple[str, str]]:
    """Name each lever that is allowed and has one thing which, given up altogether, makes the job feasible."""
    allowed = given(document, "levers", DEFAULT_LEVERS)
    for lever, what, relaxed in _given_up(document):
        if lever in allowed and solve(relaxed, gap=0.1).outcome != "infeasible":
            yield lever, what
    limits = [element for element in elements(document) if element.pointer.endswith("port_limit_mw")]
    for limit in limits if "limits" in allowed else []:
        if is_possible_without(document, [limit]):
            yield "limits", f"lifting {limit.pointer}"


def _given_up(document: Document) -> Iterator[tuple[str, str, Document]]:
    """Change one thing of the job as far as a lever may: hours to 0, an outage away, a target to 0, a store filled."""
    for k, commitment in enumerate(given(document, "commitments", [])):
        if commitment["kind"] == "hours_at_least" and given(commitment, "shortfall_price_per_hour") is None:
            relaxed = deepcopy(document)
            relaxed["commitments"][k]["hours"] = 0.0
            yield "commitments", f"asking no hours of {commitment['id']}", relaxed
    kinds = {asset["id"]: asset["kind"] for asset in document["fleet"]["assets"]}
    for n, outage in enumerate(given(document, "outages", [])):
        if outage["kind"] == "planned" and kinds[outage["asset"]] != "fixed_load":
            relaxed = deepcopy(document)
            del relaxed["outages"][n]
            yield "planned_outages", f"outage {n} not taken", relaxed
    clock = read_clock(document["window"])
    for asset in document["fleet"]["assets"]:
        if asset["kind"] != "storage" or opening(document, asset, clock).stored_mwh is None:
            continue
        relaxed = deepcopy(document)
        relaxed.setdefault("targets", {}).setdefault(asset["id"], {})["final_stored_mwh"] = 0.0
        yield "targets", f"no target for {asset['id']}", relaxed
        relaxed = deepcopy(document)
        state = relaxed.setdefault("initial", {}).setdefault(asset["id"], {})
        state.pop("state_of_charge_percent", None)
        state["stored_mwh"] = given(asset, "max_stored_mwh", asset["energy_capacity_mwh"])
        yield "initial_energy", f"{asset['id']} full at the start", relaxed
