"""Hold what the checks of one generator look at, and read its state at the window's start.

A generator of which nothing is said was off for longer than any rule asks; one that was on ran at its minimum output.
"""

from collections.abc import Sequence
from dataclasses import dataclass
from math import inf

from schemas.fleet import Generator
from schemas.job import Initial
from workers.planning.audit.availability import Availability
from workers.planning.audit.case import Case
from workers.planning.audit.ledger import IDLE_MW, at, pointer

_SAME_POWER_MW = 1e-9
"""A maximum scaled by an outage to exactly the minimum output leaves enough to run, whatever the rounding."""


@dataclass(frozen=True)
class GeneratorStart:
    """A generator in the interval before the window: on or off, its output, and for how long; infinite: long enough."""

    was_on: bool
    output_mw: float
    hours_in_state: float


@dataclass(frozen=True)
class GeneratorCase:
    """One generator under audit: `place` in the fleet's list, decisions per interval, `most_mw` what outages leave."""

    case: Case
    place: int
    generator: Generator
    power_mw: Sequence[float]
    on: Sequence[bool]
    start: GeneratorStart
    available: Availability | None
    most_mw: Sequence[float]

    def report(self, rule: str, member: str, amount: float, unit: str, text: str, *, interval: int) -> None:
        """Enter a breach of what the generator's own `member` in the fleet asks."""
        where = pointer("fleet", "assets", self.place, member)
        self.case.ledger.report(rule, where, amount, unit, text, asset=self.generator.id, interval=interval)

    def since(self, interval: int) -> str:
        """Write when an interval starts."""
        return at(self.case.clock.starts[interval])

    def can_run(self, interval: int) -> bool:
        """Tell whether outages leave it enough to be on."""
        return self.most_mw[interval] >= max(self.generator.min_output_mw, IDLE_MW) - _SAME_POWER_MW

    def intervals_in_state(self) -> float:
        """Return how many whole intervals the state before the window had lasted."""
        hours = self.start.hours_in_state
        return inf if hours == inf else self.case.clock.intervals_passed(hours)


def read_generator_start(generator: Generator, initial: Initial | None) -> GeneratorStart:
    """Return a generator's state in the interval before the window."""
    if initial is None or not initial.on:
        hours = None if initial is None else initial.hours_in_state
        return GeneratorStart(was_on=False, output_mw=0.0, hours_in_state=inf if hours is None else hours)
    output = generator.min_output_mw if initial.output_mw is None else initial.output_mw
    hours = inf if initial.hours_in_state is None else initial.hours_in_state
    return GeneratorStart(was_on=True, output_mw=output, hours_in_state=hours)
