"""Patterns by the name of their formula, as a plan gives them."""

from collections.abc import Callable, Mapping
from functools import partial
from typing import Any, Literal

from planner.antenna.f1336 import estimated_elevation_beamwidth_deg
from planner.antenna.f1336_sector import (
    ELEVATION_BEAMWIDTHS_DEG,
    WIDEST_SECTOR_DEG,
    F1336Sector,
)
from planner.antenna.pattern import (
    HIGHEST_GAIN_DBI,
    LOWEST_GAIN_DBI,
    Isotropic,
    Pattern,
    raise_problems,
    range_problems,
)
from planner.antenna.tr36814 import Tr36814Sector
from planner.errors import PatternError, Problem

FORMULAS = ("F.1336-5", "TR 36.814", "isotropic")


def formula_pattern(
    name: str,
    formula: str,
    *,
    frequency_mhz: float,
    gain_dbi: float,
    azimuth_beamwidth_deg: float | None = None,
    elevation_beamwidth_deg: float | None = None,
    side_lobes: Literal["average", "peak"] | None = None,
    k_p: float | None = None,
    k_a: float | None = None,
    k_h: float | None = None,
    k_v: float | None = None,
    front_to_back_db: float | None = None,
    side_lobe_db: float | None = None,
) -> Pattern:
    """Pattern of a published formula.

    Parameters
    ----------
    name : str
        Name of the antenna in the plan; problems are reported under ``antenna.<name>.<key>``.
    formula : str
        "F.1336-5", "TR 36.814" or "isotropic".
    frequency_mhz : float
        Frequency of the radio, above 0; F.1336-5 holds from 400 MHz to 70 GHz. [MHz]
    gain_dbi : float
        Peak gain. [dBi]
    azimuth_beamwidth_deg, elevation_beamwidth_deg : float
        3 dB widths. Both are needed for TR 36.814; for F.1336-5 the elevation's may be left out
        and is then estimated from the gain, which the pattern's notes say. [deg]
    side_lobes, k_p, k_a, k_h, k_v
        F.1336-5 only: see :class:`F1336Sector`.
    front_to_back_db, side_lobe_db : float
        TR 36.814 only: see :class:`Tr36814Sector`. [dB]

    Raises
    ------
    PatternError
        With every problem found: an unknown formula, a value outside the formula's validity, a
        value that is missing or that the formula does not have.
    """
    if formula not in FORMULAS:
        allowed = ", ".join(f'"{known}"' for known in FORMULAS)
        raise PatternError(
            Problem(where=f"antenna.{name}.formula", found=repr(formula), allowed=allowed)
        )
    beams: dict[str, Any] = {
        "azimuth_beamwidth_deg": azimuth_beamwidth_deg,
        "elevation_beamwidth_deg": elevation_beamwidth_deg,
    }
    f1336_only: dict[str, Any] = {
        "side_lobes": side_lobes,
        "k_p": k_p,
        "k_a": k_a,
        "k_h": k_h,
        "k_v": k_v,
    }
    tr36814_only: dict[str, Any] = {
        "front_to_back_db": front_to_back_db,
        "side_lobe_db": side_lobe_db,
    }
    build: Callable[..., Pattern]
    if formula == "F.1336-5":
        own, strange, needed = beams | f1336_only, tr36814_only, ["azimuth_beamwidth_deg"]
        build = partial(F1336Sector, frequency_mhz=frequency_mhz)
    elif formula == "TR 36.814":
        own, strange, needed = beams | tr36814_only, f1336_only, list(beams)
        build = Tr36814Sector
    else:
        own, strange, needed = {}, beams | f1336_only | tr36814_only, []
        build = Isotropic
    problems = _strange_key_problems(name, formula, strange)
    problems += _missing_key_problems(name, formula, {key: own[key] for key in needed})
    if formula != "F.1336-5":  # which checks its own, narrower range
        problems += range_problems(
            name, "frequency_mhz", frequency_mhz, 0.0, 300_000.0, unit="MHz", above=True
        )
    notes: tuple[str, ...] = ()
    if (
        formula == "F.1336-5"
        and azimuth_beamwidth_deg is not None
        and elevation_beamwidth_deg is None
    ):
        own["elevation_beamwidth_deg"], notes, trouble = _estimate(
            name, gain_dbi, azimuth_beamwidth_deg
        )
        problems += trouble
    # A stand-in beam, never returned, lets the remaining values be checked in the same go.
    complete = {key: 10.0 for key in needed if own[key] is None}
    given = {key: value for key, value in own.items() if value is not None} | complete
    if formula == "F.1336-5":
        given.setdefault("elevation_beamwidth_deg", 10.0)
    try:
        pattern = build(name=name, gain_dbi=gain_dbi, notes=notes, **given)
    except PatternError as error:
        raise PatternError(problems + list(error.problems)) from None
    raise_problems(problems)
    return pattern


def _strange_key_problems(name: str, formula: str, values: Mapping[str, Any]) -> list[Problem]:
    return [
        Problem(
            where=f"antenna.{name}.{key}",
            found=repr(value),
            allowed=f'nothing: the formula "{formula}" has no {key}',
            advice="Leave the key out or choose another formula",
        )
        for key, value in values.items()
        if value is not None
    ]


def _missing_key_problems(name: str, formula: str, values: Mapping[str, Any]) -> list[Problem]:
    return [
        Problem(
            where=f"antenna.{name}.{key}",
            found="nothing",
            allowed=f'a beamwidth in degrees, which the formula "{formula}" needs',
        )
        for key, value in values.items()
        if value is None
    ]


def _estimate(
    name: str, gain_dbi: float, azimuth_beamwidth_deg: float
) -> tuple[float | None, tuple[str, ...], list[Problem]]:
    """Elevation beamwidth that the plan leaves out, the note that says so, what forbids it."""
    if not (azimuth_beamwidth_deg > 0.0 and LOWEST_GAIN_DBI <= gain_dbi <= HIGHEST_GAIN_DBI):
        return None, (), []  # reported where these two are checked
    estimate_deg = estimated_elevation_beamwidth_deg(gain_dbi, azimuth_beamwidth_deg)
    where = f"antenna.{name}.elevation_beamwidth_deg"
    if azimuth_beamwidth_deg > WIDEST_SECTOR_DEG:
        reason = (
            f"a beamwidth in degrees: it can be estimated from the gain only for azimuth "
            f"beamwidths up to {WIDEST_SECTOR_DEG:g} deg"
        )
        return None, (), [Problem(where=where, found="nothing", allowed=reason)]
    lowest_deg, highest_deg = ELEVATION_BEAMWIDTHS_DEG
    if not lowest_deg <= estimate_deg < highest_deg:
        reason = (
            f"a beamwidth in degrees: the estimate from {gain_dbi:g} dBi and "
            f"{azimuth_beamwidth_deg:g} deg is {estimate_deg:.3g} deg, outside "
            f"{lowest_deg:g} to below {highest_deg:g} deg"
        )
        return None, (), [Problem(where=where, found="nothing", allowed=reason)]
    note = (
        f"Elevation beamwidth not given: {estimate_deg:.2f} degrees estimated from the gain and "
        "the azimuth beamwidth (ITU-R F.1336-5)."
    )
    return estimate_deg, (note,), []
