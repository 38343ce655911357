"""Relief of the ground by light and shade."""

import numpy as np
from numpy.typing import NDArray


def hillshade(
    ground_elevation_m: NDArray[np.floating],
    cell_m: float,
    row: NDArray[np.integer],
    col: NDArray[np.integer],
    *,
    sun_azimuth_deg: float = 315.0,
    sun_elevation_deg: float = 40.0,
    exaggeration: float = 1.5,
) -> NDArray[np.float64]:
    """Share of the sun's light that the given cells get, 0 (dark) to 1 (facing the sun).

    ``ground_elevation_m`` is [rows, cols], row 0 in the north, ``cell_m`` the side of a cell;
    ``row`` and ``col`` number cells inside, any shapes that broadcast. The slope is that between
    the neighbours on either side, at an edge that to the one neighbour. Cells whose slope needs a
    missing height are NaN. Lambert's cosine law; azimuth is that of the grid.
    """
    rows, cols = ground_elevation_m.shape
    row, col = np.broadcast_arrays(row, col)
    above, below = np.maximum(row - 1, 0), np.minimum(row + 1, rows - 1)
    left, right = np.maximum(col - 1, 0), np.minimum(col + 1, cols - 1)

    def height_m(at_row: NDArray[np.integer], at_col: NDArray[np.integer]) -> NDArray[np.float64]:
        return np.asarray(ground_elevation_m[at_row, at_col], dtype=float) * exaggeration

    # One row or column alone has no neighbours: level, unless its height is missing.
    southwards = (height_m(below, col) - height_m(above, col)) / (
        np.maximum(below - above, 1) * cell_m
    )
    eastwards = (height_m(row, right) - height_m(row, left)) / (
        np.maximum(right - left, 1) * cell_m
    )
    azimuth, elevation = np.radians(sun_azimuth_deg), np.radians(sun_elevation_deg)
    to_sun_east = np.sin(azimuth) * np.cos(elevation)
    to_sun_north = np.cos(azimuth) * np.cos(elevation)
    # The surface normal is (-dz/dx, -dz/dy, 1) with y to the north.
    towards = -eastwards * to_sun_east + southwards * to_sun_north + np.sin(elevation)
    return np.clip(towards / np.sqrt(1.0 + eastwards**2 + southwards**2), 0.0, 1.0)
