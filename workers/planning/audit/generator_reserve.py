"""Check that a generator can deliver the reserve it holds.

on:   p[t] + up[t] <= P_max * available[t],  p[t] - down[t] >= P_min
off:  up[t] = down[t] = 0

up, down: sums over products, a symmetric one in both. Ramps do not bind what is called.
"""

from collections.abc import Sequence
from math import inf

from workers.planning.audit.generator_case import GeneratorCase
from workers.planning.audit.ledger import figure, pointer
from workers.planning.audit.reserve import Held, power_held
from workers.planning.audit.reserve_market import down_offers, total_mw, up_offers


def check_generator_reserve(one: GeneratorCase, held: Held) -> None:
    """Check up- and down-reserve against what the generator's output leaves."""
    if not held:
        return
    _check_off(one, total_mw(list(held.values())) or ())
    up = power_held(up_offers(one.case.offers), held)
    down = power_held(down_offers(one.case.offers), held)
    if up is not None:
        room = [most - mw for most, mw in zip(one.most_mw, one.power_mw, strict=True)]
        _check_room(one, "up", up, room)
    if down is not None:
        room = [mw - one.generator.min_output_mw for mw in one.power_mw]
        _check_room(one, "down", down, room)


def _check_off(one: GeneratorCase, reserve: Sequence[float]) -> None:
    where = pointer("fleet", "assets", one.place)

    def tell(t: int, excess: float) -> None:
        text = f"{one.generator.id} holds {figure(reserve[t])} MW of reserve from {one.since(t)}, but it is off"
        one.case.ledger.report("reserve_off", where, excess, "MW", text, asset=one.generator.id, interval=t)

    one.case.ledger.at_most(reserve, [inf if is_on else 0.0 for is_on in one.on], tell)


def _check_room(one: GeneratorCase, way: str, reserve: Sequence[float], room: Sequence[float]) -> None:
    def tell(t: int, excess: float) -> None:
        output = f"{one.generator.id} runs at {figure(one.power_mw[t])} MW from {one.since(t)}"
        text = f"{output} and holds {figure(reserve[t])} MW of {way}-reserve, {figure(excess)} MW more than it can give"
        member = "max_output_mw" if way == "up" else "min_output_mw"
        one.report(f"reserve_{way}_power", member, excess, "MW", text, interval=t)

    asked = [left if is_on and mw > 0 else inf for left, is_on, mw in zip(room, one.on, reserve, strict=True)]
    one.case.ledger.at_most(reserve, asked, tell)
