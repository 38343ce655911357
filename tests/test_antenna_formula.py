"""Patterns by the name of their formula, as a plan gives them."""

import pytest

from planner.antenna import (
    FORMULAS,
    F1336Sector,
    Isotropic,
    Pattern,
    Tr36814Sector,
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


def test_each_name_gives_its_pattern() -> None:
    """The three names lead to the three patterns, with the values passed on."""
    beams = {"azimuth_beamwidth_deg": 90.0, "elevation_beamwidth_deg": 7.0}
    expected: tuple[Pattern, ...] = (
        F1336Sector(name="panel", gain_dbi=17.0, frequency_mhz=5600.0, **beams),
        Tr36814Sector(name="panel", gain_dbi=17.0, **beams),
        Isotropic(name="panel", gain_dbi=17.0),
    )
    assert FORMULAS == ("F.1336-5", "TR 36.814", "isotropic")
    assert expected == (made("F.1336-5", **beams), made("TR 36.814", **beams), made("isotropic"))


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
        'antenna.panel.formula: found \'F.1336-4\'; allowed: "F.1336-5", "TR 36.814", "isotropic"'
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
