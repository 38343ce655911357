"""Terrain under a fan: samples of its radials, a cell's width apart."""

import math
from typing import Any

import numpy as np
from numpy.typing import NDArray

from planner.physics._jit import inlined, scalar
from planner.physics._lanes import (
    LANES,
    gather,
    lane_numbers,
    load,
    next_lane,
    prefetch,
    previous_lane,
    single,
    store,
    where,
    whole,
    wide,
)
from planner.sweep.course import Course, angle_between
from planner.sweep.state import (
    BLOCK,
    BULGE,
    BULGE_DRIFT,
    GROUND_SLOPE,
    GROUP,
    HOLES,
    LAST_GROUND,
    LID,
    LOWEST,
    MIDDLE_AT,
    MIDDLE_SLOPE,
    MOMENT,
    REGION,
    RX_ABOVE,
    SLOPE,
    SUM,
    SURFACE_AT,
    SURFACE_SLOPE,
    Link,
    Mast,
    Tables,
    Wedge,
)

f4 = np.float32
LINES_AHEAD = 12
FETCHED = 16  # numbers that come from memory at a time


@scalar
def start_fan(
    narrow: NDArray,
    slopes: NDArray,
    place: NDArray,
    surface: NDArray,
    first_radial: int,
    outer: int,
    wedge: Wedge,
    mast: Mast,
    link: Link,
    course: Course,
) -> None:
    """Set up the lanes of the radials ``first_radial`` and following.

    Radial r crosses the line at distance t (in cells) at sinh(r * angle) * t beside the mast: where
    they reach the ring's outer circle all radials are equally far apart along their line. Lanes
    beyond the last radial repeat it.
    """
    angle = angle_between(outer)
    unused = surface.size // LANES - 1  # a sample that no radial reaches
    for lane in range(2 * LANES):
        radial = first_radial + min(lane, course.last_lane)
        slopes[SLOPE + lane] = math.sinh(radial * angle)
    east, north = 0.0, 0.0
    for lane in range(LANES):
        slope = slopes[SLOPE + lane]
        if wedge.along_rows:
            east, north = wedge.forward * mast.cell_m, -slope * mast.cell_m
        else:
            east, north = slope * mast.cell_m, -wedge.forward * mast.cell_m
        stretch_m = math.sqrt(1.0 + slope * slope) * mast.cell_m / mast.scale
        drift = (
            0.5
            * (mast.scale_gradient_east_per_m * east + mast.scale_gradient_north_per_m * north)
            / mast.scale
        )
        narrow[BULGE + lane] = stretch_m * stretch_m / (2.0 * link.earth_radius_m)
        narrow[BULGE_DRIFT + lane] = 2.0 * drift
        narrow[LAST_GROUND + lane] = mast.ground_m - link.tx_height_m
        narrow[SURFACE_SLOPE + lane] = LOWEST
        narrow[GROUND_SLOPE + lane] = LOWEST
        narrow[SUM + lane] = 0.0
        narrow[MOMENT + lane] = 0.0
        narrow[HOLES + lane] = 0.0
        narrow[RX_ABOVE + lane] = link.receiver_height_m
        place[SURFACE_AT + lane] = unused
        narrow[MIDDLE_SLOPE + lane] = LOWEST
        place[MIDDLE_AT + lane] = unused
        surface[unused * LANES + lane] = LOWEST


@scalar
def look_ahead(
    slopes: NDArray, flat: NDArray, wedge: Wedge, line: int, t: float, course: Course
) -> None:
    """Have the raster under a line further on fetched from memory while this one is worked on.

    Along a row: the next line is far away in memory, where no processor expects it. Columns need
    none, since one fetch brings the following ones.
    """
    if wedge.along_rows:
        return
    line += LINES_AHEAD * wedge.forward
    if not 0 <= line <= wedge.last_of_all:
        return
    t += LINES_AHEAD
    first = max(int(wedge.side + slopes[SLOPE] * t), 0)
    last = min(int(wedge.side + slopes[SLOPE + course.last_lane] * t) + 1, wedge.lateral_last)
    start = line * wedge.line_stride
    for place in range(first, last, FETCHED):
        prefetch(flat, start + place)
    prefetch(flat, start + max(last, 0))


@inlined
def between(one: Any, other: Any, share: Any) -> Any:
    """What lies at a share of the way from one to the other, neither of them NaN."""
    return one * (1.0 - share) + other * share


@inlined
def crossing(flat: NDArray, start: int, stride: int, last: int, index: Any, share: Any) -> Any:
    """Raster values on a line, at a share of the way from ``index`` to the next place along it.

    ``flat`` is the raster in one dimension. A cell without weight may be a hole.
    """
    low = gather(flat, start, index * stride)
    high = gather(flat, start, min(index + 1, last) * stride)
    return where(share > 0.0, low + share * (high - low), low)


@inlined
def _sharpened(height: Any) -> Any:
    """Heights so far beyond their own that what lies between two radials is right on average.

    In proportion between two radials, terrain of curvature c lies lower than it is by
    c x (s - x) / 2 at x of s between them, c s^2 / 12 on average: ridges would be cut. c s^2 is the
    second difference from radial to radial.
    """
    lane = lane_numbers()
    inner = (lane > 0) & (lane < LANES - 1)
    difference = previous_lane(height) - 2.0 * height + next_lane(height)
    sharpened = height - difference * (1.0 / 12.0)
    # A hole beside says nothing.
    return where(inner & (sharpened == sharpened), sharpened, height)


@scalar
def take_sample(
    slopes: NDArray,
    ground: NDArray,
    surface: NDArray,
    flat_ground: NDArray,
    flat_obstacle: NDArray,
    wedge: Wedge,
    line: int,
    t: float,
    back: float,
    sample: int,
    link: Link,
) -> None:
    """Ground (and obstacles) of a sample ``back`` of a line's distance before a line, bilinear.

    ``back`` is at least 0 and less than 1. A line without weight may be a hole.
    """
    last = np.int32(wedge.lateral_last)
    stride = np.int32(wedge.lateral_stride)
    at = load(slopes, SLOPE) * (t - back) + wedge.side
    inside = (at >= 0.0) & (at < wedge.lateral_last)
    index = min(max(whole(at), np.int32(0)), last)
    share = where(inside, single(at - wide(index)), 0.0)
    start = line * wedge.line_stride
    start_before = min(max(line - wedge.forward, 0), wedge.last_of_all) * wedge.line_stride
    part = f4(back)
    height = crossing(flat_ground, start, stride, last, index, share)
    if back > 0.0:
        before = crossing(flat_ground, start_before, stride, last, index, share)
        height = height + part * (before - height)
    store(ground, sample * LANES, _sharpened(height) - f4(link.tx_height_m))
    if flat_obstacle.size > 0:
        here = crossing(flat_obstacle, start, stride, last, index, share)
        before = crossing(flat_obstacle, start_before, stride, last, index, share)
        store(surface, sample * LANES, here + part * (before - here))


@scalar
def include_sample(
    narrow: NDArray,
    ground: NDArray,
    surface: NDArray,
    sample: int,
    t: float,
    has_obstacles: bool,
    clearing_bulge_m: float,
) -> None:
    """Let a sample at distance t count: bend it, add it to the sums and to the ground's horizon.

    Obstacles within the mast's clearing do not count.
    """
    place = f4(sample + 1.0)
    height = load(ground, sample * LANES)
    drift = 1.0 - f4(t) * load(narrow, BULGE_DRIFT)
    bulge = f4(t * t) * (load(narrow, BULGE) * drift)
    slope = where(height == height, height, LOWEST) * f4(1.0 / (sample + 1.0))
    store(narrow, GROUND_SLOPE, max(slope, load(narrow, GROUND_SLOPE)))
    store(narrow, SUM, load(narrow, SUM) + height)
    store(narrow, MOMENT, load(narrow, MOMENT) + place * height)
    store(narrow, LAST_GROUND, height)
    store(narrow, HOLES, load(narrow, HOLES) + (height - height))
    bent = height - bulge
    bent = where(bent == bent, bent, LOWEST)
    store(ground, sample * LANES, bent)
    if has_obstacles:
        above = where(bulge >= f4(clearing_bulge_m), load(surface, sample * LANES), 0.0)
        raised = bent + above
        store(surface, sample * LANES, where(raised == raised, raised, LOWEST))


@scalar
def raise_horizon(
    narrow: NDArray, place: NDArray, surface: NDArray, lids: NDArray, at: Tables, sample: int
) -> None:
    """Let a sample's surface count for the mast's horizon and for the lids over the blocks."""
    slope = load(surface, sample * LANES) * f4(1.0 / (sample + 1.0))
    best = load(narrow, SURFACE_SLOPE)
    higher = slope > best
    store(narrow, SURFACE_SLOPE, where(higher, slope, best))
    store(place, SURFACE_AT, where(higher, np.int32(sample), load(place, SURFACE_AT)))
    slope = slope + next_lane(slope)  # twice the middle's
    best = load(narrow, MIDDLE_SLOPE)
    higher = slope > best
    store(narrow, MIDDLE_SLOPE, where(higher, slope, best))
    store(place, MIDDLE_AT, where(higher, np.int32(sample), load(place, MIDDLE_AT)))
    stop = sample + 1
    if stop % BLOCK == 0:
        block = stop // BLOCK - 1
        _put_lid_on_samples(surface, stop - BLOCK, lids, block)
        if (block + 1) % GROUP == 0:
            group = at.group_lids + LID * (block // GROUP)
            _put_lid_on_lids(lids, block + 1 - GROUP, GROUP, group)
        if (block + 1) % REGION == 0:
            region = at.region_lids + LID * (block // REGION)
            _put_lid_on_lids(lids, block + 1 - REGION, REGION, region)


@scalar
def _put_lid_on_samples(surface: NDArray, first: int, lids: NDArray, block: int) -> None:
    """The lid of a block: as steep as from its first to its last sample, and above them all."""
    start = load(surface, first * LANES)
    rise = (load(surface, (first + BLOCK - 1) * LANES) - start) * f4(1.0 / (BLOCK - 1.0))
    fallen = rise
    for i in range(1, BLOCK - 1):
        start = max(load(surface, (first + i) * LANES) - fallen, start)
        fallen = fallen + rise
    _store_lid(lids, LID * block, start, start + f4(BLOCK) * rise)


@scalar
def _put_lid_on_lids(lids: NDArray, first: int, blocks: int, out: int) -> None:
    """The lid over the lids of ``blocks`` blocks."""
    start = load(lids, LID * first)
    end = load(lids, LID * (first + blocks - 1) + LANES)
    rise = (end - start) * f4(1.0 / blocks)
    for n in range(blocks):
        near = load(lids, LID * (first + n)) - f4(n) * rise
        far = load(lids, LID * (first + n) + LANES) - f4(n + 1) * rise
        start = max(max(near, far), start)
    _store_lid(lids, out, start, start + f4(blocks) * rise)


@inlined
def _store_lid(lids: NDArray, out: int, start: Any, end: Any) -> None:
    store(lids, out, start)
    store(lids, out + LANES, end)
    store(lids, out + 2 * LANES, next_lane(start) - start)
    store(lids, out + 3 * LANES, next_lane(end) - end)


@inlined
def lid_of_cell(lids: NDArray, lid: int, share: Any) -> tuple[Any, Any]:
    """Heights of a lid over a cell's profile, over its first sample and the one after its last."""
    start = load(lids, lid) + load(lids, lid + 2 * LANES) * share
    end = load(lids, lid + LANES) + load(lids, lid + 3 * LANES) * share
    return start, end
