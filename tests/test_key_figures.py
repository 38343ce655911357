"""Key figures against antennas that are known in closed form."""

import math
from pathlib import Path

import numpy as np
import pytest
from analytic_patterns import (
    Analytic,
    cosine_power,
    half_wave_dipole,
    line_source,
    upright_array,
    upright_array_directivity,
)
from scipy.optimize import brentq

from planner.antenna import FORMULAS, Isotropic, formula_pattern, two_cut_pattern
from planner.antenna.key_figures import key_figures
from planner.errors import PatternError
from planner.io.pattern_files import read_pattern

PANEL = Path(__file__).parents[1] / "demo_sites" / "lake_ondrel" / "panel-65.csv"

DIRECTIVITIES = {
    "isotropic": (lambda a, e: np.ones_like(a), 1.0),
    "short dipole": (lambda a, e: np.cos(e) ** 2, 1.5),
    "half-wave dipole": (half_wave_dipole, 1.640922),  # 4 / Cin(2 pi)
    "cos": (cosine_power(1), 4.0),
    "cos^4": (cosine_power(4), 10.0),
    "cos^50": (cosine_power(50), 102.0),
    "cos^5000": (cosine_power(5000), 10_002.0),
    "cos^60000": (cosine_power(60_000), 120_002.0),  # 0.8 deg wide
    "2 at a half": (upright_array(2, 0.5), 2.0),
    "10 at a half": (upright_array(10, 0.5), 10.0),
    "8 at 0.7": (upright_array(8, 0.7), upright_array_directivity(8, 0.7)),
    "16 at 0.9, 6 deg down": (
        upright_array(16, 0.9, downtilt_deg=6.0),
        upright_array_directivity(16, 0.9, downtilt_deg=6.0),
    ),
    "100 at 0.8": (upright_array(100, 0.8), upright_array_directivity(100, 0.8)),
}


@pytest.mark.parametrize("name", DIRECTIVITIES)
def test_directivity_by_integration(name):
    """Within 0.0005 dB of the closed form, and within the error that is stated."""
    intensity, exact = DIRECTIVITIES[name]
    figures = key_figures(Analytic(intensity=intensity))
    error_db = abs(figures.directivity_dbi - 10.0 * math.log10(exact))
    assert error_db < 5e-4
    if name != "half-wave dipole":  # whose closed form is given to seven digits
        assert error_db < figures.directivity_error_db + 1e-9
    assert figures.directivity_error_db < 1e-3


def test_known_antennas_in_decibels():
    """As printed in textbooks: isotropic 0, short dipole 1.76, half-wave dipole 2.15 dBi."""
    found = [
        round(key_figures(Analytic(intensity=DIRECTIVITIES[name][0])).directivity_dbi, 2) + 0.0
        for name in ("isotropic", "short dipole", "half-wave dipole")
    ]
    assert found == [0.0, 1.76, 2.15]


def test_half_wave_dipole_beamwidth():
    """78 degrees, as printed in textbooks; exactly where its pattern is 3 dB down."""
    figures = key_figures(Analytic(intensity=half_wave_dipole))
    width_deg = figures.elevation.half_power_beamwidth_deg
    assert round(width_deg) == 78
    edge = brentq(lambda e: 10.0 * math.log10(half_wave_dipole(0.0, e)) + 3.0, 0.1, 1.5)
    assert width_deg == pytest.approx(2.0 * math.degrees(edge), abs=1e-6)
    assert figures.azimuth.half_power_beamwidth_deg is None


def test_where_nothing_is_radiated_there_is_no_lobe():
    """A beam that is nothing at all behind: no nulls, no lobes, an endless front-to-back ratio."""
    figures = key_figures(Analytic(intensity=cosine_power(50)))
    cuts = figures.azimuth, figures.elevation
    assert [cut.side_lobe_level_db for cut in cuts] == [None, None]
    assert [cut.first_null_beamwidth_deg for cut in cuts] == [None, None]
    assert figures.front_to_back_region_db == math.inf


def test_the_pattern_may_point_anywhere():
    """Turning a narrow beam moves the peak and leaves directivity and widths as they are."""
    ahead = key_figures(Analytic(intensity=cosine_power(5000)))
    turned = key_figures(
        Analytic(intensity=cosine_power(5000, azimuth_deg=17.31, elevation_deg=-6.77))
    )
    assert turned.directivity_dbi == pytest.approx(ahead.directivity_dbi, abs=5e-4)
    assert turned.peak_azimuth_offset_deg == pytest.approx(17.31, abs=1e-3)
    assert turned.squint_deg == pytest.approx(17.31, abs=1e-3)
    assert turned.electrical_downtilt_found_deg == pytest.approx(6.77, abs=1e-3)
    width = ahead.elevation.half_power_beamwidth_deg
    assert width == pytest.approx(2.0 * math.degrees(math.acos(10.0**-0.00006)), abs=1e-5)
    assert turned.elevation.half_power_beamwidth_deg == pytest.approx(width, abs=1e-4)


def test_uniform_line_source():
    """First side lobe -13.26 dB, first null at arcsin(1/L), half power 50.8 deg over L."""
    length = 20.0
    figures = key_figures(Analytic(intensity=line_source(length)))
    cut = figures.elevation
    for lobes in (cut.lower, cut.upper):
        assert round(lobes[0].peak_db, 2) == -13.26
        assert lobes[0].null_deg == pytest.approx(math.degrees(math.asin(1.0 / length)), abs=1e-3)
        assert lobes[0].null_db < -60.0
        assert len(lobes) == 19
    assert cut.side_lobe_level_db == pytest.approx(-13.26, abs=0.005)
    assert cut.first_null_beamwidth_deg == pytest.approx(
        2.0 * math.degrees(math.asin(0.05)), abs=2e-3
    )
    # 0.8859 at half power exactly; at 3.000 dB 0.8845
    u = brentq(lambda x: 20.0 * math.log10(np.sinc(x)) + 3.0, 0.1, 0.9)
    width_deg = cut.half_power_beamwidth_deg
    assert width_deg == pytest.approx(2.0 * math.degrees(math.asin(u / length)), abs=1e-6)
    assert width_deg == pytest.approx(50.8 / length, rel=0.005)


def test_uniform_array_side_lobes_and_tilt():
    """Ten elements, tilted: nulls at sin t = -sin tilt + m / (N d); lobes by brute force."""
    count, spacing, tilt = 10, 0.7, 5.0
    figures = key_figures(Analytic(intensity=upright_array(count, spacing, downtilt_deg=tilt)))
    assert figures.electrical_downtilt_found_deg == pytest.approx(tilt, abs=1e-3)
    first = 1.0 / (count * spacing)
    for lobes, sign in ((figures.elevation.lower, -1.0), (figures.elevation.upper, 1.0)):
        sine = -math.sin(math.radians(tilt)) + sign * first
        assert lobes[0].null_deg == pytest.approx(
            sign * (math.degrees(math.asin(sine)) + tilt), abs=1e-3
        )
    angles = np.radians(np.linspace(-90.0, 90.0, 720_001))
    level = 10.0 * np.log10(upright_array(count, spacing, downtilt_deg=tilt)(0.0 * angles, angles))
    beyond = np.sin(angles) > -math.sin(math.radians(tilt)) + first
    assert figures.elevation.upper[0].peak_db == pytest.approx(level[beyond].max(), abs=1e-4)


def test_front_to_back_at_180_and_around_it():
    """A cardioid with a lobe at 160 degrees: straight back 30 dB, in the region 22 dB."""
    angles = np.arange(-180.0, 180.0)
    level = -np.minimum(35.0, 12.0 * (angles / 65.0) ** 2)
    level[np.abs(angles) == 180.0] = -30.0
    level[angles == 160.0] = -22.0
    level[angles == 140.0] = -15.0  # outside 150 to 210
    pattern = two_cut_pattern(
        name="panel",
        gain_dbi=15.0,
        horizontal_angle_deg=angles,
        horizontal_level_db=level,
        vertical_angle_deg=[-90, -60, -30, -4, 0, 4, 30, 60, 90],
        vertical_level_db=[-30, -25, -20, -3, 0, -3, -20, -25, -30],
    )
    figures = key_figures(pattern)
    assert figures.front_to_back_db == pytest.approx(30.0)
    assert figures.front_to_back_region_db == pytest.approx(22.0)


def test_a_lopsided_measured_pattern():
    """Squint is the middle of the 3 dB edges, a flat top counts with its middle, ripple of less
    than 1 dB is no lobe, and what was put in as tilt is found."""
    pattern = two_cut_pattern(
        name="panel",
        gain_dbi=15.0,
        horizontal_angle_deg=[-180, -150, -120, -90, -60, -30, 0, 8, 12, 40, 60, 90, 120, 150],
        horizontal_level_db=[-30, -30, -30, -29.2, -28, -6, -1, 0, 0, -5, -12, -20, -30, -29.1],
        vertical_angle_deg=[-90, -60, -30, -12, -8, -5, -3, 0, 4, 9, 30, 60, 90],
        vertical_level_db=[-30, -25, -20, -14, -25, -6, 0, -3.5, -20, -17, -25, -26, -30],
    )
    figures = key_figures(pattern)
    left = -12.0  # -6 dB at -30, -1 dB at 0
    right = 12.0 + 28.0 * 3.0 / 5.0
    assert figures.azimuth.half_power_edges_deg == pytest.approx((left, right), abs=1e-6)
    assert figures.squint_deg == pytest.approx((left + right) / 2.0, abs=1e-6)
    assert figures.peak_azimuth_offset_deg == pytest.approx(10.0, abs=0.04)
    assert figures.electrical_downtilt_found_deg == pytest.approx(3.0, abs=1e-3)
    assert [lobe.peak_db for lobe in figures.elevation.lower] == pytest.approx([-14.0], abs=1e-6)
    assert [lobe.peak_db for lobe in figures.elevation.upper] == pytest.approx([-17.0], abs=1e-6)
    assert figures.azimuth.lower == ()
    assert figures.azimuth.side_lobe_level_db is None
    more = key_figures(pattern, electrical_downtilt_deg=2.0)
    assert more.electrical_downtilt_found_deg == pytest.approx(5.0, abs=1e-3)


def test_a_dip_in_the_main_beam_is_no_null():
    """Two humps with 1.5 dB between them are one beam; beyond it there is no lobe."""
    pattern = two_cut_pattern(
        name="panel",
        gain_dbi=15.0,
        horizontal_angle_deg=[-180, -150, -120, -90, -60, -30, 0, 30, 60, 90, 120, 150],
        horizontal_level_db=[-30, -30, -29, -15, -4, 0, -1.5, -0.1, -4, -15, -29, -30],
        vertical_angle_deg=[-90, -60, -30, 0, 30, 60, 90],
        vertical_level_db=[-30, -25, -20, 0, -20, -25, -30],
    )
    figures = key_figures(pattern)
    right = 30.0 + 30.0 * 2.9 / 3.9
    assert figures.azimuth.half_power_edges_deg == pytest.approx((-52.5, right), abs=1e-6)
    assert (figures.azimuth.lower, figures.azimuth.upper) == ((), ())


def test_the_demo_panel_s_lobes_are_those_of_its_file():
    """Points of the file: first lobes -13.14 dB at 10 deg, back lobe -22.5 dB."""
    figures = key_figures(read_pattern(PANEL, name="panel", gain_dbi=17.0))
    assert figures.elevation.upper[0].peak_db == pytest.approx(-13.14, abs=1e-6)
    assert figures.elevation.lower[0].peak_db == pytest.approx(-13.14, abs=1e-6)
    assert figures.elevation.upper[0].peak_deg == pytest.approx(10.0, abs=1e-3)
    assert figures.front_to_back_db == pytest.approx(22.5, abs=1e-6)
    low, high = figures.gain_from_beamwidths_dbi
    product = 64.7959 * 6.29915
    assert low == pytest.approx(10.0 * math.log10(32_000.0 / product), abs=1e-3)
    assert high == pytest.approx(10.0 * math.log10(41_000.0 / product), abs=1e-3)


@pytest.mark.parametrize(
    ("over_db", "verdict"), [(-3.0, "possible"), (0.9, "possible"), (1.1, "impossible")]
)
def test_a_gain_above_the_directivity(over_db, verdict):
    """By more than 1 dB no antenna can have it; the efficiency is G / D."""
    gain_dbi = 10.0 * math.log10(10.0) + over_db  # cos^4 has a directivity of 10
    figures = key_figures(Analytic(intensity=cosine_power(4), gain_dbi=gain_dbi, kind="measured"))
    assert figures.gain_verdict == verdict
    assert figures.gain_above_directivity_db == pytest.approx(over_db, abs=1e-3)
    assert figures.efficiency == pytest.approx(10.0 ** (over_db / 10.0), rel=1e-3)


def test_an_envelope_is_not_judged():
    """The same pattern and gain as an envelope: no verdict, no efficiency."""
    figures = key_figures(Analytic(intensity=cosine_power(4), gain_dbi=20.0, kind="envelope"))
    assert (figures.gain_verdict, figures.efficiency) == ("not judged", None)


BEAMS = {"azimuth_beamwidth_deg": 65.0, "elevation_beamwidth_deg": 8.0}
KINDS = {
    "F.1336-5": ("envelope", BEAMS),
    "F.1336-5 omnidirectional": ("envelope", {"gain_dbi": 10.0}),
    "F.699": ("envelope", {"gain_dbi": 30.0}),
    "F.1245": ("envelope", {"gain_dbi": 30.0}),
    "TR 36.814": ("model", BEAMS),
    "TR 38.901": ("model", {}),
    "M.2101": ("model", {"rows": 4, "columns": 4}),
    "isotropic": ("model", {}),
}


def test_the_kind_of_every_formula():
    """Envelopes are known as such; a new formula must be put into the table above."""
    assert set(KINDS) == set(FORMULAS)
    for formula, (kind, keys) in KINDS.items():
        pattern = formula_pattern("x", formula, frequency_mhz=5600.0, **({"gain_dbi": 15.0} | keys))
        assert pattern.kind == kind, formula
    assert read_pattern(PANEL, name="panel", gain_dbi=17.0).kind == "measured"


def test_the_isotropic_antenna_has_no_beam():
    """Nothing but its gain and directivity."""
    figures = key_figures(Isotropic(name="i", gain_dbi=0.0))
    assert figures.azimuth.half_power_edges_deg is None
    assert figures.elevation.half_power_beamwidth_deg is None
    assert figures.gain_from_beamwidths_dbi is None
    assert figures.squint_deg is None
    assert (figures.front_to_back_db, figures.efficiency) == (0.0, pytest.approx(1.0))


def test_a_pattern_with_holes_is_refused():
    """NaN in some direction: a message, not a number."""
    pattern = Analytic(intensity=lambda a, e: np.where(e > 1.2, np.nan, 1.0))
    with pytest.raises(PatternError, match="without a gain"):
        key_figures(pattern)
    with pytest.raises(PatternError, match="radiates nothing"):
        key_figures(Analytic(intensity=lambda a, e: 0.0 * a))
