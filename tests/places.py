"""Terrains that several tests share."""

from functools import cache

import numpy as np
from affine import Affine
from matplotlib import cbook
from numpy.typing import NDArray
from pyproj import CRS
from rasterio.enums import Resampling
from rasterio.warp import calculate_default_transform, reproject

from planner.terrain import Grid, Terrain

PLAIN_CRS = CRS.from_epsg(32710)  # UTM zone 10 south


def jacksboro_degrees() -> tuple[NDArray[np.int16], Affine]:
    """USGS elevations around the Jacksboro fault as matplotlib ships them, 3 arc-seconds, WGS 84.

    Array and transform. The archive's ymin and ymax are swapped: ymin is the northern edge.
    """
    with cbook.get_sample_data("jacksboro_fault_dem.npz") as archive:
        elevation = archive["elevation"]
        west, north = float(archive["xmin"]), float(archive["ymin"])
        dx, dy = float(archive["dx"]), float(archive["dy"])
    return elevation, Affine(dx, 0.0, west, 0.0, -dy, north)


@cache
def jacksboro(cell_m: float = 30.0) -> Terrain:
    """The same, bilinearly resampled to UTM zone 16 north."""
    elevation, transform = jacksboro_degrees()
    rows, cols = elevation.shape
    west, north = transform.c, transform.f
    target, width, height = calculate_default_transform(
        "EPSG:4326",
        "EPSG:32616",
        cols,
        rows,
        left=west,
        bottom=north + rows * transform.e,
        right=west + cols * transform.a,
        top=north,
        resolution=cell_m,
    )
    ground = np.full((height, width), np.nan, dtype=np.float32)
    reproject(
        elevation.astype(np.float32),
        ground,
        src_transform=transform,
        src_crs="EPSG:4326",
        dst_transform=target,
        dst_crs="EPSG:32616",
        dst_nodata=np.nan,
        resampling=Resampling.bilinear,
    )
    grid = Grid(crs=CRS.from_epsg(32616), transform=target, rows=height, cols=width)
    return Terrain(grid=grid, ground_elevation_m=ground)


def plain(
    rows: int = 81,
    cols: int = 81,
    *,
    cell_m: float = 50.0,
    height_m: float = 0.0,
    ground: NDArray[np.float32] | None = None,
    obstacle: NDArray[np.float32] | None = None,
) -> Terrain:
    """Invented ground on a UTM grid near its central meridian, flat unless ``ground`` is given."""
    if ground is None:
        ground = np.full((rows, cols), height_m, dtype=np.float32)
    rows, cols = ground.shape
    transform = Affine(cell_m, 0.0, 480_000.0, 0.0, -cell_m, 4_900_000.0)
    grid = Grid(crs=PLAIN_CRS, transform=transform, rows=rows, cols=cols)
    return Terrain(grid=grid, ground_elevation_m=ground, obstacle_height_m=obstacle)


def latitude_longitude(terrain: Terrain, row: float, col: float) -> tuple[float, float]:
    """Geographic place of a fractional row and column; whole numbers are cell centres."""
    latitude, longitude = terrain.grid.to_geographic(*terrain.grid.easting_northing(row, col))
    return float(latitude), float(longitude)
