"""The extreme points of all profiles of a fan, found without looking at every sample.

Two things are sought among the samples before a cell: the one that is steepest seen from the
receiver (where the ray is blocked), and the one with the largest Fresnel-Kirchhoff parameter nu.
Both are of the form (height - line) * weight, where the weight depends on the sample's place only,
so all lanes share it. With u steps from mast to cell, sample i at step i + 1 and k = u - i - 1,

    tangent:  (height - receiver) / k                          slope per step
    nu:       (height - slope * (i + 1)) / sqrt((i + 1) * k)   times sqrt(2 u^2 / (wavelength * d))

Heights and lids of a cell lie in proportion between those of the two radials beside it.
"""

import math

import numpy as np
from numpy.typing import NDArray

from planner.physics._jit import inlined, scalar
from planner.physics._lanes import LANES, any_lane, lane_numbers, load, single, store
from planner.sweep.sampling_lines import between, lid_of_cell
from planner.sweep.state import (
    BEST_NEAR,
    BEST_TANGENT,
    BLOCK,
    DIRECT,
    ROW_PLACE,
    ROW_STEEPNESS,
    ROW_WEIGHT,
    RX_BENT,
    SHARE_OF_NEXT,
    Tables,
)

f4 = np.float32


@scalar
def scan(
    narrow: NDArray, surface: NDArray, tables: NDArray, low: int, high: int, steps: float
) -> bool:
    """Let the samples from ``low`` up to ``high`` compete; whether any lane found a better one.

    LANES samples at most.
    """
    numbers = single(lane_numbers())
    steepness = 1.0 / (f4(steps - (low + 1.0)) - numbers)
    store(narrow, ROW_STEEPNESS, steepness)
    store(narrow, ROW_WEIGHT, load(tables, low) * math.sqrt(steepness))
    store(narrow, ROW_PLACE, numbers + f4(low + 1.0))
    share = load(narrow, SHARE_OF_NEXT)
    rx, direct = load(narrow, RX_BENT), load(narrow, DIRECT)
    old_tangent, old_near = load(narrow, BEST_TANGENT), load(narrow, BEST_NEAR)
    tangent, near = old_tangent, old_near
    for i in range(low, high):
        row = i - low
        height = between(load(surface, i * LANES), load(surface, i * LANES + 1), share)
        tangent = max((height - rx) * narrow[ROW_STEEPNESS + row], tangent)
        above = height - direct * narrow[ROW_PLACE + row]
        near = max(above * narrow[ROW_WEIGHT + row], near)
    store(narrow, BEST_TANGENT, tangent)
    store(narrow, BEST_NEAR, near)
    return any_lane((tangent > old_tangent) | (near > old_near))


@scalar
def weigh_edges(tables: NDArray, at: Tables, blocks: int, steps: float) -> None:
    """Roots at the first sample of each block and of the one after the last.

    They change little from line to line, so far from the cell one step of Newton's method makes
    them of those of the line before.
    """
    near_by = steps - tables[at.last_steps] < 4.0
    tables[at.last_steps] = steps
    for block in range(0, blocks + 1, LANES):
        place = single(lane_numbers()) * BLOCK + f4(block * BLOCK + 1.0)
        product = place * (f4(steps) - place)
        if near_by and block + 2 * LANES <= blocks:
            inverse = load(tables, at.edge_inverse + block)
            inverse = inverse * (1.5 - 0.5 * product * inverse * inverse)
            root = product * inverse
        else:
            root = math.sqrt(product)
            inverse = 1.0 / root
        store(tables, at.edge_root + block, root)
        store(tables, at.edge_inverse + block, inverse)


@inlined
def may_hold_better(
    narrow: NDArray,
    lids: NDArray,
    tables: NDArray,
    at: Tables,
    lid: int,
    first: int,
    stop: int,
    steps: float,
) -> bool:
    """Whether blocks ``first`` up to ``stop``, under the lid at ``lid``, may beat a lane's best.

    They may where the lid rises above the best tangent, or above the curve of the best nu. Seen
    from the receiver a straight lid is steepest at one of its ends. A height above the ray counts
    most where the weight of nu is largest, one below where it is smallest: at an end, or halfway
    along the path.
    """
    one, other = tables[at.edge_root + first], tables[at.edge_root + stop]
    light, heavy = max(one, other), min(one, other)  # 1 / weight
    first_step, last_step = first * BLOCK + 1.0, stop * BLOCK + 1.0
    if first_step < 0.5 * steps < last_step:
        light = f4(0.5 * steps)
    start, end = lid_of_cell(lids, lid, load(narrow, SHARE_OF_NEXT))
    rx, direct = load(narrow, RX_BENT), load(narrow, DIRECT)
    tangent, near = load(narrow, BEST_TANGENT), load(narrow, BEST_NEAR)
    clear = min(near * heavy, near * light)
    start_limit = min(rx + tangent * f4(steps - first_step), clear + direct * f4(first_step))
    end_limit = min(rx + tangent * f4(steps - last_step), clear + direct * f4(last_step))
    return any_lane((start > start_limit) | (end > end_limit))
