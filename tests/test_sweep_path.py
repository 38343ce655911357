"""Single paths: geometry, laws, and what is said where nothing can be computed."""

import math

import numpy as np
import pytest
from places import jacksboro, latitude_longitude, plain
from pyproj import Geod

from planner.physics.diffraction import delta_bullington
from planner.physics.free_space import free_space_loss_db
from planner.sweep import Path, path_between
from planner.terrain import Terrain

RADIO = {"frequency_mhz": 5600.0, "k_factor": 4.0 / 3.0, "polarization": "vertical"}
EARTH_M = 4.0 / 3.0 * 6_371_000.0


def path_at(
    terrain: Terrain, a: tuple[float, float], b: tuple[float, float], heights=(30.0, 5.0), **changes
) -> Path:
    a_place, b_place = latitude_longitude(terrain, *a), latitude_longitude(terrain, *b)
    return path_between(
        terrain,
        a_latitude=a_place[0],
        a_longitude=a_place[1],
        a_height_m=heights[0],
        b_latitude=b_place[0],
        b_longitude=b_place[1],
        b_height_m=heights[1],
        **{**RADIO, **changes},
    )


def test_free_path_over_flat_ground_has_the_angles_of_the_curved_earth():
    """30 m to 5 m over 1 km: down by atan(25/1000 + 1000/2a), up by the other way round."""
    path = path_at(plain(cell_m=50.0), (40.0, 20.0), (40.0, 40.0))
    distance = path.distance_m
    assert distance == pytest.approx(1000.0, abs=1.0)
    assert path.line_of_sight
    assert path.blocking_distance_m is None
    assert path.blocking_excess_m is None
    bend = distance / (2.0 * EARTH_M)
    down = math.degrees(math.atan(-25.0 / distance - bend))
    up = math.degrees(math.atan(25.0 / distance - bend))
    assert path.elevation_angle_deg == pytest.approx(down, abs=1e-9)
    assert path.back_elevation_angle_deg == pytest.approx(up, abs=1e-9)
    slant = math.hypot(distance, 25.0)
    assert path.free_space_loss_db == pytest.approx(float(free_space_loss_db(slant, 5600.0)))


def test_distance_and_bearings_are_those_of_the_ellipsoid():
    """Against the geodesic on WGS 84."""
    terrain = jacksboro()
    path = path_at(terrain, (200.0, 300.0), (900.0, 750.0))
    a, b = latitude_longitude(terrain, 200.0, 300.0), latitude_longitude(terrain, 900.0, 750.0)
    azimuth, back, distance = Geod(ellps="WGS84").inv(a[1], a[0], b[1], b[0])
    assert path.distance_m == pytest.approx(distance, abs=1e-6)
    assert path.azimuth_deg == pytest.approx(azimuth % 360.0, abs=1e-9)
    assert path.back_azimuth_deg == pytest.approx(back % 360.0, abs=1e-9)
    assert path.profile_distance_m[-1] == pytest.approx(distance, abs=1e-6)


def test_a_wall_is_named_with_its_place_and_how_far_it_rises():
    """A 60 m wall half-way: blocked there, by its height less the ray's, bulge added."""
    ground = np.zeros((81, 81), dtype=np.float32)
    ground[:, 40] = 60.0
    path = path_at(plain(ground=ground), (40.0, 20.0), (40.0, 60.0))
    half = path.distance_m / 2.0
    bulge = half * half / (2.0 * EARTH_M)
    assert not path.line_of_sight
    assert path.blocking_distance_m == pytest.approx(half, abs=1e-3)
    assert path.blocking_excess_m == pytest.approx(60.0 + bulge - 17.5, abs=1e-3)
    radius = math.sqrt(299792458.0 / 5.6e9 * half / 2.0)
    assert path.worst_clearance_ratio == pytest.approx(-path.blocking_excess_m / radius, rel=1e-6)
    # Both ends look at the top of the wall.
    up = math.degrees(math.atan((60.0 - 30.0) / half - half / (2.0 * EARTH_M)))
    assert path.elevation_angle_deg == pytest.approx(up, abs=1e-4)


def test_loss_is_that_of_the_public_diffraction_function_on_the_same_profile():
    """The path adds nothing of its own to free space and delta-Bullington."""
    path = path_at(jacksboro(), (200.0, 300.0), (640.0, 650.0))
    expected = delta_bullington(
        path.profile_distance_m / 1000.0,
        path.profile_ground_m,
        tx_height_m=30.0,
        rx_height_m=5.0,
        frequency_mhz=5600.0,
        effective_earth_radius_km=4.0 / 3.0 * 6371.0,
    )
    assert path.diffraction.loss_db == pytest.approx(expected.loss_db, abs=1e-9)
    assert path.path_loss_db == pytest.approx(path.free_space_loss_db + expected.loss_db, abs=1e-9)
    cells = math.hypot(440.0, 350.0)
    assert path.profile_distance_m.size == math.ceil(cells) + 1


def test_swapping_the_ends_leaves_loss_and_clearance_alone():
    """Reciprocity on real terrain: the same loss, mirrored geometry."""
    terrain = jacksboro()
    rng = np.random.default_rng(3)
    for _ in range(25):
        a, b = rng.uniform(100, 900, 2), rng.uniform(100, 900, 2)
        there = path_at(terrain, tuple(a), tuple(b))
        back = path_at(terrain, tuple(b), tuple(a), heights=(5.0, 30.0))
        assert back.path_loss_db == pytest.approx(there.path_loss_db, abs=0.02)
        assert back.worst_clearance_m == pytest.approx(there.worst_clearance_m, abs=0.05)
        assert back.elevation_angle_deg == pytest.approx(there.back_elevation_angle_deg, abs=1e-3)


def test_obstacles_count_between_the_clearings_only():
    """A wood blocks from the middle; within the clearing of either end it does not count."""
    wood = np.zeros((81, 81), dtype=np.float32)
    wood[:, 40] = 60.0
    terrain = plain(obstacle=wood)
    blocked = path_at(terrain, (40.0, 20.0), (40.0, 60.0), obstacle_clearing_m=50.0)
    assert not blocked.line_of_sight
    assert blocked.profile_obstacle_m.max() == pytest.approx(60.0, abs=1e-3)
    cleared = path_at(terrain, (40.0, 20.0), (40.0, 41.5), obstacle_clearing_m=150.0)
    assert cleared.line_of_sight
    assert cleared.profile_obstacle_m.max() == 0.0


@pytest.mark.parametrize(
    ("a", "b", "reason"),
    [
        ((40.0, 20.0), (200.0, 20.0), "the far end lies outside the terrain"),
        ((-30.0, 20.0), (40.0, 20.0), "the near end lies outside the terrain"),
        ((40.0, 20.0), (40.0, 20.0), "both ends are in one place"),
        ((40.0, 20.0), (10.0, 10.0), "no terrain data at the far end"),
        ((10.0, 10.0), (40.0, 20.0), "no terrain data at the near end"),
        ((2.0, 10.0), (40.0, 10.0), "the path crosses missing terrain data"),
    ],
)
def test_what_cannot_be_computed_says_why_and_holds_no_number(a, b, reason):
    """The reason is a plain phrase; losses, angles and clearance are NaN."""
    ground = np.zeros((81, 81), dtype=np.float32)
    ground[9:12, 9:12] = np.nan
    path = path_at(plain(ground=ground), a, b)
    assert path.reason == reason
    assert path.crosses_hole == (reason == "the path crosses missing terrain data")
    for value in (
        path.path_loss_db,
        path.diffraction.loss_db,
        path.elevation_angle_deg,
        path.back_elevation_angle_deg,
        path.worst_clearance_m,
        path.worst_clearance_ratio,
    ):
        assert math.isnan(value)
    assert not path.line_of_sight
    assert path.blocking_distance_m is None


def test_antennas_nearer_than_a_metre_have_no_path():
    """Same place, antennas half a metre apart in height: said so, no number."""
    path = path_at(plain(), (40.0, 40.0), (40.0, 40.004), heights=(5.5, 5.0))
    assert path.reason == "both antennas are in one place"
    assert math.isnan(path.path_loss_db)


def test_a_path_within_one_cell_is_free():
    """Without a point between the ends nothing can block."""
    path = path_at(plain(), (40.0, 40.0), (40.3, 40.4))
    assert path.line_of_sight
    assert path.diffraction.loss_db == 0.0
    assert path.profile_distance_m.size == 2
