"""The table of gains against the exact pattern."""

from dataclasses import replace

import numpy as np
import pytest
from benchmarks.known_patterns import array_gains, cuts_of
from numba import prange

from planner.antenna import (
    GainTable,
    Isotropic,
    Pattern,
    antenna_direction_deg,
    formula_pattern,
    gain_table,
    lookup,
    mounted_gain_dbi,
    two_cut_pattern,
)
from planner.antenna.interpolation import INTERPOLATIONS, Interpolation
from planner.antenna.lookup import (
    BINS_PER_DEG,
    BINS_PER_QUARTER,
    LENGTH_BITS,
    PLACE_STEPS_PER_NODE,
    GainArrays,
    table_gain_dbi,
)
from planner.physics._jit import parallel


def narrow_two_cut() -> Pattern:
    """A beam of 6 by 3 degrees with deep side lobes, points every degree."""

    def levels(angles_deg: np.ndarray, beamwidth_deg: float) -> np.ndarray:
        lobes = np.abs(np.sinc(0.886 * angles_deg / beamwidth_deg))
        return np.clip(20.0 * np.log10(lobes + 1e-9), -45.0, 0.0)

    around, upright = np.arange(-180.0, 180.0), np.arange(-90.0, 91.0)
    return two_cut_pattern(
        name="narrow",
        gain_dbi=30.0,
        horizontal_angle_deg=around,
        horizontal_level_db=levels(around, 6.0),
        vertical_angle_deg=upright,
        vertical_level_db=levels(upright, 3.0),
    )


def formula(name: str, **given: object) -> Pattern:
    beams = {"gain_dbi": 17.0, "azimuth_beamwidth_deg": 65.0, "elevation_beamwidth_deg": 7.0}
    return formula_pattern("panel", name, **({"frequency_mhz": 5600.0} | beams | given))


def of(name: str, **given: object) -> Pattern:
    return formula_pattern("panel", name, **({"frequency_mhz": 5600.0, "gain_dbi": 17.0} | given))


def sharp_nulls(way: Interpolation) -> Pattern:
    """Cuts of an array fed evenly, down to 100 dB in its nulls."""
    return replace(cuts_of(array_gains(8, 4, tapered=False), way)[0], name="narrow")


# Pattern and the largest step that the formula itself has, which no table can follow.
PATTERNS: dict[str, tuple[Pattern, float]] = {
    "TR 36.814": (formula("TR 36.814"), 0.0),
    "F.1336 average": (formula("F.1336-5", azimuth_beamwidth_deg=90.0), 0.33),
    "F.1336 peak": (formula("F.1336-5", side_lobes="peak"), 0.16),
    "F.1336 above 6 GHz": (formula("F.1336-5", frequency_mhz=24000.0), 0.0),
    "narrow two-cut": (narrow_two_cut(), 0.0),
    "isotropic": (Isotropic(name="whip", gain_dbi=2.15), 0.0),
    "TR 38.901": (formula_pattern("element", "TR 38.901", frequency_mhz=5600.0, gain_dbi=8.0), 0.0),
    "omnidirectional": (of("F.1336-5 omnidirectional", gain_dbi=10.0, side_lobes="peak"), 0.0),
    "omnidirectional average": (of("F.1336-5 omnidirectional", gain_dbi=10.0), 0.74),
    "F.699": (of("F.699", gain_dbi=28.0, diameter_m=0.6), 0.0),
    "F.1245": (of("F.1245", gain_dbi=28.0, diameter_m=0.6), 3.3),
    "column of 8": (of("M.2101", rows=8, columns=1, row_spacing_wavelengths=0.7), 0.0),
    "row of 4": (of("M.2101", rows=1, columns=4), 0.0),
    "array of 8 by 8": (
        of("M.2101", gain_dbi=26.0, rows=8, columns=8, beam_azimuth_offset_deg=15.0), 0.0,
    ),
    **{f"sharp nulls, {way}": (sharp_nulls(way), 0.0) for way in INTERPOLATIONS},
}  # fmt: skip
TILTS_DEG = ((0.0, 0.0), (0.0, 4.0), (2.0, 0.0), (10.0, -3.0))
AZIMUTH_DEG = 20.3


@parallel
def table_gains(
    arrays: GainArrays, azimuth_deg: np.ndarray, elevation_deg: np.ndarray
) -> np.ndarray:
    gains = np.empty(azimuth_deg.size)
    for index in prange(azimuth_deg.size):
        gains[index] = table_gain_dbi(arrays, azimuth_deg[index], elevation_deg[index])
    return gains


def looked_up(table: GainTable, azimuth_deg: np.ndarray, elevation_deg: np.ndarray) -> np.ndarray:
    offset = np.broadcast_to(azimuth_deg, np.shape(elevation_deg)) - table.azimuth_deg
    return table_gains(table.arrays, offset, np.asarray(elevation_deg, dtype=float))


def directions(number: int) -> tuple[np.ndarray, np.ndarray]:
    """Random directions down to 60 degrees, most of them near the horizon as cells are."""
    rng = np.random.default_rng(11)
    near, far = rng.normal(-2.0, 6.0, number), rng.uniform(-60.0, 60.0, number)
    elevations = np.where(rng.random(number) < 0.7, near, far)
    return rng.uniform(0.0, 360.0, number), np.clip(elevations, -60.0, 60.0)


CASES = [
    pytest.param(pattern, step_db, *tilts, id=f"{name}, {tilts}")
    for name, (pattern, step_db) in PATTERNS.items()
    for tilts in TILTS_DEG
    if pattern.tilts_electrically or tilts[1] == 0.0
]


@pytest.mark.parametrize(("pattern", "step_db", "mechanical", "electrical"), CASES)
def test_table_is_within_a_twentieth_of_a_db(
    pattern: Pattern, step_db: float, mechanical: float, electrical: float
) -> None:
    """Within 30 dB of the peak the table keeps to 0.05 dB, but for the formulas' own steps."""
    tilts = {"mechanical_downtilt_deg": mechanical, "electrical_downtilt_deg": electrical}
    azimuths, elevations = directions(200_000)
    rng = np.random.default_rng(12)
    beam = AZIMUTH_DEG + rng.normal(0.0, min(pattern.azimuth_beamwidth_deg, 60.0), 50_000)
    height = rng.normal(-mechanical - electrical, pattern.elevation_beamwidth_deg, 50_000)
    azimuths = np.append(azimuths, beam)
    elevations = np.append(elevations, np.clip(height, -60.0, 60.0))
    exact = mounted_gain_dbi(
        pattern,
        true_azimuth_deg=azimuths,
        elevation_deg=elevations,
        azimuth_deg=AZIMUTH_DEG,
        **tilts,
    )
    table = gain_table(pattern, azimuth_deg=AZIMUTH_DEG, **tilts)
    error = np.abs(looked_up(table, azimuths, elevations) - exact)[exact > pattern.gain_dbi - 30.0]
    assert error.size > 10_000
    assert error.max() <= 0.05 + step_db
    assert np.mean(error > 0.05) <= (0.005 if step_db else 0.0)


def zigzag() -> Pattern:
    """Up and down by 6 dB from degree to degree of elevation."""
    upright = np.arange(-90.0, 91.0, 1.0)
    levels = np.where(np.abs(upright) < 10.0, 0.0, -10.0 - 6.0 * (np.arange(upright.size) % 2))
    return two_cut_pattern(
        name="zigzag",
        gain_dbi=10.0,
        horizontal_angle_deg=np.arange(-180.0, 180.0, 30.0),
        horizontal_level_db=np.zeros(12),
        vertical_angle_deg=upright,
        vertical_level_db=levels,
    )


def test_corners_high_above_the_horizon() -> None:
    """Points of a vertical cut near the zenith are met, where a bin of the table is steepest."""
    pattern = zigzag()
    rng = np.random.default_rng(2)
    azimuths, elevations = rng.uniform(0.0, 360.0, 40_000), rng.uniform(60.0, 80.0, 40_000)
    table = gain_table(pattern, azimuth_deg=0.0)
    error = np.abs(looked_up(table, azimuths, elevations) - pattern.gain(azimuths, elevations))
    assert error.max() <= 0.05


def test_a_table_that_would_be_too_large_does_without_nodes_at_corners(
    monkeypatch: pytest.MonkeyPatch,
) -> None:
    """Beyond the limit no node lies halfway between two multiples of 1/32 degree."""

    def halfway() -> bool:
        nodes = np.concatenate(lookup._nodes(zigzag(), 0.0)) * BINS_PER_DEG
        return bool((nodes != np.round(nodes)).any())

    assert halfway()
    monkeypatch.setattr(lookup, "MOST_NODES", 1_000)
    assert not halfway()
    monkeypatch.undo()
    monkeypatch.setattr(lookup, "MOST_IN_A_ROW", 100)
    assert not halfway()


@pytest.mark.parametrize("tilt_deg", [0.0, 5.0])
def test_steep_directions(tilt_deg: float) -> None:
    """Up to 1.5 degrees from the antenna's own nadir the table holds, tilted or not."""
    around = np.arange(-180.0, 180.0, 10.0)
    pattern = two_cut_pattern(
        name="star",
        gain_dbi=10.0,
        horizontal_angle_deg=around,
        horizontal_level_db=-10.0 * np.abs(np.sin(np.radians(2.5 * around))) ** 2,
        vertical_angle_deg=np.arange(-90.0, 91.0, 30.0),
        vertical_level_db=np.zeros(7),
    )
    rng = np.random.default_rng(2)
    azimuths, elevations = rng.uniform(0.0, 360.0, 40_000), rng.uniform(-90.0, -50.0, 40_000)
    seen = antenna_direction_deg(
        azimuths - AZIMUTH_DEG, elevations, mechanical_downtilt_deg=tilt_deg
    )
    exact = mounted_gain_dbi(
        pattern,
        true_azimuth_deg=azimuths,
        elevation_deg=elevations,
        azimuth_deg=AZIMUTH_DEG,
        mechanical_downtilt_deg=tilt_deg,
        electrical_downtilt_deg=0.0,
    )
    table = gain_table(pattern, azimuth_deg=AZIMUTH_DEG, mechanical_downtilt_deg=tilt_deg)
    error = np.abs(looked_up(table, azimuths, elevations) - exact)
    assert error[seen[1] > -88.5].max() <= 0.05


def test_no_seam_at_north_and_whole_turns() -> None:
    """Across 0 and 360 degrees the gain runs on, and whole turns change nothing."""
    pattern, _ = PATTERNS["F.1336 average"]
    for azimuth_deg, tilt_deg in ((0.0, 0.0), (0.0, 3.0), (350.0, 3.0), (180.0, 3.0)):
        table = gain_table(pattern, azimuth_deg=azimuth_deg, mechanical_downtilt_deg=tilt_deg)
        azimuths = np.array([359.999999, 360.0, 0.0, 1e-6, -1e-6, 720.0])
        actual = looked_up(table, azimuths, np.full(6, -3.0))
        np.testing.assert_allclose(actual, actual[1], rtol=0, atol=1e-5)
        around = np.linspace(0.0, 359.0, 57)
        once = looked_up(table, around, np.full(57, -3.0))
        np.testing.assert_allclose(
            once, looked_up(table, around + 360.0, np.full(57, -3.0)), atol=1e-9
        )


def test_turning_needs_no_new_table() -> None:
    """A table turned by ``replace`` is the table of the turned antenna."""
    pattern, _ = PATTERNS["TR 36.814"]
    north = gain_table(pattern, azimuth_deg=0.0, mechanical_downtilt_deg=4.0)
    east = gain_table(pattern, azimuth_deg=90.0, mechanical_downtilt_deg=4.0)
    azimuths, elevations = directions(1000)
    turned = replace(north, azimuth_deg=90.0)
    np.testing.assert_array_equal(
        looked_up(east, azimuths, elevations), looked_up(turned, azimuths, elevations)
    )


def test_nan_and_directions_that_do_not_exist() -> None:
    """NaN, infinity and elevations beyond 90 degrees give NaN; the ends themselves do not."""
    pattern, _ = PATTERNS["TR 36.814"]
    for tilt_deg in (0.0, 3.0):
        table = gain_table(pattern, azimuth_deg=0.0, mechanical_downtilt_deg=tilt_deg)
        azimuths = np.array([np.nan, 0.0, np.inf, 0.0, 0.0, 0.0])
        elevations = np.array([0.0, np.nan, 0.0, 90.0001, 90.0, -90.0])
        actual = looked_up(table, azimuths, elevations)
        assert np.isnan(actual).tolist() == [True, True, True, True, False, False]


def test_table_is_read_only_and_whole() -> None:
    """The arrays cannot be changed, and the places run from the first node to the last."""
    arrays = gain_table(PATTERNS["TR 36.814"][0], azimuth_deg=0.0).arrays
    rows, cols = arrays.levels.shape
    for places, bins, last_node in (
        (arrays.azimuth_places, 4 * BINS_PER_QUARTER, cols - 2),
        (arrays.elevation_places, 2 * BINS_PER_QUARTER, rows - 2),
    ):
        assert places.shape == (bins + 1,)
        assert places[0] >> LENGTH_BITS == 0
        assert places[-1] == last_node * PLACE_STEPS_PER_NODE << LENGTH_BITS
    assert (arrays.levels >> 16).min() == 0
    for array in arrays[:3]:
        with pytest.raises(ValueError, match="read-only"):
            array[0] = 0


def test_plain_and_compiled_agree() -> None:
    """The look-up gives the same compiled and as plain Python."""
    for tilt_deg in (0.0, 6.0):
        arrays = gain_table(
            PATTERNS["F.1336 average"][0], azimuth_deg=0.0, mechanical_downtilt_deg=tilt_deg
        ).arrays
        for azimuth, elevation in ((0.0, 0.0), (-91.3, -4.4), (359.99, 89.0), (12.0, -75.0)):
            plain = table_gain_dbi.py_func(arrays, azimuth, elevation)
            assert float(plain) == pytest.approx(
                table_gain_dbi(arrays, azimuth, elevation), abs=1e-5
            )
