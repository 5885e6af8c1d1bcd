"""Read the threshold of a commitment by the hour, in MW."""

from schemas.commitments import HoursAtLeast, HoursAtMost
from workers.planning.audit.rows import Target

THRESHOLD_TOLERANCE_MW = 1e-6
HOURS_TOLERANCE = 1e-9
"""Hours written as decimal fractions; far below the shortest interval."""


def threshold_mw(commitment: HoursAtLeast | HoursAtMost, target: Target) -> float:
    """Return the threshold without headroom; raise ValueError when the commitment has none."""
    threshold = commitment.threshold
    if threshold.mw is not None:
        return threshold.mw
    if threshold.fraction_of_rated is None:
        raise ValueError(f"commitment {commitment.id} has no threshold")
    return threshold.fraction_of_rated * target.rated_mw(commitment.direction)
