"""Terrain from rasters on disk: what they are, the grid that a plan gets, and the heights on it.

The grid
    A single lattice of rasters (one file, or tiles that fit together) whose CRS is projected,
    conformal and in metres, with square north-up cells and a scale within 0.999 to 1.001 over the
    area, is used as it is, unresampled. Everything else, and a plan that names another cell or CRS,
    is resampled to UTM (UPS beyond 84 N and 80 S) of the middle of the towers, or to the CRS named.
    The grid reaches as far as radius and data do, and nothing beyond it is read.

What is refused, with every problem at once: a file that is no raster of heights, one without CRS,
units that contradict the plan, a tower off the rasters or on a hole, a grid beyond
``terrain_grid.LARGEST_GRID_CELLS``.
"""

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from planner.errors import Problem, TerrainError
from planner.geodesy import transformer_to_wgs84, true_bearing_and_distance
from planner.io.rasters import Raster, Tally, coordinates, read_raster_facts
from planner.io.resample import averaged_block, heights_as_they_are, heights_on_grid
from planner.io.terrain_grid import Layout, centre_name, terrain_layout
from planner.terrain import Grid, Kind, Terrain, fill_small_holes

VerticalUnit = Literal["metre", "foot"]


@dataclass(frozen=True, slots=True, kw_only=True)
class TerrainSource:
    """The rasters of a plan and how to read them."""

    rasters: tuple[Path, ...]  # one or many; the first counts first
    vertical_unit: VerticalUnit = "metre"  # of the heights in the rasters
    kind: Kind = "ground"  # "surface": the heights already contain trees and roofs
    obstacles: Path | None = None  # heights above ground
    obstacle_unit: VerticalUnit = "metre"  # of the heights in the obstacle raster
    fill_holes_up_to_cells: int = 0  # 0: holes stay
    lowering_radius_m: float = 0.0  # see Terrain.standing_elevation_m


@dataclass(frozen=True, slots=True, kw_only=True)
class RasterDescription:
    """One raster in a few words; ``str()`` gives a sentence."""

    file: str
    role: Literal["heights", "obstacles"]
    format: str  # GDAL's short name
    crs: str  # name
    epsg: int | None
    rows: int
    cols: int
    cell_east_m: float  # true size of the cell in the middle of the raster
    cell_north_m: float
    data_type: str
    nodata: float | None
    vertical_unit: str
    south: float  # bounds, WGS 84; west is larger than east where it spans the 180th meridian
    west: float
    north: float
    east: float

    def __str__(self) -> str:
        epsg = f" (EPSG:{self.epsg})" if self.epsg else ""
        nodata = "none stated" if self.nodata is None else f"{self.nodata:g}"
        return (
            f"{self.file}: {self.role} in {self.vertical_unit}, {self.format}, {self.crs}{epsg}, "
            f"{self.cols} x {self.rows} cells of {self.cell_east_m:.4g} x {self.cell_north_m:.4g} "
            f"m, {self.data_type}, nodata {nodata}, latitude {self.south:.4f} to "
            f"{self.north:.4f}, longitude {self.west:.4f} to {self.east:.4f}"
        )


def describe_terrain(source: TerrainSource) -> tuple[RasterDescription, ...]:
    """Every raster of the source, described without reading heights; TerrainError as above."""
    ground, obstacles = _facts(source)
    described = [_description(raster, "heights") for raster in ground]
    return (*described, *(_description(raster, "obstacles") for raster in obstacles))


def plan_grid(
    source: TerrainSource,
    centres: Sequence[tuple[float, float]],
    radius_m: float,
    *,
    cell_m: float | None = None,
    crs: str | None = None,
    names: Sequence[str] | None = None,
) -> tuple[Grid, bool]:
    """(grid, whether the rasters are used unresampled), without reading heights.

    ``centres`` are (latitude, longitude) of the towers, ``names`` what to call them in messages,
    ``cell_m`` and ``crs`` what the plan asks for, if it does.
    """
    layout = _layout(source, centres, radius_m, cell_m, crs, names)
    return layout.grid, layout.unresampled


def read_terrain(
    source: TerrainSource,
    centres: Sequence[tuple[float, float]],
    radius_m: float,
    *,
    cell_m: float | None = None,
    crs: str | None = None,
    names: Sequence[str] | None = None,
    progress: Callable[[float], None] | None = None,
) -> Terrain:
    """The terrain within ``radius_m`` of the centres; arguments as for :func:`plan_grid`.

    ``progress`` is called with the share that is done. Raises TerrainError with every problem.
    """
    layout = _layout(source, centres, radius_m, cell_m, crs, names)
    grid, tally = layout.grid, Tally()
    with_obstacles = source.obstacles is not None and source.kind != "surface"
    share = 0.5 if with_obstacles else 1.0
    report = progress or _no_progress
    if layout.unresampled:
        ground = heights_as_they_are(layout.ground[0], grid, tally)
        report(share)
    else:
        ground = heights_on_grid(layout.ground, grid, tally, lambda done: report(share * done))
    notes = tally.warnings()
    if not layout.unresampled:
        blocks = [averaged_block(mosaic, grid) for mosaic in layout.ground]
        largest = max(rows * cols for rows, cols in blocks)
        if largest > 1:
            notes.append(
                f"a cell of {grid.cell_m:g} m is the mean of up to {largest} cells of the "
                "rasters: ridges come out lower than they are"
            )
    filled = 0
    if source.fill_holes_up_to_cells > 0:
        ground, filled = fill_small_holes(ground, source.fill_holes_up_to_cells)
        if filled:
            notes.append(
                f"{filled / ground.size:.2%} of the cells were holes of up to "
                f"{source.fill_holes_up_to_cells} cells and were filled by interpolation"
            )
    obstacle_height_m = None
    if with_obstacles:
        obstacle_tally = Tally()
        obstacle_height_m = heights_on_grid(
            layout.obstacles, grid, obstacle_tally, lambda done: report(0.5 + 0.5 * done)
        )
        notes += [f"obstacles: {note}" for note in obstacle_tally.warnings()]
        notes += _made_heights_above_ground(obstacle_height_m)
    notes += _surface_notes(source)
    terrain = Terrain(
        grid=grid,
        ground_elevation_m=ground,
        obstacle_height_m=obstacle_height_m,
        kind=source.kind,
        lowering_radius_m=source.lowering_radius_m,
        filled_share=filled / ground.size,
        warnings=tuple(notes),
    )
    _refuse_centres_on_holes(terrain, centres, names)
    return terrain


def _no_progress(share: float) -> None:
    return None


def _facts(source: TerrainSource) -> tuple[list[Raster], list[Raster]]:
    """The rasters of heights and of obstacles; TerrainError with the problems of all of them."""
    problems: list[Problem] = []
    if not source.rasters:
        problems.append(Problem(where="terrain", found="no raster", allowed="one or more"))
    ground = [read_raster_facts(path, source.vertical_unit, problems) for path in source.rasters]
    obstacles: list[Raster | None] = []
    if source.obstacles is not None and source.kind != "surface":
        obstacles = [read_raster_facts(source.obstacles, source.obstacle_unit, problems)]
    if problems:
        raise TerrainError(problems)
    return [raster for raster in ground if raster], [raster for raster in obstacles if raster]


def _layout(
    source: TerrainSource,
    centres: Sequence[tuple[float, float]],
    radius_m: float,
    cell_m: float | None,
    crs: str | None,
    names: Sequence[str] | None,
) -> Layout:
    ground, obstacles = _facts(source)
    return terrain_layout(ground, obstacles, centres, radius_m, cell_m=cell_m, crs=crs, names=names)


def _made_heights_above_ground(heights: NDArray[np.float32]) -> list[str]:
    """Make missing and negative obstacle heights 0, in place; sentences that say how many."""
    notes = []
    missing = np.isnan(heights)
    if missing.any():
        notes.append(
            f"{missing.mean():.1%} of the cells have no obstacle height; there 0 m is taken"
        )
        heights[missing] = 0.0
    negative = heights < 0.0
    if negative.any():
        notes.append(
            f"{negative.mean():.1%} of the cells have an obstacle height below ground (down to "
            f"{heights.min():.1f} m); there 0 m is taken"
        )
        heights[negative] = 0.0
    return notes


def _surface_notes(source: TerrainSource) -> list[str]:
    """What a reader must know about a model that contains trees and roofs."""
    if source.kind != "surface":
        return []
    notes = []
    if source.obstacles is not None:
        notes.append(
            f"the rasters are a surface that already contains trees and roofs, so the obstacle "
            f"raster {source.obstacles.name} is left out"
        )
    if source.lowering_radius_m > 0.0:
        notes.append(
            "the rasters are a surface: masts and customers stand on the lowest cell within "
            f"{source.lowering_radius_m:g} m, which may still be a roof or a treetop"
        )
    else:
        notes.append(
            "the rasters are a surface: masts and customers stand on roofs and treetops where "
            "there are any"
        )
    return notes


def _refuse_centres_on_holes(
    terrain: Terrain, centres: Sequence[tuple[float, float]], names: Sequence[str] | None
) -> None:
    places = np.asarray(centres, dtype=float).reshape(-1, 2)
    grid = terrain.grid
    row, col = grid.row_col(*grid.from_geographic(places[:, 0], places[:, 1]))
    problems = [
        Problem(
            where=centre_name(int(number), centres, names),
            found="a place where the terrain has no height (a hole)",
            allowed="a place with heights all around",
            advice="Move it, use a raster that is whole there, or let small holes be filled",
        )
        for number in np.flatnonzero(np.isnan(terrain.ground_at(row, col)))
    ]
    if problems:
        raise TerrainError(problems)


def _description(raster: Raster, role: Literal["heights", "obstacles"]) -> RasterDescription:
    col, row = np.meshgrid(
        np.linspace(0, raster.cols, 9), np.linspace(0, raster.rows, 9), indexing="xy"
    )
    longitude, latitude = transformer_to_wgs84(raster.crs).transform(
        *coordinates(raster.transform, col, row)
    )
    middle = (
        0.5 * raster.cols + np.array([0.0, 1.0, 0.0]),
        0.5 * raster.rows + np.array([0, 0, 1.0]),
    )
    east, north = transformer_to_wgs84(raster.crs).transform(
        *coordinates(raster.transform, *middle)
    )
    _, _, size_m = true_bearing_and_distance(north[0], east[0], north[1:], east[1:])
    # Counted from the middle, so that a raster across the 180th meridian stays in one piece.
    off_middle = np.mod(longitude - east[0] + 180.0, 360.0) - 180.0
    ends = np.mod(east[0] + np.array([off_middle.min(), off_middle.max()]) + 180.0, 360.0) - 180.0
    return RasterDescription(
        file=str(raster.path),
        role=role,
        format=raster.driver,
        crs=raster.crs_name,
        epsg=raster.crs.to_epsg(),
        rows=raster.rows,
        cols=raster.cols,
        cell_east_m=float(size_m[0]),
        cell_north_m=float(size_m[1]),
        data_type=raster.data_type,
        nodata=raster.nodata,
        vertical_unit=raster.vertical_unit,
        south=float(latitude.min()),
        west=float(ends[0]),
        north=float(latitude.max()),
        east=float(ends[1]),
    )
