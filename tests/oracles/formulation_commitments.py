"""Write down commitments: whom each set of rows is about, its intervals, its credit, and the rule of its kind."""

from __future__ import annotations

from collections.abc import Set
from dataclasses import dataclass
from typing import Any

from tests.oracles.formulation_clock import Clock, Job, given, spans
from tests.oracles.formulation_deliveries import (
    add_energy_at_least,
    add_energy_at_most,
    add_firm_delivery,
    add_reserve_holding,
)
from tests.oracles.formulation_hours import add_hours_at_least, add_hours_at_most
from tests.oracles.formulation_meters import Powers, metered, site_assets
from tests.oracles.formulation_program import Affine, Program, total
from tests.oracles.formulation_row import Row, RowKey


@dataclass(frozen=True)
class Subject:
    """Hold what a set of rows is about: a key for its credit, the assets in it, and its power as it counts, MW."""

    key: str
    members: list[str]
    power: list[Affine]


def add_commitments(
    program: Program, job: Job, powers: Powers, clock: Clock, without_rows: Set[RowKey] = frozenset()
) -> None:
    """Add every commitment of the job, but for the rows that are left out.

    Raises ValueError for a kind that is none of the contract.
    """
    for number, commitment in enumerate(given(job, "commitments", [])):
        add = {
            "hours_at_least": add_hours_at_least,
            "hours_at_most": add_hours_at_most,
            "firm_delivery": add_firm_delivery,
            "energy_at_least": add_energy_at_least,
            "energy_at_most": add_energy_at_most,
            "reserve_holding": add_reserve_holding,
        }.get(commitment["kind"])
        if add is None:
            raise ValueError(f"this oracle does not know {commitment['kind']}")
        for row in _rows(job, commitment, powers, clock):
            if (number, row.asset, row.day) not in without_rows:
                add(program, row)


def _rows(job: Job, commitment: dict[str, Any], powers: Powers, clock: Clock) -> list[Row]:
    """Return the rows of a commitment, what was counted before credited to the first of each subject."""
    counted = given(given(given(job, "counted_before"), "commitments"), commitment["id"], 0.0)
    excused = {t for span in given(commitment, "excused", []) for t in clock.inside(span.get("from"), span.get("to"))}
    sign = -1.0 if given(commitment, "direction", "discharge") == "charge" else 1.0
    rows = []
    for subject in _subjects(job, commitment, powers, clock):
        credit = given(counted, subject.key, 0.0) if isinstance(counted, dict) else counted
        reserve = []
        if commitment["kind"] == "reserve_holding":
            product = commitment["product"]
            reserve = [total(powers[a].reserve.of(product, t) for a in subject.members) for t in range(len(clock))]
        for span in spans(commitment, clock):
            rows.append(
                Row(
                    commitment=commitment,
                    asset=subject.key or None,
                    day=None if span.day is None else span.day.isoformat(),
                    clock=clock,
                    intervals=span.intervals,
                    power=[power * sign for power in subject.power],
                    reserve=reserve,
                    rated_mw=_rated_mw(job, commitment, subject.members),
                    excused=excused,
                    credit=credit,
                )
            )
            credit = 0.0
    return rows


def _subjects(job: Job, commitment: dict[str, Any], powers: Powers, clock: Clock) -> list[Subject]:
    """Return what each set of rows is about; assets one by one at their terminals, sums as a meter reads them."""
    applies_to = commitment["applies_to"]
    singles = given(applies_to, "assets")
    if singles is not None:
        return [Subject(asset_id, [asset_id], powers[asset_id].net) for asset_id in singles]
    members = given(applies_to, "group")
    if members is None and given(applies_to, "site") is not None:
        members = site_assets(job, applies_to["site"])
    if members is None:
        members = list(powers)
    return [Subject("", members, metered(powers, members, clock))]


def _rated_mw(job: Job, commitment: dict[str, Any], members: list[str]) -> float:
    """Return the rated power of the stores and generators among `members` in the commitment's direction."""
    direction, rated = given(commitment, "direction", "discharge"), 0.0
    for asset in job["fleet"]["assets"]:
        if asset["id"] in members and asset["kind"] == "storage":
            rated += asset[f"{direction}_limit_mw"]
        if asset["id"] in members and asset["kind"] == "generator" and direction == "discharge":
            rated += asset["max_output_mw"]
    return rated
