"""The gain of a mounted antenna as a table, for kernels that visit millions of cells.

The table itself is in the antenna's own frame, so one table serves every azimuth. Its nodes lie on
multiples of 1/32 degree, close together where the pattern bends and far apart where it is
straight. Directions come as unit vectors, which a mechanical tilt merely turns. No angle is
computed from them: the places between the nodes are tabulated over the sine of the elevation and
over a stand-in for the azimuth that takes one division, see :func:`vector_gain_dbi`.
"""

import math
from dataclasses import dataclass
from typing import Any, Literal, NamedTuple

import numpy as np
from numpy.typing import NDArray
from scipy.ndimage import maximum_filter1d

from planner.antenna.mounting import checked_tilt
from planner.antenna.pattern import Pattern
from planner.physics._jit import inlined, scalar

BINS_PER_DEG = 32
STEPS_DEG = (1.0, 0.5, 0.25, 0.125, 0.0625, 0.03125)  # powers of two: sums of them are exact
WANTED_ERROR_DB = 0.015  # of each axis, within DEPTH_DB of the peak
DEEP_ERROR_DB = 0.5  # of each axis, further below the peak
DEPTH_DB = 32.0
BEND_REACH = 0.08  # of a beamwidth: bends may move so far between two sampled cuts
SEAM_DEG = -90.0  # azimuth offset at which the table begins, and ends one turn later
BINS_PER_QUARTER = 8192  # of a turn in azimuth; and of the sine of the elevation from 0 to 1

# In float32, so that kernels stay in float32; a wider argument makes the result wider.
_BINS = np.float32(BINS_PER_QUARTER)
_ZERO, _TWO = np.float32(0.0), np.float32(2.0)
_TINY = np.float32(1e-30)


class GainArrays(NamedTuple):
    """What a kernel needs of a :class:`GainTable`.

    Each array has one entry more at the end of each axis, so that the last node has a neighbour.
    """

    gain_dbi: NDArray[np.float32]  # [elevation node, azimuth node]
    azimuth_node: NDArray[np.float32]  # place between the nodes, at each bin's start
    elevation_node: NDArray[np.float32]
    tilt_cosine: float  # of the mechanical downtilt
    tilt_sine: float


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


@inlined
def vector_gain_dbi(
    gain_dbi: NDArray[np.float32],
    azimuth_nodes: int,
    azimuth_node: NDArray[np.float32],
    elevation_node: NDArray[np.float32],
    tilt_cosine: Any,
    tilt_sine: Any,
    ahead: Any,
    right: Any,
    up: Any,
) -> Any:
    """Gain towards a unit vector by bilinear interpolation in dB. [dBi]

    The first five as in :class:`GainArrays`, but the gains flat, with the number of azimuth nodes
    in a row. The vector is true to the horizon, ``ahead`` along the boresight's azimuth; none of it
    may be NaN. float32 gives float32.

    The stand-in for the azimuth is the sine over the sum of the magnitudes of sine and cosine, from
    -1 at -90 degrees to 1 at 90, and mirrored behind up to 3 at 270. There are no branches, and
    the masks say that an index is not negative: so the compiler can do many cells at once.
    """
    along = ahead * tilt_cosine - up * tilt_sine
    above = ahead * tilt_sine + up * tilt_cosine
    turned = right / max(abs(along) + abs(right), _TINY)
    turned = turned if along >= _ZERO else _TWO - turned
    across = turned * _BINS + _BINS
    upwards = above * _BINS + _BINS
    azimuth_bin = np.int32(across)
    elevation_bin = np.int32(upwards)
    azimuth_index = np.uint32(azimuth_bin & 0xFFFF)
    elevation_index = np.uint32(elevation_bin & 0x7FFF)
    left_node = azimuth_node[azimuth_index]
    lower_node = elevation_node[elevation_index]
    across = left_node + (across - np.float32(azimuth_bin)) * (
        azimuth_node[np.uint32(azimuth_index + 1)] - left_node
    )
    upwards = lower_node + (upwards - np.float32(elevation_bin)) * (
        elevation_node[np.uint32(elevation_index + 1)] - lower_node
    )
    left = np.int32(across)
    lower = np.int32(upwards)
    across -= np.float32(left)
    upwards -= np.float32(lower)
    first = np.uint32((lower * azimuth_nodes + left) & 0x7FFFFFFF)
    second = np.uint32((lower * azimuth_nodes + left + azimuth_nodes) & 0x7FFFFFFF)
    lower_left = gain_dbi[first]
    upper_left = gain_dbi[second]
    below = lower_left + across * (gain_dbi[np.uint32(first + 1)] - lower_left)
    over = upper_left + across * (gain_dbi[np.uint32(second + 1)] - upper_left)
    return below + upwards * (over - below)


@scalar
def table_gain_dbi(arrays: GainArrays, azimuth_offset_deg: float, elevation_deg: float) -> float:
    """Gain from a table by bilinear interpolation in dB; NaN where an angle is NaN. [dBi]

    ``azimuth_offset_deg`` is the true azimuth less the boresight's, any real number;
    ``elevation_deg`` is the true one at the mast; beyond -90 or 90 it gives NaN.
    """
    if not abs(elevation_deg) <= 90.0 or not abs(azimuth_offset_deg) < math.inf:
        return math.nan
    offset_rad = math.radians(azimuth_offset_deg - 360.0 * math.floor(azimuth_offset_deg / 360.0))
    elevation_rad = math.radians(elevation_deg)
    return vector_gain_dbi(
        arrays.gain_dbi.ravel(),
        arrays.gain_dbi.shape[1],
        arrays.azimuth_node,
        arrays.elevation_node,
        arrays.tilt_cosine,
        arrays.tilt_sine,
        math.cos(elevation_rad) * math.cos(offset_rad),
        math.cos(elevation_rad) * math.sin(offset_rad),
        math.sin(elevation_rad),
    )


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
    checked_tilt(mechanical_downtilt_deg)
    azimuths, elevations = _nodes(pattern, electrical_downtilt_deg)
    gain_dbi = pattern.gain(
        azimuths[np.newaxis, :],
        elevations[:, np.newaxis],
        electrical_downtilt_deg=electrical_downtilt_deg,
    )
    sines = np.arange(-BINS_PER_QUARTER, BINS_PER_QUARTER + 1) / BINS_PER_QUARTER
    ahead = np.concatenate((1.0 - np.abs(sines), np.abs(sines[1:]) - 1.0))
    right = np.concatenate((sines, -sines[1:]))
    offsets = np.mod(np.degrees(np.arctan2(right, ahead)) - SEAM_DEG, 360.0) + SEAM_DEG
    offsets[-1] = SEAM_DEG + 360.0
    return GainTable(
        azimuth_deg=float(azimuth_deg),
        mechanical_downtilt_deg=float(mechanical_downtilt_deg),
        electrical_downtilt_deg=float(electrical_downtilt_deg),
        arrays=GainArrays(
            gain_dbi=np.pad(gain_dbi, (0, 1), mode="edge").astype(np.float32),
            azimuth_node=_places(offsets, azimuths),
            elevation_node=_places(np.degrees(np.arcsin(sines)), elevations),
            tilt_cosine=math.cos(math.radians(mechanical_downtilt_deg)),
            tilt_sine=math.sin(math.radians(mechanical_downtilt_deg)),
        ),
    )


def _places(
    angles_deg: NDArray[np.float64], nodes_deg: NDArray[np.float64]
) -> NDArray[np.float32]:
    """Where angles lie between the nodes, counted in nodes, and the last of them once more."""
    places = np.interp(angles_deg, nodes_deg, np.arange(float(nodes_deg.size)))
    return np.append(places, places[-1]).astype(np.float32)


def _nodes(
    pattern: Pattern, electrical_downtilt_deg: float
) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Azimuth offsets -90 to 270 and elevations -90 to 90 between which the gain is nearly straight.

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
    azimuths = SEAM_DEG + np.arange(0.0, 360.0, bin_deg)
    level = pattern.gain(
        azimuths[np.newaxis, :],
        np.clip(beam_deg + np.concatenate((heights, -heights[1::4])), -90.0, 90.0)[:, np.newaxis],
        electrical_downtilt_deg=electrical_downtilt_deg,
    )
    return (
        _placed(SEAM_DEG, _allowed_step_deg(level, BEND_REACH * width_deg, around=True)),
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
