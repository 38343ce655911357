"""Needed receiver heights against computing the whole path field at each height."""

import numpy as np
import pytest
from places import jacksboro, latitude_longitude, plain

from planner.antenna import formula_pattern, gain_table
from planner.coverage import (
    NOT_WITHIN_LIMIT,
    STEP_M,
    UNKNOWN,
    combine,
    needed_heights,
)
from planner.network import Radio, Sector, Terminal
from planner.sweep import COMPUTED, path_field
from planner.terrain import Terrain

LIMIT_M = 20.0
TERMINAL = Terminal(antenna_height_m=5.0, antenna_gain_dbi=19.0, feeder_loss_db=0.5)
RADIO = Radio(
    id="access",
    frequency_mhz=5600.0,
    channel_width_mhz=20.0,
    transmit_power_dbm=15.0,
    feeder_loss_db=1.0,
    noise_figure_db=5.0,
    service_threshold_dbm=-75.0,
)
PATTERN = formula_pattern(
    "panel",
    "TR 36.814",
    frequency_mhz=5600.0,
    gain_dbi=16.0,
    azimuth_beamwidth_deg=65.0,
    elevation_beamwidth_deg=8.0,
)
SETTINGS = {"k_factor": 4.0 / 3.0, "polarization": "vertical", "obstacle_clearing_m": 50.0}


def sectors(azimuths_deg: tuple[float, ...]) -> list:
    made = []
    for azimuth_deg in azimuths_deg:
        sector = Sector(
            id=f"s{azimuth_deg:g}",
            antenna="panel",
            radio=RADIO,
            antenna_height_m=30.0,
            azimuth_deg=azimuth_deg,
            mechanical_downtilt_deg=2.0,
            electrical_downtilt_deg=1.0,
        )
        table = gain_table(
            PATTERN,
            azimuth_deg=azimuth_deg,
            mechanical_downtilt_deg=2.0,
            electrical_downtilt_deg=1.0,
        )
        made.append((sector, table))
    return made


def found(terrain: Terrain, masts: list[tuple[float, float]], aims: list, radius_m: float):
    shape = (terrain.grid.rows, terrain.grid.cols)
    served = np.full(shape, UNKNOWN, dtype=np.uint16)
    free = np.full(shape, UNKNOWN, dtype=np.uint16)
    for mast, own in zip(masts, aims, strict=True):
        latitude, longitude = latitude_longitude(terrain, *mast)
        needed_heights(
            terrain,
            own,
            TERMINAL,
            latitude=latitude,
            longitude=longitude,
            limit_m=LIMIT_M,
            radius_m=radius_m,
            served=served,
            served_and_free=free,
            **SETTINGS,
        )
    return served, free


def brute(terrain: Terrain, masts: list[tuple[float, float]], aims: list, radius_m: float):
    """The same by a path field and its layers at every height."""
    shape = (terrain.grid.rows, terrain.grid.cols)
    served = np.full(shape, UNKNOWN, dtype=np.int64)
    free = np.full(shape, UNKNOWN, dtype=np.int64)
    for step in range(int(LIMIT_M / STEP_M), 0, -1):
        for mast, own in zip(masts, aims, strict=True):
            latitude, longitude = latitude_longitude(terrain, *mast)
            field = path_field(
                terrain,
                latitude=latitude,
                longitude=longitude,
                antenna_height_m=30.0,
                receiver_height_m=step * STEP_M,
                frequency_mhz=RADIO.frequency_mhz,
                radius_m=radius_m,
                **SETTINGS,
            )
            layers = combine(*shape, [(field, *one) for one in own], TERMINAL)
            known = layers.status == COMPUTED
            passes = layers.best_server > 0
            clear = passes & (layers.fresnel_clearance_ratio >= 0.6)
            for out, ok in ((served, passes), (free, clear)):
                out[known & (out == UNKNOWN)] = NOT_WITHIN_LIMIT
                out[ok] = step
    return served, free


@pytest.mark.parametrize("wooded", [False, True])
def test_every_cell_has_the_lowest_step_that_passes(wooded):
    """1,000 cells of real terrain around two masts, each exact to one step."""
    terrain = jacksboro()
    if wooded:
        rng = np.random.default_rng(3)
        blocks = rng.random((-(-terrain.grid.rows // 8), -(-terrain.grid.cols // 8))) < 0.3
        wood = np.kron(blocks, np.ones((8, 8)))[: terrain.grid.rows, : terrain.grid.cols] * 15.0
        terrain = Terrain(
            grid=terrain.grid,
            ground_elevation_m=terrain.ground_elevation_m,
            obstacle_height_m=wood.astype(np.float32),
        )
    masts = [(450.0, 470.0), (520.3, 560.7)]
    aims = [sectors((20.0, 140.0, 260.0)), sectors((310.0,))]
    served, free = found(terrain, masts, aims, 2800.0)
    expected_served, expected_free = brute(terrain, masts, aims, 2800.0)
    known = expected_served != UNKNOWN
    np.testing.assert_array_equal(served != UNKNOWN, known)
    rows, cols = np.nonzero(known)
    chosen = np.random.default_rng(9).choice(rows.size, 1000, replace=False)
    cells = rows[chosen], cols[chosen]
    for name, ours, theirs in (("served", served, expected_served), ("free", free, expected_free)):
        ours, theirs = ours[cells].astype(int), theirs[cells]
        # Not within the limit is one step beyond it.
        beyond = int(LIMIT_M / STEP_M) + 1
        ours[ours == NOT_WITHIN_LIMIT], theirs[theirs == NOT_WITHIN_LIMIT] = beyond, beyond
        print(
            f"{name}: {np.mean(ours == theirs):.2%} equal, largest difference "
            f"{np.abs(ours - theirs).max()} steps, {np.mean(theirs == 1):.0%} at the first step, "
            f"{np.mean(theirs == beyond):.0%} not within the limit"
        )
        assert np.abs(ours - theirs).max() <= 1
        assert (ours == theirs).mean() > 0.99
        assert 0.02 < np.mean((theirs > 1) & (theirs < beyond)) < 0.98


def test_a_ridge_must_be_looked_over():
    """Behind a broad ridge 60 % of the first zone is free where geometry says so."""
    ground = np.zeros((81, 81), dtype=np.float32)
    ground[:, 40:44] = 18.0
    terrain = plain(ground=ground)
    served, free = found(terrain, [(40.0, 20.0)], [sectors((90.0,))], 3000.0)
    wavelength_m, earth_m = 299_792_458.0 / 5600e6, 4.0 / 3.0 * 6_371_000.0
    for col in (60, 66, 72):
        total_m = (col - 20) * 50.0
        needed_m = 0.0
        for edge_m in np.arange(1000.0, 1151.0, 50.0):
            rest_m = total_m - edge_m
            clear_m = 0.6 * np.sqrt(wavelength_m * edge_m * rest_m / total_m)
            ray_m = 18.0 + clear_m + edge_m * rest_m / (2.0 * earth_m)
            needed_m = max(needed_m, 30.0 + (ray_m - 30.0) * total_m / edge_m)
        assert free[40, col] * STEP_M == pytest.approx(needed_m, abs=STEP_M + 0.2)
        assert 1 <= served[40, col] <= free[40, col]


def test_holes_and_what_lies_behind_them_stay_unknown():
    ground = np.zeros((81, 81), dtype=np.float32)
    ground[38:43, 50:53] = np.nan
    served, free = found(plain(ground=ground), [(40.0, 20.0)], [sectors((90.0,))], 2500.0)
    assert (served[40, 50:60] == UNKNOWN).all()
    assert (free[40, 50:60] == UNKNOWN).all()
    assert served[40, 40] != UNKNOWN
