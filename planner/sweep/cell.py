"""One cell at the end of a radial: its own last samples, its path loss and angle of departure."""

import math

from numpy.typing import NDArray

from planner.physics._jit import scalar
from planner.physics.bullington import bullington_loss_db_scalar, bullington_point_nu_scalar
from planner.physics.free_space import free_space_loss_db_scalar
from planner.physics.fresnel import fresnel_parameter_scalar
from planner.physics.smooth_surface import fit_increments, smooth_surface_ends
from planner.sweep.hull import highest_above_slope, tangent_from_right
from planner.sweep.profile_extremes import closest_approach_nu, excess_spherical_loss_db
from planner.sweep.state import LEAST_DISTANCE_M, Link, Mast, State
from planner.terrain import bilinear

# The last samples before a cell lie on the cell's own straight line to the mast, where its exact
# path has them: an edge close to the receiver matters most, and half a cell aside is too far there.
OWN_SAMPLES = 4


@scalar
def take_own_samples(
    state: State,
    r: int,
    c: int,
    total: float,
    ground: NDArray,
    obstacle: NDArray,
    mast: Mast,
    link: Link,
) -> int:
    """Sample the cell's own line next to it; how many samples there are, or -1 over a hole."""
    delta_row = mast.row - r
    delta_col = mast.col - c
    intervals = math.ceil(math.sqrt(delta_row * delta_row + delta_col * delta_col) - 1e-9)
    count = max(min(OWN_SAMPLES, intervals - 1), 0)
    bend = 1.0 / (2.0 * link.earth_radius_m)
    for i in range(count):
        share = (i + 1.0) / intervals
        row = r + share * delta_row
        col = c + share * delta_col
        x = total * (1.0 - share)
        height = bilinear(ground, row, col)
        if math.isnan(height):
            return -1
        state.own_distance[i] = x
        state.own_ground[i] = height
        if obstacle.size > 0 and min(x, total - x) >= link.obstacle_clearing_m:
            height += bilinear(obstacle, row, col)
        state.own_bent[i] = height - x * x * bend
    return count


@scalar
def cell_loss_and_slope(
    state: State,
    count: int,
    surface_count: int,
    own_count: int,
    hull_size: int,
    ground_hull_size: int,
    surface_slope: float,
    ground_slope: float,
    v1: float,
    v2: float,
    total: float,
    cell_ground: float,
    mast: Mast,
    link: Link,
) -> tuple[float, float]:
    """Path loss [dB] and slope of departure of one cell behind ``count`` samples of the radial.

    The first ``surface_count`` samples count with their obstacles and are on the hull, the rest,
    near the receiver, as bare ground; ``own_count`` samples of the cell's own line follow. The
    slopes are the steepest seen from the mast so far. NaN where both antennas are in one place.
    """
    distance = state.distance
    tx_height = link.tx_height_m
    rx_height = cell_ground + link.receiver_height_m
    bend = 1.0 / (2.0 * link.earth_radius_m)
    rx_bent = rx_height - total * total * bend
    direct = (rx_bent - tx_height) / total
    tx_slope = surface_slope
    rx_slope = -math.inf
    if hull_size > 0:
        i = tangent_from_right(state.hull, hull_size, distance, state.bent, total, rx_bent)
        rx_slope = (state.bent[i] - rx_bent) / (total - distance[i])
    for i in range(surface_count, count):
        tx_slope = max(tx_slope, (state.bent_ground[i] - tx_height) / distance[i])
        rx_slope = max(rx_slope, (state.bent_ground[i] - rx_bent) / (total - distance[i]))
    for i in range(own_count):
        x = state.own_distance[i]
        tx_slope = max(tx_slope, (state.own_bent[i] - tx_height) / x)
        rx_slope = max(rx_slope, (state.own_bent[i] - rx_bent) / (total - x))
    nu = -math.inf
    if tx_slope >= direct:
        nu = bullington_point_nu_scalar(
            tx_slope + total * bend,
            rx_slope - total * bend,
            tx_height,
            rx_height,
            total,
            link.wavelength_m,
        )
    else:
        if surface_count > 0:
            nu = closest_approach_nu(
                distance,
                state.bent,
                state.block_top,
                surface_count,
                total,
                tx_height,
                rx_bent,
                direct - tx_slope,
                -direct - rx_slope,
                link.wavelength_m,
            )
        for i in range(surface_count, count):
            above = state.bent_ground[i] - tx_height - direct * distance[i]
            nu = max(
                nu,
                fresnel_parameter_scalar(
                    above, distance[i], total - distance[i], link.wavelength_m
                ),
            )
        for i in range(own_count):
            x = state.own_distance[i]
            above = state.own_bent[i] - tx_height - direct * x
            nu = max(nu, fresnel_parameter_scalar(above, x, total - x, link.wavelength_m))
    actual = bullington_loss_db_scalar(nu, total)

    # Smooth surface under this path: the radial's ground, the cell's own samples, the cell.
    if count > 0:
        last_distance, last_ground = distance[count - 1], state.ground[count - 1]
    else:
        last_distance, last_ground = 0.0, mast.ground_m
    ray_slope = (rx_height - tx_height) / total
    steepest = ground_slope
    for i in range(own_count - 1, -2, -1):
        if i >= 0:
            d, height = state.own_distance[i], state.own_ground[i]
            steepest = max(steepest, (height - tx_height) / d)
        else:
            d, height = total, cell_ground
        part1, part2 = fit_increments(d, height, last_distance, last_ground)
        v1 += part1
        v2 += part2
        last_distance, last_ground = d, height
    highest = -math.inf
    rx_obstruction = -math.inf
    if steepest > ray_slope:
        if count > 0:
            i = highest_above_slope(
                state.ground_hull, ground_hull_size, distance, state.ground, ray_slope
            )
            highest = state.ground[i] - tx_height - ray_slope * distance[i]
            i = tangent_from_right(
                state.ground_hull, ground_hull_size, distance, state.ground, total, rx_height
            )
            rx_obstruction = (state.ground[i] - rx_height) / (total - distance[i]) + ray_slope
        for i in range(own_count):
            above = state.own_ground[i] - tx_height - ray_slope * state.own_distance[i]
            highest = max(highest, above)
            rx_obstruction = max(rx_obstruction, above / (total - state.own_distance[i]))
    tx_surface, rx_surface = smooth_surface_ends(
        v1,
        v2,
        total,
        highest,
        steepest - ray_slope,
        rx_obstruction,
        mast.ground_m,
        cell_ground,
    )
    excess = excess_spherical_loss_db(
        distance,
        count,
        total,
        tx_height - tx_surface,
        rx_height - rx_surface,
        link.earth_radius_m,
        link.wavelength_m,
        link.frequency_mhz,
        link.vertical,
    )
    slant = math.sqrt(total * total + (rx_height - tx_height) ** 2)
    if slant < LEAST_DISTANCE_M:
        return math.nan, math.nan
    loss = free_space_loss_db_scalar(slant, link.frequency_mhz) + actual + excess
    return loss, max(tx_slope, direct)
