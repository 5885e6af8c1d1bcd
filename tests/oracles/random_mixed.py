"""Generate small valid jobs that mix every kind of asset and commitment, with reserve products, lots and islands.

The same seed gives the same job. Names, prices and sizes are invented. A share of the jobs cannot be met, on purpose.
`random_requests` keeps to stores and fixed loads; its seeds are stored elsewhere, so this is a generator of its own.
"""

from __future__ import annotations

import random
from datetime import timedelta
from typing import Any

from tests.oracles.formulation_clock import Clock, Job, read_clock, series
from tests.oracles.random_commitments import Ground
from tests.oracles.random_mixed_commitments import draw_mixed_commitments, most_mw
from tests.oracles.random_requests import NAMES, StorageDraft

LETTERS = {"storage": "b", "generator": "g", "renewable": "w", "flexible_load": "p", "fixed_load": "base"}
WEIGHTS = {"storage": 7, "generator": 7, "renewable": 4, "flexible_load": 4, "fixed_load": 2}


def mixed_request(
    seed: int, *, assets: int | None = None, intervals: int | None = None, coupled: bool | None = None
) -> Job:
    """Return a job of `assets` assets (2-4 where not given) over `intervals` (4-10 where not given).

    With `coupled` true something couples assets; false, nothing does and `per_asset` may take it; None: either.
    """
    draw = random.Random(seed)
    wanted = draw.random() < 0.7 if coupled is None else coupled
    return _MixedDraft(draw, assets or draw.randint(2, 4), intervals or draw.randint(4, 10), wanted).job()


class _MixedDraft(StorageDraft):
    """Draw the parts of one job in order; `loads` holds all that is no store, `stores` the stores."""

    def __init__(self, draw: random.Random, assets: int, intervals: int, coupled: bool) -> None:
        self.draw = draw
        self.coupled = coupled
        self.window = self._window(intervals)
        self.clock: Clock = read_clock(self.window)
        self.h = self.clock.hours
        self._products()
        self.forecasts: dict[str, Any] = {}
        self.sites: list[dict[str, Any]] = [{"id": name} for name in ("quay", "yard")[: draw.randint(1, 2)]]
        self.everything: list[dict[str, Any]] = []
        if coupled and assets > 2 and self.chance(0.3):
            self._island()
        while len(self.everything) < assets:
            kind = draw.choices(list(WEIGHTS), list(WEIGHTS.values()))[0]
            self.everything.append(self._asset(kind, len(self.everything) + 1))
        self._place()
        self.stores = [a for a in self.everything if a["kind"] == "storage"]
        self.loads = [a for a in self.everything if a["kind"] != "storage"]

    def job(self) -> Job:
        """Return the whole job."""
        job: Job = {"task": "schedule", "fleet": {"assets": self.everything}, "window": self.window}
        job |= {"method": "auto", "relative_gap": 1e-6}
        self._initial(job)
        self._targets(job)
        self._needs(job)
        if self.forecasts:
            job["forecasts"] = self.forecasts
        self._outages(job)
        self._meters(job)
        self._lots(job)
        ground = Ground(self.stores, self.loads, self.sites, self.coupled)
        drafts = draw_mixed_commitments(self.draw, self.clock, ground, self.forecasts, self.products)
        if drafts:
            job["commitments"] = drafts
        self._counted(job)
        job["fleet"]["sites"] = self.sites
        return job

    def _products(self) -> None:
        """Give the window up to three reserve products."""
        self.products: list[dict[str, Any]] = []
        for n in range(self.draw.choice([0, 0, 1, 1, 2, 3])):
            direction = self.draw.choice(["up", "up", "down", "symmetric"])
            minutes = self.draw.choice([15, 30, 60])
            product: dict[str, Any] = {"id": f"{direction}-{n + 1}", "direction": direction, "sustain_minutes": minutes}
            if self.chance(0.5):
                product["block_hours"] = self.draw.choice([1, 2, 4])
            price = self.number(0, 8, 1) if self.chance(0.4) else self.series(0, 12, 1)
            self.products.append(product | {"price_per_mw_per_hour": price})
        if self.products:
            self.window["reserve_products"] = self.products

    def _island(self) -> None:
        """Put a generator and a load it can mostly serve on a site without a connection."""
        self.sites.append({"id": "skerry", "export_limit_mw": 0.0, "import_limit_mw": 0.0})
        generator = self._asset("generator", 1) | {"site": "skerry"}
        low, high = generator.get("min_output_mw", 0.0), 0.9 * generator["max_output_mw"]
        if self.chance(0.7):
            for key in ("ramp_up_mw_per_hour", "ramp_down_mw_per_hour"):
                generator.pop(key, None)
        load = {"id": "skerry-base", "kind": "fixed_load", "site": "skerry"}
        self.forecasts["skerry-base"] = self.series(low + 0.05, max(low + 0.05, high))
        self.everything += [generator, load]

    def _asset(self, kind: str, number: int) -> dict[str, Any]:
        suffix = LETTERS[kind] if kind == "fixed_load" else f"{LETTERS[kind]}{number}"
        asset_id = f"{self.draw.choice(NAMES)}{number}-{suffix}"
        if kind == "storage":
            asset = self._store(asset_id)
        elif kind == "generator":
            asset = self._generator(asset_id)
        elif kind == "renewable":
            asset = self._renewable(asset_id)
        elif kind == "flexible_load":
            asset = self._flexible_load(asset_id)
        else:
            asset = {"id": asset_id, "kind": "fixed_load"}
            self.forecasts[asset_id] = self.number(0.2, 1.5) if self.chance(0.3) else self.series(0.0, 2.0)
        if kind in ("storage", "generator") and self.products and self.chance(0.3):
            ids = [product["id"] for product in self.products]
            asset["reserve_products"] = self.draw.sample(ids, self.draw.randint(0, len(ids)))
        return asset

    def _generator(self, asset_id: str) -> dict[str, Any]:
        most = self.draw.randint(2, 10) / 2
        generator: dict[str, Any] = {"id": asset_id, "kind": "generator", "max_output_mw": most}
        cost: dict[str, Any] = {"linear_per_mwh": self.number(20, 95, 1)}
        if self.chance(0.75):
            generator["min_output_mw"] = round(most * self.number(0.1, 0.5), 2)
        if self.chance(0.6):
            cost["constant_per_hour"] = self.number(1, 30, 1)
        if self.chance(0.3):
            cost["quadratic_per_mw2h"] = self.number(0.2, 4, 1)
        generator["cost"] = cost
        if self.chance(0.65):
            hours, dearest, entries = 0.0, 0.0, []
            for _ in range(self.draw.randint(1, 3)):
                dearest = round(dearest + self.number(2, 40, 1), 1)
                entries.append({"after_hours_off": hours, "cost": dearest})
                # Whole and half intervals: 1.5 intervals are reached after two.
                hours += self.draw.choice([1, 1.5, 2, 3]) * self.h
            generator["start_costs"] = entries
        for key, probability in (("min_up_hours", 0.45), ("min_down_hours", 0.4)):
            if self.chance(probability):
                generator[key] = self.draw.choice([1, 1.5, 2, 2, 3]) * self.h
        for key in ("ramp_up_mw_per_hour", "ramp_down_mw_per_hour"):
            if self.chance(0.3):
                generator[key] = round(most * self.number(0.2, 0.9) / self.h, 3)
        return generator

    def _renewable(self, asset_id: str) -> dict[str, Any]:
        renewable: dict[str, Any] = {"id": asset_id, "kind": "renewable"}
        self.forecasts[asset_id] = self.number(0.3, 2.0) if self.chance(0.1) else self.series(0.0, 3.0)
        if self.chance(0.3):
            renewable["curtailable"] = False
        if self.chance(0.4):
            renewable["cost_per_mwh"] = self.number(0, 40, 1)
        return renewable

    def _flexible_load(self, asset_id: str) -> dict[str, Any]:
        limit = self.number(0.5, 2.5)
        load: dict[str, Any] = {"id": asset_id, "kind": "flexible_load", "draw_limit_mw": limit}
        if self.chance(0.6):
            load["min_draw_mw"] = round(limit * self.number(0.1, 0.6), 2)
            if self.chance(0.5):
                load["interruptible"] = False
        return load

    def _place(self) -> None:
        """Put assets on sites; uncoupled jobs keep to what `per_asset` may take."""
        ids = [site["id"] for site in self.sites]
        grid = [site_id for site_id in ids if site_id != "skerry"]
        taken: set[str] = set()
        free = [asset for asset in self.everything if "site" not in asset]
        for n, asset in enumerate(free):
            if self.coupled and n < 2:
                asset["site"] = grid[0]
            elif self.chance(0.7):
                asset["site"] = self.draw.choice(ids)
            # Several assets on one meter with two prices are coupled: one asset a meter there.
            if not self.coupled and self.two_prices and asset.get("site") in taken:
                del asset["site"]
            taken.add(asset.get("site", ""))

    def _initial(self, job: Job) -> None:
        super()._initial(job)
        for generator in self.everything:
            if generator["kind"] != "generator" or self.chance(0.2):
                continue
            on = self.chance(0.65)
            state: dict[str, Any] = {"on": on}
            if self.chance(0.6):
                state["hours_in_state"] = self.draw.choice([1, 1, 2, 3, 5]) * self.h
            if on and self.chance(0.7):
                low = generator.get("min_output_mw", 0.0)
                state["output_mw"] = self.number(low, generator["max_output_mw"])
                state["output_mw"] = min(generator["max_output_mw"], max(low, state["output_mw"]))
            job["initial"][generator["id"]] = state

    def _needs(self, job: Job) -> None:
        """Give flexible loads one need or two that do not overlap; at times none."""
        for load in self.everything:
            if load["kind"] != "flexible_load" or self.chance(0.05):
                continue
            count = len(self.clock)
            split = self.draw.randint(2, count - 2)
            spans = [(0, split), (split, count)] if self.chance(0.35) else [self.draw.choice([(0, count), (1, count)])]
            needs = []
            for first, last in spans:
                most = load["draw_limit_mw"] * (last - first) * self.h
                least = load.get("min_draw_mw", 0.0) * self.h
                need: dict[str, Any] = {"energy_mwh": round(max(least, most * self.number(0.1, 0.65)), 3)}
                if first > 0:
                    need["from"] = self._border(first)
                if last < count:
                    need["to"] = self._border(last)
                needs.append(need)
            job.setdefault("energy_needs", {})[load["id"]] = needs

    def _border(self, index: int) -> str:
        return self.clock.text(self.clock.starts[0] + index * self.clock.step)

    def _outages(self, job: Job) -> None:
        outages: list[dict[str, Any]] = []
        for _ in range(self.draw.choice([0, 0, 0, 1, 1, 2])):
            asset = self.draw.choice(self.everything)
            if asset.get("site") == "skerry" and self.chance(0.8):
                continue
            first = self.clock.starts[0] + timedelta(
                minutes=self.draw.choice([0, 7, self.h * 60]) + self.h * 60 * self.draw.randint(-2, len(self.clock) - 1)
            )
            last = first + timedelta(minutes=self.h * 60 * self.draw.randint(1, 3) + self.draw.choice([0, 11]))
            outage: dict[str, Any] = {
                "asset": asset["id"],
                "kind": self.draw.choice(["planned", "forced"]),
                "from": self.clock.text(first),
                "to": None if self.chance(0.1) else self.clock.text(last),
            }
            fraction = self.draw.choice([0.0, 0.0, 0.25, 0.5, 0.8])
            if asset["kind"] == "storage" and self.chance(0.3):
                outage["available_charge_fraction"] = fraction
                outage["available_discharge_fraction"] = self.draw.choice([0.0, 0.5, 1.0])
            else:
                outage["available_fraction"] = fraction
            outages.append(outage)
        if outages:
            job["outages"] = outages

    def _site_meter(self, job: Job, site: dict[str, Any], members: list[dict[str, Any]]) -> None:
        if site["id"] != "skerry":
            super()._site_meter(job, site, members)
        elif self.chance(0.3):
            site["import_limit_mw"] = 0

    def _limits(self, members: list[dict[str, Any]], today: bool = False) -> dict[str, Any]:
        """Return limits that bind at times and mostly leave room for what cannot be helped."""
        out, drawn, forced_out, forced_in = 0.0, 0.0, 0.01, 0.01
        for a in members:
            out += max(most_mw(a, "discharge", self.forecasts, len(self.clock)))
            drawn += max(most_mw(a, "charge", self.forecasts, len(self.clock)))
            forced_in += a.get("standby_load_mw", 0.0) + 0.7 * a.get("draw_limit_mw", 0.0)
            if a["kind"] == "fixed_load":
                forced_in += max(series(self.forecasts[a["id"]], len(self.clock)))
            if not a.get("curtailable", True):
                forced_out += max(series(self.forecasts[a["id"]], len(self.clock)))
        limits: dict[str, Any] = {}
        for key, most, least in (("export_limit_mw", out, forced_out), ("import_limit_mw", drawn, forced_in)):
            if self.chance(0.75):
                low, high = max(least, 0.35 * most), max(least, 0.35 * most) + 0.5 * most
                limits[key] = self.series(low, high) if today and self.chance(0.7) else self.number(low, high)
        return limits or {"import_limit_mw": round(forced_in + 0.5 * drawn, 2)}

    def _lots(self, job: Job) -> None:
        """Give a meter with an asset that can follow them lots; coupled jobs at times the fleet."""
        for site in self.sites:
            members = self.members(site["id"])
            follows = any(a["kind"] == "storage" and a["id"] in job["initial"] for a in members)
            if follows and (self.coupled or len(members) == 1) and self.chance(0.25):
                site["lot_mw"] = self.draw.choice([0.1, 0.25, 0.5])
        if self.coupled and self.stores and self.chance(0.06):
            job["fleet"]["lot_mw"] = self.draw.choice([0.1, 0.25])

    def _counted(self, job: Job) -> None:
        super()._counted(job)
        counted = job.get("counted_before", {}).get("commitments", {})
        for commitment in job.get("commitments", []):
            if commitment["id"] in counted and commitment["kind"] != "hours_at_least":
                # In the commitment's unit, and within what an `at_most` allows.
                most = commitment.get("hours", commitment.get("energy_mwh", 1.0))
                value = round(0.5 * most / self.h) * self.h if "hours" in commitment else round(0.4 * most, 3)
                ids = commitment["applies_to"].get("assets")
                several = ids is not None and len(ids) > 1
                counted[commitment["id"]] = {ids[0]: value} if several else value
