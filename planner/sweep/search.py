"""Searches among the samples of a fan that look only where bounds allow something better.

A block of samples cannot beat what was found already where a straight lid over its points does not:
most blocks are passed over, and the result is the same.
"""

from numpy.typing import NDArray

from planner.physics._jit import inlined, scalar
from planner.sweep.extremes import may_hold_better, scan, weigh_edges
from planner.sweep.obstruction import may_obstruct, scan_obstruction
from planner.sweep.state import BLOCK, GROUP, LID, RECALLED, REGION, Tables


@scalar
def search_extremes(
    narrow: NDArray,
    surface: NDArray,
    lids: NDArray,
    tables: NDArray,
    recalled: NDArray,
    at: Tables,
    samples: int,
    steps: float,
) -> None:
    """Let all samples below ``samples`` compete for BEST_TANGENT and BEST_NEAR of each lane."""
    weigh_edges(tables, at, samples // BLOCK, steps)
    _search(narrow, surface, lids, tables, recalled, 0, at, samples, samples, steps, False)


@scalar
def search_obstruction(
    narrow: NDArray,
    ground: NDArray,
    lids: NDArray,
    tables: NDArray,
    recalled: NDArray,
    at: Tables,
    samples: int,
    far: int,
    steps: float,
) -> None:
    """Let all samples below ``samples`` compete for OBSTRUCTION and OBSTRUCTION_SLOPE.

    The lids hold for those below ``far``.
    """
    own = 1 + 2 * RECALLED
    _search(narrow, ground, lids, tables, recalled, own, at, samples, far, steps, True)


@inlined
def _scan(
    narrow: NDArray,
    heights: NDArray,
    tables: NDArray,
    low: int,
    high: int,
    steps: float,
    bare: bool,
) -> bool:
    if bare:
        return scan_obstruction(narrow, heights, low, high, steps)
    return scan(narrow, heights, tables, low, high, steps)


@inlined
def _may_hold(
    narrow: NDArray,
    lids: NDArray,
    tables: NDArray,
    at: Tables,
    lid: int,
    first: int,
    stop: int,
    steps: float,
    bare: bool,
) -> bool:
    if bare:
        return may_obstruct(narrow, lids, lid, first, stop, steps)
    return may_hold_better(narrow, lids, tables, at, lid, first, stop, steps)


@inlined
def _search(
    narrow: NDArray,
    heights: NDArray,
    lids: NDArray,
    tables: NDArray,
    recalled: NDArray,
    own: int,
    at: Tables,
    samples: int,
    far: int,
    steps: float,
    bare: bool,
) -> None:
    """Blocks that held an extreme at the line before come first: they mostly still do, and with a
    good best the others are passed over. Their order turns from line to line, so that one that no
    longer holds an extreme soon comes last, raises nothing and is forgotten.

    ``own`` is where in ``recalled`` this search keeps its blocks, ``bare`` says which search it is.
    """
    blocks = far // BLOCK
    for low in range(blocks * BLOCK, samples, BLOCK):
        _scan(narrow, heights, tables, low, min(low + BLOCK, samples), steps, bare)
    known = recalled[own]
    kept = 0
    for n in range(known):
        recalled[own + 1 + RECALLED + n] = recalled[own + known - n]
    for n in range(known):
        block = recalled[own + 1 + RECALLED + n]
        if _scan(narrow, heights, tables, block * BLOCK, (block + 1) * BLOCK, steps, bare):
            kept += 1
            recalled[own + kept] = block
    in_regions = blocks // REGION * REGION
    in_groups = blocks // GROUP * GROUP
    block = blocks - 1
    while block >= 0:
        stop = block + 1
        if stop <= in_regions and stop % REGION == 0:
            first = stop - REGION
            lid = at.region_lids + LID * (first // REGION)
            if not _may_hold(narrow, lids, tables, at, lid, first, stop, steps, bare):
                block -= REGION
                continue
        if stop <= in_groups and stop % GROUP == 0:
            first = stop - GROUP
            lid = at.group_lids + LID * (first // GROUP)
            if not _may_hold(narrow, lids, tables, at, lid, first, stop, steps, bare):
                block -= GROUP
                continue
        seen = False
        for n in range(known):
            seen = seen | (recalled[own + 1 + RECALLED + n] == block)
        if (
            not seen
            and _may_hold(narrow, lids, tables, at, LID * block, block, stop, steps, bare)
            and _scan(narrow, heights, tables, block * BLOCK, stop * BLOCK, steps, bare)
        ):
            if kept == RECALLED:
                for n in range(1, RECALLED):
                    recalled[own + n] = recalled[own + n + 1]
                kept -= 1
            kept += 1
            recalled[own + kept] = block
        block -= 1
    recalled[own] = kept
