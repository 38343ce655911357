"""The loops over cells behind :func:`planner.coverage.combine`.

A line of cells is worked on in pieces that stay in the processor's nearest memory: first what one
mast knows of the cells, then each of its sectors in turn. Written for a compiler that does several
cells in one instruction: each step is a plain loop over short float32 arrays, without branches.
For the same reason the ``prange`` loops pass whole arrays on and take no slices themselves: only
then does numba tell the compiler that the arrays do not overlap.
"""

import math
from typing import NamedTuple

import numpy as np
from numba import prange
from numpy.typing import NDArray

from planner.antenna.lookup import vector_gain_dbi
from planner.physics._jit import inlined, parallel
from planner.physics.link import eirp_dbm_scalar, received_signal_dbm_scalar
from planner.sweep import COMPUTED, OUT_OF_RANGE

NO_PATH = -1  # best_server: no mast has a computed path to the cell
NONE_ABOVE_THRESHOLD = 0  # best_server; sectors count from 1

STATUS_CODES = 4  # of a cell's status: COMPUTED, OUT_OF_RANGE, NO_DATA, CROSSES_HOLE

_CELLS = 512  # of a piece
_ROWS = 4  # of a thread's portion

_NAN = np.float32(np.nan)
_ZERO, _ONE = np.float32(0.0), np.float32(1.0)
_NOTHING = np.float32(-np.inf)  # a signal weaker than any
_NONE, _FIRST_SERVER = np.int16(NONE_ABOVE_THRESHOLD), np.int16(NONE_ABOVE_THRESHOLD + 1)
_ZENITH_DEG = np.float32(90.0)
_QUARTERS_PER_DEG = np.float32(1.0 / 90.0)
# Sine over its argument and cosine of a quarter turn's part from 0 to 1, in powers of its square:
# least squares at Chebyshev nodes, within 2e-7.
_SIN_0, _SIN_1, _SIN_2, _SIN_3, _SIN_4 = (
    np.float32(value)
    for value in (1.57079632, -0.64596376, 0.0796899226, -0.00467415067, 0.000151675118)
)
_COS_0, _COS_1, _COS_2, _COS_3, _COS_4 = (
    np.float32(value)
    for value in (0.999999953, -1.23369821, 0.25365071, -0.0208105714, 0.000858162543)
)

_LEAST_LEVEL = np.float32(1e-12)  # so that straight up and down an azimuth is left, as in formulas


class MastArrays(NamedTuple):
    """A path field's rows within a band, and where its cells lie on the grid."""

    row: int  # of the band's arrays, where the path field's first row belongs
    col: int
    path_loss_db: NDArray[np.float32]
    departure_elevation_deg: NDArray[np.float32]
    fresnel_clearance_ratio: NDArray[np.float32]
    status: NDArray[np.uint8]
    east_m: NDArray[np.float32]  # from the mast to each column, on the grid
    north_m: NDArray[np.float32]  # to each row
    bend: NDArray[np.float32]  # arc-to-chord turn, radians per metre east and per metre north


class SectorArrays(NamedTuple):
    """The sectors of one mast; the first index of each array is the sector, but for ``levels``."""

    levels: NDArray[np.uint32]  # all tables one after the other, flat
    first: NDArray[np.int64]  # where each sector's table starts, and where the last ends
    nodes_per_row: NDArray[np.int32]
    azimuth_places: NDArray[np.uint32]
    elevation_places: NDArray[np.uint32]
    mounted: NDArray[np.float32]  # peak gain, cosine and sine of the mechanical tilt
    boresight: NDArray[np.float32]  # cosine and sine of its azimuth on the grid at the mast
    budget: NDArray[np.float32]  # power, feeder loss, terminal gain, its feeder loss, threshold
    number: NDArray[np.int16]  # in plan order, from 1


class Layers(NamedTuple):
    """A band of the grid, while masts are added to it."""

    best_signal_dbm: NDArray[np.float32]  # -inf where no path is known
    other_signal_dbm: NDArray[np.float32]  # the strongest of those that did not win, or -inf
    best_server: NDArray[np.int16]
    fresnel_clearance_ratio: NDArray[np.float32]  # -inf where no path is known
    status: NDArray[np.uint8]


@inlined
def _merge_sight(
    mast_status: NDArray[np.uint8],
    mast_ratio: NDArray[np.float32],
    status: NDArray[np.uint8],
    ratio: NDArray[np.float32],
) -> None:
    """What a cell is when masts disagree: COMPUTED where one says so, else the highest code."""
    for i in range(status.size):
        one, other = mast_status[i], status[i]
        highest = max(one, other)
        status[i] = COMPUTED if (one == COMPUTED) | (other == COMPUTED) else highest
    for i in range(ratio.size):
        ratio[i] = mast_ratio[i] if mast_ratio[i] > ratio[i] else ratio[i]


@inlined
def _has_path(path_loss_db: NDArray[np.float32]) -> bool:
    for i in range(path_loss_db.size):  # noqa: SIM110 - numba has no any() over a generator
        if not math.isnan(path_loss_db[i]):
            return True
    return False


@inlined
def _directions(
    path_loss_db: NDArray[np.float32],
    elevation_deg: NDArray[np.float32],
    east_m: NDArray[np.float32],
    north_m: float,
    bend_east: float,
    bend_north: float,
    loss_db: NDArray[np.float32],
    north: NDArray[np.float32],
    east: NDArray[np.float32],
    up: NDArray[np.float32],
) -> None:
    """Unit vectors towards cells, turned to where the path leaves; the last four are written.

    Where an elevation is none the loss becomes NaN and the vector some other.
    """
    for i in range(up.size):
        exists = abs(elevation_deg[i]) <= _ZENITH_DEG
        loss_db[i] = path_loss_db[i] if exists else _NAN
        quarters = elevation_deg[i] * _QUARTERS_PER_DEG if exists else _ZERO
        square = quarters * quarters
        up[i] = quarters * (
            _SIN_0 + square * (_SIN_1 + square * (_SIN_2 + square * (_SIN_3 + square * _SIN_4)))
        )
        level = _COS_0 + square * (_COS_1 + square * (_COS_2 + square * (_COS_3 + square * _COS_4)))
        level = max(level, _LEAST_LEVEL)
        level /= math.sqrt(east_m[i] * east_m[i] + north_m * north_m)
        turn_rad = bend_east * east_m[i] + bend_north * north_m
        north[i] = level * (north_m - turn_rad * east_m[i])
        east[i] = level * (east_m[i] + turn_rad * north_m)


@inlined
def _signals(
    loss_db: NDArray[np.float32],
    north: NDArray[np.float32],
    east: NDArray[np.float32],
    up: NDArray[np.float32],
    levels: NDArray[np.uint32],
    nodes_per_row: int,
    azimuth_places: NDArray[np.uint32],
    elevation_places: NDArray[np.uint32],
    mounted: NDArray[np.float32],
    boresight: NDArray[np.float32],
    budget: NDArray[np.float32],
    signal_dbm: NDArray[np.float32],
) -> None:
    """One sector's received signal, written into the last."""
    peak_dbi, tilt_cosine, tilt_sine = mounted
    boresight_north, boresight_east = boresight
    power_dbm, feeder_loss_db, terminal_gain_dbi, terminal_feeder_loss_db = budget[:4]
    for i in range(signal_dbm.size):
        toward_dbi = vector_gain_dbi(
            levels,
            nodes_per_row,
            azimuth_places,
            elevation_places,
            peak_dbi,
            tilt_cosine,
            tilt_sine,
            north[i] * boresight_north + east[i] * boresight_east,
            east[i] * boresight_north - north[i] * boresight_east,
            up[i],
        )
        signal_dbm[i] = received_signal_dbm_scalar(
            eirp_dbm_scalar(power_dbm, feeder_loss_db, toward_dbi),
            loss_db[i],
            terminal_gain_dbi,
            terminal_feeder_loss_db,
        )


@inlined
def _compete(
    signal_dbm: NDArray[np.float32],
    threshold_dbm: float,
    number: int,
    best_signal_dbm: NDArray[np.float32],
    other_signal_dbm: NDArray[np.float32],
    best_server: NDArray[np.int16],
) -> None:
    """Let one sector compete; the last three hold the state.

    A sector above its threshold beats any below; among equals the stronger wins, in a tie the
    earlier. Comparisons with NaN are false: a sector without a signal neither wins nor is beaten.
    """
    for i in range(signal_dbm.size):
        signal, best, other = signal_dbm[i], best_signal_dbm[i], other_signal_dbm[i]
        server = best_server[i]
        serves = signal >= threshold_dbm
        stronger = signal > best
        served = server >= _FIRST_SERVER
        wins = (serves & (stronger | (not served))) | (stronger & (not served))
        loser = best if wins else signal
        best_signal_dbm[i] = signal if wins else best
        other_signal_dbm[i] = loser if loser > other else other
        mine = number if serves else _NONE
        best_server[i] = mine if wins else server


@inlined
def _add_rows(
    first: int, stop: int, mast: MastArrays, sectors: SectorArrays, layers: Layers,
    scratch: NDArray[np.float32],
) -> None:  # fmt: skip
    """Add rows of a mast's window to the layers."""
    cols = mast.east_m.size
    for row in range(first, stop):
        out = mast.row + row
        for start in range(0, cols, _CELLS):
            cells = min(_CELLS, cols - start)
            stop_col = start + cells
            left, right = mast.col + start, mast.col + stop_col
            _merge_sight(
                mast.status[row, start:stop_col],
                mast.fresnel_clearance_ratio[row, start:stop_col],
                layers.status[out, left:right],
                layers.fresnel_clearance_ratio[out, left:right],
            )
            path_loss_db = mast.path_loss_db[row, start:stop_col]
            if not _has_path(path_loss_db):
                continue
            loss_db, signal_dbm = scratch[0, :cells], scratch[1, :cells]
            north, east, up = scratch[2, :cells], scratch[3, :cells], scratch[4, :cells]
            _directions(
                path_loss_db,
                mast.departure_elevation_deg[row, start:stop_col],
                mast.east_m[start:stop_col],
                mast.north_m[row],
                mast.bend[0],
                mast.bend[1],
                loss_db,
                north,
                east,
                up,
            )
            for sector in range(sectors.number.size):
                _signals(
                    loss_db,
                    north,
                    east,
                    up,
                    sectors.levels[sectors.first[sector] : sectors.first[sector + 1]],
                    sectors.nodes_per_row[sector],
                    sectors.azimuth_places[sector],
                    sectors.elevation_places[sector],
                    sectors.mounted[sector],
                    sectors.boresight[sector],
                    sectors.budget[sector],
                    signal_dbm,
                )
                _compete(
                    signal_dbm,
                    sectors.budget[sector, 4],
                    sectors.number[sector],
                    layers.best_signal_dbm[out, left:right],
                    layers.other_signal_dbm[out, left:right],
                    layers.best_server[out, left:right],
                )


@parallel
def clear(layers: Layers) -> None:
    """Fill with what holds where no mast reaches."""
    for row in prange(layers.status.shape[0]):
        _clear_row(row, layers)


@inlined
def _clear_row(row: int, layers: Layers) -> None:
    layers.best_signal_dbm[row] = _NOTHING
    layers.other_signal_dbm[row] = _NOTHING
    layers.best_server[row] = NO_PATH
    layers.fresnel_clearance_ratio[row] = _NOTHING
    layers.status[row] = OUT_OF_RANGE


@parallel
def add_mast(mast: MastArrays, sectors: SectorArrays, layers: Layers) -> None:
    """Let all sectors of one path field compete for every cell of its window."""
    rows = mast.north_m.size
    for portion in prange((rows + _ROWS - 1) // _ROWS):
        scratch = np.empty((5, _CELLS), dtype=np.float32)
        first = portion * _ROWS
        _add_rows(first, min(first + _ROWS, rows), mast, sectors, layers, scratch)


@inlined
def _finish_row(row: int, layers: Layers, cells: NDArray[np.int64]) -> None:
    """Turn the strongest other signal into the margin, -inf into NaN, and count the cells."""
    best_dbm, other_dbm = layers.best_signal_dbm[row], layers.other_signal_dbm[row]
    ratio = layers.fresnel_clearance_ratio[row]
    for i in range(best_dbm.size):
        other_dbm[i] = best_dbm[i] - other_dbm[i] if other_dbm[i] > _NOTHING else _NAN
        best_dbm[i] = best_dbm[i] if best_dbm[i] > _NOTHING else _NAN
        ratio[i] = ratio[i] if ratio[i] > _NOTHING else _NAN
    server, status = layers.best_server[row], layers.status[row]
    # Neighbours are mostly alike: count whole runs of them.
    start = 0
    for i in range(1, server.size + 1):
        if i == server.size or server[i] != server[start] or status[i] != status[start]:
            cells[server[start] - NO_PATH, status[start]] += i - start
            start = i


@parallel
def finish(layers: Layers, cells: NDArray[np.int64]) -> None:
    """Finish the layers and count cells by [row, server - NO_PATH, status]."""
    for row in prange(cells.shape[0]):
        _finish_row(row, layers, cells[row])
