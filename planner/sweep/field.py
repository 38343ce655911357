"""The path field: loss and angle of departure from one mast to every cell around it."""

import math
from collections.abc import Callable
from dataclasses import dataclass
from itertools import pairwise

import numpy as np
from numpy.typing import NDArray

from planner.errors import Problem, TerrainError
from planner.geodesy import LocalFrame, local_frame
from planner.physics.diffraction import Polarization
from planner.physics.free_space import free_space_loss_db_scalar, wavelength_m_scalar
from planner.sweep.key import mast_name, mast_place
from planner.sweep.radial import sweep_radials
from planner.sweep.state import COMPUTED, LEAST_DISTANCE_M, NO_DATA, OUT_OF_RANGE, Link, Mast
from planner.terrain import Terrain
from planner.units import EARTH_RADIUS_KM

Progress = Callable[[int, int], None]  # done, total

_PORTIONS = 40  # the sweep reports progress, and can be interrupted, this many times


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class PathField:
    """What every cell of a window knows of one mast, for one antenna height and frequency.

    The window is part of the terrain's grid; arrays have its shape and are read-only.
    """

    row_start: int  # the window's first row and column in the terrain's grid
    col_start: int
    mast_row: float  # fractional, in the terrain's grid; whole numbers are cell centres
    mast_col: float
    mast_ground_m: float  # on which the mast stands, above the datum
    frame: LocalFrame  # about the mast
    cell_m: float
    frequency_mhz: float
    antenna_height_m: float  # above the mast's ground
    receiver_height_m: float  # above each cell's ground
    radius_m: float
    path_loss_db: NDArray[np.float32]  # NaN where not computed
    departure_elevation_deg: NDArray[np.float32]  # towards the cell, or the horizon if obstructed
    status: NDArray[np.uint8]  # COMPUTED, OUT_OF_RANGE, NO_DATA or CROSSES_HOLE

    def departure_azimuth_deg(self) -> NDArray[np.float32]:
        """True azimuth from the mast to every cell of the window. [deg]"""
        rows, cols = self.path_loss_db.shape
        north = (self.mast_row - self.row_start - np.arange(rows)) * self.cell_m
        east = (np.arange(cols) + self.col_start - self.mast_col) * self.cell_m
        return self.frame.true_azimuth_deg(east[np.newaxis, :], north[:, np.newaxis]).astype(
            np.float32
        )


def path_field(
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
    progress: Progress | None = None,
) -> PathField:
    """Path loss by free space and complete delta-Bullington diffraction for every cell in range.

    Parameters
    ----------
    terrain : Terrain
        The surface. Cells without data get no loss, nor do cells behind them.
    latitude, longitude : float
        The mast. [WGS 84 decimal degrees]
    antenna_height_m, receiver_height_m : float
        Above the ground under the mast; above the ground of each cell. [m]
    frequency_mhz, radius_m, k_factor : float
        Frequency [MHz], true distance up to which cells are computed [m], effective earth radius
        factor [unitless].
    polarization : "vertical" or "horizontal"
    obstacle_clearing_m : float
        Obstacles nearer than this to either end do not count. [m]
    progress : callable(done, total), optional
        Called between portions of the work; an exception from it ends the sweep.

    Returns
    -------
    PathField

    Raises
    ------
    TerrainError
        The mast stands outside the terrain or on a hole.
    """
    grid = terrain.grid
    easting, northing, row, col = mast_place(grid, latitude, longitude)
    ground_m = float(terrain.standing_elevation_m(row, col))
    if math.isnan(ground_m):
        raise TerrainError(
            Problem(where=mast_name(latitude, longitude), found="no terrain data under the mast")
        )
    frame = local_frame(grid.crs, easting, northing)

    # The scale changes little over a window; 1 % more than the radius is more than enough.
    reach = math.ceil(radius_m * frame.scale * 1.01 / grid.cell_m) + 1
    row_start = max(math.floor(row) - reach, 0)
    row_stop = min(math.ceil(row) + reach + 1, grid.rows)
    col_start = max(math.floor(col) - reach, 0)
    col_stop = min(math.ceil(col) + reach + 1, grid.cols)
    shape = (row_stop - row_start, col_stop - col_start)
    ground = terrain.ground_elevation_m
    obstacle = terrain.obstacle_height_m
    if obstacle is None:
        obstacle = np.zeros((0, 0), dtype=np.float32)
        obstacle.flags.writeable = False  # so that the kernel is compiled for one type only
    mast = Mast(
        row=row,
        col=col,
        row_start=row_start,
        col_start=col_start,
        cell_m=grid.cell_m,
        scale=frame.scale,
        scale_gradient_east_per_m=frame.scale_gradient_east_per_m,
        scale_gradient_north_per_m=frame.scale_gradient_north_per_m,
        ground_m=ground_m,
    )
    link = Link(
        tx_height_m=ground_m + antenna_height_m,
        receiver_height_m=float(receiver_height_m),
        earth_radius_m=k_factor * EARTH_RADIUS_KM * 1000.0,
        frequency_mhz=float(frequency_mhz),
        wavelength_m=wavelength_m_scalar(float(frequency_mhz)),
        vertical=polarization == "vertical",
        radius_m=float(radius_m),
        obstacle_clearing_m=float(obstacle_clearing_m),
    )
    path_loss = np.full(shape, np.nan, dtype=np.float32)
    elevation = np.full(shape, np.nan, dtype=np.float32)
    status = np.full(shape, OUT_OF_RANGE, dtype=np.uint8)
    radials = 4 * (2 * reach + 1)
    edges = np.linspace(0, radials, _PORTIONS + 1).astype(int)
    for portion, (first, stop) in enumerate(pairwise(edges)):
        if progress is not None:
            progress(portion, _PORTIONS)
        sweep_radials(
            int(first), int(stop), reach, ground, obstacle, mast, link, path_loss, elevation, status
        )
    if progress is not None:
        progress(_PORTIONS, _PORTIONS)
    _compute_own_cell(mast, link, ground, path_loss, elevation, status)
    for array in (path_loss, elevation, status):
        array.flags.writeable = False
    return PathField(
        row_start=row_start,
        col_start=col_start,
        mast_row=row,
        mast_col=col,
        mast_ground_m=ground_m,
        frame=frame,
        cell_m=grid.cell_m,
        frequency_mhz=float(frequency_mhz),
        antenna_height_m=float(antenna_height_m),
        receiver_height_m=float(receiver_height_m),
        radius_m=float(radius_m),
        path_loss_db=path_loss,
        departure_elevation_deg=elevation,
        status=status,
    )


def _compute_own_cell(
    mast: Mast,
    link: Link,
    ground: NDArray[np.float32],
    path_loss: NDArray[np.float32],
    elevation: NDArray[np.float32],
    status: NDArray[np.uint8],
) -> None:
    """A mast on the very centre of a cell: no radial owns that cell, straight down is its path."""
    row, col = int(mast.row), int(mast.col)
    if row != mast.row or col != mast.col:
        return
    out = (row - mast.row_start, col - mast.col_start)
    rise = float(ground[row, col]) + link.receiver_height_m - link.tx_height_m
    if not abs(rise) >= LEAST_DISTANCE_M:
        status[out] = NO_DATA
        return
    path_loss[out] = free_space_loss_db_scalar(abs(rise), link.frequency_mhz)
    elevation[out] = math.copysign(90.0, rise)
    status[out] = COMPUTED
