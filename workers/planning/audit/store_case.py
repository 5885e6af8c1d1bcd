"""Hold what the checks of one store look at: where it stands in the request, its power, start and availability."""

from collections.abc import Sequence
from dataclasses import dataclass

from schemas.fleet import Storage
from workers.planning.audit.availability import Availability
from workers.planning.audit.case import Case
from workers.planning.audit.initial import StartState
from workers.planning.audit.ledger import at, pointer


@dataclass(frozen=True)
class StoreCase:
    """One store under audit: `place` in the fleet's list, `power_mw` per interval, `available` None without outages."""

    case: Case
    place: int
    store: Storage
    power_mw: Sequence[float]
    start: StartState
    available: Availability | None

    def report(self, rule: str, member: str, amount: float, unit: str, text: str, *, interval: int) -> None:
        """Enter a breach of what the store's own `member` in the fleet asks."""
        where = pointer("fleet", "assets", self.place, member)
        self.case.ledger.report(rule, where, amount, unit, text, asset=self.store.id, interval=interval)

    def since(self, interval: int) -> str:
        """Write when an interval starts."""
        return at(self.case.clock.starts[interval])
