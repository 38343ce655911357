"""The grid, heights between cell centres, where masts stand, and the filling of holes."""

import numpy as np
import pytest
from affine import Affine
from pyproj import CRS
from scipy import ndimage

from planner.terrain import Grid, Terrain, bilinear, fill_small_holes

GRID = Grid(
    crs=CRS.from_epsg(32633), transform=Affine(30, 0, 400_000, 0, -30, 5_200_000), rows=40, cols=60
)


def _hills(seed=7, shape=(40, 60)):
    noise = np.random.default_rng(seed).normal(size=shape)
    return (ndimage.gaussian_filter(noise, 2.0) * 300.0 + 500.0).astype(np.float32)


def _terrain(ground, **kwargs):
    return Terrain(grid=GRID, ground_elevation_m=ground, **kwargs)


def test_whole_rows_and_columns_are_cell_centres():
    """Cell (0, 0) has its centre half a cell inside the grid's top left corner."""
    expected_easting, expected_northing = 400_015.0, 5_199_985.0
    easting, northing = GRID.easting_northing(0, 0)
    assert (expected_easting, expected_northing) == (float(easting), float(northing))
    row, col = GRID.row_col(400_000.0, 5_200_000.0)
    assert (float(row), float(col)) == (-0.5, -0.5)


def test_grid_positions_turn_around():
    """row_col undoes easting_northing, and to_geographic undoes from_geographic."""
    rng = np.random.default_rng(1)
    row, col = rng.uniform(-5, 45, 100), rng.uniform(-5, 65, 100)
    again = GRID.row_col(*GRID.easting_northing(row, col))
    np.testing.assert_allclose(again, (row, col), atol=1e-8)
    latitude, longitude = GRID.to_geographic(*GRID.easting_northing(row, col))
    easting, northing = GRID.from_geographic(latitude, longitude)
    np.testing.assert_allclose((easting, northing), GRID.easting_northing(row, col), atol=1e-6)


def test_bounds_and_contains_reach_to_the_outer_edges():
    """The outer half of an outer cell belongs to the grid, the far edge itself no more."""
    expected = (400_000.0, 5_198_800.0, 401_800.0, 5_200_000.0)
    assert expected == GRID.bounds
    expected_inside = [True, False, True, False, True, False, False]
    inside = GRID.contains([-0.5, -0.51, 39.4, 39.5, 0, 0, np.nan], [0, 0, 0, 0, 59.4, 59.5, 0])
    assert expected_inside == inside.tolist()


@pytest.mark.parametrize(
    ("transform", "rows"),
    [
        (Affine(30, 0, 0, 0, 30, 0), 5),
        (Affine(30, 0, 0, 0, -31, 0), 5),
        (Affine(30, 1, 0, -1, -30, 0), 5),
        (Affine(30, 0, 0, 0, -30, 0), 0),
    ],
)
def test_grid_refuses_what_is_no_grid(transform, rows):
    """South-up, oblong, turned or empty grids cannot be made."""
    with pytest.raises(ValueError, match="grid"):
        Grid(crs=CRS.from_epsg(32633), transform=transform, rows=rows, cols=5)


def test_ground_is_bilinear_between_centres():
    """Heights between centres are those of scipy's linear interpolation."""
    ground = _hills()
    rng = np.random.default_rng(2)
    row, col = rng.uniform(0, 39, (8, 50)), rng.uniform(0, 59, (8, 50))
    expected = ndimage.map_coordinates(ground.astype(float), [row, col], order=1)
    np.testing.assert_allclose(_terrain(ground).ground_at(row, col), expected, atol=1e-9)


def test_ground_is_nan_only_where_a_corner_with_weight_is_missing():
    """A hole spoils the places between it and its neighbours, not the neighbours themselves."""
    ground = _hills()
    ground[10, 20] = np.nan
    terrain = _terrain(ground)
    spoilt = terrain.ground_at([10, 9.5, 10.5, 9.01, 10], [20, 20, 20.5, 20.99, 19.5])
    assert np.isnan(spoilt).all()
    whole = terrain.ground_at([9, 11, 10, 10, 9], [20, 20, 19, 21, 20.5])
    assert np.isfinite(whole).all()


def test_ground_ends_at_the_outer_edges():
    """In the outer half cells the edge's heights continue; beyond, and for NaN, there is none."""
    ground = _hills()
    terrain = _terrain(ground.copy())
    on_edge = terrain.ground_at([39.0, 39.5, -0.5, -0.3], [59.0, 59.5, -0.5, 7.0])
    expected = [ground[39, 59], ground[39, 59], ground[0, 0], ground[0, 7]]
    np.testing.assert_array_equal(on_edge, np.array(expected, dtype=float))
    beyond = terrain.ground_at([39.501, -0.501, 0, 0, np.nan], [0, 0, 59.501, -0.501, 0])
    assert np.isnan(beyond).all()


def test_compiled_bilinear_is_the_plain_one():
    """The kernels' compiled scalar and the plain code give the same numbers."""
    ground = _hills()
    ground[3, 3] = np.nan
    rng = np.random.default_rng(3)
    for row, col in zip(rng.uniform(-1, 41, 200), rng.uniform(-1, 61, 200), strict=True):
        plain = bilinear.py_func(ground, row, col)
        assert plain == pytest.approx(bilinear(ground, row, col), rel=1e-14, nan_ok=True)


def test_terrain_arrays_are_checked_and_read_only():
    """A wrong type or shape is refused, and nobody changes the heights later."""
    ground = _hills()
    terrain = _terrain(ground)
    with pytest.raises(ValueError, match="read-only"):
        terrain.ground_elevation_m[0, 0] = 1.0
    with pytest.raises(ValueError, match="float64"):
        _terrain(_hills().astype(float))
    with pytest.raises(ValueError, match="ground_elevation_m"):
        _terrain(_hills(shape=(40, 61)))
    with pytest.raises(ValueError, match="NaN or negative"):
        _terrain(_hills(), obstacle_height_m=np.full((40, 60), -1, dtype=np.float32))
    with pytest.raises(ValueError, match="NaN or negative"):
        _terrain(_hills(), obstacle_height_m=np.full((40, 60), np.nan, dtype=np.float32))


def test_masts_stand_on_the_ground_unless_a_surface_is_lowered():
    """Only a surface model with a radius lowers the standing elevation."""
    row, col = [5.3, 20.0], [7.7, 30.0]
    ground = _terrain(_hills()).ground_at(row, col)
    for kind, radius_m in (("ground", 100.0), ("surface", 0.0), ("ground", 0.0)):
        terrain = _terrain(_hills(), kind=kind, lowering_radius_m=radius_m)
        np.testing.assert_array_equal(terrain.standing_elevation_m(row, col), ground)


def test_lowering_finds_the_lowest_cell_within_the_radius():
    """By brute force over all cells; holes take no part, and a place on a hole has no height."""
    ground = _hills()
    ground[20, 31] = np.nan
    terrain = _terrain(ground, kind="surface", lowering_radius_m=75.0)
    rng = np.random.default_rng(4)
    rows, cols = np.mgrid[:40, :60]
    row, col = rng.uniform(0, 39, 50), rng.uniform(0, 59, 50)
    for r, c in zip(row, col, strict=True):
        near = np.hypot(rows - r, cols - c) * 30.0 <= 75.0
        here = float(terrain.ground_at(r, c))
        expected = np.nan if np.isnan(here) else min(here, float(np.nanmin(ground[near])))
        actual = float(terrain.standing_elevation_m(r, c))
        assert expected == pytest.approx(actual, abs=1e-9, nan_ok=True)
    assert np.isnan(terrain.standing_elevation_m(20, 31))


def test_lowering_by_less_than_a_cell_is_the_ground():
    """Where no cell centre is near enough the ground itself counts."""
    terrain = _terrain(_hills(), kind="surface", lowering_radius_m=5.0)
    ground = terrain.ground_at(5.5, 7.5)
    np.testing.assert_array_equal(terrain.standing_elevation_m(5.5, 7.5), ground)


def test_filling_continues_a_plane_exactly():
    """A plane has no curvature, so the filled cells lie on it."""
    plane = np.add.outer(np.arange(40) * 2.0, np.arange(60) * 3.0).astype(np.float32)
    holed = plane.copy()
    holed[10:13, 20:24] = np.nan
    holed[30, 40] = np.nan
    filled, count = fill_small_holes(holed, 12)
    expected_count = 13
    assert expected_count == count
    np.testing.assert_allclose(filled, plane, atol=1e-4)
    assert np.isnan(holed[30, 40]), "the input is not changed"


def test_filling_stays_within_the_rim():
    """No filled cell is higher or lower than the rim of its hole."""
    ground = _hills()
    ground[10:16, 20:26] = np.nan
    filled, _ = fill_small_holes(ground, 36)
    rim = ground[9:17, 19:27]
    patch = filled[10:16, 20:26]
    assert np.nanmin(rim) <= patch.min()
    assert patch.max() <= np.nanmax(rim)
    assert np.isfinite(filled).all()


def test_only_small_holes_that_are_seen_whole_are_filled():
    """The size counts cells that touch at sides or corners; the array's edge leaves a hole open."""
    ground = _hills()
    ground[5, 5] = ground[6, 6] = np.nan  # touch at a corner: one hole of two cells
    ground[20:23, 20] = np.nan  # three cells
    ground[0, 30] = np.nan  # at the edge
    _, none = fill_small_holes(ground, 1)
    filled, count = fill_small_holes(ground, 2)
    expected = (0, 2)
    assert expected == (none, count)
    assert np.isfinite(filled[5, 5])
    assert np.isnan(filled[20:23, 20]).all()
    assert np.isnan(filled[0, 30])
    same, count = fill_small_holes(_hills(), 10)
    assert count == 0
    np.testing.assert_array_equal(same, _hills())
