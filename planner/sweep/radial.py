"""The walk along radials that gives every cell in range its path loss.

Cells around the mast are split into four wedges by their longer axis. In each wedge radials run
from the mast to every cell of a square's edge, one sample where a radial crosses each column (or
row). A cell belongs to the radial that passes it nearest, so each cell is written once, by one
radial, whatever the number of threads. The cell's own distance and its own ground height are
exact; only the terrain before it is the radial's.
"""

import math

import numpy as np
from numba import prange
from numpy.typing import NDArray

from planner.geodesy import chord_distance_m
from planner.physics._jit import parallel, scalar
from planner.physics.smooth_surface import fit_increments
from planner.sweep.cell import OWN_SAMPLES, cell_loss_and_slope, take_own_samples
from planner.sweep.hull import pushed
from planner.sweep.profile_extremes import BLOCK
from planner.sweep.state import COMPUTED, CROSSES_HOLE, NO_DATA, Link, Mast, State
from planner.terrain import bilinear

EAST, WEST, NORTH, SOUTH = 0, 1, 2, 3


@scalar
def _true_distance_m(mast: Mast, delta_row: float, delta_col: float) -> float:
    return chord_distance_m(
        delta_col * mast.cell_m,
        -delta_row * mast.cell_m,
        mast.scale,
        mast.scale_gradient_east_per_m,
        mast.scale_gradient_north_per_m,
    )


@scalar
def _walk(
    wedge: int,
    radial: int,
    reach: int,
    ground: NDArray,
    obstacle: NDArray,
    mast: Mast,
    link: Link,
    state: State,
    path_loss: NDArray,
    elevation: NDArray,
    status: NDArray,
) -> None:
    """Follow one radial outwards; give each cell that it owns its loss, angle and status."""
    rows, cols = ground.shape
    along_rows = wedge in (EAST, WEST)  # lateral position runs over rows
    forward = 1 if wedge in (EAST, SOUTH) else -1
    main = mast.col if along_rows else mast.row
    side = mast.row if along_rows else mast.col
    if along_rows:
        first_line, last_line = mast.col_start, mast.col_start + status.shape[1] - 1
        first_lane, last_lane = mast.row_start, mast.row_start + status.shape[0] - 1
    else:
        first_line, last_line = mast.row_start, mast.row_start + status.shape[0] - 1
        first_lane, last_lane = mast.col_start, mast.col_start + status.shape[1] - 1
    line = math.floor(main) + 1 if forward > 0 else math.ceil(main) - 1
    has_obstacles = obstacle.size > 0
    slope_across = radial / reach
    stretch = math.sqrt(1.0 + slope_across * slope_across)
    lag = 0
    if has_obstacles:
        lag = math.ceil(link.obstacle_clearing_m / mast.cell_m) - 1 - OWN_SAMPLES
        lag = max(lag, 0)
    bend = 1.0 / (2.0 * link.earth_radius_m)

    row_step = (slope_across if along_rows else forward) / stretch
    col_step = (forward if along_rows else slope_across) / stretch

    count = 0  # samples so far; sample i lies i + 1 cells from the mast
    surface_count = 0  # samples that count with obstacles
    hull_size = 0
    ground_hull_size = 0
    surface_slope = -math.inf
    ground_slope = -math.inf
    v1 = 0.0
    v2 = 0.0
    last_distance, last_ground = 0.0, mast.ground_m
    spoilt = False  # a hole lies behind us
    while first_line <= line <= last_line:
        t = abs(line - main)
        if (t * stretch - 1.0) * mast.cell_m > link.radius_m * mast.scale * 1.01:
            break
        # Samples up to half a cell before this line; the rest belongs to the cell itself.
        while not spoilt and count + 1 < t * stretch - OWN_SAMPLES - 0.5:
            delta_row = (count + 1) * row_step
            delta_col = (count + 1) * col_step
            row = min(max(mast.row + delta_row, 0.0), rows - 1.0)
            col = min(max(mast.col + delta_col, 0.0), cols - 1.0)
            height = bilinear(ground, row, col)
            if math.isnan(height):
                spoilt = True
                break
            d = _true_distance_m(mast, delta_row, delta_col)
            above = 0.0
            if has_obstacles and d >= link.obstacle_clearing_m:
                above = bilinear(obstacle, row, col)
            state.distance[count] = d
            state.ground[count] = height
            state.bent_ground[count] = height - d * d * bend
            state.bent[count] = state.bent_ground[count] + above
            ground_slope = max(ground_slope, (height - link.tx_height_m) / d)
            part1, part2 = fit_increments(d, height, last_distance, last_ground)
            v1 += part1
            v2 += part2
            last_distance, last_ground = d, height
            ground_hull_size = pushed(
                state.ground_hull, ground_hull_size, state.distance, state.ground, count
            )
            count += 1
            if count > lag:
                i = surface_count
                surface_slope = max(
                    surface_slope, (state.bent[i] - link.tx_height_m) / state.distance[i]
                )
                hull_size = pushed(state.hull, hull_size, state.distance, state.bent, i)
                block = i // BLOCK
                if i % BLOCK == 0:
                    state.block_top[block] = state.bent[i]
                else:
                    state.block_top[block] = max(state.block_top[block], state.bent[i])
                surface_count += 1
        # Cells of this line that lie nearer to this radial than to its neighbours.
        low = math.floor(side + (radial - 0.5) * t / reach) + 1
        high = math.floor(side + (radial + 0.5) * t / reach)
        for lane in range(max(low, first_lane), min(high, last_lane) + 1):
            across = abs(lane - side)
            if not (across <= t if along_rows else across < t):
                continue
            r, c = (lane, line) if along_rows else (line, lane)
            total = _true_distance_m(mast, r - mast.row, c - mast.col)
            if total > link.radius_m:
                continue
            cell_ground = ground[r, c]
            out = (r - mast.row_start, c - mast.col_start)
            if math.isnan(cell_ground):
                status[out] = NO_DATA
            elif spoilt:
                status[out] = CROSSES_HOLE
            else:
                own_count = take_own_samples(state, r, c, total, ground, obstacle, mast, link)
                if own_count < 0:
                    status[out] = CROSSES_HOLE
                    continue
                loss, slope = cell_loss_and_slope(
                    state,
                    count,
                    surface_count,
                    own_count,
                    hull_size,
                    ground_hull_size,
                    surface_slope,
                    ground_slope,
                    v1,
                    v2,
                    total,
                    cell_ground,
                    mast,
                    link,
                )
                path_loss[out] = loss
                elevation[out] = math.degrees(math.atan(slope))
                status[out] = NO_DATA if math.isnan(loss) else COMPUTED
        line += forward


@parallel
def sweep_radials(
    first: int,
    stop: int,
    reach: int,
    ground: NDArray,
    obstacle: NDArray,
    mast: Mast,
    link: Link,
    path_loss: NDArray,
    elevation: NDArray,
    status: NDArray,
) -> None:
    """Follow radials ``first`` to ``stop`` of the 4 · (2 · reach + 1) radials around the mast."""
    group = 16
    groups = (stop - first + group - 1) // group
    for g in prange(groups):
        size = 2 * reach + 4
        state = State(
            np.empty(size),
            np.empty(size),
            np.empty(size),
            np.empty(size),
            np.empty(size // BLOCK + 1),
            np.empty(size, dtype=np.int64),
            np.empty(size, dtype=np.int64),
            np.empty(OWN_SAMPLES),
            np.empty(OWN_SAMPLES),
            np.empty(OWN_SAMPLES),
        )
        for n in range(first + g * group, min(first + (g + 1) * group, stop)):
            wedge = n // (2 * reach + 1)
            radial = n % (2 * reach + 1) - reach
            _walk(
                wedge,
                radial,
                reach,
                ground,
                obstacle,
                mast,
                link,
                state,
                path_loss,
                elevation,
                status,
            )
