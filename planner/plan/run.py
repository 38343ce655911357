"""The whole job without a command line: plan in; layers, customer table, map and record out."""

import json
import time
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from planner import __version__
from planner.customers import CustomerAnswer, check_customers
from planner.errors import PlanError, Problem
from planner.handout.offline_map import write_offline_map
from planner.io.atomic import replaced
from planner.io.customer_files import read_customer_list, write_customers_csv, write_customers_gpkg
from planner.io.path_store import PathStore
from planner.io.terrain_files import read_terrain
from planner.network import Customer, Tower
from planner.plan.checks import PATH_FIELDS_FOLDER, clashes
from planner.plan.layers import (
    TowerFields,
    sector_gain_table,
    write_layers,
    write_needed_heights,
    write_path_losses,
)
from planner.plan.path_tasks import (
    PathFieldTask,
    computed_field,
    field_key,
    kept_field,
    tower_tasks,
)
from planner.plan.read import Plan
from planner.plan.record import input_files, run_record
from planner.sweep import PathField, load_kernels
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
    cannot be written. Every file is written beside its target and renamed into place. Path fields
    are kept in the output folder as they are computed; a later run, also after this one was
    interrupted, uses those that still hold.
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
    with stages.stage("compiled code, once per machine up to half a minute"):
        load_kernels()
    store = PathStore(folder / PATH_FIELDS_FOLDER)
    fields, path_fields = _path_fields(plan, terrain, towers, store, stages)
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
    aimed = [
        [(sector, sector_gain_table(plan, sector)) for sector in tower.sectors] for tower in towers
    ]
    with stages.stage("layers") as report:
        items = [
            (fields[tower.id][field_key(sector)], sector, table)
            for tower, own in zip(towers, aimed, strict=True)
            for sector, table in own
        ]
        layers = write_layers(folder, plan, terrain, items, report)
    files = list(layers.files)
    if "path_loss" in plan.layers:
        with stages.stage("write path loss"):
            files += write_path_losses(folder, plan, terrain, fields)
    if "needed_height" in plan.layers:
        with stages.stage("needed heights") as report:
            files.append(write_needed_heights(folder, plan, terrain, towers, aimed, report))
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
    store.prune()
    record = run_record(
        plan,
        terrain,
        layers.counts,
        answers,
        stages.seconds,
        [*files, "run.json"],
        path_fields,
        (*notes, *store.warnings),
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


def _path_fields(
    plan: Plan, terrain: Terrain, towers: tuple[Tower, ...], store: PathStore, stages: _Stages
) -> tuple[dict[str, TowerFields], list[dict[str, Any]]]:
    """Every tower's path fields, from the store as far as it has them, and what to record."""
    tasks = {tower.id: tower_tasks(plan, tower) for tower in towers}
    keys: dict[PathFieldTask, str] = {}
    kept: dict[PathFieldTask, PathField] = {}
    with stages.stage("look up path fields") as report:
        for number, tower in enumerate(towers):
            report(number / len(towers))
            for task in tasks[tower.id].values():
                keys[task] = task.key(terrain)
                field = kept_field(task, keys[task], terrain, store)
                if field is not None:
                    kept[task] = field
    fields = {}
    for tower in towers:
        reused = all(task in kept for task in tasks[tower.id].values())
        with stages.stage(f"path field {tower.id}{' reused' if reused else ''}") as report:
            fields[tower.id] = _tower_fields(tasks[tower.id], keys, kept, terrain, store, report)
    record = [
        {
            "tower": tower.id,
            "antenna_height_m": height_m,
            "frequency_mhz": frequency_mhz,
            "source": "reused" if task in kept else "computed",
            "file": f"{PATH_FIELDS_FOLDER}/{store.path(keys[task]).name}",
        }
        for tower in towers
        for (height_m, frequency_mhz), task in tasks[tower.id].items()
    ]
    return fields, record


def _tower_fields(
    tasks: dict[tuple[float, float], PathFieldTask],
    keys: dict[PathFieldTask, str],
    kept: dict[PathFieldTask, PathField],
    terrain: Terrain,
    store: PathStore,
    report: Callable[[float], None],
) -> TowerFields:
    fields = {}
    for number, (height_and_frequency, task) in enumerate(tasks.items()):

        def report_portion(done: int, total: int, before: int = number) -> None:
            report((before + done / total) / len(tasks))

        field = kept.get(task)
        if field is None:
            field = computed_field(task, keys[task], terrain, store, report_portion)
        fields[height_and_frequency] = field
    return fields
