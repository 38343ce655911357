"""From path fields and sectors to layers over the grid."""

from planner.coverage.layers import (
    NO_PATH,
    NONE_ABOVE_THRESHOLD,
    CellCounts,
    Coverage,
    combine,
)
from planner.coverage.needed_height import NOT_WITHIN_LIMIT, STEP_M, UNKNOWN, needed_heights
from planner.coverage.sight import (
    SIGHT_BLOCKED,
    SIGHT_CLEAR,
    SIGHT_FULLY_FREE,
    SIGHT_MOSTLY_FREE,
    SIGHT_UNKNOWN,
    line_of_sight_class,
)

__all__ = [
    "NONE_ABOVE_THRESHOLD",
    "NOT_WITHIN_LIMIT",
    "NO_PATH",
    "SIGHT_BLOCKED",
    "SIGHT_CLEAR",
    "SIGHT_FULLY_FREE",
    "SIGHT_MOSTLY_FREE",
    "SIGHT_UNKNOWN",
    "STEP_M",
    "UNKNOWN",
    "CellCounts",
    "Coverage",
    "combine",
    "line_of_sight_class",
    "needed_heights",
]
