"""Answer the storage problem by results older than any program here, and tiny cases by trying everything.

None of these uses a mixed-integer solver, so an error of one cannot hide in them.
"""

from __future__ import annotations

import itertools
from collections.abc import Callable, Sequence
from dataclasses import dataclass
from typing import Any, cast

import networkx as nx


@dataclass(frozen=True)
class OpeningValue:
    """Hold what a warehouse earns from a point in time on: `fixed + per_unit * opening stock`."""

    fixed: float
    per_unit: float

    def at(self, stock: float) -> float:
        """Return the value for an opening stock."""
        return self.fixed + self.per_unit * stock


def warehouse_value(
    buy: Sequence[float],
    sell: Sequence[float],
    *,
    capacity: float,
    holding_cost: float = 0.0,
    final_value: float = 0.0,
) -> OpeningValue:
    """Return the best value of a warehouse as a linear function of its opening stock.

    In each period the best of four actions is taken, the same one for every stock: nothing, sell all, fill up, sell
    all and fill up. `buy` and `sell` are per unit, `sell` at most `buy`; `holding_cost` is per unit of closing stock.
    Raises ValueError where selling pays more than buying costs: both at once would then earn without a limit.

    Source: S. E. Dreyfus, "An analytic solution of the warehouse problem", Management Science 4(1):99-104, 1957 (the
    theorem from memory; its own numeric example was not found). `warehouse_value` asserts the linearity it claims.
    """
    if any(s > b for b, s in zip(buy, sell, strict=True)):
        raise ValueError("selling must not pay more than buying costs")
    later = OpeningValue(0.0, final_value)
    for price, paid in reversed(list(zip(buy, sell, strict=True))):
        fixed, each = later.fixed, later.per_unit - holding_cost
        filled = fixed + (each - price) * capacity
        actions = [
            OpeningValue(fixed, each),
            OpeningValue(fixed, paid),
            OpeningValue(filled, price),
            OpeningValue(filled, paid),
        ]
        later = max(actions, key=lambda action: action.at(capacity / 2))
        for stock in (0.0, capacity):
            best = max(action.at(stock) for action in actions)
            assert best - later.at(stock) <= 1e-9 * max(1.0, abs(best)), "the value is not linear in the stock"
    return later


def sum_of_increments(prices: Sequence[float], energy_mwh: float) -> float:
    """Return the margin of a lossless store that fills or empties within one interval, empty at start and end.

    Each MWh of capacity is held over exactly those borders of intervals at which the price rises, so it earns the sum
    of the positive increments. Prices must not be negative, or a full store would be paid for at the end.

    Source: common reasoning, no published source; it is Dreyfus' recursion (1957) unrolled.
    """
    return energy_mwh * sum(max(0.0, after - before) for before, after in itertools.pairwise(prices))


def network_flow_margin(
    prices: Sequence[int],
    *,
    power_mwh: int,
    capacity_mwh: int,
    opening_mwh: int = 0,
    final_mwh: int = 0,
) -> float | None:
    """Return the best margin of a lossless store as a minimum-cost flow, None where no flow exists.

    One node for the market and one per interval; buying arcs (capacity: what a store takes in an interval), selling
    arcs at the negated price, carrying arcs between intervals with the store's capacity. What is left at the end above
    `final_mwh` returns to the market for nothing. Data are whole numbers, so the optimum is too (total unimodularity).

    Source: network flow view of the warehouse problem, A. Charnes & W. W. Cooper, Operational Research Quarterly
    6:131-146, 1955 (from memory); solved by networkx's network simplex.
    """
    graph = nx.DiGraph()
    count = len(prices)
    last = f"interval {count - 1}"
    graph.add_node("market", demand=opening_mwh - final_mwh)
    for t in range(count):
        graph.add_node(f"interval {t}", demand=-opening_mwh if t == 0 else 0)
    graph.add_node("end", demand=final_mwh)
    for t, price in enumerate(prices):
        graph.add_edge("market", f"interval {t}", capacity=power_mwh, weight=price)
        graph.add_edge(f"interval {t}", "market", capacity=power_mwh, weight=-price)
        if t + 1 < count:
            graph.add_edge(f"interval {t}", f"interval {t + 1}", capacity=capacity_mwh, weight=0)
    graph.add_edge(last, "end", capacity=capacity_mwh, weight=0)
    graph.add_edge("end", "market", capacity=capacity_mwh - final_mwh, weight=0)
    try:
        cost, _ = cast(tuple[Any, Any], nx.network_simplex(graph))
    except nx.NetworkXUnfeasible:
        return None
    return -float(cost)


def enumerate_best(
    levels_mw: Sequence[float], intervals: int, margin: Callable[[tuple[float, ...]], float | None]
) -> float | None:
    """Return the best margin over every series of the given net powers, None where none is allowed.

    `margin` returns None for a series that breaks a rule. All `len(levels_mw) ** intervals` of them are tried.

    Source: none needed; it is exhaustion. It is exact where the store can only run at these levels, a lower bound
    elsewhere.
    """
    found = (margin(powers) for powers in itertools.product(levels_mw, repeat=intervals))
    return max((value for value in found if value is not None), default=None)
