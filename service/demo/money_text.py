"""Money of a schedule, for a person to read: what each part of the fleet brings, in columns and rows that add up."""

from collections.abc import Iterator
from math import fsum

from schemas.schedule import Schedule

SIGNS = {
    "sales": +1,
    "purchases": -1,
    "reserve_income": +1,
    "wear_cost": -1,
    "fuel_cost": -1,
    "start_cost": -1,
    "fees": -1,
    "peak_import_charge": -1,
    "shortfall_cost": -1,
    "deviation_cost": -1,
    "final_energy_value": +1,
}
"""Every member of a schedule's totals, and whether it raises the margin or lowers it (contract, section 6)."""

HEADINGS = {"reserve_income": "reserve", "peak_import_charge": "peak fee", "final_energy_value": "left over"}

HALF_A_CENT = 0.005

Ledger = dict[str, dict[str, float]]


def ledger(schedule: Schedule) -> Ledger:
    """Return what each asset and each meter adds to the margin, and what no one of them bears; costs are negative."""
    rows: Ledger = {}
    borne = [(asset.id, asset.totals.model_dump()) for asset in schedule.assets]
    borne += [(meter.id, meter.totals.model_dump()) for meter in schedule.sites]
    for part, amounts in borne:
        row = rows.setdefault(part, {})
        for name, amount in amounts.items():
            row[name] = row.get(name, 0.0) + SIGNS[name] * amount
    rows["fleet meter"] = {name: SIGNS[name] * amount for name, amount in schedule.fleet.totals.model_dump().items()}
    rows["commitments"] = {"shortfall_cost": -schedule.totals.shortfall_cost}
    return rows


def whole(schedule: Schedule) -> dict[str, float]:
    """Return what the schedule's own totals add to the margin; costs are negative."""
    return {name: SIGNS[name] * amount for name, amount in schedule.totals.model_dump().items()}


def money_text(schedule: Schedule) -> Iterator[str]:
    """Write the ledger; what is nothing everywhere is left out, a dot stands for nothing."""
    totals = whole(schedule)
    columns = [name for name in SIGNS if abs(totals[name]) >= HALF_A_CENT]
    yield _head(schedule.currency, columns)
    for part, amounts in ledger(schedule).items():
        if any(abs(amount) >= HALF_A_CENT for amount in amounts.values()):
            yield _line(part, amounts, columns)
    yield _line("all", totals, columns)


def difference_text(before: Schedule, now: Schedule, names: tuple[str, str]) -> Iterator[str]:
    """Write the totals of two schedules, and what the second brings more or less than the first."""
    was, then = whole(before), whole(now)
    more = {name: then[name] - was[name] for name in SIGNS}
    columns = [name for name in SIGNS if max(abs(was[name]), abs(then[name])) >= HALF_A_CENT]
    yield _head(now.currency, columns)
    for name, amounts in zip((*names, "difference"), (was, then, more), strict=True):
        yield _line(name, amounts, columns)


def _head(currency: str, columns: list[str]) -> str:
    return f"{currency:12}" + "".join(f"{_heading(name):>11}" for name in columns) + f"{'together':>12}"


def _heading(name: str) -> str:
    return HEADINGS.get(name, name.removesuffix("_cost"))


def _line(part: str, amounts: dict[str, float], columns: list[str]) -> str:
    cells = "".join(_cell(amounts.get(name, 0.0)) for name in columns)
    return f"{part:12}{cells}{fsum(amounts.values()):+12.2f}"


def _cell(amount: float) -> str:
    return f"{amount:+11.2f}" if abs(amount) >= HALF_A_CENT else f"{'.':>11}"
