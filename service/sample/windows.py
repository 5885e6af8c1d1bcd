"""Windows of the sample, as the contract writes them; every price is invented."""

from typing import Any

Document = dict[str, Any]

DAY = (38, 35, 33, 32, 34, 42, 61, 84, 92, 78, 55, 40, 31, 28, 30, 38, 57, 88, 121, 134, 112, 86, 62, 47)
"""An hour each, EUR/MWh: a peak in the morning and a higher one in the evening."""


def day_ahead() -> Document:
    """Return a plain day in hours."""
    return _window("2027-03-16T00:00:00+00:00", "Europe/Lisbon", list(DAY))


def long_day() -> Document:
    """Return the day on which clocks in Berlin go from 03:00 back to 02:00: 25 hours, 02:00 comes twice.

    2027-10-31, at 01:00 UTC (IANA time zone data base).
    """
    return _window("2027-10-31T00:00:00+02:00", "Europe/Berlin", [*DAY[:3], DAY[2], *DAY[3:]])


def expected_prices() -> Document:
    """Return the first revision of a day: what was forecast for it."""
    return _window("2027-03-17T00:00:00+00:00", "Europe/Lisbon", list(DAY))


def published_prices() -> Document:
    """Return its second revision: what came out late, the evening's peak an hour earlier, and higher."""
    came_out = [*DAY[:16], *(price + 20 for price in DAY[17:21]), *DAY[20:]]
    return _window("2027-03-17T00:00:00+00:00", "Europe/Lisbon", came_out) | {"price_basis": "published"}


def near_zero() -> Document:
    """Return a day in quarter-hours with prices on both sides of zero, on which many schedules are nearly as good."""
    prices = [round((7 * quarter % 11 - 5) * 3.1 - 4.0, 2) for quarter in range(96)]
    return _window("2027-05-16T00:00:00+01:00", "Europe/Lisbon", prices) | {"interval": "PT15M"}


def _window(start: str, timezone: str, prices: list[Any]) -> Document:
    return {
        "start": start,
        "interval": "PT60M",
        "timezone": timezone,
        "currency": "EUR",
        "price_per_mwh": [float(price) for price in prices],
        "price_basis": "forecast",
    }
