"""Two cuts put together, against patterns that are known in every direction."""

import re
from pathlib import Path

import numpy as np
import pytest
from benchmarks.known_patterns import (
    array_gains,
    cuts_of,
    formula_gains,
    known_patterns,
    misfit,
    study_table,
)

from planner.antenna.interpolation import INTERPOLATIONS, Interpolation, cross_weighted_db

MODELS = (Path(__file__).parents[1] / "docs" / "models.md").read_text(encoding="utf-8")
PANEL = array_gains(8, 2, tapered=True)
every_way = pytest.mark.parametrize("way", INTERPOLATIONS)


@every_way
@pytest.mark.parametrize("downtilt_deg", [0.0, 6.0])
def test_both_cuts_come_back(way: Interpolation, downtilt_deg: float) -> None:
    """In the cuts themselves each way gives what was measured; the projected one behind as well."""
    gains = array_gains(12, 2, tapered=True, downtilt_deg=downtilt_deg)
    pattern, peak_db = cuts_of(gains, way)
    around = np.arange(-180.0, 180.0, 2.0)
    beam = np.full(around.size, -downtilt_deg)
    expected = np.maximum(gains(around, beam) - peak_db, -100.0)
    np.testing.assert_allclose(expected, pattern.gain(around, beam), rtol=0, atol=1e-6)
    upright = np.arange(-90.0, 91.0, 2.0)
    expected = np.maximum(gains(0.0 * upright, upright) - peak_db, -100.0)
    np.testing.assert_allclose(expected, pattern.gain(0.0, upright), rtol=0, atol=1e-6)
    if way == "projected":
        expected = np.maximum(gains(0.0 * upright + 180.0, upright) - peak_db, -100.0)
        np.testing.assert_allclose(expected, pattern.gain(180.0, upright), rtol=0, atol=0.02)


@pytest.mark.parametrize("rear_half", [True, False])
@pytest.mark.parametrize("tilt_deg", [0.0, 8.0, -8.0])
def test_one_value_straight_up_and_down(rear_half: bool, tilt_deg: float) -> None:
    """At the poles all azimuths are one direction with one gain, and nothing jumps on the way."""
    pattern, _ = cuts_of(PANEL, "projected", rear_half=rear_half)
    around = np.arange(-180.0, 180.0, 5.0)
    for pole in (-90.0, 90.0):
        at_pole = pattern.gain(around, pole, electrical_downtilt_deg=tilt_deg)
        assert np.ptp(at_pole) < 1e-9
        assert float(pattern.gain(0.0, pole)) == pytest.approx(at_pole[0], abs=1e-9)
        near = pattern.gain(around, 0.99999 * pole, electrical_downtilt_deg=tilt_deg)
        np.testing.assert_allclose(at_pole, near, rtol=0, atol=0.01)


@every_way
def test_no_seam(way: Interpolation) -> None:
    """Across 0, 180 and 360 degrees and the horizon the pattern runs on."""
    pattern, _ = cuts_of(PANEL, way)
    elevations = np.arange(-80.0, 81.0, 8.0)
    for seam in (0.0, 180.0, 360.0, -180.0):
        left, right = pattern.gain(seam - 1e-7, elevations), pattern.gain(seam + 1e-7, elevations)
        np.testing.assert_allclose(left, right, rtol=0, atol=1e-4)
    around = np.arange(-180.0, 180.0, 7.0)
    below, above = pattern.gain(around, -1e-9), pattern.gain(around, 1e-9)
    np.testing.assert_allclose(below, above, rtol=0, atol=1e-6)


def test_a_null_runs_around_and_the_back_stays() -> None:
    """A null of the vertical cut is one beside the beam as well, and fills towards the back."""
    pattern, _ = cuts_of(array_gains(8, 1, tapered=False), "projected")
    null_deg = np.degrees(np.arcsin(1.0 / (8 * 0.7)))
    beside = pattern.gain(np.array([0.0, 30.0, 60.0]), null_deg)
    assert (beside < -30.0).all()
    shoulder = pattern.gain(np.array([0.0, 30.0, 60.0]), 1.5 * null_deg)
    assert (shoulder - beside > 10.0).all()
    assert float(pattern.gain(180.0, 0.0)) == pytest.approx(-30.0, abs=0.1)


def test_cross_weighted_by_hand() -> None:
    """Halfway down in both cuts both weigh alike, and their sum counts 1 / sqrt(2)."""
    half = 10.0 * np.log10(0.5)
    actual = cross_weighted_db(np.array([half, 0.0, -7.0, 0.0]), np.array([half, -5.0, 0.0, 0.0]))
    np.testing.assert_allclose([2.0 * half / np.sqrt(2.0), -5.0, -7.0, 0.0], actual, atol=1e-9)


def test_the_sum_is_exact_for_a_product() -> None:
    """A column of elements whose pattern is a product is the sum of its cuts in dB."""
    gains = formula_gains("M.2101", rows=8, columns=1, front_to_back_db=100.0, side_lobe_db=100.0)
    pattern, peak_db = cuts_of(gains, "sum")
    found = misfit(pattern, gains, peak_db)
    assert found.wide_worst_db < 0.2  # of straight lines between points half a degree apart
    assert abs(found.radiated_power_db) < 0.01


def test_projected_is_the_best_of_all() -> None:
    """The default has the least error of the three, near the beam, further out and in power."""
    rms = {}
    for way in INTERPOLATIONS:
        found = []
        for _, gains in known_patterns():
            pattern, peak_db = cuts_of(gains, way)
            figures = misfit(pattern, gains, peak_db)
            found.append((figures.near_rms_db, figures.wide_rms_db, figures.radiated_power_db))
        rms[way] = np.sqrt(np.mean(np.square(found), axis=0))
    for other in ("cross-weighted", "sum"):
        assert (rms["projected"] < rms[other]).all()
    assert (rms["projected"] < [0.45, 2.5, 0.3]).all()


@pytest.mark.parametrize("downtilt_deg", [3.0, 6.0, 10.0])
def test_steered_cuts_against_a_steered_array(downtilt_deg: float) -> None:
    """Cuts of an untilted array, tilted electrically, are near the array's own tilted pattern."""
    keys = {"rows": 12, "columns": 2, "row_spacing_wavelengths": 0.7}
    pattern, peak_db = cuts_of(formula_gains("M.2101", **keys), "projected")
    tilted = formula_gains("M.2101", downtilt_deg=downtilt_deg, **keys)
    azimuths = np.arange(-60.0, 61.0, 5.0)[np.newaxis, :]
    elevations = np.arange(-30.0, 31.0, 0.5)[:, np.newaxis]
    true_db = tilted(azimuths, elevations) - peak_db
    actual = pattern.gain(azimuths, elevations, electrical_downtilt_deg=downtilt_deg)
    near = true_db > -10.0
    assert np.abs(actual - true_db)[near].max() < 0.6


def test_the_table_of_the_page() -> None:
    """docs/models.md holds what the study finds, but for the last digit."""
    heading, _, *rows = study_table()
    assert heading in MODELS.splitlines()
    number = re.compile(r"[-+]?\d+\.?\d*")
    for row in rows:
        name = row.split("|")[1]
        [printed] = [
            line for line in MODELS.splitlines()
            if line.startswith(f"|{name}|") and line.split("|")[2] == row.split("|")[2]
        ]  # fmt: skip
        for cell, shown in zip(row.split("|")[3:-1], printed.split("|")[3:-1], strict=True):
            found = [float(text) for text in number.findall(cell)]
            expected = [float(text) for text in number.findall(shown)]
            tolerance = np.array([0.011, 0.11, 0.11, 1.1, 0.011])
            assert (np.abs(np.subtract(expected, found)) <= tolerance).all()
