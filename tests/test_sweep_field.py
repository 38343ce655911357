"""The path field of a mast: agreement with the single path, holes, threads, laws."""

import os
import subprocess
import sys
from pathlib import Path

import numba
import numpy as np
import pytest
from places import jacksboro, latitude_longitude, plain
from pyproj import Geod

from planner.errors import TerrainError
from planner.physics.free_space import free_space_loss_db
from planner.sweep import (
    COMPUTED,
    CROSSES_HOLE,
    NO_DATA,
    OUT_OF_RANGE,
    PathField,
    path_between,
    path_field,
)
from planner.terrain import Terrain

RADIO = {"frequency_mhz": 5600.0, "k_factor": 4.0 / 3.0, "polarization": "vertical"}


def field_at(terrain: Terrain, row: float, col: float, **changes) -> PathField:
    latitude, longitude = latitude_longitude(terrain, row, col)
    settings = {
        "antenna_height_m": 30.0,
        "receiver_height_m": 5.0,
        "radius_m": 8400.0,
        **RADIO,
        **changes,
    }
    return path_field(terrain, latitude=latitude, longitude=longitude, **settings)


def exact_at(terrain: Terrain, mast: tuple[float, float], cell: tuple[int, int], **changes):
    a = latitude_longitude(terrain, *mast)
    b = latitude_longitude(terrain, *cell)
    return path_between(
        terrain,
        a_latitude=a[0],
        a_longitude=a[1],
        a_height_m=30.0,
        b_latitude=b[0],
        b_longitude=b[1],
        b_height_m=5.0,
        **{**RADIO, **changes},
    )


def summit(terrain: Terrain) -> tuple[float, float]:
    ground = np.nan_to_num(terrain.ground_elevation_m, nan=-1e9)
    row, col = np.unravel_index(np.argmax(ground), ground.shape)
    return float(row), float(col)


def median_place(terrain: Terrain) -> tuple[float, float]:
    """The cell nearest to the median elevation, among those that have the radius around them."""
    middle = terrain.ground_elevation_m[400:600, 400:600]
    difference = np.abs(middle - np.nanmedian(terrain.ground_elevation_m))
    row, col = np.unravel_index(np.argmin(difference), middle.shape)
    return float(row + 400), float(col + 400)


@pytest.mark.parametrize("place", [summit, median_place])
def test_map_and_single_path_agree_on_real_terrain(place):
    """Half of 1,000 cells agree within 0.1 dB and 95 % within 1.5 dB; no bias of note."""
    terrain = jacksboro()
    mast = place(terrain)
    field = field_at(terrain, *mast)
    rows, cols = np.nonzero(field.status == COMPUTED)
    chosen = np.random.default_rng(7).choice(rows.size, 1000, replace=False)
    difference, clear = [], []
    for r, c in zip(rows[chosen], cols[chosen], strict=True):
        exact = exact_at(terrain, mast, (r + field.row_start, c + field.col_start))
        difference.append(field.path_loss_db[r, c] - exact.path_loss_db)
        clear.append(exact.line_of_sight)
    difference, clear = np.array(difference), np.array(clear)
    for name, part in (
        ("all", difference),
        ("line of sight", difference[clear]),
        ("obstructed", difference[~clear]),
    ):
        print(
            f"{place.__name__}, {name}: {part.size} cells, median |difference| "
            f"{np.median(np.abs(part)):.4f} dB, 95th percentile "
            f"{np.percentile(np.abs(part), 95):.3f} dB, mean {part.mean():+.4f} dB"
        )
    assert np.median(np.abs(difference)) <= 0.1
    assert np.percentile(np.abs(difference), 95) <= 1.5
    assert abs(difference.mean()) <= 0.1


def test_every_cell_in_range_is_computed_once_and_none_beyond():
    """On ground without holes exactly the cells within the radius have a loss."""
    terrain = plain(61, 75, cell_m=50.0)
    for row, col in ((30.0, 37.0), (12.3, 60.8), (0.0, 0.0), (59.5, 73.7)):
        field = field_at(terrain, row, col, radius_m=1234.0)
        a = latitude_longitude(terrain, row, col)
        rows, cols = np.indices(field.path_loss_db.shape)
        latitude, longitude = terrain.grid.to_geographic(
            *terrain.grid.easting_northing(rows + field.row_start, cols + field.col_start)
        )
        _, _, distance = Geod(ellps="WGS84").inv(
            np.full(latitude.shape, a[1]), np.full(latitude.shape, a[0]), longitude, latitude
        )
        inside = distance < 1234.0 - 0.05
        outside = distance > 1234.0 + 0.05
        assert (field.status[inside] == COMPUTED).all()
        assert (field.status[outside] == OUT_OF_RANGE).all()
        assert np.isfinite(field.path_loss_db[inside]).all()
        assert np.isnan(field.path_loss_db[outside]).all()


def test_flat_and_close_means_free_space():
    """Over flat ground, a few hundred metres from a high mast, nothing is lost to diffraction."""
    terrain = plain(41, 41, cell_m=20.0)
    field = field_at(terrain, 20.25, 20.25, radius_m=300.0)
    rows, cols = np.nonzero(field.status == COMPUTED)
    ground_m = 20.0 * np.hypot(rows + field.row_start - 20.25, cols + field.col_start - 20.25)
    ground_m /= field.frame.scale
    expected = free_space_loss_db(np.hypot(ground_m, 25.0), 5600.0)
    np.testing.assert_allclose(field.path_loss_db[rows, cols], expected, atol=2e-3)


def test_the_cell_under_the_mast_has_its_vertical_distance():
    """A mast on the very centre of a cell: 25 m from antenna to antenna, straight down."""
    field = field_at(plain(), 40.0, 40.0, radius_m=1000.0)
    own = (40 - field.row_start, 40 - field.col_start)
    assert field.status[own] == COMPUTED
    assert field.path_loss_db[own] == pytest.approx(float(free_space_loss_db(25.0, 5600.0)))
    assert field.departure_elevation_deg[own] == pytest.approx(-90.0, abs=1e-3)


def test_two_antennas_in_one_place_have_no_path():
    """Where both antennas would coincide the cell says so instead of giving a number."""
    field = field_at(plain(), 40.0, 40.0, radius_m=1000.0, receiver_height_m=30.0)
    own = (40 - field.row_start, 40 - field.col_start)
    assert field.status[own] == NO_DATA
    assert np.isnan(field.path_loss_db[own])


def test_results_do_not_depend_on_the_number_of_threads():
    """One thread and two give the same bytes."""
    terrain = jacksboro()
    before = numba.get_num_threads()
    fields = []
    try:
        for threads in (1, min(2, numba.config.NUMBA_NUM_THREADS)):
            numba.set_num_threads(threads)
            fields.append(field_at(terrain, 500.3, 480.8, radius_m=5000.0))
    finally:
        numba.set_num_threads(before)
    assert fields[0].path_loss_db.tobytes() == fields[1].path_loss_db.tobytes()
    elevations = [field.departure_elevation_deg.tobytes() for field in fields]
    assert elevations[0] == elevations[1]


def test_a_hole_spoils_only_itself_and_what_lies_behind_it():
    """Cells on the hole say no data, cells behind say crossing, all others are as without it."""
    ground = np.zeros((81, 81), dtype=np.float32)
    whole = field_at(plain(ground=ground.copy()), 40.0, 20.0, radius_m=1900.0)
    ground[38:43, 40:44] = np.nan
    holed = field_at(plain(ground=ground), 40.0, 20.0, radius_m=1900.0)
    rows, cols = np.indices(holed.status.shape)
    rows, cols = rows + holed.row_start, cols + holed.col_start
    inside = (rows >= 38) & (rows < 43) & (cols >= 40) & (cols < 44)
    assert (holed.status[inside] == NO_DATA).all()
    behind = holed.status == CROSSES_HOLE
    assert behind.sum() > 50
    # Behind means: further than the hole's near edge, within the angle that the hole covers.
    slope = np.abs(rows - 40.0) / np.maximum(cols - 20.0, 1e-9)
    assert (cols[behind] >= 40).all()
    assert (slope[behind] <= 3.0 / 19.0 + 0.02).all()
    squarely = (cols > 44) & (slope < 2.0 / 23.0) & (holed.status != OUT_OF_RANGE)
    assert (holed.status[squarely] == CROSSES_HOLE).all()
    same = holed.status == COMPUTED
    np.testing.assert_array_equal(holed.path_loss_db[same], whole.path_loss_db[same])
    assert np.isnan(holed.path_loss_db[~same]).all()


def test_obstacles_block_but_do_not_lift_the_mast():
    """A wood across the way costs signal behind it; around both ends it does not count."""
    wood = np.zeros((81, 81), dtype=np.float32)
    wood[:, 40:42] = 60.0
    bare = field_at(plain(), 40.0, 20.0, radius_m=1900.0)
    wooded = field_at(plain(obstacle=wood), 40.0, 20.0, radius_m=1900.0, obstacle_clearing_m=160.0)
    difference = wooded.path_loss_db - bare.path_loss_db
    cols = np.arange(difference.shape[1]) + wooded.col_start
    assert np.nanmax(np.abs(difference[:, cols < 40])) == 0.0
    row = 40 - wooded.row_start
    assert (difference[row, (cols > 45) & (cols < 55)] > 15.0).all()
    # Within the clearing around the receiver the wood is not counted.
    assert difference[row, cols == 42][0] == 0.0
    under_trees = np.zeros((81, 81), dtype=np.float32)
    under_trees[38:43, 18:23] = 60.0
    cleared = field_at(
        plain(obstacle=under_trees), 40.0, 20.0, radius_m=1900.0, obstacle_clearing_m=230.0
    )
    assert cleared.mast_ground_m == bare.mast_ground_m
    np.testing.assert_array_equal(cleared.path_loss_db, bare.path_loss_db)


def test_map_and_single_path_agree_with_obstacles():
    """With woods and their clearing both codes still see the same profile."""
    rng = np.random.default_rng(11)
    terrain = jacksboro()
    blocks = rng.random((-(-terrain.grid.rows // 20), -(-terrain.grid.cols // 20))) < 0.3
    wood = np.kron(blocks, np.ones((20, 20)))[: terrain.grid.rows, : terrain.grid.cols] * 18.0
    wooded = Terrain(
        grid=terrain.grid,
        ground_elevation_m=terrain.ground_elevation_m,
        obstacle_height_m=wood.astype(np.float32),
    )
    mast = summit(terrain)
    field = field_at(wooded, *mast, obstacle_clearing_m=50.0)
    rows, cols = np.nonzero(field.status == COMPUTED)
    chosen = rng.choice(rows.size, 400, replace=False)
    difference = np.array(
        [
            field.path_loss_db[r, c]
            - exact_at(
                wooded,
                mast,
                (r + field.row_start, c + field.col_start),
                obstacle_clearing_m=50.0,
            ).path_loss_db
            for r, c in zip(rows[chosen], cols[chosen], strict=True)
        ]
    )
    # A path that grazes a hole may cross it on one side only.
    assert np.isnan(difference).mean() <= 0.01
    difference = difference[np.isfinite(difference)]
    assert np.median(np.abs(difference)) <= 0.1
    assert np.percentile(np.abs(difference), 95) <= 2.0


def test_obstacles_of_no_height_change_nothing():
    """Where the sphere counts and hills obstruct, with a clearing about the receiver, as well.

    Within a clearing the horizon from the mast is looked for cell by cell, beyond it where either
    radial beside the cell has its own: where those differ, so may the two.
    """
    rng = np.random.default_rng(6)
    ground = np.kron(rng.uniform(0.0, 25.0, (50, 50)), np.ones((4, 4))).astype(np.float32)
    settings = {"radius_m": 9500.0, "frequency_mhz": 700.0, "antenna_height_m": 10.0}
    bare = field_at(plain(ground=ground, cell_m=100.0), 100.0, 100.0, **settings)
    none = np.zeros_like(ground)
    for clearing_m, equal in ((0.0, 1.0), (900.0, 0.985)):
        terrain = plain(ground=ground, obstacle=none, cell_m=100.0)
        zero = field_at(terrain, 100.0, 100.0, obstacle_clearing_m=clearing_m, **settings)
        np.testing.assert_array_equal(zero.status, bare.status)
        difference = np.abs(zero.path_loss_db - bare.path_loss_db)[bare.status == COMPUTED]
        assert (difference <= 2e-3).mean() >= equal
        assert difference.mean() <= 0.01


def test_departure_azimuth_is_the_true_bearing():
    """Against the geodesic on WGS 84, within 0.02 degrees, near the zone's edge as well."""
    terrain = jacksboro()
    field = field_at(terrain, 500.0, 500.0)
    azimuth = field.departure_azimuth_deg()
    a = latitude_longitude(terrain, 500.0, 500.0)
    rng = np.random.default_rng(2)
    for _ in range(50):
        r, c = rng.integers(0, azimuth.shape[0]), rng.integers(0, azimuth.shape[1])
        if abs(r + field.row_start - 500) + abs(c + field.col_start - 500) < 3:
            continue
        b = latitude_longitude(terrain, r + field.row_start, c + field.col_start)
        expected, _, _ = Geod(ellps="WGS84").inv(a[1], a[0], b[1], b[0])
        difference = (azimuth[r, c] - expected + 180.0) % 360.0 - 180.0
        assert abs(difference) < 0.02


def test_mast_outside_or_on_a_hole_is_an_error():
    """Both name the place; nothing is computed."""
    terrain = plain(41, 41)
    with pytest.raises(TerrainError, match="outside the terrain"):
        field_at(terrain, -20.0, 20.0)
    ground = np.zeros((41, 41), dtype=np.float32)
    ground[20, 20] = np.nan
    with pytest.raises(TerrainError, match="no terrain data under the mast"):
        field_at(plain(ground=ground), 20.0, 20.0)


def test_progress_reaches_its_total_and_an_exception_from_it_ends_the_sweep():
    """Progress counts up to the total; Ctrl-C raised inside passes through."""
    seen = []
    field_at(plain(), 40.0, 40.0, radius_m=500.0, progress=lambda done, of: seen.append((done, of)))
    assert seen[-1][0] == seen[-1][1]
    assert [done for done, _ in seen] == sorted(done for done, _ in seen)

    def interrupt(done: int, total: int) -> None:
        raise KeyboardInterrupt

    with pytest.raises(KeyboardInterrupt):
        field_at(plain(), 40.0, 40.0, radius_m=500.0, progress=interrupt)


def test_no_read_or_write_out_of_bounds(tmp_path):
    """With numba's bounds checks on, masts in corners and obstacles raise nothing."""
    script = """
import sys
sys.path.insert(0, sys.argv[1])
import numpy as np
from places import plain
from test_sweep_field import field_at
wood = np.full((33, 47), 3.0, dtype=np.float32)
for obstacle in (None, wood):
    terrain = plain(33, 47, obstacle=obstacle)
    for row, col in ((0.0, 0.0), (32.4, 46.4), (-0.4, 20.0), (16.0, 23.0), (16.5, 0.2)):
        field_at(terrain, row, col, radius_m=5000.0, obstacle_clearing_m=120.0)
print("within bounds")
"""
    environment = {
        **os.environ,
        "NUMBA_BOUNDSCHECK": "1",
        "NUMBA_CACHE_DIR": str(tmp_path),
        "PYTHONPATH": str(Path(__file__).parents[1]),
    }
    result = subprocess.run(
        [sys.executable, "-c", script, str(Path(__file__).parent)],
        env=environment,
        capture_output=True,
        text=True,
        timeout=300,
        check=False,
    )
    assert result.stdout.strip() == "within bounds", result.stderr
