"""What couples assets, so that they cannot be planned one by one (contract, section 5, `per_asset`)."""

from collections import Counter
from collections.abc import Iterator

from schemas.fleet import Fleet, Site
from schemas.job import OneWindow
from schemas.problems import Fault, pointer


def couplings(job: OneWindow) -> list[Fault]:
    """List what couples assets of a job whose fleet and window are inline; nothing for a single asset."""
    fleet, window = job.fleet, job.window
    if fleet is None or window is None or len(fleet.assets) < 2:
        return []
    return [*_fleet(job, fleet), *_sites(job, fleet), *_commitments(job, fleet)]


def _fault(what: str, *steps: str | int) -> Fault:
    return Fault(pointer(*steps), "coupled", f"{what} couples assets: `per_asset` cannot plan them one by one")


def _fleet(job: OneWindow, fleet: Fleet) -> Iterator[Fault]:
    for member in ("export_limit_mw", "import_limit_mw", "lot_mw"):
        if getattr(fleet, member) is not None:
            yield _fault(f"the fleet's `{member}`", "fleet", member)
    if "fleet" in job.limits:
        yield _fault("today's limit of the fleet", "limits", "fleet")
    if job.window is not None and job.window.settled_at == "fleet":
        yield _fault("a settlement of the whole fleet", "window", "settled_at")


def _sites(job: OneWindow, fleet: Fleet) -> Iterator[Fault]:
    behind = Counter(asset.site for asset in fleet.assets if asset.site is not None)
    for number, site in enumerate(fleet.sites):
        if behind[site.id] > 1:
            yield from _shared_site(job, site, number)


def _shared_site(job: OneWindow, site: Site, number: int) -> Iterator[Fault]:
    for member in ("export_limit_mw", "import_limit_mw", "lot_mw"):
        if getattr(site, member) is not None:
            yield _fault(f"`{member}` of site {site.id}", "fleet", "sites", number, member)
    for member in ("peak_import_charge_per_mw", "import_fee_per_mwh", "export_fee_per_mwh"):
        if getattr(site, member):
            yield _fault(f"`{member}` of site {site.id}", "fleet", "sites", number, member)
    if site.id in job.limits:
        yield _fault(f"today's limit of site {site.id}", "limits", site.id)
    if site.id in job.positions:
        yield _fault(f"the position of site {site.id}", "positions", site.id)
    if job.window is not None and job.window.price_per_mwh is None:
        yield _fault(f"a price to buy and one to sell at site {site.id}", "window", "buy_price_per_mwh")


def _commitments(job: OneWindow, fleet: Fleet) -> Iterator[Fault]:
    behind = Counter(asset.site for asset in fleet.assets if asset.site is not None)
    for number, commitment in enumerate(job.commitments):
        whom = commitment.applies_to
        several = (
            (whom.group is not None and len(whom.group) > 1)
            or (whom.site is not None and behind[whom.site] > 1)
            or whom.fleet is not None
        )
        if several:
            yield _fault(f"commitment {commitment.id}", "commitments", number, "applies_to")
