"""The walk that finds for every cell the lowest receiver height at which its best sector serves it.

The fans of the path field are walked once. On each line all lanes search at the same time, each at
a height of its own. Heights are a ladder of steps; a lane keeps a stack of stretches of it that may
hold the lowest step that passes, the lowest stretch on top. It computes the loss at the top end of
that stretch. Raising a receiver over a fixed profile never raises the diffraction loss of the
profile (each of Bullington's slopes and clearances only improves), so that loss, with the shortest
free-space path and the best gain within the stretch, bounds what any height in it can reach: a
stretch that cannot pass is dropped, else halved, until a single step is computed in full. The
result is the lowest step that passes, even where a higher one fails again.
"""

import math
from typing import Any, NamedTuple

import numpy as np
from numpy.typing import NDArray

from planner.antenna.lookup import vector_gain_dbi
from planner.coverage.sight import MOSTLY_FREE_RATIO
from planner.physics._jit import scalar
from planner.physics._lanes import LANES, borrowed
from planner.physics.elementary import log10
from planner.physics.link import eirp_dbm_scalar, received_signal_dbm_scalar
from planner.sweep.cells import losses, may_meet_sphere
from planner.sweep.course import course_of, new_fan, samples_before, tables_of, wedge_of
from planner.sweep.curved_earth import add_excess_over_sphere
from planner.sweep.own_line import count_cleared, own_cells, own_profile, own_rays
from planner.sweep.sampling_lines import start_fan
from planner.sweep.stages import find_extremes, include_samples, sample_line
from planner.sweep.state import (
    ACROSS,
    CELL,
    CELL_HOLES,
    DIRECT,
    DISTANCE,
    GROUND,
    INTERVALS,
    LOSS,
    PER_METRE,
    RATIO,
    RX_ABOVE,
    SPHERE,
    TX_SLOPE,
    WANTED,
    Fan,
    Link,
    Mast,
    Tables,
    Wedge,
)

f4 = np.float32

DEEPEST = 12  # stretches on a lane's stack: one more than halvings of 1,024 steps
CLOSE_SLOPES = f4(0.005)  # within them (0.3 degrees) a gain hardly bends
GAIN_BEND_DB = f4(1.0)  # a generous bound of by how much it does
ROUNDING = f4(0.01)  # decibels, or radii of the first Fresnel zone
_TINY_LEVEL = f4(1e-6)


class Aim(NamedTuple):
    """The sectors of one mast, as for :func:`planner.coverage.kernels.add_mast`."""

    levels: NDArray[np.uint32]
    first: NDArray[np.int64]
    nodes_per_row: NDArray[np.int32]
    azimuth_places: NDArray[np.uint32]
    elevation_places: NDArray[np.uint32]
    mounted: NDArray[np.float32]
    boresight: NDArray[np.float32]
    budget: NDArray[np.float32]
    bend: NDArray[np.float32]  # arc-to-chord turn, radians per metre east and per metre north
    peak_db: float  # the best any sector has to spare at its peak, before path loss


class Ladder(NamedTuple):
    """The heights that are tried, and what was found, in steps: 0 means that none passes."""

    step_m: float
    steps: int
    served: NDArray[np.uint16]  # of the window; untouched where no path is known
    served_and_free: NDArray[np.uint16]


@scalar
def _to_spare_db(
    slope: float,
    east_m: float,
    north_m: float,
    levels: NDArray,
    first: NDArray,
    nodes_per_row: NDArray,
    azimuth_places: NDArray,
    elevation_places: NDArray,
    mounted: NDArray,
    boresight: NDArray,
    budget: NDArray,
    bend: NDArray,
) -> float:
    """The most that any sector has above its threshold, before path loss, in a direction."""
    cosine: Any = max(f4(1.0) / np.sqrt(f4(1.0) + slope * slope), _TINY_LEVEL)
    up = slope * cosine
    level = cosine / np.sqrt(east_m * east_m + north_m * north_m)
    turn = bend[0] * east_m + bend[1] * north_m
    north = level * (north_m - turn * east_m)
    east = level * (east_m + turn * north_m)
    most: Any = f4(-np.inf)
    for sector in range(mounted.shape[0]):
        gain = vector_gain_dbi(
            levels[first[sector] : first[sector + 1]],
            nodes_per_row[sector],
            azimuth_places[sector],
            elevation_places[sector],
            mounted[sector, 0],
            mounted[sector, 1],
            mounted[sector, 2],
            north * boresight[sector, 0] + east * boresight[sector, 1],
            east * boresight[sector, 0] - north * boresight[sector, 1],
            up,
        )
        signal = received_signal_dbm_scalar(
            eirp_dbm_scalar(budget[sector, 0], budget[sector, 1], gain),
            f4(0.0),
            budget[sector, 2],
            budget[sector, 3],
        )
        most = max(most, signal - budget[sector, 4])
    return most


@scalar
def _shortest_gain_db(low_rise: float, high_rise: float, distance: float) -> float:
    """By how much free-space loss at the nearest of the heights lies below that at the highest."""
    nearest: Any = min(abs(low_rise), abs(high_rise))
    if low_rise < f4(0.0) < high_rise:
        nearest = f4(0.0)
    square = distance * distance
    return 10.0 * log10((square + high_rise * high_rise) / (square + nearest * nearest))


@scalar
def walk_heights(
    wedge_number: int,
    outer: int,
    first_radial: int,
    inner: int,
    ground: NDArray,
    obstacle: NDArray,
    mast: Mast,
    link: Link,
    aim: Aim,
    ladder: Ladder,
) -> None:
    """Find the needed heights of one fan's cells, see :func:`planner.sweep.course.fans`."""
    fan = new_fan(outer, obstacle.size > 0)
    wedge = wedge_of(wedge_number, ground, mast, *ladder.served.shape)
    at = tables_of(outer)
    _walk(fan, at, wedge, outer, first_radial, inner, ground, obstacle, mast, link, aim, ladder)


@scalar
def _walk(
    fan: Fan,
    at: Tables,
    wedge: Wedge,
    outer: int,
    first_radial: int,
    inner: int,
    ground: NDArray,
    obstacle: NDArray,
    mast: Mast,
    link: Link,
    aim: Aim,
    ladder: Ladder,
) -> None:
    has_obstacles = obstacle.size > 0
    narrow, slopes, place = borrowed(fan.narrow), borrowed(fan.wide), borrowed(fan.place)
    bent_ground, surface = borrowed(fan.ground), borrowed(fan.surface)
    lids, tables = borrowed(fan.lids), borrowed(fan.tables)
    recalled = borrowed(fan.recalled)
    flat_ground = borrowed(ground.reshape(ground.size))
    flat_obstacle = borrowed(obstacle.reshape(obstacle.size))
    levels, first, nodes_per_row = aim.levels, aim.first, aim.nodes_per_row
    azimuth_places, elevation_places = aim.azimuth_places, aim.elevation_places
    mounted, boresight, budget, bend = aim.mounted, aim.boresight, aim.budget, aim.bend
    served, served_and_free = ladder.served, ladder.served_and_free
    low = np.zeros((LANES, DEEPEST), dtype=np.int64)
    high = np.zeros((LANES, DEEPEST), dtype=np.int64)
    depth = np.zeros(LANES, dtype=np.int64)
    free = np.zeros(LANES, dtype=np.bool_)  # whether 60 % of the Fresnel zone is asked for as well
    step = f4(ladder.step_m)

    course = course_of(outer, first_radial, inner, has_obstacles, mast, link)
    start_fan(narrow, slopes, place, surface, first_radial, outer, wedge, mast, link, course)
    taken, included, risen = 0, 0, 0
    line = wedge.first_line
    t = wedge.first_t
    while wedge.line_low <= line <= wedge.line_high and t <= course.last_t:
        steps = t * course.stretch
        samples, far = samples_before(steps, has_obstacles, course.clearing_steps)
        include_samples(
            narrow,
            place,
            bent_ground,
            surface,
            lids,
            at,
            course,
            included,
            samples,
            risen,
            far,
            has_obstacles,
        )
        included, risen = max(included, samples), max(risen, far)
        if t > course.first_t and own_cells(
            narrow, slopes, place, t, wedge, mast, inner, outer, link.radius_m
        ):
            own_profile(
                narrow,
                slopes,
                place,
                surface,
                flat_ground,
                flat_obstacle,
                t,
                steps,
                wedge,
                line,
                mast,
                link,
            )
            if far < samples:
                count_cleared(narrow, bent_ground, surface, tables, far, samples, steps, link, True)
            active = 0
            for lane in range(INTERVALS):
                known = narrow[CELL_HOLES + lane] == f4(0.0)
                known = known and not math.isnan(narrow[GROUND + lane])
                wanted = known and narrow[WANTED + lane] > f4(0.0)
                narrow[WANTED + lane] = f4(1.0) if wanted else f4(0.0)
                depth[lane] = 0
                if wanted:
                    low[lane, 0], high[lane, 0] = 1, ladder.steps
                    depth[lane] = 1
                    free[lane] = False
                    _put(served, place[CELL + lane], line, wedge, mast, 0)
                    _put(served_and_free, place[CELL + lane], line, wedge, mast, 0)
                    active += 1
            while active > 0:
                for lane in range(INTERVALS):
                    if depth[lane] > 0:
                        narrow[RX_ABOVE + lane] = step * f4(high[lane, depth[lane] - 1])
                own_rays(narrow, steps, link)
                find_extremes(
                    narrow,
                    bent_ground,
                    surface,
                    lids,
                    tables,
                    recalled,
                    at,
                    samples,
                    far,
                    steps,
                    link,
                )
                losses(narrow, link)
                if t > course.spherical_t and may_meet_sphere(narrow, samples, steps, mast, link):
                    for lane in range(INTERVALS):  # bounds do without it
                        top = depth[lane] - 1
                        if top < 0 or low[lane, top] < high[lane, top]:
                            narrow[SPHERE + lane] = f4(0.0)
                    add_excess_over_sphere(
                        narrow,
                        bent_ground,
                        lids,
                        tables,
                        recalled,
                        at,
                        samples,
                        far,
                        t,
                        steps,
                        mast,
                        link,
                    )
                for lane in range(INTERVALS):
                    if depth[lane] == 0:
                        continue
                    top = depth[lane] - 1
                    bottom_step, top_step = low[lane, top], high[lane, top]
                    single = bottom_step == top_step
                    loss = narrow[LOSS + lane]
                    # A stretch is not dropped for what rounding may have done.
                    slack = f4(0.0) if single else ROUNDING
                    passes = not free[lane] or narrow[RATIO + lane] >= f4(MOSTLY_FREE_RATIO) - slack
                    distance = narrow[DISTANCE + lane]
                    if not single:
                        if math.isnan(loss):  # both antennas in one place at the top end
                            loss = f4(-np.inf)
                        low_height = narrow[GROUND + lane] + step * f4(bottom_step)
                        high_height = narrow[GROUND + lane] + step * f4(top_step)
                        loss -= _shortest_gain_db(low_height, high_height, distance)
                    passes = passes and f4(aim.peak_db) - loss >= -slack
                    if passes:
                        ahead = f4(wedge.forward * mast.cell_m * t)
                        across = f4(slopes[ACROSS + lane] * mast.cell_m)
                        east = ahead if wedge.along_rows else across
                        north = -across if wedge.along_rows else -ahead
                        per_metre = narrow[PER_METRE + lane]
                        horizon = narrow[TX_SLOPE + lane]
                        slope = max(horizon, narrow[DIRECT + lane]) * per_metre
                        low_end = slope
                        if not single:
                            low_end -= step * f4(top_step - bottom_step) / distance
                            low_end = max(low_end, horizon * per_metre)
                        spare = f4(aim.peak_db)
                        if slope - low_end <= CLOSE_SLOPES:
                            spare = f4(-np.inf)
                            for end in range(1 if single else 2):
                                toward = slope if end == 0 else low_end
                                spare = max(
                                    spare,
                                    _to_spare_db(
                                        toward,
                                        east,
                                        north,
                                        levels,
                                        first,
                                        nodes_per_row,
                                        azimuth_places,
                                        elevation_places,
                                        mounted,
                                        boresight,
                                        budget,
                                        bend,
                                    ),
                                )
                            if not single:
                                spare += GAIN_BEND_DB
                        passes = spare - loss >= -slack
                    if not passes:
                        depth[lane] -= 1
                    elif not single:
                        middle = (bottom_step + top_step) // 2
                        low[lane, top], high[lane, top] = middle + 1, top_step
                        low[lane, top + 1], high[lane, top + 1] = bottom_step, middle
                        depth[lane] += 1
                    elif free[lane]:
                        _put(served_and_free, place[CELL + lane], line, wedge, mast, top_step)
                        depth[lane] = 0
                    else:
                        _put(served, place[CELL + lane], line, wedge, mast, top_step)
                        free[lane] = True  # and on, from this step
                        low[lane, 0], high[lane, 0] = top_step, ladder.steps
                        depth[lane] = 1
                    if depth[lane] == 0:
                        narrow[WANTED + lane] = f4(0.0)
                        active -= 1
        taken = sample_line(
            slopes,
            bent_ground,
            surface,
            flat_ground,
            flat_obstacle,
            wedge,
            line,
            link,
            course,
            taken,
            t,
        )
        t += 1.0
        line += wedge.forward


@scalar
def _put(
    out: NDArray[np.uint16], cell: int, line: int, wedge: Wedge, mast: Mast, value: int
) -> None:
    row = (cell if wedge.along_rows else line) - mast.row_start
    col = (line if wedge.along_rows else cell) - mast.col_start
    out[row, col] = value
