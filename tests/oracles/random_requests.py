"""Generate small valid jobs for stores and fixed loads that use all the contract gives them.

The same seed gives the same job. Names, prices and sizes are invented. Not every job can be met: a share of them is
infeasible on purpose, as outages, targets, run times and binding commitments are drawn independently.
"""

from __future__ import annotations

import random
from datetime import UTC, datetime, timedelta
from typing import Any
from zoneinfo import ZoneInfo

from tests.oracles.formulation_clock import Clock, Job, read_clock
from tests.oracles.random_commitments import Ground, draw_commitments

NAMES = ("wharf", "mill", "fen", "kiln", "loft")
ORDINARY_DAYS = (
    ("Europe/Lisbon", "2027-02-09"),
    ("Asia/Tokyo", "2027-05-18"),
    ("America/New_York", "2027-07-06"),
    ("UTC", "2027-09-14"),
)
CLOCK_CHANGE_DAYS = (
    ("Europe/Berlin", "2027-03-28"),
    ("Europe/Berlin", "2027-10-31"),
    ("Europe/Lisbon", "2027-10-31"),
    ("America/New_York", "2027-03-14"),
    ("America/New_York", "2027-11-07"),
    ("Australia/Lord_Howe", "2027-04-04"),
)


def request(seed: int, *, assets: int | None = None, intervals: int | None = None, coupled: bool | None = None) -> Job:
    """Return a job of `assets` stores (2-5 where not given) over `intervals` (6-16 where not given).

    With `coupled` true something couples assets; false, nothing does and `per_asset` may take it; None: either.
    """
    draw = random.Random(seed)
    wanted = draw.random() < 0.7 if coupled is None else coupled
    return StorageDraft(draw, assets or draw.randint(2, 5), intervals or draw.randint(6, 16), wanted).job()


class StorageDraft:
    """Draw the parts of one job in order; later parts look at earlier ones."""

    def __init__(self, draw: random.Random, stores: int, intervals: int, coupled: bool) -> None:
        self.draw = draw
        self.coupled = coupled
        self.window = self._window(intervals)
        self.clock: Clock = read_clock(self.window)
        self.h = self.clock.hours
        self.stores = [self._store(f"{name}-b{n + 1}") for n, name in enumerate(_names(draw, stores))]
        self.loads: list[dict[str, Any]] = []
        if self.chance(0.4):
            self.loads.append({"id": f"{NAMES[draw.randrange(len(NAMES))]}-base", "kind": "fixed_load"})
        self.sites: list[dict[str, Any]] = []
        self._place()

    def chance(self, probability: float) -> bool:
        return self.draw.random() < probability

    def number(self, low: float, high: float, digits: int = 2) -> float:
        return round(self.draw.uniform(low, high), digits)

    def series(self, low: float, high: float, digits: int = 2) -> list[float]:
        return [self.number(low, high, digits) for _ in range(len(self.clock))]

    def job(self) -> Job:
        """Return the whole job."""
        assets = self.stores + self.loads
        self.draw.shuffle(assets)
        job: Job = {"task": "schedule", "fleet": {"assets": assets}, "window": self.window, "method": "auto"}
        job["relative_gap"] = 1e-6
        self._initial(job)
        self._targets(job)
        if self.loads:
            job["forecasts"] = {a["id"]: self._forecast() for a in self.loads}
        self._outages(job)
        self._meters(job)
        self._commitments(job)
        self._counted(job)
        if self.sites:
            job["fleet"]["sites"] = self.sites
        return job

    def _window(self, intervals: int) -> dict[str, Any]:
        zone, day = self.draw.choice(CLOCK_CHANGE_DAYS if self.chance(0.4) else ORDINARY_DAYS)
        # A shift of half an hour would leave whole-hour borders off the borders of hourly intervals.
        minutes = self.draw.choice([15, 30] if zone == "Australia/Lord_Howe" else [60, 60, 30, 15])
        hours = max(1, intervals * minutes // 60)
        midnight = datetime.fromisoformat(day).replace(tzinfo=ZoneInfo(zone)).astimezone(UTC)
        # Windows begin before, at or after a midnight, so that most cross a border of days or a clock change.
        start = midnight + timedelta(hours=self.draw.randint(-hours + 1, 4))
        window: dict[str, Any] = {
            "start": start.astimezone(ZoneInfo(zone)).isoformat(),
            "interval": self.draw.choice(["PT60M", "PT1H"]) if minutes == 60 else f"PT{minutes}M",
            "timezone": zone,
            "currency": "EUR",
            "price_basis": self.draw.choice(["forecast", "published"]),
        }
        prices = [self.number(-40, 10) if self.chance(0.12) else self.number(20, 120) for _ in range(intervals)]
        self.two_prices = self.chance(0.4)
        if self.two_prices:
            crossed = 0.3 if self.chance(0.4) else 0.0
            window["sell_price_per_mwh"] = prices
            window["buy_price_per_mwh"] = [
                round(p + (self.number(-8, 0) if self.chance(crossed) else self.number(0, 15)), 2) for p in prices
            ]
        else:
            window["price_per_mwh"] = prices
        return window

    def _store(self, asset_id: str) -> dict[str, Any]:
        discharge = self.draw.randint(2, 10) / 2
        charge = discharge if self.chance(0.5) else round(discharge * self.number(0.5, 1.2), 2)
        if self.chance(0.05):
            charge = 0.0
        span = self.h * len(self.clock)
        capacity = round(discharge * span * self.number(0.12, 0.5), 2)
        store: dict[str, Any] = {
            "id": asset_id,
            "kind": "storage",
            "discharge_limit_mw": discharge,
            "charge_limit_mw": charge,
            "energy_capacity_mwh": capacity,
            "charge_efficiency": self.draw.choice([1.0, 0.97, 0.95, 0.9, 0.85]),
            "discharge_efficiency": self.draw.choice([1.0, 0.96, 0.94, 0.9]),
        }
        if self.chance(0.4):
            store["min_stored_mwh"] = round(capacity * self.number(0.02, 0.12), 3)
        if self.chance(0.3):
            store["max_stored_mwh"] = round(capacity * self.number(0.85, 1.0), 3)
        if self.chance(0.3):
            store["self_discharge_per_hour"] = self.number(0.001, 0.02, 4)
        if self.chance(0.3):
            store["standby_load_mw"] = self.number(0.01, 0.08)
        if self.chance(0.6):
            store["wear_cost_per_mwh"] = self.number(0, 6, 1)
        if self.chance(0.3):
            store["max_cycles_per_day"] = self.number(0.4, 1.5)
        if self.chance(0.45):
            self._minimums(store, charge, discharge)
        if self.chance(0.25):
            least = max(store.get("min_charge_mw", 0.0), store.get("min_discharge_mw", 0.0))
            store["ramp_mw_per_hour"] = round((least + discharge * self.number(0.25, 1.2)) / self.h, 3)
        return store

    def _minimums(self, store: dict[str, Any], charge: float, discharge: float) -> None:
        """Give a store minimum powers, and mostly the run, rest and start limits that need them."""
        share = 1.0 if self.chance(0.1) else 0.5
        store["min_discharge_mw"] = round(discharge * self.number(0.1, share), 2)
        if charge > 0:
            store["min_charge_mw"] = round(charge * self.number(0.1, share), 2)
        if self.chance(0.6):
            # 1.5 intervals are rounded up to 2.
            store["min_run_hours"] = self.draw.choice([1, 1.5, 2, 2, 3]) * self.h
        if self.chance(0.5):
            store["min_rest_hours"] = self.draw.choice([1, 1, 1.5, 2]) * self.h
        if self.chance(0.5):
            store["max_starts_per_day"] = self.draw.randint(1, 4)

    def _place(self) -> None:
        """Put assets on sites; uncoupled jobs keep to what `per_asset` may take."""
        everything = self.stores + self.loads
        ids = ["quay", "yard"][: self.draw.randint(1, 2)]
        for n, asset in enumerate(everything):
            if self.coupled and n < 2:
                asset["site"] = ids[0]
            elif self.chance(0.7):
                asset["site"] = self.draw.choice(ids)
        if not self.coupled and self.two_prices:
            # Several assets on one meter with two prices are coupled: one asset a meter here.
            taken: set[str] = set()
            for asset in everything:
                if asset.get("site") in taken:
                    del asset["site"]
                taken.add(asset.get("site", ""))
        self.sites = [{"id": site_id} for site_id in ids]

    def members(self, site_id: str) -> list[dict[str, Any]]:
        return Ground(self.stores, self.loads, self.sites, self.coupled).members(site_id)

    def _forecast(self) -> Any:
        return self.number(0.2, 2.0) if self.chance(0.3) else self.series(0.0, 2.5)

    def _initial(self, job: Job) -> None:
        job["initial"] = {}
        rule = self.draw.choices([None, "assume_middle", "hold_out"], [6, 2, 1])[0]
        if rule is not None:
            job["missing_initial"] = rule
        for store in self.stores:
            if rule is None or self.chance(0.6):
                job["initial"][store["id"]] = self._state(store)

    def _state(self, store: dict[str, Any]) -> dict[str, Any]:
        capacity = store["energy_capacity_mwh"]
        low, high = store.get("min_stored_mwh", 0.0), store.get("max_stored_mwh", capacity)
        stored = low + (high - low) * self.number(0.05, 1.0)
        place = self.draw.random()
        if place < 0.07:
            stored = low * self.number(0.3, 0.95)
        elif place < 0.14:
            stored = high + (capacity - high) * self.number(0.1, 1.0)
        elif place < 0.2:
            stored = capacity * self.number(1.001, 1.019, 3)
        state: dict[str, Any] = {"stored_mwh": round(stored, 3)}
        if self.chance(0.3):
            state = {"state_of_charge_percent": min(101.9, round(100 * stored / capacity, 2))}
        direction = self.draw.choice(["idle", "idle", "charge", "discharge"])
        if direction != "idle" and store[f"{direction}_limit_mw"] > 0:
            limit = store[f"{direction}_limit_mw"]
            power = max(store.get(f"min_{direction}_mw", 0.0), round(limit * self.number(0.2, 1.0), 2))
            state["power_mw"] = power if direction == "discharge" else -power
        if self.chance(0.5):
            state["hours_in_state"] = self.draw.randint(1, 3) * self.h
        return state

    def _targets(self, job: Job) -> None:
        targets: dict[str, Any] = {}
        for store in self.stores:
            target: dict[str, Any] = {}
            if store["id"] in job["initial"] and self.chance(0.55):
                high = store.get("max_stored_mwh", store["energy_capacity_mwh"])
                low = store.get("min_stored_mwh", 0.0)
                target["final_stored_mwh"] = round(low + (high - low) * self.number(0.0, 0.4), 3)
            if store["id"] in job["initial"] and self.chance(0.3):
                target["final_value_per_mwh"] = self.number(20, 80, 1)
            if target:
                targets[store["id"]] = target
        if targets:
            job["targets"] = targets

    def _outages(self, job: Job) -> None:
        outages: list[dict[str, Any]] = []
        for _ in range(self.draw.choice([0, 0, 0, 1, 1, 2])):
            asset = self.draw.choice(self.stores if self.chance(0.85) else self.stores + self.loads)
            # Off the borders of intervals as often as on them, sometimes begun before the window or without an end.
            first = self.clock.starts[0] + timedelta(
                minutes=self.draw.choice([0, 7, self.h * 60]) + self.h * 60 * self.draw.randint(-3, len(self.clock) - 1)
            )
            last = first + timedelta(minutes=self.h * 60 * self.draw.randint(1, 4) + self.draw.choice([0, 11]))
            outage: dict[str, Any] = {
                "asset": asset["id"],
                "kind": self.draw.choice(["planned", "forced"]),
                "from": self.clock.text(first),
                "to": None if self.chance(0.15) else self.clock.text(last),
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

    def _meters(self, job: Job) -> None:
        """Give sites limits, fees, peak charges and positions, the fleet limits and a settlement."""
        for site in self.sites:
            members = self.members(site["id"])
            if not members or (not self.coupled and len(members) > 1):
                continue
            self._site_meter(job, site, members)
        for asset in self.stores + self.loads:
            if "site" not in asset and self.chance(0.2):
                job.setdefault("positions", {})[asset["id"]] = self.series(-1, 2, 1)
        if self.coupled:
            self._fleet_meter(job)
            if not _couples(job, self.sites):
                self.sites[0].update(self._limits(self.members(self.sites[0]["id"])))

    def _site_meter(self, job: Job, site: dict[str, Any], members: list[dict[str, Any]]) -> None:
        if self.chance(0.5):
            site.update(self._limits(members))
        if self.chance(0.25):
            job.setdefault("limits", {})[site["id"]] = self._limits(members, today=True)
        if self.chance(0.3):
            site["import_fee_per_mwh"] = self.number(0.5, 8, 1)
        if self.chance(0.3):
            site["export_fee_per_mwh"] = self.number(0.5, 4, 1)
        if self.chance(0.3):
            site["peak_import_charge_per_mw"] = self.number(5, 80, 1)
        if self.chance(0.3):
            job.setdefault("positions", {})[site["id"]] = self.series(-2, 3, 1)

    def _fleet_meter(self, job: Job) -> None:
        everything = self.stores + self.loads
        if self.chance(0.3):
            job["fleet"].update(self._limits(everything))
        if self.chance(0.15):
            job.setdefault("limits", {})["fleet"] = self._limits(everything, today=True)
        if self.chance(0.25):
            self.window["settled_at"] = "fleet"
            job.pop("positions", None)
            if self.chance(0.5):
                job["positions"] = {"fleet": self.series(-3, 5, 1)}
        elif self.chance(0.3):
            self.window["settled_at"] = "site"

    def _limits(self, members: list[dict[str, Any]], today: bool = False) -> dict[str, Any]:
        """Return limits that bind at times: a share of what the stores can do, plus what the loads draw at most."""
        out = sum(a.get("discharge_limit_mw", 0.0) for a in members)
        drawn = sum(a.get("charge_limit_mw", 2.5) for a in members)
        standby = sum(a.get("standby_load_mw", 0.0) for a in members)
        # A hair more than loads and standby draw, so that rounding never makes idle stores impossible.
        fixed = 0.01 + 2.5 * sum(a["kind"] == "fixed_load" for a in members)
        limits: dict[str, Any] = {}
        for key, most, least in (("export_limit_mw", out, 0.0), ("import_limit_mw", drawn, fixed + standby)):
            if self.chance(0.75):
                low, high = max(least, 0.35 * most), max(least, 0.35 * most) + 0.5 * most
                limits[key] = self.series(low, high) if today and self.chance(0.7) else self.number(low, high)
        return limits or {"import_limit_mw": round(fixed + standby + 0.5 * drawn, 2)}

    def _commitments(self, job: Job) -> None:
        drafts = draw_commitments(self.draw, self.clock, Ground(self.stores, self.loads, self.sites, self.coupled))
        if drafts:
            job["commitments"] = drafts

    def _counted(self, job: Job) -> None:
        counted: dict[str, Any] = {}
        for commitment in job.get("commitments", []):
            if self.chance(0.25):
                hours = self.draw.randint(1, 2) * self.h
                ids = commitment["applies_to"].get("assets")
                value = hours if ids is None or (len(ids) == 1 and self.chance(0.5)) else {ids[0]: hours}
                counted.setdefault("commitments", {})[commitment["id"]] = value
        for store in self.stores:
            before: dict[str, Any] = {}
            if "max_cycles_per_day" in store and self.chance(0.5):
                allowed = store["max_cycles_per_day"] * store["energy_capacity_mwh"]
                before["discharged_mwh"] = round(allowed * self.number(0.1, 0.8), 2)
            if "max_starts_per_day" in store and self.chance(0.5):
                before["starts"] = self.draw.randint(0, store["max_starts_per_day"])
            if before:
                counted.setdefault("assets", {})[store["id"]] = before
        for site in self.sites:
            if "peak_import_charge_per_mw" in site and self.chance(0.6):
                counted.setdefault("sites", {})[site["id"]] = {"peak_import_mw": self.number(0, 4, 1)}
        if counted:
            job["counted_before"] = counted


def _names(draw: random.Random, count: int) -> list[str]:
    """Return `count` names, some of them more than once."""
    return [draw.choice(NAMES) for _ in range(count)]


def _couples(job: Job, sites: list[dict[str, Any]]) -> bool:
    """Tell whether meters couple assets already: the first site holds at least two in a coupled job."""
    fleet, window = job["fleet"], job["window"]
    return (
        len(sites[0]) > 1
        or sites[0]["id"] in {**job.get("limits", {}), **job.get("positions", {})}
        or "fleet" in job.get("limits", {})
        or "import_limit_mw" in fleet
        or "export_limit_mw" in fleet
        or window.get("settled_at") == "fleet"
        or "buy_price_per_mwh" in window
    )
