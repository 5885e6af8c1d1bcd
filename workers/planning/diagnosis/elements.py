"""What a conflict can name: the elements of a request (contract, section 7). All else is physics, and always holds."""

from collections.abc import Iterable, Iterator
from dataclasses import dataclass, field

from schemas.fleet import FixedLoad, FlexibleLoad, Generator, Storage
from schemas.job import OneWindow
from workers.planning.rows import CeilingRow, CommitmentRow, EnergyRow, FirmRow, HoldingRow, HoursRow
from workers.planning.store import Store

STORAGE_RULES = {
    "ramp_mw_per_hour": ("ramp", "MW/h"),
    "min_run_hours": ("least run", "h"),
    "min_rest_hours": ("least rest", "h"),
    "max_starts_per_day": ("starts per day", ""),
    "max_cycles_per_day": ("cycles per day", ""),
    "min_stored_mwh": ("stored floor", "MWh"),
}
GENERATOR_RULES = {
    "ramp_up_mw_per_hour": ("ramp up", "MW/h"),
    "ramp_down_mw_per_hour": ("ramp down", "MW/h"),
    "min_up_hours": ("least time up", "h"),
    "min_down_hours": ("least time down", "h"),
}
ALWAYS_THERE = {"max_starts_per_day", "max_cycles_per_day"}
"""Limits at which 0 forbids; of the others 0 asks for nothing (a ramp of 0 forbids too, and is None where absent)."""

SIDES = {"export_limit_mw": "export limit", "import_limit_mw": "import limit"}


@dataclass(frozen=True)
class Element:
    """One thing asked that could be left out: its place in the request, whose it is, of which day; words for it.

    `kind` is `row`, `target`, `initial`, `outage`, `limit`, `need` or `rule`; `name` the member it stands for: of the
    fleet (`rule`), or `export_limit_mw` and its like (`limit`); `subject` the asset or meter.
    """

    pointer: str
    asset: str | None = None
    day: str | None = None
    kind: str = field(default="row", compare=False)
    subject: str = field(default="", compare=False)
    name: str = field(default="", compare=False)
    number: int = field(default=0, compare=False)
    text: str = field(default="", compare=False)


SPARED_FIRST = ("rule", "need", "limit", "initial", "outage", "target", "row")
"""Order in which shrinking tries to spare elements: what was promised is named rather than how the plant is built."""


def in_order(elements: Iterable[Element]) -> list[Element]:
    """Sort elements by what is spared first."""
    return sorted(elements, key=lambda element: SPARED_FIRST.index(element.kind))


def row_elements(rows: Iterable[CommitmentRow]) -> Iterator[Element]:
    """List the rows that bind."""
    for row in rows:
        if row.price is None:
            yield Element(
                row.pointer, row.asset, row.day, "row", row.asset or "", number=row.commitment, text=words_of(row)
            )


def words_of(row: CommitmentRow) -> str:
    """Say what a row asks, with numbers and units."""
    verb = "discharge" if row.sign > 0 else "charge"
    whose = f"commitment {row.id}{row.where}"
    if isinstance(row, HoursRow):
        return f"{whose}: {row.due_hours:g} h of {verb} at {row.threshold_mw:g} MW or more"
    if isinstance(row, CeilingRow):
        return f"{whose}: at most {row.allowed_hours:g} h of {verb} above {row.threshold_mw:g} MW"
    if isinstance(row, FirmRow):
        return f"{whose}: {verb} of up to {row.due_mw.max():g} MW, firm"
    if isinstance(row, EnergyRow):
        return f"{whose}: {verb} of at {'least' if row.at_least else 'most'} {row.energy_mwh:g} MWh"
    assert isinstance(row, HoldingRow)
    return f"{whose}: up to {row.due_mw.max():g} MW of reserve held"


def plant_elements(job: OneWindow, stores: Iterable[Store]) -> Iterator[Element]:
    """List what is asked of single assets: targets, initial energy, needs, and the rules of the plant."""
    fleet = job.fleet
    known = {store.id: store for store in stores}
    for number, asset in enumerate(fleet.assets if fleet else ()):
        if isinstance(asset, Storage):
            yield from _store(job, known[asset.id])
        if isinstance(asset, FlexibleLoad):
            yield from _needs(job, asset.id)
        for name, (words, unit) in _rules(asset).items():
            value = getattr(asset, name)
            if value is None or (value == 0 and not (name in ALWAYS_THERE or name.startswith("ramp"))):
                continue
            text = f"{words} of {asset.id}: {value:g} {unit}".rstrip()
            yield Element(f"/fleet/assets/{number}/{name}", kind="rule", subject=asset.id, name=name, text=text)


def _rules(asset: object) -> dict[str, tuple[str, str]]:
    if isinstance(asset, Storage):
        return STORAGE_RULES
    return GENERATOR_RULES if isinstance(asset, Generator) else {}


def _store(job: OneWindow, store: Store) -> Iterator[Element]:
    if job.missing_initial == "hold_out" and store.id not in job.initial:
        return
    if store.final_floor_mwh > 0:
        text = f"{store.id} ends with at least {store.final_floor_mwh:.6g} MWh"
        pointer = f"/targets/{store.id}/final_stored_mwh"
        yield Element(pointer, kind="target", subject=store.id, text=text)
    state = job.initial.get(store.id)
    member = ""
    if state is not None:
        member = "/stored_mwh" if state.stored_mwh is not None else "/state_of_charge_percent"
    text = f"{store.id} starts with {store.initial_mwh:.6g} MWh"
    yield Element(f"/initial/{store.id}{member}", kind="initial", subject=store.id, text=text)


def _needs(job: OneWindow, asset: str) -> Iterator[Element]:
    for number, need in enumerate(job.energy_needs.get(asset, [])):
        text = f"{asset} draws {need.energy_mwh:g} MWh within its need {number + 1}"
        yield Element(f"/energy_needs/{asset}/{number}", kind="need", subject=asset, number=number, text=text)


def limit_elements(job: OneWindow) -> Iterator[Element]:
    """List the limits of connections: today's where given, else the fleet's own."""
    fleet = job.fleet
    if fleet is None:
        return
    own = [(site.id, f"/fleet/sites/{number}", site) for number, site in enumerate(fleet.sites)]
    for meter, place, limits in (*own, ("fleet", "/fleet", fleet)):
        for name, words in SIDES.items():
            todays = getattr(job.limits.get(meter), name, None)
            value = getattr(limits, name) if todays is None else todays
            if value is None:
                continue
            shown = f"{value:g} MW" if isinstance(value, float | int) else f"{min(value):g} to {max(value):g} MW"
            pointer = f"{place}/{name}" if todays is None else f"/limits/{meter}/{name}"
            yield Element(pointer, kind="limit", subject=meter, name=name, text=f"{words} of {meter}: {shown}")


def outage_elements(job: OneWindow, texts: dict[int, str]) -> Iterator[Element]:
    """List the outages of all but fixed loads, whose outages are part of their forecast; `texts` by outage number."""
    fixed = {asset.id for asset in (job.fleet.assets if job.fleet else ()) if isinstance(asset, FixedLoad)}
    for number, outage in enumerate(job.outages):
        if outage.asset not in fixed and number in texts:
            yield Element(f"/outages/{number}", kind="outage", subject=outage.asset, number=number, text=texts[number])
