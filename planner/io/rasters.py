"""Rasters of heights as they lie on disk: what a file states about itself, and windows of it.

A window comes back in metres as float32 with NaN for holes, whatever the file holds: any number
type, scale and offset, a nodata value, a mask or an alpha band, metres or feet. Nothing is read
but the window that is asked for, and nothing is fetched from a network.
"""

import warnings
from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import dataclass, field
from pathlib import Path

import numpy as np
import rasterio
from affine import Affine
from numpy.typing import ArrayLike, NDArray
from pyproj import CRS
from pyproj.exceptions import CRSError
from rasterio.enums import ColorInterp, MaskFlags
from rasterio.errors import NotGeoreferencedWarning, RasterioError
from rasterio.windows import Window

from planner.errors import Problem, TerrainError
from planner.geodesy import horizontal_crs
from planner.units import FOOT_M, US_SURVEY_FOOT_M

METRES_PER_UNIT = {"metre": 1.0, "foot": FOOT_M}
PLAUSIBLE_HEIGHT_M = (-12_000.0, 9_000.0)  # deepest trench and highest summit, rounded outwards

# What programs write for "no height" without declaring it (common practice, no source). No summit
# and no place where a mast can stand has such a height.
_UNDECLARED_HOLES = (-32768.0, -32767.0, -9999.0)
_NO_HEIGHT = 1e30  # the largest float numbers are such codes as well
_STRIP_CELLS = 8_000_000  # cells that are converted at a time


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Raster:
    """What one file states, checked; no heights."""

    path: Path
    driver: str
    crs: CRS  # horizontal part
    crs_name: str
    transform: Affine  # from (col, row) of cell corners to the CRS's coordinates
    rows: int
    cols: int
    data_type: str
    nodata: float | None
    has_holes: bool  # states a nodata value, a mask or an alpha band
    scale: float
    offset: float
    metres_per_unit: float
    vertical_unit: str


def coordinates(
    transform: Affine, col: ArrayLike, row: ArrayLike
) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """(x, y) of places given by column and row of cell corners; any shapes that broadcast."""
    a, b, c, d, e, f = tuple(transform)[:6]
    col, row = np.asarray(col, dtype=float), np.asarray(row, dtype=float)
    return a * col + b * row + c, d * col + e * row + f


@dataclass(slots=True, kw_only=True)
class Tally:
    """What is noticed about the heights while they are read."""

    undeclared: dict[tuple[Path, float], None] = field(default_factory=dict)
    lowest_m: float = np.inf
    highest_m: float = -np.inf

    def warnings(self) -> list[str]:
        """Sentences for the reader."""
        sentences = [
            f"{path.name} states no nodata value; cells that hold {value:g} are taken as holes"
            for path, value in self.undeclared
        ]
        lowest, highest = PLAUSIBLE_HEIGHT_M
        if self.lowest_m < lowest or self.highest_m > highest:
            sentences.append(
                f"the terrain's heights run from {self.lowest_m:,.0f} to {self.highest_m:,.0f} m, "
                f"beyond {lowest:,.0f} to {highest:,.0f} m: check vertical_unit, and whether the "
                "rasters declare their nodata value"
            )
        return sentences


@contextmanager
def _opened(path: Path) -> Iterator[rasterio.io.DatasetReader]:
    """The dataset, with vertical axes reported and without any way to a network."""
    with (
        rasterio.Env(
            GTIFF_REPORT_COMPD_CS="YES",
            CPL_VSIL_CURL_ALLOWED_EXTENSIONS=".none",
            GDAL_VRT_ENABLE_PYTHON="NO",
        ),
        warnings.catch_warnings(),
    ):
        warnings.simplefilter("ignore", NotGeoreferencedWarning)  # told as a problem of our own
        with rasterio.open(path) as dataset:
            yield dataset


def read_raster_facts(path: Path, vertical_unit: str, problems: list[Problem]) -> Raster | None:
    """What ``path`` states, without its heights; None, and the reasons added, if it cannot
    serve."""
    where = str(path)
    if not path.exists():
        problems.append(Problem(where=where, found="no such file"))
        return None
    try:
        with _opened(path) as dataset:
            return _facts(path, dataset, vertical_unit, problems)
    except RasterioError as error:
        kind = "a folder" if path.is_dir() else "a file"
        problems.append(
            Problem(
                where=where,
                found=f"{kind} that cannot be opened as a raster ({_first_line(error)})",
                allowed="any raster that GDAL reads, such as GeoTIFF",
            )
        )
        return None


def _facts(
    path: Path, dataset: rasterio.io.DatasetReader, vertical_unit: str, problems: list[Problem]
) -> Raster | None:
    found: list[Problem] = []

    def wrong(what: str, allowed: str = "", advice: str = "") -> None:
        found.append(Problem(where=str(path), found=what, allowed=allowed, advice=advice))

    if dataset.count == 0:
        wrong(
            f"a container of {len(dataset.subdatasets)} rasters",
            "one raster",
            "Write the one that holds the heights to a file of its own",
        )
        problems.extend(found)
        return None
    with_alpha = dataset.count == 2 and dataset.colorinterp[1] == ColorInterp.alpha
    if dataset.count != 1 and not with_alpha:
        wrong(f"{dataset.count} bands", "one band of heights", "A picture holds no heights")
    elif dataset.colorinterp[0] == ColorInterp.palette:
        wrong("a picture with a colour table", "one band of heights")
    if dataset.dtypes[0].startswith("complex"):
        wrong(f"complex numbers ({dataset.dtypes[0]})", "whole or real numbers")

    crs: CRS | None = None
    if not dataset.crs:
        has_points = bool(dataset.gcps[0])
        wrong(
            "ground control points in place of a CRS" if has_points else "no CRS",
            "a raster with a coordinate reference system",
            "Warp it to a grid first"
            if has_points
            else "If you know which one it is in, write it into the file, for instance with "
            f"'rio edit-info --crs EPSG:32633 {path.name}'",
        )
    else:
        try:
            crs = CRS.from_wkt(dataset.crs.to_wkt(version="WKT2_2019"))
        except CRSError:
            wrong(f"a CRS that cannot be read ({dataset.crs.to_string()[:80]})")
    if crs is not None:
        flat = horizontal_crs(crs)
        if not (flat.is_projected or flat.is_geographic):
            wrong(f"a CRS without a place on the earth ({crs.name})", "projected or geographic")
        if dataset.transform.is_identity:
            wrong("a CRS but no position and cell size", "a georeferenced raster")
        elif dataset.transform.is_degenerate:
            wrong(f"cells without extent ({dataset.transform!r})", "a georeferenced raster")

    metres_per_unit = METRES_PER_UNIT[vertical_unit]
    for stated_by, unit_name, unit_m in _stated_units(crs, dataset.units[0]):
        if abs(unit_m - metres_per_unit) > 1e-5:
            wrong(
                f"{stated_by} in {unit_name}, while the plan says {vertical_unit}",
                advice="Set the plan's vertical unit to the raster's, or correct the raster",
            )
        else:
            metres_per_unit = unit_m
    if found or crs is None:
        problems.extend(found)
        return None
    flags = dataset.mask_flag_enums[0]
    return Raster(
        path=path,
        driver=dataset.driver,
        crs=horizontal_crs(crs),
        crs_name=crs.name,
        transform=dataset.transform,
        rows=dataset.height,
        cols=dataset.width,
        data_type=dataset.dtypes[0],
        nodata=dataset.nodata,
        has_holes=MaskFlags.all_valid not in flags,
        scale=float(dataset.scales[0]),
        offset=float(dataset.offsets[0]),
        metres_per_unit=metres_per_unit,
        vertical_unit=vertical_unit,
    )


def _stated_units(crs: CRS | None, band_unit: str | None) -> Iterator[tuple[str, str, float]]:
    """(what states it, name, metres) of the vertical units that the CRS and the band state."""
    for part in crs.sub_crs_list or [crs] if crs is not None else ():
        for axis in part.axis_info:
            if axis.direction.lower() in ("up", "down"):
                yield "the CRS's vertical axis", axis.unit_name, axis.unit_conversion_factor
    name = (band_unit or "").strip().lower()
    if name in ("m", "metre", "metres", "meter", "meters"):
        yield "the band's heights", name, 1.0
    elif "survey" in name or name in ("us-ft", "ft-us", "ftus", "sft"):
        yield "the band's heights", name, US_SURVEY_FOOT_M
    elif name in ("ft", "foot", "feet", "international foot"):
        yield "the band's heights", name, FOOT_M
    elif name in ("cm", "centimetre", "centimeter"):
        yield "the band's heights", name, 0.01
    elif name in ("dm", "decimetre", "decimeter"):
        yield "the band's heights", name, 0.1


def read_heights_m(
    raster: Raster, top: int, left: int, rows: int, cols: int, tally: Tally
) -> NDArray[np.float32]:
    """Heights [rows, cols] in metres of a window that lies inside the raster; NaN where it has
    none.

    Raises TerrainError where the file is damaged.
    """
    heights = np.empty((rows, cols), dtype=np.float32)
    strip_rows = max(_STRIP_CELLS // max(cols, 1), 1)
    try:
        with _opened(raster.path) as dataset:
            for start in range(0, rows, strip_rows):
                height = min(strip_rows, rows - start)
                read = dataset.read(
                    1, window=Window(left, top + start, cols, height), masked=raster.has_holes
                )
                heights[start : start + height] = _in_metres(raster, read, tally)
    except RasterioError as error:
        raise TerrainError(
            Problem(
                where=str(raster.path),
                found=f"a damaged raster: its heights cannot be read ({_first_line(error)})",
                advice="Copy or download it again",
            )
        ) from error
    return heights


def _in_metres(raster: Raster, read: NDArray[np.generic], tally: Tally) -> NDArray[np.float32]:
    with np.errstate(over="ignore", invalid="ignore"):
        heights = np.array(np.ma.getdata(read), dtype=np.float32)
        if not np.issubdtype(read.dtype, np.integer):
            heights[~(np.abs(heights) < _NO_HEIGHT)] = np.nan
        if raster.has_holes:
            heights[np.ma.getmaskarray(read)] = np.nan
        elif not np.issubdtype(read.dtype, np.unsignedinteger):
            for code in _UNDECLARED_HOLES:
                holes = heights == code
                if holes.any():
                    heights[holes] = np.nan
                    tally.undeclared[raster.path, code] = None
    if raster.scale != 1.0 or raster.offset != 0.0 or raster.metres_per_unit != 1.0:
        heights *= raster.scale * raster.metres_per_unit
        heights += raster.offset * raster.metres_per_unit
    if heights.size:
        tally.lowest_m = min(tally.lowest_m, float(np.fmin.reduce(heights, axis=None)))
        tally.highest_m = max(tally.highest_m, float(np.fmax.reduce(heights, axis=None)))
    return heights


def _first_line(error: Exception) -> str:
    """The first line of an error or of what lies behind it."""
    text = str(error.__cause__ or error).strip() or type(error).__name__
    return text.splitlines()[0][:200]
