"""Build the smallest jobs a rule can be seen in: one store, few hours, an invented site on a quay."""

from collections.abc import Iterable, Mapping, Sequence
from typing import Any

from pydantic import TypeAdapter

from schemas.job import Job, OneWindow
from schemas.schedule import Violation
from workers.planning.audit import Decision, Replay, replay

Document = dict[str, Any]
START = "2027-03-10T00:00:00+00:00"
_JOBS: TypeAdapter[Any] = TypeAdapter(Job)


def store(name: str = "quay-b1", **members: Any) -> Document:
    """Return a lossless store of 2 MW and 10 MWh."""
    plain = {
        "discharge_limit_mw": 2.0,
        "charge_limit_mw": 2.0,
        "energy_capacity_mwh": 10.0,
        "charge_efficiency": 1.0,
        "discharge_efficiency": 1.0,
    }
    return {"id": name, "kind": "storage", **plain, **members}


def load(name: str = "quay-cranes", **members: Any) -> Document:
    """Return a fixed load."""
    return {"id": name, "kind": "fixed_load", **members}


def generator(name: str = "quay-g1", **members: Any) -> Document:
    """Return a generator that runs between 1 and 4 MW at no cost."""
    return {"id": name, "kind": "generator", "min_output_mw": 1.0, "max_output_mw": 4.0, **members}


def renewable(name: str = "quay-pv", **members: Any) -> Document:
    """Return a renewable that can be curtailed."""
    return {"id": name, "kind": "renewable", **members}


def flexible_load(name: str = "quay-pumps", **members: Any) -> Document:
    """Return a load that draws up to 2 MW whenever it is told to."""
    return {"id": name, "kind": "flexible_load", "draw_limit_mw": 2.0, **members}


def product(name: str = "up-15", **members: Any) -> Document:
    """Return a reserve product that is called upwards for 15 minutes and pays nothing."""
    plain = {"direction": "up", "sustain_minutes": 15.0, "price_per_mw_per_hour": 0.0}
    return {"id": name, **plain, **members}


def outage(asset: str, first: int, end: int | None, left: float = 0.0) -> Document:
    """Return an outage of the intervals from `first` up to, not including, `end`, at one hour each."""
    until = None if end is None else f"2027-03-10T{end:02}:00:00Z"
    begin = f"2027-03-10T{first:02}:00:00Z"
    return {"asset": asset, "kind": "forced", "from": begin, "to": until, "available_fraction": left}


def window(prices: Sequence[float] | None = None, **members: Any) -> Document:
    """Return hourly intervals at one price each, in UTC."""
    plain = {"start": START, "interval": "PT60M", "timezone": "UTC", "currency": "EUR", "price_basis": "forecast"}
    priced = {} if prices is None else {"price_per_mwh": list(prices)}
    return {**plain, **priced, **members}


def job(assets: Iterable[Document], market: Document, *, sites: Iterable[Document] = (), **members: Any) -> Document:
    """Return a job whose stores start at 5 MWh and may end empty, where nothing else is said."""
    fleet = {"assets": list(assets), "sites": list(sites), **members.pop("fleet", {})}
    stores = [asset["id"] for asset in fleet["assets"] if asset["kind"] == "storage"]
    initial = {name: {"stored_mwh": 5.0} for name in stores} | members.pop("initial", {})
    targets = {name: {"final_stored_mwh": 0.0} for name in stores} | members.pop("targets", {})
    return {"fleet": fleet, "window": market, "initial": initial, "targets": targets, **members}


def one_store(power: Sequence[float], *, asset: Document | None = None, **members: Any) -> Replay:
    """Audit one store that runs at these powers, at a price of 0 in hourly intervals where nothing else is said."""
    market = members.pop("window", window([0.0] * len(power)))
    document = job([store() if asset is None else asset], market, **members)
    return audit(document, {document["fleet"]["assets"][0]["id"]: power})


def read(document: Document) -> OneWindow:
    """Read a job as the service does."""
    read_job = _JOBS.validate_python(document)
    assert isinstance(read_job, OneWindow)
    return read_job


def audit(document: Document, powers: Mapping[str, Sequence[float]]) -> Replay:
    """Audit powers by asset."""
    return replay(read(document), {name: Decision(power) for name, power in powers.items()})


def one_generator(
    power: Sequence[float], on: Sequence[bool] | None = None, *, asset: Document | None = None, **members: Any
) -> Replay:
    """Audit one generator, at a price of 0 in hourly intervals where nothing else is said."""
    reserve = members.pop("reserve_mw", {})
    market = members.pop("window", window([0.0] * len(power)))
    plant = generator() if asset is None else asset
    document = job([plant], market, **members)
    return replay(read(document), {plant["id"]: Decision(power, on, reserve)})


def audit_decisions(document: Document, decisions: Mapping[str, Decision]) -> Replay:
    """Audit whole decisions by asset."""
    return replay(read(document), decisions)


def broken(result: Replay) -> list[str]:
    """Return the rules that were broken, in the order in which they were found."""
    return [violation.rule for violation in result.verification.violations]


def only(result: Replay) -> Violation:
    """Return the one violation there is."""
    assert len(result.verification.violations) == 1, result.verification.violations
    return result.verification.violations[0]


def facts(violation: Violation) -> tuple[Any, ...]:
    """Return all a violation says but its text: rule, pointer, asset, the hour its interval starts, amount, unit."""
    start = violation.interval_start
    hour = None if start is None else start.hour
    return violation.rule, violation.pointer, violation.asset, hour, violation.amount, violation.unit
