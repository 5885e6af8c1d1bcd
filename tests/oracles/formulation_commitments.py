"""Write down `hours_at_least`: enough intervals with power at or above the threshold and its headroom.

z[t] = 1  only where  power >= threshold + headroom, or t is excused
g[t] <= z[t], and g is made of unbroken stretches of at least `min_block_hours`, all within the row's intervals
h * sum(g) + counted before + shortfall >= hours
"""

from __future__ import annotations

from typing import Any

from tests.oracles.formulation_clock import Clock, Job, given, spans
from tests.oracles.formulation_meters import Powers, metered, site_assets
from tests.oracles.formulation_program import Affine, Program, total


def add_commitments(program: Program, job: Job, powers: Powers, clock: Clock) -> None:
    """Add every commitment of the job.

    Raises ValueError for a kind other than `hours_at_least`.
    """
    for commitment in given(job, "commitments", []):
        if commitment["kind"] != "hours_at_least":
            raise ValueError(f"this oracle does not know {commitment['kind']}")
        counted = given(given(given(job, "counted_before"), "commitments"), commitment["id"], 0.0)
        for asset_id, members, power in _subjects(job, commitment, powers, clock):
            credit = given(counted, asset_id, 0.0) if isinstance(counted, dict) else counted
            asked = _asked_mw(job, commitment, members)
            for span in spans(commitment, clock):
                _row(program, commitment, clock, power, asked, span.intervals, credit)
                credit = 0.0


def _subjects(
    job: Job, commitment: dict[str, Any], powers: Powers, clock: Clock
) -> list[tuple[str, list[str], list[Affine]]]:
    """Return what each set of rows is about: a key for its credit, the assets in it, and its power, MW."""
    applies_to = commitment["applies_to"]
    singles = given(applies_to, "assets")
    if singles is not None:
        return [(asset_id, [asset_id], powers[asset_id].net) for asset_id in singles]
    members = given(applies_to, "group")
    if members is None and given(applies_to, "site") is not None:
        members = site_assets(job, applies_to["site"])
    if members is None:
        members = list(powers)
    return [("", members, metered(powers, members, clock))]


def _asked_mw(job: Job, commitment: dict[str, Any], members: list[str]) -> float:
    """Return threshold plus headroom; a fraction is one of the rated power of the stores among `members`."""
    threshold, direction = commitment["threshold"], given(commitment, "direction", "discharge")
    asked = given(threshold, "mw")
    if asked is None:
        stores = [a for a in job["fleet"]["assets"] if a["id"] in members and a["kind"] == "storage"]
        asked = threshold["fraction_of_rated"] * sum(a[f"{direction}_limit_mw"] for a in stores)
    return float(asked) + float(given(commitment, "headroom_mw", 0.0))


def _row(
    program: Program,
    commitment: dict[str, Any],
    clock: Clock,
    power: list[Affine],
    asked: float,
    intervals: list[int],
    credit: float,
) -> None:
    """Add one row: qualifying intervals, their blocks, and the hours they must reach or what falling short costs."""
    sign = -1.0 if given(commitment, "direction", "discharge") == "charge" else 1.0
    excused = {t for span in given(commitment, "excused", []) for t in clock.inside(span.get("from"), span.get("to"))}
    counts: dict[int, Affine] = {}
    for t in intervals:
        counts[t] = program.binary()
        if t not in excused:
            delivered = power[t] * sign
            slack = asked - program.smallest(delivered)
            program.at_least(delivered - counts[t] * slack, asked - slack)
    _blocks(program, counts, clock.whole(given(commitment, "min_block_hours", 0.0)))
    owed = max(0.0, commitment["hours"] - credit)
    price = given(commitment, "shortfall_price_per_hour")
    shortfall = program.column(0.0, 0.0 if price is None else owed)
    program.at_least(total(counts.values()) * clock.hours + shortfall, owed)
    program.earn(shortfall * -(price or 0.0))


def _blocks(program: Program, counts: dict[int, Affine], length: int) -> None:
    """Let intervals count only in unbroken stretches of at least `length`, none of it outside the row."""
    if length <= 1:
        return
    for t, counted in counts.items():
        begin = program.column(0.0, 1.0)
        program.at_least(begin - counted + counts.get(t - 1, Affine({})), 0.0)
        for later in range(t, t + length):
            program.at_least(counts.get(later, Affine({})) - begin, 0.0)
