"""From path fields and sectors to layers over the grid."""

from planner.coverage.layers import (
    NO_PATH,
    NONE_ABOVE_THRESHOLD,
    CellCounts,
    Coverage,
    combine,
)
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
    "NO_PATH",
    "SIGHT_BLOCKED",
    "SIGHT_CLEAR",
    "SIGHT_FULLY_FREE",
    "SIGHT_MOSTLY_FREE",
    "SIGHT_UNKNOWN",
    "CellCounts",
    "Coverage",
    "combine",
    "line_of_sight_class",
]
