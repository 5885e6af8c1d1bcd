"""Who is alive, by whether it moves."""

from tests.faults.clocks import HandClock
from workers.leases import Leases


def test_a_heartbeat_that_stands_still_is_dead_when_the_lease_is_over_and_not_before() -> None:
    clock = HandClock()
    leases = Leases(8, clock)
    assert leases.dead({"w": 100.0}) == set()
    clock.advance(7.9)
    assert leases.dead({"w": 100.0}) == set()
    clock.advance(0.1)
    assert leases.dead({"w": 100.0}) == {"w"}


def test_a_heartbeat_that_moves_is_alive_whichever_way_its_clock_is_set() -> None:
    clock = HandClock()
    leases = Leases(8, clock)
    for beat in (100.0, 3_700.0, 90.0, 92.0):
        assert leases.dead({"w": beat}) == set()
        clock.advance(6)


def test_what_was_seen_before_a_gap_does_not_count() -> None:
    clock = HandClock()
    leases = Leases(8, clock)
    leases.dead({"w": 100.0})
    clock.advance(60)
    leases.forget()
    assert leases.dead({"w": 100.0}) == set()
    clock.advance(8)
    assert leases.dead({"w": 100.0}) == {"w"}


def test_one_that_left_and_came_back_is_watched_anew() -> None:
    clock = HandClock()
    leases = Leases(8, clock)
    leases.dead({"w": 1.0})
    clock.advance(5)
    leases.dead({})
    clock.advance(5)
    assert leases.dead({"w": 1.0}) == set()
