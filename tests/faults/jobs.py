"""Jobs to break things with, all of an invented fleet."""

from typing import Any

from schemas.reading import canonical, read_job
from service.store import Accepted

HOURS = 24


def small(**members: Any) -> Accepted:
    """Give a job on one store that takes milliseconds to plan."""
    return accepted(_document(1, HOURS, [40.0 + 30.0 * (hour % 12) for hour in range(HOURS)], **members))


def long(seconds: float = 30.0, **members: Any) -> Accepted:
    """Give a job whose solver works for as long as it is let, with a schedule in hand soon and no proof for long.

    Many stores with minimum powers behind one connection, and priced commitments on sums of five of them in blocks.
    """
    count, hours = 20, 96
    prices = [round(((7 * hour) % 11 - 5) * 3.1 - 4.0, 2) for hour in range(hours)]
    document = _document(count, hours, prices, interval="PT15M", **members)
    document["fleet"] |= {"export_limit_mw": 0.4 * 2.0 * count, "import_limit_mw": 0.4 * 2.0 * count}
    names = [asset["id"] for asset in document["fleet"]["assets"]]
    document["commitments"] = [
        {
            "id": f"sum-{number}",
            "kind": "hours_at_least",
            "applies_to": {"group": names[number::4]},
            "threshold": {"fraction_of_rated": 0.31},
            "hours": 6,
            "min_block_hours": 1.0,
            "shortfall_price_per_hour": 40.0,
        }
        for number in range(4)
    ]
    return accepted(document | {"time_limit_seconds": seconds, "relative_gap": 1e-7})


def impossible(**members: Any) -> Accepted:
    """Give a job that asks for more hours at full power than the store holds energy for."""
    document = _document(1, HOURS, [50.0] * HOURS, **members)
    document["commitments"] = [
        {
            "id": "evening",
            "kind": "hours_at_least",
            "applies_to": {"assets": ["b-0"]},
            "threshold": {"fraction_of_rated": 1.0},
            "hours": 24,
        }
    ]
    return accepted(document)


def accepted(document: dict[str, Any]) -> Accepted:
    """Read a document as the API would, and write it as the resolved request."""
    job = read_job(document)
    return Accepted(job=job, resolved=canonical(job))


def _document(
    count: int, intervals: int, prices: list[float], interval: str = "PT1H", **members: Any
) -> dict[str, Any]:
    stores = [
        {
            "id": f"b-{number}",
            "kind": "storage",
            "discharge_limit_mw": 2.0,
            "charge_limit_mw": 2.0,
            "min_discharge_mw": 0.0 if count == 1 else 0.5 + 0.03 * number,
            "min_charge_mw": 0.0 if count == 1 else 0.5 + 0.02 * number,
            "energy_capacity_mwh": 4.0 + 0.1 * number,
            "charge_efficiency": 0.95 - 0.002 * number,
            "discharge_efficiency": 0.95,
            "wear_cost_per_mwh": 1.0 + 0.1 * number,
        }
        for number in range(count)
    ]
    return {
        "fleet": {"assets": stores},
        "window": {
            "start": "2027-03-14T00:00:00+00:00",
            "interval": interval,
            "timezone": "UTC",
            "currency": "EUR",
            "price_per_mwh": prices[:intervals],
            "price_basis": "forecast",
        },
        "initial": {store["id"]: {"stored_mwh": 2.0} for store in stores},
        **members,
    }
