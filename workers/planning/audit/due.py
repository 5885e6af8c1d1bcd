"""Compare power with what is due in each interval of a row, for the kinds that ask so much in every one of them."""

from collections.abc import Callable, Collection, Mapping, Sequence

from workers.planning.audit.case import Case
from workers.planning.audit.rows import Row

_DUE_TOLERANCE_MW = 1e-6


def due_in(row: Row, due: Sequence[float], excused: Collection[int]) -> list[int]:
    """List the intervals of a row in which something is due."""
    return [t for t in row.intervals if due[t] > 0 and t not in excused]


def missing_mw(values: Sequence[float], due: Sequence[float], asked: Sequence[int]) -> dict[int, float]:
    """Return by interval what is missing of what is due; power the other way is none, and no less than that."""
    return {t: due[t] - max(values[t], 0.0) for t in asked if values[t] < due[t]}


def are_all_met(case: Case, asked: Sequence[int], missing: Mapping[int, float]) -> bool:
    """Tell whether nothing is missing but what is within tolerance."""
    case.ledger.checks += len(asked)
    for mw in missing.values():
        if mw <= _DUE_TOLERANCE_MW:
            case.ledger.let_pass(mw)
    return all(mw <= _DUE_TOLERANCE_MW for mw in missing.values())


def report_missing(missing: Mapping[int, float], tell: Callable[[int, float], None]) -> None:
    """Tell each interval in which something beyond tolerance is missing, and how much."""
    for t, mw in missing.items():
        if mw > _DUE_TOLERANCE_MW:
            tell(t, mw)
