"""What the smooth spherical earth adds to the loss of cells, where it may add something."""

import math
from typing import Any

import numpy as np
from numpy.typing import NDArray

from planner.physics._jit import inlined, scalar
from planner.physics._lanes import any_lane, load, store, where
from planner.physics.bullington import bullington_loss_db_scalar, bullington_point_nu_scalar
from planner.physics.fresnel import fresnel_parameter_scalar
from planner.physics.smooth_surface import smooth_surface_ends
from planner.physics.spherical_earth import (
    clears_sphere_scalar,
    nearest_clearance_m_scalar,
    spherical_earth_loss_db_scalar,
)
from planner.sweep.obstruction import start_obstruction
from planner.sweep.search import search_obstruction
from planner.sweep.state import (
    CELL_GROUND_SLOPE,
    DISTANCE,
    GROUND,
    LOSS,
    LOWEST,
    OBSTRUCTION,
    OBSTRUCTION_SLOPE,
    RX_ABOVE,
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


@scalar
def add_excess_over_sphere(
    narrow: NDArray,
    ground: NDArray,
    lids: NDArray,
    tables: NDArray,
    recalled: NDArray,
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
    if start_obstruction(narrow, t, steps, link):
        search_obstruction(narrow, ground, lids, tables, recalled, at, samples, far, steps)
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
