"""The raster pictures of the map page, as palette PNGs, and the values that it reads out."""

import base64
import io
import zlib
from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray
from PIL import Image
from scipy import ndimage

from planner.coverage import Coverage
from planner.handout.colours import (
    INK,
    PAPER,
    SECTOR_OPACITY,
    SIGNAL_OPACITY,
    STONE,
    rgb,
)
from planner.handout.hillshade import hillshade
from planner.handout.mercator import MercatorView
from planner.sweep import CROSSES_HOLE, NO_DATA, OUT_OF_RANGE
from planner.terrain import Terrain

SIGNAL_FLOOR_DBM = -140.0  # code 1 of the read-out; weaker signals are shown as "at most" this
SIGNAL_STEP_DB = 0.5
MARGIN_FLOOR_DB = -40.0  # code 1; negative where the strongest sector misses its own threshold
NOTHING = 0  # code of the read-out: not computed
_TONES = 48
_DOT_SPACING_PX = 7

Classes = Sequence[tuple[float, float, str]]


def relief_picture(terrain: Terrain, view: MercatorView) -> str:
    """Hillshade in paper tones as a data URI; holes are clear."""
    light = view.shown(hillshade(terrain.ground_elevation_m, terrain.grid.cell_m), np.nan)
    dark, pale = np.array(rgb(STONE), float), np.array(rgb(PAPER), float)
    share = np.linspace(0.0, 1.0, _TONES)[:, np.newaxis]
    tones = np.rint(dark + share * (pale - dark)).astype(int)
    with np.errstate(invalid="ignore"):
        # The middle of the ramp is flat ground; slopes spread to either side of it.
        number = 1 + np.clip(np.rint((light - 0.1) / 0.8 * (_TONES - 1)), 0, _TONES - 1)
    codes = np.where(np.isnan(light), 0, number).astype(np.uint8)
    return _png(codes, [(0, 0, 0, 0), *((int(r), int(g), int(b), 255) for r, g, b in tones)])


def signal_picture(coverage: Coverage, view: MercatorView, classes: Classes) -> str:
    """Signal above the threshold as ink, a thin line at its edge, dots where data is missing."""
    signal = view.shown(coverage.received_signal_dbm, np.nan)
    served = view.shown(coverage.best_server, -1) > 0
    codes = np.zeros(signal.shape, dtype=np.uint8)
    for number, (lower, _, _) in enumerate(classes, start=1):
        codes[served & ((signal >= lower) | (number == 1))] = number
    alpha = round(255 * SIGNAL_OPACITY)
    palette = [(0, 0, 0, 0), *((*rgb(colour), alpha) for _, _, colour in classes)]
    edge = served & ~ndimage.binary_erosion(served, border_value=1)
    return _with_line_and_dots(codes, palette, edge, coverage, view)


def server_picture(coverage: Coverage, view: MercatorView, colours: Sequence[str]) -> str:
    """Each sector's area in its hue, dots where data is missing."""
    server = view.shown(coverage.best_server, -1)
    hues = tuple(dict.fromkeys(colours))
    code_of_sector = np.array([0, *(1 + hues.index(colour) for colour in colours)], dtype=np.uint8)
    codes = code_of_sector[np.maximum(server, 0)]
    alpha = round(255 * SECTOR_OPACITY)
    palette = [(0, 0, 0, 0), *((*rgb(hue), alpha) for hue in hues)]
    across = np.zeros(server.shape, dtype=bool)
    across[:, 1:] |= server[:, 1:] != server[:, :-1]
    across[1:, :] |= server[1:, :] != server[:-1, :]
    return _with_line_and_dots(codes, palette, across & (server > 0), coverage, view)


def read_out(coverage: Coverage, view: MercatorView) -> dict[str, str]:
    """Signal, server, margin and status of every pixel: base64 of zlib of little-endian codes."""
    signal = view.shown(coverage.received_signal_dbm, np.nan)
    margin = view.shown(coverage.server_margin_db, np.nan)
    server = view.shown(coverage.best_server, -1)
    status = view.shown(coverage.status, OUT_OF_RANGE)
    with np.errstate(invalid="ignore"):
        steps = np.clip(np.rint((signal - SIGNAL_FLOOR_DBM) / SIGNAL_STEP_DB), 0, 253)
        margins = np.clip(np.rint((margin - MARGIN_FLOOR_DB) / SIGNAL_STEP_DB), 0, 253)
    return {
        "signal": _packed(np.where(np.isnan(signal), NOTHING, 1 + steps).astype(np.uint8)),
        "margin": _packed(np.where(np.isnan(margin), NOTHING, 1 + margins).astype(np.uint8)),
        "server": _packed(np.maximum(server, 0).astype("<u2")),
        "status": _packed(status.astype(np.uint8)),
    }


def label_places(coverage: Coverage, sectors: int) -> list[tuple[int, float, float]]:
    """(sector number, row, col) in the widest part of each sector's area; none for small ones."""
    places = []
    step = max(1, max(coverage.best_server.shape) // 400)
    server = coverage.best_server[::step, ::step]
    for number in range(1, sectors + 1):
        depth = ndimage.distance_transform_edt(np.pad(server == number, 1))[1:-1, 1:-1]
        row, col = divmod(int(np.argmax(depth)), depth.shape[1])
        if depth[row, col] >= 4.0:
            places.append((number, float(row * step), float(col * step)))
    return places


def _with_line_and_dots(
    codes: NDArray[np.uint8],
    palette: list[tuple[int, int, int, int]],
    line: NDArray[np.bool_],
    coverage: Coverage,
    view: MercatorView,
) -> str:
    status = view.shown(coverage.status, OUT_OF_RANGE)
    rows = np.arange(codes.shape[0])[:, np.newaxis]
    cols = np.arange(codes.shape[1])[np.newaxis, :]
    shifted = (cols + (rows // _DOT_SPACING_PX % 2) * (_DOT_SPACING_PX // 2)) % _DOT_SPACING_PX
    dots = np.isin(status, (NO_DATA, CROSSES_HOLE)) & (rows % _DOT_SPACING_PX == 0) & (shifted == 0)
    codes = codes.copy()
    codes[line] = len(palette)
    codes[dots] = len(palette) + 1
    return _png(codes, [*palette, (*rgb(INK), 150), (*rgb(INK), 190)])


def _png(codes: NDArray[np.uint8], palette: Sequence[tuple[int, int, int, int]]) -> str:
    picture = Image.fromarray(codes)
    picture.putpalette([value for colour in palette for value in colour[:3]])
    file = io.BytesIO()
    picture.save(file, "PNG", optimize=True, transparency=bytes(colour[3] for colour in palette))
    return "data:image/png;base64," + base64.b64encode(file.getvalue()).decode("ascii")


def _packed(codes: NDArray) -> str:
    return base64.b64encode(zlib.compress(np.ascontiguousarray(codes).tobytes(), 9)).decode("ascii")
