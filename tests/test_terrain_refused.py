"""What is refused about terrain: each with one clear message, all of them at once, no traceback."""

import http.server
import re
import threading

import numpy as np
import pytest
import rasterio
import rasterio.warp
from affine import Affine

from planner.errors import TerrainError
from planner.io import terrain_grid
from planner.io.terrain_files import TerrainSource, describe_terrain, plan_grid, read_terrain
from tests.terrain_rasters import written

UTM33 = "EPSG:32633"
TRANSFORM = Affine(30, 0, 402_000, 0, -30, 5_203_000)
MIDDLE = (46.95, 13.75)


def _flat(path, crs=UTM33, transform=TRANSFORM, **more):
    return written(path, np.full((200, 200), 500, dtype=np.float32), transform, crs, **more)


def _refused(source, centres=(MIDDLE,), radius_m=2000.0, **more):
    """The messages, one for each problem."""
    with pytest.raises(TerrainError) as caught:
        read_terrain(source, centres, radius_m, **more)
    return [str(problem) for problem in caught.value.problems]


def test_every_bad_file_is_told_at_once(tmp_path):
    """Missing, no raster, a folder, a picture, no CRS, no position: one message for each."""
    (tmp_path / "notes.tif").write_text("these are no heights")
    (tmp_path / "folder").mkdir()
    picture = np.zeros((3, 20, 20), dtype=np.uint8)
    written(tmp_path / "picture.tif", picture, TRANSFORM, UTM33)
    _flat(tmp_path / "no_crs.tif", crs=None)
    with pytest.warns(rasterio.errors.NotGeoreferencedWarning):
        _flat(tmp_path / "no_place.tif", transform=Affine.identity())
    _flat(tmp_path / "good.tif")
    names = ("missing", "notes", "folder", "picture", "no_crs", "no_place", "good")
    paths = tuple(tmp_path / (name if name == "folder" else f"{name}.tif") for name in names)
    source = TerrainSource(rasters=paths, obstacles=tmp_path / "trees.tif")
    messages = _refused(source)
    patterns = [
        r"missing\.tif: found no such file",
        r"notes\.tif: found a file that cannot be opened as a raster \(.*not recognized.*\)",
        r"folder: found a folder that cannot be opened as a raster",
        r"picture\.tif: found 3 bands; allowed: one band of heights",
        r"no_crs\.tif: found no CRS; .*rio edit-info --crs EPSG:32633 no_crs\.tif",
        r"no_place\.tif: found a CRS but no position and cell size",
        r"trees\.tif: found no such file",
    ]
    assert len(patterns) == len(messages)
    for pattern, message in zip(patterns, messages, strict=True):
        assert re.search(pattern, message), message
    with pytest.raises(TerrainError) as caught:
        describe_terrain(source)
    assert messages == [str(problem) for problem in caught.value.problems]


def test_no_raster_at_all():
    """A plan without rasters has no terrain."""
    expected = ["terrain: found no raster; allowed: one or more"]
    assert expected == _refused(TerrainSource(rasters=()))


def test_no_tower_at_all(tmp_path):
    """Without a place there is no area to read."""
    source = TerrainSource(rasters=(_flat(tmp_path / "utm.tif"),))
    expected = ["towers: found none with a sector that is on; allowed: one or more"]
    assert expected == _refused(source, ())


def test_truncated_file_is_named(tmp_path):
    """A file that opens but breaks off is told when its heights are read."""
    heights = np.random.default_rng(1).normal(size=(200, 200)).astype(np.float32)
    path = written(tmp_path / "half.tif", heights, TRANSFORM, UTM33)
    path.write_bytes(path.read_bytes()[:80_000])
    (message,) = _refused(TerrainSource(rasters=(path,)), radius_m=9000.0)
    assert message.startswith(f"{path}: found a damaged raster: its heights cannot be read")


def test_pictures_with_a_colour_table_and_complex_numbers(tmp_path):
    """One band alone makes no heights."""
    path = tmp_path / "palette.tif"
    written(path, np.zeros((20, 20), dtype=np.uint8), TRANSFORM, UTM33, photometric="palette")
    with rasterio.open(path, "r+") as dataset:
        dataset.write_colormap(1, {0: (255, 0, 0, 255)})
    waves = written(tmp_path / "waves.tif", np.zeros((20, 20), np.complex64), TRANSFORM, UTM33)
    first, second = _refused(TerrainSource(rasters=(path, waves)))
    assert "a picture with a colour table" in first
    assert "complex numbers" in second


def test_crs_without_a_place_on_earth(tmp_path):
    """A local drawing system cannot be placed."""
    local = 'LOCAL_CS["site grid",UNIT["metre",1],AXIS["E",EAST],AXIS["N",NORTH]]'
    path = _flat(tmp_path / "site.tif", crs=local)
    (message,) = _refused(TerrainSource(rasters=(path,)))
    assert "a CRS without a place on the earth" in message


@pytest.mark.parametrize(
    ("crs", "unit", "says", "found"),
    [
        ("EPSG:32633+6360", None, "metre", "the CRS's vertical axis in US survey foot"),
        ("EPSG:32633+5773", None, "foot", "the CRS's vertical axis in metre"),
        ("EPSG:4979", None, "foot", "the CRS's vertical axis in metre"),
        (UTM33, "ft", "metre", "the band's heights in ft"),
        (UTM33, "metre", "foot", "the band's heights in metre"),
        (UTM33, "cm", "metre", "the band's heights in cm"),
    ],
)
def test_units_that_contradict_the_plan(tmp_path, crs, unit, says, found):
    """A vertical axis or a band that states another unit than the plan is refused."""
    transform = TRANSFORM if crs != "EPSG:4979" else Affine(0.001, 0, 13.7, 0, -0.001, 47)
    # Version 1.0 files: their vertical axes are kept quiet unless one asks for them.
    more = {"geotiff_version": "1.0"} if "+" in crs else {}
    path = _flat(tmp_path / "unit.tif", crs=crs, unit=unit, transform=transform, **more)
    messages = _refused(TerrainSource(rasters=(path,), vertical_unit=says))
    assert any(f"{found}, while the plan says {says}" in message for message in messages)


@pytest.mark.parametrize(
    ("crs", "unit", "says"),
    [
        ("EPSG:32633+6360", None, "foot"),
        ("EPSG:32633+5773", None, "metre"),
        (UTM33, "US survey foot", "foot"),
        (UTM33, "Metres", "metre"),
        (UTM33, "furlong", "metre"),
    ],
)
def test_units_that_agree_with_the_plan(tmp_path, crs, unit, says):
    """Stated units that agree pass, and so does a name that nobody knows."""
    path = _flat(tmp_path / "unit.tif", crs=crs, unit=unit)
    (description,) = describe_terrain(TerrainSource(rasters=(path,), vertical_unit=says))
    assert says == description.vertical_unit


def test_towers_off_the_rasters_are_all_named(tmp_path):
    """Each tower outside is told, with a word on swapped coordinates where that would fit."""
    path = _flat(tmp_path / "utm.tif")
    centres = [MIDDLE, (48.0, 13.75), (13.75, 46.95)]
    source = TerrainSource(rasters=(path,))
    messages = _refused(source, centres, names=["a", "b", "c"])
    assert messages == [
        "tower b (latitude 48.000000, longitude 13.750000): found a place outside the terrain "
        "rasters; allowed: a place on one of them. Check its coordinates, or add the raster that "
        "covers it",
        "tower c (latitude 13.750000, longitude 46.950000): found a place outside the terrain "
        "rasters; allowed: a place on one of them. Latitude and longitude seem to be swapped",
    ]
    with pytest.raises(TerrainError, match=r"tower at latitude 48\.000000"):
        plan_grid(source, centres, 2000.0)


def test_towers_on_holes_are_all_named(tmp_path):
    """A mast needs ground: a hole under it is an error, unless it is filled."""
    heights = np.full((200, 200), 500, dtype=np.float32)
    heights[90:110, 90:110] = np.nan
    path = written(tmp_path / "hole.tif", heights, TRANSFORM, UTM33, nodata=np.nan)
    with rasterio.open(path) as dataset:
        easting, northing = dataset.xy(100, 100)
    longitude, latitude = (
        values[0] for values in rasterio.warp.transform(UTM33, "EPSG:4326", [easting], [northing])
    )
    centres = [(latitude, longitude), (latitude + 0.0005, longitude)]
    source = TerrainSource(rasters=(path,))
    messages = _refused(source, centres, names=["p", "q"])
    expected = ["tower p", "tower q"]
    assert expected == [message[:7] for message in messages]
    assert "no height (a hole)" in messages[0]
    filled = TerrainSource(rasters=(path,), fill_holes_up_to_cells=400)
    assert read_terrain(filled, centres, 2000.0).filled_share > 0.0


def test_grid_beyond_the_limit_names_the_keys(tmp_path, monkeypatch):
    """A grid that would not fit into memory is refused before anything is read."""
    path = _flat(tmp_path / "utm.tif")
    source = TerrainSource(rasters=(path,))
    (message,) = _refused(source, cell_m=0.1)
    assert "cells of 0.1 m; allowed: up to 400,000,000 cells" in message
    assert "larger model.cell_m or a smaller model.radius_km" in message
    monkeypatch.setattr(terrain_grid, "LARGEST_GRID_CELLS", 5000)
    (message,) = _refused(source)
    assert "allowed: up to 5,000 cells" in message


@pytest.mark.parametrize(
    ("crs", "trouble"),
    [
        ("EPSG:3857", "is not conformal"),
        ("EPSG:4326", "it is not projected"),
        ("EPSG:2263", "its unit is the US survey foot"),
        ("EPSG:32637", "its scale over the area runs from 1.0"),
        ("EPSG:27700", "the towers lie outside|its scale"),
        ("EPSG:999999", "it is not known"),
        ("nonsense", "it is not known"),
    ],
)
def test_named_grids_that_cannot_serve(tmp_path, crs, trouble):
    """A plan may name its grid, but not one that bends lengths and angles."""
    path = _flat(tmp_path / "utm.tif")
    (message,) = _refused(TerrainSource(rasters=(path,)), crs=crs)
    assert message.startswith(f"the plan's grid CRS: found {crs!r}, which cannot be the grid: ")
    assert re.search(trouble, message)


def test_nothing_is_fetched_from_a_network(tmp_path):
    """A raster that refers to the web is an unreadable file, not a request."""
    asked = []

    class Listener(http.server.BaseHTTPRequestHandler):
        def do_GET(self):
            asked.append(self.path)
            self.send_error(404)

        do_HEAD = do_GET

        def log_message(self, *_):
            return None

    with http.server.HTTPServer(("127.0.0.1", 0), Listener) as server:
        threading.Thread(target=server.serve_forever, daemon=True).start()
        (tmp_path / "web.vrt").write_text(
            '<VRTDataset rasterXSize="200" rasterYSize="200"><SRS>EPSG:32633</SRS>'
            "<GeoTransform>402000,30,0,5203000,0,-30</GeoTransform>"
            '<VRTRasterBand dataType="Float32" band="1"><SimpleSource><SourceFilename>'
            f"/vsicurl/http://127.0.0.1:{server.server_address[1]}/heights.tif"
            "</SourceFilename><SourceBand>1</SourceBand>"
            '<SrcRect xOff="0" yOff="0" xSize="200" ySize="200"/>'
            '<DstRect xOff="0" yOff="0" xSize="200" ySize="200"/>'
            "</SimpleSource></VRTRasterBand></VRTDataset>"
        )
        (message,) = _refused(TerrainSource(rasters=(tmp_path / "web.vrt",)))
        server.shutdown()
    assert "web.vrt" in message
    assert asked == []
