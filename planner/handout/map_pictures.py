"""The raster pictures of the map page, as palette PNGs, and the values that it reads out."""

import base64
import io
import zlib
from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray
from PIL import Image
from scipy import ndimage

from planner.handout.colours import (
    INK,
    PAPER,
    SECTOR_OPACITY,
    SIGNAL_OPACITY,
    STONE,
    rgb,
)
from planner.handout.hillshade import hillshade
from planner.handout.map_cells import MapCells
from planner.handout.mercator import MercatorView
from planner.sweep import CROSSES_HOLE, NO_DATA
from planner.terrain import Terrain

SIGNAL_FLOOR_DBM = -140.0  # code 1 of the read-out; weaker signals are shown as "at most" this
SIGNAL_STEP_DB = 0.5
MARGIN_FLOOR_DB = -40.0  # code 1; negative where the strongest sector misses its own threshold
NOTHING = 0  # code of the read-out: not computed
_TONES = 48
_DOT_SPACING_PX = 7
# Of zlib, measured on 2,048 x 2,048 pixels: against the highest level three pictures and the values
# take 0.5 s of CPU time instead of 1.6 s. The page grows by 3 to 5 % on the demonstration sites, by
# 25 % over smooth made-up ground.
_PNG_LEVEL, _PACK_LEVEL = 4, 6
_ROWS_AT_ONCE = 128  # of the relief: what is in between is then small
_ALL, _BUT_FIRST, _BUT_LAST = slice(None), slice(1, None), slice(None, -1)
_Place = tuple[slice, slice]
_NEIGHBOURS: tuple[tuple[_Place, _Place], ...] = (
    ((_BUT_FIRST, _ALL), (_BUT_LAST, _ALL)),
    ((_BUT_LAST, _ALL), (_BUT_FIRST, _ALL)),
    ((_ALL, _BUT_FIRST), (_ALL, _BUT_LAST)),
    ((_ALL, _BUT_LAST), (_ALL, _BUT_FIRST)),
)

Classes = Sequence[tuple[float, float, str]]


def relief_picture(terrain: Terrain, view: MercatorView) -> str:
    """Hillshade in paper tones as a data URI; holes are clear."""
    dark, pale = np.array(rgb(STONE), float), np.array(rgb(PAPER), float)
    share = np.linspace(0.0, 1.0, _TONES)[:, np.newaxis]
    tones = np.rint(dark + share * (pale - dark)).astype(int)
    rows, cols = view.cell_index.shape
    codes = np.zeros((rows, cols), dtype=np.uint8)
    for start in range(0, rows, _ROWS_AT_ONCE):
        index = view.cell_index[start : start + _ROWS_AT_ONCE]
        cell = np.maximum(index, 0)
        row, col = cell // terrain.grid.cols, cell % terrain.grid.cols
        light = hillshade(terrain.ground_elevation_m, terrain.grid.cell_m, row, col)
        known = (index >= 0) & ~np.isnan(light)
        # The middle of the ramp is flat ground; slopes spread to either side of it.
        tone = np.clip(np.rint((light[known] - 0.1) / 0.8 * (_TONES - 1)), 0, _TONES - 1)
        codes[start : start + _ROWS_AT_ONCE][known] = 1 + tone
    return _png(codes, [(0, 0, 0, 0), *((int(r), int(g), int(b), 255) for r, g, b in tones)])


def signal_picture(cells: MapCells, classes: Classes) -> str:
    """Signal above the threshold as ink, a thin line at its edge, dots where data is missing."""
    served = cells.best_server > 0
    # Whatever is served and below the second class belongs to the first.
    limits = np.array([lower for lower, _, _ in classes], dtype=np.float32)[1:]
    codes = np.zeros(served.shape, dtype=np.uint8)
    codes[served] = 1 + np.searchsorted(limits, cells.received_signal_dbm[served], side="right")
    alpha = round(255 * SIGNAL_OPACITY)
    palette = [(0, 0, 0, 0), *((*rgb(colour), alpha) for _, _, colour in classes)]
    inside = served.copy()  # where the four neighbours are served too; the picture's rim counts
    for here, there in _NEIGHBOURS:
        inside[here] &= served[there]
    return _with_line_and_dots(codes, palette, served & ~inside, cells)


def server_picture(cells: MapCells, colours: Sequence[str]) -> str:
    """Each sector's area in its hue, dots where data is missing."""
    server = cells.best_server
    hues = tuple(dict.fromkeys(colours))
    code_of_sector = np.array([0, *(1 + hues.index(colour) for colour in colours)], dtype=np.uint8)
    codes = code_of_sector[np.maximum(server, 0)]
    alpha = round(255 * SECTOR_OPACITY)
    palette = [(0, 0, 0, 0), *((*rgb(hue), alpha) for hue in hues)]
    across = np.zeros(server.shape, dtype=bool)
    across[:, 1:] |= server[:, 1:] != server[:, :-1]
    across[1:, :] |= server[1:, :] != server[:-1, :]
    return _with_line_and_dots(codes, palette, across & (server > 0), cells)


def read_out(cells: MapCells) -> dict[str, str]:
    """Signal, server, margin and status of every pixel: base64 of zlib of little-endian codes."""
    return {
        "signal": _packed(_steps(cells.received_signal_dbm, SIGNAL_FLOOR_DBM)),
        "margin": _packed(_steps(cells.server_margin_db, MARGIN_FLOOR_DB)),
        "server": _packed(np.maximum(cells.best_server, 0).astype("<u2")),
        "status": _packed(cells.status),
    }


def label_places(cells: MapCells, sectors: int) -> list[tuple[int, float, float]]:
    """(sector number, row, col) in the widest part of each sector's area; none for small ones.

    Row and column are those of the picture's pixels, whole numbers in their centres.
    """
    places = []
    step = max(1, max(cells.best_server.shape) // 400)
    server = cells.best_server[::step, ::step]
    for number, box in enumerate(ndimage.find_objects(np.maximum(server, 0), sectors), start=1):
        if box is None:
            continue
        depth = ndimage.distance_transform_edt(np.pad(server[box] == number, 1))[1:-1, 1:-1]
        row, col = divmod(int(np.argmax(depth)), depth.shape[1])
        if depth[row, col] >= 4.0:
            top, left = box[0].start, box[1].start
            places.append((number, float((top + row) * step), float((left + col) * step)))
    return places


def _steps(level: NDArray[np.float32], floor: float) -> NDArray[np.uint8]:
    """Codes of the read-out: 1 at the floor, 1 more for each step."""
    with np.errstate(invalid="ignore"):
        steps = 1 + np.clip(np.rint((level - np.float32(floor)) / SIGNAL_STEP_DB), 0, 253)
    steps[np.isnan(level)] = NOTHING
    return steps.astype(np.uint8)


def _with_line_and_dots(
    codes: NDArray[np.uint8],
    palette: list[tuple[int, int, int, int]],
    line: NDArray[np.bool_],
    cells: MapCells,
) -> str:
    rows = np.arange(codes.shape[0])[:, np.newaxis]
    cols = np.arange(codes.shape[1])[np.newaxis, :]
    shifted = (cols + (rows // _DOT_SPACING_PX % 2) * (_DOT_SPACING_PX // 2)) % _DOT_SPACING_PX
    missing = (cells.status == NO_DATA) | (cells.status == CROSSES_HOLE)
    dots = missing & ((rows % _DOT_SPACING_PX == 0) & (shifted == 0))
    codes[line] = len(palette)
    codes[dots] = len(palette) + 1
    return _png(codes, [*palette, (*rgb(INK), 150), (*rgb(INK), 190)])


def _png(codes: NDArray[np.uint8], palette: Sequence[tuple[int, int, int, int]]) -> str:
    picture = Image.fromarray(codes)
    picture.putpalette([value for colour in palette for value in colour[:3]])
    file = io.BytesIO()
    clear = bytes(colour[3] for colour in palette)
    picture.save(file, "PNG", compress_level=_PNG_LEVEL, transparency=clear)
    return "data:image/png;base64," + base64.b64encode(file.getvalue()).decode("ascii")


def _packed(codes: NDArray) -> str:
    return base64.b64encode(
        zlib.compress(np.ascontiguousarray(codes).tobytes(), _PACK_LEVEL)
    ).decode("ascii")
