"""The extreme points of a profile that a diffraction loss depends on, found without a full scan.

The formulas are those of ``planner.physics``; what differs from the single path is only how the
points are found. Distances are true metres from the mast. Heights named ``bent`` have
distance² / (2 · earth radius) subtracted, which turns the curved earth into a flat one: lines stay
lines for both ends, so the horizon of the mast does not depend on where the receiver stands.
"""

import math

from numpy.typing import NDArray

from planner.physics._jit import scalar
from planner.physics.bullington import bullington_loss_db_scalar, bullington_point_nu_scalar
from planner.physics.fresnel import fresnel_parameter_scalar
from planner.physics.knife_edge import LOWEST_NU
from planner.physics.spherical_earth import (
    nearest_clearance_m_scalar,
    spherical_earth_loss_db_scalar,
)

BLOCK = 16  # samples that share one entry of the table of block maxima


@scalar
def closest_approach_nu(
    distance: NDArray,
    bent: NDArray,
    block_top: NDArray,
    count: int,
    total: float,
    tx_height: float,
    rx_bent: float,
    tx_gap: float,
    rx_gap: float,
    wavelength: float,
) -> float:
    """Largest nu of the samples under a free ray, or anything at or below -0.78 where none counts.

    ``tx_gap`` and ``rx_gap`` are the angles (as slopes) between the ray and the horizon at either
    end. A sample at distance x from an end lies at least gap · x below the ray, so only samples
    with x · d / (d - x) < (wavelength / 2) · (0.78 / gap)² can reach nu = -0.78; the windows from
    both ends overlap little or not at all. Blocks of samples inside are passed over where their
    highest point cannot matter.
    """
    reach = 0.5 * wavelength * LOWEST_NU * LOWEST_NU
    tx_reach = reach / (tx_gap * tx_gap)
    rx_reach = reach / (rx_gap * rx_gap)
    last_x = total * tx_reach / (total + tx_reach)
    first_x = total - total * rx_reach / (total + rx_reach)
    if first_x > last_x:
        return LOWEST_NU
    slope = (rx_bent - tx_height) / total
    # Least clearance² / (x · (d - x)); nu² is that times 2 d / wavelength.
    least = LOWEST_NU * LOWEST_NU * wavelength / (2.0 * total)
    i = first_at_or_after(distance, count, first_x)
    while i < count and distance[i] <= last_x:
        if i % BLOCK == 0 and i + BLOCK <= count:
            near = distance[i]
            far = distance[i + BLOCK - 1]
            ray = tx_height + slope * (near if slope > 0.0 else far)
            clear = ray - block_top[i // BLOCK]
            half = 0.5 * total
            middle = half if near < half < far else (near if near >= half else far)
            if clear > 0.0 and clear * clear >= least * middle * (total - middle):
                i += BLOCK
                continue
        x = distance[i]
        clear = tx_height + slope * x - bent[i]
        span = x * (total - x)
        if clear * clear < least * span:
            least = clear * clear / span
        i += 1
    return -math.sqrt(least * 2.0 * total / wavelength)


@scalar
def first_at_or_after(distance: NDArray, count: int, x: float) -> int:
    """Number of the first sample at or beyond distance ``x``; samples are nearly evenly spaced."""
    if count == 0 or x <= distance[0]:
        return 0
    step = (distance[count - 1] - distance[0]) / max(count - 1, 1)
    i = min(count, int((x - distance[0]) / step)) if step > 0.0 else 0
    while i > 0 and distance[i - 1] >= x:
        i -= 1
    while i < count and distance[i] < x:
        i += 1
    return i


@scalar
def smooth_bullington_loss_db(
    distance: NDArray,
    count: int,
    total: float,
    tx_height: float,
    rx_height: float,
    earth_radius: float,
    wavelength: float,
) -> float:
    """Bullington loss over the profile's samples with zero heights, for effective heights.

    The steepest sample from an end lies where the tangent touches the sphere, sqrt(2 a h) away;
    the sample with the largest nu lies at the point of nearest approach, whose cubic is that of
    the spherical-earth method. The two or three samples around each are compared.
    """
    if count == 0:
        return bullington_loss_db_scalar(-math.inf, total)
    tx_slope = -math.inf
    touch = first_at_or_after(distance, count, math.sqrt(2.0 * earth_radius * tx_height))
    for i in range(max(touch - 2, 0), min(touch + 2, count)):
        x = distance[i]
        tx_slope = max(tx_slope, (total - x) / (2.0 * earth_radius) - tx_height / x)
    if tx_slope < (rx_height - tx_height) / total:
        nearest, _ = nearest_clearance_m_scalar(total, tx_height, rx_height, earth_radius)
        touch = first_at_or_after(distance, count, nearest)
        nu = -math.inf
        for i in range(max(touch - 2, 0), min(touch + 2, count)):
            x = distance[i]
            rest = total - x
            ray = (tx_height * rest + rx_height * x) / total
            above = x * rest / (2.0 * earth_radius) - ray
            nu = max(nu, fresnel_parameter_scalar(above, x, rest, wavelength))
    else:
        rx_slope = -math.inf
        touch = first_at_or_after(
            distance, count, total - math.sqrt(2.0 * earth_radius * rx_height)
        )
        for i in range(max(touch - 2, 0), min(touch + 2, count)):
            x = distance[i]
            rx_slope = max(rx_slope, x / (2.0 * earth_radius) - rx_height / (total - x))
        nu = bullington_point_nu_scalar(tx_slope, rx_slope, tx_height, rx_height, total, wavelength)
    return bullington_loss_db_scalar(nu, total)


@scalar
def excess_spherical_loss_db(
    distance: NDArray,
    count: int,
    total: float,
    tx_effective: float,
    rx_effective: float,
    earth_radius: float,
    wavelength: float,
    frequency_mhz: float,
    vertical: bool,
) -> float:
    """What the smooth sphere adds beyond Bullington's smooth profile, 0 or more."""
    spherical = spherical_earth_loss_db_scalar(
        total,
        tx_effective,
        rx_effective,
        earth_radius,
        wavelength,
        frequency_mhz,
        vertical,
        0.0,
    )
    if spherical <= 0.0:
        return 0.0
    smooth = smooth_bullington_loss_db(
        distance, count, total, tx_effective, rx_effective, earth_radius, wavelength
    )
    return max(spherical - smooth, 0.0)
