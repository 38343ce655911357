"""How high a receiver must stand for its best sector to serve it, for every cell of a grid."""

from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from planner.antenna.lookup import GainTable
from planner.coverage.height_walk import Aim, Ladder, walk_heights
from planner.coverage.layers import bend_rad_per_m, sector_arrays
from planner.network import Sector, Terminal
from planner.physics.diffraction import Polarization
from planner.sweep.setting import Progress, set_up
from planner.terrain import Terrain

STEP_M = 0.5
UNKNOWN = 65535  # no path to the cell is known
NOT_WITHIN_LIMIT = 0  # no step up to the limit is enough


def needed_heights(
    terrain: Terrain,
    sectors: Sequence[tuple[Sector, GainTable]],
    terminal: Terminal,
    *,
    latitude: float,
    longitude: float,
    limit_m: float,
    radius_m: float,
    k_factor: float,
    polarization: Polarization,
    obstacle_clearing_m: float,
    served: NDArray[np.uint16],
    served_and_free: NDArray[np.uint16],
    progress: Progress | None = None,
) -> None:
    """Lower the needed heights over the grid to what one mast's sectors make possible.

    Parameters
    ----------
    terrain : Terrain
    sectors : sequence of (sector, gain table)
        Of one mast, all with the same antenna height and frequency.
    terminal : Terminal
        What stands at a customer's house, but for its height.
    latitude, longitude : float
        The mast. [WGS 84 decimal degrees]
    limit_m : float
        Greatest height above ground that is tried. [m]
    radius_m, k_factor, polarization, obstacle_clearing_m
        As for :func:`planner.sweep.path_field`.
    served, served_and_free : uint16 [rows, cols] of the grid, changed in place
        Lowest number of steps of ``STEP_M`` above ground at which some sector reaches its radio's
        service threshold; and at which it does so with 60 % of the first Fresnel zone free.
        ``NOT_WITHIN_LIMIT`` where no step up to the limit is enough, ``UNKNOWN`` where no path is
        known. The lowest step that passes counts, even where a higher one fails again. Start with
        arrays full of ``UNKNOWN`` and call this for each mast, height and frequency.
    progress : callable(done, total), optional

    Raises
    ------
    TerrainError
        The mast stands outside the terrain or on a hole.
    """
    sector = sectors[0][0]
    setting = set_up(
        terrain,
        latitude=latitude,
        longitude=longitude,
        antenna_height_m=sector.antenna_height_m,
        receiver_height_m=STEP_M,  # the lowest: what is certain of it is certain of all
        frequency_mhz=sector.radio.frequency_mhz,
        radius_m=radius_m,
        k_factor=k_factor,
        polarization=polarization,
        obstacle_clearing_m=obstacle_clearing_m,
    )
    numbered = [(number, one, table) for number, (one, table) in enumerate(sectors, start=1)]
    arrays = sector_arrays(numbered, setting.frame, terminal)
    budget = arrays.budget.astype(float)
    spare_db = budget[:, 0] - budget[:, 1] + budget[:, 2] - budget[:, 3] - budget[:, 4]
    aim = Aim(
        levels=arrays.levels,
        first=arrays.first,
        nodes_per_row=arrays.nodes_per_row,
        azimuth_places=arrays.azimuth_places,
        elevation_places=arrays.elevation_places,
        mounted=arrays.mounted,
        boresight=arrays.boresight,
        budget=arrays.budget,
        bend=bend_rad_per_m(setting.frame),
        peak_db=float((spare_db + arrays.mounted[:, 0]).max()),
    )
    ladder = Ladder(
        step_m=STEP_M,
        steps=max(int(limit_m / STEP_M + 1e-9), 1),
        served=np.full(setting.shape, UNKNOWN, dtype=np.uint16),
        served_and_free=np.full(setting.shape, UNKNOWN, dtype=np.uint16),
    )
    setting.walk_all(walk_heights, (aim, ladder), progress)
    mast = setting.mast
    if mast.row == int(mast.row) and mast.col == int(mast.col):
        # No radial owns the cell under a mast on its centre; at its foot any height will do.
        own = (int(mast.row) - mast.row_start, int(mast.col) - mast.col_start)
        ladder.served[own] = ladder.served_and_free[own] = 1
    rows = slice(mast.row_start, mast.row_start + setting.shape[0])
    cols = slice(mast.col_start, mast.col_start + setting.shape[1])
    for whole, part in ((served, ladder.served), (served_and_free, ladder.served_and_free)):
        whole[rows, cols] = _lower(whole[rows, cols], part)


def _lower(one: NDArray[np.uint16], other: NDArray[np.uint16]) -> NDArray[np.uint16]:
    """The lower number of steps; any beats NOT_WITHIN_LIMIT, and that beats UNKNOWN."""
    # Taking 1 away turns 0 into the largest number but for UNKNOWN's, which is told apart first.
    lowest = np.minimum(one - np.uint16(1), other - np.uint16(1)) + np.uint16(1)
    lowest = np.where(one == UNKNOWN, other, lowest)
    return np.where(other == UNKNOWN, one, lowest)
