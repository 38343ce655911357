"""What the smooth spherical earth adds to the loss of cells, where it may add something."""

import math
from typing import Any

import numpy as np
from numpy.typing import NDArray

from planner.physics._jit import inlined, scalar
from planner.physics._lanes import LANES, any_lane, load, store, where
from planner.physics.bullington import bullington_loss_db_scalar, bullington_point_nu_scalar
from planner.physics.fresnel import fresnel_parameter_scalar
from planner.physics.smooth_surface import smooth_surface_ends
from planner.physics.spherical_earth import (
    clears_sphere_scalar,
    nearest_clearance_m_scalar,
    spherical_earth_loss_db_scalar,
)
from planner.sweep.sampling_lines import between
from planner.sweep.state import (
    BLOCK,
    BULGE,
    BULGE_DRIFT,
    CELL_GROUND_SLOPE,
    DISTANCE,
    GROUND,
    GROUP,
    LOSS,
    LOWEST,
    OBSTRUCTION,
    OBSTRUCTION_SLOPE,
    OWN_BENT,
    OWN_SAMPLES,
    OWN_SHARE,
    REGION,
    RX_ABOVE,
    SHARE_OF_NEXT,
    SPHERE,
    V1,
    V2,
    Link,
    Mast,
    Tables,
)

f4 = np.float32


@inlined
def smooth_bullington_loss_db(
    total: Any,
    spacing: Any,
    tx_height: Any,
    rx_height: Any,
    earth_radius: float,
    wavelength: float,
) -> Any:
    """Bullington loss over a profile of zero heights, sampled ``spacing`` apart. [dB]

    The steepest point from an end lies where the tangent touches the sphere, sqrt(2 a h) away; the
    one with the largest nu at the point of nearest approach. Both maxima are so flat that the
    samples beside them are as good as they.
    """
    double_radius = 2.0 * earth_radius
    x = min(math.sqrt(tx_height * double_radius), total - spacing)
    tx_slope = (total - x) / double_radius - tx_height / x
    clear = tx_slope < (rx_height - tx_height) / total
    near, _ = nearest_clearance_m_scalar(total, tx_height, rx_height, earth_radius)
    near = min(max(near, spacing), total - spacing)
    near_rest = total - near
    ray = (tx_height * near_rest + rx_height * near) / total
    near_nu = fresnel_parameter_scalar(
        near * near_rest / double_radius - ray, near, near_rest, wavelength
    )
    rest = min(math.sqrt(rx_height * double_radius), total - spacing)
    rx_slope = (total - rest) / double_radius - rx_height / rest
    edge_nu = bullington_point_nu_scalar(
        tx_slope, rx_slope, tx_height, rx_height, total, wavelength
    )
    nu = where(clear, near_nu, edge_nu)
    # A path of one step has no point between its ends.
    return bullington_loss_db_scalar(where(total <= spacing, LOWEST, nu), total)


@inlined
def _above_ray(height: Any, bulge: Any, drift: Any, ray: Any, step: Any) -> Any:
    """How high bare ground without curvature rises above the rays, from its bent height."""
    return height + bulge * (1.0 - drift * step) * (step * step) - ray * step


@scalar
def _look_at(
    narrow: NDArray,
    ground: NDArray,
    low: int,
    high: int,
    bulge: Any,
    drift: Any,
    ray: Any,
    steps: float,
) -> None:
    """Let the samples ``low`` up to ``high`` count for OBSTRUCTION and OBSTRUCTION_SLOPE."""
    share = load(narrow, SHARE_OF_NEXT)
    highest, steepest = load(narrow, OBSTRUCTION), load(narrow, OBSTRUCTION_SLOPE)
    for i in range(low, high):
        height = between(load(ground, i * LANES), load(ground, i * LANES + 1), share)
        above = _above_ray(height, bulge, drift, ray, f4(i + 1.0))
        highest = max(above, highest)
        steepest = max(above * f4(1.0 / (steps - (i + 1.0))), steepest)
    store(narrow, OBSTRUCTION, highest)
    store(narrow, OBSTRUCTION_SLOPE, steepest)


@inlined
def _may_rise(
    narrow: NDArray,
    lids: NDArray,
    lid: int,
    first_step: float,
    last_step: float,
    bulge: Any,
    drift: Any,
    ray: Any,
    steps: float,
) -> bool:
    """Whether ground under a lid may count.

    The bulge bends upwards, so what lies between the lid's ends, not bent, is below their line.
    """
    share = load(narrow, SHARE_OF_NEXT)
    start = between(load(lids, lid), load(lids, lid + 1), share)
    end = between(load(lids, lid + LANES), load(lids, lid + LANES + 1), share)
    start = _above_ray(start, bulge, drift, ray, f4(first_step))
    end = _above_ray(end, bulge, drift, ray, f4(last_step))
    slope = max(start * f4(1.0 / (steps - first_step)), end * f4(1.0 / (steps - last_step)))
    highest, steepest = load(narrow, OBSTRUCTION), load(narrow, OBSTRUCTION_SLOPE)
    return any_lane((max(start, end) > highest) | (slope > steepest))


@scalar
def _find_obstruction(
    narrow: NDArray,
    ground: NDArray,
    lids: NDArray,
    at: Tables,
    samples: int,
    far: int,
    t: float,
    steps: float,
    link: Link,
) -> None:
    """How high bare ground without curvature rises above the ray, and its steepest slope from the
    receiver less the ray's, per step; 0 where nothing does, infinite where it is not asked for.

    Blocks are passed over where their lids can raise neither.
    """
    rx_height = load(narrow, GROUND) + load(narrow, RX_ABOVE)
    ray = rx_height * f4(1.0 / steps)
    wanted = (load(narrow, SPHERE) > 0.0) & (load(narrow, CELL_GROUND_SLOPE) > ray)
    store(narrow, OBSTRUCTION, where(wanted, 0.0, math.inf))
    store(narrow, OBSTRUCTION_SLOPE, where(wanted, 0.0, math.inf))
    if not any_lane(wanted):
        return
    per_line = f4(t / steps)
    bulge = load(narrow, BULGE) * (per_line * per_line)
    drift = load(narrow, BULGE_DRIFT) * per_line
    bend = f4(1.0 / (2.0 * link.earth_radius_m))
    distance = load(narrow, DISTANCE)
    highest, steepest = load(narrow, OBSTRUCTION), load(narrow, OBSTRUCTION_SLOPE)
    for q in range(OWN_SAMPLES):
        part = load(narrow, OWN_SHARE + q * LANES)
        x = distance * (1.0 - part)
        above = load(narrow, OWN_BENT + q * LANES) + x * x * bend - rx_height * (1.0 - part)
        highest = max(above, highest)
        steepest = max(above / (part * f4(steps)), steepest)
    store(narrow, OBSTRUCTION, highest)
    store(narrow, OBSTRUCTION_SLOPE, steepest)
    blocks = far // BLOCK
    _look_at(narrow, ground, blocks * BLOCK, samples, bulge, drift, ray, steps)
    block = 0
    while block < blocks:
        first = block * BLOCK + 1.0
        if block % REGION == 0 and block + REGION <= blocks:
            lid = at.region_lids + 2 * LANES * (block // REGION)
            last = first + REGION * BLOCK
            if not _may_rise(narrow, lids, lid, first, last, bulge, drift, ray, steps):
                block += REGION
                continue
        if block % GROUP == 0 and block + GROUP <= blocks:
            lid = at.group_lids + 2 * LANES * (block // GROUP)
            last = first + GROUP * BLOCK
            if not _may_rise(narrow, lids, lid, first, last, bulge, drift, ray, steps):
                block += GROUP
                continue
        lid = 2 * LANES * block
        if _may_rise(narrow, lids, lid, first, first + BLOCK, bulge, drift, ray, steps):
            _look_at(narrow, ground, block * BLOCK, (block + 1) * BLOCK, bulge, drift, ray, steps)
        block += 1


@scalar
def add_excess_over_sphere(
    narrow: NDArray,
    ground: NDArray,
    lids: NDArray,
    at: Tables,
    samples: int,
    far: int,
    t: float,
    steps: float,
    mast: Mast,
    link: Link,
) -> None:
    """Add what the smooth sphere adds to the loss of the cells that SPHERE marks.

    That is what it takes beyond Bullington's smooth profile, 0 or more.
    """
    _find_obstruction(narrow, ground, lids, at, samples, far, t, steps, link)
    cell_ground = load(narrow, GROUND)
    rx_height = cell_ground + load(narrow, RX_ABOVE)
    highest = load(narrow, OBSTRUCTION)
    tx_surface, rx_surface = smooth_surface_ends(
        load(narrow, V1),
        load(narrow, V2),
        f4(steps),
        where(highest < math.inf, highest, 0.0),
        load(narrow, CELL_GROUND_SLOPE) - rx_height * f4(1.0 / steps),
        load(narrow, OBSTRUCTION_SLOPE),
        f4(mast.ground_m - link.tx_height_m),
        cell_ground,
    )
    tx_effective, rx_effective = -tx_surface, rx_height - rx_surface
    total = load(narrow, DISTANCE)
    clears = clears_sphere_scalar(
        total, tx_effective, rx_effective, link.earth_radius_m, link.wavelength_m
    )
    counts = (load(narrow, SPHERE) > 0.0) & ~clears
    if not any_lane(counts):
        return
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
    counts = counts & (spherical > 0.0)
    if not any_lane(counts):
        return
    smooth = smooth_bullington_loss_db(
        total,
        total * f4(1.0 / steps),
        tx_effective,
        rx_effective,
        link.earth_radius_m,
        link.wavelength_m,
    )
    loss = load(narrow, LOSS)
    store(narrow, LOSS, where(counts, loss + max(spherical - smooth, 0.0), loss))
