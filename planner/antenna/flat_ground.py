"""Where the beam of a mounted antenna meets flat ground, in the azimuth of its highest gain.

The ground is level and without curvature, at the foot of the mast; nothing is reflected.
"""

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from planner.antenna.cuts import STEP_DEG, Side, half_power_distance_deg, side_lobes
from planner.antenna.key_figures import beam_figures
from planner.antenna.mounting import antenna_direction_deg, checked_tilt, mounted_gain_dbi
from planner.antenna.pattern import Pattern
from planner.errors import PatternError, Problem

HEIGHTS_M = 0.5, 1000.0


@dataclass(frozen=True, slots=True, kw_only=True)
class Ring:
    """A direction of the elevation cut and where it meets the ground."""

    elevation_deg: float  # true, positive upwards
    gain_dbi: float  # minus infinity in a null where nothing is radiated
    distance_m: float | None  # along the ground; None: the direction does not meet it


@dataclass(frozen=True, slots=True, kw_only=True)
class FlatGroundRings:
    """Rings on the ground; an edge is None where the gain does not fall by 3 dB on that side."""

    azimuth_offset_deg: float  # of the highest gain, clockwise from the boresight
    main_beam: Ring
    upper_edge: Ring | None  # 3 dB below the peak, above the main beam
    lower_edge: Ring | None  # and below it: nearer to the mast
    nulls: tuple[Ring, ...]  # those that meet the ground, from the mast outwards


def flat_ground_rings(
    pattern: Pattern,
    *,
    antenna_height_m: float,
    mechanical_downtilt_deg: float = 0.0,
    electrical_downtilt_deg: float = 0.0,
) -> FlatGroundRings:
    """Where main beam, half-power edges and nulls meet flat ground.

    Parameters
    ----------
    pattern : Pattern
    antenna_height_m : float
        Above the ground, 0.5 to 1000. [m]
    mechanical_downtilt_deg, electrical_downtilt_deg : float
        Positive downwards, -45 to 45. [deg]

    Raises
    ------
    PatternError
        A height or tilt outside its range.
    """
    if not HEIGHTS_M[0] <= antenna_height_m <= HEIGHTS_M[1]:
        allowed = f"{HEIGHTS_M[0]:g} to {HEIGHTS_M[1]:g} m"
        raise PatternError(
            Problem(where="antenna_height_m", found=f"{antenna_height_m:g}", allowed=allowed)
        )

    beam = beam_figures(pattern, electrical_downtilt_deg=electrical_downtilt_deg)
    checked_tilt(mechanical_downtilt_deg)
    turned, _ = antenna_direction_deg(  # back, from the antenna's frame to the true one
        beam.peak_azimuth_offset_deg,
        beam.peak_elevation_deg,
        mechanical_downtilt_deg=-mechanical_downtilt_deg,
    )
    azimuth_deg = float(turned)

    def gain(elevation_deg: ArrayLike) -> NDArray[np.float64]:
        return mounted_gain_dbi(
            pattern,
            true_azimuth_deg=azimuth_deg,
            elevation_deg=elevation_deg,
            azimuth_deg=0.0,
            mechanical_downtilt_deg=mechanical_downtilt_deg,
            electrical_downtilt_deg=electrical_downtilt_deg,
        )

    def ring(elevation_deg: float) -> Ring:
        return Ring(
            elevation_deg=elevation_deg,
            gain_dbi=float(gain(elevation_deg)),
            distance_m=ground_distance_m(elevation_deg, antenna_height_m),
        )

    peak_deg = _peak_elevation_deg(gain)
    peak_dbi = float(gain(peak_deg))

    def down(away: NDArray[np.float64]) -> NDArray[np.float64]:
        return gain(peak_deg - away) - peak_dbi

    def up(away: NDArray[np.float64]) -> NDArray[np.float64]:
        return gain(peak_deg + away) - peak_dbi

    sides: tuple[tuple[Side, float, float], ...] = (
        (down, -1.0, 90.0 + peak_deg),
        (up, 1.0, 90.0 - peak_deg),
    )
    edges: list[Ring | None] = []
    nulls = []
    for side, sign, reach_deg in sides:
        away = half_power_distance_deg(side, reach_deg)
        edges.append(None if away is None else ring(peak_deg + sign * away))
        nulls += [ring(peak_deg + sign * lobe.null_deg) for lobe in side_lobes(side, reach_deg)]
    meeting = [null for null in nulls if null.distance_m is not None]
    return FlatGroundRings(
        azimuth_offset_deg=azimuth_deg,
        main_beam=ring(peak_deg),
        upper_edge=edges[1],
        lower_edge=edges[0],
        nulls=tuple(sorted(meeting, key=lambda null: null.elevation_deg)),
    )


def ground_distance_m(elevation_deg: float, antenna_height_m: float) -> float | None:
    """Distance along flat ground to where a direction meets it; None at or above the horizon."""
    if elevation_deg >= 0.0:
        return None
    return antenna_height_m * max(math.tan(math.radians(90.0 + elevation_deg)), 0.0)


def _peak_elevation_deg(gain: Side) -> float:
    """Elevation of the highest gain; the middle of it where the top is flat. [deg]"""
    elevations = np.arange(-90.0, 90.0 + STEP_DEG, STEP_DEG).clip(-90.0, 90.0)
    reach = STEP_DEG
    while True:
        levels = gain(elevations)
        top = np.flatnonzero(levels >= levels.max() - 1e-6)
        peak = float(0.5 * (elevations[top[0]] + elevations[top[-1]]))
        if reach < 1e-4 or top.size > 1:
            return peak
        elevations = np.clip(peak + reach * np.linspace(-1.0, 1.0, 33), -90.0, 90.0)
        reach /= 16.0
