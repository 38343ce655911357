"""From the metric grid to Web Mercator, the projection of the map page."""

from dataclasses import dataclass

import numpy as np
from affine import Affine
from numpy.typing import NDArray
from pyproj import Transformer
from rasterio.crs import CRS
from rasterio.warp import calculate_default_transform

from planner.terrain import Grid

LONGEST_SIDE_PX = 2048
_LATTICE_PX = 16


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class MercatorView:
    """Which cell of the grid each pixel of a Web Mercator picture shows."""

    cell_index: NDArray[np.int32]  # [rows, cols] number of the cell, row by row; -1 outside
    transform: Affine  # from (col, row) of pixel corners to Web Mercator metres
    south: float  # outer edges, WGS 84
    west: float
    north: float
    east: float


def mercator_view(grid: Grid, longest_side_px: int = LONGEST_SIDE_PX) -> MercatorView:
    """The picture that covers the grid, at the grid's own resolution as far as the limit allows."""
    source, target = CRS.from_wkt(grid.crs.to_wkt()), CRS.from_epsg(3857)
    left, bottom, right, top = grid.bounds
    transform, width, height = calculate_default_transform(
        source, target, grid.cols, grid.rows, left=left, bottom=bottom, right=right, top=top
    )
    shrink = max(1.0, max(width, height) / longest_side_px)
    if shrink > 1.0:
        width, height = int(width / shrink), int(height / shrink)
        transform = Affine(
            transform.a * shrink, 0.0, transform.c, 0.0, transform.e * shrink, transform.f
        )
    index = _cell_index(grid, transform, height, width)
    to_degrees = Transformer.from_crs(3857, 4326, always_xy=True)
    west, north = to_degrees.transform(transform.c, transform.f)
    east, south = to_degrees.transform(
        transform.c + width * transform.a, transform.f + height * transform.e
    )
    return MercatorView(
        cell_index=index, transform=transform, south=south, west=west, north=north, east=east
    )


def _cell_index(grid: Grid, transform: Affine, height: int, width: int) -> NDArray[np.int32]:
    """Number of the cell under the centre of each pixel, row by row; -1 outside the grid.

    Exact at every 16th row and column of pixels and linear in between: for cells of 100 m shown at
    a third of their number, 64 degrees north, that is within 0.02 cells, for finer ones nearer.
    """
    down = np.append(np.arange(0, height, _LATTICE_PX), height) + 0.5
    right = np.append(np.arange(0, width, _LATTICE_PX), width) + 0.5
    to_grid = Transformer.from_crs(3857, grid.crs, always_xy=True)
    x, y = np.meshgrid(transform.c + right * transform.a, transform.f + down * transform.e)
    easting, northing = to_grid.transform(x, y)
    lattice = grid.row_col(easting, northing)
    centres = np.arange(width) + 0.5
    # To every column first; rows then follow one by one, without a second full-size array.
    row_at, col_at = (
        np.stack([np.interp(centres, right, line) for line in values]) for values in lattice
    )
    index = np.empty((height, width), dtype=np.int32)
    for number in range(height):
        above = min(number // _LATTICE_PX, down.size - 2)
        share = (number + 0.5 - down[above]) / (down[above + 1] - down[above])
        row = np.rint((1.0 - share) * row_at[above] + share * row_at[above + 1])
        col = np.rint((1.0 - share) * col_at[above] + share * col_at[above + 1])
        inside = (row >= 0) & (row < grid.rows) & (col >= 0) & (col < grid.cols)
        index[number] = np.where(inside, row * grid.cols + col, -1)
    return index
