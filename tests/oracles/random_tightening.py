"""Tighten a random job one step: ask for more, allow less, take something away. It stays a valid job."""

from __future__ import annotations

import random
from typing import Any

from tests.oracles.formulation_clock import Job, given, read_clock, series
from tests.oracles.random_commitments import Ground
from tests.oracles.random_mixed_commitments import draw_mixed_commitments, most_mw

Document = dict[str, Any]

PRICES = ("shortfall_price_per_hour", "shortfall_price_per_mwh", "shortfall_price_per_mw_per_hour")


class Tightening:
    """Tighten one job in place; a way that finds nothing to tighten leaves it as it is."""

    def __init__(self, draw: random.Random, job: Job) -> None:
        self.draw = draw
        self.job = job
        self.clock = read_clock(job["window"])
        self.h = self.clock.hours
        self._ways = {
            "bound": self._bound,
            "commitment": self._commitment,
            "more_hours": self._more_hours,
            "fewer_hours": self._fewer_hours,
            "more_energy": self._more_energy,
            "less_energy": self._less_energy,
            "more_firm_power": self._more_firm_power,
            "more_reserve": self._more_reserve,
            "outage": self._outage,
            "higher_target": self._higher_target,
            "less_stored": self._less_stored,
            "lower_limit": self._lower_limit,
            "larger_need": self._larger_need,
            "higher_floor": self._higher_floor,
            "fewer_cycles": self._fewer_cycles,
            "fewer_starts": self._fewer_starts,
            "longer_times": self._longer_times,
            "slower_ramp": self._slower_ramp,
            "more_load": self._more_load,
            "no_curtailment": self._no_curtailment,
        }
        self.ways = list(self._ways)

    def apply(self, way: str) -> None:
        """Tighten the job in one way."""
        self._ways[way]()

    def _number(self, low: float, high: float, digits: int = 2) -> float:
        return round(self.draw.uniform(low, high), digits)

    def _assets(self, *kinds: str) -> list[Document]:
        return [asset for asset in self.job["fleet"]["assets"] if asset["kind"] in kinds]

    def _one(self, among: list[Document]) -> Document:
        """Return one of some documents; an empty one, which nothing reads, where there is none."""
        return self.draw.choice(among) if among else {}

    def _commitments(self, kind: str) -> list[Document]:
        return [one for one in self.job.get("commitments", []) if one["kind"] == kind]

    def _bound(self) -> None:
        commitment = self._one([c for c in self.job.get("commitments", []) if any(price in c for price in PRICES)])
        for price in PRICES:
            commitment.pop(price, None)

    def _commitment(self) -> None:
        """Promise one thing more."""
        if len(self.job.get("commitments", [])) >= 4:
            return
        loads = self._assets("generator", "renewable", "flexible_load", "fixed_load")
        ground = Ground(self._assets("storage"), loads, self.job["fleet"].get("sites", []), not self._is_uncoupled())
        products = self.job["window"].get("reserve_products", [])
        for commitment in draw_mixed_commitments(
            self.draw, self.clock, ground, self.job.get("forecasts", {}), products
        )[:1]:
            for price in PRICES:
                commitment.pop(price, None)
            commitments = self.job.setdefault("commitments", [])
            commitments.append(commitment | {"id": f"further-{len(commitments) + 1}"})

    def _is_uncoupled(self) -> bool:
        return len(self.job["fleet"]["assets"]) == 1

    def _more_hours(self) -> None:
        commitment = self._one(self._commitments("hours_at_least"))
        if not commitment:
            return self._commitment()
        most = len(self.clock) * self.h
        commitment["hours"] = min(most, commitment["hours"] + self.draw.randint(1, 2) * self.h)
        if self.draw.random() < 0.25:
            block = commitment.get("min_block_hours", 0.0) + self.h
            commitment["min_block_hours"] = min(most, max(block, 2 * self.h))
        return None

    def _fewer_hours(self) -> None:
        commitment = self._one(self._commitments("hours_at_most"))
        if not commitment:
            return self._commitment()
        commitment["hours"] = max(0.0, commitment["hours"] - self.draw.randint(1, 3) * self.h)
        name = next(iter(commitment["threshold"]))
        commitment["threshold"][name] = round(commitment["threshold"][name] * self._number(0.3, 0.9), 3)
        return None

    def _more_energy(self) -> None:
        commitment = self._one(self._commitments("energy_at_least"))
        if not commitment:
            return self._commitment()
        commitment["energy_mwh"] = round(commitment["energy_mwh"] * self._number(1.2, 1.9) + 0.1, 3)
        return None

    def _less_energy(self) -> None:
        commitment = self._one(self._commitments("energy_at_most"))
        if not commitment:
            return self._commitment()
        commitment["energy_mwh"] = round(commitment["energy_mwh"] * self._number(0.1, 0.6), 3)
        return None

    def _more_firm_power(self) -> None:
        self._more_power("firm_delivery")

    def _more_reserve(self) -> None:
        self._more_power("reserve_holding")

    def _more_power(self, kind: str) -> None:
        commitment = self._one(self._commitments(kind))
        if not commitment:
            return self._commitment()
        factor, due = self._number(1.2, 1.8), commitment["power_mw"]
        if isinstance(due, list):
            commitment["power_mw"] = [round(mw * factor, 3) for mw in due]
            commitment["power_mw"][self.draw.randrange(len(due))] = round(max(due) * self._number(0.4, 1.0), 3)
        else:
            commitment["power_mw"] = round(due * factor, 3)
        return None

    def _outage(self) -> None:
        """Take an asset out, wholly or in part, at times off the borders of intervals or in one direction."""
        if len(self.job.get("outages", [])) >= 3:
            return
        asset = self._one(self._assets("storage", "generator", "renewable", "flexible_load"))
        if not asset:
            return
        first = self.draw.randrange(len(self.clock) - 1)
        last = self.draw.randint(first + 1, len(self.clock))
        begin, end = (self.clock.starts[0] + n * self.clock.step for n in (first, last))
        if self.draw.random() < 0.2:
            begin += 0.3 * self.clock.step
        outage: Document = {"asset": asset["id"], "kind": self.draw.choice(["planned", "planned", "forced"])}
        outage |= {"from": self.clock.text(begin.replace(microsecond=0)), "to": self.clock.text(end)}
        if asset["kind"] == "storage" and self.draw.random() < 0.3:
            outage["available_charge_fraction"] = self.draw.choice([0.0, 0.3])
            outage["available_discharge_fraction"] = self.draw.choice([0.0, 0.4, 1.0])
        else:
            outage["available_fraction"] = self.draw.choice([0.0, 0.0, 0.3])
        self.job.setdefault("outages", []).append(outage)

    def _known_stores(self) -> list[Document]:
        return [a for a in self._assets("storage") if a["id"] in self.job.get("initial", {})]

    def _higher_target(self) -> None:
        store = self._one(self._known_stores())
        if store:
            low, high = store.get("min_stored_mwh", 0.0), store.get("max_stored_mwh", store["energy_capacity_mwh"])
            target = self.job.setdefault("targets", {}).setdefault(store["id"], {})
            wanted = round(low + (high - low) * self._number(0.5, 1.0), 3)
            target["final_stored_mwh"] = min(high, max(wanted, target.get("final_stored_mwh", 0.0)))

    def _less_stored(self) -> None:
        state = self.job.get("initial", {}).get(self._one(self._known_stores()).get("id"), {})
        for member in ("stored_mwh", "state_of_charge_percent"):
            if member in state:
                state[member] = round(state[member] * self._number(0.2, 0.7), 3)

    def _lower_limit(self) -> None:
        """Lower a limit of a site or of the fleet, its own or today's, to a share of what its assets could do."""
        sites = self.job["fleet"].get("sites", [])
        meter: Document = self.draw.choice([*sites, self.job["fleet"]] if not self._is_uncoupled() or sites else [{}])
        name = meter.get("id", "fleet")
        members = [a for a in self.job["fleet"]["assets"] if name in ("fleet", a.get("site"))]
        if not members or name == "skerry":
            return
        member, direction = self.draw.choice([("export_limit_mw", "discharge"), ("import_limit_mw", "charge")])
        forecasts, count = self.job.get("forecasts", {}), len(self.clock)
        most = sum(max(most_mw(a, direction, forecasts, count)) for a in members)
        limit = round(most * self._number(0.0, 0.5), 2)
        today = self.job.get("limits", {}).get(name, {})
        if member in today or self.draw.random() < 0.3:
            values: Any = limit
            if self.draw.random() < 0.6:
                values = [round(limit * self._number(0.3, 2.0), 2) for _ in range(count)]
            self.job.setdefault("limits", {}).setdefault(name, {})[member] = values
        else:
            meter[member] = min(limit, given(meter, member, limit))

    def _larger_need(self) -> None:
        needs = self.job.get("energy_needs", {})
        need = self._one([need for listed in needs.values() for need in listed])
        if need:
            need["energy_mwh"] = round(need["energy_mwh"] * self._number(1.2, 1.8) + 0.05, 3)

    def _higher_floor(self) -> None:
        store = self._one(self._assets("storage"))
        if store:
            high = store["max_stored_mwh"] if "max_stored_mwh" in store else store["energy_capacity_mwh"]
            store["min_stored_mwh"] = round(max(store.get("min_stored_mwh", 0.0), high * self._number(0.2, 0.8)), 3)
            store["min_stored_mwh"] = min(store["min_stored_mwh"], high)

    def _fewer_cycles(self) -> None:
        store = self._one(self._assets("storage"))
        if store:
            store["max_cycles_per_day"] = self._number(0.05, 0.4)

    def _give_minimum_powers(self, store: Document) -> None:
        """Give a store what run, rest and start limits need."""
        for direction in ("charge", "discharge"):
            limit = store[f"{direction}_limit_mw"]
            if limit > 0 and store.get(f"min_{direction}_mw", 0.0) <= 0:
                store[f"min_{direction}_mw"] = round(limit * self._number(0.1, 0.5), 2)

    def _fewer_starts(self) -> None:
        store = self._one(self._assets("storage"))
        if store:
            self._give_minimum_powers(store)
            store["max_starts_per_day"] = self.draw.choice([0, 1, 1])

    def _longer_times(self) -> None:
        """Lengthen minimum run, rest, up or down times, at times with one under way at the window's start."""
        asset = self._one(self._assets("storage", "generator"))
        if not asset:
            return
        if asset["kind"] == "storage":
            self._give_minimum_powers(asset)
            names, least = ("min_run_hours", "min_rest_hours"), asset.get("min_discharge_mw", 0.0)
        else:
            names, least = ("min_up_hours", "min_down_hours"), asset.get("min_output_mw", 0.0)
        name = self.draw.choice(names)
        asset[name] = min(len(self.clock) * self.h, asset.get(name, 0.0) + self.draw.randint(1, 3) * self.h)
        state = self.job.get("initial", {}).get(asset["id"])
        if state is None or self.draw.random() < 0.4:
            return
        state["hours_in_state"] = self.h
        if asset["kind"] == "generator":
            state["on"] = name == "min_up_hours"
            state.pop("output_mw", None)
        elif name == "min_run_hours" and asset["discharge_limit_mw"] > 0:
            state["power_mw"] = max(least, round(0.5 * asset["discharge_limit_mw"], 2))
        else:
            state.pop("power_mw", None)

    def _slower_ramp(self) -> None:
        asset = self._one(self._assets("storage", "generator"))
        if not asset:
            return
        names = ["ramp_mw_per_hour"] if asset["kind"] == "storage" else ["ramp_up_mw_per_hour", "ramp_down_mw_per_hour"]
        name, most = (
            self.draw.choice(names),
            asset["discharge_limit_mw" if asset["kind"] == "storage" else "max_output_mw"],
        )
        asset[name] = round(most * self._number(0.05, 0.35) / self.h, 3)
        state = self.job.get("initial", {}).get(asset["id"], {})
        if "on" in state and self.draw.random() < 0.6:
            # Ramping down is hard from a high output, ramping up from a low one.
            state["on"], down = True, name == "ramp_down_mw_per_hour"
            state["output_mw"] = asset["max_output_mw"] if down else asset.get("min_output_mw", 0.0)

    def _more_load(self) -> None:
        load = self._one(self._assets("fixed_load"))
        if load:
            drawn = series(self.job["forecasts"][load["id"]], len(self.clock))
            self.job["forecasts"][load["id"]] = [round(mw * 1.5 + 0.1, 2) for mw in drawn]

    def _no_curtailment(self) -> None:
        plant = self._one(self._assets("renewable"))
        if plant:
            plant["curtailable"] = False
