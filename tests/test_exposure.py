"""Mismatch, power density, field regions and exposure distances against published values."""

import math

import numpy as np
import pytest
from scipy.optimize import brentq

from planner.physics.exposure import Radiator, limit_distance
from planner.physics.exposure_limits import EXPOSURE_LIMITS
from planner.physics.free_space import free_space_loss_db
from planner.physics.mismatch import mismatch_loss_db, reflection_coefficient, return_loss_db
from planner.physics.near_field import far_field_m, power_density_w_m2, reactive_near_field_m

LIMITS = {(limit.guideline, limit.people): limit for limit in EXPOSURE_LIMITS}


@pytest.mark.parametrize(
    ("vswr", "reflected", "return_db", "mismatch_db"),
    [
        (1.2, 0.090909, 20.827854, 0.036041),
        (1.5, 0.2, 13.9794, 0.177288),  # printed as 14.0 dB and 0.18 dB
        (2.0, 0.333333, 9.542425, 0.511525),
        (3.0, 0.5, 6.0206, 1.249387),
    ],
)
def test_standing_wave_ratio(vswr, reflected, return_db, mismatch_db):
    """Textbook values; the closed form evaluated."""
    assert float(reflection_coefficient(vswr)) == pytest.approx(reflected, abs=1e-6)
    assert float(return_loss_db(vswr)) == pytest.approx(return_db, abs=1e-5)
    assert float(mismatch_loss_db(vswr)) == pytest.approx(mismatch_db, abs=1e-5)


def test_standing_wave_ratios_at_the_ends():
    """Matched: nothing comes back; all comes back; below 1 there is no such ratio."""
    assert (float(return_loss_db(1.0)), float(mismatch_loss_db(1.0))) == (math.inf, 0.0)
    assert (float(return_loss_db(math.inf)), float(mismatch_loss_db(math.inf))) == (0.0, math.inf)
    wrong = np.array([0.99, -2.0, math.nan])
    for function in (reflection_coefficient, return_loss_db, mismatch_loss_db):
        assert np.isnan(function(wrong)).all()


def test_radiation_intensity_does_not_depend_on_distance():
    """U = r² W; for an isotropic antenna P / 4 pi."""
    distance = np.geomspace(1.0, 1e4, 20)
    intensity = distance**2 * power_density_w_m2(7.0, distance)
    assert intensity == pytest.approx(np.full(20, 7.0 / (4.0 * math.pi)), rel=1e-12)
    assert np.isnan(power_density_w_m2(1.0, np.array([0.0, -1.0, math.nan]))).all()


def test_power_density_and_free_space_loss_agree():
    """Density times an isotropic antenna's area lambda²/4 pi is the power that arrives."""
    wavelength = 299.792458 / 5600.0
    received = float(power_density_w_m2(1.0, 1234.0)) * wavelength**2 / (4.0 * math.pi)
    assert -10.0 * math.log10(received) == pytest.approx(float(free_space_loss_db(1234.0, 5600.0)))


def test_field_regions():
    """2 D²/lambda and 0.62 sqrt(D³/lambda); a short dipole has lambda / 2 pi."""
    assert float(far_field_m(0.6, 0.05)) == pytest.approx(14.4)
    assert float(reactive_near_field_m(0.6, 0.05)) == pytest.approx(0.62 * math.sqrt(0.216 / 0.05))
    assert float(reactive_near_field_m(0.01, 1.0)) == pytest.approx(1.0 / (2.0 * math.pi))


@pytest.mark.parametrize(
    ("guideline", "people", "frequency_mhz", "w_m2"),
    [
        ("ICNIRP 2020", "general public", 100, 2.0),
        ("ICNIRP 2020", "general public", 900, 4.5),
        ("ICNIRP 2020", "general public", 5600, 10.0),
        ("ICNIRP 2020", "general public", 200_000, 10.0),
        ("ICNIRP 2020", "occupational", 100, 10.0),
        ("ICNIRP 2020", "occupational", 900, 22.5),
        ("ICNIRP 2020", "occupational", 5600, 50.0),
        ("FCC 47 CFR 1.1310", "general public", 100, 2.0),  # 0.2 mW/cm2
        ("FCC 47 CFR 1.1310", "general public", 900, 6.0),  # 0.6 mW/cm2
        ("FCC 47 CFR 1.1310", "general public", 5600, 10.0),
        ("FCC 47 CFR 1.1310", "occupational", 100, 10.0),
        ("FCC 47 CFR 1.1310", "occupational", 900, 30.0),  # 3 mW/cm2
        ("FCC 47 CFR 1.1310", "occupational", 5600, 50.0),
    ],
)
def test_limits(guideline, people, frequency_mhz, w_m2):
    """ICNIRP 2020 table 5 and 47 CFR 1.1310 table 1; from memory."""
    limit = LIMITS[guideline, people]
    assert limit.power_density_w_m2(frequency_mhz) == pytest.approx(w_m2)


def test_limits_join_and_end():
    """No step between bands; NaN below 30 MHz and above the table; averaging times."""
    for limit in EXPOSURE_LIMITS:
        for edge_mhz, _, _ in limit.bands[:-1]:
            below, above = (limit.power_density_w_m2(edge_mhz * f) for f in (1.0, 1.0 + 1e-12))
            assert below == pytest.approx(above, rel=1e-9)
        ends = (29.9, limit.bands[-1][0] * 1.01, math.nan)
        assert all(math.isnan(limit.power_density_w_m2(f)) for f in ends)
    minutes = [LIMITS[key].averaging_minutes for key in LIMITS]
    assert minutes == [30.0, 30.0, 30.0, 6.0]


def radiator(**changes) -> Radiator:
    usual = {
        "frequency_mhz": 2000.0,
        "power_w": 20.0,
        "gain_dbi": 17.0,
        "azimuth_beamwidth_deg": 65.0,
        "largest_dimension_m": 1.3,
        "shape": "column",
    }
    return Radiator(**{**usual, **changes})


PUBLIC = LIMITS["ICNIRP 2020", "general public"]


def test_far_field_distance():
    """20 W, 17 dBi, doubled field: 4 EIRP / (4 pi r²) is the limit of 10 W/m²."""
    found = limit_distance([radiator()], np.ones((1, 1)), PUBLIC)
    eirp = 20.0 * 10.0**1.7
    assert found.far_field_m[0] == pytest.approx(math.sqrt(eirp / (math.pi * 10.0)))
    assert 4.0 * float(power_density_w_m2(eirp, found.far_field_m[0])) == pytest.approx(10.0)


def test_cylindrical_model():
    """P / (2 pi R h) for a collinear antenna; a sector of 120 degrees has three times that."""
    around = limit_distance([radiator(azimuth_beamwidth_deg=360.0)], np.ones((1, 1)), PUBLIC)
    assert around.near_field_m[0] == pytest.approx(20.0 / (2.0 * math.pi * 1.3 * 10.0))
    sector = limit_distance([radiator(azimuth_beamwidth_deg=120.0)], np.ones((1, 1)), PUBLIC)
    assert sector.near_field_m[0] == pytest.approx(3.0 * around.near_field_m[0])


def test_surface_model_of_dishes():
    """Solved by search from 4 P / A up to D²/4 lambda and 1/R beyond; below the limit, nothing."""
    dish = radiator(shape="dish", frequency_mhz=5600.0, largest_dimension_m=0.6, power_w=2.0)
    surface = 4.0 * 2.0 / (math.pi * 0.3**2)
    reach = 0.36 / (4.0 * 299.792458 / 5600.0)
    distance = brentq(lambda r: surface * min(1.0, reach / r) - 10.0, reach, 100.0)
    found = limit_distance([dish], np.ones((1, 1)), PUBLIC)
    assert found.near_field_m[0] == pytest.approx(distance)
    weak = limit_distance([radiator(shape="dish", power_w=0.5)], np.ones((1, 1)), PUBLIC)
    assert 4.0 * 0.5 / (math.pi * 0.65**2) < 10.0
    assert weak.near_field_m[0] == 0.0


def test_all_antennas_of_a_mast_add():
    """Shares of limits add: three alike give the root of three, one behind adds a tenth, and each
    counts against the limit of its own frequency."""
    one = limit_distance([radiator()], np.ones((1, 1)), PUBLIC)
    three = limit_distance([radiator()] * 3, np.ones((3, 1)), PUBLIC)
    assert three.far_field_m[0] == pytest.approx(math.sqrt(3.0) * one.far_field_m[0])
    assert three.near_field_m[0] == pytest.approx(3.0 * one.near_field_m[0])
    share = np.array([[1.0, 0.1], [0.1, 1.0]])
    both = limit_distance([radiator()] * 2, share, PUBLIC)
    assert both.far_field_m == pytest.approx(math.sqrt(1.1) * one.far_field_m.repeat(2))
    low = radiator(frequency_mhz=900.0)
    mixed = limit_distance([radiator(), low], np.ones((2, 1)), PUBLIC)
    quotient = 1.0 + 10.0 / 4.5
    assert mixed.far_field_m[0] == pytest.approx(math.sqrt(quotient) * one.far_field_m[0])


def test_never_within_the_reactive_near_field():
    """A milliwatt: the distance is that of the reactive near field, of the largest antenna."""
    small = [radiator(power_w=1e-3), radiator(power_w=1e-3, largest_dimension_m=2.0)]
    found = limit_distance(small, np.ones((2, 3)), PUBLIC)
    reactive = float(reactive_near_field_m(2.0, 299.792458 / 2000.0))
    assert found.distance_m == pytest.approx(np.full(3, reactive))
    strong = limit_distance([radiator(power_w=1000.0)], np.ones((1, 1)), PUBLIC)
    assert strong.distance_m[0] == max(strong.far_field_m[0], strong.near_field_m[0])


def test_no_limit_no_distance():
    """Above 100 GHz the FCC's table ends: NaN, not a number."""
    limit = LIMITS["FCC 47 CFR 1.1310", "general public"]
    found = limit_distance([radiator(frequency_mhz=120_000.0)], np.ones((1, 2)), limit)
    assert np.isnan(found.distance_m).all()
    with pytest.raises(ValueError, match=r"needed: \(1, n\)"):
        limit_distance([radiator()], np.ones(3), limit)
