"""Terrain from files: holes, units, scales and obstacles of the rasters."""

import numpy as np
import pytest
from affine import Affine

from planner.io.terrain_files import TerrainSource, read_terrain
from tests.terrain_rasters import SHARED, Plane, written

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


# --- holes ----------------------------------------------------------------------------------


def test_holes_keep_their_size_and_their_rim(tmp_path):
    """Resampling neither spreads nor closes a hole, and no rim is pulled towards the code."""
    plane = Plane("EPSG:4326", 13.7, 46.9, 3000.0, -2000.0, 1000.0)
    transform = Affine(0.0004, 0, 13.65, 0, -0.0003, 46.94)
    heights = np.rint(plane.raster(transform, 300, 300)).astype(np.int16)
    heights[100:120, 100:130] = -999
    heights[150, 200] = -999
    path = written(tmp_path / "deg.tif", heights, transform, "EPSG:4326", nodata=-999)
    terrain = read_terrain(TerrainSource(rasters=(path,)), [(46.9, 13.67)], 4500.0, cell_m=10.0)
    holes = np.isnan(terrain.ground_elevation_m)
    # True size of the holes: 601 cells of 0.0004 by 0.0003 degrees at 46.9 N.
    expected_m2 = 601 * (0.0004 * 76_190.0) * (0.0003 * 111_166.0)
    inside = holes[200:-200, 200:-200]
    assert expected_m2 == pytest.approx(inside.sum() * 100.0, rel=0.02)
    error = np.abs(terrain.ground_elevation_m - plane.on(terrain.grid))[~holes]
    assert float(error.max()) < 1.6  # half a metre of rounding, and up to a cell of slope at a rim


@pytest.mark.parametrize("code", [-32768, -9999])
def test_undeclared_codes_are_holes_with_a_warning(tmp_path, code):
    """int16 without a nodata tag: the codes that programs write count as holes, and it is said."""
    heights = np.full((200, 200), 500, dtype=np.int16)
    heights[20:30, 20:40] = code
    transform = Affine(30, 0, 402_000, 0, -30, 5_203_000)
    path = written(tmp_path / "codes.tif", heights, transform, UTM33)
    terrain = read_terrain(TerrainSource(rasters=(path,)), [MIDDLE], 9000.0)
    expected = 200
    assert expected == int(np.isnan(terrain.ground_elevation_m).sum())
    assert (f"codes.tif states no nodata value; cells that hold {code} are taken as holes",) == (
        terrain.warnings
    )


def test_mask_and_alpha_bands_make_holes(tmp_path):
    """A file may mark its holes by a second band in place of a code."""
    heights = np.full((200, 200), 500, dtype=np.uint16)
    alpha = np.full((200, 200), 65535, dtype=np.uint16)
    alpha[50:60, 50:60] = 0
    transform = Affine(30, 0, 402_000, 0, -30, 5_203_000)
    path = written(
        tmp_path / "alpha.tif", np.stack([heights, alpha]), transform, UTM33, alpha="yes"
    )
    terrain = read_terrain(TerrainSource(rasters=(path,)), [MIDDLE], 9000.0)
    expected = 100
    assert expected == int(np.isnan(terrain.ground_elevation_m).sum())


def test_small_holes_are_filled_on_request_and_told(tmp_path):
    """The share of the cells that were filled is reported; larger holes stay."""
    heights = np.full((200, 200), 500, dtype=np.float32)
    heights[20:22, 20:24] = np.nan
    heights[50:60, 50:60] = np.nan
    transform = Affine(30, 0, 402_000, 0, -30, 5_203_000)
    path = written(tmp_path / "h.tif", heights, transform, UTM33, nodata=np.nan)
    source = TerrainSource(rasters=(path,), fill_holes_up_to_cells=8)
    terrain = read_terrain(source, [MIDDLE], 9000.0)
    expected_share, expected_left = 8 / 40_000, 100
    assert expected_share == terrain.filled_share
    assert expected_left == int(np.isnan(terrain.ground_elevation_m).sum())
    assert "0.02% of the cells were holes of up to 8 cells" in terrain.warnings[0]


# --- units ----------------------------------------------------------------------------------


def test_feet_become_metres(tmp_path):
    """A raster in feet, whose CRS is silent about heights, is converted."""
    heights = np.full((200, 200), 1000, dtype=np.int16)
    transform = Affine(30, 0, 402_000, 0, -30, 5_203_000)
    path = written(tmp_path / "feet.tif", heights, transform, UTM33)
    source = TerrainSource(rasters=(path,), vertical_unit="foot")
    terrain = read_terrain(source, [MIDDLE], 2000.0)
    expected = 304.8
    np.testing.assert_allclose(terrain.ground_elevation_m, expected, rtol=1e-6)


def test_survey_feet_of_the_crs_are_survey_feet(tmp_path):
    """Where the CRS's vertical axis is in US survey feet, a foot is 1200/3937 m."""
    heights = np.full((200, 200), 10_000, dtype=np.float32)
    transform = Affine(30, 0, 402_000, 0, -30, 5_203_000)
    path = written(tmp_path / "feet.tif", heights, transform, "EPSG:32633+6360")
    source = TerrainSource(rasters=(path,), vertical_unit="foot")
    terrain = read_terrain(source, [MIDDLE], 2000.0)
    expected = np.float32(10_000 * 1200 / 3937)
    np.testing.assert_array_equal(terrain.ground_elevation_m, expected)
    assert terrain.grid.crs.to_epsg() == 32633


def test_scale_and_offset_of_the_file_are_applied(tmp_path):
    """Heights packed as whole decimetres above a base come out in metres."""
    heights = np.full((200, 200), 1234, dtype=np.int16)
    transform = Affine(30, 0, 402_000, 0, -30, 5_203_000)
    path = written(tmp_path / "packed.tif", heights, transform, UTM33, scale_offset=(0.1, 100.0))
    terrain = read_terrain(TerrainSource(rasters=(path,)), [MIDDLE], 2000.0)
    expected = 223.4
    np.testing.assert_allclose(terrain.ground_elevation_m, expected, rtol=1e-6)


def test_impossible_heights_are_told(tmp_path):
    """Heights in millimetres, or feet taken for metres on a summit, draw a warning."""
    heights = np.full((200, 200), 12_000, dtype=np.int32)
    transform = Affine(30, 0, 402_000, 0, -30, 5_203_000)
    path = written(tmp_path / "high.tif", heights, transform, UTM33)
    terrain = read_terrain(TerrainSource(rasters=(path,)), [MIDDLE], 2000.0)
    assert "run from 12,000 to 12,000 m, beyond -12,000 to 9,000 m" in terrain.warnings[0]


# --- obstacles and surfaces -----------------------------------------------------------------


def _ground_and_trees(tmp_path, trees, transform, crs=UTM33, **more):
    ground = written(
        tmp_path / "ground.tif",
        np.full((200, 200), 500, dtype=np.float32),
        Affine(30, 0, 402_000, 0, -30, 5_203_000),
        UTM33,
    )
    return ground, written(tmp_path / "trees.tif", trees, transform, crs, **more)


def test_obstacles_from_another_grid_and_crs(tmp_path):
    """Heights above ground come onto the terrain's grid, from degrees as well."""
    plane = Plane("EPSG:4326", 13.74, 46.95, 20.0, -30.0, 12.0)
    transform = Affine(0.0002, 0, 13.70, 0, -0.0002, 46.99)
    ground, trees = _ground_and_trees(
        tmp_path, plane.raster(transform, 450, 450), transform, "EPSG:4326"
    )
    source = TerrainSource(rasters=(ground,), obstacles=trees)
    terrain = read_terrain(source, [MIDDLE], 1500.0)
    np.testing.assert_allclose(terrain.obstacle_height_m, plane.on(terrain.grid), atol=0.001)
    assert terrain.warnings == ()
    assert (terrain.ground_elevation_m == 500.0).all()


def test_missing_and_negative_obstacles_are_zero_and_told(tmp_path):
    """Where the obstacle raster has no height, none is assumed, and the share is said."""
    trees = np.full((200, 100), 15.0, dtype=np.float32)
    trees[:20] = -3.0
    ground, path = _ground_and_trees(tmp_path, trees, Affine(30, 0, 402_000, 0, -30, 5_203_000))
    terrain = read_terrain(TerrainSource(rasters=(ground,), obstacles=path), [MIDDLE], 9000.0)
    expected = np.zeros((200, 200), dtype=np.float32)
    expected[20:, :100] = 15.0
    np.testing.assert_array_equal(terrain.obstacle_height_m, expected)
    notes = "\n".join(terrain.warnings)
    assert "50.0% of the cells have no obstacle height; there 0 m is taken" in notes
    assert "5.0% of the cells have an obstacle height below ground (down to -3.0 m)" in notes


def test_obstacles_that_lie_elsewhere_are_told(tmp_path):
    """An obstacle raster that does not reach the area leaves it bare, with a warning."""
    trees = np.full((20, 20), 15.0, dtype=np.float32)
    ground, path = _ground_and_trees(tmp_path, trees, Affine(30, 0, 600_000, 0, -30, 5_000_000))
    terrain = read_terrain(TerrainSource(rasters=(ground,), obstacles=path), [MIDDLE], 2000.0)
    assert not terrain.obstacle_height_m.any()
    assert any(note.startswith("100.0% of the cells have no") for note in terrain.warnings)


def test_obstacles_in_feet(tmp_path):
    """The obstacle raster has its own unit, whatever the terrain's is."""
    trees = np.full((200, 200), 100, dtype=np.uint8)
    ground, path = _ground_and_trees(tmp_path, trees, Affine(30, 0, 402_000, 0, -30, 5_203_000))
    source = TerrainSource(rasters=(ground,), obstacles=path, obstacle_unit="foot")
    terrain = read_terrain(source, [MIDDLE], 2000.0)
    np.testing.assert_allclose(terrain.obstacle_height_m, 30.48, rtol=1e-6)
    assert (terrain.ground_elevation_m == 500.0).all()


def test_surface_takes_no_obstacles_and_says_where_masts_stand(tmp_path):
    """A surface model already has the trees: the obstacle raster is left out, not added on top."""
    trees = np.full((200, 200), 15.0, dtype=np.float32)
    ground, path = _ground_and_trees(tmp_path, trees, Affine(30, 0, 402_000, 0, -30, 5_203_000))
    source = TerrainSource(rasters=(ground,), obstacles=path, kind="surface")
    terrain = read_terrain(source, [MIDDLE], 2000.0)
    assert terrain.obstacle_height_m is None
    notes = "\n".join(terrain.warnings)
    assert "the obstacle raster trees.tif is left out" in notes
    assert "masts and customers stand on roofs and treetops" in notes
    lowered = TerrainSource(rasters=(ground,), kind="surface", lowering_radius_m=60.0)
    terrain = read_terrain(lowered, [MIDDLE], 2000.0)
    assert "lowest cell within 60 m" in terrain.warnings[0]
    assert (terrain.kind, terrain.lowering_radius_m) == ("surface", 60.0)


def test_progress_runs_to_the_end(tmp_path):
    """The callback gets rising shares that end at 1."""
    trees = np.full((200, 200), 15.0, dtype=np.float32)
    ground, path = _ground_and_trees(tmp_path, trees, Affine(30, 0, 402_000, 0, -30, 5_203_000))
    shares = []
    source = TerrainSource(rasters=(ground,), obstacles=path)
    read_terrain(source, [MIDDLE], 2000.0, progress=shares.append)
    read_terrain(source, [MIDDLE], 2000.0, cell_m=20.0, progress=shares.append)
    assert shares[:2] == [0.5, 1.0]
    assert shares[-1] == 1.0
