"""The extreme points of all profiles of a fan, found without looking at every sample.

Two things are sought among the samples before a cell: the one that is steepest seen from the
receiver (where the ray is blocked), and the one with the largest Fresnel-Kirchhoff parameter nu.
Both are of the form (height - line) * weight, where the weight depends on the sample's place only,
so all lanes share it. With u steps from mast to cell, sample i at step i + 1 and k = u - i - 1,

    tangent:  (height - receiver) / k                          slope per step
    nu:       (height - slope * (i + 1)) / sqrt((i + 1) * k)   times sqrt(2 u^2 / (wavelength * d))

A block of samples cannot beat what was found already where a straight lid over its points does not:
most blocks are passed over, and the result is the same. Heights and lids of a cell lie in
proportion between those of the two radials beside it.
"""

import math

import numpy as np
from numpy.typing import NDArray

from planner.physics._jit import inlined, scalar
from planner.physics._lanes import LANES, any_lane, lane_numbers, load, single, store
from planner.sweep.state import (
    BEST_NEAR,
    BEST_TANGENT,
    BLOCK,
    DIRECT,
    GROUP,
    RECALLED,
    REGION,
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
    steepness = 1.0 / (f4(steps - (low + 1.0)) - single(lane_numbers()))
    store(narrow, ROW_STEEPNESS, steepness)
    store(narrow, ROW_WEIGHT, load(tables, low) * math.sqrt(steepness))
    next_share = load(narrow, SHARE_OF_NEXT)
    share = 1.0 - next_share
    rx, direct = load(narrow, RX_BENT), load(narrow, DIRECT)
    old_tangent, old_near = load(narrow, BEST_TANGENT), load(narrow, BEST_NEAR)
    tangent, near = old_tangent, old_near
    ray = direct * f4(low + 1.0)
    for i in range(low, high):
        height = load(surface, i * LANES) * share + load(surface, i * LANES + 1) * next_share
        tangent = max((height - rx) * narrow[ROW_STEEPNESS + i - low], tangent)
        near = max((height - ray) * narrow[ROW_WEIGHT + i - low], near)
        ray = ray + direct
    store(narrow, BEST_TANGENT, tangent)
    store(narrow, BEST_NEAR, near)
    return any_lane((tangent > old_tangent) | (near > old_near))


@scalar
def weigh_edges(tables: NDArray, at: Tables, blocks: int, steps: float) -> None:
    """Weights at the first sample of each block and of the one after the last."""
    for block in range(0, blocks + 1, LANES):
        places = single(lane_numbers()) * BLOCK
        steepness = 1.0 / (f4(steps - (block * BLOCK + 1.0)) - places)
        store(tables, at.edge_steepness + block, steepness)
        weight = load(tables, at.block_roots + block) * math.sqrt(steepness)
        store(tables, at.edge_weight + block, weight)


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

    Seen from the receiver a straight lid is steepest at one of its ends. A height above the ray
    counts most where the weight of nu is largest, one below where it is smallest: at an end, or
    halfway along the path.
    """
    far, close = tables[at.edge_steepness + first], tables[at.edge_steepness + stop]
    one, other = tables[at.edge_weight + first], tables[at.edge_weight + stop]
    heavy, light = max(one, other), min(one, other)
    first_step, last_step = first * BLOCK + 1.0, stop * BLOCK + 1.0
    if first_step < 0.5 * steps < last_step:
        light = f4(2.0 / steps)
    next_share = load(narrow, SHARE_OF_NEXT)
    share = 1.0 - next_share
    start = load(lids, lid) * share + load(lids, lid + 1) * next_share
    end = load(lids, lid + LANES) * share + load(lids, lid + LANES + 1) * next_share
    rx, direct = load(narrow, RX_BENT), load(narrow, DIRECT)
    tangent = max((start - rx) * far, (end - rx) * close)
    clear = max(start - direct * f4(first_step), end - direct * f4(last_step))
    near = max(clear * heavy, clear * light)
    return any_lane((tangent > load(narrow, BEST_TANGENT)) | (near > load(narrow, BEST_NEAR)))


@scalar
def search(
    narrow: NDArray,
    surface: NDArray,
    lids: NDArray,
    tables: NDArray,
    recalled: NDArray,
    at: Tables,
    samples: int,
    steps: float,
) -> None:
    """Let all samples below ``samples`` compete for BEST_TANGENT and BEST_NEAR of each lane.

    Blocks that held an extreme at the line before come first: they mostly still do, and with a
    good best the others are passed over. Their order turns from line to line, so that one that no
    longer holds an extreme soon comes last, raises nothing and is forgotten.
    """
    blocks = samples // BLOCK
    scan(narrow, surface, tables, blocks * BLOCK, samples, steps)
    known = recalled[0]
    kept = 0
    for n in range(known):
        recalled[1 + RECALLED + n] = recalled[known - n]
    for n in range(known):
        block = recalled[1 + RECALLED + n]
        if scan(narrow, surface, tables, block * BLOCK, (block + 1) * BLOCK, steps):
            kept += 1
            recalled[kept] = block
    weigh_edges(tables, at, blocks, steps)
    in_regions = blocks // REGION * REGION
    in_groups = blocks // GROUP * GROUP
    block = blocks - 1
    while block >= 0:
        stop = block + 1
        if stop <= in_regions and stop % REGION == 0:
            first = stop - REGION
            lid = at.region_lids + 2 * LANES * (first // REGION)
            if not may_hold_better(narrow, lids, tables, at, lid, first, stop, steps):
                block -= REGION
                continue
        if stop <= in_groups and stop % GROUP == 0:
            first = stop - GROUP
            lid = at.group_lids + 2 * LANES * (first // GROUP)
            if not may_hold_better(narrow, lids, tables, at, lid, first, stop, steps):
                block -= GROUP
                continue
        seen = False
        for n in range(known):
            seen = seen | (recalled[1 + RECALLED + n] == block)
        lid = 2 * LANES * block
        if (
            not seen
            and may_hold_better(narrow, lids, tables, at, lid, block, stop, steps)
            and scan(narrow, surface, tables, block * BLOCK, stop * BLOCK, steps)
        ):
            if kept == RECALLED:
                for n in range(1, RECALLED):
                    recalled[n] = recalled[n + 1]
                kept -= 1
            kept += 1
            recalled[kept] = block
        block -= 1
    recalled[0] = kept
