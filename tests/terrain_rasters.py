"""Small rasters for tests.

A height that is linear in a raster's own coordinates survives bilinear interpolation exactly, so
what a grid should hold can be computed from the places of its cells alone.
"""

from pathlib import Path

import numpy as np
import rasterio
from affine import Affine
from pyproj import Transformer

SHARED = Path(__file__).resolve().parents[2] / "shared" / "terrain"


def written(path, array, transform, crs, **more):
    """Write ``array`` to ``path`` as it is; ``more`` are options of the file, or ``unit``."""
    unit = more.pop("unit", None)
    scale_offset = more.pop("scale_offset", None)
    array = np.asarray(array)
    bands = array if array.ndim == 3 else array[np.newaxis]
    profile = {
        "driver": "GTiff",
        "count": bands.shape[0],
        "height": bands.shape[1],
        "width": bands.shape[2],
        "dtype": bands.dtype.name,
        "crs": crs,
        "transform": transform,
    }
    with rasterio.open(path, "w", **{**profile, **more}) as dataset:
        if unit is not None:
            dataset.set_band_unit(1, unit)
        if scale_offset is not None:
            dataset.scales = (scale_offset[0],)
            dataset.offsets = (scale_offset[1],)
        dataset.write(bands)
    return path


class Plane:
    """Heights that are linear in the coordinates (x, y) of a CRS."""

    def __init__(self, crs, x, y, rise_x, rise_y, height_m=500.0):
        self.crs, self.x, self.y = crs, x, y
        self.rise_x, self.rise_y, self.height_m = rise_x, rise_y, height_m

    def __call__(self, x, y):
        return self.height_m + (x - self.x) * self.rise_x + (y - self.y) * self.rise_y

    def raster(self, transform, rows, cols):
        """Heights at the centres of the cells of a raster."""
        row, col = np.mgrid[:rows, :cols] + 0.5
        a, b, c, d, e, f = tuple(transform)[:6]
        return self(a * col + b * row + c, d * col + e * row + f).astype(np.float32)

    def on(self, grid):
        """Heights at the centres of the cells of a grid, by PROJ alone."""
        row, col = np.mgrid[: grid.rows, : grid.cols]
        easting = grid.transform.c + (col + 0.5) * grid.transform.a
        northing = grid.transform.f - (row + 0.5) * grid.transform.a
        x, y = Transformer.from_crs(grid.crs, self.crs, always_xy=True).transform(easting, northing)
        if self.x > 100.0 and self.crs == "EPSG:4326":
            x = np.where(x < 0.0, x + 360.0, x)  # near the 180th meridian
        return self(x, y)


def degree_tile(path, south, west, cells, plane, *, shared_edge, dtype="float32", **more):
    """A tile of one degree; with ``shared_edge`` it has the outermost points of its neighbours."""
    step = 1.0 / cells
    count = cells + 1 if shared_edge else cells
    start = 0.5 * step if shared_edge else 0.0
    transform = Affine(step, 0, west - start, 0, -step, south + 1.0 + start)
    heights = plane.raster(transform, count, count).astype(dtype)
    return written(path, heights, transform, "EPSG:4326", **more)
