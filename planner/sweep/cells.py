"""Path loss, angle of departure and clearance of the cells of one line under a fan."""

import math

import numpy as np
from numpy.typing import NDArray

from planner.physics._jit import scalar
from planner.physics.bullington import bullington_loss_db_scalar, bullington_point_nu_scalar
from planner.physics.elementary import arctangent
from planner.physics.free_space import free_space_loss_db_scalar
from planner.physics.smooth_surface import fit_increments, smooth_surface_ends
from planner.physics.spherical_earth import clears_sphere_scalar
from planner.sweep.own_line import FREE
from planner.sweep.state import (
    BEST_NEAR,
    BEST_TANGENT,
    CELL,
    CELL_HOLES,
    COMPUTED,
    CROSSES_HOLE,
    DIRECT,
    DISTANCE,
    ELEVATION,
    GROUND,
    LAST_GROUND,
    LEAST_DISTANCE_M,
    LOSS,
    MOMENT,
    NO_DATA,
    NU_SCALE,
    PER_METRE,
    RATIO,
    RX_EFFECTIVE,
    SPHERE,
    SUM,
    TX_EFFECTIVE,
    TX_SLOPE,
    V1,
    V2,
    WANTED,
    Link,
    Mast,
    Wedge,
)

f4 = np.float32


@scalar
def losses(
    narrow: NDArray,
    wide: NDArray,
    lanes: int,
    link: Link,
) -> None:
    """Path loss, angle and clearance of each lane's cell but for the spherical earth."""
    bend = 1.0 / (2.0 * link.earth_radius_m)
    for lane in range(lanes):
        distance = wide[DISTANCE + lane]
        ground = wide[GROUND + lane] - link.tx_height_m
        rx_height = ground + link.receiver_height_m
        per_metre = wide[PER_METRE + lane]
        blocked = narrow[TX_SLOPE + lane] >= narrow[DIRECT + lane]
        tx_slope = narrow[TX_SLOPE + lane] * per_metre
        rx_slope = narrow[BEST_TANGENT + lane] * per_metre
        direct = narrow[DIRECT + lane] * per_metre
        near_nu = narrow[BEST_NEAR + lane] * wide[NU_SCALE + lane]
        edge_nu = bullington_point_nu_scalar(
            tx_slope + distance * bend,
            rx_slope - distance * bend,
            0.0,
            rx_height,
            distance,
            link.wavelength_m,
        )
        actual = bullington_loss_db_scalar(edge_nu if blocked else near_nu, distance)
        slant = math.sqrt(distance * distance + rx_height * rx_height)
        loss = free_space_loss_db_scalar(slant, link.frequency_mhz) + actual
        wide[LOSS + lane] = loss if slant >= LEAST_DISTANCE_M else math.nan
        wide[ELEVATION + lane] = math.degrees(arctangent(tx_slope if blocked else direct))
        wide[RATIO + lane] = min(near_nu * (1.0 / FREE), 1.0)


@scalar
def may_meet_sphere(
    narrow: NDArray,
    wide: NDArray,
    lanes: int,
    samples: int,
    steps: float,
    mast: Mast,
    link: Link,
) -> bool:
    """Effective heights of each lane's path; whether the spherical earth may add to some loss."""
    tx_ground = mast.ground_m - link.tx_height_m
    last_step = float(samples)
    some = False
    for lane in range(lanes):
        ground = wide[GROUND + lane] - link.tx_height_m
        last = float(narrow[LAST_GROUND + lane])
        # Sums over the samples, a step apart, by parts: every height but the ends stands twice.
        v1 = 2.0 * narrow[SUM + lane] + tx_ground - last
        v2 = 6.0 * narrow[MOMENT + lane] + tx_ground - last * (3.0 * last_step + 1.0)
        part1, part2 = fit_increments(steps, ground, last_step, last)
        tx_surface, rx_surface = smooth_surface_ends(
            v1 + part1, v2 + part2, steps, -math.inf, 0.0, 0.0, tx_ground, ground
        )
        tx_effective = -tx_surface
        rx_effective = ground + link.receiver_height_m - rx_surface
        clears = clears_sphere_scalar(
            wide[DISTANCE + lane],
            tx_effective,
            rx_effective,
            link.earth_radius_m,
            link.wavelength_m,
        )
        wanted = (narrow[WANTED + lane] > f4(0.0)) & (narrow[CELL_HOLES + lane] == f4(0.0))
        wide[V1 + lane] = v1 + part1
        wide[V2 + lane] = v2 + part2
        wide[TX_EFFECTIVE + lane] = tx_effective
        wide[RX_EFFECTIVE + lane] = rx_effective
        wide[SPHERE + lane] = 1.0 if wanted & (not clears) else 0.0
        some = some | (wanted & (not clears))
    return some


@scalar
def write_cells(
    narrow: NDArray,
    wide: NDArray,
    place: NDArray,
    lanes: int,
    wedge: Wedge,
    line: int,
    mast: Mast,
    path_loss_db: NDArray,
    departure_elevation_deg: NDArray,
    fresnel_clearance_ratio: NDArray,
    status: NDArray,
) -> None:
    """Put the results of a line into the"""
    for lane in range(lanes):
        if narrow[WANTED + lane] == f4(0.0):
            continue
        row = (place[CELL + lane] if wedge.along_rows else line) - mast.row_start
        col = (line if wedge.along_rows else place[CELL + lane]) - mast.col_start
        if math.isnan(wide[GROUND + lane]):
            status[row, col] = NO_DATA
        elif narrow[CELL_HOLES + lane] != f4(0.0):
            status[row, col] = CROSSES_HOLE
        elif math.isnan(wide[LOSS + lane]):
            status[row, col] = NO_DATA
        else:
            status[row, col] = COMPUTED
            path_loss_db[row, col] = wide[LOSS + lane]
            departure_elevation_deg[row, col] = wide[ELEVATION + lane]
            fresnel_clearance_ratio[row, col] = wide[RATIO + lane]
