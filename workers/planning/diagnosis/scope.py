"""A part of a request, small enough to look into: some assets, with what couples them or without it.

A scope is a job of its own, cut out of the request; elements keep the pointers they have in the request. An asset
looked at alone has no site; a site looked at alone has no fleet above it.
"""

from collections.abc import Collection, Iterable, Iterator, Sequence
from dataclasses import dataclass, replace
from functools import cached_property
from typing import Any

from schemas.commitments import Commitment
from schemas.fleet import Fleet, Storage
from schemas.job import Initial, OneWindow, ScheduleJob
from workers.planning.diagnosis.elements import (
    SIDES,
    Element,
    in_order,
    limit_elements,
    outage_elements,
    plant_elements,
    row_elements,
)
from workers.planning.instance import Instance, instance_of
from workers.planning.rows import CommitmentRow
from workers.planning.store import Store, initial_energy

UNLIMITED: dict[str, Any] = {"export_limit_mw": None, "import_limit_mw": None, "lot_mw": None}


@dataclass(frozen=True)
class Question:
    """The whole request with its instance, and its elements by the asset or meter they belong to."""

    job: ScheduleJob
    instance: Instance

    @cached_property
    def of_plants(self) -> dict[str, list[Element]]:
        """Elements of single assets by asset id."""
        texts = {
            int(outage.pointer.rsplit("/", 1)[1]): outage.text
            for unit in self.instance.units
            for outage in unit.outages
            if len(outage.intervals)
        }
        found: dict[str, list[Element]] = {}
        for element in (*plant_elements(self.job, self.instance.stores), *outage_elements(self.job, texts)):
            found.setdefault(element.subject, []).append(element)
        return found

    @cached_property
    def of_meters(self) -> dict[str, list[Element]]:
        """Elements of connections by meter id; `fleet` is the fleet's."""
        found: dict[str, list[Element]] = {}
        for element in limit_elements(self.job):
            found.setdefault(element.subject, []).append(element)
        return found


@dataclass(frozen=True)
class Scope:
    """A job cut out of the request; `commitments` and `outages` are the numbers theirs have in the request.

    `meters` are the ids of those whose limits are in it; `fleet` is the fleet's.
    """

    question: Question
    job: ScheduleJob
    commitments: tuple[int, ...]
    outages: tuple[int, ...]
    meters: tuple[str, ...]

    @cached_property
    def instance(self) -> Instance:
        """The scope in arrays, with nothing left out."""
        return self.instance_of(self.job)

    @cached_property
    def elements(self) -> list[Element]:
        """All elements of the scope, those first that are spared first."""
        fleet = _fleet_of(self.job)
        plants = (element for asset in fleet.assets for element in self.question.of_plants.get(asset.id, ()))
        limits = (element for meter in self.meters for element in self.question.of_meters.get(meter, ()))
        return in_order([*plants, *limits, *row_elements(self.instance.rows)])

    def instance_of(self, job: ScheduleJob) -> Instance:
        """Index a job of this scope, its rows under the numbers that commitments have in the request."""
        instance = instance_of(job)
        rows = (replace(row, commitment=self.commitments[row.commitment]) for row in instance.rows)
        return replace(instance, rows=tuple(rows))

    def without(self, left_out: Collection[Element], job: ScheduleJob | None = None) -> Instance:
        """Index the scope (or `job`, a changed one) with some elements left out, as if they had not been asked."""
        job = self.job if job is None else job
        if not left_out:
            return self.instance_of(job)
        edited = job.model_copy(update=dict(_edits(job, left_out, self.outages)))
        instance = self.instance_of(edited)
        gone = frozenset(left_out)
        rows = tuple(row for row in instance.rows if row_of(row) not in gone)
        return replace(instance, rows=rows, units=tuple(_units(edited, instance, left_out)))


def row_of(row: CommitmentRow) -> Element:
    """Give the element that a row is; equal to any other of the same place, asset and day."""
    return Element(row.pointer, row.asset, row.day)


def _fleet_of(job: OneWindow) -> Fleet:
    if job.fleet is None:
        raise ValueError("the job must carry its fleet inline")
    return job.fleet


def _edits(job: ScheduleJob, left_out: Collection[Element], outages: tuple[int, ...]) -> Iterator[tuple[str, Any]]:
    """Change the members of a job that elements other than rows, targets and initial energy stand for."""
    rules: dict[str, dict[str, Any]] = {}
    for element in left_out:
        if element.kind == "rule":
            rules.setdefault(element.subject, {})[element.name] = None if element.name in _NONE_WITHOUT else 0.0
    gone = {(element.kind, element.subject, element.name or element.number) for element in left_out}
    open_sides = {(element.subject, element.name) for element in left_out if element.kind == "limit"}
    fleet = _fleet_of(job)
    yield "fleet", _without_limits(fleet, open_sides, rules)
    yield (
        "limits",
        {
            meter: limits.model_copy(update={side: None for side in SIDES if (meter, side) in open_sides})
            for meter, limits in job.limits.items()
        },
    )
    yield "initial", {**_assumed(job), **job.initial}
    numbered = zip(outages, job.outages, strict=True)
    yield "outages", [outage for number, outage in numbered if ("outage", outage.asset, number) not in gone]
    yield (
        "energy_needs",
        {
            asset: [need for number, need in enumerate(needs) if ("need", asset, number) not in gone]
            for asset, needs in job.energy_needs.items()
        },
    )


def _assumed(job: ScheduleJob) -> dict[str, Initial]:
    """Write down the initial energies that are assumed: they stay the numbers they are, whatever is left out."""
    if job.missing_initial != "assume_middle":
        return {}
    return {
        asset.id: Initial(stored_mwh=initial_energy(job, asset))
        for asset in _fleet_of(job).assets
        if isinstance(asset, Storage) and asset.id not in job.initial
    }


_NONE_WITHOUT = {
    "ramp_mw_per_hour",
    "max_starts_per_day",
    "max_cycles_per_day",
    "ramp_up_mw_per_hour",
    "ramp_down_mw_per_hour",
}


def _without_limits(fleet: Fleet, open_sides: set[tuple[str, str]], rules: dict[str, dict[str, Any]]) -> Fleet:
    return fleet.model_copy(
        update={
            "assets": [asset.model_copy(update=rules.get(asset.id, {})) for asset in fleet.assets],
            "sites": [
                site.model_copy(update={side: None for side in SIDES if (site.id, side) in open_sides})
                for site in fleet.sites
            ],
            **{side: None for side in SIDES if ("fleet", side) in open_sides},
        }
    )


def _units(job: ScheduleJob, instance: Instance, left_out: Collection[Element]) -> Iterator[Any]:
    targets = {element.subject for element in left_out if element.kind == "target"}
    openings = {element.subject for element in left_out if element.kind == "initial"}
    assets = {asset.id: asset for asset in _fleet_of(job).assets}
    for unit in instance.units:
        if isinstance(unit, Store) and unit.id in openings:
            asset = assets[unit.id]
            assert isinstance(asset, Storage)
            unit = unit.with_any_initial_energy(asset)
        if isinstance(unit, Store) and unit.id in targets:
            unit = replace(unit, final_floor_mwh=0.0)
        yield unit


def whole(question: Question) -> Scope:
    """Give the whole request as a scope."""
    job = question.job
    meters = (*(site.id for site in _fleet_of(job).sites), "fleet")
    return Scope(question, job, tuple(range(len(job.commitments))), tuple(range(len(job.outages))), meters)


def scope_of_part(question: Question, part: Instance) -> Scope:
    """Cut out what a part of the instance stands for, with every limit and commitment that ties it."""
    if part.fleet.is_limited:
        return whole(question)
    job, fleet = question.job, _fleet_of(question.job)
    assets = {unit.id for unit in part.units} | {row.asset for row in part.rows if row.asset}
    limited = {meter.id for meter in part.meters if meter.is_limited}
    for number in {row.commitment for row in part.rows}:
        whom = job.commitments[number].applies_to
        if whom.fleet:
            return whole(question)
        assets |= set(whom.group or ())
        limited |= {whom.site} if whom.site else set()
    sites = {site.id for site in fleet.sites if site.id in limited}
    assets |= {asset.id for asset in fleet.assets if asset.site in sites}
    return _cut(question, part, assets, sites)


def scope_of_asset(question: Question, part: Instance, asset: str) -> Scope:
    """Cut out one asset of a part alone: no site, no fleet, and of the commitments what is asked of it alone."""
    return _cut(question, part, {asset}, set())


def scope_of_site(question: Question, part: Instance, site: str) -> Scope:
    """Cut out one site of a part with all on it, and no fleet above."""
    members = {asset.id for asset in _fleet_of(question.job).assets if asset.site == site}
    return _cut(question, part, members, {site})


def _cut(question: Question, part: Instance, assets: set[str], sites: set[str]) -> Scope:
    """Cut out assets; of the sites they keep, those that are no meter of the part are there for their sums alone."""
    job, fleet = question.job, _fleet_of(question.job)
    meters = {meter.id for meter in part.meters} & sites
    kept = [
        asset if asset.site in sites else asset.model_copy(update={"site": None})
        for asset in fleet.assets
        if asset.id in assets
    ]
    commitments = dict(_commitments(job.commitments, part.rows, assets, sites))
    outages = [number for number, outage in enumerate(job.outages) if outage.asset in assets]
    by_asset = ("initial", "targets", "forecasts", "energy_needs")
    cut = job.model_copy(
        update={
            "fleet": fleet.model_copy(
                update={
                    "assets": kept,
                    "sites": [
                        site if site.id in meters else site.model_copy(update=UNLIMITED)
                        for site in fleet.sites
                        if site.id in sites
                    ],
                    **UNLIMITED,
                }
            ),
            "limits": {meter: limits for meter, limits in job.limits.items() if meter in meters},
            "positions": {},
            "outages": [job.outages[number] for number in outages],
            "commitments": list(commitments.values()),
            **{
                name: {asset: value for asset, value in getattr(job, name).items() if asset in assets}
                for name in by_asset
            },
        }
    )
    return Scope(question, cut, tuple(commitments), tuple(outages), tuple(sorted(meters)))


def _commitments(
    commitments: Sequence[Commitment], rows: Iterable[CommitmentRow], assets: set[str], sites: set[str]
) -> Iterator[tuple[int, Commitment]]:
    """Keep, by number, what rows ask of these assets one by one, of groups among them, and of these sites."""
    asked: dict[int, set[str]] = {}
    for row in rows:
        asked.setdefault(row.commitment, set()).update({row.asset} if row.asset else ())
    for number in sorted(asked):
        commitment = commitments[number]
        whom = commitment.applies_to
        if whom.assets is not None:
            own = [asset for asset in whom.assets if asset in assets & asked[number]]
            if own:
                applies_to = whom.model_copy(update={"assets": own})
                yield number, commitment.model_copy(update={"applies_to": applies_to})
        elif (whom.group is not None and assets.issuperset(whom.group)) or whom.site in sites:
            yield number, commitment
