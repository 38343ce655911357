"""Rings on flat ground against trigonometry."""

import math

import pytest
from analytic_patterns import Analytic, cosine_power, line_source, upright_array

from planner.antenna import Isotropic, formula_pattern
from planner.antenna.flat_ground import flat_ground_rings
from planner.errors import PatternError


def panel(elevation_beamwidth_deg=8.0):
    return formula_pattern(
        "panel",
        "TR 36.814",
        frequency_mhz=5600.0,
        gain_dbi=15.0,
        azimuth_beamwidth_deg=65.0,
        elevation_beamwidth_deg=elevation_beamwidth_deg,
    )


@pytest.mark.parametrize("tilts", [(6.0, 0.0), (0.0, 6.0), (4.0, 2.0), (9.0, -3.0)])
def test_main_beam_and_edges(tilts):
    """h / tan of the tilt and of the tilt plus or minus half the beamwidth."""
    rings = flat_ground_rings(
        panel(),
        antenna_height_m=30.0,
        mechanical_downtilt_deg=tilts[0],
        electrical_downtilt_deg=tilts[1],
    )
    for ring, angle in ((rings.main_beam, 6.0), (rings.upper_edge, 2.0), (rings.lower_edge, 10.0)):
        assert ring.elevation_deg == pytest.approx(-angle, abs=1e-4)
        assert ring.distance_m == pytest.approx(30.0 / math.tan(math.radians(angle)), rel=1e-4)
    assert rings.main_beam.gain_dbi == pytest.approx(15.0, abs=1e-6)
    assert rings.upper_edge.gain_dbi == pytest.approx(12.0, abs=1e-6)
    assert rings.nulls == ()


def test_what_does_not_meet_the_ground():
    """A beam at the horizon lands nowhere; its upper edge even less; the lower edge does."""
    rings = flat_ground_rings(panel(), antenna_height_m=30.0)
    assert rings.main_beam.distance_m is None
    assert rings.upper_edge.distance_m is None
    assert rings.lower_edge.distance_m == pytest.approx(30.0 / math.tan(math.radians(4.0)))
    rings = flat_ground_rings(Isotropic(name="i", gain_dbi=0.0), antenna_height_m=30.0)
    assert (rings.upper_edge, rings.lower_edge, rings.nulls) == (None, None, ())


def test_nulls_of_a_line_source():
    """At sin t = m / L, the ground's from the mast outwards; above the horizon there are none."""
    length, tilt, height = 10.0, 8.0, 25.0
    rings = flat_ground_rings(
        Analytic(intensity=line_source(length)),
        antenna_height_m=height,
        mechanical_downtilt_deg=tilt,
    )
    angles = [tilt + math.degrees(math.asin(m / length)) for m in range(-9, 10) if m]
    below = sorted((a for a in angles if 0.0 < a < 90.0), reverse=True)
    assert len(rings.nulls) == len(below)
    for ring, angle in zip(rings.nulls, below, strict=True):
        assert ring.distance_m == pytest.approx(height / math.tan(math.radians(angle)), rel=1e-3)


def test_an_antenna_that_points_aside():
    """The ground is looked at where the beam is, turned by the tilt: 30 deg to the right and 9 deg
    down by itself, the mast tilted by 4 deg more about the boresight's cross axis."""
    pattern = Analytic(intensity=cosine_power(5000, azimuth_deg=30.0, elevation_deg=-9.0))
    rings = flat_ground_rings(pattern, antenna_height_m=30.0, mechanical_downtilt_deg=4.0)
    azimuth, elevation, tilt = (math.radians(angle) for angle in (30.0, -9.0, 4.0))
    ahead, up = math.cos(elevation) * math.cos(azimuth), math.sin(elevation)
    right = math.cos(elevation) * math.sin(azimuth)
    ahead, up = (
        ahead * math.cos(tilt) + up * math.sin(tilt),
        up * math.cos(tilt) - ahead * math.sin(tilt),
    )
    assert rings.azimuth_offset_deg == pytest.approx(
        math.degrees(math.atan2(right, ahead)), abs=1e-3
    )
    assert rings.main_beam.elevation_deg == pytest.approx(math.degrees(math.asin(up)), abs=1e-3)


def test_an_antenna_that_radiates_all_around_is_looked_at_along_its_boresight():
    """Tilted up by 9.5 degrees, its ring of highest gain is so in front."""
    rings = flat_ground_rings(
        Analytic(intensity=line_source(10.0)),
        antenna_height_m=30.0,
        mechanical_downtilt_deg=-9.5,
        electrical_downtilt_deg=2.25,
    )
    assert rings.azimuth_offset_deg == pytest.approx(0.0, abs=1e-9)
    assert rings.main_beam.elevation_deg == pytest.approx(7.25, abs=1e-3)


def test_a_null_between_beam_and_horizon_counts():
    """A beam tilted by 20 degrees: its upper nulls lie on the ground beyond the main beam."""
    rings = flat_ground_rings(
        Analytic(intensity=upright_array(10, 0.7, downtilt_deg=20.0)), antenna_height_m=20.0
    )
    beyond = [ring for ring in rings.nulls if ring.distance_m > rings.main_beam.distance_m]
    sines = [math.sin(math.radians(20.0)) - m / 7.0 for m in (2, 1)]
    expected = [20.0 / math.tan(math.asin(sine)) for sine in reversed(sines)]
    assert [ring.distance_m for ring in beyond] == pytest.approx(expected, rel=1e-3)


@pytest.mark.parametrize("height_m", [0.4, 1001.0, math.nan])
def test_a_height_that_is_none(height_m):
    """The allowed range is told."""
    with pytest.raises(PatternError, match=r"allowed: 0\.5 to 1000 m"):
        flat_ground_rings(Analytic(intensity=cosine_power(4)), antenna_height_m=height_m)
