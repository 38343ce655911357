"""What is a cell's own under a fan: its place, its ground, the last samples before it."""

import math
from typing import Any

import numpy as np
from numpy.typing import NDArray

from planner.geodesy import chord_distance_m
from planner.physics._jit import inlined, scalar
from planner.physics._lanes import (
    LANES,
    any_lane,
    gather,
    lane_numbers,
    load,
    single,
    store,
    where,
    whole,
)
from planner.sweep.sampling_lines import between, crossing
from planner.sweep.state import (
    ACROSS,
    BEST_NEAR,
    BEST_TANGENT,
    CELL,
    CELL_GROUND_SLOPE,
    CELL_HOLES,
    DIRECT,
    DISTANCE,
    GROUND,
    GROUND_SLOPE,
    HOLES,
    LOWEST,
    MIDDLE_AT,
    NU_SCALE,
    OWN_BENT,
    OWN_SAMPLES,
    OWN_SHARE,
    PER_METRE,
    RX_ABOVE,
    RX_BENT,
    SHARE_OF_NEXT,
    SLOPE,
    SURFACE_AT,
    TX_SLOPE,
    WANTED,
    Link,
    Mast,
    Wedge,
)

f4 = np.float32
FREE = -math.sqrt(2.0)  # nu where the first Fresnel zone is just free


@scalar
def own_cells(
    narrow: NDArray,
    slopes: NDArray,
    place: NDArray,
    t: float,
    wedge: Wedge,
    mast: Mast,
    inner: int,
    outer: int,
    radius_m: float,
) -> bool:
    """Find the cell after each radial on the line at distance t; whether any is in range.

    A cell belongs to the radial at or before it and the next: radials are at most a cell apart.
    """
    ahead_east = wedge.forward * mast.cell_m * t if wedge.along_rows else 0.0
    ahead_north = 0.0 if wedge.along_rows else -wedge.forward * mast.cell_m * t
    side_east = 0.0 if wedge.along_rows else mast.cell_m
    side_north = -mast.cell_m if wedge.along_rows else 0.0
    here = load(slopes, SLOPE) * t + wedge.side
    there = load(slopes, SLOPE + 1) * t + wedge.side
    number = math.floor(there)
    has_cell = number > math.floor(here)
    across = number - wedge.side
    narrow_across = single(across)
    distance = chord_distance_m(
        narrow_across * side_east + ahead_east,
        narrow_across * side_north + ahead_north,
        mast.scale,
        mast.scale_gradient_east_per_m,
        mast.scale_gradient_north_per_m,
    )
    in_window = (number >= wedge.lateral_low) & (number <= wedge.lateral_high)
    # Cells on the diagonals belong to the wedges east and west.
    aside = abs(across)
    in_wedge = aside <= t if wedge.along_rows else aside < t
    square = across * across + t * t
    in_ring = (square > inner * inner) & (square <= outer * outer)
    wanted = has_cell & in_window & in_wedge & in_ring & (distance <= radius_m)
    cell = min(max(whole(number), np.int32(0)), np.int32(wedge.lateral_last))
    store(place, CELL, cell)
    store(slopes, ACROSS, across)
    share = where(has_cell, single((number - here) / (there - here)), 0.0)
    # A radial behind a hole says nothing: the cell takes what the nearer one knows, if that does.
    nearer_next = share > 0.5
    here_holes, there_holes = load(narrow, HOLES), load(narrow, HOLES + 1)
    either = (here_holes != here_holes) | (there_holes != there_holes)
    store(narrow, CELL_HOLES, where(nearer_next, there_holes, here_holes))
    store(narrow, SHARE_OF_NEXT, where(either, where(nearer_next, 1.0, 0.0), share))
    store(narrow, DISTANCE, distance)
    store(narrow, WANTED, where(wanted, 1.0, 0.0))
    return any_lane(wanted)


@scalar
def own_profile(
    narrow: NDArray,
    slopes: NDArray,
    place: NDArray,
    flat_surface: NDArray,
    flat_ground: NDArray,
    flat_obstacle: NDArray,
    t: float,
    steps: float,
    wedge: Wedge,
    line: int,
    mast: Mast,
    link: Link,
) -> None:
    """Each cell's ground, its own last samples, and the horizon seen from the mast towards it."""
    across = single(load(slopes, ACROSS))
    length = math.sqrt(across * across + f4(t * t)) - 1e-3
    per_sample = 1.0 / (single(whole(length)) + 1.0)  # spacing of the cell's exact samples
    distance = load(narrow, DISTANCE)
    inverse = 1.0 / distance
    store(narrow, PER_METRE, inverse * f4(steps))
    store(narrow, NU_SCALE, math.sqrt(inverse * f4(2.0 / link.wavelength_m)) * f4(steps))
    share = load(narrow, SHARE_OF_NEXT)
    store(
        narrow,
        CELL_GROUND_SLOPE,
        between(load(narrow, GROUND_SLOPE), load(narrow, GROUND_SLOPE + 1), share),
    )
    store(narrow, TX_SLOPE, _horizon(place, flat_surface, share))
    cell = load(place, CELL)
    stride = np.int32(wedge.lateral_stride)
    ground = gather(flat_ground, line * wedge.line_stride, cell * stride) - f4(link.tx_height_m)
    store(narrow, GROUND, ground)
    has_obstacles = flat_obstacle.size > 0
    wood = ground * 0.0
    if has_obstacles:
        wood = gather(flat_obstacle, line * wedge.line_stride, cell * stride)
    bend = f4(1.0 / (2.0 * link.earth_radius_m))
    clearing = f4(link.obstacle_clearing_m)
    for q in range(1, OWN_SAMPLES + 1):
        # Sample q lies between the q-th line before the cell's and the one after that.
        far_ground, far_wood = ground * 0.0, wood
        back_t = max(t - q, 0.0)
        if back_t > 0.0:
            far_ground = _own_crossing(flat_ground, across, cell, t, line, q, wedge)
            far_ground = far_ground - f4(link.tx_height_m)
            if has_obstacles:
                far_wood = _own_crossing(flat_obstacle, across, cell, t, line, q, wedge)
        else:  # the mast stands there
            far_ground = ground * 0.0 + f4(mast.ground_m - link.tx_height_m)
            far_wood = far_ground * 0.0
        part = per_sample * f4(q)
        exists = part < f4(1.0 - 1e-6)
        part = where(exists, part, 0.5)
        near_t = t - (q - 1)
        along = f4((t - back_t) / (near_t - back_t)) - part * f4(t / (near_t - back_t))
        along = where(exists, along, 0.0)
        height = far_ground + along * (ground - far_ground)
        x = distance * (1.0 - part)
        surface = height
        if has_obstacles:
            counts = (x >= clearing) & (distance * part >= clearing)
            surface = where(counts, height + far_wood + along * (wood - far_wood), height)
        bent = where(exists, surface - x * x * bend, LOWEST)
        per_step = f4(1.0 / steps) / (1.0 - part)
        slope = where(exists, height * per_step, LOWEST)
        store(narrow, OWN_SHARE + (q - 1) * LANES, part)
        store(narrow, OWN_BENT + (q - 1) * LANES, bent)
        store(narrow, TX_SLOPE, max(bent * per_step, load(narrow, TX_SLOPE)))
        store(narrow, CELL_GROUND_SLOPE, max(slope, load(narrow, CELL_GROUND_SLOPE)))
        hole = where(exists, height - height, 0.0)
        store(narrow, CELL_HOLES, load(narrow, CELL_HOLES) + hole)
        ground, wood = far_ground, far_wood


@inlined
def _own_crossing(
    flat: NDArray, across: Any, cell: Any, t: float, line: int, back: int, wedge: Wedge
) -> Any:
    """Raster values where the cells' own lines to the mast cross the line ``back`` lines before."""
    aside = across * f4(-back / t)  # from the cell, at most ``back``
    number = whole(math.floor(aside))
    share = aside - single(number)
    last = np.int32(wedge.lateral_last)
    index = cell + number
    inside = (index >= np.int32(0)) & (index < last)
    index = min(max(index, np.int32(0)), last)
    start = (line - back * wedge.forward) * wedge.line_stride
    stride = np.int32(wedge.lateral_stride)
    return crossing(flat, start, stride, last, index, where(inside, share, 0.0))


@inlined
def _horizon(place: NDArray, flat_surface: NDArray, share: Any) -> Any:
    """Steepest slope from the mast on the way to the cells, short of their own samples.

    The terrain there lies in proportion between two radials. Looked at are the places where it is
    steepest on either of them and halfway between.
    """
    lane = lane_numbers()
    steepest = share * 0.0 + LOWEST
    for at in (load(place, SURFACE_AT), load(place, SURFACE_AT + 1), load(place, MIDDLE_AT)):
        first = at * np.int32(LANES) + lane
        height = between(gather(flat_surface, 0, first), gather(flat_surface, 1, first), share)
        steepest = max(height / (single(at) + 1.0), steepest)
    return steepest


@scalar
def own_rays(narrow: NDArray, steps: float, link: Link) -> None:
    """The ray to each cell's receiver, RX_ABOVE its ground."""
    distance = load(narrow, DISTANCE)
    bulge = distance * distance * f4(1.0 / (2.0 * link.earth_radius_m))
    rx_bent = load(narrow, GROUND) + load(narrow, RX_ABOVE) - bulge
    store(narrow, RX_BENT, rx_bent)
    store(narrow, DIRECT, rx_bent * f4(1.0 / steps))


@scalar
def start_search(narrow: NDArray, steps: float) -> None:
    """First candidates: the own samples, and what is too far from mattering to be sought.

    Where the ray is free the tangent from the receiver is not needed; what is not wanted is
    infinite, so that nothing is better.
    """
    direct = load(narrow, DIRECT)
    rx = load(narrow, RX_BENT)
    blocked = load(narrow, TX_SLOPE) >= direct
    wanted = (load(narrow, WANTED) > 0.0) & (load(narrow, CELL_HOLES) == 0.0)
    best_tangent = where(wanted & blocked, LOWEST, math.inf)
    best_near = where(wanted, f4(FREE) / load(narrow, NU_SCALE), math.inf)
    for q in range(OWN_SAMPLES):
        share = load(narrow, OWN_SHARE + q * LANES)
        height = load(narrow, OWN_BENT + q * LANES)
        left = share * f4(steps)
        place = f4(steps) - left
        best_tangent = max((height - rx) / left, best_tangent)
        best_near = max((height - direct * place) / math.sqrt(place * left), best_near)
    store(narrow, BEST_TANGENT, best_tangent)
    store(narrow, BEST_NEAR, best_near)


@scalar
def count_cleared(
    narrow: NDArray,
    ground: NDArray,
    surface: NDArray,
    tables: NDArray,
    low: int,
    high: int,
    steps: float,
    link: Link,
    horizon: bool,
) -> None:
    """Let the samples ``low`` up to ``high`` count, with obstacles only beyond the clearing.

    With ``horizon`` for the horizon seen from the mast, else for what the search seeks.
    """
    distance, share = load(narrow, DISTANCE), load(narrow, SHARE_OF_NEXT)
    for i in range(low, high):
        k = steps - (i + 1.0)
        at = i * LANES
        beyond = distance * f4(k / steps) >= f4(link.obstacle_clearing_m)
        bare = between(load(ground, at), load(ground, at + 1), share)
        height = where(beyond, between(load(surface, at), load(surface, at + 1), share), bare)
        if horizon:
            store(narrow, TX_SLOPE, max(height * f4(1.0 / (i + 1.0)), load(narrow, TX_SLOPE)))
        else:
            tangent = (height - load(narrow, RX_BENT)) * f4(1.0 / k)
            near = height - load(narrow, DIRECT) * f4(i + 1.0)
            near = near * (tables[i] * f4(1.0 / math.sqrt(k)))
            store(narrow, BEST_TANGENT, max(tangent, load(narrow, BEST_TANGENT)))
            store(narrow, BEST_NEAR, max(near, load(narrow, BEST_NEAR)))
