"""The layers of a run as files: names, descriptions, units, tags, colours."""

from collections.abc import Callable, Iterator, Mapping, Sequence
from contextlib import ExitStack
from dataclasses import dataclass
from pathlib import Path
from types import TracebackType
from typing import Any, Self

import numpy as np
from numpy.typing import NDArray

from planner import __version__
from planner.coverage import SIGHT_UNKNOWN, STEP_M, UNKNOWN, Coverage, line_of_sight_class
from planner.handout.colours import SIGHT_COLOURS, rgb
from planner.io.geotiff import TILE_CELLS, Colour, LayerWriter, open_layer
from planner.network import Sector
from planner.plan.read import Plan
from planner.sweep import PathField
from planner.terrain import Grid, Terrain

MODEL = (
    "free space ITU-R P.525-4 + delta-Bullington diffraction ITU-R P.526-15, "
    "smooth surface ITU-R P.1812-7"
)

BAND_ROWS = 4 * TILE_CELLS  # bands of rows in which layers are made and written
STEPS_PER_DB = 256  # in files; rounding down to 1/256 dB saves 40 to 60 %, see planner.io.geotiff
_ROUNDED = {"ROUNDING": f"values are rounded down to a multiple of 1/{STEPS_PER_DB} dB"}
SIGHT_NAMES = (
    "no path is known",
    "blocked",
    "line free, less than 60 % of the first Fresnel zone",
    "60 % of the first Fresnel zone free",
    "first Fresnel zone free",
)


def layer_tags(plan: Plan, sectors: Sequence[Sector]) -> dict[str, str]:
    """What every GeoTIFF says about how it was made."""
    frequencies = sorted({sector.radio.frequency_mhz for sector in sectors})
    return {
        "SOFTWARE": f"ptmp-planner {__version__}",
        "PLAN": plan.name,
        "PLAN_SHA256": plan.hash,
        "MODEL": MODEL,
        "FREQUENCY_MHZ": ", ".join(f"{frequency:g}" for frequency in frequencies),
        "K_FACTOR": f"{plan.k_factor:g}",
        "POLARIZATION": plan.polarization,
        "RECEIVER_HEIGHT_M": f"{plan.terminal.antenna_height_m:g}",
        "RADIUS_M": f"{plan.radius_m:g}",
        "CAUTION": "a prediction, not a licence, a survey or a promise",
    }


class CoverageWriters:
    """The coverage layers that a plan asks for, written band of rows by band of rows.

    A context manager: leaving it finishes every layer, an exception inside leaves no new file.
    """

    def __init__(self, folder: Path, plan: Plan, grid: Grid, sectors: Sequence[Sector]) -> None:
        self._folder = folder
        self._wanted = [name for name in _COVERAGE_LAYERS if name in plan.layers]
        self._grid = grid
        self._sectors = sectors
        self._tags = layer_tags(plan, sectors)
        self._open = ExitStack()
        self._layers: dict[str, LayerWriter] = {}

    @property
    def files(self) -> list[str]:
        """Names of the files, in the order of the documentation."""
        return [f"{name}.tif" for name in self._wanted]

    def __enter__(self) -> Self:
        with ExitStack() as stack:
            for name in self._wanted:
                kind = _COVERAGE_LAYERS[name]
                layer = open_layer(
                    self._folder / f"{name}.tif",
                    self._grid,
                    dtype=kind.dtype,
                    description=kind.description,
                    unit=kind.unit,
                    nodata=kind.nodata,
                    tags={**self._tags, **kind.tags},
                )
                self._layers[name] = stack.enter_context(layer)
            self._open = stack.pop_all()
        if "line_of_sight" in self._layers:
            self._layers["line_of_sight"].name_classes(SIGHT_NAMES, _opaque(SIGHT_COLOURS))
        return self

    def __exit__(
        self,
        kind: type[BaseException] | None,
        error: BaseException | None,
        trace: TracebackType | None,
    ) -> bool | None:
        return self._open.__exit__(kind, error, trace)

    def write_rows(self, row_start: int, coverage: Coverage) -> None:
        """Add the band of the grid's rows that starts at ``row_start``; in order, no gaps."""
        for name, layer in self._layers.items():
            layer.write_rows(row_start, _COVERAGE_LAYERS[name].values(coverage))

    def colour_sectors(self, colours: Sequence[str]) -> None:
        """The sectors' colours as #rrggbb, in plan order; any time before the end."""
        if "best_server" in self._layers:
            names = ["none above the threshold", *(sector.id for sector in self._sectors)]
            table = {0: (0, 0, 0, 0), **_opaque(dict(enumerate(colours, start=1)))}
            self._layers["best_server"].name_classes(names, table)


def write_path_loss(folder: Path, name: str, plan: Plan, terrain: Terrain, field: PathField) -> str:
    """Write one path field, on the whole grid like the other layers; the file's name.

    Only a band of the field's rows is read at a time, so that it may be mapped from disk.
    """
    grid = terrain.grid
    rows, cols = field.path_loss_db.shape
    window = slice(field.col_start, field.col_start + cols)
    with open_layer(
        folder / name,
        grid,
        dtype=np.float32,
        description=f"path loss from an antenna {field.antenna_height_m:g} m above ground "
        f"at {field.frequency_mhz:g} MHz",
        unit="dB",
        nodata=float("nan"),
        tags={
            **layer_tags(plan, []),
            "FREQUENCY_MHZ": f"{field.frequency_mhz:g}",
            "ANTENNA_HEIGHT_M": f"{field.antenna_height_m:g}",
            **_ROUNDED,
        },
    ) as layer:
        for start, stop in row_bands(grid.rows):
            band = np.full((stop - start, grid.cols), np.nan, dtype=np.float32)
            first = max(start, field.row_start)
            last = min(stop, field.row_start + rows)
            if first < last:
                part = slice(first - field.row_start, last - field.row_start)
                band[first - start : last - start, window] = stored_db(field.path_loss_db[part])
            layer.write_rows(start, band)
    return name


def write_needed_height(
    folder: Path,
    plan: Plan,
    grid: Grid,
    served: NDArray[np.uint16],
    served_and_free: NDArray[np.uint16],
) -> str:
    """Write the needed heights, given in steps as by ``needed_heights``; the file's name."""
    name = "needed_height.tif"
    codes = "-1 no path known, 0 not within the limit"
    with open_layer(
        folder / name,
        grid,
        dtype=np.int16,
        description=(
            f"lowest antenna height above ground that is served, decimetres; {codes}",
            f"the same with 60 % of the first Fresnel zone free, decimetres; {codes}",
        ),
        unit="dm",
        nodata=-1,
        tags={
            **layer_tags(plan, plan.sectors),
            "HEIGHT_STEP_M": f"{STEP_M:g}",
            "HEIGHT_LIMIT_M": f"{plan.needed_height_limit_m:g}",
        },
    ) as layer:
        for start, stop in row_bands(grid.rows):
            layer.write_rows(
                start, np.stack([_decimetres(a[start:stop]) for a in (served, served_and_free)])
            )
    return name


def _decimetres(steps: NDArray[np.uint16]) -> NDArray[np.int16]:
    per_step = round(STEP_M * 10.0)
    return np.where(steps == UNKNOWN, -1, steps.astype(np.int32) * per_step).astype(np.int16)


def row_bands(rows: int) -> Iterator[tuple[int, int]]:
    """(start, stop) of the bands in which layers are made and written."""
    for start in range(0, rows, BAND_ROWS):
        yield start, min(start + BAND_ROWS, rows)


def stored_db(level: NDArray[np.float32]) -> NDArray[np.float32]:
    """Decibels as they stand in a file: rounded down to a multiple of 1/256 dB; NaN stays NaN.

    A level at or above a limit that is itself such a multiple, as -75 or -82.5 dBm, stays so, and
    one below it stays below.
    """
    stored = level * np.float32(STEPS_PER_DB)
    np.floor(stored, out=stored)
    stored *= np.float32(1.0 / STEPS_PER_DB)
    return stored


def _opaque(colours: Mapping[int, str]) -> dict[int, Colour]:
    return {value: (*rgb(colour), 255) for value, colour in colours.items()}


@dataclass(frozen=True, slots=True, kw_only=True)
class _Kind:
    """A coverage layer as a file."""

    dtype: type[np.generic]
    description: str
    unit: str
    nodata: float
    tags: Mapping[str, str]
    values: Callable[[Coverage], NDArray[Any]]


_COVERAGE_LAYERS = {
    "received_signal": _Kind(
        dtype=np.float32,
        description="received signal of the best server at the terminal's port",
        unit="dBm",
        nodata=float("nan"),
        tags=_ROUNDED,
        values=lambda coverage: stored_db(coverage.received_signal_dbm),
    ),
    "best_server": _Kind(
        dtype=np.int16,
        description="best server: -1 no data, 0 none above the threshold, sectors from 1",
        unit="",
        nodata=-1,
        tags={},
        values=lambda coverage: coverage.best_server,
    ),
    "server_margin": _Kind(
        dtype=np.float32,
        description="best server less second best of another sector, "
        "terminal equally sensitive in all directions",
        unit="dB",
        nodata=float("nan"),
        tags=_ROUNDED,
        values=lambda coverage: stored_db(coverage.server_margin_db),
    ),
    "line_of_sight": _Kind(
        dtype=np.uint8,
        description="line of sight to the mast that is seen best, by the clearance of the first "
        "Fresnel zone",
        unit="",
        nodata=SIGHT_UNKNOWN,
        tags={},
        values=lambda coverage: line_of_sight_class(coverage.fresnel_clearance_ratio),
    ),
    "fresnel_clearance": _Kind(
        dtype=np.float32,
        description="worst clearance on the path to the mast that is seen best, in radii of the "
        "first Fresnel zone; 0 or less: blocked",
        unit="1",
        nodata=float("nan"),
        tags={},
        values=lambda coverage: coverage.fresnel_clearance_ratio,
    ),
}
