"""The gain of a mounted antenna as a table, for kernels that visit millions of cells.

The table itself is in the antenna's own frame, so one table serves every azimuth. Its nodes lie on
multiples of 1/32 degree, close together where the pattern bends and far apart where it is
straight; an array of 1/32 degree bins leads from an angle to its nodes. A mechanical tilt is a
second, coarse table: by how much it shifts the azimuth offset and the elevation of each direction.
That shift is smooth, so one degree is fine enough; far from the horizon it is computed instead.
"""

import math
from dataclasses import dataclass
from typing import Literal, NamedTuple

import numpy as np
from numpy.typing import NDArray
from scipy.ndimage import maximum_filter1d

from planner.antenna.mounting import antenna_direction_deg, tilted_direction_deg
from planner.antenna.pattern import Pattern
from planner.physics._jit import scalar

BINS_PER_DEG = 32
STEPS_DEG = (1.0, 0.5, 0.25, 0.125, 0.0625, 0.03125)  # powers of two: sums of them are exact
WANTED_ERROR_DB = 0.015  # of each axis, within DEPTH_DB of the peak
DEEP_ERROR_DB = 0.5  # of each axis, further below the peak
DEPTH_DB = 32.0
SHIFT_REACH_DEG = 60.0  # elevation and tilt together, up to which the table of shifts is used
BEND_REACH = 0.08  # of a beamwidth: bends may move so far between two sampled cuts


class GainArrays(NamedTuple):
    """What a kernel needs of a :class:`GainTable`."""

    gain_dbi: NDArray[np.float32]  # [elevation node, azimuth node]
    azimuth_offset_deg: NDArray[np.float64]  # nodes, from 0 to 360
    elevation_deg: NDArray[np.float64]  # nodes, from -90 to 90
    azimuth_bin_node: NDArray[np.int32]  # for each bin the node at or below it
    elevation_bin_node: NDArray[np.int32]
    shift_deg: NDArray[np.float32]  # [elevation + 60, azimuth offset, (azimuth, elevation)]
    mechanical_downtilt_deg: float


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class GainTable:
    """Gain of a pattern at given tilts, over true directions; made by :func:`gain_table`.

    ``dataclasses.replace(table, azimuth_deg=...)`` turns the antenna.
    """

    azimuth_deg: float  # where the boresight points, clockwise from true north
    mechanical_downtilt_deg: float  # positive downwards
    electrical_downtilt_deg: float  # positive downwards
    arrays: GainArrays

    def __post_init__(self) -> None:
        for array in self.arrays:
            if isinstance(array, np.ndarray):
                array.setflags(write=False)


@scalar
def table_gain_dbi(arrays: GainArrays, azimuth_offset_deg: float, elevation_deg: float) -> float:
    """Gain from a table by bilinear interpolation in dB; NaN where an angle is NaN. [dBi]

    ``azimuth_offset_deg`` is the true azimuth less the boresight's, any real number;
    ``elevation_deg`` is the true one at the mast; beyond -90 or 90 it gives NaN.
    """
    if not abs(elevation_deg) <= 90.0 or not abs(azimuth_offset_deg) < math.inf:
        return math.nan
    offset_deg = azimuth_offset_deg - 360.0 * math.floor(azimuth_offset_deg / 360.0)
    tilt_deg = arrays.mechanical_downtilt_deg
    if tilt_deg != 0.0:
        if abs(elevation_deg) + abs(tilt_deg) < SHIFT_REACH_DEG:
            shift = arrays.shift_deg
            row = int(elevation_deg + SHIFT_REACH_DEG)
            col = min(int(offset_deg), 359)
            upwards = elevation_deg + SHIFT_REACH_DEG - row
            across = offset_deg - col
            lower_left = (1.0 - upwards) * (1.0 - across)
            lower_right = (1.0 - upwards) * across
            upper_left = upwards * (1.0 - across)
            upper_right = upwards * across
            offset_deg += (
                lower_left * shift[row, col, 0]
                + lower_right * shift[row, col + 1, 0]
                + upper_left * shift[row + 1, col, 0]
                + upper_right * shift[row + 1, col + 1, 0]
            )
            elevation_deg += (
                lower_left * shift[row, col, 1]
                + lower_right * shift[row, col + 1, 1]
                + upper_left * shift[row + 1, col, 1]
                + upper_right * shift[row + 1, col + 1, 1]
            )
        else:
            offset_deg, elevation_deg = tilted_direction_deg(offset_deg, elevation_deg, tilt_deg)
        offset_deg -= 360.0 * math.floor(offset_deg / 360.0)
    azimuth_bin = min(int(offset_deg * BINS_PER_DEG), arrays.azimuth_bin_node.size - 1)
    elevation_bin = min(
        int((elevation_deg + 90.0) * BINS_PER_DEG), arrays.elevation_bin_node.size - 1
    )
    left = arrays.azimuth_bin_node[azimuth_bin]
    lower = arrays.elevation_bin_node[elevation_bin]
    left_deg = arrays.azimuth_offset_deg[left]
    lower_deg = arrays.elevation_deg[lower]
    across = (offset_deg - left_deg) / (arrays.azimuth_offset_deg[left + 1] - left_deg)
    upwards = (elevation_deg - lower_deg) / (arrays.elevation_deg[lower + 1] - lower_deg)
    table = arrays.gain_dbi
    below = table[lower, left] + across * (table[lower, left + 1] - table[lower, left])
    above = table[lower + 1, left] + across * (table[lower + 1, left + 1] - table[lower + 1, left])
    return below + upwards * (above - below)


def gain_table(
    pattern: Pattern,
    *,
    azimuth_deg: float,
    mechanical_downtilt_deg: float = 0.0,
    electrical_downtilt_deg: float = 0.0,
) -> GainTable:
    """Table of the gain of a mounted pattern over true azimuth and elevation at the mast.

    Parameters
    ----------
    pattern : Pattern
    azimuth_deg : float
        Where the boresight points, clockwise from true north. [deg]
    mechanical_downtilt_deg, electrical_downtilt_deg : float
        Positive downwards, -45 to 45. [deg]

    Notes
    -----
    Within 30 dB of the peak the table is within 0.05 dB of the exact gain, save where a formula
    itself steps (ITU-R F.1336 does by 0.1 to 0.3 dB, at the join of main beam and side lobes):
    there the step is drawn out over 1/32 degree. At the antenna's own zenith and nadir, where a
    gain may depend on an azimuth that has no meaning there, nothing is promised within 1.5 degrees.
    """
    azimuths, elevations = _nodes(pattern, electrical_downtilt_deg)
    gain_dbi = pattern.gain(
        azimuths[np.newaxis, :],
        elevations[:, np.newaxis],
        electrical_downtilt_deg=electrical_downtilt_deg,
    ).astype(np.float32)
    return GainTable(
        azimuth_deg=float(azimuth_deg),
        mechanical_downtilt_deg=float(mechanical_downtilt_deg),
        electrical_downtilt_deg=float(electrical_downtilt_deg),
        arrays=GainArrays(
            gain_dbi=gain_dbi,
            azimuth_offset_deg=azimuths,
            elevation_deg=elevations,
            azimuth_bin_node=_bin_nodes(azimuths),
            elevation_bin_node=_bin_nodes(elevations),
            shift_deg=_shifts(float(mechanical_downtilt_deg)),
            mechanical_downtilt_deg=float(mechanical_downtilt_deg),
        ),
    )


def _shifts(mechanical_downtilt_deg: float) -> NDArray[np.float32]:
    """What a mechanical tilt adds to azimuth offset and elevation, at each whole degree."""
    azimuths = np.arange(361.0)[np.newaxis, :]
    elevations = np.arange(-SHIFT_REACH_DEG, SHIFT_REACH_DEG + 1.0)[:, np.newaxis]
    seen_azimuth_deg, seen_elevation_deg = antenna_direction_deg(
        azimuths, elevations, mechanical_downtilt_deg=mechanical_downtilt_deg
    )
    if mechanical_downtilt_deg == 0.0:
        return np.zeros((0, 0, 2), dtype=np.float32)
    turned = np.mod(seen_azimuth_deg - azimuths + 180.0, 360.0) - 180.0
    return np.stack((turned, seen_elevation_deg - elevations), axis=-1).astype(np.float32)


def _nodes(
    pattern: Pattern, electrical_downtilt_deg: float
) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Azimuth offsets 0 to 360 and elevations -90 to 90 between which the gain is nearly straight.

    Found from cuts through the pattern, dense where formulas join their pieces: bends may run
    slantwise through the beam.
    """
    bin_deg = 1.0 / BINS_PER_DEG
    elevations = np.arange(-90.0, 90.0 + bin_deg, bin_deg)
    width_deg = min(pattern.azimuth_beamwidth_deg, 120.0)
    sides = width_deg * np.linspace(0.0, 1.5, 80)
    upright = pattern.gain(
        np.concatenate((sides, -sides[1::16], [180.0]))[:, np.newaxis],
        elevations[np.newaxis, :],
        electrical_downtilt_deg=electrical_downtilt_deg,
    )
    height_deg = min(pattern.elevation_beamwidth_deg, 60.0)
    beam_deg = elevations[int(np.argmax(upright.max(axis=0)))]
    heights = height_deg * np.linspace(0.0, 1.5, 32)
    azimuths = np.arange(0.0, 360.0, bin_deg)
    level = pattern.gain(
        azimuths[np.newaxis, :],
        np.clip(beam_deg + np.concatenate((heights, -heights[1::4])), -90.0, 90.0)[:, np.newaxis],
        electrical_downtilt_deg=electrical_downtilt_deg,
    )
    return (
        _placed(0.0, _allowed_step_deg(level, BEND_REACH * width_deg, around=True)),
        _placed(-90.0, _allowed_step_deg(upright, BEND_REACH * height_deg, around=False)),
    )


def _allowed_step_deg(
    cuts_dbi: NDArray[np.float64], reach_deg: float, *, around: bool
) -> NDArray[np.float64]:
    """Largest step for each bin at which straight lines between nodes keep to the cuts.

    ``cuts_dbi`` holds a sample at the start of each bin along its last axis. A straight line over
    a step leaves the curve by half the curve's second difference over half steps.
    """
    mode: Literal["wrap", "edge"] = "wrap" if around else "edge"
    deep = cuts_dbi < cuts_dbi.max() - DEPTH_DB
    wanted_db = np.where(deep, DEEP_ERROR_DB, WANTED_ERROR_DB)
    allowed = np.full(cuts_dbi.shape[-1], STEPS_DEG[-1])
    for step_deg in sorted(STEPS_DEG)[1:]:
        half = round(0.5 * step_deg * BINS_PER_DEG)
        wide = np.pad(cuts_dbi, ((0, 0), (half, half)), mode=mode)
        error_db = np.abs(0.5 * (wide[:, : -2 * half] + wide[:, 2 * half :]) - cuts_dbi)
        bad = (error_db > wanted_db).any(axis=0)
        reach = half + math.ceil(reach_deg * BINS_PER_DEG)
        bad = maximum_filter1d(bad, 2 * reach + 1, mode="wrap" if around else "nearest")
        allowed[~bad & (allowed == 0.5 * step_deg)] = step_deg
    return allowed if around else allowed[:-1]


def _placed(start_deg: float, allowed_deg: NDArray[np.float64]) -> NDArray[np.float64]:
    """Nodes from the start on, each step the largest that fits its place and all of its bins."""
    places = [0]  # in bins
    while places[-1] < allowed_deg.size:
        place = places[-1]
        for step_deg in STEPS_DEG:
            bins = max(round(step_deg * BINS_PER_DEG), 1)
            fits = place % bins == 0 and allowed_deg[place : place + bins].min() >= step_deg
            if fits or bins == 1:
                places.append(place + bins)
                break
    return start_deg + np.array(places) / BINS_PER_DEG


def _bin_nodes(nodes_deg: NDArray[np.float64]) -> NDArray[np.int32]:
    """For each bin of 1/32 degree from the first node on, the node at or below it."""
    bins_between = np.round(np.diff(nodes_deg) * BINS_PER_DEG).astype(int)
    return np.repeat(np.arange(bins_between.size, dtype=np.int32), bins_between)
