"""The audit: replays a schedule from the request and the decisions, with nothing of the planner's.

It imports the contract alone and has its own arithmetic of days, outages and units, in plain Python, so that a fault in
the planner cannot pass both. A store's set point is one net power per interval: it cannot charge and discharge at once.

What it finds is advisory as the schedule is: protection settings, the battery management system, the connection
agreement and licensed, local practice prevail.
"""

from workers.planning.audit.case import NotAuditedError
from workers.planning.audit.replay import Replay, replay
from workers.planning.audit.set_points import Decision

__all__ = ["Decision", "NotAuditedError", "Replay", "replay"]
