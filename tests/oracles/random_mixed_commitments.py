"""Draw commitments of every kind for random jobs: every `applies_to` form, binding and priced."""

from __future__ import annotations

import random

from tests.oracles.formulation_clock import Clock, series, spans
from tests.oracles.random_commitments import CommitmentDraft, Document, Ground

KINDS = {
    "hours_at_least": 5,
    "hours_at_most": 3,
    "firm_delivery": 3,
    "energy_at_least": 3,
    "energy_at_most": 3,
    "reserve_holding": 4,
}


def most_mw(asset: Document, direction: str, forecasts: Document, count: int) -> list[float]:
    """Return the most an asset can do in a direction in each of `count` intervals, outages left aside, MW."""
    kind = asset["kind"]
    if kind == "storage":
        return [asset[f"{direction}_limit_mw"]] * count
    if direction == "discharge" and kind == "generator":
        return [asset["max_output_mw"]] * count
    if direction == "charge" and kind == "flexible_load":
        return [asset["draw_limit_mw"]] * count
    if (direction, kind) in (("discharge", "renewable"), ("charge", "fixed_load")):
        return series(forecasts[asset["id"]], count)
    return [0.0] * count


def _may_hold(asset: Document, product: str) -> bool:
    return asset["kind"] in ("storage", "generator") and product in asset.get("reserve_products", [product])


def draw_mixed_commitments(
    draw: random.Random, clock: Clock, ground: Ground, forecasts: Document, products: list[Document]
) -> list[Document]:
    """Return up to three commitments, each with at least one row."""
    drafts = _MixedCommitmentDraft(draw, clock, ground, forecasts, products)
    drawn = [drafts.commitment(f"firm-{n + 1}") for n in range(draw.choice([0, 1, 1, 2, 2, 3]))]
    return [commitment for commitment in drawn if commitment and spans(commitment, clock)]


class _MixedCommitmentDraft(CommitmentDraft):
    def __init__(
        self, draw: random.Random, clock: Clock, ground: Ground, forecasts: Document, products: list[Document]
    ) -> None:
        super().__init__(draw, clock, ground)
        self.forecasts = forecasts
        self.products = products

    def commitment(self, commitment_id: str) -> Document:
        """Return one commitment; an empty document where the fleet has nothing it could be about."""
        kinds = dict(KINDS) if self.products else {k: w for k, w in KINDS.items() if k != "reserve_holding"}
        kind = self.draw.choices(list(kinds), list(kinds.values()))[0]
        direction = "charge" if kind != "reserve_holding" and self.chance(0.25) else "discharge"
        product = self.draw.choice(self.products)["id"] if kind == "reserve_holding" else None
        subject = self._about(product, direction)
        if subject is None:
            return {}
        applies_to, members, each_alone = subject
        commitment: Document = {"id": commitment_id, "kind": kind, "applies_to": applies_to}
        if kind != "reserve_holding" and (direction == "charge" or self.chance(0.2)):
            commitment["direction"] = direction
        if product is not None:
            commitment["product"] = product
        first, last = self._span(commitment)
        if kind.startswith("hours"):
            self._hours(commitment, members, each_alone, direction, first, last)
        elif kind.startswith("energy"):
            self._energy(commitment, members, each_alone, direction, first, last)
        else:
            self._power(commitment, members, each_alone, direction)
        if kind in ("hours_at_least", "hours_at_most", "firm_delivery") and self.chance(0.25):
            begin = self.draw.randrange(len(self.clock))
            end = min(len(self.clock), begin + self.draw.randint(1, 2))
            commitment["excused"] = [{"from": self.border(begin), "to": self.border(end)}]
        return commitment

    def _about(self, product: str | None, direction: str) -> tuple[Document, list[Document], bool] | None:
        """Return an `applies_to`, the assets it is about, and whether each has rows of its own."""
        everything = self.ground.stores + self.ground.loads
        if product is not None:
            able = [a for a in everything if _may_hold(a, product)]
        else:
            able = [a for a in everything if max(self._most(a, direction)) > 0]
        if not able:
            return None
        form = self.draw.choice(["assets", "assets", "group", "site", "fleet"])
        sites = [
            (site["id"], members)
            for site in self.ground.sites
            if (members := self.ground.members(site["id"])) and (self.ground.coupled or len(members) == 1)
            if any(a in able for a in members)
        ]
        if form == "fleet" and self.ground.coupled:
            return {"fleet": True}, everything, False
        if form == "site" and sites:
            site_id, members = self.draw.choice(sites)
            return {"site": site_id}, members, False
        if form == "group":
            members = [self.draw.choice(able)]
            if self.ground.coupled:
                others = [a for a in everything if a not in members]
                members += self.draw.sample(others, self.draw.randint(1, len(others)))
            return {"group": [a["id"] for a in members]}, members, False
        members = self.draw.sample(able, min(len(able), self.draw.choice([1, 1, 1, 2])))
        return {"assets": [a["id"] for a in members]}, members, True

    def _most(self, asset: Document, direction: str) -> list[float]:
        return most_mw(asset, direction, self.forecasts, len(self.clock))

    def _basis_mw(self, members: list[Document], each_alone: bool, direction: str) -> list[float]:
        """Return what one set of rows could get at most in each interval: the weakest member, or all together."""
        columns = zip(*(self._most(a, direction) for a in members), strict=True)
        return [min(column) if each_alone else sum(column) for column in columns]

    def _span(self, commitment: Document) -> tuple[int, int]:
        """Narrow a commitment down in time; return the intervals between which it lies."""
        first, last = 0, len(self.clock)
        if self.chance(0.35):
            first = self.draw.randint(0, last // 2)
            commitment["from"] = self.border(first)
        if self.chance(0.25):
            last = self.draw.randint(first + 2, last)
            commitment["to"] = self.border(last)
        if self.chance(0.35):
            commitment["each_day"] = True
            if self.chance(0.5):
                commitment["between"] = self.wall_times()
        return first, last

    def _hours(
        self, commitment: Document, members: list[Document], each_alone: bool, direction: str, first: int, last: int
    ) -> None:
        rated = [self._rated(a, direction) for a in members]
        if (all(rated) if each_alone else any(rated)) and self.chance(0.5):
            commitment["threshold"] = {"fraction_of_rated": self.number(0.15, 0.6)}
        else:
            mean = sum(self._basis_mw(members, each_alone, direction)) / len(self.clock)
            commitment["threshold"] = {"mw": round(self.number(0.1, 0.6) * mean, 3) or 0.05}
        if self.chance(0.25):
            commitment["headroom_mw"] = round(0.04 * (min(rated) if each_alone else sum(rated)), 3)
        longest = max(1, (last - first) // (4 if commitment.get("each_day") else 3))
        if commitment["kind"] == "hours_at_least":
            hours = self.draw.randint(1, longest)
            if self.chance(0.35):
                commitment["min_block_hours"] = self.draw.randint(1, hours + 1) * self.clock.hours
        else:
            hours = self.draw.randint(0, longest + 1)
        commitment["hours"] = hours * self.clock.hours
        if self.chance(0.35):
            commitment["shortfall_price_per_hour"] = self.number(0, 150, 1)

    def _energy(
        self, commitment: Document, members: list[Document], each_alone: bool, direction: str, first: int, last: int
    ) -> None:
        basis = sum(self._basis_mw(members, each_alone, direction)[first:last]) * self.clock.hours
        low, high = (0.05, 0.5) if commitment["kind"] == "energy_at_least" else (0.15, 0.8)
        if commitment.get("each_day"):
            low, high = low / 2, high / 2
        commitment["energy_mwh"] = round(self.number(low, high) * basis, 3)
        if self.chance(0.35):
            commitment["shortfall_price_per_mwh"] = self.number(0, 150, 1)

    def _power(self, commitment: Document, members: list[Document], each_alone: bool, direction: str) -> None:
        """Draw a series of power due: all the time a little, or in a few intervals more."""
        share = self.number(0.02, 0.3) if commitment["kind"] == "reserve_holding" else self.number(0.05, 0.75)
        holders = members
        if commitment["kind"] == "reserve_holding":
            holders = [a for a in members if _may_hold(a, commitment["product"])]
        basis = self._basis_mw(holders, each_alone, direction)
        if self.chance(0.2):
            commitment["power_mw"] = round(0.3 * share * min(basis), 3)
        else:
            due = self.draw.sample(range(len(basis)), self.draw.randint(1, max(1, len(basis) // 3)))
            commitment["power_mw"] = [round(share * mw, 3) if t in due else 0.0 for t, mw in enumerate(basis)]
        if self.chance(0.35):
            reserve = commitment["kind"] == "reserve_holding"
            key = "shortfall_price_per_mw_per_hour" if reserve else "shortfall_price_per_mwh"
            commitment[key] = self.number(0, 150, 1)

    def _rated(self, asset: Document, direction: str) -> float:
        """Return the rated power of a store or a generator, 0 for an asset that has none."""
        if asset["kind"] == "storage":
            return float(asset[f"{direction}_limit_mw"])
        return float(asset["max_output_mw"]) if (asset["kind"], direction) == ("generator", "discharge") else 0.0
