"""Half-power directions of a pattern, found by measuring it.

Half power means 3 dB below the peak, as the pattern formulas and data sheets have it.
"""

import numpy as np
from numpy.typing import NDArray

from planner.antenna.pattern import Pattern

HALF_POWER_DB = 3.0
SCAN_STEP_DEG = 0.1
HALVINGS = 40  # of a scan step: far below a millionth of a degree


def half_power_edges_deg(
    pattern: Pattern, *, electrical_downtilt_deg: float | None = None
) -> tuple[float, float]:
    """Azimuth offsets left and right of the peak where the gain is 3 dB below it. [deg]

    Parameters
    ----------
    pattern : Pattern
    electrical_downtilt_deg : float or None
        Positive downwards; None: what the pattern carries. [deg]

    Returns
    -------
    (left, right), left < right, offsets clockwise from the boresight; a pair such as (-45, 45).
    (-180, 180) where the gain never falls by 3 dB.

    Notes
    -----
    Measured in the cut through the peak, at the elevation where the boresight's vertical cut is
    highest. The first crossing on each side counts.
    """
    elevations = np.arange(-90.0, 90.0 + SCAN_STEP_DEG, SCAN_STEP_DEG).clip(-90.0, 90.0)
    upright = pattern.gain(0.0, elevations, electrical_downtilt_deg=electrical_downtilt_deg)
    elevation_deg = middle_of_peak_deg(elevations, upright)

    def gain(azimuth_deg: float | NDArray[np.float64]) -> NDArray[np.float64]:
        return pattern.gain(
            azimuth_deg, elevation_deg, electrical_downtilt_deg=electrical_downtilt_deg
        )

    offsets = np.arange(-180.0, 180.0, SCAN_STEP_DEG)
    levels = gain(offsets)
    peak_deg = middle_of_peak_deg(offsets, levels)
    wanted_dbi = float(levels.max()) - HALF_POWER_DB
    around = np.arange(0.0, 360.0, SCAN_STEP_DEG)
    edges = []
    for side in (-1.0, 1.0):
        below = np.flatnonzero(gain(peak_deg + side * around) < wanted_dbi)
        if below.size == 0:
            return -180.0, 180.0
        inner = float(around[max(int(below[0]) - 1, 0)])
        outer = float(around[below[0]])
        for _ in range(HALVINGS):
            middle = 0.5 * (inner + outer)
            if float(gain(peak_deg + side * middle)) < wanted_dbi:
                outer = middle
            else:
                inner = middle
        edges.append(peak_deg + side * outer)
    return edges[0], edges[1]


def half_power_beamwidth_deg(
    angle_deg: NDArray[np.float64], level_db: NDArray[np.float64], *, around: bool
) -> float:
    """Width between the points 3 dB below the peak of a cut given by points. [deg]

    Parameters
    ----------
    angle_deg, level_db : arrays of n, angles increasing, levels joined by straight lines
    around : bool
        Whether the cut closes on itself, with points at -180 and 180.

    Returns
    -------
    float. The whole span of the cut where it never falls by 3 dB; in a cut that does not close,
    an end of the cut counts as an edge.
    """
    peak_deg = middle_of_peak_deg(angle_deg, level_db)
    wanted_db = float(level_db.max()) - HALF_POWER_DB
    span_deg = float(angle_deg[-1] - angle_deg[0])
    if around:
        angle_deg = np.concatenate((angle_deg[:-1] - 360.0, angle_deg[:-1], angle_deg + 360.0))
        level_db = np.concatenate((level_db[:-1], level_db[:-1], level_db))
    width_deg = 0.0
    for side in (-1.0, 1.0):
        beyond = side * (angle_deg - peak_deg)
        order = np.argsort(beyond)
        distances, levels = beyond[order], level_db[order]
        outside = np.flatnonzero((distances > 0.0) & (levels < wanted_db))
        if outside.size == 0:
            if around:
                return span_deg
            width_deg += float(distances[-1])
            continue
        first = int(outside[0])
        width_deg += float(
            np.interp(
                wanted_db,
                [levels[first], levels[first - 1]],
                [distances[first], distances[first - 1]],
            )
        )
    return min(width_deg, span_deg)


def middle_of_peak_deg(angle_deg: NDArray[np.float64], level_db: NDArray[np.float64]) -> float:
    """Angle of the highest level of a cut; the middle where several neighbours are as high."""
    first = int(np.argmax(level_db))
    last = first
    while last + 1 < level_db.size and level_db[last + 1] >= level_db[first] - 1e-9:
        last += 1
    return float(0.5 * (angle_deg[first] + angle_deg[last]))
