"""What a run of a plan would compute, from the rasters' metadata alone.

Counts of cells are those of the circles. Time and memory are rough: the rates below were measured
with hills for terrain on a machine with two processor cores that had other work to do as well.
Compiling, which the first run after installing does (some twenty seconds), and customers are left
out.
"""

import math
from collections import Counter
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from planner.geodesy import local_frame
from planner.io.terrain_files import plan_grid
from planner.network import Tower
from planner.plan.read import Plan
from planner.terrain import Grid

# Rates of a run, on two cores.
SWEEP_CELLS_PER_SECOND = 1.2e7  # path loss of one mast's cells
HEIGHT_CELLS_PER_SECOND = 0.7e6  # needed heights of one mast's cells
LAYER_CELLS_PER_SECOND = 5.0e7  # one sector added to the layers
READ_CELLS_PER_SECOND = 2.5e7  # terrain read as it is
RESAMPLED_CELLS_PER_SECOND = 2.5e6  # terrain read and resampled
WRITTEN_CELLS_PER_SECOND = 2.0e7  # one layer written, with its overviews
FIXED_SECONDS = 4.0  # loading, the map, the record

# Memory of a run.
GRID_BYTES_PER_CELL = 4  # ground; the layers are made in bands of rows
OBSTACLE_BYTES_PER_CELL = 4
FIELD_BYTES_PER_CELL = 4 + 4 + 4 + 1 + 4  # loss, elevation, clearance, status, ground seen
HEIGHT_BYTES_PER_CELL = 2 * (2 + 2)  # needed heights of the grid and of one mast
FIXED_BYTES = 300_000_000  # the program with its libraries, bands of rows


@dataclass(frozen=True, slots=True, kw_only=True)
class FieldEstimate:
    """One path field: a tower with one antenna height and frequency."""

    tower_id: str
    antenna_height_m: float
    frequency_mhz: float
    sectors: int  # that share it
    cells: int  # within the radius and on the grid
    window_cells: int  # of the rectangle about them


@dataclass(frozen=True, slots=True, kw_only=True)
class RunEstimate:
    """What a run would compute, how long it would take and what it would hold in memory."""

    grid: str  # CRS
    unresampled: bool  # the raster is used as it is
    rows: int
    cols: int
    cell_m: float
    radius_m: float
    towers: int  # with a sector that is on
    sectors: int  # that are on
    fields: tuple[FieldEstimate, ...]
    cells: int  # over all fields
    seconds: float  # rough, on two processor cores, without compiling
    memory_bytes: int  # rough, at the peak


def run_estimate(plan: Plan) -> RunEstimate:
    """What ``run_plan`` would compute. Reads no heights; raises TerrainError as reading would."""
    towers = [tower for tower in plan.towers if tower.sectors]
    grid, unresampled = plan_grid(
        plan.terrain,
        [(tower.latitude, tower.longitude) for tower in towers],
        plan.radius_m,
        cell_m=plan.cell_m,
        crs=plan.grid_crs,
        names=[tower.id for tower in towers],
    )
    fields = tuple(field for tower in towers for field in _fields(grid, tower, plan.radius_m))
    return RunEstimate(
        grid=grid.crs.to_string(),
        unresampled=unresampled,
        rows=grid.rows,
        cols=grid.cols,
        cell_m=grid.cell_m,
        radius_m=plan.radius_m,
        towers=len(towers),
        sectors=len(plan.sectors),
        fields=fields,
        cells=sum(field.cells for field in fields),
        seconds=round(_seconds(plan, grid, unresampled, fields), 1),
        memory_bytes=_memory_bytes(plan, grid, fields),
    )


def _fields(grid: Grid, tower: Tower, radius_m: float) -> list[FieldEstimate]:
    """The path fields of a tower: sectors of one height and frequency share one."""
    cells, window_cells = _cells_in_range(grid, tower, radius_m)
    keys = Counter(
        (sector.antenna_height_m, sector.radio.frequency_mhz) for sector in tower.sectors
    )
    return [
        FieldEstimate(
            tower_id=tower.id,
            antenna_height_m=height_m,
            frequency_mhz=frequency_mhz,
            sectors=sectors,
            cells=cells,
            window_cells=window_cells,
        )
        for (height_m, frequency_mhz), sectors in keys.items()
    ]


def _seconds(plan: Plan, grid: Grid, unresampled: bool, fields: Sequence[FieldEstimate]) -> float:
    grid_cells = grid.rows * grid.cols
    layers_written = sum(layer != "path_loss" for layer in plan.layers)
    if "path_loss" in plan.layers:
        layers_written += len(fields)
    return (
        FIXED_SECONDS
        + grid_cells / (READ_CELLS_PER_SECOND if unresampled else RESAMPLED_CELLS_PER_SECOND)
        + sum(field.cells for field in fields) / SWEEP_CELLS_PER_SECOND
        + (
            sum(field.cells for field in fields) / HEIGHT_CELLS_PER_SECOND
            if "needed_height" in plan.layers
            else 0.0
        )
        + sum(field.cells * field.sectors for field in fields) / LAYER_CELLS_PER_SECOND
        + layers_written * grid_cells / WRITTEN_CELLS_PER_SECOND
    )


def _memory_bytes(plan: Plan, grid: Grid, fields: Sequence[FieldEstimate]) -> int:
    bytes_per_cell = GRID_BYTES_PER_CELL
    if plan.terrain.obstacles is not None:
        bytes_per_cell += OBSTACLE_BYTES_PER_CELL
    if "needed_height" in plan.layers:
        bytes_per_cell += HEIGHT_BYTES_PER_CELL
    of_grid = grid.rows * grid.cols * bytes_per_cell
    # One field is in memory at a time; those that are done lie on disk.
    largest = max((field.window_cells for field in fields), default=0)
    of_fields = largest * FIELD_BYTES_PER_CELL
    return FIXED_BYTES + of_grid + of_fields


def _cells_in_range(grid: Grid, tower: Tower, radius_m: float) -> tuple[int, int]:
    """(cells of the grid within the radius, cells of the window around them)."""
    easting, northing = (
        float(value) for value in grid.from_geographic(tower.latitude, tower.longitude)
    )
    row, col = (float(value) for value in grid.row_col(easting, northing))
    reach = radius_m * local_frame(grid.crs, easting, northing).scale / grid.cell_m
    rows = np.arange(
        max(math.ceil(row - reach), 0), min(math.floor(row + reach), grid.rows - 1) + 1
    )
    half = np.sqrt(np.maximum(reach**2 - (rows - row) ** 2, 0.0))
    first = np.maximum(np.ceil(col - half), 0.0)
    last = np.minimum(np.floor(col + half), grid.cols - 1.0)
    cells = int(np.maximum(last - first + 1.0, 0.0).sum())
    width = int(max(last.max() - first.min() + 1.0, 0.0)) if rows.size else 0
    return cells, rows.size * width
