"""From the metric grid to Web Mercator, the projection of the map page."""

from dataclasses import dataclass

import numpy as np
from affine import Affine
from numpy.typing import NDArray
from pyproj import Transformer
from rasterio.crs import CRS
from rasterio.enums import Resampling
from rasterio.warp import calculate_default_transform, reproject

from planner.terrain import Grid

LONGEST_SIDE_PX = 2048


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class MercatorView:
    """Which cell of the grid each pixel of a Web Mercator picture shows."""

    cell_index: NDArray[np.int32]  # [rows, cols] number of the cell, row by row; -1 outside
    transform: Affine  # from (col, row) of pixel corners to Web Mercator metres
    south: float  # outer edges, WGS 84
    west: float
    north: float
    east: float

    def shown(self, array: NDArray, outside: float) -> NDArray:
        """A layer of the grid as seen in the picture, nearest cell, ``outside`` beyond the grid."""
        flat = array.ravel()
        return np.where(self.cell_index >= 0, flat[np.maximum(self.cell_index, 0)], outside)


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
    numbers = np.arange(grid.rows * grid.cols, dtype=np.int32).reshape(grid.rows, grid.cols)
    index = np.full((height, width), -1, dtype=np.int32)
    reproject(
        numbers,
        index,
        src_transform=grid.transform,
        src_crs=source,
        dst_transform=transform,
        dst_crs=target,
        src_nodata=-1,
        dst_nodata=-1,
        init_dest_nodata=True,
        resampling=Resampling.nearest,
        tolerance=0.05,
    )
    to_degrees = Transformer.from_crs(3857, 4326, always_xy=True)
    west, north = to_degrees.transform(transform.c, transform.f)
    east, south = to_degrees.transform(
        transform.c + width * transform.a, transform.f + height * transform.e
    )
    return MercatorView(
        cell_index=index, transform=transform, south=south, west=west, north=north, east=east
    )
