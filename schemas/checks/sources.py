"""The fleet and the windows a job is about: given once, and able to follow one another."""

from collections.abc import Iterator
from itertools import pairwise

from schemas.checks.request import Request, Steps, fault
from schemas.job import OneWindow, SequenceJob
from schemas.problems import Fault
from schemas.quantities import MAX_INTERVALS
from schemas.window import Window

ALIKE_IN_A_SEQUENCE = ("interval", "timezone", "currency", "settled_at", "price_basis")


def faults(request: Request) -> Iterator[Fault]:
    """Name what keeps the job from having one fleet, and one horizon with prices in each of its intervals."""
    yield from _given_once(request, "fleet")
    if isinstance(request.job, OneWindow):
        yield from _given_once(request, "window")
    for steps, window in request.windows:
        yield from _prices(window, steps)
    if isinstance(request.job, SequenceJob):
        yield from _sequence(request.job)


def _given_once(request: Request, name: str) -> Iterator[Fault]:
    given = [
        member
        for member in (name, f"{name}_id")
        if member in request.unread or getattr(request.job, member) is not None
    ]
    if not given:
        yield fault("missing", f"one of `{name}` and `{name}_id` is required", name)
    elif len(given) == 2:
        yield fault("exactly-one", f"only one of `{name}` and `{name}_id` can be given", f"{name}_id")


def _prices(window: Window, steps: Steps) -> Iterator[Fault]:
    prices = {
        "price_per_mwh": window.price_per_mwh,
        "buy_price_per_mwh": window.buy_price_per_mwh,
        "sell_price_per_mwh": window.sell_price_per_mwh,
    }
    given = {name for name, price in prices.items() if price is not None}
    if given in ({"buy_price_per_mwh"}, {"sell_price_per_mwh"}):
        (lacking,) = {"buy_price_per_mwh", "sell_price_per_mwh"} - given
        yield fault("missing", "buying and selling prices are given as a pair", *steps, lacking)
    elif given not in ({"price_per_mwh"}, {"buy_price_per_mwh", "sell_price_per_mwh"}):
        detail = "exactly one of `price_per_mwh` and the pair `buy_price_per_mwh`, `sell_price_per_mwh` is required"
        yield fault("exactly-one", detail, *steps)
    if given and window.intervals == 0:
        detail = "at least one price must be an array: its length is the number of intervals"
        yield fault("wrong-length", detail, *steps, min(given))
    series = {name: price for name, price in prices.items() if isinstance(price, list)}
    series_of = {(name,): price for name, price in series.items()} | {
        ("reserve_products", position, "price_per_mw_per_hour"): product.price_per_mw_per_hour
        for position, product in enumerate(window.reserve_products)
        if isinstance(product.price_per_mw_per_hour, list) and window.intervals
    }
    for place, price in series_of.items():
        if len(price) != window.intervals:
            detail = f"has {len(price)} entries where the window has {window.intervals} intervals"
            yield fault("wrong-length", detail, *steps, *place)


def _sequence(job: SequenceJob) -> Iterator[Fault]:
    numbered = [(position, window) for position, window in enumerate(job.windows) if isinstance(window, Window)]
    for (before, earlier), (position, later) in pairwise(numbered):
        for name in ALIKE_IN_A_SEQUENCE:
            if getattr(earlier, name) != getattr(later, name):
                detail = f"differs from `{name}` of the window before it in the sequence"
                yield fault("inconsistent", detail, "windows", position, name)
        if _products(earlier) != _products(later):
            detail = "other reserve products than in the window before it in the sequence"
            yield fault("inconsistent", detail, "windows", position, "reserve_products")
        ends = earlier.start + earlier.intervals * earlier.interval
        if position == before + 1 and earlier.intervals and later.start != ends:
            detail = f"does not start where the window before it ends, at {ends.isoformat()}"
            yield fault("inconsistent", detail, "windows", position, "start")
    count = sum(window.intervals for _, window in numbered)
    if count > MAX_INTERVALS:
        yield fault("too-large", f"{count} intervals together; the limit is {MAX_INTERVALS}", "windows")


def _products(window: Window) -> set[tuple[object, ...]]:
    return {
        (product.id, product.direction, product.sustain_minutes, product.block_hours)
        for product in window.reserve_products
    }
