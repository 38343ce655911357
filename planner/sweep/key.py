"""What decides a path field: the part of the terrain that its mast can see, and a key for it all.

A path field computed on that part alone is the one computed on the whole terrain, to the rounding
of the mast's row and column. So a field can be kept under a key that other towers, and the edges of
a larger grid, do not change.
"""

import hashlib
import json
import math
from concurrent.futures import ThreadPoolExecutor
from dataclasses import asdict

import numba
import numpy as np
from affine import Affine
from numpy.typing import NDArray

from planner import __version__
from planner.errors import Problem, TerrainError
from planner.geodesy import local_frame
from planner.physics.diffraction import Polarization
from planner.terrain import Grid, Terrain

# Part of every key. Raise it with every change after which path_field gives other numbers, or other
# arrays, for the same input: fields that were kept before must not be used any more.
MODEL_VERSION = 5

_SNAP_CELLS = 1e-6  # a mast so near a cell's centre stands on it
_BLOCK_CELLS = 2**20  # hashed at a time by one thread; part of the key's definition
# The terrain of a plan is read this much further than the radius (planner.io.terrain_grid). With
# the same margin here a window is not cut by the edge of the grid where other towers move it.
_MARGIN = 1.001


def mast_place(grid: Grid, latitude: float, longitude: float) -> tuple[float, float, float, float]:
    """(easting_m, northing_m, row, col) of a mast; TerrainError where it stands off the grid."""
    easting, northing = (float(value) for value in grid.from_geographic(latitude, longitude))
    row, col = (_snapped(float(value)) for value in grid.row_col(easting, northing))
    if not grid.contains(row, col):
        raise TerrainError(
            Problem(where=mast_name(latitude, longitude), found="a place outside the terrain")
        )
    return easting, northing, row, col


def _snapped(place: float) -> float:
    """Coordinates that were computed from a cell's centre come back to within rounding of it."""
    centre = float(round(place)) if math.isfinite(place) else place
    return centre if abs(place - centre) < _SNAP_CELLS else place


def mast_name(latitude: float, longitude: float) -> str:
    """What to call a mast in a message."""
    return f"mast at latitude {latitude:.5f}, longitude {longitude:.5f}"


def seen_window(
    terrain: Terrain, *, latitude: float, longitude: float, radius_m: float
) -> tuple[slice, slice]:
    """The rows and columns of a terrain that decide the path field of a mast.

    The cells within ``radius_m`` north, east, south and west of it; paths to cells in range touch
    no others. On a surface model the cells within the lowering radius belong to them. Raises
    TerrainError where the mast stands outside the terrain.
    """
    grid = terrain.grid
    easting, northing, row, col = mast_place(grid, latitude, longitude)
    reach_m = _MARGIN * radius_m * local_frame(grid.crs, easting, northing).scale
    if terrain.kind == "surface":
        reach_m = max(reach_m, terrain.lowering_radius_m)
    reach = reach_m / grid.cell_m

    def window(place: float, cells: int) -> slice:
        first, stop = math.floor(place + 0.5 - reach), math.ceil(place + 0.5 + reach)
        return slice(max(first, 0), min(stop, cells))

    return window(row, grid.rows), window(col, grid.cols)


def seen_part(terrain: Terrain, *, latitude: float, longitude: float, radius_m: float) -> Terrain:
    """The part of a terrain within :func:`seen_window`, on a grid of its own.

    The arrays are copies unless the part is the whole terrain.
    """
    grid = terrain.grid
    rows, cols = seen_window(terrain, latitude=latitude, longitude=longitude, radius_m=radius_m)
    a, b, c, d, e, f = tuple(grid.transform)[:6]
    obstacle = terrain.obstacle_height_m
    return Terrain(
        grid=Grid(
            crs=grid.crs,
            transform=Affine(a, b, c + cols.start * a, d, e, f + rows.start * e),
            rows=rows.stop - rows.start,
            cols=cols.stop - cols.start,
        ),
        ground_elevation_m=np.ascontiguousarray(terrain.ground_elevation_m[rows, cols]),
        obstacle_height_m=None if obstacle is None else np.ascontiguousarray(obstacle[rows, cols]),
        kind=terrain.kind,
        lowering_radius_m=terrain.lowering_radius_m,
    )


def path_field_key(
    terrain: Terrain,
    *,
    latitude: float,
    longitude: float,
    antenna_height_m: float,
    receiver_height_m: float,
    frequency_mhz: float,
    radius_m: float,
    k_factor: float,
    polarization: Polarization,
    obstacle_clearing_m: float = 0.0,
) -> str:
    """SHA-256, 64 hexadecimal digits, of everything that decides a path field and nothing else.

    Parameters as for :func:`planner.sweep.path_field`. The key holds the version of the model and
    of the package, the heights and the grid of the mast's :func:`seen_part`, how masts stand on
    it, where the mast stands and how the grid departs from true north and scale there, and every
    other argument. It does not depend on the number of threads. Raises TerrainError where the mast
    stands outside the terrain.
    """
    seen = seen_part(terrain, latitude=latitude, longitude=longitude, radius_m=radius_m)
    easting, northing, row, col = mast_place(seen.grid, latitude, longitude)
    obstacle = seen.obstacle_height_m
    facts = {
        "software": __version__,
        "model_version": MODEL_VERSION,
        "crs": seen.grid.crs.to_wkt(),
        "transform": [float(value) for value in tuple(seen.grid.transform)[:6]],
        "shape": [seen.grid.rows, seen.grid.cols],
        "ground": _digest(seen.ground_elevation_m),
        "obstacle": None if obstacle is None else _digest(obstacle),
        "kind": seen.kind,
        "lowering_radius_m": float(seen.lowering_radius_m),
        "mast_row_col": [row, col],
        "frame": asdict(local_frame(seen.grid.crs, easting, northing)),
        "antenna_height_m": float(antenna_height_m),
        "receiver_height_m": float(receiver_height_m),
        "frequency_mhz": float(frequency_mhz),
        "radius_m": float(radius_m),
        "k_factor": float(k_factor),
        "polarization": polarization,
        "obstacle_clearing_m": float(obstacle_clearing_m),
    }
    return hashlib.sha256(json.dumps(facts, sort_keys=True).encode()).hexdigest()


def _digest(array: NDArray[np.float32]) -> str:
    """SHA-256 over the digests of blocks of rows, which threads share."""
    rows = max(_BLOCK_CELLS // array.shape[1], 1)
    starts = range(0, array.shape[0], rows)

    def block(start: int) -> bytes:
        values = array[start : start + rows].astype("<f4", copy=False)
        return hashlib.sha256(values.data.cast("B")).digest()

    with ThreadPoolExecutor(numba.get_num_threads()) as threads:
        return hashlib.sha256(b"".join(threads.map(block, starts))).hexdigest()
