"""Bare ground without curvature above the rays, which the effective heights ask for."""

import math
from typing import Any

import numpy as np
from numpy.typing import NDArray

from planner.physics._jit import inlined, scalar
from planner.physics._lanes import LANES, any_lane, load, store, where
from planner.sweep.sampling_lines import between, lid_of_cell
from planner.sweep.state import (
    BLOCK,
    BULGE,
    BULGE_DRIFT,
    CELL_GROUND_SLOPE,
    DISTANCE,
    GROUND,
    OBSTRUCTION,
    OBSTRUCTION_SLOPE,
    OWN_BENT,
    OWN_SAMPLES,
    OWN_SHARE,
    RX_ABOVE,
    SHARE_OF_NEXT,
    SPHERE,
    STEP_BULGE,
    STEP_DRIFT,
    Link,
)

f4 = np.float32


@scalar
def start_obstruction(narrow: NDArray, t: float, steps: float, link: Link) -> bool:
    """First candidates: the own samples, or infinite where it is not asked for; whether it is."""
    rx_height = load(narrow, GROUND) + load(narrow, RX_ABOVE)
    slope = load(narrow, CELL_GROUND_SLOPE)
    wanted = (load(narrow, SPHERE) > 0.0) & (slope > rx_height * f4(1.0 / steps))
    per_line = f4(t / steps)
    share = load(narrow, SHARE_OF_NEXT)
    bulge = between(load(narrow, BULGE), load(narrow, BULGE + 1), share)
    store(narrow, STEP_BULGE, bulge * (per_line * per_line))
    store(narrow, STEP_DRIFT, load(narrow, BULGE_DRIFT) * per_line)
    bend = f4(1.0 / (2.0 * link.earth_radius_m))
    distance = load(narrow, DISTANCE)
    highest = where(wanted, 0.0, math.inf)
    steepest = highest
    for q in range(OWN_SAMPLES):
        part = load(narrow, OWN_SHARE + q * LANES)
        x = distance * (1.0 - part)
        above = load(narrow, OWN_BENT + q * LANES) + x * x * bend - rx_height * (1.0 - part)
        highest = max(above, highest)
        steepest = max(above / (part * f4(steps)), steepest)
    store(narrow, OBSTRUCTION, highest)
    store(narrow, OBSTRUCTION_SLOPE, steepest)
    return any_lane(wanted)


@inlined
def _above_ray(narrow: NDArray, bent: Any, step: Any, ray: Any) -> Any:
    bulge = load(narrow, STEP_BULGE) * (1.0 - load(narrow, STEP_DRIFT) * step)
    return bent + bulge * (step * step) - ray * step


@scalar
def scan_obstruction(narrow: NDArray, ground: NDArray, low: int, high: int, steps: float) -> bool:
    """Let the samples from ``low`` up to ``high`` compete; whether any lane found a better one."""
    share = load(narrow, SHARE_OF_NEXT)
    ray = (load(narrow, GROUND) + load(narrow, RX_ABOVE)) * f4(1.0 / steps)
    old_highest, old_steepest = load(narrow, OBSTRUCTION), load(narrow, OBSTRUCTION_SLOPE)
    highest, steepest = old_highest, old_steepest
    for i in range(low, high):
        bent = between(load(ground, i * LANES), load(ground, i * LANES + 1), share)
        above = _above_ray(narrow, bent, f4(i + 1.0), ray)
        highest = max(above, highest)
        steepest = max(above * f4(1.0 / (steps - (i + 1.0))), steepest)
    store(narrow, OBSTRUCTION, highest)
    store(narrow, OBSTRUCTION_SLOPE, steepest)
    return any_lane((highest > old_highest) | (steepest > old_steepest))


@inlined
def may_obstruct(
    narrow: NDArray, lids: NDArray, lid: int, first: int, stop: int, steps: float
) -> bool:
    """Whether blocks ``first`` up to ``stop``, under the lid at ``lid``, may beat a lane's best.

    The bulge bends upwards, so what lies between the lid's ends, not bent, is below their line.
    """
    first_step, last_step = first * BLOCK + 1.0, stop * BLOCK + 1.0
    ray = (load(narrow, GROUND) + load(narrow, RX_ABOVE)) * f4(1.0 / steps)
    start, end = lid_of_cell(lids, lid, load(narrow, SHARE_OF_NEXT))
    start = _above_ray(narrow, start, f4(first_step), ray)
    end = _above_ray(narrow, end, f4(last_step), ray)
    highest, steepest = load(narrow, OBSTRUCTION), load(narrow, OBSTRUCTION_SLOPE)
    start_limit = min(highest, steepest * f4(steps - first_step))
    end_limit = min(highest, steepest * f4(steps - last_step))
    return any_lane((start > start_limit) | (end > end_limit))
