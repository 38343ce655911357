"""How far the path field may be from the exact single path, on real and on invented terrain."""

import numpy as np
import pytest
from benchmarks.rolling_terrain import rolling_ground
from places import jacksboro, plain
from test_sweep_field import exact_at, field_at, median_place, summit

from planner.physics._jit import in_single_precision
from planner.physics.bullington import bullington_loss_db_scalar, bullington_point_nu_scalar
from planner.physics.free_space import free_space_loss_db_scalar
from planner.sweep import COMPUTED
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


def test_single_precision_is_enough():
    """The formulas in float32 lanes within 0.02 dB of those in float64, over what paths hold."""
    rng = np.random.default_rng(4)
    point = in_single_precision(bullington_point_nu_scalar)
    loss = in_single_precision(bullington_loss_db_scalar)
    free_space = in_single_precision(free_space_loss_db_scalar)
    worst = 0.0
    for _ in range(20_000):
        total_m = 10.0 ** rng.uniform(1.7, 5.0)
        wavelength_m = 10.0 ** rng.uniform(-2.0, 0.0)
        rise_m = rng.uniform(-500.0, 500.0)
        # Two horizons that meet on the way: an edge above the direct ray.
        place_m = total_m * rng.uniform(0.02, 0.98)
        edge_m = rise_m * place_m / total_m + 10.0 ** rng.uniform(-1.0, 2.5)
        tx_slope, rx_slope = edge_m / place_m, (edge_m - rise_m) / (total_m - place_m)
        nu = bullington_point_nu_scalar(tx_slope, rx_slope, 0.0, rise_m, total_m, wavelength_m)
        values = [np.float32(v) for v in (tx_slope, rx_slope, 0.0, rise_m, total_m, wavelength_m)]
        ours = loss(np.float32(point(*values)), values[4])
        worst = max(worst, abs(ours - bullington_loss_db_scalar(nu, total_m)))
        frequency_mhz = 299.792458 / wavelength_m
        ours = free_space(values[4], np.float32(frequency_mhz))
        worst = max(worst, abs(ours - free_space_loss_db_scalar(total_m, frequency_mhz)))
    print(f"largest difference {worst:.5f} dB")
    assert 0.0 < worst <= 0.02
