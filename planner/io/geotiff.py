"""Write layers as GeoTIFF: tiled, compressed, with overviews, described, and named by class.

Rows arrive band by band, so that no layer is ever in memory as a whole. Choices, measured on
6,000 x 6,000 cells on two shared cores with ``tests/benchmarks/write_layers.py 6000`` (overviews
and the making of the bands included; path loss as float32, exact or rounded to 1/256 dB):

    =======================  =============  ============  =============  ============
    compression              exact: CPU s   exact: MB     rounded: CPU s rounded: MB
    =======================  =============  ============  =============  ============
    DEFLATE 1, predictor 3   2.7            96            2.6            59
    DEFLATE 1, predictor 2   2.9            109           2.5            72
    DEFLATE 6, predictor 3   3.5            95            4.3            58
    ZSTD 1, predictor 3      1.5            96            1.9            59
    LZW, predictor 3         3.2            124           3.7            73
    =======================  =============  ============  =============  ============

- DEFLATE level 1 with the floating-point predictor (3) is within 2 % of the size of level 6. ZSTD
  takes two thirds of the time, but older readers lack it. Integers: level 6, 0.5 s and 0.6 MB for
  classes of line of sight; level 1 takes 0.3 s and a quarter more room.
- Two threads take 1.5 s instead of 2.6 s for the rounded layer and 1.9 s instead of 2.9 s for the
  exact one (medians of seven runs in turns); 1, 2, 4 and 8 threads gave the same bytes. All
  processors are used.
- Peak memory of a float layer, Python and its libraries included, is 310 MB with two threads and
  290 MB with one; the table above is with one thread.
- Overviews take the nearest cell. Every number in them is the number of a real cell, for a class as
  for a level: an average of decibels is not the decibels of an average.
- No date or time: the same input gives the same bytes.
- Tags go in once, after the data: the colours of sectors are known only then. Set before the data
  and again after it they would stand in the file twice; so, some hundred bytes of an empty
  directory stay behind.

Classes and colours: TIFF knows colour tables only for unsigned integers, and GDAL drops one that
is given for int16 without a word (tried with GDAL 3.10). Class values reach down to -1, "no data".
So names and colours go to two places:

- inside the file as tags ``CATEGORY_<value>`` and ``CATEGORY_<value>_COLOUR`` (#rrggbbaa);
- beside it in ``<name>.tif.aux.xml``, the side file that GDAL and what builds on it read along with
  the TIFF: category names, colour table and an attribute table with value, name and colour, which
  also holds the -1. ``gdalinfo`` shows all three.
"""

from collections.abc import Iterator, Mapping, Sequence
from contextlib import contextmanager, suppress
from pathlib import Path
from typing import Any
from xml.etree import ElementTree

import numpy as np
import rasterio
from numpy.typing import DTypeLike, NDArray
from rasterio.crs import CRS
from rasterio.enums import Resampling
from rasterio.errors import RasterioError
from rasterio.io import DatasetWriter

from planner.errors import OutputError
from planner.io.atomic import replaced
from planner.terrain import Grid

Colour = tuple[int, int, int, int]  # red, green, blue, opacity; 0 to 255

TILE_CELLS = 256
# Tiles that GDAL keeps in memory, of all open layers together; left alone it takes 5 % of the RAM.
# Must hold a row of tiles of every band of one layer, or tiles are written twice.
CACHE_BYTES = 64 * 2**20
THREADS: int | str = "all_cpus"  # that compress tiles; not in the bytes
NO_DATA_NAME = "no data"


@contextmanager
def open_layer(
    path: Path,
    grid: Grid,
    *,
    dtype: DTypeLike,
    description: str | Sequence[str],
    unit: str,
    nodata: float,
    tags: Mapping[str, str],
) -> Iterator["LayerWriter"]:
    """A layer on ``grid`` to be written band of rows by band of rows; takes its name at the end.

    Parameters
    ----------
    path : Path
        Where the layer stands once it is whole. Any number of layers may be open at once.
    dtype : numpy type
        Of the rows to come.
    description : str or sequence of str
        What the layer shows; several make a layer of as many bands.
    unit : str
        Of every band.
    nodata : float
        NaN for floats, a code for integers.
    tags : mapping
        What stands in the file about how it was made.

    Raises
    ------
    ValueError
        Rows are missing at the end.
    OutputError
        The file could not be written, or not whole.

    Notes
    -----
    An exception in the body, or one of these, leaves what stood at ``path`` before. The bytes do
    not depend on the height of the bands, nor on what other layers are open.
    """
    path = Path(path)
    descriptions = (description,) if isinstance(description, str) else tuple(description)
    kind = np.dtype(dtype)
    profile = {
        "driver": "GTiff",
        "width": grid.cols,
        "height": grid.rows,
        "count": len(descriptions),
        "dtype": kind.name,
        "nodata": nodata,
        "crs": CRS.from_wkt(grid.crs.to_wkt()),
        "transform": grid.transform,
        "tiled": True,
        "blockxsize": TILE_CELLS,
        "blockysize": TILE_CELLS,
        "interleave": "pixel",
        "bigtiff": "if_safer",
        **_compression(kind),
    }
    with replaced(path) as temporary:
        with _gdal_errors(path), _settings():
            dataset = rasterio.open(temporary, "w", **profile)
        layer = LayerWriter(path, dataset, nodata)
        try:
            yield layer
            layer._finish(descriptions, unit, tags)
        except BaseException:
            # What is still to be flushed goes to a file that is about to be removed.
            with suppress(RasterioError), _settings():
                dataset.close()
            raise
        with _gdal_errors(path):
            layer._check_whole(temporary)
        # Side files of an older layer would give this one wrong names, statistics or overviews.
        for ending in (".ovr", ".msk"):
            path.with_name(path.name + ending).unlink(missing_ok=True)
        layer._write_side_file()


class LayerWriter:
    """A layer that is being written, made by `open_layer`."""

    def __init__(self, path: Path, dataset: DatasetWriter, nodata: float) -> None:
        self._path = path
        self._dataset = dataset
        self._nodata = nodata
        self._rows_done = 0
        self._last_row = np.empty((0, 0), dtype=dataset.dtypes[0])  # [bands, cols]
        self._names: tuple[str, ...] = ()
        self._colours: dict[int, Colour] = {}
        self._factors = _overview_factors(dataset.height, dataset.width)

    def write_rows(self, row_start: int, array: NDArray[np.generic]) -> None:
        """Write rows from ``row_start`` on: [rows, cols], or [bands, rows, cols] of several bands.

        Bands of rows come in order, without a gap, from row 0. All but the last hold a multiple of
        `TILE_CELLS` rows. ValueError where they do not, or where the type is another.
        """
        layer, name = self._dataset, self._path.name
        rows = array.reshape((-1, *array.shape[-2:]))
        stop = row_start + rows.shape[1]
        if rows.shape[0] != layer.count or rows.shape[2] != layer.width or stop > layer.height:
            raise ValueError(
                f"{name}: array {array.shape} on a grid {layer.height, layer.width} of "
                f"{layer.count} band(s), from row {row_start}"
            )
        if array.dtype.name != layer.dtypes[0]:
            raise ValueError(f"{name}: {array.dtype} in a layer of {layer.dtypes[0]}")
        if row_start != self._rows_done or (stop % TILE_CELLS and stop != layer.height):
            raise ValueError(
                f"{name}: rows {row_start} to {stop} after {self._rows_done}; bands of rows come "
                f"in order, each but the last a multiple of {TILE_CELLS}"
            )
        with _gdal_errors(self._path), _settings():
            # One row of tiles at a time, however high the band: the same calls, the same bytes.
            for first in range(row_start, stop, TILE_CELLS):
                last = min(first + TILE_CELLS, stop)
                layer.write(
                    rows[:, first - row_start : last - row_start],
                    window=((first, last), (0, layer.width)),
                )
        self._rows_done = stop
        self._last_row = rows[:, -1].copy()

    def name_classes(
        self, categories: Sequence[str], colours: Mapping[int, Colour] | None = None
    ) -> None:
        """Names of the values 0, 1, 2, ... of an integer layer, and colours by value.

        At any time before the layer is closed; a value without a colour is clear.
        """
        if np.issubdtype(np.dtype(self._dataset.dtypes[0]), np.floating):
            kind = self._dataset.dtypes[0]
            raise ValueError(f"{self._path.name}: categories need whole numbers, not {kind}")
        self._names = tuple(_plain(name) for name in categories)
        self._colours = dict(colours or {})

    def _finish(self, descriptions: Sequence[str], unit: str, tags: Mapping[str, str]) -> None:
        """Tags, overviews, and everything to the disk."""
        layer = self._dataset
        if self._rows_done != layer.height:
            raise ValueError(
                f"{self._path.name}: {self._rows_done} of {layer.height} rows were written"
            )
        every_tag = {key: str(value) for key, value in tags.items()}
        for value, name in enumerate(self._names):
            every_tag[f"CATEGORY_{value}"] = name
        for value, colour in self._colours.items():
            every_tag[f"CATEGORY_{value}_COLOUR"] = "#" + bytes(colour).hex()
        with _gdal_errors(self._path), _settings():
            layer.update_tags(**every_tag)
            for number, text in enumerate(descriptions, start=1):
                layer.set_band_description(number, text)
                layer.set_band_unit(number, unit)
            if self._factors:
                layer.build_overviews(self._factors, Resampling.nearest)
            layer.close()

    def _check_whole(self, path: Path) -> None:
        """GDAL may keep silent about a full disk until the file is read: read its last row."""
        with rasterio.open(path) as layer:
            last = layer.read(window=((layer.height - 1, layer.height), (0, layer.width)))
            is_float = np.issubdtype(last.dtype, np.floating)
            whole = np.array_equal(last[:, 0], self._last_row, equal_nan=is_float)
            if not whole or layer.overviews(1) != self._factors:
                raise OutputError(f"{self._path}: could not be written whole; is the disk full?")

    def _write_side_file(self) -> None:
        side_file = self._path.with_name(self._path.name + ".aux.xml")
        if self._names or self._colours:
            with replaced(side_file) as temporary:
                temporary.write_bytes(_side_file(self._names, self._colours, int(self._nodata)))
        else:
            side_file.unlink(missing_ok=True)


def write_layer(
    path: Path,
    array: NDArray[np.generic],
    grid: Grid,
    *,
    description: str,
    unit: str,
    nodata: float,
    tags: Mapping[str, str],
    categories: Sequence[str] | None = None,
    colours: Mapping[int, Colour] | None = None,
) -> None:
    """Write ``array`` [rows, cols] on ``grid`` at once; as `open_layer` and `LayerWriter` do."""
    with open_layer(
        path,
        grid,
        dtype=array.dtype,
        description=description,
        unit=unit,
        nodata=nodata,
        tags=tags,
    ) as layer:
        if categories is not None or colours:
            layer.name_classes(categories or (), colours)
        layer.write_rows(0, array)


def _compression(kind: np.dtype[Any]) -> dict[str, Any]:
    is_float = np.issubdtype(kind, np.floating)
    return {
        "compress": "deflate",
        "zlevel": 1 if is_float else 6,
        "predictor": 3 if is_float else 1,
        "num_threads": THREADS,
    }


def _settings() -> rasterio.Env:
    """GDAL's settings, for the time of one call: layers that are open at once may not nest them."""
    return rasterio.Env(
        GDAL_PAM_ENABLED="NO",
        GDAL_TIFF_OVR_BLOCKSIZE=str(TILE_CELLS),
        GDAL_CACHEMAX=CACHE_BYTES,
    )


@contextmanager
def _gdal_errors(path: Path) -> Iterator[None]:
    try:
        yield
    except RasterioError as error:
        reason = error.__cause__ or error
        raise OutputError(f"{path}: could not be written: {reason}") from error


def _overview_factors(rows: int, cols: int) -> list[int]:
    """2, 4, 8, ... until the whole layer fits into one tile."""
    factors: list[int] = []
    factor = 1
    while max(rows, cols) > TILE_CELLS * factor:
        factor *= 2
        factors.append(factor)
    return factors


def _plain(text: str) -> str:
    """Text without the control characters that XML cannot hold."""
    return "".join(character if character.isprintable() else " " for character in str(text))


def _side_file(names: Sequence[str], colours: Mapping[int, Colour], nodata: int) -> bytes:
    """Category names, colour table and attribute table as GDAL's persistent auxiliary metadata."""
    root = ElementTree.Element("PAMDataset")
    band = ElementTree.SubElement(root, "PAMRasterBand", band="1")
    values = range(max(len(names), max(colours, default=-1) + 1))
    clear: Colour = (0, 0, 0, 0)
    if names:
        category_names = ElementTree.SubElement(band, "CategoryNames")
        for name in names:
            ElementTree.SubElement(category_names, "Category").text = name
    if colours:
        ElementTree.SubElement(band, "ColorInterp").text = "Palette"
        table = ElementTree.SubElement(band, "ColorTable")
        for value in values:
            shares = dict(zip(("c1", "c2", "c3", "c4"), colours.get(value, clear), strict=True))
            ElementTree.SubElement(table, "Entry", {key: str(s) for key, s in shares.items()})
    attributes = ElementTree.SubElement(band, "GDALRasterAttributeTable", tableType="thematic")
    # (name, type: 0 whole number or 2 text, usage) as numbered in GDAL's GDALRATFieldUsage
    columns = (
        ("value", 0, 5),
        ("name", 2, 2),
        ("red", 0, 6),
        ("green", 0, 7),
        ("blue", 0, 8),
        ("alpha", 0, 9),
    )
    for index, (title, kind, usage) in enumerate(columns):
        field = ElementTree.SubElement(attributes, "FieldDefn", index=str(index))
        ElementTree.SubElement(field, "Name").text = title
        ElementTree.SubElement(field, "Type").text = str(kind)
        ElementTree.SubElement(field, "Usage").text = str(usage)
    rows: list[tuple[int, str, Colour]] = []
    if nodata not in values:
        rows.append((nodata, NO_DATA_NAME, clear))
    for value in values:
        name = names[value] if value < len(names) else str(value)
        rows.append((value, name, colours.get(value, clear)))
    for index, (value, name, colour) in enumerate(rows):
        row = ElementTree.SubElement(attributes, "Row", index=str(index))
        for cell in (value, name, *colour):
            ElementTree.SubElement(row, "F").text = str(cell)
    ElementTree.indent(root)
    return ElementTree.tostring(root, encoding="utf-8", xml_declaration=False) + b"\n"
