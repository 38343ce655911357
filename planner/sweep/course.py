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
    LANES,
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
    return math.ceil(math.asinh(1.0) * outer / SPACING)


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

    lanes: int
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
    """The course of one fan; cosh(r * SPACING / outer) is the length of radial r per line."""
    lanes = min(LANES, _last_radial(outer) - first_radial + 1)
    last_radial = first_radial + lanes - 1
    flattest = max(first_radial, -last_radial, 0) * SPACING / outer
    steepest = max(abs(first_radial), abs(last_radial)) * SPACING / outer
    # The scale changes little over a window; 1 % more than the radius is more than enough.
    in_range = link.radius_m * mast.scale * 1.01 / mast.cell_m + 1.0
    clearing_steps = 0.0
    if has_obstacles:
        clearing_steps = link.obstacle_clearing_m * mast.scale * 1.01 / mast.cell_m * 1.42 + 1.0
    spherical_cells = _spherical_from_m(mast, link) * mast.scale * 0.99 / mast.cell_m
    return Course(
        lanes,
        math.cosh((first_radial + 0.5 * (lanes - 1)) * SPACING / outer),
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
def new_fan(outer: int, has_obstacles: bool) -> Fan:
    """Working arrays for the fans of a ring."""
    size = (outer // BLOCK + 3) * BLOCK  # samples: one for each cell's width out to the circle
    blocks = size // BLOCK + 1
    bent_ground = np.empty((size, LANES), dtype=np.float32)
    bent_surface = bent_ground
    if has_obstacles:
        bent_surface = np.empty((size, LANES), dtype=np.float32)
    root_steepness = np.empty(size, dtype=np.float32)
    for i in range(size):
        root_steepness[i] = 1.0 / math.sqrt(i + 1.0)
    return Fan(
        np.empty(NARROW_ROWS * LANES, dtype=np.float32),
        np.empty(WIDE_ROWS * LANES, dtype=np.float64),
        np.empty(PLACES, dtype=np.int64),
        bent_ground,
        bent_surface,
        np.empty((2 * blocks, LANES), dtype=np.float32),
        np.empty((2 * (blocks // GROUP + 1), LANES), dtype=np.float32),
        np.empty((2 * (blocks // REGION + 1), LANES), dtype=np.float32),
        np.empty(blocks, dtype=np.float32),
        np.empty(blocks, dtype=np.float32),
        root_steepness,
        np.empty(BLOCK, dtype=np.float32),
        np.empty(BLOCK, dtype=np.float32),
        np.empty(1 + 2 * RECALLED, dtype=np.int64),
    )
