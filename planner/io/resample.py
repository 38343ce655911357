"""Heights of joined rasters, taken onto a grid.

- Positions go from the grid to the lattice through PROJ, the same way as the places of towers and
  customers do, exact to 0.005 of a cell of the lattice.
- Heights are bilinear between the four centres around. Holes take no part, the others' weights are
  scaled up; where less than half of the weight remains, the cell is a hole. So a hole keeps its
  size: it neither spreads by a cell nor closes, and its rim is not pulled towards a code. Where
  several lattices meet, one that has all four corners goes before one that has not.
- Where the grid's cells are at least twice as large as the lattice's, whole blocks of cells are
  averaged first, since picking single cells would make noise of fine relief.
- Longitudes are counted from the middle of the area, so the 180th meridian is no edge.
- The grid is worked through in parts, such that never more than ``PART_CELLS`` are in memory.
"""

import math
from collections.abc import Callable, Sequence

import numpy as np
from numpy.typing import NDArray

from planner.io.mosaic import Mosaic
from planner.io.rasters import Tally, coordinates
from planner.physics._jit import scalar
from planner.terrain import Grid

PART_CELLS = 32_000_000  # cells of the lattice that are in memory at a time
_PART_SIDE = 2048  # cells of the grid along the side of a part, at most
_POSITION_ERROR = 0.005  # cells of the lattice by which an interpolated position may be off
_LARGEST_BLOCK = 64  # cells of the lattice averaged along one side
_EDGE = 0.5 + 1e-9  # from the outermost centres to the edge, in cells

Progress = Callable[[float], None]  # share of the work that is done, 0 to 1


def heights_on_grid(
    sources: Sequence[Mosaic], grid: Grid, tally: Tally, progress: Progress | None = None
) -> NDArray[np.float32]:
    """Heights in metres, float32 [rows, cols], of the grid's cell centres; NaN where there are
    none.

    Earlier mosaics count first; later ones fill what they leave empty.
    """
    heights = np.full((grid.rows, grid.cols), np.nan, dtype=np.float32)
    # Along the edge of a lattice, and around its holes, another lattice may have all four corners:
    # so each gives first what it knows fully, then what it can stretch to.
    passes = [(mosaic, False) for mosaic in sources] if len(sources) > 1 else []
    passes += [(mosaic, True) for mosaic in sources]
    for number, (mosaic, stretched) in enumerate(passes):
        blocks = averaged_block(mosaic, grid)
        done = 0
        todo = [
            (top, left, min(_PART_SIDE, grid.rows - top), min(_PART_SIDE, grid.cols - left))
            for top in range(0, grid.rows, _PART_SIDE)
            for left in range(0, grid.cols, _PART_SIDE)
        ]
        while todo:
            top, left, rows, cols = todo.pop()
            part = heights[top : top + rows, left : left + cols]
            smaller = _fill_part(mosaic, grid, blocks, part, top, left, stretched, tally)
            if smaller:
                todo.extend(smaller)
                continue
            done += rows * cols
            if progress is not None:
                progress((number + done / heights.size) / len(passes))
    return heights


def heights_as_they_are(mosaic: Mosaic, grid: Grid, tally: Tally) -> NDArray[np.float32]:
    """Heights in metres, float32 [rows, cols], of a grid that is a window of the lattice."""
    col, row = coordinates(~mosaic.transform, grid.transform.c, grid.transform.f)
    return mosaic.heights_m(round(float(row)), round(float(col)), grid.rows, grid.cols, tally)


def averaged_block(mosaic: Mosaic, grid: Grid) -> tuple[int, int]:
    """(rows, cols) of the lattice's cells that fit into a cell of the grid everywhere on it."""
    row, col = np.meshgrid(np.linspace(0, grid.rows, 5), np.linspace(0, grid.cols, 5))
    at = [
        mosaic.row_col(grid.crs, *grid.easting_northing(row + down, col + right))
        for down, right in ((0, 0), (1, 0), (0, 1))
    ]
    sides = []
    for axis in (0, 1):
        steps = np.hypot(at[1][axis] - at[0][axis], at[2][axis] - at[0][axis])
        fits = np.nanmin(steps) if np.isfinite(steps).any() else 1.0
        sides.append(min(max(int(fits + 1e-3), 1), _LARGEST_BLOCK))
    return sides[0], sides[1]


def _fill_part(
    mosaic: Mosaic,
    grid: Grid,
    blocks: tuple[int, int],
    heights: NDArray[np.float32],
    top: int,
    left: int,
    stretched: bool,
    tally: Tally,
) -> list[tuple[int, int, int, int]]:
    """Fill the empty cells of a part of the grid, or return the smaller parts to cut it into."""
    if not np.isnan(heights).any():
        return []
    rows, cols = heights.shape
    step, row_nodes, col_nodes = _positions(mosaic, grid, top, left, rows, cols)
    if not np.isfinite(row_nodes).any():
        return []
    block_rows, block_cols = blocks
    first_row, first_col, end_row, end_col = mosaic.extent()

    def window(nodes: NDArray[np.float64], block: int, first: int, end: int) -> tuple[int, int]:
        low = max(math.floor(np.nanmin(nodes)) - 2 * block, first)
        high = min(math.ceil(np.nanmax(nodes)) + 2 * block + 1, end)
        return low // block * block, -(-high // block) * block

    low_row, high_row = window(row_nodes, block_rows, first_row, end_row)
    low_col, high_col = window(col_nodes, block_cols, first_col, end_col)
    if high_row <= low_row or high_col <= low_col:
        return []
    if (high_row - low_row) * (high_col - low_col) > PART_CELLS and max(rows, cols) > 1:
        up, side = (rows + 1) // 2, (cols + 1) // 2
        quarters = [
            (top, left, up, side),
            (top, left + side, up, cols - side),
            (top + up, left, rows - up, side),
            (top + up, left + side, rows - up, cols - side),
        ]
        return [quarter for quarter in reversed(quarters) if quarter[2] > 0 and quarter[3] > 0]
    source = mosaic.heights_m(low_row, low_col, high_row - low_row, high_col - low_col, tally)
    if blocks != (1, 1):
        source = _block_means(source, block_rows, block_cols)
    _take_bilinear(
        source,
        (row_nodes + 0.5 - low_row) / block_rows - 0.5,
        (col_nodes + 0.5 - low_col) / block_cols - 0.5,
        step,
        stretched,
        heights,
    )
    return []


def _positions(
    mosaic: Mosaic, grid: Grid, top: int, left: int, rows: int, cols: int
) -> tuple[int, NDArray[np.float64], NDArray[np.float64]]:
    """(step, rows, cols): where every step-th cell centre of a part of the grid lies on the
    lattice.

    The step is the widest at which straight lines between the nodes are exact enough.
    """
    for step in (64, 16, 4, 1):
        row_count, col_count = -(-(rows - 1) // step) + 1, -(-(cols - 1) // step) + 1
        row, col = np.meshgrid(
            top + step * np.arange(row_count), left + step * np.arange(col_count), indexing="ij"
        )
        nodes = mosaic.row_col(grid.crs, *grid.easting_northing(row, col))
        if step == 1:
            break
        if row_count < 2 or col_count < 2:
            continue
        middles = mosaic.row_col(
            grid.crs, *grid.easting_northing(row[1:, 1:] - 0.5 * step, col[1:, 1:] - 0.5 * step)
        )
        errors = [
            np.abs(0.25 * (node[1:, 1:] + node[:-1, 1:] + node[1:, :-1] + node[:-1, :-1]) - middle)
            for node, middle in zip(nodes, middles, strict=True)
        ]
        if max(float(error.max()) for error in errors) < _POSITION_ERROR:  # false for NaN
            break
    return step, nodes[0], nodes[1]


def _block_means(
    heights: NDArray[np.float32], block_rows: int, block_cols: int
) -> NDArray[np.float32]:
    """Means over blocks of cells; a block more than half of which is holes is a hole."""
    rows, cols = heights.shape[0] // block_rows, heights.shape[1] // block_cols
    means = np.empty((rows, cols), dtype=np.float32)
    _average_blocks(np.ascontiguousarray(heights), block_rows, block_cols, means)
    return means


@scalar
def _average_blocks(
    heights: NDArray[np.float32], block_rows: int, block_cols: int, means: NDArray[np.float32]
) -> None:
    for row in range(means.shape[0]):
        for col in range(means.shape[1]):
            total = 0.0
            count = 0
            for i in range(row * block_rows, (row + 1) * block_rows):
                for j in range(col * block_cols, (col + 1) * block_cols):
                    if not np.isnan(heights[i, j]):
                        total += heights[i, j]
                        count += 1
            means[row, col] = total / count if 2 * count >= block_rows * block_cols else np.nan


@scalar
def _take_bilinear(
    source: NDArray[np.float32],
    row_nodes: NDArray[np.float64],
    col_nodes: NDArray[np.float64],
    step: int,
    stretched: bool,
    heights: NDArray[np.float32],
) -> None:
    """Fill the empty cells of ``heights``; nodes say where every step-th cell lies on
    ``source``."""
    for i in range(heights.shape[0]):
        node_row = i // step
        down = (i - node_row * step) / step
        next_row = node_row + 1 if down > 0.0 else node_row
        for j in range(heights.shape[1]):
            if not np.isnan(heights[i, j]):
                continue
            node_col = j // step
            right = (j - node_col * step) / step
            next_col = node_col + 1 if right > 0.0 else node_col
            upper_left = (1.0 - down) * (1.0 - right)
            upper_right = (1.0 - down) * right
            lower_left = down * (1.0 - right)
            lower_right = down * right
            row = (
                upper_left * row_nodes[node_row, node_col]
                + upper_right * row_nodes[node_row, next_col]
                + lower_left * row_nodes[next_row, node_col]
                + lower_right * row_nodes[next_row, next_col]
            )
            col = (
                upper_left * col_nodes[node_row, node_col]
                + upper_right * col_nodes[node_row, next_col]
                + lower_left * col_nodes[next_row, node_col]
                + lower_right * col_nodes[next_row, next_col]
            )
            heights[i, j] = _bilinear_around_holes(source, row, col, stretched)


@scalar
def _bilinear_around_holes(
    source: NDArray[np.float32], row: float, col: float, stretched: bool
) -> float:
    """Bilinear value; ``stretched``: from the corners that are there, if they have half the weight.

    Stretched, the edge's values continue beyond the outermost centres up to the edge of the cells.
    NaN where that does not suffice.
    """
    rows, cols = source.shape
    # Positions that are whole but for rounding are whole: a grid on the lattice keeps its heights.
    if abs(row - np.rint(row)) < 1e-6:
        row = np.rint(row)
    if abs(col - np.rint(col)) < 1e-6:
        col = np.rint(col)
    reach = _EDGE if stretched else 0.0
    if not (-reach <= row <= rows - 1.0 + reach and -reach <= col <= cols - 1.0 + reach):
        return np.nan
    top = int(np.floor(row))
    left = int(np.floor(col))
    total = 0.0
    weights = 0.0
    for i in range(2):
        for j in range(2):
            weight = abs(1.0 - i - (row - top)) * abs(1.0 - j - (col - left))
            value = source[min(max(top + i, 0), rows - 1), min(max(left + j, 0), cols - 1)]
            if weight > 0.0 and not np.isnan(value):
                total += weight * value
                weights += weight
    least = 0.5 if stretched else 1.0
    return total / weights if weights >= least - 1e-9 else np.nan
