"""Relief of the ground by light and shade."""

import numpy as np
from numpy.typing import ArrayLike, NDArray


def hillshade(
    ground_elevation_m: ArrayLike,
    cell_m: float,
    *,
    sun_azimuth_deg: float = 315.0,
    sun_elevation_deg: float = 40.0,
    exaggeration: float = 1.5,
) -> NDArray[np.float64]:
    """Share of the sun's light that each cell gets, 0 (dark) to 1 (facing the sun).

    ``ground_elevation_m`` is [rows, cols], row 0 in the north, ``cell_m`` the side of a cell. Cells
    whose slope needs a missing height are NaN. Lambert's cosine law; azimuth is that of the grid.
    """
    ground = np.asarray(ground_elevation_m, dtype=float) * exaggeration
    if min(ground.shape) < 2:
        return np.where(np.isnan(ground), np.nan, np.sin(np.radians(sun_elevation_deg)))
    southwards, eastwards = np.gradient(ground, cell_m)
    azimuth, elevation = np.radians(sun_azimuth_deg), np.radians(sun_elevation_deg)
    to_sun_east = np.sin(azimuth) * np.cos(elevation)
    to_sun_north = np.cos(azimuth) * np.cos(elevation)
    # The surface normal is (-dz/dx, -dz/dy, 1) with y to the north.
    towards = -eastwards * to_sun_east + southwards * to_sun_north + np.sin(elevation)
    return np.clip(towards / np.sqrt(1.0 + eastwards**2 + southwards**2), 0.0, 1.0)
