"""Delta-Bullington diffraction against the validation examples of ITU-R Study Group 3, and laws."""

import json
import math
from pathlib import Path

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from planner.physics import bullington, smooth_surface, spherical_earth
from planner.physics.diffraction import delta_bullington
from planner.physics.fresnel import fresnel_parameter
from planner.physics.knife_edge import knife_edge_loss_db

CARRIED = json.loads(
    (Path(__file__).parent / "data" / "diffraction_cases.json").read_text(encoding="utf-8")
)
SHARED = Path(__file__).parents[2] / "shared" / "reference"
FIELDS = {
    "bullington_actual_db": "actual_bullington_db",
    "bullington_smooth_db": "smooth_bullington_db",
    "spherical_db": "spherical_earth_db",
    "diffraction_db": "loss_db",
    "effective_tx_height_m": "effective_tx_height_m",
    "effective_rx_height_m": "effective_rx_height_m",
}
STANDARD = {"frequency_mhz": 5600.0, "effective_earth_radius_km": 4.0 / 3.0 * 6371.0}
WAVELENGTH_M = 299_792_458.0 / 5.6e9


def assert_case(case: dict, profile: dict, result) -> None:
    compared = 0
    for key, name in FIELDS.items():
        expected = case["expected"].get(key)
        if expected is not None:
            assert getattr(result, name) == pytest.approx(expected, abs=0.01), (case["id"], name)
            compared += 1
    assert compared > 0, case["id"]


@pytest.mark.parametrize("case", CARRIED["cases"], ids=lambda case: case["id"])
def test_validation_examples_to_a_hundredth_of_a_decibel(case):
    """Each carried example, every part that its source prints, within 0.01 dB (or 0.01 m).

    Sources with editions stand in tests/data/diffraction_cases.json.
    """
    profile = CARRIED["profiles"][case["profile"]]
    result = delta_bullington(
        profile["distance_km"],
        profile["terrain_height_m"],
        tx_height_m=case["tx_height_m"],
        rx_height_m=case["rx_height_m"],
        frequency_mhz=case["frequency_mhz"],
        effective_earth_radius_km=case["effective_earth_radius_km"],
        polarization=case["polarization"],
        obstacle_height_m=profile.get("clutter_height_m"),
        sea_fraction=case["sea_fraction"],
    )
    assert_case(case, profile, result)


def test_every_case_of_the_whole_reference_set():
    """All cases of the shared reference folder, where it is present, within 0.01 dB."""
    file = SHARED / "diffraction_cases.jsonl"
    if not file.is_file():
        pytest.skip(f"no {file.name}: the full reference set is not on this machine")
    profiles = json.loads((SHARED / "profiles.json").read_text(encoding="utf-8"))["profiles"]
    cases = [json.loads(line) for line in file.read_text(encoding="utf-8").splitlines()]
    for case in cases:
        profile = profiles[case["profile_id"]]
        result = delta_bullington(
            profile["distance_km"],
            profile["terrain_height_m"],
            tx_height_m=case["tx_height_m"],
            rx_height_m=case["rx_height_m"],
            frequency_mhz=case["frequency_ghz"] * 1000.0,
            effective_earth_radius_km=case["effective_earth_radius_km"],
            polarization="vertical" if case["polarization"] == "V" else "horizontal",
            obstacle_height_m=profile["clutter_height_m"],
            sea_fraction=case["sea_fraction"],
        )
        assert_case(case, profile, result)
    assert len(cases) >= 190


def test_a_single_ridge_is_a_knife_edge_with_bullingtons_correction():
    """P.526-15 section 4.5.1: loss = J + (1 - exp(-J/6)) (10 + 0.02 d) of the one edge."""
    distance_km = np.array([0.0, 4.0, 10.0])
    result = delta_bullington(
        distance_km, [0.0, 80.0, 0.0], tx_height_m=30.0, rx_height_m=10.0, **STANDARD
    )
    bulge = 4000.0 * 6000.0 / (2.0 * STANDARD["effective_earth_radius_km"] * 1000.0)
    above = 80.0 + bulge - (30.0 * 6.0 + 10.0 * 4.0) / 10.0
    edge = float(knife_edge_loss_db(fresnel_parameter(above, 4000.0, 6000.0, WAVELENGTH_M)))
    expected = edge + (1.0 - math.exp(-edge / 6.0)) * (10.0 + 0.02 * 10.0)
    assert result.actual_bullington_db == pytest.approx(expected, abs=1e-9)


@pytest.mark.parametrize(
    ("luc_db", "distance_km", "expected"),
    [(6.0327, 10.0, 12.500724), (20.0, 50.0, 30.607586), (35.0, 100.0, 46.96486)],
)
def test_bullingtons_correction_in_closed_form(luc_db, distance_km, expected):
    """Values evaluated from P.526-15 section 4.5.1 (formula from memory): L from the edge loss."""
    # The edge loss rises with nu, so a bisection finds the nu that gives it.
    low, high = -0.78, 100.0
    for _ in range(200):
        middle = 0.5 * (low + high)
        if float(knife_edge_loss_db(middle)) < luc_db:
            low = middle
        else:
            high = middle
    loss = bullington.bullington_loss_db_scalar(high, distance_km * 1000.0)
    assert loss == pytest.approx(expected, abs=1e-4)


def test_high_antennas_over_a_flat_plain_lose_nothing():
    """With the first Fresnel zone free everywhere there is no diffraction loss."""
    result = delta_bullington(
        np.linspace(0.0, 5.0, 101), np.zeros(101), tx_height_m=60.0, rx_height_m=60.0, **STANDARD
    )
    assert result.loss_db == 0.0
    assert result.spherical_earth_db == 0.0
    assert result.effective_tx_height_m == pytest.approx(60.0)


def test_a_flat_plain_beyond_the_horizon_has_the_sphere_s_loss():
    """Where the smooth profile is the real one, the sum is the spherical-earth loss."""
    result = delta_bullington(
        np.linspace(0.0, 60.0, 601), np.zeros(601), tx_height_m=20.0, rx_height_m=5.0, **STANDARD
    )
    assert result.actual_bullington_db == pytest.approx(result.smooth_bullington_db, abs=1e-9)
    assert result.loss_db == pytest.approx(result.spherical_earth_db, abs=1e-9)
    assert result.loss_db > 40.0


def test_a_tilted_plain_has_the_antennas_own_heights_as_effective_heights():
    """The smooth surface of an even slope is the slope itself."""
    distance_km = np.linspace(0.0, 8.0, 201)
    result = delta_bullington(
        distance_km, 100.0 + 25.0 * distance_km, tx_height_m=30.0, rx_height_m=6.0, **STANDARD
    )
    assert result.effective_tx_height_m == pytest.approx(30.0, abs=1e-6)
    assert result.effective_rx_height_m == pytest.approx(6.0, abs=1e-6)


HEIGHTS = st.lists(st.floats(0.0, 900.0), min_size=2, max_size=60)


@settings(max_examples=150, deadline=None)
@given(
    heights=HEIGHTS,
    tx=st.floats(1.0, 120.0),
    rx=st.floats(1.0, 60.0),
    length_km=st.floats(0.3, 60.0),
    polarization=st.sampled_from(["vertical", "horizontal"]),
)
def test_swapping_the_ends_changes_nothing(heights, tx, rx, length_km, polarization):
    """Every part is reciprocal."""
    distance_km = np.linspace(0.0, length_km, len(heights))
    there = delta_bullington(
        distance_km, heights, tx_height_m=tx, rx_height_m=rx, polarization=polarization, **STANDARD
    )
    back = delta_bullington(
        distance_km,
        heights[::-1],
        tx_height_m=rx,
        rx_height_m=tx,
        polarization=polarization,
        **STANDARD,
    )
    assert back.actual_bullington_db == pytest.approx(there.actual_bullington_db, abs=1e-5)
    assert back.spherical_earth_db == pytest.approx(there.spherical_earth_db, abs=1e-5)
    assert back.loss_db == pytest.approx(there.loss_db, abs=1e-5)
    assert back.effective_tx_height_m == pytest.approx(there.effective_rx_height_m, abs=1e-6)


@settings(max_examples=100, deadline=None)
@given(heights=HEIGHTS, raised=st.floats(0.0, 200.0), where=st.floats(0.05, 0.95))
def test_raising_one_ridge_far_above_all_else_never_lowers_the_loss(heights, raised, where):
    """A higher dominant edge costs at least as much on the real profile."""
    if len(heights) < 3:
        heights = [*heights, 0.0, 0.0]
    ridge = 1 + int(where * (len(heights) - 2))
    distance_km = np.linspace(0.0, 12.0, len(heights))
    losses = []
    for extra in (0.0, raised):
        profile = np.array(heights)
        profile[ridge] = 2000.0 + extra
        losses.append(
            delta_bullington(
                distance_km, profile, tx_height_m=20.0, rx_height_m=10.0, **STANDARD
            ).actual_bullington_db
        )
    assert losses[1] >= losses[0] - 1e-9


def test_obstacles_at_the_ends_do_not_count():
    """A house on the end points blocks nothing; one in between does."""
    distance_km = np.linspace(0.0, 2.0, 21)
    obstacle = np.zeros(21)
    obstacle[[0, -1]] = 50.0
    settings_ = {"tx_height_m": 25.0, "rx_height_m": 5.0, **STANDARD}
    bare = delta_bullington(distance_km, np.zeros(21), **settings_)
    ends = delta_bullington(distance_km, np.zeros(21), obstacle_height_m=obstacle, **settings_)
    assert ends == bare
    obstacle[10] = 50.0
    middle = delta_bullington(distance_km, np.zeros(21), obstacle_height_m=obstacle, **settings_)
    assert middle.loss_db > bare.loss_db + 10.0
    assert middle.effective_tx_height_m == bare.effective_tx_height_m


def test_sea_mixes_the_first_term_linearly():
    """Beyond the horizon a path half over sea lies half-way between all land and all sea."""
    losses = [
        delta_bullington(
            np.linspace(0.0, 80.0, 161),
            np.zeros(161),
            tx_height_m=20.0,
            rx_height_m=10.0,
            frequency_mhz=100.0,
            effective_earth_radius_km=8500.0,
            sea_fraction=share,
        ).spherical_earth_db
        for share in (0.0, 0.5, 1.0)
    ]
    assert losses[1] == pytest.approx(0.5 * (losses[0] + losses[2]), abs=1e-9)
    assert losses[0] > losses[2]


def test_missing_terrain_gives_no_number():
    """A NaN height, in the middle or at an end, makes every part NaN."""
    for place in (0, 5, 10):
        ground = np.zeros(11)
        ground[place] = np.nan
        result = delta_bullington(
            np.linspace(0.0, 2.0, 11), ground, tx_height_m=20.0, rx_height_m=5.0, **STANDARD
        )
        assert all(math.isnan(getattr(result, name)) for name in FIELDS.values())


def test_a_profile_of_its_two_ends_is_free():
    """Nothing stands between the ends; over so short a way the sphere does not matter."""
    result = delta_bullington(
        [0.0, 0.4], [12.0, 9.0], tx_height_m=20.0, rx_height_m=5.0, **STANDARD
    )
    assert result.loss_db == 0.0


@pytest.mark.parametrize(
    ("changes", "message"),
    [
        ({"distance_km": [0.0]}, "distance_km"),
        ({"distance_km": [0.0, 1.0, 1.0]}, "distance_km"),
        ({"distance_km": [0.1, 1.0, 2.0]}, "distance_km"),
        ({"ground_elevation_m": [0.0, 1.0]}, "ground_elevation_m"),
        ({"obstacle_height_m": [1.0]}, "obstacle_height_m"),
        ({"tx_height_m": 0.0}, "tx_height_m"),
        ({"rx_height_m": math.nan}, "rx_height_m"),
        ({"frequency_mhz": -1.0}, "frequency_mhz"),
        ({"effective_earth_radius_km": math.inf}, "effective_earth_radius_km"),
        ({"sea_fraction": 1.2}, "sea_fraction"),
        ({"polarization": "slant"}, "polarization"),
    ],
)
def test_wrong_arguments_are_named(changes, message):
    """A ValueError names the argument."""
    arguments = {
        "distance_km": [0.0, 1.0, 2.0],
        "ground_elevation_m": [0.0, 1.0, 0.0],
        "tx_height_m": 20.0,
        "rx_height_m": 5.0,
        **STANDARD,
        **changes,
    }
    with pytest.raises(ValueError, match=message):
        delta_bullington(**arguments)


def test_compiled_and_plain_python_agree():
    """The scalars give the same with and without the compiler."""
    rng = np.random.default_rng(4)
    for _ in range(20):
        distance = np.sort(rng.uniform(10.0, 20_000.0, 30))
        distance[0] = 0.0
        ground = rng.uniform(0.0, 300.0, 30)
        arguments = (distance, ground, ground[0] + 20.0, ground[-1] + 5.0)
        for function, rest in (
            (bullington.bullington_profile_loss_db, (8.5e6, WAVELENGTH_M)),
            (smooth_surface.profile_smooth_surface_ends, ()),
        ):
            assert function.py_func(*arguments, *rest) == pytest.approx(
                function(*arguments, *rest), abs=1e-9
            )
        sphere = (distance[-1], rng.uniform(1, 80), rng.uniform(1, 80), 8.5e6, WAVELENGTH_M)
        function = spherical_earth.spherical_earth_loss_db_scalar
        assert function.py_func(*sphere, 5600.0, True, 0.2) == pytest.approx(
            function(*sphere, 5600.0, True, 0.2), abs=1e-9
        )


def test_nearest_clearance_is_the_least_of_a_fine_scan():
    """The cubic's point has the largest nu of all points of a smooth sphere's path."""
    rng = np.random.default_rng(9)
    for _ in range(30):
        tx, rx = rng.uniform(2.0, 200.0, 2)
        total = rng.uniform(0.02, 0.95) * math.sqrt(2 * 8.5e6) * (math.sqrt(tx) + math.sqrt(rx))
        x = np.linspace(0.0, total, 200_001)[1:-1]
        clear = (tx * (total - x) + rx * x) / total - x * (total - x) / (2 * 8.5e6)
        nu = -clear * np.sqrt(2 * total / (WAVELENGTH_M * x * (total - x)))
        point, clearance = spherical_earth.nearest_clearance_m_scalar(total, tx, rx, 8.5e6)
        assert point == pytest.approx(x[np.argmax(nu)], abs=total * 2e-5)
        assert clearance == pytest.approx(clear[np.argmax(nu)], rel=1e-3)
