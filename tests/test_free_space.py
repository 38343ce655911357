"""Free space, Fresnel zone and knife edge against closed forms and the exact integral."""

import math

import numpy as np
import pytest
from scipy.special import fresnel

from planner.physics.free_space import free_space_loss_db, wavelength_m
from planner.physics.fresnel import fresnel_parameter, fresnel_radius_m
from planner.physics.knife_edge import LOWEST_NU, knife_edge_loss_db, knife_edge_loss_db_scalar


@pytest.mark.parametrize(
    ("frequency_mhz", "distance_km", "exact_db", "rounded_db"),
    [
        (100, 1, 72.447783, 72.4),
        (900, 5, 105.512033, 105.46425),
        (1000, 1, 92.447783, 92.4),
        (2400, 0.1, 80.052008, 80.004225),
        (5800, 10, 127.716343, 127.66856),
        (11000, 30, 142.818062, 142.770279),
        (28000, 1, 121.390944, 121.343161),
        (80000, 2, 136.530183, 136.4824),
    ],
)
def test_free_space_loss(frequency_mhz, distance_km, exact_db, rounded_db):
    """20log(4 pi d / lambda) exactly; ITU-R P.525-4's rounded 32.4 form lies 0.048 dB below.

    Closed form evaluated; the Recommendation's formula from memory.
    """
    loss = float(free_space_loss_db(distance_km * 1000.0, frequency_mhz))
    assert loss == pytest.approx(exact_db, abs=1e-5)
    assert loss - rounded_db == pytest.approx(0.0478, abs=1e-3)


def test_doubling_the_distance_adds_six_decibels():
    """20log 2 = 6.0206 dB, at any distance and frequency."""
    distance = np.geomspace(1.0, 1e5, 40)
    step = free_space_loss_db(2.0 * distance, 5600.0) - free_space_loss_db(distance, 5600.0)
    np.testing.assert_allclose(step, 20.0 * math.log10(2.0), atol=1e-9)


def test_no_distance_no_loss():
    """Zero, negative and NaN distances give NaN, never a number."""
    assert np.isnan(free_space_loss_db([0.0, -1.0, math.nan], 5600.0)).all()


def test_wavelength():
    """c / f with c = 299 792 458 m/s (BIPM, SI Brochure, 9th edition)."""
    assert float(wavelength_m(299.792458)) == pytest.approx(1.0)


@pytest.mark.parametrize(
    ("frequency_ghz", "d1_km", "d2_km", "exact_m", "p530_m"),
    [
        (1, 5, 5, 27.376653, 27.353702),
        (5.8, 5, 5, 11.367537, 11.358006),
        (11, 10, 20, 13.479332, 13.468032),
        (28, 0.5, 1.5, 2.003766, 2.002086),
        (80, 1, 1, 1.368833, None),
    ],
)
def test_first_fresnel_zone(frequency_ghz, d1_km, d2_km, exact_m, p530_m):
    """sqrt(lambda d1 d2 / d); ITU-R P.530-18 prints 17.3 sqrt(d1 d2 / (f d)), from memory."""
    radius = float(
        fresnel_radius_m(d1_km * 1000.0, d2_km * 1000.0, wavelength_m(frequency_ghz * 1000.0))
    )
    assert radius == pytest.approx(exact_m, abs=1e-5)
    if p530_m is not None:
        assert radius == pytest.approx(p530_m, rel=1e-3)


def test_nu_at_free_and_sixty_percent_free_zone():
    """Clearance of one Fresnel radius is nu = -sqrt(2), of 60 % is -0.849."""
    radius = fresnel_radius_m(3000.0, 5000.0, 0.05)
    full = float(fresnel_parameter(-radius, 3000.0, 5000.0, 0.05))
    assert full == pytest.approx(-math.sqrt(2.0), abs=1e-12)
    part = float(fresnel_parameter(-0.6 * radius, 3000.0, 5000.0, 0.05))
    assert part == pytest.approx(-0.849, abs=5e-4)


@pytest.mark.parametrize(
    ("frequency_mhz", "height_m", "d1_m", "d2_m", "nu", "loss_db"),
    [
        (1000, 0.0, 5000.0, 5000.0, 0.0, 6.032852),
        (1000, 20.0, 5000.0, 5000.0, 1.033153, 14.138014),
        (5800, -10.0, 2000.0, 8000.0, -1.555101, 0.0),
        (28000, 3.0, 400.0, 600.0, 2.646667, 21.35701),
    ],
)
def test_knife_edge_cases(frequency_mhz, height_m, d1_m, d2_m, nu, loss_db):
    """nu and J of ITU-R P.526-15 section 4.1 (closed form evaluated, formula from memory)."""
    found = fresnel_parameter(height_m, d1_m, d2_m, wavelength_m(frequency_mhz))
    assert float(found) == pytest.approx(nu, abs=1e-5)
    assert float(knife_edge_loss_db(found)) == pytest.approx(loss_db, abs=1e-5)


@pytest.mark.parametrize(
    ("nu", "loss_db"),
    [
        (-1.5, 0.0),
        (-0.78, 0.0),
        (-0.5, 1.95925),
        (0.0, 6.032852),
        (0.5, 10.287804),
        (1.0, 13.925729),
        (1.5, 16.784386),
        (2.4, 20.539266),
        (5.0, 26.813581),
        (10.0, 32.855375),
    ],
)
def test_knife_edge_approximation(nu, loss_db):
    """J(nu) of ITU-R P.526-15 section 4.1, evaluated (formula from memory)."""
    assert float(knife_edge_loss_db(nu)) == pytest.approx(loss_db, abs=1e-5)


def test_knife_edge_against_the_exact_fresnel_integral():
    """Within 0.17 dB of -20log |1 - (1 + j) F(nu)| / sqrt(2) ... from nu = -0.7 to 20."""
    nu = np.linspace(-0.7, 20.0, 400)
    s, c = fresnel(nu)
    exact = -20.0 * np.log10(0.5 * np.sqrt((1.0 - c - s) ** 2 + (c - s) ** 2))
    difference = knife_edge_loss_db(nu) - exact
    print(f"largest difference to the exact integral {np.abs(difference).max():.3f} dB")
    assert np.abs(difference).max() <= 0.17


def test_knife_edge_of_nothing_and_below_its_range():
    """NaN gives NaN; at and below -0.78, down to minus infinity, the loss is 0."""
    assert math.isnan(float(knife_edge_loss_db(math.nan)))
    assert float(knife_edge_loss_db(-math.inf)) == 0.0
    assert float(knife_edge_loss_db(LOWEST_NU)) == 0.0
    assert float(knife_edge_loss_db(LOWEST_NU + 1e-9)) > -0.02


def test_knife_edge_plain_python_equals_compiled():
    """The scalar gives the same with and without the compiler."""
    for nu in (-2.0, -0.78, -0.3, 0.0, 2.5, 40.0):
        assert knife_edge_loss_db_scalar.py_func(nu) == pytest.approx(
            knife_edge_loss_db_scalar(nu), abs=1e-12
        )
