"""The whole job without a command line: plan in; layers, customer table, map and record out."""

import json
import time
from collections.abc import Callable, Iterator, Sequence
from contextlib import contextmanager
from dataclasses import dataclass
from functools import reduce
from operator import add
from pathlib import Path
from typing import Any

from planner import __version__
from planner.antenna import GainTable, gain_table
from planner.coverage import CellCounts, combine
from planner.customers import CustomerAnswer, check_customers
from planner.errors import PlanError, Problem
from planner.handout.colours import sector_colours
from planner.handout.map_cells import MapCells
from planner.handout.mercator import mercator_view
from planner.handout.offline_map import write_offline_map
from planner.io.atomic import replaced
from planner.io.customer_files import read_customer_list, write_customers_csv, write_customers_gpkg
from planner.io.terrain_files import read_terrain
from planner.network import Customer, Sector, Tower
from planner.plan.checks import clashes
from planner.plan.outputs import CoverageWriters, row_bands, write_path_loss
from planner.plan.read import Plan
from planner.plan.record import input_files, run_record
from planner.sweep import PathField, path_field
from planner.terrain import Terrain

Progress = Callable[[str, float], None]  # what is being done, share done from 0 to 1


@dataclass(frozen=True, slots=True, kw_only=True)
class RunResult:
    """What a run did: the record as it stands in run.json, and whether all demands were met."""

    folder: Path
    record: dict[str, Any]
    demands_met: bool  # False: a sector above its EIRP limit


class _Stages:
    """Names and durations of the stages, and the progress that they report."""

    def __init__(self, progress: Progress | None) -> None:
        self.seconds: list[dict[str, Any]] = []
        self._progress = progress

    @contextmanager
    def stage(self, name: str) -> Iterator[Callable[[float], None]]:
        def report(share: float) -> None:
            if self._progress is not None:
                self._progress(name, share)

        report(0.0)
        start = time.perf_counter()
        yield report
        self.seconds.append({"name": name, "seconds": round(time.perf_counter() - start, 3)})
        report(1.0)


def run_plan(
    plan: Plan, *, folder: Path | None = None, progress: Progress | None = None
) -> RunResult:
    """Compute everything that the plan asks for and write it into the output folder.

    Raises InputError for wrong inputs, before anything is written, and OutputError where a file
    cannot be written. Every file is written beside its target and renamed into place.
    """
    folder = plan.output_folder if folder is None else folder
    stages = _Stages(progress)
    towers = tuple(tower for tower in plan.towers if tower.sectors)
    _refuse_overwriting(plan, folder)
    customers: tuple[Customer, ...] = ()
    notes: tuple[str, ...] = ()
    if plan.customers_file is not None:
        with stages.stage("read customers"):
            customer_list = read_customer_list(plan.customers_file)
            customers, notes = customer_list.customers, customer_list.notes
    with stages.stage("read terrain") as report:
        terrain = read_terrain(
            plan.terrain,
            [(tower.latitude, tower.longitude) for tower in towers],
            plan.radius_m,
            cell_m=plan.cell_m,
            crs=plan.grid_crs,
            names=[tower.id for tower in towers],
            progress=report,
        )
    fields = {}
    for tower in towers:
        with stages.stage(f"path field {tower.id}") as report:
            fields[tower.id] = _tower_fields(plan, terrain, tower, report)
    answers: tuple[CustomerAnswer, ...] = ()
    if customers:
        with stages.stage("check customers") as report:
            answers = check_customers(
                terrain,
                towers,
                plan.patterns,
                plan.terminal,
                customers,
                radius_m=plan.radius_m,
                k_factor=plan.k_factor,
                polarization=plan.polarization,
                obstacle_clearing_m=plan.obstacle_clearing_m,
                progress=lambda done, total: report(done / total),
            )
    with stages.stage("layers") as report:
        items = [
            (fields[tower.id][field_key(sector)], sector, _gain_table(plan, sector))
            for tower in towers
            for sector in tower.sectors
        ]
        layers = _write_layers(folder, plan, terrain, items, report)
    files = list(layers.files)
    if "path_loss" in plan.layers:
        with stages.stage("write path loss"):
            files += _write_path_losses(folder, plan, terrain, fields)
    if plan.customers_file is not None:
        with stages.stage("write customers"):
            write_customers_csv(folder / "customers.csv", answers)
            write_customers_gpkg(folder / "customers.gpkg", answers, plan.magnetic_date)
            files += ["customers.csv", "customers.gpkg"]
    with stages.stage("write map"):
        write_offline_map(
            folder / "map.html",
            title=plan.name,
            terrain=terrain,
            cells=layers.cells,
            colours=layers.colours,
            towers=towers,
            patterns=plan.patterns,
            answers=answers,
            version=__version__,
            online_base_map=plan.online_base_map,
        )
        files.append("map.html")
    record = run_record(
        plan, terrain, layers.counts, answers, stages.seconds, [*files, "run.json"], notes
    )
    with replaced(folder / "run.json") as target:
        target.write_text(json.dumps(record, indent=2, ensure_ascii=False) + "\n", encoding="utf-8")
    return RunResult(folder=folder, record=record, demands_met=not record["eirp_above_limit"])


def _refuse_overwriting(plan: Plan, folder: Path) -> None:
    """Results may not replace what they are made from, wherever --out points."""
    hit = clashes(folder, input_files(plan))
    if hit:
        raise PlanError(
            Problem(
                where=str(path),
                found="an input that a result would overwrite",
                advice="Choose another output folder or rename the input",
            )
            for path in hit
        )


def field_key(sector: Sector) -> tuple[float, float]:
    """What a path field depends on within one tower: antenna height and frequency."""
    return sector.antenna_height_m, sector.radio.frequency_mhz


def _tower_fields(
    plan: Plan, terrain: Terrain, tower: Tower, report: Callable[[float], None]
) -> dict[tuple[float, float], PathField]:
    keys = list(dict.fromkeys(field_key(sector) for sector in tower.sectors))
    fields = {}

    for number, (height_m, frequency_mhz) in enumerate(keys):

        def report_portion(done: int, total: int, before: int = number) -> None:
            report((before + done / total) / len(keys))

        fields[height_m, frequency_mhz] = path_field(
            terrain,
            latitude=tower.latitude,
            longitude=tower.longitude,
            antenna_height_m=height_m,
            receiver_height_m=plan.terminal.antenna_height_m,
            frequency_mhz=frequency_mhz,
            radius_m=plan.radius_m,
            k_factor=plan.k_factor,
            polarization=plan.polarization,
            obstacle_clearing_m=plan.obstacle_clearing_m,
            progress=report_portion,
        )
    return fields


@dataclass(frozen=True, slots=True, kw_only=True)
class _Layers:
    """What is left of the layers once they are written."""

    counts: CellCounts
    cells: MapCells
    colours: tuple[str, ...]  # of the sectors, in plan order
    files: list[str]


def _write_layers(
    folder: Path,
    plan: Plan,
    terrain: Terrain,
    items: Sequence[tuple[PathField, Sector, GainTable]],
    report: Callable[[float], None],
) -> _Layers:
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
            report(0.9 * stop / grid.rows)  # overviews take the rest
        # Neighbours among the cells that are shown: files and map have the same colours.
        colours = sector_colours(cells.best_server, len(plan.sectors))
        writers.colour_sectors(colours)
    return _Layers(counts=reduce(add, counts), cells=cells, colours=colours, files=writers.files)


def _gain_table(plan: Plan, sector: Sector) -> GainTable:
    return gain_table(
        plan.patterns[sector.id],
        azimuth_deg=sector.azimuth_deg,
        mechanical_downtilt_deg=sector.mechanical_downtilt_deg,
        electrical_downtilt_deg=sector.electrical_downtilt_deg,
    )


def _write_path_losses(
    folder: Path,
    plan: Plan,
    terrain: Terrain,
    fields: dict[str, dict[tuple[float, float], PathField]],
) -> list[str]:
    """One file per tower; a further height or frequency on it gets a file that says which."""
    names = []
    for tower_id, by_key in fields.items():
        for number, ((height_m, frequency_mhz), field) in enumerate(by_key.items()):
            name = f"path_loss_{tower_id}"
            if number > 0:
                name += f"_{height_m:g}m_{frequency_mhz:g}mhz"
            names.append(write_path_loss(folder, f"{name}.tif", plan, terrain, field))
    return names
