"""Terrain under a fan: samples of its radials, a cell's width apart."""

import math

import numpy as np
from numpy.typing import NDArray

from planner.physics._jit import pasted, scalar
from planner.sweep.state import (
    BLOCK,
    BULGE,
    BULGE_DRIFT,
    CROSSING,
    EDGE,
    EDGE_STEP,
    FIXED,
    FRACTION,
    GROUND_SLOPE,
    GROUP,
    HOLES,
    INDEX,
    LAST_CROSSING,
    LAST_GROUND,
    LOWER,
    MOMENT,
    NEXT_INDEX,
    REGION,
    RX_ABOVE,
    SPACING,
    SUM,
    SURFACE_SLOPE,
    UPPER,
    Link,
    Mast,
    Wedge,
)

f4 = np.float32


@scalar
def start_fan(
    narrow: NDArray,
    place: NDArray,
    lanes: int,
    first_radial: int,
    outer: int,
    wedge: Wedge,
    mast: Mast,
    link: Link,
) -> None:
    """Set up the lanes of the radials ``first_radial`` and following.

    Radial r crosses the line at distance t (in cells) at sinh(r * SPACING / outer) * t beside the
    mast: where they reach the circle of radius ``outer`` cells all radials are SPACING cells apart
    along their line.
    """
    for edge in range(lanes + 1):
        slope = math.sinh((first_radial + edge - 0.5) * SPACING / outer)
        place[EDGE + edge] = math.floor((wedge.side + slope * wedge.first_t) * FIXED + 0.5)
        place[EDGE_STEP + edge] = math.floor(slope * FIXED + 0.5)
    east, north = 0.0, 0.0
    for lane in range(lanes):
        slope = math.sinh((first_radial + lane) * SPACING / outer)
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
        narrow[SURFACE_SLOPE + lane] = -np.inf
        narrow[GROUND_SLOPE + lane] = -np.inf
        narrow[SUM + lane] = 0.0
        narrow[MOMENT + lane] = 0.0
        narrow[HOLES + lane] = 0.0
        narrow[RX_ABOVE + lane] = link.receiver_height_m


@pasted
def crossing(
    narrow: NDArray,
    place: NDArray,
    lanes: int,
    flat: NDArray,
    wedge: Wedge,
    line: int,
    below: float,
    out: int,
) -> None:
    """Raster values less ``below`` at the places INDEX + FRACTION of a line, into ``out``.

    ``flat`` is the raster in one dimension. A cell without weight may be a hole.
    """
    start = line * wedge.line_stride
    stride = wedge.lateral_stride
    for lane in range(lanes):
        narrow[LOWER + lane] = flat[np.uint64(start + place[INDEX + lane] * stride)]
    for lane in range(lanes):
        narrow[UPPER + lane] = flat[np.uint64(start + place[NEXT_INDEX + lane] * stride)]
    base = f4(below)
    for lane in range(lanes):
        share = narrow[FRACTION + lane]
        low = narrow[LOWER + lane]
        between = low + share * (narrow[UPPER + lane] - low)
        narrow[out + lane] = (between if share > f4(0.0) else low) - base


@scalar
def take_sample(
    narrow: NDArray,
    place: NDArray,
    ground: NDArray,
    surface: NDArray,
    flat_ground: NDArray,
    flat_obstacle: NDArray,
    lanes: int,
    wedge: Wedge,
    line: int,
    back: float,
    sample: int,
    link: Link,
) -> None:
    """Ground (and obstacles) of a sample ``back`` of a line's distance before a line, bilinear.

    ``back`` is at least 0 and less than 1. A line without weight may be a hole.
    """
    last = wedge.lateral_last
    turned_back = int(back * FIXED)
    for lane in range(lanes):
        step = (place[EDGE_STEP + lane] + place[EDGE_STEP + lane + 1]) >> 1
        at = (place[EDGE + lane] + place[EDGE + lane + 1]) >> 1
        at -= ((step >> 8) * (turned_back >> 8)) >> 16
        i = at >> 32
        share = f4((at >> 1) & 0x7FFFFFFF) * f4(2.0**-31)
        inside = (i >= 0) & (i < last)
        place[INDEX + lane] = min(max(i, 0), last)
        place[NEXT_INDEX + lane] = min(max(i + 1, 0), last)
        narrow[FRACTION + lane] = share if inside else f4(0.0)
    line_before = min(max(line - wedge.forward, 0), wedge.last_of_all)
    part = f4(back)
    crossing(narrow, place, lanes, flat_ground, wedge, line, link.tx_height_m, CROSSING)
    if back > 0.0:
        crossing(
            narrow, place, lanes, flat_ground, wedge, line_before, link.tx_height_m, LAST_CROSSING
        )
        for lane in range(lanes):
            here = narrow[CROSSING + lane]
            ground[sample, lane] = here + part * (narrow[LAST_CROSSING + lane] - here)
    else:
        for lane in range(lanes):
            ground[sample, lane] = narrow[CROSSING + lane]
    if flat_obstacle.size > 0:
        crossing(narrow, place, lanes, flat_obstacle, wedge, line, 0.0, CROSSING)
        crossing(narrow, place, lanes, flat_obstacle, wedge, line_before, 0.0, LAST_CROSSING)
        for lane in range(lanes):
            here = narrow[CROSSING + lane]
            surface[sample, lane] = here + part * (narrow[LAST_CROSSING + lane] - here)


@scalar
def next_line(place: NDArray, lanes: int) -> None:
    """Move on: the lanes' edges shift."""
    for edge in range(lanes + 1):
        place[EDGE + edge] += place[EDGE_STEP + edge]


@scalar
def include_sample(
    narrow: NDArray,
    ground: NDArray,
    surface: NDArray,
    lanes: int,
    sample: int,
    t: float,
    has_obstacles: bool,
    clearing_bulge_m: float,
) -> None:
    """Bend the sample's ground and add it to what the smooth surface and the horizon need.

    Obstacles do not count where the earth's bulge is below ``clearing_bulge_m``: near the mast.
    """
    steps = f4(sample + 1.0)
    per_step = f4(1.0 / (sample + 1.0))
    t1 = f4(t)
    t2 = f4(t * t)
    for lane in range(lanes):
        height = ground[sample, lane]
        bulge = t2 * (narrow[BULGE + lane] * (f4(1.0) - t1 * narrow[BULGE_DRIFT + lane]))
        ground[sample, lane] = height - bulge
        narrow[GROUND_SLOPE + lane] = max(height * per_step, narrow[GROUND_SLOPE + lane])
        narrow[SUM + lane] += height
        narrow[MOMENT + lane] += steps * height
        narrow[LAST_GROUND + lane] = height
        narrow[HOLES + lane] += height - height
    if has_obstacles:
        least = f4(clearing_bulge_m)
        for lane in range(lanes):
            bulge = t2 * (narrow[BULGE + lane] * (f4(1.0) - t1 * narrow[BULGE_DRIFT + lane]))
            above = surface[sample, lane] if bulge >= least else f4(0.0)
            surface[sample, lane] = ground[sample, lane] + above


@scalar
def raise_horizon(
    narrow: NDArray,
    surface: NDArray,
    block_lid: NDArray,
    group_lid: NDArray,
    region_lid: NDArray,
    lanes: int,
    sample: int,
) -> None:
    """Let a sample's surface count for the mast's horizon and for the lids over the blocks."""
    per_step = f4(1.0 / (sample + 1.0))
    for lane in range(lanes):
        narrow[SURFACE_SLOPE + lane] = max(
            surface[sample, lane] * per_step, narrow[SURFACE_SLOPE + lane]
        )
    stop = sample + 1
    if stop % BLOCK == 0:
        block = stop // BLOCK - 1
        _put_lid_on_samples(surface, stop - BLOCK, block_lid, block, lanes)
        if (block + 1) % GROUP == 0:
            group = (block + 1) // GROUP - 1
            _put_lid_on_lids(block_lid, block + 1 - GROUP, GROUP, group_lid, group, lanes)
        if (block + 1) % REGION == 0:
            region = (block + 1) // REGION - 1
            _put_lid_on_lids(block_lid, block + 1 - REGION, REGION, region_lid, region, lanes)


@scalar
def _put_lid_on_samples(
    surface: NDArray, first: int, lids: NDArray, block: int, lanes: int
) -> None:
    """The lid of a block: as steep as from its first to its last sample, and above them all."""
    start, end = 2 * block, 2 * block + 1
    whole = f4(BLOCK)
    share = f4(1.0 / (BLOCK - 1.0))
    for lane in range(lanes):
        lids[start, lane] = surface[first, lane]
    for lane in range(lanes):
        rise = (surface[first + BLOCK - 1, lane] - surface[first, lane]) * share
        lids[end, lane] = rise
    for i in range(1, BLOCK - 1):
        along = f4(i)
        for lane in range(lanes):
            level = surface[first + i, lane] - along * lids[end, lane]
            lids[start, lane] = max(level, lids[start, lane])
    for lane in range(lanes):
        lids[end, lane] = lids[start, lane] + whole * lids[end, lane]


@scalar
def _put_lid_on_lids(
    lids: NDArray, first: int, blocks: int, out: NDArray, row: int, lanes: int
) -> None:
    """The lid over the lids of ``blocks`` blocks."""
    start, end = 2 * row, 2 * row + 1
    last = first + blocks - 1
    whole = f4(blocks)
    share = f4(1.0 / blocks)
    for lane in range(lanes):
        out[start, lane] = lids[2 * first, lane]
    for lane in range(lanes):
        out[end, lane] = (lids[2 * last + 1, lane] - lids[2 * first, lane]) * share
    for n in range(blocks):
        here, next_edge = f4(n), f4(n + 1)
        near, far = 2 * (first + n), 2 * (first + n) + 1
        for lane in range(lanes):
            rise = out[end, lane]
            level = max(lids[near, lane] - here * rise, lids[far, lane] - next_edge * rise)
            out[start, lane] = max(level, out[start, lane])
    for lane in range(lanes):
        out[end, lane] = out[start, lane] + whole * out[end, lane]
