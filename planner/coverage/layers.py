"""Sectors over path fields: received signal, best server and its margin for every cell.

The path fields are the slow part and stay as they are; a sector is its path field plus the gain of
its antenna towards each cell, so an aim can be changed and combined anew at once.
"""

from collections.abc import Sequence
from dataclasses import dataclass
from itertools import groupby
from operator import add
from typing import Any

import numpy as np
from numpy.typing import NDArray

from planner.antenna import GainTable
from planner.coverage.kernels import (
    NO_PATH,
    NONE_ABOVE_THRESHOLD,
    STATUS_CODES,
    Layers,
    MastArrays,
    SectorArrays,
    add_mast,
    clear,
    finish,
)
from planner.geodesy import LocalFrame
from planner.network import Sector, Terminal
from planner.sweep import COMPUTED, CROSSES_HOLE, NO_DATA, OUT_OF_RANGE, PathField
from planner.units import angle_difference_deg


@dataclass(frozen=True, slots=True, kw_only=True)
class CellCounts:
    """How many cells of the grid, or a band of its rows, are what.

    ``in_range`` cells are computed or lack data. Counts of bands without a row in common add up.
    """

    cells: int  # all cells
    out_of_range: int  # of every mast
    in_range: int  # of some mast: the sum of the three below
    computed: int  # a path to some mast is known
    no_data: int  # in range of a mast, but the cell itself is a hole
    crosses_hole: int  # every path to a mast in range crosses a hole
    served: int  # computed, and above some sector's own threshold
    served_by_sector: tuple[int, ...]  # cells whose best server the sector is, in plan order

    def __add__(self, other: "CellCounts") -> "CellCounts":
        """The counts of two bands together; ValueError where they count different sectors."""
        ours, theirs = self.served_by_sector, other.served_by_sector
        if len(ours) != len(theirs):
            raise ValueError(f"counts of {len(ours)} and of {len(theirs)} sectors do not add up")
        return CellCounts(
            cells=self.cells + other.cells,
            out_of_range=self.out_of_range + other.out_of_range,
            in_range=self.in_range + other.in_range,
            computed=self.computed + other.computed,
            no_data=self.no_data + other.no_data,
            crosses_hole=self.crosses_hole + other.crosses_hole,
            served=self.served + other.served,
            served_by_sector=tuple(map(add, ours, theirs)),
        )


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Coverage:
    """The layers over the grid or a band of its rows, the top first; arrays are read-only.

    The customer's antenna is taken to be aimed at the server in question, with the same gain
    towards each: ``server_margin_db`` does not count on its directivity.
    """

    received_signal_dbm: NDArray[np.float32]  # of the best server; NaN where no path is known
    best_server: NDArray[np.int16]  # NO_PATH, NONE_ABOVE_THRESHOLD or 1, 2, ... in plan order
    server_margin_db: NDArray[np.float32]  # best less strongest other; NaN with fewer than two
    fresnel_clearance_ratio: NDArray[np.float32]  # largest over the masts; NaN where not known
    status: NDArray[np.uint8]  # COMPUTED, CROSSES_HOLE, NO_DATA or OUT_OF_RANGE, as in a path field
    counts: CellCounts


def combine(
    grid_rows: int,
    grid_cols: int,
    items: Sequence[tuple[PathField, Sector, GainTable]],
    terminal: Terminal,
    *,
    rows: tuple[int, int] | None = None,
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
    rows : (start, stop), optional
        The band of the grid's rows to compute, all of them if left out. Bands put together are the
        whole, byte for byte. Only the path fields' rows in the band are read.

    Returns
    -------
    Coverage
        Arrays of ``stop - start`` rows and ``grid_cols`` columns.

    Raises
    ------
    ValueError
        Rows or a path field's window outside the grid.

    Notes
    -----
    The best server is the strongest among the sectors that reach their own radio's service
    threshold. Where none does, ``best_server`` is 0 and the received signal that of the strongest
    sector. Where sectors have different thresholds the best server may thus be weaker than a
    sector that does not reach its own, and the margin negative.

    A sector whose path to a cell is not known (NaN) does not take part in that cell.
    """
    start, stop = (0, grid_rows) if rows is None else rows
    if not 0 <= start <= stop <= grid_rows:
        raise ValueError(f"rows {start} to {stop} are none of a grid of {grid_rows} rows")
    shape = (stop - start, grid_cols)
    layers = Layers(
        best_signal_dbm=np.empty(shape, dtype=np.float32),
        other_signal_dbm=np.empty(shape, dtype=np.float32),
        best_server=np.empty(shape, dtype=np.int16),
        fresnel_clearance_ratio=np.empty(shape, dtype=np.float32),
        status=np.empty(shape, dtype=np.uint8),
    )
    clear(layers)
    numbered = list(enumerate(items, start=1))
    for _, neighbours in groupby(numbered, key=lambda item: id(item[1][0])):
        sectors = [(number, *item) for number, item in neighbours]
        field = sectors[0][1]
        _check_window(field, (grid_rows, grid_cols))
        first = max(field.row_start, start)
        last = min(field.row_start + field.path_loss_db.shape[0], stop)
        if first < last:
            mast = _mast_arrays(field, first, last, start)
            own = [(number, sector, table) for number, _, sector, table in sectors]
            add_mast(mast, sector_arrays(own, field.frame, terminal), layers)
    cells = np.zeros((stop - start, len(items) + 2, STATUS_CODES), dtype=np.int64)
    finish(layers, cells)
    for array in layers:
        array.flags.writeable = False
    return Coverage(
        received_signal_dbm=layers.best_signal_dbm,
        best_server=layers.best_server,
        server_margin_db=layers.other_signal_dbm,
        fresnel_clearance_ratio=layers.fresnel_clearance_ratio,
        status=layers.status,
        counts=_counts(cells.sum(axis=0)),
    )


def _check_window(field: PathField, shape: tuple[int, int]) -> None:
    """Kernels index a path field's window of the grid without checking."""
    rows, cols = field.path_loss_db.shape
    row_stop, col_stop = field.row_start + rows, field.col_start + cols
    fits = 0 <= field.row_start <= row_stop <= shape[0]
    fits = fits and 0 <= field.col_start <= col_stop <= shape[1]
    others = field.departure_elevation_deg, field.fresnel_clearance_ratio, field.status
    if not fits or any(array.shape != (rows, cols) for array in others):
        raise ValueError(
            f"path field of rows {field.row_start} to {row_stop} and columns {field.col_start} to "
            f"{col_stop} does not fit a grid of {shape[0]} by {shape[1]} cells"
        )


def _mast_arrays(field: PathField, first: int, last: int, band_start: int) -> MastArrays:
    """Rows of the grid from ``first`` to ``last`` of a path field, in a band."""
    rows = slice(first - field.row_start, last - field.row_start)
    cols = np.arange(field.path_loss_db.shape[1])
    north_m = (field.mast_row - np.arange(first, last)) * field.cell_m
    north_m[north_m == 0.0] = 1e-9  # so that a mast on a cell's centre sees that cell in the north
    return MastArrays(
        row=first - band_start,
        col=field.col_start,
        path_loss_db=_read_only(field.path_loss_db[rows]),
        departure_elevation_deg=_read_only(field.departure_elevation_deg[rows]),
        fresnel_clearance_ratio=_read_only(field.fresnel_clearance_ratio[rows]),
        status=_read_only(field.status[rows]),
        east_m=((field.col_start - field.mast_col + cols) * field.cell_m).astype(np.float32),
        north_m=north_m.astype(np.float32),
        bend=bend_rad_per_m(field.frame),
    )


def _read_only(array: NDArray[Any]) -> NDArray[Any]:
    """A plain view of an array or memory map: kernels are compiled for one type only."""
    view = np.ascontiguousarray(array).view(np.ndarray)
    view.flags.writeable = False
    return view


def bend_rad_per_m(frame: LocalFrame) -> NDArray[np.float32]:
    """Arc-to-chord turn per metre east and north: the frame's own, which is linear in the step."""
    step_m = 1e5
    azimuth_deg = frame.true_azimuth_deg([step_m, 0.0], [0.0, step_m])
    turn_deg = angle_difference_deg(azimuth_deg, frame.convergence_deg + np.array([90.0, 0.0]))
    return (np.radians(turn_deg) / step_m).astype(np.float32)


def sector_arrays(
    sectors: Sequence[tuple[int, Sector, GainTable]], frame: LocalFrame, terminal: Terminal
) -> SectorArrays:
    """The numbered sectors of one mast for the kernel."""
    arrays = [table.arrays for _, _, table in sectors]
    boresights_rad = np.radians(
        [table.azimuth_deg - frame.convergence_deg for _, _, table in sectors]
    )
    return SectorArrays(
        levels=np.concatenate([own.levels.ravel() for own in arrays]),
        first=np.cumsum([0, *(own.levels.size for own in arrays)]),
        nodes_per_row=np.array([own.levels.shape[1] for own in arrays], dtype=np.int32),
        azimuth_places=np.stack([own.azimuth_places for own in arrays]),
        elevation_places=np.stack([own.elevation_places for own in arrays]),
        mounted=np.array(
            [(own.peak_dbi, own.tilt_cosine, own.tilt_sine) for own in arrays], dtype=np.float32
        ),
        boresight=np.stack((np.cos(boresights_rad), np.sin(boresights_rad)), axis=-1).astype(
            np.float32
        ),
        budget=np.array(
            [
                (
                    sector.radio.transmit_power_dbm,
                    sector.radio.feeder_loss_db,
                    terminal.antenna_gain_dbi,
                    terminal.feeder_loss_db,
                    sector.radio.service_threshold_dbm,
                )
                for _, sector, _ in sectors
            ],
            dtype=np.float32,
        ),
        number=np.array([number for number, _, _ in sectors], dtype=np.int16),
    )


def _counts(cells: NDArray[np.int64]) -> CellCounts:
    """Counts from the number of cells by [server - NO_PATH, status]."""
    by_status = cells.sum(axis=0).tolist()
    served_by_sector = tuple(cells.sum(axis=1).tolist()[NONE_ABOVE_THRESHOLD - NO_PATH + 1 :])
    return CellCounts(
        cells=sum(by_status),
        out_of_range=by_status[OUT_OF_RANGE],
        in_range=sum(by_status) - by_status[OUT_OF_RANGE],
        computed=by_status[COMPUTED],
        no_data=by_status[NO_DATA],
        crosses_hole=by_status[CROSSES_HOLE],
        served=sum(served_by_sector),
        served_by_sector=served_by_sector,
    )
