"""Layers as GeoTIFF: read back by rasterio and by GDAL's own tool, same bytes, no half files."""

import subprocess

import numpy as np
import pytest
import rasterio
from affine import Affine
from browser import needed_program
from pyproj import CRS

from planner.errors import OutputError
from planner.io import geotiff
from planner.io.atomic import replaced
from planner.io.geotiff import open_layer, write_layer
from planner.terrain import Grid

GRID = Grid(
    crs=CRS.from_epsg(32633),
    transform=Affine(30, 0, 400_000, 0, -30, 5_200_000),
    rows=700,
    cols=600,
)
NAMES = ["none above its threshold", "west-1 <&> \u00e9", "mill\x07pond"]
COLOURS = {0: (200, 200, 200, 255), 1: (0, 114, 178, 255), 2: (230, 159, 0, 128)}


def _signal():
    signal = np.random.default_rng(1).normal(-80, 10, (700, 600)).astype(np.float32)
    signal[:50, :70] = np.nan
    signal[-1, :300] = np.nan  # the last row is read back after writing
    return signal


def _servers():
    return np.random.default_rng(2).integers(-1, 3, (700, 600)).astype(np.int16)


def _write_signal(path, signal=None):
    write_layer(
        path,
        _signal() if signal is None else signal,
        GRID,
        description="received signal of the best sector",
        unit="dBm",
        nodata=np.nan,
        tags={"FREQUENCY_MHZ": "5600", "MODEL": "delta-Bullington <P.526>"},
    )


def _write_servers(path):
    write_layer(
        path,
        _servers(),
        GRID,
        description="best server",
        unit="",
        nodata=-1,
        tags={"VERSION": "1"},
        categories=NAMES,
        colours=COLOURS,
    )


def test_levels_come_back_as_they_were(tmp_path):
    """Numbers, place, nodata, description, unit and tags survive; tiled, with overviews."""
    path = tmp_path / "signal.tif"
    _write_signal(path)
    with rasterio.open(path) as layer:
        np.testing.assert_array_equal(layer.read(1), _signal())
        assert layer.crs.to_epsg() == 32633
        assert tuple(layer.transform) == tuple(GRID.transform)
        assert np.isnan(layer.nodata)
        assert layer.dtypes == ("float32",)
        assert layer.descriptions == ("received signal of the best sector",)
        assert layer.units == ("dBm",)
        assert layer.block_shapes == [(256, 256)]
        assert layer.compression.name == "deflate"
        assert layer.overviews(1) == [2, 4]
        tags = layer.tags()
    assert tags["FREQUENCY_MHZ"] == "5600"
    assert tags["MODEL"] == "delta-Bullington <P.526>"
    assert sorted(file.name for file in tmp_path.iterdir()) == ["signal.tif"]


def test_overviews_hold_numbers_of_real_cells(tmp_path):
    """No decibels are averaged: each overview cell is one of the four cells below it."""
    path = tmp_path / "signal.tif"
    _write_signal(path)
    with rasterio.open(path, overview_level=0) as overview:
        small = overview.read(1)
    fours = _signal().reshape(350, 2, 300, 2).swapaxes(1, 2).reshape(350, 300, 4)
    same = (fours == small[..., np.newaxis]) | (np.isnan(fours) & np.isnan(small)[..., np.newaxis])
    assert same.any(axis=2).all()


def test_classes_have_names_and_colours(tmp_path):
    """int16 keeps -1 as no data; names and colours are read along, and stand in the file's tags."""
    path = tmp_path / "servers.tif"
    _write_servers(path)
    with rasterio.open(path) as layer:
        np.testing.assert_array_equal(layer.read(1), _servers())
        assert layer.dtypes == ("int16",)
        assert layer.nodata == -1
        assert layer.colormap(1) == COLOURS
        assert layer.colorinterp[0] == rasterio.enums.ColorInterp.palette
        tags = layer.tags()
    assert tags["CATEGORY_0"] == "none above its threshold"
    assert tags["CATEGORY_1"] == "west-1 <&> \u00e9"
    assert tags["CATEGORY_2"] == "mill pond"
    assert tags["CATEGORY_1_COLOUR"] == "#0072b2ff"
    files = sorted(file.name for file in tmp_path.iterdir())
    assert files == ["servers.tif", "servers.tif.aux.xml"]


def test_same_input_gives_the_same_bytes(tmp_path):
    """Written twice, under two names and in two orders of tags, the files are identical."""
    for name in ("a", "b"):
        (tmp_path / name).mkdir()
        _write_signal(tmp_path / name / "signal.tif")
        _write_servers(tmp_path / name / "servers.tif")
    for file in ("signal.tif", "servers.tif", "servers.tif.aux.xml"):
        assert (tmp_path / "a" / file).read_bytes() == (tmp_path / "b" / file).read_bytes()
    for name, keys in (("c", ("A", "B")), ("d", ("B", "A"))):
        write_layer(
            tmp_path / f"{name}.tif",
            _signal(),
            GRID,
            description="",
            unit="dB",
            nodata=np.nan,
            tags={key: key for key in keys},
        )
    assert (tmp_path / "c.tif").read_bytes() == (tmp_path / "d.tif").read_bytes()


SIGNAL_LAYER = {
    "dtype": np.float32,
    "description": "received signal of the best sector",
    "unit": "dBm",
    "nodata": np.nan,
    "tags": {"FREQUENCY_MHZ": "5600", "MODEL": "delta-Bullington <P.526>"},
}
SERVER_LAYER = {
    "dtype": np.int16,
    "description": "best server",
    "unit": "",
    "nodata": -1,
    "tags": {"VERSION": "1"},
}


@pytest.mark.parametrize("rows", [256, 512, 700])
def test_the_height_of_the_bands_is_not_in_the_bytes(tmp_path, rows):
    """Two layers open at once, fed in turns and named at the end: the bytes of whole ones."""
    _write_signal(tmp_path / "signal.tif")
    _write_servers(tmp_path / "servers.tif")
    banded = tmp_path / "banded"
    with (
        open_layer(banded / "signal.tif", GRID, **SIGNAL_LAYER) as signal,
        open_layer(banded / "servers.tif", GRID, **SERVER_LAYER) as servers,
    ):
        for start in range(0, 700, rows):
            signal.write_rows(start, _signal()[start : start + rows])
            servers.write_rows(start, _servers()[start : start + rows])
        servers.name_classes(NAMES, COLOURS)
    assert sorted(file.name for file in banded.iterdir()) == [
        "servers.tif",
        "servers.tif.aux.xml",
        "signal.tif",
    ]
    for file in banded.iterdir():
        assert file.read_bytes() == (tmp_path / file.name).read_bytes(), file.name


def test_bytes_do_not_depend_on_what_gdal_keeps_in_memory(tmp_path, monkeypatch):
    """With room for little more than one row of tiles of both bands, and for all of them."""
    signal = np.stack([_signal(), _signal() + 1])
    options = {**SIGNAL_LAYER, "description": ["loss", "gain"]}
    for name, room in (("small", 2**21), ("large", 2**26)):
        monkeypatch.setattr(geotiff, "CACHE_BYTES", room)
        with open_layer(tmp_path / f"{name}.tif", GRID, **options) as layer:
            layer.write_rows(0, signal)
    assert (tmp_path / "small.tif").read_bytes() == (tmp_path / "large.tif").read_bytes()


def test_bytes_do_not_depend_on_the_number_of_threads(tmp_path, monkeypatch):
    """Levels and classes, open at once: one thread or four."""
    for threads in (1, 4):
        monkeypatch.setattr(geotiff, "THREADS", threads)
        folder = tmp_path / str(threads)
        with (
            open_layer(folder / "signal.tif", GRID, **SIGNAL_LAYER) as signal,
            open_layer(folder / "servers.tif", GRID, **SERVER_LAYER) as servers,
        ):
            for start in range(0, 700, 256):
                signal.write_rows(start, _signal()[start : start + 256])
                servers.write_rows(start, _servers()[start : start + 256])
    for name in ("signal.tif", "servers.tif"):
        one, four = (tmp_path / threads / name for threads in ("1", "4"))
        assert one.read_bytes() == four.read_bytes(), name


def test_two_bands_with_a_description_each(tmp_path):
    """Both come back, band heights do not matter, overviews are there for each."""
    both = np.stack([_signal(), _signal() - 3])
    options = {**SIGNAL_LAYER, "description": ["loss upwards", "loss downwards"]}
    with open_layer(tmp_path / "both.tif", GRID, **options) as layer:
        layer.write_rows(0, both[:, :512])
        layer.write_rows(512, both[:, 512:])
    with open_layer(tmp_path / "whole.tif", GRID, **options) as layer:
        layer.write_rows(0, both)
    with rasterio.open(tmp_path / "both.tif") as layer:
        np.testing.assert_array_equal(layer.read(), both)
        assert layer.descriptions == ("loss upwards", "loss downwards")
        assert layer.units == ("dBm", "dBm")
        assert [layer.overviews(band) for band in (1, 2)] == [[2, 4], [2, 4]]
    assert (tmp_path / "both.tif").read_bytes() == (tmp_path / "whole.tif").read_bytes()


def test_bands_of_rows_out_of_order_or_missing_are_refused(tmp_path):
    """A gap, a height between tiles, another type, a wrong width, rows missing at the end."""
    signal = _signal()

    def written(*bands):
        with open_layer(tmp_path / "x.tif", GRID, **SIGNAL_LAYER) as layer:
            for start, array in bands:
                layer.write_rows(start, array)

    with pytest.raises(ValueError, match=r"rows 512 to 700 after 256; bands of rows come in order"):
        written((0, signal[:256]), (512, signal[512:]))
    with pytest.raises(ValueError, match=r"rows 0 to 300 after 0; .* multiple of 256"):
        written((0, signal[:300]))
    with pytest.raises(ValueError, match="float64 in a layer of float32"):
        written((0, signal.astype(float)))
    with pytest.raises(ValueError, match=r"array \(256, 599\) on a grid \(700, 600\) of 1 band"):
        written((0, signal[:256, 1:]))
    with pytest.raises(ValueError, match=r"array \(700, 600\) on a grid .*, from row 256"):
        written((0, signal[:256]), (256, signal))
    with pytest.raises(ValueError, match="512 of 700 rows were written"):
        written((0, signal[:512]))
    assert list(tmp_path.iterdir()) == []


def test_an_exception_among_the_bands_leaves_the_older_layers(tmp_path):
    """Of two layers that are open both keep what stood there before; nothing else is left."""
    (tmp_path / "signal.tif").write_bytes(b"older")

    def interrupted():
        with (
            open_layer(tmp_path / "signal.tif", GRID, **SIGNAL_LAYER) as signal,
            open_layer(tmp_path / "servers.tif", GRID, **SERVER_LAYER) as servers,
        ):
            signal.write_rows(0, _signal())
            servers.write_rows(0, _servers()[:256])
            servers.name_classes(NAMES, COLOURS)
            raise KeyboardInterrupt

    with pytest.raises(KeyboardInterrupt):
        interrupted()
    assert [file.name for file in tmp_path.iterdir()] == ["signal.tif"]
    assert (tmp_path / "signal.tif").read_bytes() == b"older"


def test_each_tag_stands_in_the_file_once(tmp_path):
    """Classes that are named after the data leave no second copy of the tags behind."""
    _write_servers(tmp_path / "servers.tif")
    content = (tmp_path / "servers.tif").read_bytes()
    for text in (b'"VERSION"', b'"CATEGORY_1"', b'"CATEGORY_1_COLOUR"', b"best server"):
        assert content.count(text) == 1, text


def test_side_files_of_an_older_layer_do_not_linger(tmp_path):
    """A layer of levels that replaces one of classes loses the names, colours and overviews."""
    path = tmp_path / "layer.tif"
    _write_servers(path)
    (tmp_path / "layer.tif.ovr").write_bytes(b"overviews of the older layer")
    _write_signal(path)
    assert sorted(file.name for file in tmp_path.iterdir()) == ["layer.tif"]


def test_small_layer_needs_no_overviews(tmp_path):
    """What fits into one tile has none."""
    grid = Grid(crs=GRID.crs, transform=GRID.transform, rows=3, cols=4)
    array = np.arange(12, dtype=np.float32).reshape(3, 4)
    write_layer(tmp_path / "s.tif", array, grid, description="s", unit="m", nodata=np.nan, tags={})
    with rasterio.open(tmp_path / "s.tif") as layer:
        assert layer.overviews(1) == []
        np.testing.assert_array_equal(layer.read(1), array)


def test_wrong_shape_and_names_for_levels_are_refused(tmp_path):
    """A programmer's slip is caught before anything is written."""
    options = {"description": "", "unit": "", "nodata": np.nan, "tags": {}}
    with pytest.raises(ValueError, match=r"array \(2, 2\) on a grid \(700, 600\)"):
        write_layer(tmp_path / "x.tif", np.zeros((2, 2), np.float32), GRID, **options)
    with pytest.raises(ValueError, match="categories need whole numbers"):
        write_layer(tmp_path / "x.tif", _signal(), GRID, categories=["a"], **options)
    assert list(tmp_path.iterdir()) == []


def test_failure_leaves_the_older_file(tmp_path, monkeypatch):
    """When writing fails half-way the older layer stands, no rest is left, the file is named."""
    path = tmp_path / "signal.tif"
    _write_signal(path)
    before = path.read_bytes()

    def disk_is_full(*_):
        raise OSError(28, "No space left on device")

    monkeypatch.setattr(geotiff, "_overview_factors", disk_is_full)
    with pytest.raises(OutputError, match=r"signal\.tif: could not be written: No space left"):
        _write_signal(path, _signal() + 1)
    assert before == path.read_bytes()
    assert [file.name for file in tmp_path.iterdir()] == ["signal.tif"]


def test_silently_incomplete_file_is_noticed(tmp_path, monkeypatch):
    """A layer that reads back differently from what was written does not get its name."""
    whole = geotiff.LayerWriter._check_whole

    def broken(layer, path):
        path.write_bytes(path.read_bytes()[:3000])
        whole(layer, path)

    monkeypatch.setattr(geotiff.LayerWriter, "_check_whole", broken)
    with pytest.raises(OutputError, match=r"signal\.tif: could not be written"):
        _write_signal(tmp_path / "signal.tif")
    assert list(tmp_path.iterdir()) == []


def test_target_that_is_a_folder_is_refused(tmp_path):
    """A folder in the way is named, and stays."""
    (tmp_path / "signal.tif").mkdir()
    with pytest.raises(OutputError, match=r"signal\.tif: could not be written"):
        _write_signal(tmp_path / "signal.tif")
    assert [file.name for file in tmp_path.iterdir()] == ["signal.tif"]


def test_replaced_makes_the_folder_and_cleans_up(tmp_path):
    """The folder is made; an error in the body leaves nothing; the name keeps its ending."""
    target = tmp_path / "deep" / "er" / "notes.csv"
    with replaced(target) as temporary:
        assert temporary.parent == target.parent
        assert temporary.suffix == ".csv"
        temporary.write_text("a")
        assert not target.exists()
    assert target.read_text() == "a"

    def half_done():
        with replaced(target) as temporary:
            temporary.write_text("b")
            raise ZeroDivisionError

    with pytest.raises(ZeroDivisionError):
        half_done()
    assert target.read_text() == "a"
    assert [file.name for file in target.parent.iterdir()] == ["notes.csv"]
    (tmp_path / "file").write_text("")
    with (
        pytest.raises(OutputError, match=r"notes\.csv: could not be written"),
        replaced(tmp_path / "file" / "notes.csv") as temporary,
    ):
        pass


@pytest.mark.gdal
def test_gdalinfo_shows_classes_colours_and_units(tmp_path):
    """GDAL's own tool, as installed on the machine, shows what a GIS will show."""
    needed_program("gdalinfo")
    _write_servers(tmp_path / "servers.tif")
    _write_signal(tmp_path / "signal.tif")

    def gdalinfo(name):
        done = subprocess.run(
            ["gdalinfo", str(tmp_path / name)], capture_output=True, text=True, check=True
        )
        assert done.stderr == ""
        return [line.strip() for line in done.stdout.splitlines()]

    servers = gdalinfo("servers.tif")
    for line in (
        'ID["EPSG",32633]]',
        "Origin = (400000.000000000000000,5200000.000000000000000)",
        "Pixel Size = (30.000000000000000,-30.000000000000000)",
        "COMPRESSION=DEFLATE",
        "Band 1 Block=256x256 Type=Int16, ColorInterp=Palette",
        "Description = best server",
        "NoData Value=-1",
        "Overviews: 300x350, 150x175",
        "0: none above its threshold",
        "1: west-1 <&> \u00e9",
        "2: mill pond",
        "0: 200,200,200,255",
        "1: 0,114,178,255",
        "2: 230,159,0,128",
        "VERSION=1",
        "<F>-1</F>",
        "<F>no data</F>",
    ):
        assert line in servers, line
    signal = gdalinfo("signal.tif")
    for line in (
        "Band 1 Block=256x256 Type=Float32, ColorInterp=Gray",
        "NoData Value=nan",
        "Unit Type: dBm",
        "Description = received signal of the best sector",
        "MODEL=delta-Bullington <P.526>",
    ):
        assert line in signal, line
