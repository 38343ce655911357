"""Mechanical and electrical tilt of a mounted antenna."""

import math

import numpy as np
import pytest

from planner.antenna import (
    F1336Sector,
    Pattern,
    Tr36814Sector,
    antenna_direction_deg,
    mounted_gain_dbi,
    two_cut_pattern,
)
from planner.antenna.mounting import tilted_direction_deg
from planner.errors import PatternError

SECTOR = Tr36814Sector(
    name="sector", gain_dbi=17.0, azimuth_beamwidth_deg=65.0, elevation_beamwidth_deg=7.0
)
PANEL = F1336Sector(
    name="panel",
    gain_dbi=17.0,
    azimuth_beamwidth_deg=90.0,
    elevation_beamwidth_deg=7.0,
    frequency_mhz=5600.0,
)
TILTS_DEG = (-7.0, 2.0, 12.0)

# Mechanical downtilt, electrical downtilt, azimuth, elevation, gain of PANEL: computed with
# pycraf 2.1.0 (imt_advanced_sectoral_avg_sidelobe_pattern_400_to_6000_mhz, ITU-R F.1336-5 section
# 3.1.2, k_a = 0.7, k_h = 0.8, k_v = 0.7), which tilts by the Recommendation's own formulas.
PYCRAF = (
    (0.0, 6.0, 0.0, 0.0, 9.251276),
    (0.0, 6.0, 0.0, -20.0, 2.080864),
    (0.0, 6.0, 60.0, 2.0, 1.526231),
    (6.0, 0.0, 0.0, 40.0, -3.989315),
    (6.0, 0.0, 60.0, 2.0, 6.957321),
    (6.0, 0.0, 90.0, -3.0, 5.930109),
    (4.0, 3.0, 0.0, 0.0, 5.761707),
    (4.0, 3.0, 60.0, 2.0, 2.890806),
    (4.0, 3.0, 120.0, -10.0, -3.405828),
    (4.0, 3.0, -45.0, 10.0, 0.778202),
    (0.0, -5.0, 0.0, 40.0, -1.745469),
    (0.0, -5.0, 90.0, -3.0, -0.757499),
)


def gain(pattern: Pattern, azimuth: float, elevation: float, **aim: float) -> np.ndarray:
    given = {"azimuth_deg": 0.0, "mechanical_downtilt_deg": 0.0, "electrical_downtilt_deg": 0.0}
    return mounted_gain_dbi(
        pattern, true_azimuth_deg=azimuth, elevation_deg=elevation, **(given | aim)
    )


@pytest.mark.parametrize(("mechanical", "electrical", "azimuth", "elevation", "expected"), PYCRAF)
def test_tilts_against_a_reference_library(
    mechanical: float, electrical: float, azimuth: float, elevation: float, expected: float
) -> None:
    """Both tilts, alone and together, agree with an independent implementation of F.1336-5."""
    actual = gain(
        PANEL,
        azimuth + 200.0,
        elevation,
        azimuth_deg=200.0,
        mechanical_downtilt_deg=mechanical,
        electrical_downtilt_deg=electrical,
    )
    assert expected == pytest.approx(float(actual), abs=1e-6)


@pytest.mark.parametrize("tilt_deg", TILTS_DEG)
def test_elevation_shifts_by_the_tilt_on_the_boresight(tilt_deg: float) -> None:
    """On the boresight's azimuth the antenna sees elevations higher by exactly the tilt."""
    elevations = np.linspace(-77.0, 77.0, 23)
    azimuth, elevation = antenna_direction_deg(0.0, elevations, mechanical_downtilt_deg=tilt_deg)
    np.testing.assert_allclose(elevations + tilt_deg, elevation, rtol=0, atol=1e-12)
    np.testing.assert_allclose(0.0, azimuth, rtol=0, atol=1e-12)


@pytest.mark.parametrize("tilt_deg", TILTS_DEG)
def test_no_change_at_the_sides(tilt_deg: float) -> None:
    """On the horizon at +-90 degrees the tilt changes nothing: there is its axis."""
    azimuth, elevation = antenna_direction_deg(
        np.array([-90.0, 90.0]), 0.0, mechanical_downtilt_deg=tilt_deg
    )
    np.testing.assert_allclose([-90.0, 90.0], azimuth, rtol=0, atol=1e-12)
    np.testing.assert_allclose([0.0, 0.0], elevation, rtol=0, atol=1e-12)


@pytest.mark.parametrize("tilt_deg", TILTS_DEG)
def test_uptilt_behind(tilt_deg: float) -> None:
    """Behind the antenna a downtilt is an uptilt of the same size."""
    _, elevation = antenna_direction_deg(
        180.0, np.array([-20.0, 0.0, 15.0]), mechanical_downtilt_deg=tilt_deg
    )
    expected = np.array([-20.0, 0.0, 15.0]) - tilt_deg
    np.testing.assert_allclose(expected, elevation, rtol=0, atol=1e-12)


@pytest.mark.parametrize("tilt_deg", TILTS_DEG)
def test_opposite_tilt_undoes_tilt(tilt_deg: float) -> None:
    """A rotation back gives the direction one began with."""
    azimuths, elevations = np.meshgrid(np.linspace(-179.0, 179.0, 41), np.linspace(-80.0, 80.0, 33))
    there = antenna_direction_deg(azimuths, elevations, mechanical_downtilt_deg=tilt_deg)
    back = antenna_direction_deg(*there, mechanical_downtilt_deg=-tilt_deg)
    np.testing.assert_allclose(azimuths, back[0], rtol=0, atol=1e-10)
    np.testing.assert_allclose(elevations, back[1], rtol=0, atol=1e-10)


@pytest.mark.parametrize("tilt_deg", TILTS_DEG)
def test_angles_between_directions_are_kept(tilt_deg: float) -> None:
    """A rotation keeps the angle between any two directions."""
    rng = np.random.default_rng(7)
    azimuths, elevations = rng.uniform(-180, 180, (2, 200)), rng.uniform(-90, 90, (2, 200))

    def cosine(azimuth_deg: np.ndarray, elevation_deg: np.ndarray) -> np.ndarray:
        azimuth, elevation = np.radians(azimuth_deg), np.radians(elevation_deg)
        x, y, z = (
            np.cos(elevation) * np.cos(azimuth),
            np.cos(elevation) * np.sin(azimuth),
            np.sin(elevation),
        )
        return x[0] * x[1] + y[0] * y[1] + z[0] * z[1]

    seen = antenna_direction_deg(azimuths, elevations, mechanical_downtilt_deg=tilt_deg)
    np.testing.assert_allclose(cosine(azimuths, elevations), cosine(*seen), rtol=0, atol=1e-12)


@pytest.mark.parametrize("pattern", [SECTOR, PANEL], ids=["TR 36.814", "F.1336-5"])
def test_mechanical_tilt_keeps_the_radiated_power(pattern: Pattern) -> None:
    """A rotation keeps the integral of the gain over the sphere, within the quadrature's error."""
    heights, weights = np.polynomial.legendre.leggauss(720)
    elevations = np.degrees(np.arcsin(heights))[:, np.newaxis]
    azimuths = np.arange(0.0, 360.0, 0.5)[np.newaxis, :]

    def mean_gain(tilt_deg: float) -> float:
        actual = gain(pattern, azimuths, elevations, mechanical_downtilt_deg=tilt_deg)
        return float(0.5 * weights @ (10.0 ** (actual / 10.0)).mean(axis=1))

    assert mean_gain(0.0) == pytest.approx(mean_gain(9.0), rel=2e-4)
    assert mean_gain(0.0) == pytest.approx(mean_gain(-20.0), rel=2e-4)


@pytest.mark.parametrize("pattern", [SECTOR, PANEL], ids=["TR 36.814", "F.1336-5"])
def test_both_tilts_lower_the_beam_ahead(pattern: Pattern) -> None:
    """Ahead the peak lies below the horizon by the sum of the tilts; behind they differ."""
    aim = {"mechanical_downtilt_deg": 3.0, "electrical_downtilt_deg": 0.0}
    assert pattern.gain_dbi == pytest.approx(float(gain(pattern, 0.0, -3.0, **aim)), abs=1e-9)
    aim = {"mechanical_downtilt_deg": 0.0, "electrical_downtilt_deg": 3.0}
    assert pattern.gain_dbi == pytest.approx(float(gain(pattern, 0.0, -3.0, **aim)), abs=1e-9)
    if pattern is SECTOR:  # whose cut does not hit the front-to-back cap at the side
        side = 60.0
        electrical = float(gain(pattern, side, -3.0, **aim))
        aim = {"mechanical_downtilt_deg": 3.0, "electrical_downtilt_deg": 0.0}
        assert electrical - float(gain(pattern, side, -3.0, **aim)) > 0.3


def test_turning_by_360_changes_nothing() -> None:
    """Azimuths that differ by whole turns are the same aim and the same direction."""
    azimuths = np.array([0.0, 10.0, 123.4, 359.9])
    aim = {"mechanical_downtilt_deg": 4.0, "electrical_downtilt_deg": 1.0}
    once = gain(PANEL, azimuths, -2.0, azimuth_deg=350.0, **aim)
    turned = gain(PANEL, azimuths + 360.0, -2.0, azimuth_deg=-10.0, **aim)
    np.testing.assert_allclose(once, turned, rtol=0, atol=1e-11)


def test_azimuth_is_clockwise_from_north() -> None:
    """A sector aimed east is strongest east; what is 20 degrees right of it has azimuth 110."""
    lopsided = two_cut_pattern(
        name="lopsided",
        gain_dbi=10.0,
        horizontal_angle_deg=np.arange(-180.0, 180.0, 20.0),
        horizontal_level_db=np.where(np.arange(-180.0, 180.0, 20.0) == 20.0, -3.0, 0.0),
        vertical_angle_deg=[-90.0, -60.0, -30.0, 0.0, 30.0, 60.0, 90.0],
        vertical_level_db=[0.0] * 7,
    )
    east = gain(SECTOR, np.array([0.0, 90.0, 180.0, 270.0]), 0.0, azimuth_deg=90.0)
    assert east.argmax() == 1
    for tilt_deg in (0.0, 1e-9):
        actual = gain(
            lopsided, np.array([70.0, 110.0]), 0.0, azimuth_deg=90.0,
            mechanical_downtilt_deg=tilt_deg,
        )  # fmt: skip
        assert pytest.approx(actual, abs=1e-6) == [10.0, 7.0]


@pytest.mark.parametrize("tilt_deg", [0.0, 5.0])
def test_zenith_nadir_and_nan(tilt_deg: float) -> None:
    """Straight up and down give finite gains, NaN gives NaN."""
    aim = {"mechanical_downtilt_deg": tilt_deg}
    assert np.isfinite(gain(PANEL, np.arange(0.0, 360.0, 30.0), 90.0, **aim)).all()
    assert np.isfinite(gain(PANEL, np.arange(0.0, 360.0, 30.0), -90.0, **aim)).all()
    actual = gain(PANEL, np.array([np.nan, 0.0, 0.0]), np.array([0.0, np.nan, 0.0]), **aim)
    assert np.isnan(actual).tolist() == [True, True, False]


def test_impossible_tilt_is_refused() -> None:
    """A mechanical downtilt beyond 45 degrees or NaN is an error."""
    for tilt_deg in (45.5, -90.0, math.nan):
        with pytest.raises(PatternError, match="mechanical_downtilt_deg: found"):
            gain(PANEL, 0.0, 0.0, mechanical_downtilt_deg=tilt_deg)


def test_plain_and_compiled_agree() -> None:
    """The rotation gives the same compiled and as plain Python."""
    for arguments in ((130.0, -20.0, 7.0), (0.0, 90.0, 7.0), (12.0, 3.0, 0.0)):
        plain = tilted_direction_deg.py_func(*arguments)
        assert plain == pytest.approx(tilted_direction_deg(*arguments), abs=1e-12)
