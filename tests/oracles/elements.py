"""List the elements of a job: what it asks or states that a conflict may name (contract, section 7).

Written from the contract; the planner's diagnosis has a list of its own.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from typing import Any

from tests.oracles.formulation_clock import Clock, Job, given, read_clock, spans
from tests.oracles.formulation_row import RowKey
from tests.oracles.formulation_storage import opening

LIMITS = ("export_limit_mw", "import_limit_mw")
TIMES = ("min_run_hours", "min_rest_hours", "min_up_hours", "min_down_hours")
CAPS = ("max_cycles_per_day", "max_starts_per_day")
RAMPS = ("ramp_mw_per_hour", "ramp_up_mw_per_hour", "ramp_down_mw_per_hour")


@dataclass(frozen=True)
class Element:
    """Name an element by its pointer; a row of a commitment also by its asset and its day."""

    pointer: str
    asset: str | None = None
    day: str | None = None

    @property
    def steps(self) -> list[str]:
        """Return the steps of the pointer; ids hold no character that a pointer escapes."""
        return self.pointer.split("/")[1:]

    @property
    def row(self) -> RowKey:
        """Return the row that a commitment's element stands for."""
        return int(self.steps[1]), self.asset, self.day


def elements(job: Job) -> list[Element]:
    """Return every element of a job, in the order of the contract's table."""
    clock = read_clock(job["window"])
    found = [*_rows(job, clock), *_stores(job, clock)]
    kinds = {asset["id"]: asset["kind"] for asset in job["fleet"]["assets"]}
    for n, outage in enumerate(given(job, "outages", [])):
        if kinds[outage["asset"]] != "fixed_load":
            found.append(Element(f"/outages/{n}"))
    found += _limits(job)
    for asset_id, needs in given(job, "energy_needs", {}).items():
        found += [Element(f"/energy_needs/{asset_id}/{n}") for n in range(len(needs))]
    for k, asset in enumerate(job["fleet"]["assets"]):
        asked = [name for name in ("min_stored_mwh", *TIMES) if given(asset, name, 0.0) > 0]
        asked += [name for name in (*CAPS, *RAMPS) if given(asset, name) is not None]
        found += [Element(f"/fleet/assets/{k}/{name}") for name in asked]
    return found


def kind_of(job: Job, element: Element) -> str:
    """Return what an element is, in few words: a commitment by its kind, the rest by the name of its member."""
    steps = element.steps
    if steps[0] == "commitments":
        return str(job["commitments"][int(steps[1])]["kind"])
    if steps[0] == "outages":
        return f"{job['outages'][int(steps[1])]['kind']} outage"
    if steps[0] in ("initial", "energy_needs"):
        return {"initial": "initial energy", "energy_needs": "energy need"}[steps[0]]
    return steps[-1]


def assets_of(job: Job, element: Element) -> list[str]:
    """Return the assets an element is about."""
    steps, assets = element.steps, job["fleet"]["assets"]
    if steps[0] == "commitments":
        whom = job["commitments"][int(steps[1])]["applies_to"]
        on_site = [asset["id"] for asset in assets if given(asset, "site") == given(whom, "site", "")]
        everywhere = [asset["id"] for asset in assets] if given(whom, "fleet") else on_site
        return [element.asset] if element.asset else list(given(whom, "group", everywhere))
    if steps[0] == "outages":
        return [str(job["outages"][int(steps[1])]["asset"])]
    if steps[0] == "fleet" and steps[1] == "assets":
        return [str(assets[int(steps[2])]["id"])]
    if steps[0] in ("targets", "initial", "energy_needs"):
        return [steps[1]]
    meter = job["fleet"]["sites"][int(steps[2])]["id"] if steps[1] == "sites" else steps[1]
    if steps[0] == "fleet" and steps[1] != "sites":
        meter = "fleet"
    return [asset["id"] for asset in assets if meter in ("fleet", given(asset, "site"))]


def out_of_touch(job: Job, row: Element) -> list[Element]:
    """Return the elements that can have no bearing on a row: no limit, lot or commitment links their assets to its."""
    everything = elements(job)
    links = [assets_of(job, element) for element in everything]
    in_lots = {site["id"] for site in given(job["fleet"], "sites", []) if given(site, "lot_mw") is not None}
    links += [[a["id"] for a in job["fleet"]["assets"] if given(a, "site") == site_id] for site_id in in_lots]
    if given(job["fleet"], "lot_mw") is not None:
        links.append([a["id"] for a in job["fleet"]["assets"]])
    near = set(assets_of(job, row))
    for _ in links:
        near.update(*(link for link in links if near.intersection(link)))
    return [element for element in everything if not near.intersection(assets_of(job, element))]


def target_mwh(job: Job, asset: dict[str, Any], clock: Clock) -> float:
    """Return what a store must hold at the end: what is asked, else what it starts with or would keep when idle."""
    stored = opening(job, asset, clock).stored_mwh
    if stored is None:
        raise ValueError("a store that is held out has no target", asset["id"])
    kept = (1.0 - given(asset, "self_discharge_per_hour", 0.0)) ** (clock.hours * len(clock))
    return float(given(given(given(job, "targets"), asset["id"]), "final_stored_mwh", min(stored, stored * kept)))


def row_keys(job: Job, clock: Clock) -> Iterator[RowKey]:
    for k, commitment in enumerate(given(job, "commitments", [])):
        for asset_id in given(commitment["applies_to"], "assets", [None]):
            for span in spans(commitment, clock):
                yield k, asset_id, None if span.day is None else span.day.isoformat()


def _rows(job: Job, clock: Clock) -> Iterator[Element]:
    """Name each row that binds; a priced one asks nothing that could not be paid for."""
    for k, asset_id, day in row_keys(job, clock):
        prices = [value for name, value in job["commitments"][k].items() if name.startswith("shortfall_price")]
        if all(price is None for price in prices):
            yield Element(f"/commitments/{k}", asset_id, day)


def _stores(job: Job, clock: Clock) -> Iterator[Element]:
    """Name the final target and the energy at the start of each store that is not held out."""
    for asset in job["fleet"]["assets"]:
        if asset["kind"] != "storage" or opening(job, asset, clock).stored_mwh is None:
            continue
        if target_mwh(job, asset, clock) > 0:
            yield Element(f"/targets/{asset['id']}/final_stored_mwh")
        state = given(given(job, "initial"), asset["id"], {})
        member = next(
            (f"/{name}" for name in ("stored_mwh", "state_of_charge_percent") if given(state, name) is not None), ""
        )
        yield Element(f"/initial/{asset['id']}{member}")


def _limits(job: Job) -> Iterator[Element]:
    """Name the limits in force: today's where there is one, else the fleet's own."""
    meters = [("/fleet", "fleet", job["fleet"])]
    meters += [(f"/fleet/sites/{k}", site["id"], site) for k, site in enumerate(given(job["fleet"], "sites", []))]
    for place, name, meter in meters:
        today = given(given(job, "limits"), name)
        for member in LIMITS:
            if given(today, member) is not None:
                yield Element(f"/limits/{name}/{member}")
            elif given(meter, member) is not None:
                yield Element(f"{place}/{member}")
