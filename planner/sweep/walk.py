"""The walk of fans of radials that gives every cell in range its path loss.

Cells around the mast are split into four wedges by their longer axis, and each wedge into rings
that double in radius. In a ring, radials run from the mast to every cell of the ring's outer edge,
so they are half a cell to a cell apart where it has cells; a cell belongs to the radial between
whose edges it lies. Each cell is written once, by one radial, whatever the number of threads. The
cell's distance, its ground and the last samples before it are its own; only the terrain further
towards the mast is the radial's.
"""

import math

import numpy as np
from numba import prange
from numpy.typing import NDArray

from planner.physics._jit import parallel, scalar
from planner.sweep.cells import (
    count_cleared,
    losses,
    own_cells,
    own_lines,
    own_profile,
    start_search,
    write_cells,
)
from planner.sweep.curved_earth import excess_over_sphere_db
from planner.sweep.extremes import search
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
    LANES,
    LOSS,
    NARROW_ROWS,
    OWN_SAMPLES,
    PLACES,
    RECALLED,
    SPHERE,
    SUPER_BLOCKS,
    WIDE_ROWS,
    Fan,
    Layers,
    Link,
    Mast,
    Wedge,
)

EAST, WEST, NORTH, SOUTH = 0, 1, 2, 3
LEAST_RING = 64  # lines; the innermost ring reaches in to the mast


def fans(reach: int) -> NDArray[np.int64]:
    """The units of work: wedge, radials on each side of its axis, first radial, ring's inner edge.

    [fan, 4]; the ring's outer edge in lines is the number of radials on each side.
    """
    units = []
    outer = max(reach, 1)
    while outer > 0:
        inner = outer // 2 if outer > LEAST_RING else 0
        for wedge in (EAST, WEST, NORTH, SOUTH):
            for first in range(-outer, outer + 1, LANES):
                units.append((wedge, outer, first, inner))
        outer = inner
    return np.array(units, dtype=np.int64)


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
        mast.col_start if along_rows else mast.row_start,
        col_last if along_rows else row_last,
        mast.row_start if along_rows else mast.col_start,
        row_last if along_rows else col_last,
    )


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
    block_top, super_top = fan.block_top, fan.super_top
    steepness, weight, root = fan.edge_steepness, fan.edge_weight, fan.root_steepness
    recalled = fan.recalled
    path_loss, elevation = layers.path_loss_db, layers.departure_elevation_deg
    clearance, status = layers.fresnel_clearance_ratio, layers.status

    lanes = min(LANES, outer - first_radial + 1)
    start_fan(narrow, place, lanes, first_radial, outer, wedge, mast, link)
    recalled[0] = 0
    has_obstacles = obstacle.size > 0
    middle = min((first_radial + 0.5 * (lanes - 1)) / outer, 1.0)
    stretch = math.sqrt(1.0 + middle * middle)  # steps per line
    nearest = 1.0
    for lane in range(lanes):
        nearest = min(nearest, abs(first_radial + lane) / outer)
    least_stretch = math.sqrt(1.0 + nearest * nearest)
    bend = 1.0 / (2.0 * link.earth_radius_m)
    clearing_bulge = link.obstacle_clearing_m * link.obstacle_clearing_m * bend
    clearing_steps = 0.0
    if has_obstacles:  # no lane's sample further away than this lies within the clearing
        clearing_steps = link.obstacle_clearing_m * mast.scale * 1.01 / mast.cell_m * 1.42 + 1.0
    taken = 0
    included = 0
    risen = 0
    line = wedge.first_line
    last_t = 0.0
    t = wedge.first_t
    while wedge.line_low <= line <= wedge.line_high and t <= outer:
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
            raise_horizon(narrow, surface, block_top, super_top, lanes, risen)
            risen += 1
        if t > inner and own_cells(narrow, wide, place, lanes, t, wedge, mast, link.radius_m):
            own_lines(narrow, wide, place, lanes, t, ground, obstacle, wedge, line, mast, link)
            own_profile(narrow, wide, lanes, t, steps, has_obstacles, link)
            if far < samples:
                count_cleared(
                    narrow, wide, bent_ground, surface, root, lanes, far, samples, steps, link, True
                )
            start_search(narrow, wide, lanes, steps, link)
            if far < samples:
                count_cleared(
                    narrow,
                    wide,
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
                block_top,
                super_top,
                steepness,
                weight,
                root,
                recalled,
                lanes,
                far,
                steps,
            )
            if losses(narrow, wide, lanes, samples, steps, mast, link):
                for lane in range(lanes):
                    if wide[SPHERE + lane] > 0.0:
                        wide[LOSS + lane] += excess_over_sphere_db(
                            narrow,
                            wide,
                            bent_ground,
                            block_top,
                            lane,
                            far,
                            t,
                            steps,
                            mast,
                            link,
                        )
            write_cells(
                narrow,
                wide,
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
        cross_line(narrow, place, lanes, ground, obstacle, wedge, line, link)
        while (taken + 1.0) / stretch <= t:
            share = ((taken + 1.0) / stretch - last_t) / (t - last_t)
            take_sample(narrow, bent_ground, surface, lanes, taken, share, has_obstacles)
            taken += 1
        next_line(narrow, place, lanes)
        last_t = t
        t += 1.0
        line += wedge.forward


@parallel
def walk_fans(
    units: NDArray,
    ground: NDArray,
    obstacle: NDArray,
    mast: Mast,
    link: Link,
    layers: Layers,
) -> None:
    """Walk the given fans; see :func:`fans`."""
    for n in prange(units.shape[0]):
        outer = units[n, 1]
        size = (math.ceil(outer * math.sqrt(2.0)) // BLOCK + 2) * BLOCK
        blocks = size // BLOCK + 1
        bent_ground = np.empty((size, LANES), dtype=np.float32)
        bent_surface = bent_ground
        if obstacle.size > 0:
            bent_surface = np.empty((size, LANES), dtype=np.float32)
        fan = Fan(
            np.empty(NARROW_ROWS * LANES, dtype=np.float32),
            np.empty(WIDE_ROWS * LANES, dtype=np.float64),
            np.empty(PLACES, dtype=np.int64),
            bent_ground,
            bent_surface,
            np.empty((blocks, LANES), dtype=np.float32),
            np.empty((blocks // SUPER_BLOCKS + 1, LANES), dtype=np.float32),
            np.empty(blocks, dtype=np.float32),
            np.empty(blocks, dtype=np.float32),
            (1.0 / np.sqrt(np.arange(1.0, size + 1.0))).astype(np.float32),
            np.empty(1 + 2 * RECALLED, dtype=np.int64),
        )
        wedge = _wedge(units[n, 0], ground, mast, layers)
        _walk(fan, wedge, outer, units[n, 2], units[n, 3], ground, obstacle, mast, link, layers)
