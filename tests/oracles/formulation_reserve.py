"""Write down the reserve an asset holds: which products, constant in blocks, and what they pay.

    income = sum over products and intervals of  h * price * held,    held[t] = held[t'] for t, t' in one block

A block is `block_hours` long, counted from local midnight in hours that really pass; a block never spans two days.
"""

from __future__ import annotations

from dataclasses import dataclass, field
from datetime import UTC, datetime, time
from math import floor
from typing import Any

from tests.oracles.formulation_clock import Clock, Job, given, series
from tests.oracles.formulation_program import Affine, Program, total


@dataclass(frozen=True)
class Reserve:
    """Hold the MW an asset holds of each product in each interval; `products` are the window's, by id."""

    products: dict[str, dict[str, Any]] = field(default_factory=dict)
    held: dict[str, list[Affine]] = field(default_factory=dict)

    def power(self, direction: str, interval: int) -> Affine:
        """Return the MW that may be asked for in one direction, `up` or `down`; symmetric products count in both."""
        return total(self.held[key][interval] for key in self._in(direction))

    def energy(self, direction: str, interval: int) -> Affine:
        """Return the MWh at the terminals that may be asked for in one direction."""
        return total(
            self.held[key][interval] * (given(self.products[key], "sustain_minutes", 0) / 60.0)
            for key in self._in(direction)
        )

    def of(self, product: str, interval: int) -> Affine:
        """Return what is held of one product, 0 where the asset may not hold it."""
        return self.held[product][interval] if product in self.held else Affine({})

    def _in(self, direction: str) -> list[str]:
        return [key for key, product in self.products.items() if product["direction"] in (direction, "symmetric")]


def add_reserve(program: Program, job: Job, asset: dict[str, Any], clock: Clock, most_mw: float) -> Reserve:
    """Add what an asset may hold, at most `most_mw` of each product, and earn its income."""
    allowed = given(asset, "reserve_products")
    products = {
        product["id"]: product
        for product in given(job["window"], "reserve_products", [])
        if allowed is None or product["id"] in allowed
    }
    held: dict[str, list[Affine]] = {}
    for key, product in products.items():
        blocks: dict[Any, Affine] = {}
        held[key] = []
        for t, price in enumerate(series(product["price_per_mw_per_hour"], len(clock))):
            block = _block(clock, t, given(product, "block_hours"))
            if block not in blocks:
                blocks[block] = program.column(0.0, most_mw)
            held[key].append(blocks[block])
            program.earn(blocks[block] * (clock.hours * price))
    return Reserve(products, held)


def _block(clock: Clock, interval: int, block_hours: float | None) -> Any:
    """Return what tells a block from the others: its day and its place in it."""
    if block_hours is None:
        return interval
    day = clock.day(interval)
    midnight = datetime.combine(day, time(), tzinfo=clock.zone).astimezone(UTC)
    passed = (clock.starts[interval] - midnight).total_seconds() / 3600.0
    return day, floor(passed / block_hours + 1e-9)
