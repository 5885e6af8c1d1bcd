"""Names stand for one thing each."""

from collections.abc import Iterable, Iterator

from schemas.checks.request import Request, Steps, fault
from schemas.problems import Fault

FLEET = "fleet"
"""The word for the fleet where meters are named, and so no id."""


def faults(request: Request) -> Iterator[Fault]:
    """Name ids that are given twice, or are the word `fleet`."""
    if request.fleet is not None:
        places: list[tuple[Steps, str]] = [
            (("fleet", "sites", position, "id"), site.id) for position, site in enumerate(request.fleet.sites)
        ]
        places += [
            (("fleet", "assets", position, "id"), asset.id) for position, asset in enumerate(request.fleet.assets)
        ]
        yield from _given_twice(places, "site or asset")
        for position, asset in enumerate(request.fleet.assets):
            held = getattr(asset, "reserve_products", None) or ()
            place = ("fleet", "assets", position, "reserve_products")
            yield from _given_twice((((*place, entry), name) for entry, name in enumerate(held)), "product")
    for steps, window in request.windows:
        products = enumerate(window.reserve_products)
        yield from _given_twice(
            (((*steps, "reserve_products", place, "id"), product.id) for place, product in products), "product"
        )
    commitments = enumerate(request.job.commitments)
    yield from _given_twice(
        ((("commitments", position, "id"), promise.id) for position, promise in commitments), "commitment"
    )
    yield from _given_twice(((("levers", place), lever) for place, lever in enumerate(request.job.levers)), "lever")


def _given_twice(places: Iterable[tuple[Steps, str]], what: str) -> Iterator[Fault]:
    seen: set[str] = set()
    for steps, name in places:
        if name in seen:
            yield fault("duplicate", f"another {what} has the name `{name}` already", *steps)
        elif name == FLEET:
            yield fault("not-allowed", "`fleet` stands for the whole fleet and is no id", *steps)
        seen.add(name)
