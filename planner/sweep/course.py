"""Where fans of radials run: their rings and wedges, their lanes, their working arrays."""

import math
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from planner.physics._jit import scalar
from planner.physics.spherical_earth import clears_sphere_scalar
from planner.sweep.state import (
    BLOCK,
    GROUP,
    INTERVALS,
    LANES,
    LID,
    NARROW_ROWS,
    OWN_SAMPLES,
    PLACES,
    RECALLED,
    REGION,
    SPACING,
    WIDE_ROWS,
    Fan,
    Link,
    Mast,
    Tables,
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
            for first in range(-last, last, INTERVALS):
                units.append((wedge, outer, first, inner))
        outer = inner
    return units


@scalar
def _last_radial(outer: int) -> int:
    """Number of the first radial that passes beyond the wedge's diagonal."""
    return math.ceil(math.asinh(1.0) / angle_between(outer))


@scalar
def angle_between(outer: int) -> float:
    """Hyperbolic angle from radial to radial; radial r of a ring moves sinh(r * angle) a line.

    SPACING cells apart at its outer circle, and a little within, so that no two cells of the ring
    are ever between the same two radials.
    """
    return SPACING / (outer + 1.0)


@scalar
def wedge_of(number: int, ground: NDArray, mast: Mast, window_rows: int, window_cols: int) -> Wedge:
    """One of the four wedges around the mast, within the window."""
    rows, cols = ground.shape
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
        (cols if along_rows else rows) - 1,
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


class Course(NamedTuple):
    """What a fan's walk keeps in mind; t counts lines from the mast, steps count cells' widths."""

    last_lane: int  # of the radials that there are
    stretch: float  # steps per line, along the lane in the middle
    first_t: float  # lines with cells of the ring lie between these
    last_t: float
    clearing_bulge_m: float  # bulge of the earth where the clearing around the mast ends
    clearing_steps: float  # no sample of any lane further from a cell lies within its clearing
    spherical_t: float  # up to there the spherical earth adds nothing to a receiver of the link


@scalar
def course_of(
    outer: int, first_radial: int, inner: int, has_obstacles: bool, mast: Mast, link: Link
) -> Course:
    """The course of one fan; radial r is cosh(r * angle) long per line."""
    last_lane = min(INTERVALS, _last_radial(outer) - first_radial)
    last_radial = first_radial + last_lane
    angle = angle_between(outer)
    flattest = max(first_radial, -last_radial, 0) * angle
    steepest = max(abs(first_radial), abs(last_radial)) * angle
    # The scale changes little over a window; 1 % more than the radius is more than enough.
    in_range = link.radius_m * mast.scale * 1.01 / mast.cell_m + 1.0
    clearing_steps = 0.0
    if has_obstacles:
        clearing_steps = link.obstacle_clearing_m * mast.scale * 1.01 / mast.cell_m * 1.42 + 1.0
    spherical_cells = _spherical_from_m(mast, link) * mast.scale * 0.99 / mast.cell_m
    return Course(
        last_lane,
        math.cosh((first_radial + 0.5 * last_lane) * angle),
        inner / math.cosh(steepest) - 1.0,
        min(outer / math.cosh(flattest) + 1.0, in_range / math.cosh(flattest)),
        link.obstacle_clearing_m * link.obstacle_clearing_m / (2.0 * link.earth_radius_m),
        clearing_steps,
        spherical_cells / math.sqrt(2.0),
    )


@scalar
def samples_before(steps: float, has_obstacles: bool, clearing_steps: float) -> tuple[int, int]:
    """How many of the radial's samples lie before a cell's own, and beyond its clearing."""
    samples = max(math.ceil(steps - OWN_SAMPLES - 1.5), 0)
    if not has_obstacles:
        return samples, samples
    return samples, min(samples, max(math.ceil(steps - clearing_steps - 1.0), 0))


@scalar
def _most_samples(outer: int) -> int:
    """As many samples as a radial of a ring may have, in whole blocks and a vector more."""
    return (outer // BLOCK + 3) * BLOCK + LANES


@scalar
def tables_of(outer: int) -> Tables:
    """Where in the fans of a ring things begin."""
    samples = _most_samples(outer)
    blocks = samples // BLOCK + LANES  # a vector more, here too
    group_lids = LID * blocks
    region_lids = group_lids + LID * (blocks // GROUP + 1)
    return Tables(group_lids, region_lids, samples, samples + blocks, samples + 2 * blocks)


@scalar
def new_fan(outer: int, has_obstacles: bool) -> Fan:
    """Working arrays for the fans of a ring."""
    at = tables_of(outer)
    samples = _most_samples(outer)
    blocks = at.edge_inverse - at.edge_root
    ground = np.empty(LANES * samples, dtype=np.float32)
    surface = ground
    if has_obstacles:
        surface = np.empty(LANES * samples, dtype=np.float32)
    lids = np.empty(at.region_lids + LID * (blocks // REGION + 1), dtype=np.float32)
    tables = np.empty(at.last_steps + 1, dtype=np.float32)
    for i in range(samples):
        tables[i] = 1.0 / math.sqrt(i + 1.0)
    tables[at.last_steps] = -math.inf
    return Fan(
        np.zeros(NARROW_ROWS * LANES, dtype=np.float32),
        np.zeros(WIDE_ROWS * LANES, dtype=np.float64),
        np.zeros(PLACES, dtype=np.int32),
        ground,
        surface,
        lids,
        tables,
        np.zeros(2 * (1 + 2 * RECALLED), dtype=np.int64),
    )
