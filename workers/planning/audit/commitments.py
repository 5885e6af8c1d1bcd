"""Replay the commitments, row by row, each kind by its own rule.

A binding row that is not met is a breach; a priced one is paid for and breaks no rule.
"""

from collections.abc import Iterator

from schemas.commitments import Commitment, EnergyAtLeast, EnergyAtMost, FirmDelivery, HoursAtLeast, HoursAtMost
from schemas.schedule import CommitmentResult
from workers.planning.audit.case import Case
from workers.planning.audit.energy_rows import replay_energy
from workers.planning.audit.firm_rows import replay_firm_delivery
from workers.planning.audit.hours_at_least import replay_hours_at_least
from workers.planning.audit.hours_at_most import replay_hours_at_most
from workers.planning.audit.reserve_rows import replay_reserve_holding
from workers.planning.audit.rows import Readings, Row, Target, rows_of, targets_of


def replay_commitments(case: Case, readings: Readings) -> tuple[list[CommitmentResult], list[float]]:
    """Return all rows in the request's order and the price paid for each shortfall; breaches go to the ledger.

    Raises ValueError when a commitment names an asset, a site or a product that there is none of.
    """
    results: list[CommitmentResult] = []
    costs: list[float] = []
    for place, commitment in enumerate(case.job.commitments):
        rows = rows_of(case, commitment)
        for target in targets_of(case, commitment, readings):
            for result, cost in _replay_rows(case, place, commitment, target, rows, readings):
                results.append(result)
                costs.append(cost)
    return results, costs


def _replay_rows(
    case: Case, place: int, commitment: Commitment, target: Target, rows: list[Row], readings: Readings
) -> Iterator[tuple[CommitmentResult, float]]:
    if isinstance(commitment, HoursAtLeast):
        return replay_hours_at_least(case, place, commitment, target, rows)
    if isinstance(commitment, HoursAtMost):
        return replay_hours_at_most(case, place, commitment, target, rows)
    if isinstance(commitment, FirmDelivery):
        return replay_firm_delivery(case, place, commitment, target, rows)
    if isinstance(commitment, EnergyAtLeast | EnergyAtMost):
        return replay_energy(case, place, commitment, target, rows)
    return replay_reserve_holding(case, place, commitment, target, rows, readings.held)
