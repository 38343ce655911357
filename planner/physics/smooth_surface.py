"""Effective antenna heights over a smooth surface fitted to the terrain, ITU-R P.1812-7 5.6.2.

The fit uses bare ground, without obstacles and without earth curvature. Equation numbers are from
memory; tests hold the results to published examples.
"""

import math

from numpy.typing import NDArray

from planner.physics._jit import inlined, scalar
from planner.physics._lanes import where


@inlined
def fit_increments(
    distance_m: float, height_m: float, previous_distance_m: float, previous_height_m: float
) -> tuple[float, float]:
    """One interval's share of the sums v1 and v2; P.1812-7 equations (85) and (86)."""
    step = distance_m - previous_distance_m
    v1 = step * (height_m + previous_height_m)
    v2 = step * (
        height_m * (2.0 * distance_m + previous_distance_m)
        + previous_height_m * (distance_m + 2.0 * previous_distance_m)
    )
    return v1, v2


@inlined
def smooth_surface_ends(
    v1: float,
    v2: float,
    distance_m: float,
    highest_obstruction_m: float,
    tx_obstruction_slope: float,
    rx_obstruction_slope: float,
    tx_ground_m: float,
    rx_ground_m: float,
) -> tuple[float, float]:
    """Heights of the smooth surface at the two ends; P.1812-7 equations (87) to (91).

    ``highest_obstruction_m`` is the largest height of the ground above the ray (h_obs), the two
    slopes are the steepest such heights seen from either end (alpha_obt, alpha_obr).
    """
    tx_surface = (2.0 * v1 * distance_m - v2) / (distance_m * distance_m)
    rx_surface = (v2 - v1 * distance_m) / (distance_m * distance_m)
    both = tx_obstruction_slope + rx_obstruction_slope
    obstructed = highest_obstruction_m > 0.0
    share = where(obstructed, highest_obstruction_m / both, 0.0)
    tx_surface -= where(obstructed, share * tx_obstruction_slope, 0.0)
    rx_surface -= where(obstructed, share * rx_obstruction_slope, 0.0)
    return min(tx_surface, tx_ground_m), min(rx_surface, rx_ground_m)


@scalar
def profile_smooth_surface_ends(
    distance_m: NDArray, ground_m: NDArray, tx_height_m: float, rx_height_m: float
) -> tuple[float, float]:
    """Smooth-surface heights at the ends of a whole profile of bare ground, end points included.

    Antenna heights stand above the datum, like the ground. NaN gives NaN.
    """
    total = distance_m[-1]
    v1 = 0.0
    v2 = 0.0
    highest = -math.inf
    tx_slope = -math.inf
    rx_slope = -math.inf
    for i in range(1, distance_m.size):
        d = distance_m[i]
        part1, part2 = fit_increments(d, ground_m[i], distance_m[i - 1], ground_m[i - 1])
        v1 += part1
        v2 += part2
        if i < distance_m.size - 1:
            rest = total - d
            above_ray = ground_m[i] - (tx_height_m * rest + rx_height_m * d) / total
            highest = max(highest, above_ray)
            tx_slope = max(tx_slope, above_ray / d)
            rx_slope = max(rx_slope, above_ray / rest)
    return smooth_surface_ends(
        v1, v2, total, highest, tx_slope, rx_slope, ground_m[0], ground_m[-1]
    )
