"""Patterns by the name of their formula, as a plan gives them."""

import pytest

from planner.antenna import (
    FORMULAS,
    Dish,
    F1336Omnidirectional,
    F1336Sector,
    Isotropic,
    M2101Array,
    Pattern,
    Tr36814Sector,
    Tr38901Element,
    formula_pattern,
)
from planner.errors import PatternError


def made(formula: str, **changed: object) -> Pattern:
    given: dict[str, object] = {"frequency_mhz": 5600.0, "gain_dbi": 17.0}
    return formula_pattern("panel", formula, **(given | changed))


def problems(formula: str, **changed: object) -> list[str]:
    with pytest.raises(PatternError) as caught:
        made(formula, **changed)
    return [str(problem) for problem in caught.value.problems]


BEAMS = {"azimuth_beamwidth_deg": 90.0, "elevation_beamwidth_deg": 7.0}
GIVEN: dict[str, dict[str, object]] = {
    "F.1336-5": BEAMS,
    "F.1336-5 omnidirectional": {"elevation_beamwidth_deg": 7.0, "side_lobes": "peak", "k": 0.3},
    "F.699": {"gain_dbi": 28.0, "diameter_m": 0.6},
    "F.1245": {"gain_dbi": 28.0, "diameter_m": 0.6},
    "TR 36.814": BEAMS,
    "TR 38.901": {"gain_dbi": 7.0, "front_to_back_db": 25.0},
    "M.2101": {
        "gain_dbi": 20.0, "rows": 8, "columns": 2, "row_spacing_wavelengths": 0.7,
        "column_spacing_wavelengths": 0.6, "beam_azimuth_offset_deg": 5.0,
        "element_azimuth_beamwidth_deg": 80.0, "element_elevation_beamwidth_deg": 70.0,
        "front_to_back_db": 28.0, "side_lobe_db": 27.0,
    },
    "isotropic": {},
}  # fmt: skip


def test_each_name_gives_its_pattern() -> None:
    """Each name leads to its pattern, with the values passed on."""
    common: dict[str, object] = {"name": "panel", "gain_dbi": 17.0}
    at_frequency = common | {"frequency_mhz": 5600.0}
    expected: dict[str, Pattern] = {
        "F.1336-5": F1336Sector(**(at_frequency | BEAMS)),
        "F.1336-5 omnidirectional": F1336Omnidirectional(
            **(at_frequency | GIVEN["F.1336-5 omnidirectional"])
        ),
        "F.699": Dish(recommendation="F.699", **(at_frequency | GIVEN["F.699"])),
        "F.1245": Dish(recommendation="F.1245", **(at_frequency | GIVEN["F.1245"])),
        "TR 36.814": Tr36814Sector(**(common | BEAMS)),
        "TR 38.901": Tr38901Element(**(common | GIVEN["TR 38.901"])),
        "M.2101": M2101Array(**(common | GIVEN["M.2101"])),
        "isotropic": Isotropic(**common),
    }
    assert tuple(expected) == FORMULAS
    assert expected == {name: made(name, **given) for name, given in GIVEN.items()}
    for name, pattern in expected.items():
        for key, value in GIVEN[name].items():
            assert value == getattr(pattern, key)


def test_elevation_beamwidth_of_an_omnidirectional_antenna() -> None:
    """It follows from the gain if left out, 107.6 * 10^(-0.1 G0), and the notes say so."""
    pattern = made("F.1336-5 omnidirectional", gain_dbi=10.0)
    assert pattern.elevation_beamwidth_deg == pytest.approx(10.76)
    assert pattern.notes == (
        "Elevation beamwidth not given: 10.76 degrees estimated from the gain (ITU-R F.1336-5).",
    )
    assert problems("F.1336-5 omnidirectional", gain_dbi=0.0) == [
        "antenna.panel.elevation_beamwidth_deg: found nothing; allowed: a beamwidth in degrees: "
        "the estimate from 0 dBi is 108 deg, outside 0.5 to below 90 deg"
    ]


def test_factors_without_effect_are_noted() -> None:
    """Above 6 GHz F.1336-5 has no k factors; given all the same, the notes say so."""
    pattern = made("F.1336-5", frequency_mhz=11000.0, k_h=0.7, k_v=0.3, **BEAMS)
    assert pattern.notes == (
        "k_h, k_v: without effect above 6000 MHz (ITU-R F.1336-5, recommends 3.2).",
    )
    assert made("F.1336-5", k_h=0.7, **BEAMS).notes == ()


def test_array_without_rows() -> None:
    """What is missing is told beside what is wrong."""
    assert problems("M.2101", columns=8, row_spacing_wavelengths=5.0, diameter_m=0.6) == [
        'antenna.panel.diameter_m: found 0.6; allowed: nothing: the formula "M.2101" has no '
        "diameter_m. Leave the key out or choose another formula",
        'antenna.panel.rows: found nothing; allowed: a whole number, which the formula "M.2101" '
        "needs",
        "antenna.panel.row_spacing_wavelengths: found 5; allowed: 0.1 to 2",
    ]


def test_the_formulas_own_values_are_passed_on() -> None:
    """Side-lobe form and factors reach the pattern they belong to."""
    beams = {"azimuth_beamwidth_deg": 90.0, "elevation_beamwidth_deg": 7.0}
    own = {"side_lobes": "peak", "k_p": 0.5, "k_a": 0.6, "k_h": 0.7, "k_v": 0.3}
    pattern = made("F.1336-5", **beams, **own)
    assert own == {key: getattr(pattern, key) for key in own}
    own = {"front_to_back_db": 30.0, "side_lobe_db": 18.0}
    pattern = made("TR 36.814", **beams, **own)
    assert own == {key: getattr(pattern, key) for key in own}


def test_elevation_beamwidth_left_out_is_estimated_and_noted() -> None:
    """F.1336-5 estimates the elevation beamwidth from the gain and says so in the notes."""
    pattern = made("F.1336-5", gain_dbi=18.0, azimuth_beamwidth_deg=65.0)
    assert pattern.elevation_beamwidth_deg == pytest.approx(7.558721, abs=1e-6)
    assert pattern.notes == (
        "Elevation beamwidth not given: 7.56 degrees estimated from the gain and the azimuth "
        "beamwidth (ITU-R F.1336-5).",
    )


def test_no_estimate_for_wide_sectors() -> None:
    """Beyond 120 degrees the estimate does not hold and the beamwidth has to be given."""
    assert problems("F.1336-5", azimuth_beamwidth_deg=121.0) == [
        "antenna.panel.elevation_beamwidth_deg: found nothing; allowed: a beamwidth in degrees: it "
        "can be estimated from the gain only for azimuth beamwidths up to 120 deg"
    ]


def test_no_estimate_outside_the_formula() -> None:
    """An estimate that the formula cannot take is told with its value, not taken."""
    assert problems("F.1336-5", gain_dbi=10.0, azimuth_beamwidth_deg=90.0) == [
        "antenna.panel.elevation_beamwidth_deg: found nothing; allowed: a beamwidth in degrees: "
        "the estimate from 10 dBi and 90 deg is 34.4 deg, outside 0.5 to below 22.5 deg"
    ]


def test_unknown_formula() -> None:
    """An unknown name is told with the names that exist."""
    assert problems("F.1336-4") == [
        'antenna.panel.formula: found \'F.1336-4\'; allowed: "F.1336-5", "F.1336-5 '
        'omnidirectional", "F.699", "F.1245", "TR 36.814", "TR 38.901", "M.2101", "isotropic"'
    ]


def test_missing_wrong_and_strange_values_are_told_together() -> None:
    """Everything wrong with a plan's antenna comes out in one go."""
    assert problems("TR 36.814", gain_dbi=-99.0, azimuth_beamwidth_deg=400.0, k_v=0.3) == [
        'antenna.panel.k_v: found 0.3; allowed: nothing: the formula "TR 36.814" has no k_v. Leave '
        "the key out or choose another formula",
        "antenna.panel.elevation_beamwidth_deg: found nothing; allowed: a beamwidth in degrees, "
        'which the formula "TR 36.814" needs',
        "antenna.panel.gain_dbi: found -99; allowed: -20 to 60 dBi",
        "antenna.panel.azimuth_beamwidth_deg: found 400; allowed: 1 to below 360 deg",
    ]


def test_f1336_without_any_beamwidth() -> None:
    """F.1336-5 needs the azimuth beamwidth; only that is told when both are left out."""
    assert problems("F.1336-5") == [
        "antenna.panel.azimuth_beamwidth_deg: found nothing; allowed: a beamwidth in degrees, "
        'which the formula "F.1336-5" needs'
    ]


def test_frequency_outside_the_formula() -> None:
    """F.1336-5 refuses 300 MHz and 80 GHz; the other formulas take any frequency above 0."""
    beams = {"azimuth_beamwidth_deg": 90.0, "elevation_beamwidth_deg": 7.0}
    for frequency_mhz in (300.0, 80_000.0):
        (told,) = problems("F.1336-5", frequency_mhz=frequency_mhz, **beams)
        assert told.startswith(
            f"antenna.panel.frequency_mhz: found {frequency_mhz:g}; allowed: 400"
        )
        made("TR 36.814", frequency_mhz=frequency_mhz, **beams)
    (told,) = problems("isotropic", frequency_mhz=0.0)
    assert told == ("antenna.panel.frequency_mhz: found 0; allowed: above 0, up to 300000 MHz")


def test_isotropic_has_no_beamwidth() -> None:
    """A beamwidth given for an isotropic antenna is a mistake that is told."""
    (told,) = problems("isotropic", azimuth_beamwidth_deg=90.0)
    assert told.startswith("antenna.panel.azimuth_beamwidth_deg: found 90.0; allowed: nothing")
