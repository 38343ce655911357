"""The extreme points of all profiles of a fan, found without looking at every sample.

Two things are sought among the samples before a cell: the one that is steepest seen from the
receiver (where the ray is blocked), and the one with the largest Fresnel-Kirchhoff parameter nu.
Both are of the form (height - line) * weight, where the weight depends on the sample's place only,
so all lanes share it. With u steps from mast to cell, sample i at step i + 1 and k = u - i - 1,

    tangent:  (height - receiver) / k                          slope per step
    nu:       (height - slope * (i + 1)) / sqrt((i + 1) * k)   times sqrt(2 u^2 / (wavelength * d))

A block of samples cannot beat what was found already where a straight lid over its points does not:
most blocks are passed over, and the result is the same.
"""

import math

import numpy as np
from numpy.typing import NDArray

from planner.physics._jit import scalar
from planner.sweep.state import (
    BEST_NEAR,
    BEST_TANGENT,
    BLOCK,
    DIRECT,
    GROUP,
    LANES,
    RECALLED,
    REGION,
    RX_BENT,
)

f4 = np.float32


@scalar
def scan(
    narrow: NDArray,
    flat_surface: NDArray,
    root: NDArray,
    row_steepness: NDArray,
    row_weight: NDArray,
    lanes: int,
    low: int,
    high: int,
    steps: float,
) -> bool:
    """Let the samples from ``low`` up to ``high`` compete; whether any lane found a better one.

    Four at a time, so a multiple of four. ``flat_surface`` is the surface in one dimension: with
    one base for all four rows, indices that cannot be negative and offsets known to the compiler,
    next to nothing is checked at run time.
    """
    for i in range(low, high):
        row_steepness[i - low] = f4(1.0) / f4(steps - (i + 1.0))
    for i in range(low, high):
        row_weight[i - low] = root[i] * np.sqrt(row_steepness[i - low])
    rose = False
    for i in range(low, high, 4):
        at = np.uint64(i * LANES)
        row = i - low
        s0, s1, s2, s3 = (
            row_steepness[row],
            row_steepness[row + 1],
            row_steepness[row + 2],
            row_steepness[row + 3],
        )
        w0, w1, w2, w3 = (
            row_weight[row],
            row_weight[row + 1],
            row_weight[row + 2],
            row_weight[row + 3],
        )
        p0, p1, p2, p3 = f4(i + 1.0), f4(i + 2.0), f4(i + 3.0), f4(i + 4.0)
        for lane in range(lanes):
            h0 = flat_surface[at + np.uint64(lane)]
            h1 = flat_surface[at + np.uint64(LANES) + np.uint64(lane)]
            h2 = flat_surface[at + np.uint64(2 * LANES) + np.uint64(lane)]
            h3 = flat_surface[at + np.uint64(3 * LANES) + np.uint64(lane)]
            rx = narrow[RX_BENT + lane]
            slope = narrow[DIRECT + lane]
            tangent = max(max((h0 - rx) * s0, (h1 - rx) * s1), max((h2 - rx) * s2, (h3 - rx) * s3))
            near = max(
                max((h0 - slope * p0) * w0, (h1 - slope * p1) * w1),
                max((h2 - slope * p2) * w2, (h3 - slope * p3) * w3),
            )
            best_tangent = narrow[BEST_TANGENT + lane]
            best_near = narrow[BEST_NEAR + lane]
            rose = rose | (tangent > best_tangent) | (near > best_near)
            narrow[BEST_TANGENT + lane] = max(tangent, best_tangent)
            narrow[BEST_NEAR + lane] = max(near, best_near)
    return rose


@scalar
def scan_latest(
    narrow: NDArray,
    surface: NDArray,
    flat_surface: NDArray,
    root: NDArray,
    row_steepness: NDArray,
    row_weight: NDArray,
    lanes: int,
    low: int,
    high: int,
    steps: float,
) -> None:
    """Let the samples that fill no block compete: ``low`` (a multiple of four) up to ``high``."""
    fours = low + (high - low) // 4 * 4
    scan(narrow, flat_surface, root, row_steepness, row_weight, lanes, low, fours, steps)
    if fours < high and high >= 4:  # once more some of those that were counted already
        scan(narrow, flat_surface, root, row_steepness, row_weight, lanes, high - 4, high, steps)
        return
    for i in range(fours, high):
        steepness = f4(1.0 / (steps - (i + 1.0)))
        weight = root[i] * f4(math.sqrt(steepness))
        place = f4(i + 1.0)
        for lane in range(lanes):
            height = surface[i, lane]
            tangent = (height - narrow[RX_BENT + lane]) * steepness
            near = (height - narrow[DIRECT + lane] * place) * weight
            narrow[BEST_TANGENT + lane] = max(tangent, narrow[BEST_TANGENT + lane])
            narrow[BEST_NEAR + lane] = max(near, narrow[BEST_NEAR + lane])


@scalar
def weigh_edges(
    steepness: NDArray, weight: NDArray, root: NDArray, blocks: int, steps: float
) -> None:
    """Weights at the first sample of each block and of the one after the last."""
    for block in range(blocks + 1):
        steepness[block] = f4(1.0) / f4(steps - (block * BLOCK + 1.0))
    for block in range(blocks + 1):
        weight[block] = root[block * BLOCK] * np.sqrt(steepness[block])


@scalar
def may_hold_better(
    narrow: NDArray,
    lid: NDArray,
    steepness: NDArray,
    weight: NDArray,
    lanes: int,
    row: int,
    first: int,
    stop: int,
    steps: float,
) -> bool:
    """Whether blocks ``first`` up to ``stop``, under the lid ``row``, may beat a lane's best.

    Seen from the receiver a straight lid is steepest at one of its ends. A height above the ray
    counts most where the weight of nu is largest, one below where it is smallest: at an end, or
    halfway along the path.
    """
    far, close = steepness[first], steepness[stop]
    one, other = weight[first], weight[stop]
    heavy, light = max(one, other), min(one, other)
    first_step, last_step = first * BLOCK + 1.0, stop * BLOCK + 1.0
    if first_step < 0.5 * steps < last_step:
        light = f4(2.0 / steps)
    from_step, to_step = f4(first_step), f4(last_step)
    hit = False
    for lane in range(lanes):
        start = lid[2 * row, lane]
        end = lid[2 * row + 1, lane]
        rx = narrow[RX_BENT + lane]
        tangent = max((start - rx) * far, (end - rx) * close)
        slope = narrow[DIRECT + lane]
        clear = max(start - slope * from_step, end - slope * to_step)
        near = max(clear * heavy, clear * light)
        hit = hit | (tangent > narrow[BEST_TANGENT + lane]) | (near > narrow[BEST_NEAR + lane])
    return hit


@scalar
def search(
    narrow: NDArray,
    surface: NDArray,
    flat_surface: NDArray,
    block_lid: NDArray,
    group_lid: NDArray,
    region_lid: NDArray,
    steepness: NDArray,
    weight: NDArray,
    root: NDArray,
    row_steepness: NDArray,
    row_weight: NDArray,
    recalled: NDArray,
    lanes: int,
    samples: int,
    steps: float,
) -> None:
    """Let all samples below ``samples`` compete for BEST_TANGENT and BEST_NEAR of each lane.

    Blocks that held an extreme at the line before come first: they mostly still do, and with a
    good best the others are passed over. Their order turns from line to line, so that one that no
    longer holds an extreme soon comes last, raises nothing and is forgotten.
    """
    blocks = samples // BLOCK
    scan_latest(
        narrow,
        surface,
        flat_surface,
        root,
        row_steepness,
        row_weight,
        lanes,
        blocks * BLOCK,
        samples,
        steps,
    )
    known = recalled[0]
    kept = 0
    for n in range(known):
        recalled[1 + RECALLED + n] = recalled[known - n]
    for n in range(known):
        block = recalled[1 + RECALLED + n]
        if scan(
            narrow,
            flat_surface,
            root,
            row_steepness,
            row_weight,
            lanes,
            block * BLOCK,
            (block + 1) * BLOCK,
            steps,
        ):
            kept += 1
            recalled[kept] = block
    weigh_edges(steepness, weight, root, blocks, steps)
    in_regions = blocks // REGION * REGION
    in_groups = blocks // GROUP * GROUP
    block = blocks - 1
    while block >= 0:
        stop = block + 1
        if stop <= in_regions and stop % REGION == 0:
            first = stop - REGION
            if not may_hold_better(
                narrow, region_lid, steepness, weight, lanes, first // REGION, first, stop, steps
            ):
                block -= REGION
                continue
        if stop <= in_groups and stop % GROUP == 0:
            first = stop - GROUP
            if not may_hold_better(
                narrow, group_lid, steepness, weight, lanes, first // GROUP, first, stop, steps
            ):
                block -= GROUP
                continue
        seen = False
        for n in range(known):
            seen = seen | (recalled[1 + RECALLED + n] == block)
        low = block * BLOCK
        if (
            not seen
            and may_hold_better(
                narrow, block_lid, steepness, weight, lanes, block, block, block + 1, steps
            )
            and scan(
                narrow,
                flat_surface,
                root,
                row_steepness,
                row_weight,
                lanes,
                low,
                low + BLOCK,
                steps,
            )
        ):
            if kept == RECALLED:
                for n in range(1, RECALLED):
                    recalled[n] = recalled[n + 1]
                kept -= 1
            kept += 1
            recalled[kept] = block
        block -= 1
    recalled[0] = kept
