"""Terrain from files: which grid a plan gets, and that the heights on it are the rasters' own."""

import tracemalloc

import matplotlib.cbook
import numpy as np
import pytest
import rasterio
from affine import Affine
from pyproj import Transformer
from rasterio.enums import Resampling
from rasterio.vrt import WarpedVRT
from rasterio.windows import Window

from planner.io import resample
from planner.io.terrain_files import TerrainSource, describe_terrain, plan_grid, read_terrain
from tests.terrain_rasters import SHARED, Plane, degree_tile, written

UTM33 = "EPSG:32633"
MIDDLE = (46.95, 13.75)  # about 405 km east, 5200 km north in zone 33
UTM_TRANSFORM = Affine(30, 0, 395_010, 0, -30, 5_211_000)


def _noise(rows, cols, seed=5):
    return np.random.default_rng(seed).uniform(300, 900, (rows, cols)).astype(np.float32)


def _shared(name):
    path = SHARED / name
    if not path.exists():
        pytest.skip(f"{path.name} is not on this machine (../shared/terrain)")
    return path


# --- used as it is --------------------------------------------------------------------------


def test_metric_raster_is_used_unresampled(tmp_path):
    """The heights of a UTM raster are its own numbers, and only the window needed is taken."""
    heights = _noise(800, 700)
    path = written(tmp_path / "utm.tif", heights, UTM_TRANSFORM, UTM33)
    source = TerrainSource(rasters=(path,))
    grid, unresampled = plan_grid(source, [MIDDLE], 3000.0)
    terrain = read_terrain(source, [MIDDLE], 3000.0)
    assert unresampled
    assert (grid.rows, grid.cols) == (terrain.grid.rows, terrain.grid.cols)
    assert grid.rows < 210
    assert grid.cols < 210
    top = round((UTM_TRANSFORM.f - grid.transform.f) / 30)
    left = round((grid.transform.c - UTM_TRANSFORM.c) / 30)
    window = heights[top : top + grid.rows, left : left + grid.cols]
    np.testing.assert_array_equal(window, terrain.ground_elevation_m)
    easting, northing = grid.from_geographic(*MIDDLE)
    left_m, bottom_m, right_m, top_m = grid.bounds
    reach = min(easting - left_m, right_m - easting, northing - bottom_m, top_m - northing)
    assert 3000.0 < reach < 3100.0
    assert terrain.warnings == ()


def test_grid_is_clipped_to_the_data(tmp_path):
    """A radius that reaches beyond the raster gives a grid that ends with the raster."""
    heights = _noise(400, 300)
    path = written(tmp_path / "utm.tif", heights, UTM_TRANSFORM, UTM33)
    terrain = read_terrain(TerrainSource(rasters=(path,)), [(46.99, 13.66)], 50_000.0)
    np.testing.assert_array_equal(heights, terrain.ground_elevation_m)
    assert tuple(terrain.grid.transform) == tuple(UTM_TRANSFORM)


def test_metric_tiles_that_fit_together_are_used_unresampled(tmp_path):
    """Tiles of one lattice are one raster; only those that are needed are opened for reading."""
    heights = _noise(600, 600)
    paths = []
    for row in range(3):
        for col in range(3):
            transform = Affine(30, 0, 395_010 + col * 6000, 0, -30, 5_211_000 - row * 6000)
            part = heights[row * 200 : row * 200 + 200, col * 200 : col * 200 + 200]
            paths.append(written(tmp_path / f"{row}{col}.tif", part, transform, UTM33))
    paths[8].write_bytes(paths[8].read_bytes()[:2000])  # damaged, but not needed
    source = TerrainSource(rasters=tuple(paths))
    terrain = read_terrain(source, [(46.98, 13.70)], 4000.0)
    grid = terrain.grid
    top = round((UTM_TRANSFORM.f - grid.transform.f) / 30)
    left = round((grid.transform.c - UTM_TRANSFORM.c) / 30)
    window = heights[top : top + grid.rows, left : left + grid.cols]
    assert plan_grid(source, [(46.98, 13.70)], 4000.0)[1]
    assert left < 200 < left + grid.cols
    np.testing.assert_array_equal(window, terrain.ground_elevation_m)


def test_only_the_window_needed_is_read(tmp_path):
    """A raster of 7 GB (sparse, so that the file is small) gives its window at once."""
    side = 60_000
    path = tmp_path / "country.tif"
    with rasterio.open(
        path,
        "w",
        driver="GTiff",
        width=side,
        height=side,
        count=1,
        dtype="int16",
        crs=UTM33,
        transform=Affine(2, 0, 400_000, 0, -2, 5_200_000),
        tiled=True,
        blockxsize=512,
        blockysize=512,
        sparse_ok=True,
    ) as dataset:
        window = Window(50_000, 40_000, 100, 100)
        dataset.write(np.full((100, 100), 700, dtype=np.int16), 1, window=window)
    place = Transformer.from_crs(UTM33, 4326, always_xy=True).transform(500_100, 5_119_900)
    source = TerrainSource(rasters=(path,))
    for cell_m in (None, 5.0):
        read_terrain(source, [place[::-1]], 500.0, cell_m=cell_m)  # compiled once, unmeasured
        tracemalloc.start()
        terrain = read_terrain(source, [place[::-1]], 500.0, cell_m=cell_m)
        _, most_bytes = tracemalloc.get_traced_memory()
        tracemalloc.stop()
        row, col = terrain.grid.row_col(500_100.0, 5_119_900.0)
        assert float(terrain.ground_at(row, col)) == 700.0
        assert most_bytes < 50_000_000


@pytest.mark.parametrize(
    ("asked", "unresampled", "epsg", "cell_m"),
    [
        ({"cell_m": 30.0}, True, 32633, 30.0),
        ({"crs": "EPSG:32633"}, True, 32633, 30.0),
        ({"cell_m": 25.0}, False, 32633, 25.0),
        ({"crs": "EPSG:25833"}, False, 25833, 30.0),
        ({"crs": "EPSG:31255", "cell_m": 20.0}, False, 31255, 20.0),
    ],
)
def test_plan_that_names_another_grid_gets_it(tmp_path, asked, unresampled, epsg, cell_m):
    """Naming the raster's own grid changes nothing; any other cell or CRS means resampling."""
    path = written(tmp_path / "utm.tif", _noise(500, 500), UTM_TRANSFORM, UTM33)
    grid, as_it_is = plan_grid(TerrainSource(rasters=(path,)), [MIDDLE], 3000.0, **asked)
    assert (unresampled, epsg, cell_m) == (as_it_is, grid.crs.to_epsg(), grid.cell_m)


# --- resampled ------------------------------------------------------------------------------


def _place(crs, latitude, longitude):
    return Transformer.from_crs(4326, crs, always_xy=True).transform(longitude, latitude)


@pytest.mark.parametrize(
    ("what", "crs", "middle", "transform_of", "epsg"),
    [
        ("degrees", "EPSG:4326", (46.9, 13.7), (0.0004, 0, 0, -0.0003), 32633),
        ("degrees in the south", "EPSG:4326", (-46.9, 13.7), (0.0004, 0, 0, -0.0003), 32733),
        ("Web Mercator", "EPSG:3857", (46.9, 13.7), (40, 0, 0, -40), 32633),
        ("equal area", "EPSG:3035", (46.9, 13.7), (30, 0, 0, -30), 32633),
        ("US survey feet", "EPSG:2263", (40.75, -73.9), (100, 0, 0, -100), 32618),
        ("turned by 30 degrees", UTM33, (46.9, 13.7), (26, 15, 15, -26), 32633),
        ("oblong cells", UTM33, (46.9, 13.7), (30, 0, 0, -20), 32633),
        ("south-up", UTM33, (46.9, 13.7), (30, 0, 0, 30), 32633),
        ("the wrong zone", "EPSG:32631", (46.9, 13.7), (30, 0, 0, -30), 32633),
        ("near the south pole", "EPSG:3031", (-86.0, 40.0), (30, 0, 0, -30), 5042),
        ("north of 84", "EPSG:3413", (85.0, 10.0), (30, 0, 0, -30), 5041),
        ("degrees south of 80", "EPSG:4326", (-84.0, 40.0), (0.003, 0, 0, -0.0003), 5042),
    ],
)
def test_resampled_heights_are_those_of_the_place(tmp_path, what, crs, middle, transform_of, epsg):
    """A plane in the raster's own coordinates is found again at the exact place of every cell."""
    a, b, d, e = transform_of
    rows = cols = 300
    x, y = _place(crs, *middle)
    transform = Affine(a, b, x - a * cols / 2 - b * rows / 2, d, e, y - d * cols / 2 - e * rows / 2)
    size = abs(a) + abs(b)
    plane = Plane(crs, x, y, 7.0 / size, -4.0 / size, 2000.0)
    path = written(tmp_path / "raster.tif", plane.raster(transform, rows, cols), transform, crs)
    source = TerrainSource(rasters=(path,))
    terrain = read_terrain(source, [middle], 2500.0)
    assert epsg == terrain.grid.crs.to_epsg(), what
    assert not plan_grid(source, [middle], 2500.0)[1]
    expected = plane.on(terrain.grid)
    # 0.005 of a cell is what positions may be off; heights are float32.
    np.testing.assert_allclose(terrain.ground_elevation_m, expected, atol=0.04, err_msg=what)


def test_cell_of_a_raster_in_degrees_is_kept_in_size(tmp_path):
    """Without a cell in the plan, a cell covers as much ground as the raster's cell does."""
    plane = Plane("EPSG:4326", 13.5, 46.5, 100.0, 100.0)
    path = degree_tile(tmp_path / "t.tif", 46, 13, 1200, plane, shared_edge=False)
    grid, _ = plan_grid(TerrainSource(rasters=(path,)), [(46.5, 13.5)], 5000.0)
    north_m, east_m = 111_160 / 1200, 76_750 / 1200  # at 46.5 N; a degree of WGS 84, rounded
    expected = (north_m * east_m) ** 0.5
    assert expected == pytest.approx(grid.cell_m, rel=0.002)


@pytest.mark.parametrize("shared_edge", [True, False])
def test_no_seam_where_degree_tiles_meet(tmp_path, shared_edge):
    """Four tiles that meet in a corner give the plane without gap or step."""
    plane = Plane("EPSG:4326", 14.0, 47.0, 3000.0, -2000.0, 1000.0)
    paths = tuple(
        degree_tile(tmp_path / f"{s}{w}.tif", s, w, 600, plane, shared_edge=shared_edge)
        for s in (46, 47)
        for w in (13, 14)
    )
    terrain = read_terrain(TerrainSource(rasters=paths), [(47.0, 14.0)], 4000.0, cell_m=40.0)
    expected = plane.on(terrain.grid)
    np.testing.assert_allclose(terrain.ground_elevation_m, expected, atol=0.05)


@pytest.mark.parametrize("place", [(-17.0, 179.999), (-17.0, -179.999)])
def test_180th_meridian_is_no_edge(tmp_path, place):
    """Tiles on both sides of it join, from whichever side the tower stands."""
    plane = Plane("EPSG:4326", 180.0, -17.0, 3000.0, -2000.0, 1000.0)
    west = degree_tile(tmp_path / "w.tif", -17, 179, 600, plane, shared_edge=False)
    shifted = Plane("EPSG:4326", -180.0, -17.0, 3000.0, -2000.0, 1000.0)
    east = degree_tile(tmp_path / "e.tif", -17, -180, 600, shifted, shared_edge=False)
    south = degree_tile(tmp_path / "s.tif", -18, 179, 600, plane, shared_edge=False)
    last = degree_tile(tmp_path / "l.tif", -18, -180, 600, shifted, shared_edge=False)
    terrain = read_terrain(TerrainSource(rasters=(west, east, south, last)), [place], 4000.0)
    expected = plane.on(terrain.grid)
    np.testing.assert_allclose(terrain.ground_elevation_m, expected, atol=0.05)


def test_raster_around_the_earth_serves_both_sides_of_the_180th_meridian(tmp_path):
    """A raster from 180 W to 180 E is its own neighbour."""
    transform = Affine(0.5, 0, -180, 0, -0.5, 90)
    longitude = np.arange(720) * 0.5 - 179.75
    heights = np.tile(100.0 * np.abs(longitude) / 180.0, (360, 1)).astype(np.float32)
    path = written(tmp_path / "earth.tif", heights, transform, "EPSG:4326")
    source = TerrainSource(rasters=(path,))
    terrain = read_terrain(source, [(10.0, 180.0)], 100_000.0, cell_m=5000.0)
    grid = terrain.grid
    row, col = np.mgrid[: grid.rows, : grid.cols]
    _, longitude = grid.to_geographic(*grid.easting_northing(row, col))
    # Bilinear: flat across the last half cell on each side, linear before.
    expected = 100.0 * np.minimum(np.abs(longitude), 179.75) / 180.0
    np.testing.assert_allclose(terrain.ground_elevation_m, expected, atol=0.01)


def test_pole_in_the_middle_of_a_raster_in_degrees(tmp_path):
    """All meridians meet at the pole; the grid around it is whole."""
    transform = Affine(1.0, 0, -180, 0, -0.01, -88)
    latitude = -88 - 0.01 * (np.arange(200) + 0.5)
    heights = np.tile((2800 + 100 * (latitude + 90))[:, np.newaxis], (1, 360)).astype(np.float32)
    path = written(tmp_path / "pole.tif", heights, transform, "EPSG:4326")
    source = TerrainSource(rasters=(path,))
    terrain = read_terrain(source, [(-89.99, 25.0)], 20_000.0, cell_m=500.0)
    grid = terrain.grid
    row, col = np.mgrid[: grid.rows, : grid.cols]
    latitude, _ = grid.to_geographic(*grid.easting_northing(row, col))
    expected = 2800 + 100 * (np.maximum(latitude, -89.995) + 90)
    np.testing.assert_allclose(terrain.ground_elevation_m, expected, atol=0.01)


def test_agrees_with_gdals_warp(tmp_path):
    """On rough ground without holes, heights are those of GDAL's bilinear warp made exact."""
    heights = _noise(300, 300)
    transform = Affine(0.0006, 0, 13.6, 0, -0.0006, 47.0)
    path = written(tmp_path / "deg.tif", heights, transform, "EPSG:4326")
    terrain = read_terrain(TerrainSource(rasters=(path,)), [(46.92, 13.69)], 5000.0, cell_m=30.0)
    grid = terrain.grid
    with (
        rasterio.open(path) as dataset,
        WarpedVRT(
            dataset,
            crs=grid.crs.to_wkt(),
            transform=grid.transform,
            height=grid.rows,
            width=grid.cols,
            resampling=Resampling.bilinear,
            tolerance=0.001,
        ) as warped,
    ):
        expected = warped.read(1)
    # Both are bilinear; positions may be off by 0.005 of a cell, cells differ by up to 600 m.
    np.testing.assert_allclose(terrain.ground_elevation_m, expected, atol=3.0)
    assert float(np.median(np.abs(terrain.ground_elevation_m - expected))) < 0.2


def test_grid_on_the_rasters_own_lattice_keeps_its_heights(tmp_path):
    """Two rasters of which one must be resampled: cells of the other come through unchanged."""
    heights = _noise(200, 200)
    near = written(tmp_path / "near.tif", heights, Affine(30, 0, 402_007, 0, -30, 5_203_011), UTM33)
    far = written(
        tmp_path / "far.tif", _noise(50, 50), Affine(500, 0, 408_007, 0, -500, 5_203_011), UTM33
    )
    terrain = read_terrain(TerrainSource(rasters=(near, far)), [MIDDLE], 9000.0)
    grid = terrain.grid
    row, col = grid.row_col(402_007 + 15, 5_203_011 - 15)
    assert (float(row), float(col)) == (0.0, 0.0)
    assert grid.cols > 210
    np.testing.assert_array_equal(heights, terrain.ground_elevation_m[:200, :200])


def test_earlier_rasters_count_first_and_later_ones_fill(tmp_path):
    """Where tiles of one lattice overlap, the later one shows only in the holes of the earlier."""
    first = np.full((200, 200), 500, dtype=np.float32)
    first[80:100, 80:100] = np.nan
    second = np.full((200, 200), 700, dtype=np.float32)
    paths = (
        written(tmp_path / "1.tif", first, Affine(30, 0, 402_000, 0, -30, 5_203_000), UTM33),
        written(tmp_path / "2.tif", second, Affine(30, 0, 403_500, 0, -30, 5_203_000), UTM33),
    )
    terrain = read_terrain(TerrainSource(rasters=paths), [(46.96, 13.76)], 20_000.0)
    expected = np.full((200, 250), 700, dtype=np.float32)
    expected[:, :200] = np.where(np.isnan(first), 700, first)
    np.testing.assert_array_equal(expected, terrain.ground_elevation_m)


@pytest.mark.parametrize("asked", [{}, {"cell_m": 37.0}])
def test_tiles_of_two_zones_are_joined(tmp_path, asked):
    """The later raster fills what the earlier leaves empty, in its own CRS, without a step."""
    plane = Plane("EPSG:4326", 12.0, 47.0, 3000.0, -2000.0, 1000.0)
    paths = []
    for zone, sign in ((33, 1), (32, -1)):
        crs = f"EPSG:326{zone}"
        x, y = _place(crs, 47.0, 12.0)
        left = x - 300 if sign > 0 else x - 9000  # they overlap by 600 m
        transform = Affine(30, 0, left, 0, -30, y + 4500)
        row, col = np.mgrid[:300, :310] + 0.5
        longitude, latitude = Transformer.from_crs(crs, 4326, always_xy=True).transform(
            left + 30 * col, y + 4500 - 30 * row
        )
        heights = plane(longitude, latitude).astype(np.float32)
        paths.append(written(tmp_path / f"{zone}.tif", heights, transform, crs))
    terrain = read_terrain(TerrainSource(rasters=tuple(paths)), [(47.0, 12.0)], 4000.0, **asked)
    expected = plane.on(terrain.grid)
    # Linear in degrees is not quite linear in metres: 30 m cells leave a millimetre.
    np.testing.assert_allclose(terrain.ground_elevation_m, expected, atol=0.05)


def test_coarser_cells_are_means(tmp_path):
    """Three by three cells become their mean; mostly holes make a hole; a warning says so."""
    heights = _noise(300, 300)
    heights[150, 150:153] = heights[151, 150] = np.nan  # four of nine cells
    heights[150, 153:156] = heights[151, 153:155] = np.nan  # five of nine cells
    transform = Affine(10, 0, 400_020, 0, -10, 5_200_980)  # on multiples of 30 m, like the grid
    path = written(tmp_path / "utm.tif", heights, transform, UTM33, nodata=np.nan)
    longitude, latitude = Transformer.from_crs(UTM33, 4326, always_xy=True).transform(
        401_300, 5_199_300
    )
    source = TerrainSource(rasters=(path,))
    terrain = read_terrain(source, [(latitude, longitude)], 1000.0, cell_m=30.0)
    row = round((5_200_980 - terrain.grid.transform.f) / 30)
    col = round((terrain.grid.transform.c - 400_020) / 30)
    means = np.nanmean(heights.reshape(100, 3, 100, 3).swapaxes(1, 2), axis=(2, 3))
    means[50, 51] = np.nan
    expected = means[row : row + terrain.grid.rows, col : col + terrain.grid.cols]
    assert np.isnan(expected).sum() == 1
    np.testing.assert_allclose(terrain.ground_elevation_m, expected, rtol=1e-5)
    assert any("mean of up to 9 cells" in note for note in terrain.warnings)


def test_parts_and_whole_give_the_same_heights(tmp_path, monkeypatch):
    """Working in small parts, as for a large raster, changes nothing."""
    heights = _noise(400, 400)
    heights[100:140, 150:180] = np.nan
    transform = Affine(0.0004, 0, 13.6, 0, -0.0004, 47.0)
    path = written(tmp_path / "deg.tif", heights, transform, "EPSG:4326")
    source = TerrainSource(rasters=(path,))
    whole = read_terrain(source, [(46.9, 13.68)], 4000.0, cell_m=90.0)
    monkeypatch.setattr(resample, "PART_CELLS", 3000)
    parts = read_terrain(source, [(46.9, 13.68)], 4000.0, cell_m=90.0)
    np.testing.assert_allclose(
        parts.ground_elevation_m, whole.ground_elevation_m, atol=0.5, equal_nan=True
    )


# --- real elevation data --------------------------------------------------------------------


def _jacksboro(tmp_path):
    """The USGS grid that ships with matplotlib, as a GeoTIFF; its ymin and ymax are swapped."""
    data = matplotlib.cbook.get_sample_data("jacksboro_fault_dem.npz")
    heights = data["elevation"]
    south, north = float(data["ymax"]), float(data["ymin"])
    west, east = float(data["xmin"]), float(data["xmax"])
    assert south < north
    rows, cols = heights.shape
    transform = Affine((east - west) / cols, 0, west, 0, -(north - south) / rows, north)
    return written(tmp_path / "jacksboro.tif", heights, transform, "EPSG:4269"), heights


def test_grid_that_ships_with_matplotlib(tmp_path):
    """The real grid in degrees (NAD 83) comes out in UTM 16 with its own range of heights."""
    path, heights = _jacksboro(tmp_path)
    source = TerrainSource(rasters=(path,))
    terrain = read_terrain(source, [(36.55, -84.25)], 8000.0)
    ground = terrain.ground_elevation_m
    assert terrain.grid.crs.to_epsg() == 32616
    assert np.isfinite(ground).all()
    assert heights.min() <= ground.min()
    assert ground.max() <= heights.max()
    assert float(ground.max() - ground.min()) > 300.0
    described = str(describe_terrain(source)[0])
    assert "EPSG:4269" in described
    assert "nodata none stated" in described


def test_real_utm_raster_is_used_as_it_is():
    """SRTM 1 arc second in UTM: unresampled, whole numbers, in the range the data states."""
    source = TerrainSource(rasters=(_shared("bigtujunga.tif"),))
    terrain = read_terrain(source, [(34.3, -118.2)], 8400.0)
    ground = terrain.ground_elevation_m
    assert plan_grid(source, [(34.3, -118.2)], 8400.0)[1]
    assert terrain.grid.cell_m == 30.0
    np.testing.assert_array_equal(ground, np.rint(ground))
    assert ground.min() >= 315
    assert ground.max() <= 2295


@pytest.mark.parametrize(
    ("name", "place", "epsg", "lowest_m", "highest_m"),
    [
        ("srtm_oetztal.tif", (46.9, 10.9), 32632, 387, 3727),
        ("N33E035.hgt", (33.85, 35.5), 32636, -1818, 3088),
        ("N57E011.hgt", (57.6, 11.9), 32632, -20, 200),
    ],
)
def test_real_rasters_in_degrees(name, place, epsg, lowest_m, highest_m):
    """Three tiles in degrees, one with sea floor, one without nodata tag, come out whole."""
    source = TerrainSource(rasters=(_shared(name),))
    terrain = read_terrain(source, [place], 8000.0)
    ground = terrain.ground_elevation_m
    assert epsg == terrain.grid.crs.to_epsg()
    assert terrain.warnings == ()
    assert np.isfinite(
        terrain.ground_at(*terrain.grid.row_col(*terrain.grid.from_geographic(*place)))
    )
    assert lowest_m <= np.nanmin(ground)
    assert np.nanmax(ground) <= highest_m


def test_far_tiles_of_one_plan_do_not_disturb():
    """A tile that lies far from the towers changes neither the grid nor the heights."""
    near, far = _shared("N33E035.hgt"), _shared("N57E011.hgt")
    alone = read_terrain(TerrainSource(rasters=(near,)), [(33.85, 35.6)], 5000.0)
    both = read_terrain(TerrainSource(rasters=(far, near)), [(33.85, 35.6)], 5000.0)
    assert alone.grid == both.grid
    np.testing.assert_array_equal(alone.ground_elevation_m, both.ground_elevation_m)
