"""Patterns put together from a horizontal and a vertical cut."""

import math

import numpy as np
import pytest

from planner.antenna import TwoCutPattern, gain_table, half_power_edges_deg, two_cut_pattern
from planner.antenna.two_cut import REAR_NOTE
from planner.errors import PatternError

# An invented antenna: points every 10 degrees, left and right different, a built-in beam tilt.
HORIZONTAL = {
    -180: -30.0, -150: -28.0, -120: -25.0, -90: -15.0, -60: -6.0, -30: -1.0, 0: 0.0, 30: -2.0,
    60: -8.0, 90: -16.0, 120: -26.0, 150: -27.0,
}  # fmt: skip
VERTICAL = {
    -90: -30.0, -60: -28.0, -30: -20.0, -10: -12.0, -2: 0.0, 2: -2.0, 10: -14.0, 30: -20.0,
    60: -26.0, 90: -30.0,
}  # fmt: skip


def lopsided(**changed: object) -> TwoCutPattern:
    given: dict[str, object] = {
        "name": "lopsided",
        "gain_dbi": 15.0,
        "horizontal_angle_deg": list(HORIZONTAL.keys()),
        "horizontal_level_db": list(HORIZONTAL.values()),
        "vertical_angle_deg": list(VERTICAL.keys()),
        "vertical_level_db": list(VERTICAL.values()),
    }
    return two_cut_pattern(**(given | changed))


def problems(**changed: object) -> list[str]:
    with pytest.raises(PatternError) as caught:
        lopsided(**changed)
    return [str(problem) for problem in caught.value.problems]


def test_points_of_both_cuts_come_back() -> None:
    """In each cut through the peak the pattern gives the file's own levels."""
    for angle, level in HORIZONTAL.items():
        assert 15.0 + level == float(lopsided().gain(angle, -2.0))
    for angle, level in VERTICAL.items():
        assert 15.0 + level == float(lopsided().gain(0.0, angle))


def test_off_the_cuts_levels_are_added_if_wanted() -> None:
    """With "sum" the levels of both cuts are summed, in dB."""
    assert float(lopsided(interpolation="sum").gain(60.0, 10.0)) == 15.0 - 8.0 - 14.0


def test_interpolation_is_linear_in_db() -> None:
    """Half way between two points the level is the mean of theirs in dB."""
    assert float(lopsided().gain(45.0, -2.0)) == pytest.approx(15.0 - 5.0)
    assert float(lopsided().gain(-15.0, -2.0)) == pytest.approx(15.0 - 0.5)
    assert float(lopsided().gain(0.0, 6.0)) == pytest.approx(15.0 - 8.0)


def test_no_seam_behind() -> None:
    """Between 150 and -180 the cut is interpolated like anywhere else."""
    assert float(lopsided().gain(165.0, -2.0)) == pytest.approx(15.0 - 28.5)
    around = lopsided().gain(np.array([180.0, -180.0, 540.0]), -2.0)
    np.testing.assert_allclose(15.0 - 30.0, around)
    near = lopsided().gain(np.array([180.0 - 1e-7, 180.0 + 1e-7]), -2.0)
    assert near[0] == pytest.approx(near[1], abs=1e-6)


def test_no_seam_where_the_file_has_no_point_behind() -> None:
    """Between the last point before 180 degrees and the first after it the line is straight."""
    angles = np.arange(-170.0, 180.0, 20.0)
    levels = np.where(np.abs(angles) < 15.0, 0.0, -20.0)
    levels[0], levels[-1] = -30.0, -26.0
    pattern = lopsided(horizontal_angle_deg=angles, horizontal_level_db=levels)
    for azimuth, expected in ((170.0, -26.0), (175.0, -27.0), (180.0, -28.0), (-175.0, -29.0)):
        assert float(pattern.gain(azimuth, -2.0)) == pytest.approx(15.0 + expected)
        assert float(pattern.gain(azimuth + 360.0, -2.0)) == pytest.approx(15.0 + expected)


def test_edges_of_a_beam_off_the_boresight() -> None:
    """The half-power edges lie about the peak, wherever it points."""
    angles = np.arange(-180.0, 180.0, 10.0)
    levels = -0.1 * np.abs(angles - 40.0)
    pattern = lopsided(horizontal_angle_deg=angles, horizontal_level_db=levels)
    assert half_power_edges_deg(pattern) == pytest.approx((10.0, 70.0), abs=1e-6)
    assert pattern.azimuth_beamwidth_deg == pytest.approx(60.0)


def test_order_and_way_of_counting_do_not_matter() -> None:
    """0 to 360 in any order, with 360 repeating 0, is the same antenna as -180 to 180."""
    angles = np.array([*HORIZONTAL.keys(), 180])
    levels = np.array([*HORIZONTAL.values(), -30.0])
    counted = np.append(np.where(angles < 0, angles + 360, angles), 360)
    shuffled = np.random.default_rng(3).permutation(counted.size)
    same = lopsided(
        horizontal_angle_deg=counted[shuffled],
        horizontal_level_db=np.append(levels, 0.0)[shuffled],
    )
    azimuths = np.linspace(-200.0, 400.0, 601)
    np.testing.assert_allclose(lopsided().gain(azimuths, 0.0), same.gain(azimuths, 0.0), rtol=1e-12)


def test_beamwidths_are_measured() -> None:
    """The 3 dB points are found on the straight lines between the points."""
    pattern = lopsided()
    right = 30.0 + 30.0 * 1.0 / 6.0  # -2 at 30, -8 at 60
    left = 30.0 + 30.0 * 2.0 / 5.0  # -1 at -30, -6 at -60
    assert left + right == pytest.approx(pattern.azimuth_beamwidth_deg)
    assert half_power_edges_deg(pattern) == pytest.approx((-left, right), abs=1e-6)
    below = 8.0 * 3.0 / 12.0  # 0 at -2, -12 at -10
    above = 4.0 + 8.0 * 1.0 / 12.0  # -2 at 2, -14 at 10
    assert below + above == pytest.approx(pattern.elevation_beamwidth_deg)


def test_omnidirectional_cut() -> None:
    """A horizontal cut without a fall of 3 dB is as wide as the circle."""
    pattern = lopsided(horizontal_level_db=[0.0] * len(HORIZONTAL))
    assert pattern.azimuth_beamwidth_deg == 360.0
    assert half_power_edges_deg(pattern) == (-180.0, 180.0)


def test_beam_across_the_seam() -> None:
    """A cut whose peak lies at 180 degrees has its beamwidth measured across the seam."""
    angles = np.arange(-180.0, 180.0, 10.0)
    pattern = lopsided(
        horizontal_angle_deg=angles,
        horizontal_level_db=-3.0 * (180.0 - np.abs(angles)) / 30.0,
    )
    assert pattern.azimuth_beamwidth_deg == pytest.approx(60.0)


def test_electrical_tilt_shifts_the_vertical_cut() -> None:
    """3 degrees of electrical downtilt move the vertical cut 3 degrees down, at all azimuths.

    From 45 degrees off the horizon the shift fades.
    """
    azimuths, elevations = np.meshgrid(np.arange(-180.0, 180.0, 20.0), np.arange(-42.0, 48.0, 0.7))
    expected = lopsided().gain(azimuths, elevations)
    actual = lopsided().gain(azimuths, elevations - 3.0, electrical_downtilt_deg=3.0)
    np.testing.assert_allclose(expected, actual, rtol=0, atol=1e-12)


@pytest.mark.parametrize("tilt_deg", [-45.0, -10.0, 6.0, 45.0])
def test_steering_keeps_the_poles_and_the_order(tilt_deg: float) -> None:
    """Straight up and down stay where they are, and no elevation overtakes another."""
    for elevation in (-90.0, 90.0):
        tilted = lopsided().gain(50.0, elevation, electrical_downtilt_deg=tilt_deg)
        assert float(lopsided().gain(50.0, elevation)) == pytest.approx(float(tilted))
    rising = {-90: -90.0, -60: -60.0, -30: -30.0, 0: 0.0, 30: 0.0, 60: 0.0, 90: 0.0}
    elevations = np.linspace(-90.0, 90.0, 721)
    ramp = lopsided(vertical_angle_deg=list(rising), vertical_level_db=list(rising.values()))
    assert (np.diff(ramp.gain(0.0, elevations, electrical_downtilt_deg=tilt_deg)) > -1e-12).all()


def test_a_tilt_that_the_cuts_carry_is_not_applied_again() -> None:
    """The tilt asked for is the whole tilt; only what the cuts lack is steered."""
    elevations = np.arange(-40.0, 40.0, 0.7)
    carrying = lopsided(electrical_downtilt_deg=4.0)
    as_it_is = lopsided().gain(10.0, elevations)
    np.testing.assert_array_equal(as_it_is, carrying.gain(10.0, elevations))
    same = carrying.gain(10.0, elevations, electrical_downtilt_deg=4.0)
    np.testing.assert_array_equal(as_it_is, same)
    two_more = carrying.gain(10.0, elevations - 2.0, electrical_downtilt_deg=6.0)
    np.testing.assert_allclose(as_it_is, two_more, rtol=0, atol=1e-12)
    with pytest.raises(PatternError) as caught:
        lopsided(electrical_downtilt_deg=-10.0).gain(0.0, 0.0, electrical_downtilt_deg=40.0)
    assert str(caught.value) == (
        "electrical_downtilt_deg: found 40; allowed: at most 45 deg from the -10 deg that antenna "
        "lopsided carries already"
    )


def test_table_and_edges_take_a_carried_tilt_once() -> None:
    """Gain table and half-power edges treat a carried tilt as the pattern does."""
    carrying = lopsided(electrical_downtilt_deg=4.0)
    table = gain_table(carrying, azimuth_deg=0.0)
    assert table.electrical_downtilt_deg == 4.0
    expected = gain_table(lopsided(), azimuth_deg=0.0).arrays
    np.testing.assert_array_equal(expected.levels, table.arrays.levels)
    assert half_power_edges_deg(lopsided()) == half_power_edges_deg(carrying)


def test_the_half_behind_the_antenna() -> None:
    """The file's own points behind count; without them the half is made up, which is noted."""
    whole = {
        **VERTICAL, 120: -20.0, 150: -25.0, 180: -30.0, -178: -30.0, -120: -27.0, -150: -26.0,
    }  # fmt: skip
    around = lopsided(vertical_angle_deg=list(whole.keys()), vertical_level_db=list(whole.values()))
    assert around.notes == ()
    assert around.elevation_beamwidth_deg == lopsided().elevation_beamwidth_deg
    for angle, level in ((120, -20.0), (150, -25.0), (-120, -27.0)):
        behind = float(around.gain(180.0, math.copysign(180.0, angle) - angle))
        assert behind == pytest.approx(15.0 + level)
    assert lopsided().notes == (REAR_NOTE,)
    for elevation in (-50.0, -10.0, 0.0, 30.0, 80.0):
        assert float(lopsided().gain(180.0, elevation)) == pytest.approx(15.0 - 30.0, abs=0.1)


def test_an_omnidirectional_antenna_is_alike_all_around() -> None:
    """Without a half behind, the front's half stands for it as far as the antenna is as strong."""
    pattern = lopsided(horizontal_level_db=[0.0] * len(HORIZONTAL))
    elevations = np.arange(-90.0, 91.0, 2.0)
    ahead = pattern.gain(0.0, elevations)
    for azimuth in (-150.0, 40.0, 90.0, 180.0):
        np.testing.assert_allclose(ahead, pattern.gain(azimuth, elevations), rtol=0, atol=1e-9)


def test_kind_and_wrong_words() -> None:
    """Two cuts are measured unless they say otherwise; unknown words and tilts are refused."""
    assert lopsided().kind == "measured"
    assert lopsided(kind="envelope").kind == "envelope"
    assert problems(interpolation="cubic", kind="guess", electrical_downtilt_deg=50.0) == [
        "antenna.lopsided.electrical_downtilt_deg: found 50; allowed: -45 to 45 deg, positive "
        "downwards",
        'antenna.lopsided.interpolation: found \'cubic\'; allowed: "projected", "cross-weighted", '
        '"sum"',
        'antenna.lopsided.kind: found \'guess\'; allowed: "envelope", "model", "measured"',
    ]


def test_nan_gives_nan() -> None:
    """NaN in an angle gives NaN there only; zenith and nadir are fine."""
    actual = lopsided().gain(np.array([np.nan, 0.0, 0.0, 50.0]), np.array([0.0, np.nan, 90, -90]))
    assert np.isnan(actual).tolist() == [True, True, False, False]


def test_arrays_cannot_be_changed() -> None:
    """The arrays that a pattern holds are read-only, and apart from what was handed in."""
    levels = np.array(list(HORIZONTAL.values()))
    pattern = lopsided(horizontal_level_db=levels)
    levels[6] = -9.0
    assert float(pattern.gain(0.0, -2.0)) == 15.0
    with pytest.raises(ValueError, match="read-only"):
        pattern.vertical_level_db[0] = 0.0


def test_a_peak_between_the_points_is_raised_and_noted() -> None:
    """A cut that misses its peak by up to 0.5 dB is raised to 0 dB, and the notes say so."""
    levels = np.array(list(VERTICAL.values())) - 0.2
    pattern = lopsided(vertical_level_db=levels)
    assert float(pattern.gain(0.0, -2.0)) == pytest.approx(15.0)
    raised = "The vertical cut's highest level, -0.2 dB, was raised to 0 dB."
    assert pattern.notes == (raised, REAR_NOTE)


def test_levels_that_are_not_relative() -> None:
    """Levels above 0 dB or all far below it are not relative to the cut's peak."""
    levels = np.array(list(VERTICAL.values()))
    assert problems(vertical_level_db=levels - 12.0) == [
        "antenna.lopsided: vertical cut: found highest level -12 dB; allowed: 0 dB at the peak of "
        "the cut. Subtract the highest level from every level of this cut"
    ]
    assert problems(vertical_level_db=levels + 1.0) == [
        "antenna.lopsided: vertical cut: found level 1 dB at -2 deg; allowed: -200 to 0 dB, "
        "relative to the peak"
    ]


def test_everything_wrong_is_told_at_once() -> None:
    """Both cuts and the gain are checked before anything is refused."""
    assert problems(
        gain_dbi=float("nan"),
        horizontal_angle_deg=[-90.0, -60.0, -30.0, 0.0, 30.0, 60.0, 90.0],
        horizontal_level_db=[-20.0, -10.0, -2.0, 0.0, -2.0, -10.0, -20.0],
        vertical_level_db=[float("nan")] * 9 + [-3.0],
    ) == [
        "antenna.lopsided.gain_dbi: found nan; allowed: -20 to 60 dBi",
        "antenna.lopsided: horizontal cut: found angles from -90 to 90 deg; allowed: the whole "
        "circle. Give both sides of the antenna",
    ] + [
        f"antenna.lopsided: vertical cut: found level nan dB at {angle} deg; allowed: -200 to 0 "
        "dB, relative to the peak"
        for angle in list(VERTICAL)[:-1]
    ]


def test_angles_that_do_not_fit() -> None:
    """Angles outside the circle, mixed ways of counting, gaps and doubles are each told."""
    assert problems(horizontal_angle_deg=[400.0, *list(HORIZONTAL)[1:]]) == [
        "antenna.lopsided: horizontal cut: found angle 400 deg; allowed: -180 to 180 or 0 to 360"
    ]
    assert problems(horizontal_angle_deg=[*list(HORIZONTAL)[:-1], 210.0]) == [
        "antenna.lopsided: horizontal cut: found angles from -180 to 210 deg; allowed: -180 to 180 "
        "or 0 to 360"
    ]
    assert problems(horizontal_angle_deg=[*list(HORIZONTAL)[:-1], 120.0]) == [
        "antenna.lopsided: horizontal cut: found -26 and -27 dB at 120 deg; allowed: one level for "
        "each direction",
        "antenna.lopsided: horizontal cut: found angles from -180 to 120 deg; allowed: the whole "
        "circle. Give both sides of the antenna",
    ]
    assert problems(vertical_angle_deg=[-90, -80, -75, -72, -70, -65, 10, 30, 60, 90]) == [
        "antenna.lopsided: vertical cut: found no point between -65 and 10 deg; allowed: gaps of "
        "30 deg at most"
    ]
    assert problems(vertical_angle_deg=[-80, -60, -30, -10, -2, 2, 10, 30, 60, 80]) == [
        "antenna.lopsided: vertical cut: found angles from -80 to 80 deg; allowed: at least -90 to "
        "90 deg, positive upwards"
    ]


def test_lengths_that_differ_and_empty_cuts() -> None:
    """As many levels as angles, and at least one of each."""
    assert problems(horizontal_level_db=[0.0]) == [
        "antenna.lopsided: horizontal cut: found 12 angles and 1 levels; allowed: as many levels "
        "as angles"
    ]
    assert problems(vertical_angle_deg=[], vertical_level_db=[]) == [
        "antenna.lopsided: vertical cut: found no points; allowed: a whole cut"
    ]
