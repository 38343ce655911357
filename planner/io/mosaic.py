"""Rasters joined where they share a lattice of cells, and heights taken from them onto a grid.

Tiles with the same CRS, cell and alignment are one lattice here, as if they were one file: a value
between two tiles is interpolated from both, so that no seam and no gap is left. Where tiles
overlap, the earlier one counts and the later ones fill its holes.
"""

import math
from collections.abc import Sequence
from dataclasses import dataclass
from functools import lru_cache

import numpy as np
from affine import Affine
from numpy.typing import ArrayLike, NDArray
from pyproj import CRS, Transformer

from planner.geodesy import transformer_from_wgs84
from planner.io.rasters import Raster, Tally, coordinates, read_heights_m

_SAME_LATTICE = 0.01  # cells by which the far corner of a tile may be off the common lattice

Box = tuple[float, float, float, float]  # left, bottom, right, top


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Part:
    """A raster and the place of its first cell on the lattice."""

    raster: Raster
    row: int
    col: int


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Mosaic:
    """Rasters on one lattice of cells, the first of which counts first."""

    crs: CRS
    transform: Affine  # from (col, row) of the lattice's cell corners to the CRS's coordinates
    parts: tuple[Part, ...]
    turn: float  # a full turn of longitude in the CRS's unit; 0 for projected ones
    middle: float  # longitude from which longitudes count, in the CRS's unit; 0 for projected ones

    def extent(self) -> tuple[int, int, int, int]:
        """(top, left, bottom, right) of all parts in whole cells of the lattice."""
        return (
            min(part.row for part in self.parts),
            min(part.col for part in self.parts),
            max(part.row + part.raster.rows for part in self.parts),
            max(part.col + part.raster.cols for part in self.parts),
        )

    def row_col(
        self, crs: CRS, easting: ArrayLike, northing: ArrayLike
    ) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
        """Fractional (row, col) on the lattice, whole at centres, of places in a CRS; or NaN."""
        x, y = _transformer(crs, self.crs).transform(
            np.asarray(easting, dtype=float), np.asarray(northing, dtype=float)
        )
        lost = ~(np.isfinite(x) & np.isfinite(y))
        x, y = np.where(lost, np.nan, x), np.where(lost, np.nan, y)
        if self.turn:
            x = self.middle + np.mod(x - self.middle + 0.5 * self.turn, self.turn) - 0.5 * self.turn
        col, row = coordinates(~self.transform, x, y)
        return row - 0.5, col - 0.5

    def covers(self, row: float, col: float) -> bool:
        """Whether a place on the lattice lies on one of the rasters."""
        return any(
            part.row - 0.5 <= row <= part.row + part.raster.rows - 0.5
            and part.col - 0.5 <= col <= part.col + part.raster.cols - 0.5
            for part in self.parts
        )

    def heights_m(
        self, top: int, left: int, rows: int, cols: int, tally: Tally
    ) -> NDArray[np.float32]:
        """Heights [rows, cols] of a window of the lattice; NaN for holes and where no raster is."""
        heights: NDArray[np.float32] | None = None
        for part in self.parts:
            first_row, last_row = max(top, part.row), min(top + rows, part.row + part.raster.rows)
            first_col, last_col = max(left, part.col), min(left + cols, part.col + part.raster.cols)
            if first_row >= last_row or first_col >= last_col:
                continue
            shape = (last_row - first_row, last_col - first_col)
            place = (
                slice(first_row - top, last_row - top),
                slice(first_col - left, last_col - left),
            )
            if heights is not None and not np.isnan(heights[place]).any():
                continue
            read = read_heights_m(
                part.raster, first_row - part.row, first_col - part.col, *shape, tally
            )
            if heights is None and shape == (rows, cols):
                heights = read
                continue
            if heights is None:
                heights = np.full((rows, cols), np.nan, dtype=np.float32)
            np.copyto(heights[place], read, where=np.isnan(heights[place]))
        return np.full((rows, cols), np.nan, dtype=np.float32) if heights is None else heights


@lru_cache(maxsize=64)
def _transformer(source: CRS, target: CRS) -> Transformer:
    return Transformer.from_crs(source, target, always_xy=True)


def mosaics(rasters: Sequence[Raster], latitude: float, longitude: float) -> list[Mosaic]:
    """Rasters joined by lattice, in the order in which the lattices first appear.

    ``latitude`` and ``longitude`` are the middle of the area: a raster in degrees counts where it
    lies within half a turn of it, so one that spans the earth may stand on both sides.
    """
    joined: list[Mosaic] = []
    for raster in rasters:
        turn = middle = 0.0
        turns = [0]
        if raster.crs.is_geographic:
            turn = 2.0 * math.pi / raster.crs.axis_info[0].unit_conversion_factor
            middle = float(transformer_from_wgs84(raster.crs).transform(longitude, latitude)[0])
            x, _ = coordinates(raster.transform, *_corners(raster))
            turns = [
                count
                for count in range(-2, 3)
                if x.min() + count * turn < middle + 0.5 * turn
                and x.max() + count * turn > middle - 0.5 * turn
            ]
        for count in turns:
            a, b, c, d, e, f = tuple(raster.transform)[:6]
            transform = Affine(a, b, c + count * turn, d, e, f)
            _join(joined, raster, transform, turn, middle)
    return joined


def _corners(raster: Raster) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """(cols, rows) of the four corners, the first cell's outer corner first."""
    cols, rows = float(raster.cols), float(raster.rows)
    return np.array([0.0, cols, 0.0, cols]), np.array([0.0, 0.0, rows, rows])


def _join(
    joined: list[Mosaic], raster: Raster, transform: Affine, turn: float, middle: float
) -> None:
    """Add a raster to the lattice that it shares, or as a new one."""
    for index, mosaic in enumerate(joined):
        if not mosaic.crs.equals(raster.crs, ignore_axis_order=True):
            continue
        cols, rows = _corners(raster)
        x, y = coordinates(~mosaic.transform, *coordinates(transform, cols, rows))
        col, row = round(float(x[0])), round(float(y[0]))
        if max(np.abs(x - cols - col).max(), np.abs(y - rows - row).max()) < _SAME_LATTICE:
            parts = (*mosaic.parts, Part(raster=raster, row=row, col=col))
            joined[index] = Mosaic(
                crs=mosaic.crs, transform=mosaic.transform, parts=parts, turn=turn, middle=middle
            )
            return
    joined.append(
        Mosaic(
            crs=raster.crs,
            transform=transform,
            parts=(Part(raster=raster, row=0, col=0),),
            turn=turn,
            middle=middle,
        )
    )


def needed_part(mosaic: Mosaic, crs: CRS, box: Box) -> tuple[Mosaic | None, Box]:
    """The mosaic with only those rasters that reach into a box of a CRS, and their extent there.

    The extent is (left, bottom, right, top) in ``crs``, not cut to the box. None if there are none.
    """
    easting, northing = np.meshgrid(
        np.linspace(box[0], box[2], 33), np.linspace(box[1], box[3], 33)
    )
    rows, cols = mosaic.row_col(crs, easting, northing)
    if not np.isfinite(rows).any():
        return None, box
    # Between the points the box may reach a little further on the lattice than at the points.
    row_margin = 1.0 + 0.05 * float(np.nanmax(rows) - np.nanmin(rows))
    col_margin = 1.0 + 0.05 * float(np.nanmax(cols) - np.nanmin(cols))
    top, bottom = float(np.nanmin(rows)) - row_margin, float(np.nanmax(rows)) + row_margin
    left, right = float(np.nanmin(cols)) - col_margin, float(np.nanmax(cols)) + col_margin
    back = _transformer(mosaic.crs, crs)
    parts: list[Part] = []
    corners: list[Box] = []
    for part in mosaic.parts:
        first_row, last_row = max(top, part.row), min(bottom, part.row + part.raster.rows)
        first_col, last_col = max(left, part.col), min(right, part.col + part.raster.cols)
        if first_row >= last_row or first_col >= last_col:
            continue
        col, row = np.meshgrid(
            np.linspace(first_col, last_col, 33), np.linspace(first_row, last_row, 33)
        )
        x, y = back.transform(*coordinates(mosaic.transform, col, row))
        if not np.isfinite(x).any():
            continue
        finite = np.isfinite(x) & np.isfinite(y)
        x, y = x[finite], y[finite]
        parts.append(part)
        corners.append((float(x.min()), float(y.min()), float(x.max()), float(y.max())))
    if not parts:
        return None, box
    ends = np.array(corners)
    extent = (
        float(ends[:, 0].min()),
        float(ends[:, 1].min()),
        float(ends[:, 2].max()),
        float(ends[:, 3].max()),
    )
    kept = Mosaic(
        crs=mosaic.crs,
        transform=mosaic.transform,
        parts=tuple(parts),
        turn=mosaic.turn,
        middle=mosaic.middle,
    )
    return kept, extent
