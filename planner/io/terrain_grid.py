"""The grid that a plan gets, laid out from what the rasters state, before any height is read."""

import math
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from affine import Affine
from pyproj import CRS
from pyproj.exceptions import CRSError

from planner.errors import Problem, TerrainError
from planner.geodesy import (
    central_point,
    grid_is_usable,
    grid_trouble,
    local_frame,
    projection_trouble,
    transformer_from_wgs84,
    utm_or_ups_crs,
)
from planner.io.mosaic import Box, Mosaic, mosaics, needed_part
from planner.io.rasters import Raster
from planner.terrain import Grid

LARGEST_GRID_CELLS = 400_000_000  # 1.6 GB of heights, and as much again for each layer
_NAMED_GRID_SCALE = (0.99, 1.01)  # wider than for a grid that is chosen without asking
_WGS84 = CRS.from_epsg(4326)

Place = tuple[float, float]  # latitude, longitude


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Layout:
    """What is to be read, and onto which grid."""

    grid: Grid
    unresampled: bool  # the grid is the lattice of the only mosaic
    ground: tuple[Mosaic, ...]
    obstacles: tuple[Mosaic, ...]


def terrain_layout(
    ground: Sequence[Raster],
    obstacles: Sequence[Raster],
    centres: Sequence[Place],
    radius_m: float,
    *,
    cell_m: float | None,
    crs: str | None,
    names: Sequence[str] | None,
) -> Layout:
    """The grid within ``radius_m`` of the centres, as far as the rasters reach, and what feeds it.

    Raises TerrainError where a centre lies off the rasters, where the named CRS cannot serve as a
    grid and where the grid would have more than ``LARGEST_GRID_CELLS``.
    """
    if not centres:
        raise TerrainError(
            Problem(where="towers", found="none with a sector that is on", allowed="one or more")
        )
    middle = central_point(centres)
    joined = mosaics(ground, *middle)
    _refuse_centres_off_rasters(joined, centres, names)
    named = _named_crs(crs, centres, radius_m) if crs is not None else None
    target = named or utm_or_ups_crs(*middle)
    box = _needed_box(target, centres, radius_m)
    reaching = [needed_part(mosaic, target, box) for mosaic in joined]
    kept = [mosaic for mosaic, _ in reaching if mosaic is not None]
    grid = _grid_as_it_is(kept, centres, radius_m, cell_m, named)
    unresampled = grid is not None
    if grid is None:
        extents = [extent for mosaic, extent in reaching if mosaic is not None]
        reached = (
            max(box[0], min(extent[0] for extent in extents)),
            max(box[1], min(extent[1] for extent in extents)),
            min(box[2], max(extent[2] for extent in extents)),
            min(box[3], max(extent[3] for extent in extents)),
        )
        grid = _grid_of_target(kept, target, reached, middle, cell_m)
    covering = [
        needed_part(mosaic, grid.crs, grid.bounds)[0] for mosaic in mosaics(obstacles, *middle)
    ]
    return Layout(
        grid=grid,
        unresampled=unresampled,
        ground=tuple(kept),
        obstacles=tuple(mosaic for mosaic in covering if mosaic is not None),
    )


def centre_name(number: int, centres: Sequence[Place], names: Sequence[str] | None) -> str:
    """What to call a centre in a message."""
    latitude, longitude = centres[number]
    place = f"latitude {latitude:.6f}, longitude {longitude:.6f}"
    return f"tower {names[number]} ({place})" if names is not None else f"tower at {place}"


def _refuse_centres_off_rasters(
    joined: Sequence[Mosaic], centres: Sequence[Place], names: Sequence[str] | None
) -> None:
    def covered(latitude: float, longitude: float) -> bool:
        places = (mosaic.row_col(_WGS84, longitude, latitude) for mosaic in joined)
        return any(
            mosaic.covers(float(row), float(col))
            for mosaic, (row, col) in zip(joined, places, strict=True)
        )

    problems = []
    for number, (latitude, longitude) in enumerate(centres):
        if covered(latitude, longitude):
            continue
        swapped = abs(longitude) <= 90.0 and covered(longitude, latitude)
        problems.append(
            Problem(
                where=centre_name(number, centres, names),
                found="a place outside the terrain rasters",
                allowed="a place on one of them",
                advice="Latitude and longitude seem to be swapped"
                if swapped
                else "Check its coordinates, or add the raster that covers it",
            )
        )
    if problems:
        raise TerrainError(problems)


def _named_crs(text: str, centres: Sequence[Place], radius_m: float) -> CRS:
    """The CRS that the plan names, if it can serve as a grid about the centres."""
    trouble = ""
    try:
        named = CRS.from_user_input(text)
    except CRSError:
        named, trouble = None, "it is not known"
    if named is not None:
        trouble = projection_trouble(named)
    if named is not None and not trouble:
        try:
            box = _needed_box(named, centres, radius_m)
        except TerrainError:
            trouble = "the towers lie outside the range of its projection"
        else:
            smallest, largest = _NAMED_GRID_SCALE
            trouble = grid_trouble(named, box, smallest_scale=smallest, largest_scale=largest)
    if named is None or trouble:
        raise TerrainError(
            Problem(
                where="the plan's grid CRS",
                found=f"{text!r}, which cannot be the grid: {trouble}",
                allowed="a conformal projection in metres that is nearly true to scale there",
                advice="Name the UTM zone of the place, or none to let it be chosen",
            )
        )
    return named


def _needed_box(crs: CRS, centres: Sequence[Place], radius_m: float) -> Box:
    """(left, bottom, right, top) about the circles of ``radius_m`` around the centres."""
    lefts, bottoms, rights, tops = [], [], [], []
    for latitude, longitude in centres:
        easting, northing = transformer_from_wgs84(crs).transform(longitude, latitude)
        reach = radius_m * 1.001 * local_frame(crs, easting, northing).scale
        lefts.append(easting - reach)
        bottoms.append(northing - reach)
        rights.append(easting + reach)
        tops.append(northing + reach)
    return min(lefts), min(bottoms), max(rights), max(tops)


def _grid_as_it_is(
    kept: Sequence[Mosaic],
    centres: Sequence[Place],
    radius_m: float,
    cell_m: float | None,
    named: CRS | None,
) -> Grid | None:
    """The window of a single lattice that can be used unresampled; None if it cannot."""
    if len(kept) != 1:
        return None
    mosaic = kept[0]
    cell = _square_cell_m(mosaic)
    if cell is None or (cell_m is not None and abs(cell - cell_m) > 1e-6 * cell):
        return None
    if named is not None and not named.equals(mosaic.crs, ignore_axis_order=True):
        return None
    try:
        box = _needed_box(mosaic.crs, centres, radius_m)
    except TerrainError:
        return None
    top, left, bottom, right = mosaic.extent()
    x, y = float(mosaic.transform.c), float(mosaic.transform.f)
    # One cell more on each side, so that the circle's edge lies between cell centres.
    top = max(math.floor((y - box[3]) / cell) - 1, top)
    bottom = min(math.ceil((y - box[1]) / cell) + 1, bottom)
    left = max(math.floor((box[0] - x) / cell) - 1, left)
    right = min(math.ceil((box[2] - x) / cell) + 1, right)
    transform = Affine(cell, 0.0, x + left * cell, 0.0, -cell, y - top * cell)
    bounds = (x + left * cell, y - bottom * cell, x + right * cell, y - top * cell)
    if bottom <= top or right <= left or not grid_is_usable(mosaic.crs, bounds):
        return None
    return _bounded_grid(mosaic.crs, transform, bottom - top, right - left)


def _square_cell_m(mosaic: Mosaic) -> float | None:
    """Side of the lattice's cells in the CRS's unit, if they are square and north-up."""
    a, b, _, d, e, _ = tuple(mosaic.transform)[:6]
    if abs(b) > 1e-9 * abs(a) or abs(d) > 1e-9 * abs(a) or a <= 0.0 or abs(a + e) > 1e-6 * a:
        return None
    return float(a)


def _grid_of_target(
    kept: Sequence[Mosaic], target: CRS, reached: Box, middle: Place, cell_m: float | None
) -> Grid:
    """A grid in the target CRS over a box; on the lattice of a mosaic that has the same cells."""
    easting, northing = transformer_from_wgs84(target).transform(middle[1], middle[0])
    cell = cell_m or min(_cell_near(mosaic, target, easting, northing) for mosaic in kept)
    x = y = 0.0
    for mosaic in kept:
        own = _square_cell_m(mosaic)
        if (
            own is not None
            and abs(own - cell) < 1e-9 * cell
            and mosaic.crs.equals(target, ignore_axis_order=True)
        ):
            x, y = float(mosaic.transform.c), float(mosaic.transform.f)
            break
    left = x + math.floor((reached[0] - x) / cell + 1e-6) * cell
    right = x + math.ceil((reached[2] - x) / cell - 1e-6) * cell
    bottom = y + math.floor((reached[1] - y) / cell + 1e-6) * cell
    top = y + math.ceil((reached[3] - y) / cell - 1e-6) * cell
    return _bounded_grid(
        target,
        Affine(cell, 0.0, left, 0.0, -cell, top),
        max(round((top - bottom) / cell), 1),
        max(round((right - left) / cell), 1),
    )


def _cell_near(mosaic: Mosaic, target: CRS, easting: float, northing: float) -> float:
    """Side of a square as large as the lattice's cells about a place, to three figures."""
    own = _square_cell_m(mosaic)
    if own is not None and mosaic.crs.equals(target, ignore_axis_order=True):
        return own
    step = 100.0
    rows, cols = mosaic.row_col(
        target, easting + np.array([0.0, step, 0.0]), northing + np.array([0.0, 0.0, step])
    )
    cells = (rows[1] - rows[0]) * (cols[2] - cols[0]) - (rows[2] - rows[0]) * (cols[1] - cols[0])
    side_m = step / math.sqrt(abs(float(cells)))
    return float(f"{side_m:.3g}")


def _bounded_grid(crs: CRS, transform: Affine, rows: int, cols: int) -> Grid:
    if rows * cols > LARGEST_GRID_CELLS:
        raise TerrainError(
            Problem(
                where="the plan's grid",
                found=f"{rows:,} x {cols:,} cells of {transform.a:g} m",
                allowed=f"up to {LARGEST_GRID_CELLS:,} cells",
                advice="Set a larger model.cell_m or a smaller model.radius_km, and check that all "
                "towers are where they should be",
            )
        )
    return Grid(crs=crs, transform=transform, rows=rows, cols=cols)
