"""What a cut through a pattern shows on one side of its peak: half-power edge, nulls, lobes."""

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from planner.antenna.beamwidth import HALF_POWER_DB

# Level in dB relative to the peak, of the angle away from the peak on one side, 0 or more.
Side = Callable[[NDArray[np.float64]], NDArray[np.float64]]

STEP_DEG = 1.0 / 32.0
# A lobe rises by this much above the null before it: measured patterns ripple by some tenths.
# Common practice, no source.
LOBE_RISE_DB = 1.0
_HALVINGS = 40
_ZOOM_POINTS = 33


@dataclass(frozen=True, slots=True, kw_only=True)
class Lobe:
    """A null and the lobe beyond it; angles away from the peak of the main beam."""

    null_deg: float
    null_db: float  # relative to the main beam's peak; minus infinity where nothing is radiated
    peak_deg: float
    peak_db: float  # relative to the main beam's peak


def half_power_distance_deg(side: Side, reach_deg: float) -> float | None:
    """Angle from the peak to where the level first falls by 3 dB; None if not within reach."""
    angles = _samples(reach_deg)
    below = np.flatnonzero(side(angles) < -HALF_POWER_DB)
    if below.size == 0:
        return None
    inner, outer = float(angles[max(int(below[0]) - 1, 0)]), float(angles[below[0]])
    for _ in range(_HALVINGS):
        middle = 0.5 * (inner + outer)
        if float(side(np.array([middle]))[0]) < -HALF_POWER_DB:
            outer = middle
        else:
            inner = middle
    return outer


def side_lobes(side: Side, reach_deg: float) -> tuple[Lobe, ...]:
    """Every null and lobe from the half-power edge outwards, in this order.

    A null is the lowest point before a rise by 1 dB, a lobe the highest before a fall by 1 dB or
    before the reach ends. Empty for a pattern that falls without a lobe or never falls by 3 dB.
    """
    edge_deg = half_power_distance_deg(side, reach_deg)
    if edge_deg is None:
        return ()
    angles = _samples(reach_deg)
    angles = angles[angles > edge_deg]
    levels = side(angles)
    lobes: list[Lobe] = []
    null, crest, rising = 0, 0, False
    for at in range(levels.size):
        if not rising:
            if levels[at] < levels[null]:
                null = at
            elif levels[at] > levels[null] and levels[at] >= levels[null] + LOBE_RISE_DB:
                rising, crest = True, at
        elif levels[at] > levels[crest]:
            crest = at
        elif levels[at] <= levels[crest] - LOBE_RISE_DB:
            lobes.append(_lobe(side, angles[null], angles[crest], reach_deg))
            rising, null = False, at
    if rising:
        lobes.append(_lobe(side, angles[null], angles[crest], reach_deg))
    return tuple(lobes)


def _samples(reach_deg: float) -> NDArray[np.float64]:
    whole = np.arange(0.0, reach_deg, STEP_DEG)
    return np.append(whole, reach_deg)


def _lobe(side: Side, null_deg: float, crest_deg: float, reach_deg: float) -> Lobe:
    null_deg, null_db = _extreme(side, null_deg, reach_deg, -1.0)
    crest_deg, crest_db = _extreme(side, crest_deg, reach_deg, 1.0)
    return Lobe(null_deg=null_deg, null_db=null_db, peak_deg=crest_deg, peak_db=crest_db)


def _extreme(side: Side, at_deg: float, reach_deg: float, sign: float) -> tuple[float, float]:
    """Lowest (sign -1) or highest (sign 1) level within a step of an angle, and its angle."""
    reach = STEP_DEG
    for _ in range(3):
        near = np.clip(at_deg + reach * np.linspace(-1.0, 1.0, _ZOOM_POINTS), 0.0, reach_deg)
        levels = side(near)
        best = int(np.argmax(sign * levels))
        at_deg, level = float(near[best]), float(levels[best])
        reach *= 2.0 / (_ZOOM_POINTS - 1)
    return at_deg, level
