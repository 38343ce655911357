"""Dishes, arrays, elements and omnidirectional antennas against tables and closed forms."""

import math

import numpy as np
import pytest

from planner.antenna import Dish, F1336Omnidirectional, M2101Array, Pattern, Tr38901Element
from planner.antenna.dish import f699_gain_dbi_scalar, f1245_gain_dbi_scalar, off_axis_deg_scalar
from planner.antenna.f1336_omni import omnidirectional_relative_gain_db_scalar
from planner.antenna.m2101 import line_relative_gain_db_scalar
from planner.errors import PatternError

# ITU-R F.699 for D / lambda above 100, compared with pycraf 2.1.0 (which states F.699-7): frequency
# in MHz, diameter, peak gain, gain at 0.5, 1, 2, 3, 5, 10, 20, 45, 60 and 120 degrees.
F699_ANGLES_DEG = (0.5, 1.0, 2.0, 3.0, 5.0, 10.0, 20.0, 45.0, 60.0, 120.0)
FROM_ONE_DEGREE = (32.0, 24.47425, 20.071969, 14.52575, 7.0, -0.52575, -9.330313, -10.0, -10.0)
F699 = (
    (23000.0, 1.8, 50.503593, (38.584607, *FROM_ONE_DEGREE)),
    (38000.0, 1.2, 51.342883, (36.882883, *FROM_ONE_DEGREE)),
    (80000.0, 0.6, 51.788411, (35.76625, *FROM_ONE_DEGREE)),
)

# ITU-R M.2101-0, pycraf 2.1.0: (rows, columns, downtilt, beam azimuth), gain by (azimuth,
# elevation). Elements of 8 dBi, 65 degrees, 30 dB; half a wavelength apart.
M2101 = (
    ((8, 8, 0.0, 0.0), {
        (0, 0): 26.0618, (20, -10): 3.072969, (20, 0): 11.914084, (5, 3): 23.560089,
        (33, -21): -25.727759, (-40, 12): -9.521982,
    }),
    ((4, 8, 10.0, 20.0), {
        (0, 0): 8.198562, (20, -10): 21.631381, (20, 0): 20.219933, (5, 3): -41.198399,
        (33, -21): 8.625093, (-40, 12): -17.951535,
    }),
)  # fmt: skip

# 3GPP TR 38.901 Table 7.3-1, exact evaluations of the formula: azimuth, zenith angle, gain.
TR38901 = (
    (0.0, 90.0, 8.0),
    (32.5, 90.0, 5.0),
    (65.0, 90.0, -4.0),
    (180.0, 90.0, -22.0),
    (0.0, 122.5, 5.0),
    (0.0, 180.0, -15.005917),
    (32.5, 122.5, 2.0),
    (100.0, 60.0, -22.0),
)


def dish(recommendation: str = "F.699", **changed: object) -> Dish:
    given = {"frequency_mhz": 5600.0, "gain_dbi": 28.0, "diameter_m": 0.6}
    return Dish(name="dish", recommendation=recommendation, **(given | changed))


def omni(**changed: object) -> F1336Omnidirectional:
    given = {"frequency_mhz": 5600.0, "gain_dbi": 10.0, "elevation_beamwidth_deg": 10.76}
    return F1336Omnidirectional(name="whip", **(given | changed))


def array(**changed: object) -> M2101Array:
    return M2101Array(name="array", **({"gain_dbi": 26.0, "rows": 8, "columns": 8} | changed))


def problems(build: object, **changed: object) -> list[str]:
    with pytest.raises(PatternError) as caught:
        build(**changed)
    return [str(problem) for problem in caught.value.problems]


PATTERNS: dict[str, Pattern] = {
    "F.699": dish(),
    "F.699 large": dish(frequency_mhz=23000.0, diameter_m=1.8, gain_dbi=50.5),
    "F.1245": dish("F.1245"),
    "omnidirectional": omni(),
    "TR 38.901": Tr38901Element(name="element", gain_dbi=8.0),
    "M.2101": array(),
}
every_pattern = pytest.mark.parametrize("pattern", PATTERNS.values(), ids=PATTERNS.keys())


@pytest.mark.parametrize(("frequency", "diameter", "gain_dbi", "row"), F699)
def test_f699_table(
    frequency: float, diameter: float, gain_dbi: float, row: tuple[float, ...]
) -> None:
    """F.699 for large dishes agrees with the table to the printed digits, in every plane."""
    pattern = dish(frequency_mhz=frequency, diameter_m=diameter, gain_dbi=gain_dbi)
    angles = np.array(F699_ANGLES_DEG)
    for azimuth, elevation in ((angles, 0.0 * angles), (-angles, 0.0 * angles)):
        np.testing.assert_allclose(row, pattern.gain(azimuth, elevation), rtol=0, atol=1e-5)
    upwards = angles[angles <= 90.0]
    for sign in (-1.0, 1.0):
        actual = pattern.gain(0.0, sign * upwards)
        np.testing.assert_allclose(row[: upwards.size], actual, rtol=0, atol=1e-5)


@pytest.mark.parametrize(
    ("recommendation", "off_axis", "expected"),
    [
        # By hand, D / lambda = 11.207754, so 10 log = 10.495186 (0.6 m at 5.6 GHz):
        ("F.699", 0.0, 28.0),
        ("F.699", 3.0, 28.0 - 2.5e-3 * (11.207754 * 3.0) ** 2),
        ("F.699", 7.0, 2.0 + 1.5 * 10.495186),  # the first side lobe, up to 8.92 degrees
        ("F.699", 20.0, 52.0 - 10.495186 - 25.0 * math.log10(20.0)),
        ("F.699", 90.0, 10.0 - 10.495186),
        ("F.1245", 3.0, 28.0 - 2.5e-3 * (11.207754 * 3.0) ** 2),
        ("F.1245", 7.0, 39.0 - 0.5 * 10.495186 - 25.0 * math.log10(7.0)),
        ("F.1245", 90.0, -3.0 - 0.5 * 10.495186),
    ],
)
def test_small_dishes_by_hand(recommendation: str, off_axis: float, expected: float) -> None:
    """A dish of 0.6 m at 5.6 GHz, 11 wavelengths across, has the forms for D/lambda up to 100."""
    pattern = dish(recommendation)
    assert pattern.diameter_wavelengths == pytest.approx(11.207754, abs=1e-6)
    assert expected == pytest.approx(float(pattern.gain(off_axis, 0.0)), abs=1e-5)


def test_first_side_lobe_of_a_large_dish() -> None:
    """138.0955 wavelengths across: F.1245 keeps G1 = 34.1029 dBi up to 0.6249 degrees."""
    pattern = dish("F.1245", frequency_mhz=23000.0, diameter_m=1.8, gain_dbi=50.5)
    edge_deg = 12.02 * 138.095535**-0.6
    assert edge_deg == pytest.approx(0.6249, abs=1e-4)
    for off_axis, expected in (
        (0.62, 2.0 + 15.0 * math.log10(138.095535)),
        (0.63, 29.0 - 25.0 * math.log10(0.63)),
        (100.0, -13.0),
    ):
        assert expected == pytest.approx(float(pattern.gain(off_axis, 0.0)), abs=1e-5)


def test_forms_of_dishes_meet_at_100_wavelengths() -> None:
    """Beyond the first side lobe both forms agree at D/lambda = 100, and pieces join at 48 deg."""
    for formula in (f699_gain_dbi_scalar, f1245_gain_dbi_scalar):
        for off_axis in (1.1, 5.0, 30.0, 60.0, 180.0):
            below, above = (formula(off_axis, 47.7, size) for size in (100.0, 100.0001))
            assert below == pytest.approx(above, abs=1e-4)
        for size in (11.2, 100.0, 300.0):
            gain_dbi = 7.7 + 20.0 * math.log10(size)
            inside, outside = (formula(angle, gain_dbi, size) for angle in (47.9999, 48.0001))
            assert inside == pytest.approx(outside, abs=0.05)


def test_f699_is_continuous() -> None:
    """Down to 48 degrees F.699 has no step for a small dish."""
    angles = np.linspace(0.0, 47.9, 48_000)
    levels = np.array([f699_gain_dbi_scalar(angle, 28.0, 11.2) for angle in angles])
    assert np.abs(np.diff(levels)).max() < 0.005


def test_f1245_is_below_f699() -> None:
    """Outside the main beam the mean of side lobes lies about 3 dB below their peak."""
    small = [dish(which).gain(np.arange(10.0, 180.0), 0.0) for which in ("F.699", "F.1245")]
    assert (small[0] - small[1] > 0.0).all()
    large = [
        dish(which, frequency_mhz=23000.0, diameter_m=1.8, gain_dbi=50.5).gain(20.0, 0.0)
        for which in ("F.699", "F.1245")
    ]
    assert float(large[0] - large[1]) == pytest.approx(3.0)


def test_dish_of_unknown_diameter() -> None:
    """The diameter left out follows from the gain, which the notes say."""
    pattern = dish(gain_dbi=30.0, diameter_m=None)
    assert pattern.diameter_wavelengths == pytest.approx(10.0 ** ((30.0 - 7.7) / 20.0))
    assert pattern.notes == (
        "Diameter not given: 13.0 wavelengths estimated from the gain (ITU-R F.699).",
    )
    assert dish().notes == ()


def test_impossible_dishes() -> None:
    """Sizes and gains that do not go together are refused with what is allowed."""
    assert problems(dish, diameter_m=0.1) == [
        "antenna.dish.diameter_m: found 0.1, so 1.87 wavelengths; allowed: 2.1 to 2000 wavelengths "
        "across for F.699"
    ]
    assert problems(dish, gain_dbi=20.0) == [
        "antenna.dish.gain_dbi: found 20; allowed: 20.7 to 31.9 dBi for a dish 11.2 wavelengths "
        "across. Check gain and diameter against the data sheet"
    ]
    assert problems(dish, recommendation="F.1245", frequency_mhz=80000.0, gain_dbi=99.0) == [
        "antenna.dish.gain_dbi: found 99; allowed: -20 to 60 dBi",
        "antenna.dish.frequency_mhz: found 80000; allowed: 1000 to 70000 MHz for F.1245. Use a "
        "pattern file",
    ]
    assert problems(dish, gain_dbi=10.0, diameter_m=None) == [
        "antenna.dish.gain_dbi: found 10, so 1.3 wavelengths; allowed: 2.1 to 2000 wavelengths "
        "across for F.699"
    ]


def test_no_electrical_tilt_of_dishes_and_elements() -> None:
    """What cannot be tilted electrically says so; a tilt of 0 and none are fine."""
    for pattern in (dish(), Tr38901Element(name="element", gain_dbi=8.0)):
        with pytest.raises(PatternError) as caught:
            pattern.gain(0.0, 0.0, electrical_downtilt_deg=2.0)
        assert str(caught.value) == (
            f"electrical_downtilt_deg: found 2; allowed: 0 deg: antenna {pattern.name} has no "
            "electrical tilt"
        )
        for tilt_deg in (0.0, None):
            actual = pattern.gain(0.0, 0.0, electrical_downtilt_deg=tilt_deg)
            assert float(actual) == pattern.gain_dbi


@pytest.mark.parametrize(("setting", "points"), M2101)
def test_m2101_table(
    setting: tuple[int, int, float, float], points: dict[tuple[int, int], float]
) -> None:
    """The array agrees with the table to the printed digits, steered both ways."""
    rows, columns, downtilt, beam = setting
    pattern = array(
        rows=rows,
        columns=columns,
        gain_dbi=8.0 + 10.0 * math.log10(rows * columns),
        beam_azimuth_offset_deg=beam,
    )
    for (azimuth, elevation), expected in points.items():
        actual = pattern.gain(azimuth, elevation, electrical_downtilt_deg=downtilt)
        assert expected == pytest.approx(float(actual), abs=1e-5)


def test_m2101_sums_its_elements() -> None:
    """The closed form is the sum over the elements, for unequal spacings and any tilt."""
    pattern = array(
        rows=5, columns=3, gain_dbi=8.0 + 10.0 * math.log10(15), row_spacing_wavelengths=0.8,
        column_spacing_wavelengths=0.6, beam_azimuth_offset_deg=-25.0,
        element_azimuth_beamwidth_deg=90.0, element_elevation_beamwidth_deg=70.0,
        front_to_back_db=25.0, side_lobe_db=20.0,
    )  # fmt: skip
    rng = np.random.default_rng(1)
    azimuths, elevations = rng.uniform(-180.0, 180.0, 300), rng.uniform(-90.0, 90.0, 300)
    tilt, beam = np.radians(7.0), np.radians(-25.0)
    azimuth, elevation = np.radians(azimuths), np.radians(elevations)
    field = np.zeros(300, dtype=complex)
    for n in range(5):
        for m in range(3):
            path = 0.8 * n * np.sin(elevation) + 0.6 * m * np.cos(elevation) * np.sin(azimuth)
            path += 0.8 * n * np.sin(tilt) - 0.6 * m * np.cos(tilt) * np.sin(beam)
            field += np.exp(2j * np.pi * path) / math.sqrt(15)
    across = np.minimum(12.0 * (azimuths / 90.0) ** 2, 25.0)
    upright = np.minimum(12.0 * (elevations / 70.0) ** 2, 20.0)
    element = 8.0 - np.minimum(across + upright, 25.0)
    expected = element + 20.0 * np.log10(np.abs(field))
    actual = pattern.gain(azimuths, elevations, electrical_downtilt_deg=7.0)
    np.testing.assert_allclose(expected, actual, rtol=0, atol=1e-6)


def test_m2101_nulls_and_one_element() -> None:
    """A perfect null is a number, and an array of one element is that element."""
    null_deg = math.degrees(math.asin(1.0 / 4.0))  # 8 elements, half a wavelength apart
    assert -200.0 < float(array().gain(null_deg, 0.0)) < -100.0
    azimuths, elevations = np.meshgrid(np.arange(-180.0, 180.0, 9.0), np.arange(-90.0, 91.0, 9.0))
    single = array(rows=1, columns=1, gain_dbi=8.0).gain(azimuths, elevations)
    element = Tr38901Element(name="element", gain_dbi=8.0).gain(azimuths, elevations)
    np.testing.assert_allclose(element, single, rtol=0, atol=1e-12)


def test_m2101_beamwidths() -> None:
    """The measured widths are those of uniform lines, narrowed a little by the element."""
    assert array().azimuth_beamwidth_deg == pytest.approx(0.886 / (8 * 0.5) * 57.3, rel=0.03)
    tall = array(rows=16, columns=1, gain_dbi=20.0, row_spacing_wavelengths=0.7)
    assert tall.elevation_beamwidth_deg == pytest.approx(0.886 / (16 * 0.7) * 57.3, rel=0.01)
    assert tall.azimuth_beamwidth_deg == pytest.approx(65.0, abs=1e-6)


def test_m2101_wrong_values() -> None:
    """Every wrong number of an array is told at once."""
    assert problems(array, rows=0, columns=2.5, beam_azimuth_offset_deg=70.0) == [
        "antenna.array.rows: found 0; allowed: a whole number, 1 to 64",
        "antenna.array.columns: found 2.5; allowed: a whole number, 1 to 64",
        "antenna.array.beam_azimuth_offset_deg: found 70; allowed: -60 to 60 deg",
    ]


@pytest.mark.parametrize(("azimuth", "zenith", "expected"), TR38901)
def test_tr38901_table(azimuth: float, zenith: float, expected: float) -> None:
    """The element agrees with its formula to the printed digits."""
    actual = Tr38901Element(name="element", gain_dbi=8.0).gain(azimuth, 90.0 - zenith)
    assert expected == pytest.approx(float(actual), abs=1e-6)


@pytest.mark.parametrize(
    ("side_lobes", "k", "elevation", "expected"),
    [
        # ITU-R F.1336-5 recommends 2.1 and 2.2 by hand, theta_3 = 10.76 degrees:
        ("peak", 0.7, 0.0, 0.0),
        ("peak", 0.7, 5.38, -3.0),
        ("peak", 0.7, 10.0, -12.0 + 10.0 * math.log10(1.7)),  # the shelf, 9.67 to 10.76
        ("peak", 0.7, 21.52, -12.0 + 10.0 * math.log10(2.0**-1.5 + 0.7)),
        ("peak", 0.0, 43.04, -12.0 - 15.0 * math.log10(4.0)),
        ("average", 0.7, 10.5, -12.0 * (10.5 / 10.76) ** 2),
        ("average", 0.0, 11.836, -12.0 * 1.1**2),  # up to 1.118 widths
        ("average", 0.7, 21.52, -15.0 + 10.0 * math.log10(2.0**-1.5 + 0.7)),
        ("average", 0.0, 43.04, -15.0 - 15.0 * math.log10(4.0)),
    ],
)
def test_omnidirectional_by_hand(
    side_lobes: str, k: float, elevation: float, expected: float
) -> None:
    """The pattern gives what the formula gives by hand, above and below, all around."""
    pattern = omni(side_lobes=side_lobes, k=k)
    for azimuth, sign in ((0.0, 1.0), (123.0, -1.0), (-180.0, 1.0)):
        actual = float(pattern.gain(azimuth, sign * elevation)) - 10.0
        assert expected == pytest.approx(actual, abs=1e-9)


def test_omnidirectional_k_follows_the_frequency() -> None:
    """Left out, k is 0.7 below 3 GHz and 0 from there on."""
    for frequency, k in ((2400.0, 0.7), (2999.0, 0.7), (3000.0, 0.0), (5600.0, 0.0)):
        expected = omni(k=k).gain(0.0, 40.0)
        assert float(expected) == float(omni(frequency_mhz=frequency).gain(0.0, 40.0))


def test_omnidirectional_tilt() -> None:
    """The beam goes down to the tilt all around; straight up and down stay."""
    around = np.arange(-180.0, 180.0, 15.0)
    np.testing.assert_array_equal(omni().gain(around, -6.0, electrical_downtilt_deg=6.0), 10.0)
    for elevation in (-90.0, 90.0):
        actual = omni().gain(around, elevation, electrical_downtilt_deg=6.0)
        np.testing.assert_allclose(omni().gain(0.0, elevation), actual, rtol=0, atol=1e-9)


def test_omnidirectional_wrong_values() -> None:
    """Every wrong value of an omnidirectional antenna is told at once."""
    found = problems(
        omni, frequency_mhz=100.0, elevation_beamwidth_deg=95.0, k=2.0, side_lobes="both"
    )
    assert found == [
        "antenna.whip.frequency_mhz: found 100; allowed: 400 to 70000 MHz for F.1336-5 "
        "omnidirectional. Use a pattern file",
        "antenna.whip.elevation_beamwidth_deg: found 95; allowed: 0.5 to below 90 deg for F.1336-5 "
        "omnidirectional",
        "antenna.whip.k: found 2; allowed: 0 to 1",
        'antenna.whip.side_lobes: found \'both\'; allowed: "average" or "peak"',
    ]


@every_pattern
def test_peak_and_half_power_points(pattern: Pattern) -> None:
    """The peak is on the boresight, and half the widths off it the gain is 3 dB down."""
    azimuths, elevations = np.meshgrid(np.arange(-180.0, 180.5, 1.5), np.arange(-90.0, 90.5, 0.5))
    assert pattern.gain_dbi == float(pattern.gain(0.0, 0.0))
    assert pattern.gain_dbi == pytest.approx(float(pattern.gain(azimuths, elevations).max()))
    wanted = pytest.approx(pattern.gain_dbi - 3.0, abs=2e-3)
    assert wanted == float(pattern.gain(0.0, 0.5 * pattern.elevation_beamwidth_deg))
    if pattern.azimuth_beamwidth_deg < 360.0:
        assert wanted == float(pattern.gain(0.5 * pattern.azimuth_beamwidth_deg, 0.0))


@every_pattern
def test_no_seam_nan_and_shapes(pattern: Pattern) -> None:
    """Whole turns change nothing, NaN stays where it is, rows and columns make a grid."""
    azimuths, elevations = np.linspace(-180.0, 180.0, 121), np.array([[-20.0], [0.0], [45.0]])
    once = pattern.gain(azimuths, elevations)
    assert once.shape == (3, 121)
    np.testing.assert_allclose(once, pattern.gain(azimuths + 360.0, elevations), atol=1e-9)
    np.testing.assert_array_equal(once[:, 0], once[:, -1])
    actual = pattern.gain(np.array([np.nan, 0.0, np.inf, 0.0, 0.0]), [0.0, np.nan, 0.0, 91.0, 90.0])
    assert np.isnan(actual).tolist() == [True, True, True, True, False]


def test_kinds() -> None:
    """Envelopes know that they must not be integrated; the others are models."""
    kinds = {name: pattern.kind for name, pattern in PATTERNS.items()}
    assert kinds == {
        "F.699": "envelope",
        "F.699 large": "envelope",
        "F.1245": "envelope",
        "omnidirectional": "envelope",
        "TR 38.901": "model",
        "M.2101": "model",
    }


def test_plain_and_compiled_agree() -> None:
    """Every scalar formula gives the same compiled and as plain Python."""
    for formula, arguments in (
        (f699_gain_dbi_scalar, (20.0, 28.0, 11.2)),
        (f699_gain_dbi_scalar, (0.9, 50.5, 138.0)),
        (f1245_gain_dbi_scalar, (20.0, 28.0, 11.2)),
        (f1245_gain_dbi_scalar, (0.6, 50.5, 138.0)),
        (off_axis_deg_scalar, (100.0, 30.0)),
        (line_relative_gain_db_scalar, (0.3, 8.0)),
        (omnidirectional_relative_gain_db_scalar, (12.0, 10.0, 0.7, True)),
    ):
        assert formula.py_func(*arguments) == pytest.approx(formula(*arguments), rel=1e-12)
