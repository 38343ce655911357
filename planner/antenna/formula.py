"""Patterns by the name of their formula, as a plan gives them."""

from collections.abc import Callable, Mapping
from dataclasses import dataclass
from functools import partial
from typing import Any

from planner.antenna.dish import Dish
from planner.antenna.f1336 import estimated_elevation_beamwidth_deg
from planner.antenna.f1336_omni import (
    WIDEST_BEAM_DEG,
    F1336Omnidirectional,
    estimated_omnidirectional_beamwidth_deg,
)
from planner.antenna.f1336_sector import (
    BOUNDARY_FREQUENCY_MHZ,
    ELEVATION_BEAMWIDTHS_DEG,
    WIDEST_SECTOR_DEG,
    F1336Sector,
)
from planner.antenna.m2101 import M2101Array
from planner.antenna.pattern import (
    HIGHEST_GAIN_DBI,
    LOWEST_GAIN_DBI,
    Isotropic,
    Pattern,
    raise_problems,
    range_problems,
)
from planner.antenna.tr36814 import Tr36814Sector
from planner.antenna.tr38901 import Tr38901Element
from planner.errors import PatternError, Problem

_AZIMUTH, _ELEVATION = "azimuth_beamwidth_deg", "elevation_beamwidth_deg"
_BEAMS = (_AZIMUTH, _ELEVATION)
_CAPS = ("front_to_back_db", "side_lobe_db")
_K_FACTORS = ("k_p", "k_a", "k_h", "k_v")


@dataclass(frozen=True, slots=True, kw_only=True)
class _Formula:
    """What a formula is made from, besides the name and the gain."""

    build: Callable[..., Pattern]
    needed: tuple[str, ...] = ()
    optional: tuple[str, ...] = ()
    checks_frequency: bool = False  # it takes the frequency, and has a range of its own


_FORMULAS: Mapping[str, _Formula] = {
    "F.1336-5": _Formula(
        build=F1336Sector,
        needed=(_AZIMUTH,),
        optional=(_ELEVATION, "side_lobes", *_K_FACTORS),
        checks_frequency=True,
    ),
    "F.1336-5 omnidirectional": _Formula(
        build=F1336Omnidirectional,
        optional=(_ELEVATION, "side_lobes", "k"),
        checks_frequency=True,
    ),
    "F.699": _Formula(
        build=partial(Dish, recommendation="F.699"),
        optional=("diameter_m",),
        checks_frequency=True,
    ),
    "F.1245": _Formula(
        build=partial(Dish, recommendation="F.1245"),
        optional=("diameter_m",),
        checks_frequency=True,
    ),
    "TR 36.814": _Formula(build=Tr36814Sector, needed=_BEAMS, optional=_CAPS),
    "TR 38.901": _Formula(build=Tr38901Element, optional=(*_BEAMS, *_CAPS)),
    "M.2101": _Formula(
        build=M2101Array,
        needed=("rows", "columns"),
        optional=(
            *("row_spacing_wavelengths", "column_spacing_wavelengths", "beam_azimuth_offset_deg"),
            *("element_azimuth_beamwidth_deg", "element_elevation_beamwidth_deg", *_CAPS),
        ),
    ),
    "isotropic": _Formula(build=Isotropic),
}
FORMULAS = tuple(_FORMULAS)
# A stand-in, never returned, by which the other values are checked when one is missing.
_STAND_INS: Mapping[str, Any] = {_AZIMUTH: 10.0, _ELEVATION: 10.0, "rows": 1, "columns": 1}


def formula_pattern(
    name: str,
    formula: str,
    *,
    frequency_mhz: float,
    gain_dbi: float,
    **values: float | str | None,
) -> Pattern:
    """Pattern of a published formula.

    Parameters
    ----------
    name : str
        Name of the antenna in the plan; problems are reported under ``antenna.<name>.<key>``.
    formula : str
        One of ``FORMULAS``.
    frequency_mhz : float
        Frequency of the radio, above 0; some formulas hold for a narrower range. [MHz]
    gain_dbi : float
        Peak gain. [dBi]
    **values
        The formula's own, as the fields of its class name them; None counts as not given:
        :class:`F1336Sector`, :class:`F1336Omnidirectional`, :class:`Dish` (F.699 and F.1245),
        :class:`Tr36814Sector`, :class:`Tr38901Element`, :class:`M2101Array`. An elevation
        beamwidth left out of an F.1336-5 antenna is estimated from the gain, which the pattern's
        notes say.

    Raises
    ------
    PatternError
        With every problem found: an unknown formula, a value outside the formula's validity, a
        value that is missing or that the formula does not have.
    """
    if formula not in _FORMULAS:
        allowed = ", ".join(f'"{known}"' for known in FORMULAS)
        raise PatternError(
            Problem(where=f"antenna.{name}.formula", found=repr(formula), allowed=allowed)
        )
    asked = _FORMULAS[formula]
    given: dict[str, Any] = {key: value for key, value in values.items() if value is not None}
    problems = _strange_key_problems(name, formula, given)
    problems += _missing_key_problems(name, formula, given)
    given = {key: given[key] for key in given if key in (*asked.needed, *asked.optional)}
    if asked.checks_frequency:
        given["frequency_mhz"] = frequency_mhz
    else:
        problems += range_problems(
            name, "frequency_mhz", frequency_mhz, 0.0, 300_000.0, unit="MHz", above=True
        )
    if formula.startswith("F.1336-5"):
        given["notes"] = _f1336_notes(formula, frequency_mhz, given)
        if _ELEVATION not in given:
            estimate_deg, note, trouble = _estimate(name, gain_dbi, formula, given.get(_AZIMUTH))
            problems += trouble
            given["notes"] = (*note, *given["notes"])
            given[_ELEVATION] = _STAND_INS[_ELEVATION] if estimate_deg is None else estimate_deg
    given = {key: _STAND_INS[key] for key in asked.needed if key not in given} | given
    try:
        pattern = asked.build(name=name, gain_dbi=gain_dbi, **given)
    except PatternError as error:
        raise PatternError(problems + list(error.problems)) from None
    raise_problems(problems)
    return pattern


def _strange_key_problems(name: str, formula: str, given: Mapping[str, Any]) -> list[Problem]:
    asked = _FORMULAS[formula]
    return [
        Problem(
            where=f"antenna.{name}.{key}",
            found=repr(value),
            allowed=f'nothing: the formula "{formula}" has no {key}',
            advice="Leave the key out or choose another formula",
        )
        for key, value in given.items()
        if key not in (*asked.needed, *asked.optional)
    ]


def _missing_key_problems(name: str, formula: str, given: Mapping[str, Any]) -> list[Problem]:
    return [
        Problem(
            where=f"antenna.{name}.{key}",
            found="nothing",
            allowed=(
                f"{'a beamwidth in degrees' if key in _BEAMS else 'a whole number'}, which the "
                f'formula "{formula}" needs'
            ),
        )
        for key in _FORMULAS[formula].needed
        if key not in given
    ]


def _f1336_notes(formula: str, frequency_mhz: float, given: Mapping[str, Any]) -> tuple[str, ...]:
    """A note on factors that are given but mean nothing at this frequency."""
    idle = [key for key in _K_FACTORS if key in given]
    if formula != "F.1336-5" or not frequency_mhz > BOUNDARY_FREQUENCY_MHZ or not idle:
        return ()
    return (
        f"{', '.join(idle)}: without effect above {BOUNDARY_FREQUENCY_MHZ:g} MHz (ITU-R F.1336-5, "
        "recommends 3.2).",
    )


def _estimate(
    name: str, gain_dbi: float, formula: str, azimuth_beamwidth_deg: float | None
) -> tuple[float | None, tuple[str, ...], list[Problem]]:
    """Elevation beamwidth that the plan leaves out, the note that says so, what forbids it."""
    if not LOWEST_GAIN_DBI <= gain_dbi <= HIGHEST_GAIN_DBI:
        return None, (), []  # reported where it is checked
    if formula == "F.1336-5 omnidirectional":
        estimate_deg = estimated_omnidirectional_beamwidth_deg(gain_dbi)
        lowest_deg, highest_deg = ELEVATION_BEAMWIDTHS_DEG[0], WIDEST_BEAM_DEG
        source, estimated = "the gain", f"{gain_dbi:g} dBi"
    elif azimuth_beamwidth_deg is None or not azimuth_beamwidth_deg > 0.0:
        return None, (), []
    else:
        estimate_deg = estimated_elevation_beamwidth_deg(gain_dbi, azimuth_beamwidth_deg)
        lowest_deg, highest_deg = ELEVATION_BEAMWIDTHS_DEG
        source = "the gain and the azimuth beamwidth"
        estimated = f"{gain_dbi:g} dBi and {azimuth_beamwidth_deg:g} deg"
    where = f"antenna.{name}.{_ELEVATION}"
    if azimuth_beamwidth_deg is not None and azimuth_beamwidth_deg > WIDEST_SECTOR_DEG:
        reason = (
            f"a beamwidth in degrees: it can be estimated from the gain only for azimuth "
            f"beamwidths up to {WIDEST_SECTOR_DEG:g} deg"
        )
        return None, (), [Problem(where=where, found="nothing", allowed=reason)]
    if not lowest_deg <= estimate_deg < highest_deg:
        reason = (
            f"a beamwidth in degrees: the estimate from {estimated} is {estimate_deg:.3g} deg, "
            f"outside {lowest_deg:g} to below {highest_deg:g} deg"
        )
        return None, (), [Problem(where=where, found="nothing", allowed=reason)]
    note = (
        f"Elevation beamwidth not given: {estimate_deg:.2f} degrees estimated from {source} "
        "(ITU-R F.1336-5)."
    )
    return estimate_deg, (note,), []
