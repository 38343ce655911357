"""The values that the map page shows, picked from the layers band of rows by band of rows."""

import numpy as np
from numpy.typing import NDArray

from planner.coverage import NO_PATH, Coverage
from planner.handout.mercator import MercatorView
from planner.sweep import OUT_OF_RANGE
from planner.terrain import Grid


class MapCells:
    """What each pixel of a picture shows: the nearest cell of the grid, [rows, cols] of the view.

    Beyond the grid, and until `take_rows` has seen a cell, nothing is known: NaN, `NO_PATH` and
    `OUT_OF_RANGE`.
    """

    def __init__(self, view: MercatorView, grid: Grid) -> None:
        self.view = view
        shape = view.cell_index.shape
        self.received_signal_dbm: NDArray[np.float32] = np.full(shape, np.nan, dtype=np.float32)
        self.server_margin_db: NDArray[np.float32] = np.full(shape, np.nan, dtype=np.float32)
        self.best_server: NDArray[np.int16] = np.full(shape, NO_PATH, dtype=np.int16)
        self.status: NDArray[np.uint8] = np.full(shape, OUT_OF_RANGE, dtype=np.uint8)
        self._cols = grid.cols
        index = view.cell_index
        # The grid may be turned against the picture: each of its rows meets a range of the grid's.
        self._first = np.where(index >= 0, index, np.iinfo(np.int32).max).min(axis=1)
        self._last = index.max(axis=1)

    def take_rows(self, row_start: int, coverage: Coverage) -> None:
        """Keep what is shown of the band of the grid's rows that starts at ``row_start``."""
        start = row_start * self._cols
        size = coverage.best_server.size
        for row in np.flatnonzero((self._first < start + size) & (self._last >= start)):
            place = self.view.cell_index[row] - start
            inside = np.flatnonzero((place >= 0) & (place < size))
            place = place[inside]
            for kept, layer in (
                (self.received_signal_dbm, coverage.received_signal_dbm),
                (self.server_margin_db, coverage.server_margin_db),
                (self.best_server, coverage.best_server),
                (self.status, coverage.status),
            ):
                kept[row, inside] = layer.reshape(-1)[place]
