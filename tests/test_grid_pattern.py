"""A pattern over the whole sphere on a grid: interpolation, seam, poles, tilt, faults."""

from itertools import pairwise

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from planner.antenna import GridPattern, gain_table, grid_pattern
from planner.antenna.lookup import table_gain_dbi
from planner.errors import PatternError

AZIMUTHS = np.arange(-180.0, 180.0, 10.0)
ELEVATIONS = np.arange(-90.0, 91.0, 5.0)


def beam_db(azimuth: np.ndarray, elevation: np.ndarray) -> np.ndarray:
    """Round on the sphere: 12 dB down for each unit that the cosine off the boresight falls."""
    cosine = np.cos(np.radians(azimuth)) * np.cos(np.radians(elevation))
    return np.asarray(12.0 * (cosine - 1.0))


LEVELS = beam_db(AZIMUTHS[np.newaxis, :], ELEVATIONS[:, np.newaxis])


def beam(**changed: object) -> GridPattern:
    values: dict[str, object] = {
        "azimuth_deg": AZIMUTHS, "elevation_deg": ELEVATIONS, "level_db": LEVELS,
    }  # fmt: skip
    return grid_pattern(name="dish", gain_dbi=8.0, **{**values, **changed})  # type: ignore[arg-type]


def told(**changed: object) -> list[str]:
    with pytest.raises(PatternError) as caught:
        beam(**changed)
    return [str(problem) for problem in caught.value.problems]


def test_every_node_comes_back() -> None:
    """At its nodes the pattern has the levels that it was given, whatever their order."""
    rng = np.random.default_rng(4)
    columns, rows = rng.permutation(AZIMUTHS.size), rng.permutation(ELEVATIONS.size)
    for azimuths in (AZIMUTHS, np.mod(AZIMUTHS, 360.0)):
        pattern = beam(
            azimuth_deg=azimuths[columns],
            elevation_deg=ELEVATIONS[rows],
            level_db=LEVELS[np.ix_(rows, columns)],
        )
        got = pattern.gain(AZIMUTHS[np.newaxis, :], ELEVATIONS[:, np.newaxis])
        np.testing.assert_allclose(got, 8.0 + LEVELS, rtol=0.0, atol=1e-12)
        assert pattern.notes == ()


def test_between_the_nodes_it_is_linear_in_db() -> None:
    """Halfway between four nodes stands their mean in dB."""
    pattern = beam()
    for left, right in pairwise([*AZIMUTHS, 180.0]):
        corners = beam_db(np.array([[left, right]]), np.array([[10.0], [15.0]]))
        expected = 8.0 + corners.mean()
        assert float(pattern.gain(0.5 * (left + right), 12.5)) == pytest.approx(expected, abs=1e-12)


@given(
    azimuth=st.floats(-1000.0, 1000.0), elevation=st.floats(-90.0, 90.0), turns=st.integers(-3, 3)
)
def test_no_seam(azimuth: float, elevation: float, turns: int) -> None:
    """Full turns change nothing, and the level is within a step's bend of the formula anywhere."""
    pattern = beam()
    gain = float(pattern.gain(azimuth, elevation))
    assert gain == pytest.approx(float(pattern.gain(azimuth + 360.0 * turns, elevation)), abs=1e-7)
    exact = 8.0 + float(beam_db(np.array(azimuth), np.array(elevation)))
    # straight lines leave a curve by an eighth of its second derivative and the step squared
    bend = 12.0 / 8.0 * (np.radians(10.0) ** 2 + np.radians(5.0) ** 2)
    assert abs(gain - exact) <= bend


def test_one_value_at_the_poles() -> None:
    """Levels that differ around a pole are one direction's: their mean power, with a note."""
    levels = LEVELS.copy()
    levels[-1] = np.where(AZIMUTHS < 0.0, -10.0, -20.0)
    pattern = beam(level_db=levels)
    mean_db = 10.0 * np.log10((0.1 + 0.01) / 2.0)
    at_zenith = pattern.gain(np.linspace(-180.0, 180.0, 50), 90.0)
    np.testing.assert_allclose(at_zenith, 8.0 + mean_db, rtol=0.0, atol=1e-12)
    assert pattern.notes == (
        "Levels at the zenith from -20 to -10 dB were replaced by their mean power, -12.60 dB: it "
        "is one direction.",
    )
    tilted = pattern.gain(
        np.linspace(-180.0, 180.0, 50), [[90.0], [-90.0]], electrical_downtilt_deg=20.0
    )
    np.testing.assert_allclose(tilted, tilted[:, :1] + np.zeros(50), rtol=0.0, atol=1e-12)


def test_poles_without_points() -> None:
    """A grid of cell centres ends half a step off the poles; these get the nearest ring's power."""
    centres = np.arange(-87.5, 90.0, 5.0)
    levels = beam_db(AZIMUTHS[np.newaxis, :], centres[:, np.newaxis])
    pattern = beam(elevation_deg=centres, level_db=np.minimum(levels - levels.max(), 0.0))
    ring = 10.0 ** ((levels[-1] - levels.max()) / 10.0)
    expected = 8.0 + 10.0 * np.log10(ring.mean())
    assert float(pattern.gain(123.0, 90.0)) == pytest.approx(expected, abs=1e-12)
    assert float(pattern.gain(-45.0, -90.0)) == pytest.approx(expected, abs=1e-12)
    assert len(pattern.notes) == 2
    assert pattern.notes[0].startswith("The nadir has no point: its level is the mean power at")


def test_what_is_no_direction_is_nan() -> None:
    """NaN, infinity and elevations beyond the poles give NaN, each in its place only."""
    gain = beam().gain([0.0, np.nan, np.inf, 0.0, 0.0], [0.0, 0.0, 0.0, 91.0, np.nan])
    assert list(np.isnan(gain)) == [False, True, True, True, True]
    tilted = beam().gain([0.0, np.nan], [np.nan, 0.0], electrical_downtilt_deg=5.0)
    assert np.isnan(tilted).all()


@pytest.mark.parametrize("tilt", [-45.0, -10.0, 7.5, 45.0])
def test_electrical_tilt_moves_the_beam_down_all_around(tilt: float) -> None:
    """Up to 45 degrees off the horizon the pattern is that of an elevation higher by the tilt."""
    pattern = beam()
    elevations = np.linspace(-45.0, 45.0, 31)[:, np.newaxis]
    azimuths = np.linspace(-180.0, 180.0, 37)[np.newaxis, :]
    moved = pattern.gain(azimuths, elevations, electrical_downtilt_deg=tilt)
    np.testing.assert_allclose(
        moved, pattern.gain(azimuths, elevations + tilt), rtol=0.0, atol=1e-9
    )
    peak = pattern.gain(0.0, np.linspace(-90, 90, 1801), electrical_downtilt_deg=tilt).argmax()
    assert -90.0 + 0.1 * peak == pytest.approx(-tilt)


def test_beamwidths_are_measured() -> None:
    """The widths between the 3 dB points of the cuts through the peak."""
    pattern = beam()
    # 12 (cos a - 1) = -3 at 41.41 degrees; straight lines between nodes move it a little
    exact_deg = 2.0 * np.degrees(np.arccos(0.75))
    assert pattern.azimuth_beamwidth_deg == pytest.approx(exact_deg, abs=0.6)
    assert pattern.elevation_beamwidth_deg == pytest.approx(exact_deg, abs=0.2)


def test_the_gain_table_holds() -> None:
    """Layers take the gain from a table; it follows the grid as it follows a formula."""
    pattern = beam()
    table = gain_table(pattern, azimuth_deg=0.0)
    rng = np.random.default_rng(7)
    for azimuth, elevation in zip(
        rng.uniform(-180, 180, 300), rng.uniform(-85, 85, 300), strict=True
    ):
        expected = float(pattern.gain(azimuth, elevation))
        assert table_gain_dbi(table.arrays, azimuth, elevation) == pytest.approx(expected, abs=0.05)


def test_faults_are_told() -> None:
    """What is no sphere is refused, with every problem."""
    assert told(azimuth_deg=[0.0]) == [
        "antenna.dish: grid: found 1 azimuths and 37 elevations; allowed: a whole sphere"
    ]
    assert told(level_db=LEVELS.T) == [
        "antenna.dish: grid: found levels of shape (36, 37); allowed: 37 elevations by 36 azimuths"
    ]
    assert told(level_db=LEVELS + 1.0)[0].startswith("antenna.dish: grid: found 37 levels out of")
    assert told(level_db=LEVELS - 2.0) == [
        "antenna.dish: grid: found highest level -2 dB; allowed: 0 dB at the peak. Subtract the "
        "highest level from every level"
    ]
    half = AZIMUTHS < 0.0
    assert told(azimuth_deg=AZIMUTHS[half], level_db=LEVELS[:, half] - LEVELS[:, half].max()) == [
        "antenna.dish: grid: found azimuths from -180 to -10 deg; allowed: the whole circle"
    ]
    low = ELEVATIONS <= 30.0
    assert told(elevation_deg=ELEVATIONS[low], level_db=LEVELS[low]) == [
        "antenna.dish: grid: found elevations from -90 to 30 deg; allowed: -90 to 90 deg"
    ]
    assert told(elevation_deg=np.concatenate((ELEVATIONS[:-1], [95.0]))) == [
        "antenna.dish: grid: found elevation 95 deg; allowed: -90 to 90 deg"
    ]
    azimuths = np.concatenate((AZIMUTHS[:-1], [180.0]))
    assert told(azimuth_deg=azimuths) == [
        "antenna.dish: grid: found two different columns at azimuth -180 deg; allowed: each "
        "direction once"
    ]
    assert told(level_db=np.where(LEVELS == 0.0, np.nan, LEVELS))[0].startswith(
        "antenna.dish: grid: found 1 levels out of range, first nan dB at azimuth 0, elevation 0"
    )


def test_arrays_cannot_be_changed() -> None:
    """A pattern is frozen, its arrays too, and the caller's own stay as they are."""
    levels = LEVELS.copy()
    pattern = beam(level_db=levels)
    with pytest.raises(ValueError, match="read-only"):
        pattern.level_db[0, 0] = 0.0
    levels[:] = -1.0
    assert float(pattern.gain(0.0, 0.0)) == 8.0
