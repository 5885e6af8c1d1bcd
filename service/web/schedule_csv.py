"""Write a schedule as CSV in long form (RFC 4180): one line for each asset and interval."""

import csv
from collections.abc import Iterator, Mapping, Sequence
from datetime import UTC, datetime
from io import StringIO
from typing import Any

COLUMNS = ("interval_start_utc", "interval_start_local", "site", "asset", "power_mw", "stored_mwh", "on")


def lines(
    starts: Sequence[str], assets: Iterator[Mapping[str, Any]], sites: Mapping[str, str], products: Sequence[str]
) -> Iterator[str]:
    """Give the header line, then the lines of one asset after the other.

    `starts` are the local interval starts with their offsets; `sites` names the site of each asset that has one.
    Numbers are written as in JSON, so that both forms hold the same; what does not apply is left empty.
    """
    yield _written([(*COLUMNS, *(f"reserve_{product}_mw" for product in products))])
    moments = [
        (datetime.fromisoformat(start).astimezone(UTC).strftime("%Y-%m-%dT%H:%M:%SZ"), start) for start in starts
    ]
    for asset in assets:
        yield _written(_rows(asset, moments, sites.get(asset["id"], ""), products))


def _rows(
    asset: Mapping[str, Any], moments: Sequence[tuple[str, str]], site: str, products: Sequence[str]
) -> Iterator[tuple[str, ...]]:
    series = [asset["power_mw"], asset.get("stored_mwh"), asset.get("on")]
    held = asset.get("reserve_mw") or {}
    series += [held.get(product) for product in products]
    for place, (utc, local) in enumerate(moments):
        yield (utc, local, site, asset["id"], *(_cell(values, place) for values in series))


def _cell(values: Sequence[float | bool] | None, place: int) -> str:
    if values is None:
        return ""
    value = values[place]
    return str(value).lower() if isinstance(value, bool) else repr(value)


def _written(rows: Any) -> str:
    text = StringIO(newline="")
    csv.writer(text, lineterminator="\r\n").writerows(rows)
    return text.getvalue()
