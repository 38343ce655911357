"""Path loss, angle of departure and clearance of the cells of one line under a fan."""

import math
from typing import Any

import numpy as np
from numpy.typing import NDArray

from planner.physics._jit import inlined, scalar
from planner.physics._lanes import any_lane, load, store, where
from planner.physics.bullington import bullington_loss_db_scalar, bullington_point_nu_scalar
from planner.physics.elementary import arctangent
from planner.physics.free_space import free_space_loss_db_scalar
from planner.physics.smooth_surface import fit_increments, smooth_surface_ends
from planner.physics.spherical_earth import clears_sphere_scalar
from planner.sweep.own_line import FREE
from planner.sweep.sampling_lines import between
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
    INTERVALS,
    LAST_GROUND,
    LEAST_DISTANCE_M,
    LOSS,
    MOMENT,
    NO_DATA,
    NU_SCALE,
    PER_METRE,
    RATIO,
    RX_ABOVE,
    SHARE_OF_NEXT,
    SPHERE,
    STATUS,
    SUM,
    TX_SLOPE,
    V1,
    V2,
    WANTED,
    Link,
    Mast,
    Wedge,
)

f4 = np.float32
DEGREES = 180.0 / math.pi


@scalar
def losses(narrow: NDArray, link: Link) -> None:
    """Path loss, angle and clearance of each lane's cell but for the spherical earth."""
    bend = f4(1.0 / (2.0 * link.earth_radius_m))
    distance = load(narrow, DISTANCE)
    rx_height = load(narrow, GROUND) + load(narrow, RX_ABOVE)
    per_metre = load(narrow, PER_METRE)
    highest, ray = load(narrow, TX_SLOPE), load(narrow, DIRECT)
    blocked = highest >= ray
    tx_slope = highest * per_metre
    rx_slope = load(narrow, BEST_TANGENT) * per_metre
    near_nu = load(narrow, BEST_NEAR) * load(narrow, NU_SCALE)
    edge_nu = bullington_point_nu_scalar(
        tx_slope + distance * bend,
        rx_slope - distance * bend,
        0.0,
        rx_height,
        distance,
        link.wavelength_m,
    )
    # Where a ray only just touches, rounding may leave the edge's height negative or NaN.
    edge_nu = max(edge_nu, 0.0)
    actual = bullington_loss_db_scalar(where(blocked, edge_nu, near_nu), distance)
    slant = math.sqrt(distance * distance + rx_height * rx_height)
    loss = free_space_loss_db_scalar(slant, link.frequency_mhz) + actual
    store(narrow, LOSS, where(slant >= LEAST_DISTANCE_M, loss, math.nan))
    elevation = arctangent(where(blocked, tx_slope, ray * per_metre))
    store(narrow, ELEVATION, elevation * DEGREES)
    store(narrow, RATIO, min(near_nu * (1.0 / FREE), 1.0))


@scalar
def may_meet_sphere(narrow: NDArray, samples: int, steps: float, mast: Mast, link: Link) -> bool:
    """Whether the spherical earth may add to some lane's loss; V1, V2 and SPHERE of each."""
    tx_ground = f4(mast.ground_m - link.tx_height_m)
    ground = load(narrow, GROUND)
    share = load(narrow, SHARE_OF_NEXT)
    last = _of_cell(narrow, LAST_GROUND, share)
    # Sums over the samples, a step apart, by parts: every height but the ends stands twice.
    v1 = 2.0 * _of_cell(narrow, SUM, share) + tx_ground - last
    v2 = 6.0 * _of_cell(narrow, MOMENT, share) + tx_ground - last * f4(3.0 * samples + 1.0)
    part1, part2 = fit_increments(f4(steps), ground, f4(samples), last)
    v1, v2 = v1 + part1, v2 + part2
    tx_surface, rx_surface = smooth_surface_ends(
        v1, v2, f4(steps), 0.0, 0.0, 0.0, tx_ground, ground
    )
    tx_effective = -tx_surface
    rx_effective = ground + load(narrow, RX_ABOVE) - rx_surface
    clears = clears_sphere_scalar(
        load(narrow, DISTANCE),
        tx_effective,
        rx_effective,
        link.earth_radius_m,
        link.wavelength_m,
    )
    wanted = (load(narrow, WANTED) > 0.0) & (load(narrow, CELL_HOLES) == 0.0)
    store(narrow, V1, v1)
    store(narrow, V2, v2)
    meets = wanted & ~clears
    store(narrow, SPHERE, where(meets, 1.0, 0.0))
    return any_lane(meets)


@inlined
def _of_cell(narrow: NDArray, row: int, share: Any) -> Any:
    """What both radials beside the cell know, where one may be NaN for a hole."""
    one, other = load(narrow, row), load(narrow, row + 1)
    return where(share <= 0.0, one, where(share >= 1.0, other, between(one, other, share)))


@scalar
def write_cells(
    narrow: NDArray,
    place: NDArray,
    wedge: Wedge,
    line: int,
    mast: Mast,
    flat_loss_db: NDArray,
    flat_elevation_deg: NDArray,
    flat_clearance_ratio: NDArray,
    flat_status: NDArray,
    cols: int,
) -> None:
    """Put the results of a line into the layers, which are in one dimension, ``cols`` to a row."""
    ground, holes, loss = load(narrow, GROUND), load(narrow, CELL_HOLES), load(narrow, LOSS)
    known = (ground == ground) & (loss == loss)
    status = where(known, np.int32(COMPUTED), np.int32(NO_DATA))
    crosses = (ground == ground) & (holes != 0.0)
    store(place, STATUS, where(crosses, np.int32(CROSSES_HOLE), status))
    known = known & (holes == 0.0)
    store(narrow, LOSS, where(known, loss, math.nan))
    store(narrow, ELEVATION, where(known, load(narrow, ELEVATION), math.nan))
    store(narrow, RATIO, where(known, load(narrow, RATIO), math.nan))
    start = (line - mast.row_start) * cols - mast.col_start
    stride = 1
    if wedge.along_rows:
        start = line - mast.col_start - mast.row_start * cols
        stride = cols
    for lane in range(INTERVALS):
        if narrow[WANTED + lane] > f4(0.0):
            at = start + place[CELL + lane] * stride
            flat_loss_db[at] = narrow[LOSS + lane]
            flat_elevation_deg[at] = narrow[ELEVATION + lane]
            flat_clearance_ratio[at] = narrow[RATIO + lane]
            flat_status[at] = place[STATUS + lane]
