"""The gain of a mounted antenna as a table, for kernels that visit millions of cells.

The table itself is in the antenna's own frame, so one table serves every azimuth. Its nodes lie on
multiples of 1/32 degree, close together where the pattern bends and far apart where it is
straight; about corners also halfway between. Directions come as unit vectors, which a mechanical
tilt merely turns. No angle is computed from them: the places between the nodes are tabulated over
the sine of the elevation and over a stand-in for the azimuth that takes one division, see
:func:`vector_gain_dbi`.
"""

import math
from dataclasses import dataclass
from typing import Any, NamedTuple

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
ROUND_STEP_DEG, ROUND_OUT_TO_DEG = 0.25, 60.0  # of round patterns: their bends run along circles
TALL_DEG = 40.0  # beams taller than this may have bends that wander far sideways as they rise
BEND_REACH = 0.08  # of a beamwidth: bends may move so far between two sampled cuts
SEAM_DEG = -90.0  # azimuth offset at which the table begins, and ends one turn later
MOST_NODES = 64_000_000  # of a table with nodes halfway about corners: 4 bytes each
_ROWS_AT_ONCE = 64
BINS_PER_QUARTER = 8192  # of a turn in azimuth; and of the sine of the elevation from 0 to 1

# Packed so that one load brings two neighbours: a load from a table is what a cell costs most.
LEVEL_STEPS_PER_DB = 256  # 16 bits a level, so down to 256 dB below the peak
PLACE_STEPS_PER_NODE = 256  # 22 bits a place and 10 bits a bin's length
MOST_IN_A_ROW = 16_000  # places of 22 bits hold 16,384
LENGTH_BITS = 10  # so that a bin may span nearly 4 nodes: the steepest ones are that long

# In float32, so that kernels stay in float32; a wider argument makes the result wider.
_BINS = np.float32(BINS_PER_QUARTER)
_ZERO, _TWO = np.float32(0.0), np.float32(2.0)
_TINY = np.float32(1e-30)
_DB_PER_STEP = np.float32(1.0 / LEVEL_STEPS_PER_DB)
_NODES_PER_STEP = np.float32(1.0 / PLACE_STEPS_PER_NODE)
_PLACE_BITS, _LEVEL_BITS = np.uint32(LENGTH_BITS), np.uint32(16)
_STEP_MASK, _LEVEL_MASK = np.uint32(2**LENGTH_BITS - 1), np.uint32(0xFFFF)
_NOT_NEGATIVE = np.int32(0x7FFFFFFF)


class GainArrays(NamedTuple):
    """What a kernel needs of a :class:`GainTable`."""

    levels: NDArray[
        np.uint32
    ]  # [elevation, azimuth node]: dB below the peak, here and to the right
    azimuth_places: NDArray[np.uint32]  # of each bin: its start, counted in nodes, and its length
    elevation_places: NDArray[np.uint32]
    peak_dbi: float
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
    levels: NDArray[np.uint32],
    nodes_per_row: Any,
    azimuth_places: NDArray[np.uint32],
    elevation_places: NDArray[np.uint32],
    peak_dbi: Any,
    tilt_cosine: Any,
    tilt_sine: Any,
    ahead: Any,
    right: Any,
    up: Any,
) -> Any:
    """Gain towards a unit vector by bilinear interpolation in dB. [dBi]

    The arguments are those of :class:`GainArrays`, but the levels flat, with the number of azimuth
    nodes in a row as int32. The vector is true to the horizon, ``ahead`` along the boresight's
    azimuth; none of it may be NaN. float32 gives float32.

    The stand-in for the azimuth is the sine over the sum of the magnitudes of sine and cosine, from
    -1 at -90 degrees to 1 at 90, and mirrored behind up to 3 at 270. There are no branches, and
    the masks say that an index is not negative: so the compiler can do many cells at once.
    """
    along = ahead * tilt_cosine - up * tilt_sine
    above = ahead * tilt_sine + up * tilt_cosine
    turned = right / max(abs(along) + abs(right), _TINY)
    turned = turned if along >= _ZERO else _TWO - turned
    left, across = _node_and_rest(azimuth_places, turned * _BINS + _BINS)
    lower, upwards = _node_and_rest(elevation_places, above * _BINS + _BINS)
    first = np.int32(np.int32(lower * nodes_per_row) + left)
    below = _level_steps(levels[np.uint32(first & _NOT_NEGATIVE)], across)
    over = _level_steps(levels[np.uint32(np.int32(first + nodes_per_row) & _NOT_NEGATIVE)], across)
    return peak_dbi - (below + upwards * (over - below)) * _DB_PER_STEP


@inlined
def _node_and_rest(places: NDArray[np.uint32], bins: Any) -> tuple[Any, Any]:
    """The node at or below a place that is given in bins, and how far on to the next it lies."""
    whole_bins = np.int32(bins)
    packed = places[np.uint32(whole_bins & _NOT_NEGATIVE)]
    start = np.float32(np.int32(packed >> _PLACE_BITS))
    length = np.float32(np.int32(packed & _STEP_MASK))
    place = (start + (bins - np.float32(whole_bins)) * length) * _NODES_PER_STEP
    node = np.int32(place)
    return node, place - np.float32(node)


@inlined
def _level_steps(packed: int, across: Any) -> Any:
    """Between a level and its neighbour to the right, in steps."""
    left = np.float32(np.int32(packed >> _LEVEL_BITS))
    return left + across * (np.float32(np.int32(packed & _LEVEL_MASK)) - left)


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
        arrays.levels.ravel(),
        np.int32(arrays.levels.shape[1]),
        arrays.azimuth_places,
        arrays.elevation_places,
        arrays.peak_dbi,
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
    electrical_downtilt_deg: float | None = None,
) -> GainTable:
    """Table of the gain of a mounted pattern over true azimuth and elevation at the mast.

    Parameters
    ----------
    pattern : Pattern
    azimuth_deg : float
        Where the boresight points, clockwise from true north. [deg]
    mechanical_downtilt_deg : float
        Positive downwards, -45 to 45. [deg]
    electrical_downtilt_deg : float or None
        The same; None: what the pattern carries. [deg]

    Notes
    -----
    Within 30 dB of the peak the table is within 0.05 dB of the exact gain, save where a formula
    itself steps (ITU-R F.1336 does by 0.1 to 0.3 dB, at the join of main beam and side lobes):
    there the step is drawn out over 1/32 degree. So are the corners of dishes narrower than 3
    degrees, and with an error of up to 0.25 dB, and those of cuts that are measured every tenth of
    a degree and noisy: a table of all their corners would be too large. At the antenna's own zenith
    and nadir, where a gain may depend on an azimuth that has no meaning there, nothing is promised
    within 1.5 degrees.
    """
    checked_tilt(mechanical_downtilt_deg)
    if electrical_downtilt_deg is None:
        electrical_downtilt_deg = pattern.electrical_downtilt_deg
    azimuths, elevations = _nodes(pattern, electrical_downtilt_deg)
    gain_dbi = np.empty((elevations.size, azimuths.size), dtype=np.float32)
    for first in range(0, elevations.size, _ROWS_AT_ONCE):  # a pattern needs much memory
        rows = slice(first, first + _ROWS_AT_ONCE)
        gain_dbi[rows] = pattern.gain(
            azimuths[np.newaxis, :],
            elevations[rows, np.newaxis],
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
            levels=_packed_levels(gain_dbi),
            azimuth_places=_packed_places(offsets, azimuths),
            elevation_places=_packed_places(np.degrees(np.arcsin(sines)), elevations),
            peak_dbi=float(gain_dbi.max()),
            tilt_cosine=math.cos(math.radians(mechanical_downtilt_deg)),
            tilt_sine=math.sin(math.radians(mechanical_downtilt_deg)),
        ),
    )


def _packed_levels(gain_dbi: NDArray[np.float32]) -> NDArray[np.uint32]:
    """Levels below the peak in whole steps, each with its neighbour to the right; ends repeated."""
    rows, cols = gain_dbi.shape
    packed = np.empty((rows + 1, cols + 1), dtype=np.uint32)
    peak_dbi = gain_dbi.max()
    for first in range(0, rows, _ROWS_AT_ONCE):
        band = gain_dbi[first : first + _ROWS_AT_ONCE]
        steps = np.round((peak_dbi - band) * np.float32(LEVEL_STEPS_PER_DB))
        steps = np.pad(np.minimum(steps, 65535.0).astype(np.uint32), ((0, 0), (0, 2)), mode="edge")
        packed[first : first + band.shape[0]] = steps[:, :-1] << 16 | steps[:, 1:]
    packed[rows] = packed[rows - 1]
    return packed


def _packed_places(
    angles_deg: NDArray[np.float64], nodes_deg: NDArray[np.float64]
) -> NDArray[np.uint32]:
    """Where the bins that begin at given angles lie between the nodes, and how long they are."""
    places = np.interp(angles_deg, nodes_deg, np.arange(float(nodes_deg.size)))
    steps = np.round(places * PLACE_STEPS_PER_NODE).astype(np.uint32)
    lengths = np.minimum(np.diff(steps, append=steps[-1]), 2**LENGTH_BITS - 1)
    return steps << LENGTH_BITS | lengths.astype(np.uint32)


def _nodes(
    pattern: Pattern, electrical_downtilt_deg: float
) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Azimuth offsets -90 to 270 and elevations -90 to 90 with a nearly straight gain between.

    Found from cuts through the pattern, dense where formulas join their pieces: bends may run
    slantwise through the beam.
    """
    bin_deg = 1.0 / BINS_PER_DEG
    elevations = np.arange(-90.0, 90.0 + bin_deg, bin_deg)
    width_deg = min(pattern.azimuth_beamwidth_deg, 120.0)
    height_deg = min(pattern.elevation_beamwidth_deg, 60.0)
    sides, heights = _sampled_cuts_deg(width_deg, height_deg, pattern.is_round)
    upright = pattern.gain(
        sides[:, np.newaxis],
        elevations[np.newaxis, :],
        electrical_downtilt_deg=electrical_downtilt_deg,
    )
    beam_deg = elevations[int(np.argmax(upright.max(axis=0)))]
    azimuths = SEAM_DEG + np.arange(0.0, 360.0, bin_deg)
    level = pattern.gain(
        azimuths[np.newaxis, :],
        np.clip(beam_deg + heights, -90.0, 90.0)[:, np.newaxis],
        electrical_downtilt_deg=electrical_downtilt_deg,
    )
    across = _allowed_step_deg(level, BEND_REACH * width_deg, around=True)
    along = _allowed_step_deg(upright, BEND_REACH * height_deg, around=False)
    if pattern.is_round:
        for start_deg, steps_deg in ((SEAM_DEG, across), (-90.0, along)):
            inside = np.abs(start_deg + np.arange(steps_deg.size) * bin_deg) < ROUND_OUT_TO_DEG
            steps_deg[inside] = np.minimum(steps_deg[inside], ROUND_STEP_DEG)
    around, upwards = _placed(SEAM_DEG, across), _placed(-90.0, along)
    finer_around, finer_upwards = _with_corners(around, level), _with_corners(upwards, upright)
    if finer_around.size * finer_upwards.size > MOST_NODES or finer_around.size > MOST_IN_A_ROW:
        return around, upwards  # measured finely and noisy: a corner at each bin
    return finer_around, finer_upwards


def _sampled_cuts_deg(
    width_deg: float, height_deg: float, is_round: bool
) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Azimuths of upright cuts, and of level ones the elevations from the beam.

    Dense in the beam on one side, since most formulas are alike on both, and sparse elsewhere.
    """
    side_count, height_count = 80, 96 if height_deg > TALL_DEG else 32
    if is_round:  # a cut for each bin
        side_count = max(side_count, math.ceil(1.5 * width_deg * BINS_PER_DEG))
        height_count = max(height_count, math.ceil(1.5 * height_deg * BINS_PER_DEG))
    sides = width_deg * np.linspace(0.0, 1.5, side_count)
    heights = height_deg * np.linspace(0.0, 1.5, height_count)
    return (
        np.concatenate((sides, -sides[1::16], np.linspace(sides[-1], 180.0, 13))),
        np.concatenate((heights, -heights[1::4])),
    )


def _with_corners(
    nodes_deg: NDArray[np.float64], cuts_dbi: NDArray[np.float64]
) -> NDArray[np.float64]:
    """The nodes, and half a bin off each bin where a cut has a corner, more of them.

    A corner in the middle between two samples leaves the line between them by half of what the
    second difference at either is.
    """
    bends_db = np.abs(cuts_dbi[:, :-2] - 2.0 * cuts_dbi[:, 1:-1] + cuts_dbi[:, 2:])
    bends_db[cuts_dbi[:, 1:-1] < cuts_dbi.max() - DEPTH_DB] = 0.0
    corners = np.flatnonzero((bends_db > 2.0 * WANTED_ERROR_DB).any(axis=0)) + 1
    halfway = np.concatenate((corners - 0.5, corners + 0.5)) / BINS_PER_DEG + nodes_deg[0]
    return np.union1d(nodes_deg, halfway)


def _allowed_step_deg(
    cuts_dbi: NDArray[np.float64], reach_deg: float, *, around: bool
) -> NDArray[np.float64]:
    """Largest step for each bin at which straight lines between nodes keep to the cuts.

    ``cuts_dbi`` holds a sample at the start of each bin along its last axis. A straight line over
    a step leaves the curve by half the curve's second difference over half steps.
    """
    deep_dbi = cuts_dbi.max() - DEPTH_DB
    allowed = np.full(cuts_dbi.shape[-1], STEPS_DEG[-1])
    for step_deg in sorted(STEPS_DEG)[1:]:
        half = round(0.5 * step_deg * BINS_PER_DEG)
        bad = np.zeros(cuts_dbi.shape[-1], dtype=np.bool_)
        _mark_bent(cuts_dbi, deep_dbi, half, around, bad)
        reach = half + math.ceil(reach_deg * BINS_PER_DEG)
        bad = maximum_filter1d(bad, 2 * reach + 1, mode="wrap" if around else "nearest")
        allowed[~bad & (allowed == 0.5 * step_deg)] = step_deg
    return allowed if around else allowed[:-1]


@scalar
def _mark_bent(
    cuts_dbi: NDArray[np.float64],
    deep_dbi: float,
    half: int,
    around: bool,
    bent: NDArray[np.bool_],
) -> None:
    """Mark the bins where some cut leaves the line between its samples ``half`` bins away."""
    cuts, bins = cuts_dbi.shape
    for cut in range(cuts):
        for middle in range(bins):
            before, after = middle - half, middle + half
            if around:
                before, after = before % bins, after % bins
            else:
                before, after = max(before, 0), min(after, bins - 1)
            here_dbi = cuts_dbi[cut, middle]
            error_db = abs(0.5 * (cuts_dbi[cut, before] + cuts_dbi[cut, after]) - here_dbi)
            if error_db > (DEEP_ERROR_DB if here_dbi < deep_dbi else WANTED_ERROR_DB):
                bent[middle] = True


def _placed(start_deg: float, allowed_deg: NDArray[np.float64]) -> NDArray[np.float64]:
    """Nodes from the start on, each step the largest that fits its place and all of its bins."""
    fits = {}  # by step in bins: whether the step may be taken at each of its multiples
    for step_deg in STEPS_DEG:
        bins = round(step_deg * BINS_PER_DEG)
        fits[bins] = (allowed_deg.reshape(-1, bins).min(axis=1) >= step_deg).tolist()
    places = [0]  # in bins
    while places[-1] < allowed_deg.size:
        place = places[-1]
        step = next(bins for bins in fits if place % bins == 0 and fits[bins][place // bins])
        places.append(place + step)
    return start_deg + np.array(places) / BINS_PER_DEG
