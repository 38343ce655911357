"""The walk of fans of radials that gives every cell in range its path loss.

Cells around the mast are split into four wedges by their longer axis, and each wedge into rings
that double in radius. In a ring, radials run from the mast to its outer circle, where they are a
cell apart, so they are half a cell to a cell apart where the ring has cells; a cell belongs to the
radial between whose edges it lies. Each cell is written once, by one radial, whatever the number of
threads. The cell's distance, its ground and the last samples before it are its own; only the
terrain further towards the mast is the radial's.
"""

import math

import numpy as np
from numpy.typing import NDArray

from planner.physics._jit import scalar
from planner.physics.spherical_earth import clears_sphere_scalar
from planner.sweep.cells import losses, may_meet_sphere, write_cells
from planner.sweep.curved_earth import excess_over_sphere_db
from planner.sweep.extremes import search
from planner.sweep.own_line import (
    count_cleared,
    own_cells,
    own_lines,
    own_profile,
    start_search,
)
from planner.sweep.sampling_lines import (
    cross_line,
    include_sample,
    next_line,
    raise_horizon,
    start_fan,
    take_sample,
)
from planner.sweep.state import (
    BLOCK,
    GROUP,
    LANES,
    LOSS,
    NARROW_ROWS,
    OWN_SAMPLES,
    PLACES,
    RECALLED,
    REGION,
    SPHERE,
    WIDE_ROWS,
    Fan,
    Layers,
    Link,
    Mast,
    Wedge,
)

EAST, WEST, NORTH, SOUTH = 0, 1, 2, 3
LEAST_RING = 64  # lines; the innermost ring reaches in to the mast


def fans(reach: int) -> list[tuple[int, int, int, int]]:
    """The units of work: wedge, ring's outer radius in cells, first radial, ring's inner radius."""
    units = []
    outer = max(reach, 1)
    while outer > 0:
        inner = outer // 2 if outer > LEAST_RING else 0
        last = _last_radial(outer)
        for wedge in (EAST, WEST, NORTH, SOUTH):
            for first in range(-last, last + 1, LANES):
                units.append((wedge, outer, first, inner))
        outer = inner
    return units


@scalar
def _last_radial(outer: int) -> int:
    """Number of the first radial that passes beyond the wedge's diagonal."""
    return math.ceil(math.asinh(1.0) * outer)


@scalar
def _wedge(number: int, ground: NDArray, mast: Mast, layers: Layers) -> Wedge:
    rows, cols = ground.shape
    window_rows, window_cols = layers.status.shape
    along_rows = number in (EAST, WEST)
    forward = 1 if number in (EAST, SOUTH) else -1
    main = mast.col if along_rows else mast.row
    first_line = math.floor(main) + 1 if forward > 0 else math.ceil(main) - 1
    row_last, col_last = mast.row_start + window_rows - 1, mast.col_start + window_cols - 1
    return Wedge(
        along_rows,
        forward,
        main,
        mast.row if along_rows else mast.col,
        first_line,
        abs(first_line - main),
        (rows if along_rows else cols) - 1,
        1 if along_rows else cols,
        cols if along_rows else 1,
        mast.col_start if along_rows else mast.row_start,
        col_last if along_rows else row_last,
        mast.row_start if along_rows else mast.col_start,
        row_last if along_rows else col_last,
    )


@scalar
def _spherical_from_m(mast: Mast, link: Link) -> float:
    """A distance up to which the spherical earth certainly adds nothing to any cell's loss. [m]

    Effective heights are at least the antennas' own.
    """
    low, high = 0.0, link.radius_m
    for _ in range(40):
        middle = 0.5 * (low + high)
        if clears_sphere_scalar(
            middle,
            link.tx_height_m - mast.ground_m,
            link.receiver_height_m,
            link.earth_radius_m,
            link.wavelength_m,
        ):
            low = middle
        else:
            high = middle
    return low


@scalar
def _walk(
    fan: Fan,
    wedge: Wedge,
    outer: int,
    first_radial: int,
    inner: int,
    ground: NDArray,
    obstacle: NDArray,
    mast: Mast,
    link: Link,
    layers: Layers,
) -> None:
    """Walk one fan outwards to the ring's outer edge and compute the ring's cells on the way."""
    # Unpacked once: every look into a tuple of arrays counts a reference, which costs in a loop.
    narrow, wide, place = fan.narrow, fan.wide, fan.place
    bent_ground, surface = fan.bent_ground, fan.bent_surface
    block_top, group_top, region_top = fan.block_top, fan.group_top, fan.region_top
    steepness, weight, root = fan.edge_steepness, fan.edge_weight, fan.root_steepness
    row_steepness, row_weight, recalled = fan.row_steepness, fan.row_weight, fan.recalled
    flat_surface = surface.reshape(surface.size)
    flat_ground, flat_obstacle = ground.reshape(ground.size), obstacle.reshape(obstacle.size)
    path_loss, elevation = layers.path_loss_db, layers.departure_elevation_deg
    clearance, status = layers.fresnel_clearance_ratio, layers.status

    lanes = min(LANES, _last_radial(outer) - first_radial + 1)
    start_fan(narrow, place, lanes, first_radial, outer, wedge, mast, link)
    recalled[0] = 0
    has_obstacles = obstacle.size > 0
    # cosh(r / outer) is the length of radial r per line: steps, for the one in the middle.
    stretch = math.cosh((first_radial + 0.5 * (lanes - 1)) / outer)
    flattest = max(first_radial, -(first_radial + lanes - 1), 0) / outer
    steepest = max(abs(first_radial), abs(first_radial + lanes - 1)) / outer
    last_line_t = outer / math.cosh(flattest) + 1.0
    first_line_t = inner / math.cosh(steepest) - 1.0
    least_stretch = math.cosh(flattest)
    bend = 1.0 / (2.0 * link.earth_radius_m)
    clearing_bulge = link.obstacle_clearing_m * link.obstacle_clearing_m * bend
    clearing_steps = 0.0
    if has_obstacles:  # no lane's sample further away than this lies within the clearing
        clearing_steps = link.obstacle_clearing_m * mast.scale * 1.01 / mast.cell_m * 1.42 + 1.0
    spherical_t = _spherical_from_m(mast, link) * mast.scale * 0.99 / mast.cell_m / math.sqrt(2.0)
    taken = 0
    included = 0
    risen = 0
    line = wedge.first_line
    last_t = 0.0
    t = wedge.first_t
    while wedge.line_low <= line <= wedge.line_high and t <= last_line_t:
        if (t * least_stretch - 1.0) * mast.cell_m > link.radius_m * mast.scale * 1.01:
            break
        steps = t * stretch
        samples = max(math.ceil(steps - OWN_SAMPLES - 1.5), 0)
        far = samples  # of them, those beyond the clearing around the receiver
        if has_obstacles:
            far = min(samples, max(math.ceil(steps - clearing_steps - 1.0), 0))
        while included < samples:
            at = (included + 1.0) / stretch
            include_sample(
                narrow, bent_ground, surface, lanes, included, at, has_obstacles, clearing_bulge
            )
            included += 1
        while risen < far:
            raise_horizon(narrow, surface, block_top, group_top, region_top, lanes, risen)
            risen += 1
        if t > first_line_t and own_cells(
            narrow, wide, place, lanes, t, wedge, mast, inner, outer, link.radius_m
        ):
            own_lines(
                narrow, wide, place, lanes, t, flat_ground, flat_obstacle, wedge, line, mast, link
            )
            own_profile(narrow, wide, lanes, t, steps, has_obstacles, link)
            if far < samples:
                count_cleared(
                    narrow, bent_ground, surface, root, lanes, far, samples, steps, link, True
                )
            start_search(narrow, lanes, steps)
            if far < samples:
                count_cleared(
                    narrow,
                    bent_ground,
                    surface,
                    root,
                    lanes,
                    far,
                    samples,
                    steps,
                    link,
                    False,
                )
            search(
                narrow,
                surface,
                flat_surface,
                block_top,
                group_top,
                region_top,
                steepness,
                weight,
                root,
                row_steepness,
                row_weight,
                recalled,
                lanes,
                far,
                steps,
            )
            losses(narrow, lanes, link)
            if t > spherical_t and may_meet_sphere(narrow, lanes, samples, steps, mast, link):
                for lane in range(lanes):
                    if narrow[SPHERE + lane] > 0.0:
                        narrow[LOSS + lane] += excess_over_sphere_db(
                            narrow, bent_ground, block_top, lane, far, t, steps, mast, link
                        )
            write_cells(
                narrow,
                place,
                lanes,
                wedge,
                line,
                mast,
                path_loss,
                elevation,
                clearance,
                status,
            )
        cross_line(narrow, place, lanes, flat_ground, flat_obstacle, wedge, line, link)
        while (taken + 1.0) / stretch <= t:
            share = ((taken + 1.0) / stretch - last_t) / (t - last_t)
            take_sample(narrow, bent_ground, surface, lanes, taken, share, has_obstacles)
            taken += 1
        next_line(narrow, place, lanes)
        last_t = t
        t += 1.0
        line += wedge.forward


@scalar
def walk_fan(
    wedge_number: int,
    outer: int,
    first_radial: int,
    inner: int,
    ground: NDArray,
    obstacle: NDArray,
    mast: Mast,
    link: Link,
    layers: Layers,
) -> None:
    """Compute the cells of one fan, see :func:`fans`. Fans may be walked in any order, at once."""
    size = (outer // BLOCK + 3) * BLOCK  # samples: one for each cell's width out to the circle
    blocks = size // BLOCK + 1
    bent_ground = np.empty((size, LANES), dtype=np.float32)
    bent_surface = bent_ground
    if obstacle.size > 0:
        bent_surface = np.empty((size, LANES), dtype=np.float32)
    root_steepness = np.empty(size, dtype=np.float32)
    for i in range(size):
        root_steepness[i] = 1.0 / math.sqrt(i + 1.0)
    fan = Fan(
        np.empty(NARROW_ROWS * LANES, dtype=np.float32),
        np.empty(WIDE_ROWS * LANES, dtype=np.float64),
        np.empty(PLACES, dtype=np.int64),
        bent_ground,
        bent_surface,
        np.empty((blocks, LANES), dtype=np.float32),
        np.empty((blocks // GROUP + 1, LANES), dtype=np.float32),
        np.empty((blocks // REGION + 1, LANES), dtype=np.float32),
        np.empty(blocks, dtype=np.float32),
        np.empty(blocks, dtype=np.float32),
        root_steepness,
        np.empty(BLOCK, dtype=np.float32),
        np.empty(BLOCK, dtype=np.float32),
        np.empty(1 + 2 * RECALLED, dtype=np.int64),
    )
    wedge = _wedge(wedge_number, ground, mast, layers)
    _walk(fan, wedge, outer, first_radial, inner, ground, obstacle, mast, link, layers)
