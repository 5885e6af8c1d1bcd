"""What stands beside every schedule, wherever it is shown or returned."""

ADVISORY = (
    "Advisory: this schedule moves heavy equipment. Protection settings, the battery management system, the connection "
    "agreement and licensed, local practice prevail."
)
CHECK_FIRST = "Check it against the plant's present state before dispatch."

CAUTIONS = (ADVISORY, CHECK_FIRST)
