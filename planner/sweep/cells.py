"""Path loss, angle of departure and clearance of the cells of one line under a fan."""

import math

import numpy as np
from numpy.typing import NDArray

from planner.physics._jit import in_single_precision, scalar
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
    RX_ABOVE,
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
DEGREES = f4(180.0 / math.pi)
_arctangent = in_single_precision(arctangent)
_bullington_loss_db = in_single_precision(bullington_loss_db_scalar)
_bullington_point_nu = in_single_precision(bullington_point_nu_scalar)
_free_space_loss_db = in_single_precision(free_space_loss_db_scalar)
_fit_increments = in_single_precision(fit_increments)
_smooth_surface_ends = in_single_precision(smooth_surface_ends)
_clears_sphere = in_single_precision(clears_sphere_scalar)


@scalar
def losses(narrow: NDArray, lanes: int, link: Link) -> None:
    """Path loss, angle and clearance of each lane's cell but for the spherical earth."""
    bend = f4(1.0 / (2.0 * link.earth_radius_m))
    wavelength, frequency = f4(link.wavelength_m), f4(link.frequency_mhz)
    for lane in range(lanes):
        distance = narrow[DISTANCE + lane]
        rx_height = narrow[GROUND + lane] + narrow[RX_ABOVE + lane]
        per_metre = narrow[PER_METRE + lane]
        blocked = narrow[TX_SLOPE + lane] >= narrow[DIRECT + lane]
        tx_slope = narrow[TX_SLOPE + lane] * per_metre
        rx_slope = narrow[BEST_TANGENT + lane] * per_metre
        direct = narrow[DIRECT + lane] * per_metre
        near_nu = narrow[BEST_NEAR + lane] * narrow[NU_SCALE + lane]
        edge_nu = _bullington_point_nu(
            tx_slope + distance * bend,
            rx_slope - distance * bend,
            f4(0.0),
            rx_height,
            distance,
            wavelength,
        )
        # Where a ray only just touches, rounding may leave the edge's height negative or NaN.
        edge_nu = edge_nu if edge_nu > f4(0.0) else f4(0.0)
        actual = _bullington_loss_db(edge_nu if blocked else near_nu, distance)
        slant = np.sqrt(distance * distance + rx_height * rx_height)
        loss = f4(_free_space_loss_db(slant, frequency)) + actual
        narrow[LOSS + lane] = loss if slant >= f4(LEAST_DISTANCE_M) else f4(np.nan)
        narrow[ELEVATION + lane] = _arctangent(tx_slope if blocked else direct) * DEGREES
        narrow[RATIO + lane] = min(near_nu * f4(1.0 / FREE), f4(1.0))


@scalar
def may_meet_sphere(
    narrow: NDArray, lanes: int, samples: int, steps: float, mast: Mast, link: Link
) -> bool:
    """Effective heights of each lane's path; whether the spherical earth may add to some loss."""
    tx_ground = f4(mast.ground_m - link.tx_height_m)
    earth_radius, wavelength = f4(link.earth_radius_m), f4(link.wavelength_m)
    u, last_step = f4(steps), f4(samples)
    two, six, none = f4(2.0), f4(6.0), f4(0.0)
    last_weight = f4(3.0 * samples + 1.0)
    some = False
    for lane in range(lanes):
        ground = narrow[GROUND + lane]
        last = narrow[LAST_GROUND + lane]
        # Sums over the samples, a step apart, by parts: every height but the ends stands twice.
        v1 = two * narrow[SUM + lane] + tx_ground - last
        v2 = six * narrow[MOMENT + lane] + tx_ground - last * last_weight
        part1, part2 = _fit_increments(u, ground, last_step, last)
        tx_surface, rx_surface = _smooth_surface_ends(
            v1 + part1, v2 + part2, u, none, none, none, tx_ground, ground
        )
        tx_effective = -tx_surface
        rx_effective = ground + narrow[RX_ABOVE + lane] - rx_surface
        clears = _clears_sphere(
            narrow[DISTANCE + lane], tx_effective, rx_effective, earth_radius, wavelength
        )
        wanted = (narrow[WANTED + lane] > none) & (narrow[CELL_HOLES + lane] == none)
        narrow[V1 + lane] = v1 + part1
        narrow[V2 + lane] = v2 + part2
        narrow[TX_EFFECTIVE + lane] = tx_effective
        narrow[RX_EFFECTIVE + lane] = rx_effective
        narrow[SPHERE + lane] = f4(1.0) if wanted & (not clears) else none
        some = some | (wanted & (not clears))
    return some


@scalar
def write_cells(
    narrow: NDArray,
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
    """Put the results of a line into the layers."""
    for lane in range(lanes):
        if narrow[WANTED + lane] == f4(0.0):
            continue
        row = (place[CELL + lane] if wedge.along_rows else line) - mast.row_start
        col = (line if wedge.along_rows else place[CELL + lane]) - mast.col_start
        if math.isnan(narrow[GROUND + lane]):
            status[row, col] = NO_DATA
        elif narrow[CELL_HOLES + lane] != f4(0.0):
            status[row, col] = CROSSES_HOLE
        elif math.isnan(narrow[LOSS + lane]):
            status[row, col] = NO_DATA
        else:
            status[row, col] = COMPUTED
            path_loss_db[row, col] = narrow[LOSS + lane]
            departure_elevation_deg[row, col] = narrow[ELEVATION + lane]
            fresnel_clearance_ratio[row, col] = narrow[RATIO + lane]
