"""The layers of a run: combined band of rows by band of rows, written, and kept for the map."""

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from functools import reduce
from operator import add
from pathlib import Path

import numpy as np

from planner.antenna import GainTable, gain_table
from planner.coverage import UNKNOWN, CellCounts, combine, needed_heights
from planner.handout.colours import sector_colours
from planner.handout.map_cells import MapCells
from planner.handout.mercator import mercator_view
from planner.io.path_store import release_pages
from planner.network import Sector, Tower
from planner.plan.outputs import (
    CoverageWriters,
    row_bands,
    write_needed_height,
    write_path_loss,
)
from planner.plan.path_tasks import field_key
from planner.plan.read import Plan
from planner.sweep import PathField
from planner.terrain import Terrain

TowerFields = dict[tuple[float, float], PathField]  # by antenna height and frequency


@dataclass(frozen=True, slots=True, kw_only=True)
class WrittenLayers:
    """What is left of the layers once they are written."""

    counts: CellCounts
    cells: MapCells
    colours: tuple[str, ...]  # of the sectors, in plan order
    files: list[str]


def write_layers(
    folder: Path,
    plan: Plan,
    terrain: Terrain,
    items: Sequence[tuple[PathField, Sector, GainTable]],
    report: Callable[[float], None],
) -> WrittenLayers:
    """Combine the sectors band by band of rows; each band goes to the files and to the map."""
    grid = terrain.grid
    cells = MapCells(mercator_view(grid), grid)
    counts = []
    with CoverageWriters(folder, plan, grid, plan.sectors) as writers:
        for start, stop in row_bands(grid.rows):
            band = combine(grid.rows, grid.cols, items, plan.terminal, rows=(start, stop))
            writers.write_rows(start, band)
            cells.take_rows(start, band)
            counts.append(band.counts)
            for field, _, _ in items:
                release_pages(field)
            report(0.9 * stop / grid.rows)  # overviews take the rest
        # Neighbours among the cells that are shown: files and map have the same colours.
        colours = sector_colours(cells.best_server, len(plan.sectors))
        writers.colour_sectors(colours)
    return WrittenLayers(
        counts=reduce(add, counts), cells=cells, colours=colours, files=writers.files
    )


def sector_gain_table(plan: Plan, sector: Sector) -> GainTable:
    """The sector's mounted antenna as a table."""
    return gain_table(
        plan.patterns[sector.id],
        azimuth_deg=sector.azimuth_deg,
        mechanical_downtilt_deg=sector.mechanical_downtilt_deg,
        electrical_downtilt_deg=sector.electrical_downtilt_deg,
    )


def write_path_losses(
    folder: Path,
    plan: Plan,
    terrain: Terrain,
    fields: dict[str, TowerFields],
) -> list[str]:
    """One file per tower; a further height or frequency on it gets a file that says which."""
    names = []
    for tower_id, by_key in fields.items():
        for number, ((height_m, frequency_mhz), field) in enumerate(by_key.items()):
            name = f"path_loss_{tower_id}"
            if number > 0:
                name += f"_{height_m:g}m_{frequency_mhz:g}mhz"
            names.append(write_path_loss(folder, f"{name}.tif", plan, terrain, field))
            release_pages(field)
    return names


def write_needed_heights(
    folder: Path,
    plan: Plan,
    terrain: Terrain,
    towers: Sequence[Tower],
    aimed: Sequence[Sequence[tuple[Sector, GainTable]]],
    report: Callable[[float], None],
) -> str:
    """Find and write the needed heights; ``aimed`` are the towers' sectors. Returns the file."""
    shape = (terrain.grid.rows, terrain.grid.cols)
    served = np.full(shape, UNKNOWN, dtype=np.uint16)
    served_and_free = np.full(shape, UNKNOWN, dtype=np.uint16)
    alike = [
        (tower, [item for item in own if field_key(item[0]) == key])
        for tower, own in zip(towers, aimed, strict=True)
        for key in dict.fromkeys(field_key(sector) for sector, _ in own)
    ]
    for number, (tower, own) in enumerate(alike):

        def report_portion(done: int, total: int, before: int = number) -> None:
            report(0.95 * (before + done / total) / len(alike))

        needed_heights(
            terrain,
            own,
            plan.terminal,
            latitude=tower.latitude,
            longitude=tower.longitude,
            limit_m=plan.needed_height_limit_m,
            radius_m=plan.radius_m,
            k_factor=plan.k_factor,
            polarization=plan.polarization,
            obstacle_clearing_m=plan.obstacle_clearing_m,
            served=served,
            served_and_free=served_and_free,
            progress=report_portion,
        )
    return write_needed_height(folder, plan, terrain.grid, served, served_and_free)
