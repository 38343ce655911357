"""Sectors over path fields: received signal, best server and its margin for every cell.

The path fields are the slow part and stay as they are; a sector is its path field plus the gain of
its antenna towards each cell, so an aim can be changed and combined anew at once.
"""

import math
from collections.abc import Sequence
from dataclasses import dataclass
from typing import NamedTuple

import numpy as np
from numba import prange
from numpy.typing import NDArray

from planner.antenna.lookup import GainArrays, GainTable, table_gain_dbi
from planner.geodesy import chord_true_azimuth_deg
from planner.network import Sector, Terminal
from planner.physics._jit import parallel, scalar
from planner.physics.link import eirp_dbm_scalar, received_signal_dbm_scalar
from planner.sweep import COMPUTED, CROSSES_HOLE, NO_DATA, OUT_OF_RANGE, PathField

NO_PATH = -1  # best_server: no mast has a computed path to the cell
NONE_ABOVE_THRESHOLD = 0  # best_server; sectors count from 1

_CODES = 4  # of a cell's status: COMPUTED, OUT_OF_RANGE, NO_DATA, CROSSES_HOLE


@dataclass(frozen=True, slots=True, kw_only=True)
class CellCounts:
    """How many cells of the grid are what. ``in_range`` cells are computed or lack data."""

    cells: int  # all cells of the grid
    out_of_range: int  # of every mast
    in_range: int  # of some mast: the sum of the three below
    computed: int  # a path to some mast is known
    no_data: int  # in range of a mast, but the cell itself is a hole
    crosses_hole: int  # every path to a mast in range crosses a hole
    served: int  # computed, and above some sector's own threshold
    served_by_sector: tuple[int, ...]  # cells whose best server the sector is, in plan order


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Coverage:
    """The layers over the whole grid, row 0 at the top; arrays are read-only.

    The customer's antenna is taken to be aimed at the server in question, with the same gain
    towards each: ``server_margin_db`` does not count on its directivity.
    """

    received_signal_dbm: NDArray[np.float32]  # of the best server; NaN where no path is known
    best_server: NDArray[np.int16]  # NO_PATH, NONE_ABOVE_THRESHOLD or 1, 2, ... in plan order
    server_margin_db: NDArray[np.float32]  # best less strongest other; NaN with fewer than two
    status: NDArray[np.uint8]  # COMPUTED, CROSSES_HOLE, NO_DATA or OUT_OF_RANGE, as in a path field
    counts: CellCounts


class _Mast(NamedTuple):
    """Where a path field's window lies about its mast, and what its grid does to directions."""

    north_m: float  # from the mast to the centre of the window's first cell, on the grid
    east_m: float
    cell_m: float
    convergence_deg: float
    scale: float
    scale_gradient_east_per_m: float
    scale_gradient_north_per_m: float


class _Budget(NamedTuple):
    """What a sector's link budget adds to gain and path loss."""

    azimuth_deg: float
    transmit_power_dbm: float
    feeder_loss_db: float
    terminal_gain_dbi: float
    terminal_feeder_loss_db: float
    service_threshold_dbm: float
    number: int  # in plan order, from 1


@scalar
def _status_of_two(one: int, other: int) -> int:
    """What a cell is when two masts disagree: the first of this list that either says."""
    for code in (COMPUTED, CROSSES_HOLE, NO_DATA):
        if one == code or other == code:
            return code
    return OUT_OF_RANGE


@parallel
def _add_mast(
    mast: _Mast,
    path_loss_db: NDArray[np.float32],
    mast_status: NDArray[np.uint8],
    azimuth_deg: NDArray[np.float32],
    status: NDArray[np.uint8],
) -> None:
    """Write the true azimuth towards each cell with a path, and merge the mast's status."""
    rows, cols = azimuth_deg.shape
    for row in prange(rows):
        for col in range(cols):
            status[row, col] = _status_of_two(status[row, col], mast_status[row, col])
            if math.isnan(path_loss_db[row, col]):
                continue
            azimuth_deg[row, col] = chord_true_azimuth_deg(
                mast.east_m + col * mast.cell_m,
                mast.north_m - row * mast.cell_m,
                mast.convergence_deg,
                mast.scale,
                mast.scale_gradient_east_per_m,
                mast.scale_gradient_north_per_m,
            )


@parallel
def _add_sector(
    azimuth_deg: NDArray[np.float32],
    elevation_deg: NDArray[np.float32],
    path_loss_db: NDArray[np.float32],
    gain: GainArrays,
    budget: _Budget,
    best_signal_dbm: NDArray[np.float32],
    other_signal_dbm: NDArray[np.float32],
    best_server: NDArray[np.int16],
) -> None:
    """Let one sector compete for every cell of its window; the last three hold the state.

    A sector above its threshold beats any below; among equals the stronger wins, in a tie the
    earlier. ``other_signal_dbm`` is the strongest of those that did not win.
    """
    rows, cols = path_loss_db.shape
    for row in prange(rows):
        for col in range(cols):
            loss_db = path_loss_db[row, col]
            if math.isnan(loss_db):
                continue
            gain_dbi = table_gain_dbi(
                gain, azimuth_deg[row, col] - budget.azimuth_deg, elevation_deg[row, col]
            )
            signal_dbm = np.float32(
                received_signal_dbm_scalar(
                    eirp_dbm_scalar(budget.transmit_power_dbm, budget.feeder_loss_db, gain_dbi),
                    loss_db,
                    budget.terminal_gain_dbi,
                    budget.terminal_feeder_loss_db,
                )
            )
            serves = signal_dbm >= budget.service_threshold_dbm
            server = budget.number if serves else NONE_ABOVE_THRESHOLD
            before = best_server[row, col]
            best_dbm = best_signal_dbm[row, col]
            if before == NO_PATH:
                best_signal_dbm[row, col] = signal_dbm
                best_server[row, col] = server
                continue
            before_serves = before > NONE_ABOVE_THRESHOLD
            wins = signal_dbm > best_dbm if serves == before_serves else serves
            loser_dbm = signal_dbm
            if wins:
                loser_dbm = best_dbm
                best_signal_dbm[row, col] = signal_dbm
                best_server[row, col] = server
            if not other_signal_dbm[row, col] >= loser_dbm:  # also where there is none yet: NaN
                other_signal_dbm[row, col] = loser_dbm


@parallel
def _write_margins(
    best_signal_dbm: NDArray[np.float32],
    best_server: NDArray[np.int16],
    status: NDArray[np.uint8],
    other_signal_dbm: NDArray[np.float32],
    cells_by_status: NDArray[np.int64],
    cells_by_server: NDArray[np.int64],
) -> None:
    """Turn the strongest other signal into the margin, in place, and count each row's cells."""
    rows, cols = best_signal_dbm.shape
    for row in prange(rows):
        for col in range(cols):
            other_signal_dbm[row, col] = best_signal_dbm[row, col] - other_signal_dbm[row, col]
            cells_by_status[row, status[row, col]] += 1
            cells_by_server[row, best_server[row, col] - NO_PATH] += 1


def combine(
    grid_rows: int,
    grid_cols: int,
    items: Sequence[tuple[PathField, Sector, GainTable]],
    terminal: Terminal,
) -> Coverage:
    """Received signal, best server and margin over a grid.

    Parameters
    ----------
    grid_rows, grid_cols : int
        Size of the terrain's grid.
    items : sequence of (path field, sector, gain table)
        The sectors in plan order. A path field may cover a window of the grid only; sectors of one
        mast, height and frequency share one.
    terminal : Terminal
        What stands at a customer's house.

    Returns
    -------
    Coverage

    Notes
    -----
    The best server is the strongest among the sectors that reach their own radio's service
    threshold. Where none does, ``best_server`` is 0 and the received signal that of the strongest
    sector. Where sectors have different thresholds the best server may thus be weaker than a
    sector that does not reach its own, and the margin negative.

    A sector whose path to a cell is not known (NaN) does not take part in that cell.
    """
    shape = (grid_rows, grid_cols)
    best_signal_dbm = np.full(shape, np.nan, dtype=np.float32)
    other_signal_dbm = np.full(shape, np.nan, dtype=np.float32)
    best_server = np.full(shape, NO_PATH, dtype=np.int16)
    status = np.full(shape, OUT_OF_RANGE, dtype=np.uint8)
    field: PathField | None = None
    for number, (sector_field, sector, table) in enumerate(items, start=1):
        window = _window(sector_field, shape)
        if sector_field is not field:
            field = sector_field
            azimuth_deg = np.empty(field.path_loss_db.shape, dtype=np.float32)
            _add_mast(_mast(field), field.path_loss_db, field.status, azimuth_deg, status[window])
        _add_sector(
            azimuth_deg,
            field.departure_elevation_deg,
            field.path_loss_db,
            table.arrays,
            _budget(number, sector, table, terminal),
            best_signal_dbm[window],
            other_signal_dbm[window],
            best_server[window],
        )
    by_status = np.zeros((grid_rows, _CODES), dtype=np.int64)
    by_server = np.zeros((grid_rows, len(items) + 2), dtype=np.int64)
    _write_margins(best_signal_dbm, best_server, status, other_signal_dbm, by_status, by_server)
    for array in (best_signal_dbm, best_server, other_signal_dbm, status):
        array.flags.writeable = False
    return Coverage(
        received_signal_dbm=best_signal_dbm,
        best_server=best_server,
        server_margin_db=other_signal_dbm,
        status=status,
        counts=_counts(by_status.sum(axis=0).tolist(), by_server.sum(axis=0).tolist()),
    )


def _window(field: PathField, shape: tuple[int, int]) -> tuple[slice, slice]:
    """The part of the grid that a path field covers; kernels index it without checking."""
    rows, cols = field.path_loss_db.shape
    row_stop, col_stop = field.row_start + rows, field.col_start + cols
    fits = 0 <= field.row_start <= row_stop <= shape[0]
    fits = fits and 0 <= field.col_start <= col_stop <= shape[1]
    same = field.path_loss_db.shape == field.departure_elevation_deg.shape == field.status.shape
    if not (fits and same):
        raise ValueError(
            f"path field of rows {field.row_start} to {row_stop} and columns {field.col_start} to "
            f"{col_stop} does not fit a grid of {shape[0]} by {shape[1]} cells"
        )
    return slice(field.row_start, row_stop), slice(field.col_start, col_stop)


def _mast(field: PathField) -> _Mast:
    return _Mast(
        north_m=(field.mast_row - field.row_start) * field.cell_m,
        east_m=(field.col_start - field.mast_col) * field.cell_m,
        cell_m=float(field.cell_m),
        convergence_deg=field.frame.convergence_deg,
        scale=field.frame.scale,
        scale_gradient_east_per_m=field.frame.scale_gradient_east_per_m,
        scale_gradient_north_per_m=field.frame.scale_gradient_north_per_m,
    )


def _budget(number: int, sector: Sector, table: GainTable, terminal: Terminal) -> _Budget:
    return _Budget(
        azimuth_deg=float(table.azimuth_deg),
        transmit_power_dbm=float(sector.radio.transmit_power_dbm),
        feeder_loss_db=float(sector.radio.feeder_loss_db),
        terminal_gain_dbi=float(terminal.antenna_gain_dbi),
        terminal_feeder_loss_db=float(terminal.feeder_loss_db),
        service_threshold_dbm=float(sector.radio.service_threshold_dbm),
        number=number,
    )


def _counts(by_status: list[int], by_server: list[int]) -> CellCounts:
    served_by_sector = tuple(by_server[NONE_ABOVE_THRESHOLD - NO_PATH + 1 :])
    cells = sum(by_status)
    return CellCounts(
        cells=cells,
        out_of_range=by_status[OUT_OF_RANGE],
        in_range=cells - by_status[OUT_OF_RANGE],
        computed=by_status[COMPUTED],
        no_data=by_status[NO_DATA],
        crosses_hole=by_status[CROSSES_HOLE],
        served=sum(served_by_sector),
        served_by_sector=served_by_sector,
    )
