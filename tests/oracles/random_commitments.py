"""Draw commitments for random jobs: every `applies_to` form, binding and priced, with all that narrows them down."""

from __future__ import annotations

import random
from dataclasses import dataclass
from typing import Any

from tests.oracles.formulation_clock import Clock, spans

Document = dict[str, Any]


@dataclass(frozen=True)
class Ground:
    """Hold what commitments of a job can be about; uncoupled, none is about the sum of several assets."""

    stores: list[Document]
    loads: list[Document]
    sites: list[Document]
    coupled: bool

    def members(self, site_id: str) -> list[Document]:
        """Return the assets on a site."""
        return [asset for asset in self.stores + self.loads if asset.get("site") == site_id]


def draw_commitments(draw: random.Random, clock: Clock, ground: Ground) -> list[Document]:
    """Return up to three commitments, each with at least one row."""
    drafts = CommitmentDraft(draw, clock, ground)
    drawn = [drafts.commitment(f"firm-{n + 1}") for n in range(draw.choice([0, 1, 1, 2, 2, 3]))]
    return [commitment for commitment in drawn if spans(commitment, clock)]


class CommitmentDraft:
    """Draw commitments on hours for stores and fixed loads."""

    def __init__(self, draw: random.Random, clock: Clock, ground: Ground) -> None:
        self.draw = draw
        self.clock = clock
        self.ground = ground

    def chance(self, probability: float) -> bool:
        """Return true with a probability."""
        return self.draw.random() < probability

    def number(self, low: float, high: float, digits: int = 2) -> float:
        """Return a rounded number between two."""
        return round(self.draw.uniform(low, high), digits)

    def border(self, index: int) -> str:
        """Return the start of an interval as text; the window's end for the number of intervals."""
        return self.clock.text(self.clock.starts[0] + index * self.clock.step)

    def commitment(self, commitment_id: str) -> Document:
        """Return one commitment."""
        applies_to, members, each_alone = self._subject()
        count = len(self.clock)
        commitment: Document = {"id": commitment_id, "kind": "hours_at_least", "applies_to": applies_to}
        direction = "charge" if self.chance(0.2) or not any(a["kind"] == "storage" for a in members) else "discharge"
        rated = sum(a.get(f"{direction}_limit_mw", 0.0) for a in members)
        if direction == "charge" or self.chance(0.3):
            commitment["direction"] = direction
        able = [a.get(f"{direction}_limit_mw", 0.0) > 0 for a in members]
        if (all(able) if each_alone else any(able)) and self.chance(0.6):
            commitment["threshold"] = {"fraction_of_rated": self.number(0.15, 0.7)}
        else:
            smallest = min((a.get(f"{direction}_limit_mw", 1.0) for a in members), default=1.0)
            basis = smallest if each_alone else rated
            commitment["threshold"] = {"mw": round(self.number(0.15, 0.7) * basis, 3) or 0.5}
        if self.chance(0.25):
            commitment["headroom_mw"] = round(0.06 * rated, 3)
        first, last = 0, count
        if self.chance(0.35):
            first = self.draw.randint(0, count // 2)
            commitment["from"] = self.border(first)
        if self.chance(0.25):
            last = self.draw.randint(first + 2, count)
            commitment["to"] = self.border(last)
        hours = self.draw.randint(1, max(1, (last - first) // 4))
        if self.chance(0.35):
            commitment["each_day"] = True
            hours = 1 if self.chance(0.6) else hours
            if self.chance(0.6):
                commitment["between"] = self.wall_times()
        if self.chance(0.35):
            commitment["min_block_hours"] = self.draw.randint(1, hours + 1) * self.clock.hours
        commitment["hours"] = hours * self.clock.hours
        if self.chance(0.25):
            begin = self.draw.randrange(count)
            end = min(count, begin + self.draw.randint(1, 2))
            commitment["excused"] = [{"from": self.border(begin), "to": self.border(end)}]
        if self.chance(0.4):
            commitment["shortfall_price_per_hour"] = self.number(0, 250, 1)
        return commitment

    def _subject(self) -> tuple[Document, list[Document], bool]:
        """Return an `applies_to`, the assets it is about, and whether each of them has rows of its own."""
        sited = [
            s
            for s in self.ground.sites
            if (found := self.ground.members(s["id"])) and (self.ground.coupled or len(found) == 1)
        ]
        form = self.draw.choice(
            ["assets", "assets", "group", "site", "fleet"] if self.ground.coupled else ["assets", "group"]
        )
        if form == "site" and not sited:
            form = "assets"
        if form == "fleet":
            return {"fleet": True}, self.ground.stores + self.ground.loads, False
        if form == "site":
            site_id = self.draw.choice(sited)["id"]
            return {"site": site_id}, self.ground.members(site_id), False
        if form == "group":
            size = self.draw.randint(2, len(self.ground.stores)) if self.ground.coupled else 1
            members = self.draw.sample(self.ground.stores, size)
            if self.ground.coupled and self.ground.loads and self.chance(0.3):
                members = members + self.ground.loads
            return {"group": [a["id"] for a in members]}, members, False
        if self.ground.loads and self.chance(0.06):
            return {"assets": [self.ground.loads[0]["id"]]}, [self.ground.loads[0]], True
        members = self.draw.sample(self.ground.stores, self.draw.choice([1, 1, min(2, len(self.ground.stores))]))
        return {"assets": [a["id"] for a in members]}, members, True

    def wall_times(self) -> list[str]:
        """Return whole hours around the local time of some interval; past midnight where that is late."""
        local = self.clock.starts[self.draw.randrange(len(self.clock))].astimezone(self.clock.zone)
        first = (local.hour - self.draw.randint(0, 2)) % 24
        last = (first + self.draw.randint(2, 6)) % 24
        return [f"{first:02d}:00", f"{last:02d}:00"]
