"""One path field as a unit of work: facts that can be written down, and a file that they name.

A :class:`PathFieldTask` can be sent as JSON to any machine that sees the same rasters;
:func:`run_task` leaves one file there, whose name is the key of its content. A run of the plan that
finds that file in its store uses it.
"""

from collections.abc import Callable
from dataclasses import dataclass, replace
from pathlib import Path
from typing import Any, ClassVar

from pydantic import ConfigDict, TypeAdapter, ValidationError

from planner.errors import InputError, OutputError, Problem
from planner.io.path_store import PathStore
from planner.io.terrain_files import TerrainSource, read_terrain
from planner.network import Sector, Tower
from planner.physics.diffraction import Polarization
from planner.plan.read import Plan
from planner.sweep import PathField, path_field, path_field_key, seen_part, seen_window
from planner.terrain import Terrain

Progress = Callable[[int, int], None]  # done, total


@dataclass(frozen=True, slots=True, kw_only=True)
class PathFieldTask:
    """One path field to compute, and the terrain to compute it on, as facts.

    The terrain is named by its rasters and by what lays out the grid. A field depends on the
    heights and on the cells' lattice around its own mast alone.
    """

    __pydantic_config__: ClassVar = ConfigDict(extra="forbid", allow_inf_nan=False)

    terrain: TerrainSource
    places: tuple[tuple[float, float], ...]  # latitude, longitude of all masts on the grid
    cell_m: float | None  # None: the terrain's own
    grid_crs: str | None  # None: chosen from the terrain
    latitude: float  # of the field's mast, WGS 84
    longitude: float
    antenna_height_m: float  # above the ground under the mast
    receiver_height_m: float  # above the ground of each cell
    frequency_mhz: float
    radius_m: float
    k_factor: float
    polarization: Polarization
    obstacle_clearing_m: float

    def to_json(self) -> str:
        """The task as JSON; :meth:`from_json` gives the same task back."""
        return _adapter().dump_json(self).decode()

    @classmethod
    def from_json(cls, text: str) -> "PathFieldTask":
        """The task that JSON holds; InputError with everything that is wrong with it."""
        try:
            return _adapter().validate_json(text, strict=True)
        except ValidationError as error:
            raise InputError(
                Problem(
                    where=".".join(["path field task", *map(str, detail["loc"])]),
                    found=repr(detail["input"])[:80],
                    allowed=detail["msg"],
                )
                for detail in error.errors(include_url=False)
            ) from error

    def key(self, terrain: Terrain) -> str:
        """The key of the field on a terrain that has been read for this task or its plan."""
        return path_field_key(terrain, **self._settings())

    def _settings(self) -> dict[str, Any]:
        """The arguments of ``path_field`` besides the terrain."""
        return {
            "latitude": self.latitude,
            "longitude": self.longitude,
            "antenna_height_m": self.antenna_height_m,
            "receiver_height_m": self.receiver_height_m,
            "frequency_mhz": self.frequency_mhz,
            "radius_m": self.radius_m,
            "k_factor": self.k_factor,
            "polarization": self.polarization,
            "obstacle_clearing_m": self.obstacle_clearing_m,
        }


def _adapter() -> TypeAdapter[PathFieldTask]:
    return TypeAdapter(PathFieldTask)


def field_key(sector: Sector) -> tuple[float, float]:
    """What a path field depends on within one tower: antenna height and frequency."""
    return sector.antenna_height_m, sector.radio.frequency_mhz


def tower_tasks(plan: Plan, tower: Tower) -> dict[tuple[float, float], PathFieldTask]:
    """The path fields that a tower's sectors need, by :func:`field_key`."""
    places = tuple((other.latitude, other.longitude) for other in plan.towers if other.sectors)
    return {
        (height_m, frequency_mhz): PathFieldTask(
            terrain=plan.terrain,
            places=places,
            cell_m=plan.cell_m,
            grid_crs=plan.grid_crs,
            latitude=tower.latitude,
            longitude=tower.longitude,
            antenna_height_m=height_m,
            receiver_height_m=plan.terminal.antenna_height_m,
            frequency_mhz=frequency_mhz,
            radius_m=plan.radius_m,
            k_factor=plan.k_factor,
            polarization=plan.polarization,
            obstacle_clearing_m=plan.obstacle_clearing_m,
        )
        for height_m, frequency_mhz in dict.fromkeys(map(field_key, tower.sectors))
    }


def run_task(task: PathFieldTask, store_folder: Path) -> Path:
    """Compute the task's field unless the store has it; the file that holds it.

    Raises TerrainError for rasters that cannot serve and OutputError where the store cannot be
    written.
    """
    terrain = read_terrain(
        task.terrain, task.places, task.radius_m, cell_m=task.cell_m, crs=task.grid_crs
    )
    store = PathStore(store_folder)
    key = task.key(terrain)
    if kept_field(task, key, terrain, store) is None:
        computed_field(task, key, terrain, store)
    return store.path(key)


def kept_field(
    task: PathFieldTask, key: str, terrain: Terrain, store: PathStore
) -> PathField | None:
    """The field that the store has under the task's key, in rows and columns of the terrain."""
    field = store.load(key)
    if field is None:
        return None
    rows, cols = seen_window(
        terrain, latitude=task.latitude, longitude=task.longitude, radius_m=task.radius_m
    )
    return replace(
        field,
        row_start=field.row_start + rows.start,
        col_start=field.col_start + cols.start,
        mast_row=field.mast_row + rows.start,
        mast_col=field.mast_col + cols.start,
    )


def computed_field(
    task: PathFieldTask,
    key: str,
    terrain: Terrain,
    store: PathStore,
    progress: Progress | None = None,
) -> PathField:
    """Compute the task's field, keep it, and return it as the store has it.

    So no more than one field is held in memory, and a field that is computed is the same as one
    that is used again, to the last bit. Raises OutputError where the store cannot be written.
    """
    store.make_ready()
    part = seen_part(
        terrain, latitude=task.latitude, longitude=task.longitude, radius_m=task.radius_m
    )
    store.save(key, path_field(part, progress=progress, **task._settings()))
    field = kept_field(task, key, terrain, store)
    if field is None:
        raise OutputError(f"{store.path(key)}: the path field written here cannot be read back")
    return field
