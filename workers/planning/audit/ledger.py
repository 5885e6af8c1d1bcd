"""Keep what was checked: how much of it, what broke, and the largest breach that was let pass."""

from collections.abc import Callable, Sequence
from datetime import datetime
from math import inf
from operator import sub

from schemas.schedule import Verification, Violation

TOLERANCE = 1e-6
"""Of physical limits: 1e-6 of the limit, and never less than 1e-6 in its unit."""

IDLE_MW = 1e-6
"""Up to this power an asset counts as idle."""

MOST_VIOLATIONS = 10_000
"""Listed one by one; what is beyond is counted in a last entry, so that no answer outgrows the memory."""


def pointer(*parts: str | int) -> str:
    """Return a JSON Pointer into the request.

    >>> pointer("limits", "north/east", "export_limit_mw")
    '/limits/north~1east/export_limit_mw'

    Source: RFC 6901, section 3.
    """
    return "".join("/" + str(part).replace("~", "~0").replace("/", "~1") for part in parts)


def figure(number: float) -> str:
    """Write a number for a person: nine digits tell a breach of 1e-6 from its limit."""
    return f"{number:.9g}"


def at(instant: datetime) -> str:
    """Write a local time with its offset, to the minute."""
    return instant.isoformat(sep=" ", timespec="minutes")


def tolerated(limit: float) -> float:
    """Return by how much a physical limit may be passed."""
    return TOLERANCE * max(1.0, abs(limit))


class Ledger:
    """Count checks and list violations, in the order in which they are found."""

    def __init__(self, starts: Sequence[datetime]) -> None:
        self.starts = starts
        self.checks = 0
        self.largest_residual = 0.0
        self._violations: list[Violation] = []
        self._left_out = 0

    def at_most(
        self, values: Sequence[float], limits: float | Sequence[float], tell: Callable[[int, float], None]
    ) -> None:
        """Check `values[t] <= limits[t]` within tolerance; `tell(t, excess)` reports each breach.

        One limit may stand for all intervals. An infinite limit asks nothing and is no check.
        """
        if isinstance(limits, int | float):
            if self.is_held(max(values) - limits, limits):
                self.checks += len(values) - 1
                return
            self.checks -= 1
            limits = [limits] * len(values)
        elif max(map(sub, values, limits)) <= 0:
            self.checks += len(limits) - limits.count(inf)
            return
        for t, (value, limit) in enumerate(zip(values, limits, strict=True)):
            if limit < inf and not self.is_held(value - limit, limit):
                if self._is_full():
                    self._left_out += 1  # not worth its text
                else:
                    tell(t, value - limit)

    def _is_full(self) -> bool:
        return len(self._violations) >= MOST_VIOLATIONS

    def is_held(self, excess: float, limit: float) -> bool:
        """Count a check and tell whether an excess over a limit is nothing, or small enough to be let pass."""
        self.checks += 1
        if excess <= 0:
            return True
        if excess <= tolerated(limit):
            self.let_pass(excess)
            return True
        return False

    def let_pass(self, excess: float) -> None:
        """Remember a breach that is within tolerance."""
        self.largest_residual = max(self.largest_residual, excess)

    def report(
        self,
        rule: str,
        where: str,
        amount: float,
        unit: str,
        text: str,
        *,
        asset: str | None = None,
        site: str | None = None,
        interval: int | None = None,
    ) -> None:
        """Enter a violation: `where` points into the request, `amount` is the size of the breach in `unit`."""
        if self._is_full():
            self._left_out += 1
            return
        start = None if interval is None else self.starts[interval]
        self._violations.append(
            Violation(
                rule=rule,
                pointer=where,
                asset=asset,
                site=site,
                interval_start=start,
                amount=amount,
                unit=unit,
                text=text,
            )
        )

    def verification(self) -> Verification:
        """Return what was found."""
        violations = list(self._violations)
        if self._left_out:
            text = f"{self._left_out} further violations are not listed one by one"
            violations.append(
                Violation(
                    rule="further_violations", pointer="", amount=float(self._left_out), unit="violations", text=text
                )
            )
        return Verification(checks=self.checks, violations=violations, largest_residual=self.largest_residual)
