"""What is a cell's own under a fan: its place, its ground, the last samples before it."""

import math

import numpy as np
from numpy.typing import NDArray

from planner.geodesy import chord_distance_m
from planner.physics._jit import in_single_precision, pasted, scalar
from planner.sweep.sampling_lines import crossing
from planner.sweep.state import (
    ACROSS,
    BEST_NEAR,
    BEST_TANGENT,
    CELL,
    CELL_GROUND_SLOPE,
    CELL_HOLES,
    DIRECT,
    DISTANCE,
    EDGE,
    FRACTION,
    GROUND,
    GROUND_SLOPE,
    HOLES,
    INDEX,
    LANES,
    NEXT_INDEX,
    NU_SCALE,
    OWN_BENT,
    OWN_CROSSING,
    OWN_WOOD,
    PER_METRE,
    RX_ABOVE,
    RX_BENT,
    SAMPLE_SHARE,
    SHARE,
    SURFACE_SLOPE,
    TX_SLOPE,
    WANTED,
    Link,
    Mast,
    Wedge,
)

f4 = np.float32
_distance_m = in_single_precision(chord_distance_m)
FREE = -math.sqrt(2.0)  # nu where the first Fresnel zone is just free


@scalar
def own_cells(
    narrow: NDArray,
    wide: NDArray,
    place: NDArray,
    lanes: int,
    t: float,
    wedge: Wedge,
    mast: Mast,
    inner: int,
    outer: int,
    radius_m: float,
) -> bool:
    """Find the cell of each lane on the line at distance t; whether any has one in range.

    A lane has the cell between its edges, if there is one: lanes are at most a cell apart.
    """
    ahead_east = wedge.forward * mast.cell_m * t if wedge.along_rows else 0.0
    ahead_north = 0.0 if wedge.along_rows else -wedge.forward * mast.cell_m * t
    side_east = 0.0 if wedge.along_rows else mast.cell_m
    side_north = -mast.cell_m if wedge.along_rows else 0.0
    scale = f4(mast.scale)
    gradient_east = f4(mast.scale_gradient_east_per_m)
    gradient_north = f4(mast.scale_gradient_north_per_m)
    found = False
    for lane in range(lanes):
        cell = place[EDGE + lane + 1] >> 32
        across = cell - wedge.side
        distance = _distance_m(
            f4(ahead_east + across * side_east),
            f4(ahead_north + across * side_north),
            scale,
            gradient_east,
            gradient_north,
        )
        has_cell = cell != place[EDGE + lane] >> 32
        in_window = (cell >= wedge.lateral_low) & (cell <= wedge.lateral_high)
        # Cells on the diagonals belong to the wedges east and west.
        in_wedge = (abs(across) < t) | ((abs(across) == t) & wedge.along_rows)
        square = t * t + across * across
        in_ring = (square > inner * inner) & (square <= outer * outer)
        wanted = has_cell & in_window & in_wedge & in_ring & (distance <= radius_m)
        place[CELL + lane] = min(max(cell, 0), wedge.lateral_last)
        wide[ACROSS + lane] = across
        narrow[DISTANCE + lane] = distance
        narrow[WANTED + lane] = f4(1.0) if wanted else f4(0.0)
        found = found | wanted
    return found


@scalar
def own_lines(
    narrow: NDArray,
    wide: NDArray,
    place: NDArray,
    lanes: int,
    t: float,
    flat_ground: NDArray,
    flat_obstacle: NDArray,
    wedge: Wedge,
    line: int,
    mast: Mast,
    link: Link,
) -> None:
    """Ground (and obstacles) where the cells' own lines to the mast cross the lines before."""
    start = line * wedge.line_stride
    stride = wedge.lateral_stride
    for lane in range(lanes):
        height = flat_ground[np.uint64(start + place[CELL + lane] * stride)]
        narrow[OWN_CROSSING + lane] = height - f4(link.tx_height_m)
    if flat_obstacle.size > 0:
        for lane in range(lanes):
            narrow[OWN_WOOD + lane] = flat_obstacle[np.uint64(start + place[CELL + lane] * stride)]
    _own_line(narrow, wide, place, lanes, t, flat_ground, flat_obstacle, wedge, line, mast, link, 1)
    _own_line(narrow, wide, place, lanes, t, flat_ground, flat_obstacle, wedge, line, mast, link, 2)
    _own_line(narrow, wide, place, lanes, t, flat_ground, flat_obstacle, wedge, line, mast, link, 3)


@pasted
def _own_line(
    narrow: NDArray,
    wide: NDArray,
    place: NDArray,
    lanes: int,
    t: float,
    flat_ground: NDArray,
    flat_obstacle: NDArray,
    wedge: Wedge,
    line: int,
    mast: Mast,
    link: Link,
    back: int,
) -> None:
    """The same for the line ``back`` lines before."""
    if t - back <= 0.0:  # the mast stands there
        for lane in range(lanes):
            narrow[OWN_CROSSING + back * LANES + lane] = mast.ground_m - link.tx_height_m
            narrow[OWN_WOOD + back * LANES + lane] = 0.0
        return
    part = (t - back) / t
    last = float(wedge.lateral_last)
    for lane in range(lanes):
        at = min(max(wedge.side + part * wide[ACROSS + lane], 0.0), last)
        i = int(at)
        place[INDEX + lane] = i
        place[NEXT_INDEX + lane] = min(i + 1, wedge.lateral_last)
        narrow[FRACTION + lane] = f4(at - i)
    back_line = line - back * wedge.forward
    crossing(
        narrow,
        place,
        lanes,
        flat_ground,
        wedge,
        back_line,
        link.tx_height_m,
        OWN_CROSSING + back * LANES,
    )
    if flat_obstacle.size > 0:
        crossing(
            narrow, place, lanes, flat_obstacle, wedge, back_line, 0.0, OWN_WOOD + back * LANES
        )


@scalar
def own_profile(
    narrow: NDArray,
    wide: NDArray,
    lanes: int,
    t: float,
    steps: float,
    has_obstacles: bool,
    link: Link,
) -> None:
    """Each cell's own last samples, and the horizon seen from the mast on the way to it."""
    u = f4(steps)
    per_wave = f4(2.0 / link.wavelength_m)
    one = f4(1.0)
    square = f4(t * t)
    for lane in range(lanes):
        across = f4(wide[ACROSS + lane])
        length = np.sqrt(square + across * across) - f4(1e-3)
        whole = f4(np.int32(length))
        narrow[SAMPLE_SHARE + lane] = one / (whole + one)
    for lane in range(lanes):
        distance = narrow[DISTANCE + lane]
        inverse = one / distance
        narrow[PER_METRE + lane] = u * inverse
        narrow[NU_SCALE + lane] = u * np.sqrt(inverse * per_wave)
        narrow[GROUND + lane] = narrow[OWN_CROSSING + lane]
        narrow[TX_SLOPE + lane] = narrow[SURFACE_SLOPE + lane]
        narrow[CELL_GROUND_SLOPE + lane] = narrow[GROUND_SLOPE + lane]
        narrow[CELL_HOLES + lane] = narrow[HOLES + lane]
    _own_sample(narrow, lanes, t, steps, has_obstacles, link, 1)
    _own_sample(narrow, lanes, t, steps, has_obstacles, link, 2)
    _own_sample(narrow, lanes, t, steps, has_obstacles, link, 3)


@pasted
def _own_sample(
    narrow: NDArray,
    lanes: int,
    t: float,
    steps: float,
    has_obstacles: bool,
    link: Link,
    q: int,
) -> None:
    """The sample q steps before each cell."""
    bend = f4(1.0 / (2.0 * link.earth_radius_m))
    near = OWN_CROSSING + (q - 1) * LANES
    far = OWN_CROSSING + q * LANES
    near_wood = OWN_WOOD + (q - 1) * LANES
    far_wood = OWN_WOOD + q * LANES
    lowest = max(t - q, 0.0)
    # The sample lies t * (1 - share) - lowest above the lower line, of this line spacing.
    start = f4((t - lowest) / (t - (q - 1) - lowest))
    fall = f4(t / (t - (q - 1) - lowest))
    per_step = f4(1.0 / steps)
    clearing = f4(link.obstacle_clearing_m)
    one, none = f4(1.0), f4(0.0)
    lowest_possible = f4(-np.inf)
    for lane in range(lanes):
        distance = narrow[DISTANCE + lane]
        share = f4(q) * narrow[SAMPLE_SHARE + lane]
        exists = share < f4(1.0 - 1e-6)
        share = share if exists else f4(0.5)
        part = start - fall * share if exists else none
        height = narrow[far + lane] + part * (narrow[near + lane] - narrow[far + lane])
        x = distance * (one - share)
        surface = height
        if has_obstacles:
            wood = narrow[far_wood + lane] + part * (
                narrow[near_wood + lane] - narrow[far_wood + lane]
            )
            counts = (x >= clearing) & (distance * share >= clearing)
            surface = height + wood if counts else height
        bent = surface - x * x * bend if exists else lowest_possible
        slope_share = per_step / (one - share)
        slope = height * slope_share if exists else lowest_possible
        narrow[SHARE + (q - 1) * LANES + lane] = share
        narrow[OWN_BENT + (q - 1) * LANES + lane] = bent
        narrow[TX_SLOPE + lane] = max(bent * slope_share, narrow[TX_SLOPE + lane])
        narrow[CELL_GROUND_SLOPE + lane] = max(slope, narrow[CELL_GROUND_SLOPE + lane])
        narrow[CELL_HOLES + lane] += (height - height) if exists else none


@scalar
def own_rays(narrow: NDArray, lanes: int, steps: float, link: Link) -> None:
    """The ray to each cell's receiver, RX_ABOVE its ground."""
    bend = f4(1.0 / (2.0 * link.earth_radius_m))
    per_step = f4(1.0 / steps)
    for lane in range(lanes):
        distance = narrow[DISTANCE + lane]
        rx_bent = narrow[GROUND + lane] + narrow[RX_ABOVE + lane] - distance * distance * bend
        narrow[RX_BENT + lane] = rx_bent
        narrow[DIRECT + lane] = rx_bent * per_step


@scalar
def start_search(narrow: NDArray, lanes: int, steps: float) -> None:
    """First candidates: the own samples, and what is too far from mattering to be sought.

    Where the ray is free the tangent from the receiver is not needed; what is not wanted is
    infinite, so that nothing is better.
    """
    for lane in range(lanes):
        blocked = narrow[TX_SLOPE + lane] >= narrow[DIRECT + lane]
        wanted = (narrow[WANTED + lane] > f4(0.0)) & (narrow[CELL_HOLES + lane] == f4(0.0))
        least = f4(FREE) / narrow[NU_SCALE + lane]
        narrow[BEST_TANGENT + lane] = f4(-np.inf) if wanted & blocked else f4(np.inf)
        narrow[BEST_NEAR + lane] = least if wanted else f4(np.inf)
    _own_candidate(narrow, lanes, steps, 0)
    _own_candidate(narrow, lanes, steps, 1)
    _own_candidate(narrow, lanes, steps, 2)


@pasted
def _own_candidate(narrow: NDArray, lanes: int, steps: float, q: int) -> None:
    u = f4(steps)
    one = f4(1.0)
    for lane in range(lanes):
        share = narrow[SHARE + q * LANES + lane]
        height = narrow[OWN_BENT + q * LANES + lane]
        tangent = (height - narrow[RX_BENT + lane]) / (u * share)
        place = u * (one - share)
        near = (height - narrow[DIRECT + lane] * place) / np.sqrt(place * u * share)
        narrow[BEST_TANGENT + lane] = max(tangent, narrow[BEST_TANGENT + lane])
        narrow[BEST_NEAR + lane] = max(near, narrow[BEST_NEAR + lane])


@scalar
def count_cleared(
    narrow: NDArray,
    ground: NDArray,
    surface: NDArray,
    root: NDArray,
    lanes: int,
    low: int,
    high: int,
    steps: float,
    link: Link,
    horizon: bool,
) -> None:
    """Let the samples ``low`` up to ``high`` count, with obstacles only beyond the clearing.

    With ``horizon`` for the horizon seen from the mast, else for what the search seeks.
    """
    for i in range(low, high):
        k = steps - (i + 1.0)
        place = f4(i + 1.0)
        steepness = f4(1.0 / k)
        weight = root[i] * f4(math.sqrt(steepness))
        share = k / steps
        for lane in range(lanes):
            beyond = narrow[DISTANCE + lane] * share >= link.obstacle_clearing_m
            height = surface[i, lane] if beyond else ground[i, lane]
            if horizon:
                narrow[TX_SLOPE + lane] = max(height / place, narrow[TX_SLOPE + lane])
            else:
                tangent = (height - narrow[RX_BENT + lane]) * steepness
                near = (height - narrow[DIRECT + lane] * place) * weight
                narrow[BEST_TANGENT + lane] = max(tangent, narrow[BEST_TANGENT + lane])
                narrow[BEST_NEAR + lane] = max(near, narrow[BEST_NEAR + lane])
