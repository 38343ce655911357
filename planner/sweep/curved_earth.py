"""What the smooth spherical earth adds to the loss of one cell, where it may add something."""

import math

from numpy.typing import NDArray

from planner.physics._jit import scalar
from planner.physics.bullington import bullington_loss_db_scalar, bullington_point_nu_scalar
from planner.physics.fresnel import fresnel_parameter_scalar
from planner.physics.smooth_surface import smooth_surface_ends
from planner.physics.spherical_earth import (
    nearest_clearance_m_scalar,
    spherical_earth_loss_db_scalar,
)
from planner.sweep.state import (
    BLOCK,
    BULGE,
    BULGE_DRIFT,
    CELL_GROUND_SLOPE,
    DISTANCE,
    GROUND,
    LANES,
    OWN_BENT,
    OWN_SAMPLES,
    RX_ABOVE,
    RX_EFFECTIVE,
    SHARE,
    TX_EFFECTIVE,
    V1,
    V2,
    Link,
    Mast,
)


@scalar
def smooth_bullington_loss_db(
    total: float,
    spacing: float,
    tx_height: float,
    rx_height: float,
    earth_radius: float,
    wavelength: float,
) -> float:
    """Bullington loss over a profile of zero heights, sampled ``spacing`` apart. [dB]

    The steepest point from an end lies where the tangent touches the sphere, sqrt(2 a h) away; the
    one with the largest nu at the point of nearest approach. Both maxima are so flat that the
    samples beside them are as good as they.
    """
    if total <= spacing:
        return bullington_loss_db_scalar(-math.inf, total)
    x = min(math.sqrt(2.0 * earth_radius * tx_height), total - spacing)
    tx_slope = (total - x) / (2.0 * earth_radius) - tx_height / x
    if tx_slope < (rx_height - tx_height) / total:
        x, _ = nearest_clearance_m_scalar(total, tx_height, rx_height, earth_radius)
        x = min(max(x, spacing), total - spacing)
        rest = total - x
        ray = (tx_height * rest + rx_height * x) / total
        nu = fresnel_parameter_scalar(x * rest / (2.0 * earth_radius) - ray, x, rest, wavelength)
    else:
        rest = min(math.sqrt(2.0 * earth_radius * rx_height), total - spacing)
        rx_slope = (total - rest) / (2.0 * earth_radius) - rx_height / rest
        nu = bullington_point_nu_scalar(tx_slope, rx_slope, tx_height, rx_height, total, wavelength)
    return bullington_loss_db_scalar(nu, total)


@scalar
def obstruction(
    narrow: NDArray,
    ground: NDArray,
    block_lid: NDArray,
    lane: int,
    samples: int,
    far: int,
    t: float,
    steps: float,
    rx_height: float,
    link: Link,
) -> tuple[float, float]:
    """How high bare ground without curvature rises above the ray, and its steepest slope from the
    receiver less the ray's; per step. Both are -inf where nothing does.

    Blocks are passed over where their lid, not bent, can raise neither.
    """
    ray = rx_height / steps
    per_line = t / steps
    bulge = narrow[BULGE + lane] * per_line * per_line
    drift = narrow[BULGE_DRIFT + lane] * per_line
    highest = 0.0
    steepest = 0.0
    i = 0
    while i < samples:
        if i % BLOCK == 0 and i + BLOCK <= far:
            first, last = i + 1.0, float(i + BLOCK)
            lid = max(block_lid[2 * (i // BLOCK), lane], block_lid[2 * (i // BLOCK) + 1, lane])
            bound = lid + last * last * bulge * (1.0 + abs(drift) * last)
            bound -= min(ray * first, ray * last)
            if bound <= highest and bound <= steepest * (steps - last):
                i += BLOCK
                continue
        u = i + 1.0
        above = ground[i, lane] + u * u * bulge * (1.0 - u * drift) - ray * u
        highest = max(highest, above)
        steepest = max(steepest, above / (steps - u))
        i += 1
    bend = 1.0 / (2.0 * link.earth_radius_m)
    for q in range(OWN_SAMPLES):
        share = float(narrow[SHARE + q * LANES + lane])
        x = float(narrow[DISTANCE + lane]) * (1.0 - share)
        above = narrow[OWN_BENT + q * LANES + lane] + x * x * bend - rx_height * (1.0 - share)
        highest = max(highest, above)
        steepest = max(steepest, above / (steps * share))
    return highest, steepest


@scalar
def excess_over_sphere_db(
    narrow: NDArray,
    ground: NDArray,
    block_lid: NDArray,
    lane: int,
    samples: int,
    far: int,
    t: float,
    steps: float,
    mast: Mast,
    link: Link,
) -> float:
    """What the smooth sphere adds to a cell beyond Bullington's smooth profile, 0 or more. [dB]"""
    total = float(narrow[DISTANCE + lane])
    cell_ground = float(narrow[GROUND + lane])
    rx_height = cell_ground + float(narrow[RX_ABOVE + lane])
    tx_effective, rx_effective = (
        float(narrow[TX_EFFECTIVE + lane]),
        float(narrow[RX_EFFECTIVE + lane]),
    )
    tx_slope = narrow[CELL_GROUND_SLOPE + lane] - rx_height / steps
    if tx_slope > 0.0:
        highest, rx_slope = obstruction(
            narrow, ground, block_lid, lane, samples, far, t, steps, rx_height, link
        )
        tx_surface, rx_surface = smooth_surface_ends(
            float(narrow[V1 + lane]),
            float(narrow[V2 + lane]),
            steps,
            highest,
            tx_slope,
            rx_slope,
            mast.ground_m - link.tx_height_m,
            cell_ground,
        )
        tx_effective, rx_effective = -tx_surface, rx_height - rx_surface
    spherical = spherical_earth_loss_db_scalar(
        total,
        tx_effective,
        rx_effective,
        link.earth_radius_m,
        link.wavelength_m,
        link.frequency_mhz,
        link.vertical,
        0.0,
    )
    if spherical <= 0.0:
        return 0.0
    smooth = smooth_bullington_loss_db(
        total,
        total / steps,
        tx_effective,
        rx_effective,
        link.earth_radius_m,
        link.wavelength_m,
    )
    return max(spherical - smooth, 0.0)
