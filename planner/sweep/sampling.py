"""Terrain along a straight line of the grid."""

import numpy as np
from numpy.typing import NDArray

from planner.physics._jit import scalar
from planner.terrain import bilinear


@scalar
def sampled_line(
    values: NDArray, row_a: float, col_a: float, row_b: float, col_b: float, intervals: int
) -> NDArray:
    """Bilinear values at ``intervals + 1`` evenly spaced points from a to b, both ends included."""
    out = np.empty(intervals + 1)
    for i in range(intervals + 1):
        share = i / intervals
        out[i] = bilinear(values, row_a + share * (row_b - row_a), col_a + share * (col_b - col_a))
    return out
