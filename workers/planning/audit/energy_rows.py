"""Replay `energy_at_least` and `energy_at_most`: so much energy in one direction.

    delivered = sum over the row's intervals of h * max(power, 0) + counted before
    met         when delivered >= energy, or <= energy

power  counted in the commitment's direction; of a group, a site or the fleet the net sum
"""

from collections.abc import Iterator, Sequence
from math import fsum

from schemas.commitments import EnergyAtLeast, EnergyAtMost
from schemas.schedule import CommitmentResult
from workers.planning.audit.case import Case
from workers.planning.audit.ledger import figure, pointer
from workers.planning.audit.rows import Row, Target, credits_of


def replay_energy(
    case: Case, place: int, commitment: EnergyAtLeast | EnergyAtMost, target: Target, rows: Sequence[Row]
) -> Iterator[tuple[CommitmentResult, float]]:
    """Yield each row with the price paid for what is missing, or for what is too much."""
    values = target.power_towards(commitment.direction)
    for row, credit in credits_of(case, commitment, target, rows):
        delivered = case.clock.hours * fsum(values[t] for t in row.intervals if values[t] > 0) + credit
        off = commitment.energy_mwh - delivered
        if isinstance(commitment, EnergyAtMost):
            off = -off
        met = case.ledger.is_held(off, commitment.energy_mwh)
        if not met and commitment.shortfall_price_per_mwh is None:
            _tell(case, place, commitment, target, row, delivered, off)
        result = CommitmentResult(
            id=commitment.id,
            asset=target.asset,
            day=row.day_text,
            required_mwh=commitment.energy_mwh,
            delivered_mwh=delivered,
            met=met,
        )
        yield result, max(0.0, off) * (commitment.shortfall_price_per_mwh or 0.0)


def _tell(
    case: Case,
    place: int,
    commitment: EnergyAtLeast | EnergyAtMost,
    target: Target,
    row: Row,
    delivered: float,
    off: float,
) -> None:
    verb = "discharges" if commitment.direction == "discharge" else "charges"
    how = "above" if isinstance(commitment, EnergyAtMost) else "short of"
    energy = f"{target.name} {verb} {figure(delivered)} MWh{row.when}"
    text = f"{commitment.id}: {energy}, {figure(off)} MWh {how} {figure(commitment.energy_mwh)} MWh"
    case.ledger.report(commitment.kind, pointer("commitments", place), off, "MWh", text, asset=target.asset)
