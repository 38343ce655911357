"""How far the path field may be from the exact single path, on real and on invented terrain."""

import numpy as np
import pytest
from benchmarks.rolling_terrain import rolling_ground
from places import jacksboro, plain
from test_sweep_field import exact_at, field_at, median_place, summit

from planner.physics._jit import scalar
from planner.physics._lanes import LANES, load, store
from planner.physics.bullington import (
    bullington_loss_db_scalar,
    bullington_point_nu_scalar,
    bullington_profile_loss_db,
)
from planner.physics.free_space import free_space_loss_db_scalar, wavelength_m_scalar
from planner.physics.spherical_earth import spherical_earth_loss_db_scalar
from planner.sweep import COMPUTED
from planner.sweep.curved_earth import smooth_bullington_loss_db
from planner.terrain import Terrain


def rolling(*, summit: bool) -> Terrain:
    """The benchmarks' invented hills with slopes of 7 %, 2,000 cells of 10 m a side."""
    return plain(ground=rolling_ground(2000, summit=summit), cell_m=10.0)


def middle(terrain: Terrain) -> tuple[float, float]:
    return float(terrain.grid.rows // 2), float(terrain.grid.cols // 2)


@pytest.mark.parametrize(
    ("terrain", "place", "radius_m", "most_db"),
    [
        (jacksboro, summit, 8400.0, 0.7),
        (jacksboro, median_place, 8400.0, 0.7),
        (lambda: rolling(summit=True), middle, 9900.0, 0.3),
        (lambda: rolling(summit=False), middle, 9900.0, 0.3),
    ],
)
def test_the_field_is_close_to_exact_paths(terrain, place, radius_m, most_db):
    """Median within 0.05 dB, mean within 0.05 dB, 95 of 100 cells within the given bound."""
    terrain = terrain()
    mast = place(terrain)
    field = field_at(terrain, *mast, radius_m=radius_m)
    rows, cols = np.nonzero(field.status == COMPUTED)
    chosen = np.random.default_rng(8).choice(rows.size, 2000, replace=False)
    difference, clear = [], []
    for row, col in zip(rows[chosen], cols[chosen], strict=True):
        exact = exact_at(terrain, mast, (row + field.row_start, col + field.col_start))
        difference.append(field.path_loss_db[row, col] - exact.path_loss_db)
        clear.append(exact.line_of_sight)
    difference, clear = np.array(difference), np.array(clear)
    # A path that grazes a hole may cross it on one side only.
    known = np.isfinite(difference)
    assert known.mean() > 0.99
    difference, clear = difference[known], clear[known]
    for name, part in (("in sight", clear), ("obstructed", ~clear), ("all", clear | ~clear)):
        values = difference[part]
        print(
            f"{name}: {values.size} cells, median |difference| {np.median(np.abs(values)):.4f} dB, "
            f"95th percentile {np.percentile(np.abs(values), 95):.3f} dB, mean {values.mean():+.4f}"
        )
    assert np.median(np.abs(difference)) <= 0.05
    assert abs(difference.mean()) <= 0.05
    assert np.percentile(np.abs(difference), 95) <= most_db


def test_turned_terrain_gives_the_turned_field():
    """Four wedges, one computation: quarter turns and mirrors of the ground turn the field."""
    rng = np.random.default_rng(2)
    ground = np.cumsum(np.cumsum(rng.normal(0.0, 1.0, (101, 101)), axis=0), axis=1)
    ground = (ground * 0.3).astype(np.float32)

    def loss(heights: np.ndarray) -> np.ndarray:
        terrain = plain(ground=np.ascontiguousarray(heights), cell_m=20.0)
        return field_at(terrain, 50.0, 50.0, radius_m=900.0).path_loss_db

    straight = loss(ground)
    assert straight.shape[0] == straight.shape[1]
    for turn in (lambda a: np.rot90(a), lambda a: np.rot90(a, 2), np.fliplr, np.flipud):
        difference = np.abs(loss(turn(ground)) - turn(straight))
        # On the diagonals the cells belong to other wedges; the scale differs by parts in 10^5.
        assert np.nanpercentile(difference, 90) < 0.02


@scalar
def _loss_of_lanes(values: np.ndarray, frequency_mhz: float, out: np.ndarray) -> None:
    """Bullington and free-space loss of LANES paths, whose numbers lie in the rows of values."""
    total = load(values, 4 * LANES)
    wavelength = wavelength_m_scalar(frequency_mhz)
    nu = bullington_point_nu_scalar(
        load(values, 0), load(values, LANES), 0.0, load(values, 3 * LANES), total, wavelength
    )
    store(out, 0, bullington_loss_db_scalar(nu, total))
    store(out, LANES, free_space_loss_db_scalar(total, frequency_mhz))


def test_single_lanes_are_enough():
    """The formulas in float32 lanes within 0.02 dB of those in float64, over what paths hold."""
    rng = np.random.default_rng(4)
    worst = 0.0
    for _ in range(600):
        total_m = 10.0 ** rng.uniform(1.7, 5.0, LANES)
        frequency_mhz = 10.0 ** rng.uniform(2.5, 4.5)
        rise_m = rng.uniform(-500.0, 500.0, LANES)
        # Two horizons that meet on the way: an edge above the direct ray.
        place_m = total_m * rng.uniform(0.02, 0.98, LANES)
        edge_m = rise_m * place_m / total_m + 10.0 ** rng.uniform(-1.0, 2.5, LANES)
        tx_slope, rx_slope = edge_m / place_m, (edge_m - rise_m) / (total_m - place_m)
        values = np.array([tx_slope, rx_slope, 0.0 * rise_m, rise_m, total_m], dtype=np.float32)
        out = np.empty(2 * LANES, dtype=np.float32)
        _loss_of_lanes(values.ravel(), frequency_mhz, out)
        wavelength_m = wavelength_m_scalar(frequency_mhz)
        for lane in range(LANES):
            path = [float(v) for v in (tx_slope[lane], rx_slope[lane], 0.0, rise_m[lane])]
            nu = bullington_point_nu_scalar(*path, total_m[lane], wavelength_m)
            exact = bullington_loss_db_scalar(nu, total_m[lane])
            worst = max(worst, abs(out[lane] - exact))
            exact = free_space_loss_db_scalar(total_m[lane], frequency_mhz)
            worst = max(worst, abs(out[LANES + lane] - exact))
    print(f"largest difference {worst:.5f} dB")
    assert 0.0 < worst <= 0.02


@scalar
def _sphere_of_lanes(
    values: np.ndarray,
    earth_radius_m: float,
    frequency_mhz: float,
    vertical: bool,
    out: np.ndarray,
) -> None:
    distance, tx, rx = load(values, 0), load(values, LANES), load(values, 2 * LANES)
    wavelength = wavelength_m_scalar(frequency_mhz)
    spherical = spherical_earth_loss_db_scalar(
        distance, tx, rx, earth_radius_m, wavelength, frequency_mhz, vertical, 0.0
    )
    smooth = smooth_bullington_loss_db(distance, 10.0, tx, rx, earth_radius_m, wavelength)
    store(out, 0, spherical)
    store(out, LANES, smooth)


def test_single_lanes_are_enough_over_the_sphere():
    """The spherical earth and Bullington's smooth profile, in float32 lanes against float64."""
    rng = np.random.default_rng(5)
    worst, blocked = 0.0, 0
    for n in range(200):
        distance_m = 10.0 ** rng.uniform(3.0, 5.0, LANES)
        tx_m, rx_m = 10.0 ** rng.uniform(0.3, 2.5, LANES), 10.0 ** rng.uniform(0.0, 2.0, LANES)
        frequency_mhz = 10.0 ** rng.uniform(2.5, 4.5)
        earth_m = 6371e3 * rng.uniform(0.8, 2.0)
        values = np.array([distance_m, tx_m, rx_m], dtype=np.float32)
        out = np.empty(2 * LANES, dtype=np.float32)
        _sphere_of_lanes(values.ravel(), earth_m, frequency_mhz, n % 2 == 0, out)
        wavelength_m = wavelength_m_scalar(frequency_mhz)
        for lane in range(LANES):
            path = tuple(float(v) for v in values[:, lane])
            exact = spherical_earth_loss_db_scalar(
                *path, earth_m, wavelength_m, frequency_mhz, n % 2 == 0, 0.0
            )
            smooth = _smooth_bullington_of_numbers(*path, earth_m, wavelength_m)
            if lane == 0:  # a profile that has no heights, point by point
                place_m = np.append(np.arange(0.0, path[0], 10.0), path[0])
                zero_m = np.zeros_like(place_m)
                whole = bullington_profile_loss_db(
                    place_m, zero_m, *path[1:], earth_m, wavelength_m
                )
                assert smooth == pytest.approx(whole, abs=0.01)
            # Relative to the loss beyond 100 dB, where no link is.
            scale = max(1.0, exact / 100.0)
            worst = max(worst, abs(out[lane] - exact) / scale, abs(out[LANES + lane] - smooth))
            blocked += exact > 0.0
    print(f"largest difference {worst:.5f} dB; {blocked} of {200 * LANES} lose something")
    assert blocked > 1000
    assert 0.0 < worst <= 0.02


@scalar
def _smooth_bullington_of_numbers(
    distance_m: float, tx_m: float, rx_m: float, earth_radius_m: float, wavelength_m: float
) -> float:
    return smooth_bullington_loss_db(distance_m, 10.0, tx_m, rx_m, earth_radius_m, wavelength_m)
