"""The surface on one metric grid: where its cells lie, what height they have, where a mast stands.

Rows count from the north, columns from the west. In fractional (row, col) whole numbers are cell
*centres*; the corner of the first cell is (-0.5, -0.5). Holes are NaN and stay so.
"""

from dataclasses import dataclass
from typing import Literal

import numpy as np
from affine import Affine
from numpy.typing import ArrayLike, NDArray
from pyproj import CRS
from scipy import ndimage, sparse
from scipy.sparse.linalg import spsolve

from planner.geodesy import transformer_from_wgs84, transformer_to_wgs84
from planner.physics._jit import scalar

Kind = Literal["ground", "surface"]


@dataclass(frozen=True, slots=True, kw_only=True)
class Grid:
    """A north-up raster of square cells in metres on a conformal projection."""

    crs: CRS  # projected, metres, easting and northing
    transform: Affine  # from (col, row) of cell corners to (easting, northing)
    rows: int
    cols: int

    def __post_init__(self) -> None:
        a, b, _, d, e, _ = tuple(self.transform)[:6]
        if b != 0.0 or d != 0.0 or not a > 0.0 or abs(a + e) > 1e-6 * a:
            raise ValueError(f"not a north-up grid of square cells: {self.transform!r}")
        if self.rows < 1 or self.cols < 1:
            raise ValueError(f"a grid of {self.rows} rows and {self.cols} columns")

    @property
    def cell_m(self) -> float:
        """Side of a cell on the grid."""
        return float(self.transform.a)

    @property
    def bounds(self) -> tuple[float, float, float, float]:
        """Outer edges of the outer cells: (left, bottom, right, top) in metres."""
        left, top = float(self.transform.c), float(self.transform.f)
        return left, top - self.rows * self.cell_m, left + self.cols * self.cell_m, top

    def row_col(
        self, easting_m: ArrayLike, northing_m: ArrayLike
    ) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
        """Fractional (row, col) of places; any shapes."""
        row = (self.transform.f - np.asarray(northing_m, dtype=float)) / self.cell_m - 0.5
        col = (np.asarray(easting_m, dtype=float) - self.transform.c) / self.cell_m - 0.5
        return row, col

    def easting_northing(
        self, row: ArrayLike, col: ArrayLike
    ) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
        """(easting_m, northing_m) of fractional (row, col); any shapes."""
        easting = self.transform.c + (np.asarray(col, dtype=float) + 0.5) * self.cell_m
        northing = self.transform.f - (np.asarray(row, dtype=float) + 0.5) * self.cell_m
        return easting, northing

    def from_geographic(
        self, latitude: ArrayLike, longitude: ArrayLike
    ) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
        """(easting_m, northing_m) of WGS 84 places; infinite outside the projection's range."""
        easting, northing = transformer_from_wgs84(self.crs).transform(
            np.asarray(longitude, dtype=float), np.asarray(latitude, dtype=float)
        )
        return easting, northing

    def to_geographic(
        self, easting_m: ArrayLike, northing_m: ArrayLike
    ) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
        """WGS 84 (latitude, longitude) of places on the grid."""
        longitude, latitude = transformer_to_wgs84(self.crs).transform(
            np.asarray(easting_m, dtype=float), np.asarray(northing_m, dtype=float)
        )
        return latitude, longitude

    def contains(self, row: ArrayLike, col: ArrayLike) -> NDArray[np.bool_]:
        """Whether places lie on the grid, the outer halves of the outer cells included."""
        row, col = np.asarray(row, dtype=float), np.asarray(col, dtype=float)
        with np.errstate(invalid="ignore"):
            return np.asarray(
                (row >= -0.5) & (row < self.rows - 0.5) & (col >= -0.5) & (col < self.cols - 0.5)
            )


@scalar
def bilinear(array: NDArray[np.float32], row: float, col: float) -> float:
    """Value between the four cell centres around fractional (row, col), in double precision.

    In the outer halves of the outer cells the edge row or column continues. NaN outside the array,
    and where a corner that has weight is NaN.
    """
    rows, cols = array.shape
    if not (-0.5 <= row <= rows - 0.5 and -0.5 <= col <= cols - 0.5):
        return np.nan
    row = min(max(row, 0.0), rows - 1.0)
    col = min(max(col, 0.0), cols - 1.0)
    top = int(row)
    left = int(col)
    down = row - top
    right = col - left
    value = (1.0 - down) * (1.0 - right) * array[top, left]
    if right > 0.0:
        value += (1.0 - down) * right * array[top, left + 1]
    if down > 0.0:
        value += down * (1.0 - right) * array[top + 1, left]
        if right > 0.0:
            value += down * right * array[top + 1, left + 1]
    return value


@scalar
def _bilinear_many(
    array: NDArray[np.float32], row: NDArray[np.float64], col: NDArray[np.float64]
) -> NDArray[np.float64]:
    values = np.empty(row.size)
    for i in range(row.size):
        values[i] = bilinear(array, row[i], col[i])
    return values


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Terrain:
    """Heights on a grid. The arrays are made read-only."""

    grid: Grid
    ground_elevation_m: NDArray[np.float32]  # [rows, cols]; above the data's own datum; NaN: hole
    obstacle_height_m: NDArray[np.float32] | None = None  # [rows, cols]; above ground, >= 0
    kind: Kind = "ground"  # "surface": the heights already contain trees and roofs
    lowering_radius_m: float = 0.0  # masts and customers stand on the lowest cell within; 0: none
    filled_share: float = 0.0  # of all cells, how many were holes and were filled by interpolation
    warnings: tuple[str, ...] = ()

    def __post_init__(self) -> None:
        shape = (self.grid.rows, self.grid.cols)
        for name in ("ground_elevation_m", "obstacle_height_m"):
            array = getattr(self, name)
            if array is None:
                continue
            if array.shape != shape or array.dtype != np.float32 or not array.flags.c_contiguous:
                raise ValueError(
                    f"{name} is {array.dtype} {array.shape}; needed: contiguous float32 {shape}"
                )
            array.flags.writeable = False
        if self.obstacle_height_m is not None and not bool((self.obstacle_height_m >= 0.0).all()):
            raise ValueError("obstacle_height_m holds NaN or negative heights")

    def ground_at(self, row: ArrayLike, col: ArrayLike) -> NDArray[np.float64]:
        """Ground elevation [m] at fractional (row, col), bilinear between cell centres; any shapes.

        NaN where a corner that has weight is a hole or outside the grid.
        """
        rows, cols = np.broadcast_arrays(np.asarray(row, dtype=float), np.asarray(col, dtype=float))
        values = _bilinear_many(
            self.ground_elevation_m,
            np.ascontiguousarray(rows).ravel(),
            np.ascontiguousarray(cols).ravel(),
        )
        return np.asarray(values.reshape(rows.shape))

    def standing_elevation_m(self, row: ArrayLike, col: ArrayLike) -> NDArray[np.float64]:
        """Elevation [m] on which a mast or a house stands at fractional (row, col); any shapes.

        The ground; on a surface model with a lowering radius the lowest of the ground there and the
        cells whose centres lie within that radius, since between trees and roofs some cell shows
        the ground. NaN where the ground itself is a hole or outside.
        """
        ground = self.ground_at(row, col)
        if self.kind != "surface" or not self.lowering_radius_m > 0.0:
            return ground
        rows, cols = np.broadcast_arrays(np.asarray(row, dtype=float), np.asarray(col, dtype=float))
        lowered = ground.copy()
        reach = self.lowering_radius_m / self.grid.cell_m
        for index in np.argwhere(np.isfinite(ground)):
            place = tuple(index)
            lowest = self._lowest_within(float(rows[place]), float(cols[place]), reach)
            lowered[place] = min(float(ground[place]), lowest)
        return lowered

    def _lowest_within(self, row: float, col: float, reach: float) -> float:
        """Lowest of the cells whose centres lie within ``reach`` cells; inf if there is none."""
        top, left = max(int(np.ceil(row - reach)), 0), max(int(np.ceil(col - reach)), 0)
        part = self.ground_elevation_m[top : int(row + reach) + 1, left : int(col + reach) + 1]
        down = (np.arange(part.shape[0]) + top - row)[:, np.newaxis]
        right = (np.arange(part.shape[1]) + left - col)[np.newaxis, :]
        near = part[(down**2 + right**2 <= reach**2 * (1.0 + 1e-12)) & np.isfinite(part)]
        return float(near.min()) if near.size else np.inf


def fill_small_holes(
    ground: NDArray[np.float32], max_cells: int
) -> tuple[NDArray[np.float32], int]:
    """Fill holes of at most ``max_cells`` cells; returns (filled copy, number of cells filled).

    Cells that touch at a side or a corner are one hole. A hole that touches the edge of the array
    is left, since its size is not known. The filling is the smoothest surface that meets the rim
    (each filled cell is the mean of its four neighbours: Laplace's equation), so it never rises
    above or falls below the rim. The input is not changed.
    """
    filled = np.array(ground, dtype=np.float32)
    if max_cells < 1:
        return filled, 0
    holes = np.isnan(filled)
    labels, count = ndimage.label(holes, structure=np.ones((3, 3), dtype=int))
    if count == 0:
        return filled, 0
    small = np.bincount(labels.ravel(), minlength=count + 1) <= max_cells
    small[0] = False
    for edge in (labels[0], labels[-1], labels[:, 0], labels[:, -1]):
        small[edge] = False
    rows, cols = np.nonzero(small[labels])
    if rows.size == 0:
        return filled, 0
    number = np.full(filled.shape, -1, dtype=np.int64)
    number[rows, cols] = np.arange(rows.size)
    known = np.zeros(rows.size)
    pairs: list[NDArray[np.int64]] = []
    for down, right in ((-1, 0), (1, 0), (0, -1), (0, 1)):
        neighbour = number[rows + down, cols + right]
        inside = neighbour >= 0
        known[~inside] += filled[rows + down, cols + right][~inside]
        pairs.append(np.stack([np.flatnonzero(inside), neighbour[inside]]))
    row_index, col_index = np.concatenate(pairs, axis=1)
    laplace = sparse.csc_array(
        (
            np.concatenate([np.full(rows.size, 4.0), np.full(row_index.size, -1.0)]),
            (
                np.concatenate([np.arange(rows.size), row_index]),
                np.concatenate([np.arange(rows.size), col_index]),
            ),
        )
    )
    filled[rows, cols] = spsolve(laplace, known).astype(np.float32)
    return filled, int(rows.size)
