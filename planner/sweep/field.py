"""The path field: loss and angle of departure from one mast to every cell around it."""

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from planner.geodesy import LocalFrame
from planner.physics.diffraction import Polarization
from planner.physics.free_space import free_space_loss_db_scalar
from planner.sweep.setting import Progress, filled, set_up
from planner.sweep.state import (
    COMPUTED,
    LEAST_DISTANCE_M,
    NO_DATA,
    OUT_OF_RANGE,
    Layers,
    Link,
    Mast,
)
from planner.sweep.walk import walk_fan
from planner.terrain import Terrain


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
    fresnel_clearance_ratio: NDArray[np.float32]  # worst on the way, in first Fresnel radii; <= 1
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
    setting = set_up(
        terrain,
        latitude=latitude,
        longitude=longitude,
        antenna_height_m=antenna_height_m,
        receiver_height_m=receiver_height_m,
        frequency_mhz=frequency_mhz,
        radius_m=radius_m,
        k_factor=k_factor,
        polarization=polarization,
        obstacle_clearing_m=obstacle_clearing_m,
    )
    mast, link, shape = setting.mast, setting.link, setting.shape
    layers = Layers(
        path_loss_db=filled(shape, np.nan, np.float32),
        departure_elevation_deg=filled(shape, np.nan, np.float32),
        fresnel_clearance_ratio=filled(shape, np.nan, np.float32),
        status=filled(shape, OUT_OF_RANGE, np.uint8),
    )
    setting.walk_all(walk_fan, (layers,), progress)
    _compute_own_cell(mast, link, setting.ground, layers)
    for array in layers:
        array.flags.writeable = False
    return PathField(
        row_start=mast.row_start,
        col_start=mast.col_start,
        mast_row=mast.row,
        mast_col=mast.col,
        mast_ground_m=mast.ground_m,
        frame=setting.frame,
        cell_m=mast.cell_m,
        frequency_mhz=link.frequency_mhz,
        antenna_height_m=float(antenna_height_m),
        receiver_height_m=link.receiver_height_m,
        radius_m=link.radius_m,
        path_loss_db=layers.path_loss_db,
        departure_elevation_deg=layers.departure_elevation_deg,
        fresnel_clearance_ratio=layers.fresnel_clearance_ratio,
        status=layers.status,
    )


def load_kernels() -> None:
    """Load the compiled sweep, or compile it where this processor has not done so yet.

    A walk over nothing: compiling takes some twenty seconds, once for a processor and version.
    """
    nothing = np.full((2, 2), np.nan, dtype=np.float32)
    no_obstacle = np.zeros((0, 0), dtype=np.float32)
    for array in (nothing, no_obstacle):
        array.flags.writeable = False
    empty = np.empty((0, 0), dtype=np.float32)
    walk_fan(
        0,
        1,
        0,
        0,
        nothing,
        no_obstacle,
        Mast(0.0, 0.0, 0, 0, 1.0, 1.0, 0.0, 0.0, 0.0),
        Link(1.0, 1.0, 1e6, 1e3, 0.3, True, 1.0, 0.0),
        Layers(empty, empty.copy(), empty.copy(), np.empty((0, 0), dtype=np.uint8)),
    )


def _compute_own_cell(mast: Mast, link: Link, ground: NDArray[np.float32], layers: Layers) -> None:
    """A mast on the very centre of a cell: no radial owns that cell, straight down is its path."""
    row, col = int(mast.row), int(mast.col)
    if row != mast.row or col != mast.col:
        return
    out = (row - mast.row_start, col - mast.col_start)
    rise = float(ground[row, col]) + link.receiver_height_m - link.tx_height_m
    if not abs(rise) >= LEAST_DISTANCE_M:
        layers.status[out] = NO_DATA
        return
    layers.path_loss_db[out] = free_space_loss_db_scalar(abs(rise), link.frequency_mhz)
    layers.departure_elevation_deg[out] = math.copysign(90.0, rise)
    layers.fresnel_clearance_ratio[out] = 1.0
    layers.status[out] = COMPUTED
