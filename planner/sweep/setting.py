"""What a walk over a terrain is set up with: the mast, the link, the window, and who walks."""

import math
from collections.abc import Callable
from concurrent.futures import ThreadPoolExecutor
from dataclasses import dataclass
from typing import Any

import numba
import numpy as np
from numpy.typing import NDArray

from planner.errors import Problem, TerrainError
from planner.geodesy import LocalFrame, local_frame
from planner.physics.diffraction import Polarization
from planner.physics.free_space import wavelength_m_scalar
from planner.sweep.course import fans
from planner.sweep.key import mast_name, mast_place
from planner.sweep.state import Link, Mast
from planner.terrain import Terrain
from planner.units import EARTH_RADIUS_KM

Progress = Callable[[int, int], None]  # done, total

_REPORT_EVERY = 16  # fans; between them the sweep can be interrupted


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Setting:
    """One mast on one terrain, with the window of the grid that it may reach."""

    mast: Mast
    link: Link
    frame: LocalFrame  # about the mast
    shape: tuple[int, int]  # of the window, in cells
    reach: int  # cells from the mast that lie in range at most
    ground: NDArray[np.float32]  # of the whole grid
    obstacle: NDArray[np.float32]  # of the whole grid, or without any cell

    def walk_all(self, walk: Any, results: tuple[Any, ...], progress: Progress | None) -> None:
        """Let ``walk`` compute all fans with as many threads as numba is set to use.

        The kernel holds no lock. Where it must be compiled first, that happens before any thread.
        """
        units = fans(self.reach)
        shared = (self.ground, self.obstacle, self.mast, self.link, *results)
        if progress is not None:
            progress(0, len(units))
        walk(*units[-1], *shared)
        with ThreadPoolExecutor(numba.get_num_threads()) as pool:
            pending = [pool.submit(walk, *unit, *shared) for unit in units[:-1]]
            try:
                for done, walked in enumerate(pending, start=2):
                    walked.result()
                    if progress is not None and (done % _REPORT_EVERY == 0 or done == len(units)):
                        progress(done, len(units))
            except BaseException:  # an interruption too: do not start what has not begun
                pool.shutdown(cancel_futures=True)
                raise


def filled(shape: tuple[int, int], value: float, dtype: Any) -> NDArray[Any]:
    """An array full of one value, by several threads: most of the time is the first touch."""
    array = np.empty(shape, dtype=dtype)

    def fill(rows: slice) -> None:
        array[rows] = value

    threads = numba.get_num_threads()
    step = -(-shape[0] // threads)
    with ThreadPoolExecutor(threads) as pool:
        list(pool.map(fill, [slice(row, row + step) for row in range(0, shape[0], step)]))
    return array


def set_up(
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
    obstacle_clearing_m: float,
) -> Setting:
    """The setting for a mast; parameters and errors as for :func:`planner.sweep.path_field`."""
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
    return Setting(
        mast=mast,
        link=link,
        frame=frame,
        shape=shape,
        reach=reach,
        ground=terrain.ground_elevation_m,
        obstacle=obstacle,
    )
