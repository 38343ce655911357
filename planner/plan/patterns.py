"""The antenna patterns of a plan: one for each antenna and radio that go together."""

from dataclasses import replace
from typing import Any

from planner.antenna import Pattern, formula_pattern
from planner.errors import PatternError, Problem
from planner.io.pattern_files import read_two_cut_csv
from planner.plan.checks import Rest, trouble_with_file
from planner.plan.findings import Findings
from planner.plan.shown import shown
from planner.plan.toml_file import Location

# An antenna that no sector uses is checked all the same, at a frequency where every formula holds.
_ANY_FREQUENCY_MHZ = 5000.0
_COUNTS = ("rows", "columns")  # stay whole numbers


def built_patterns(findings: Findings, rest: Rest) -> dict[tuple[str, str], Pattern]:
    """Patterns by (antenna, radio) of all sectors; what is wrong goes into the findings."""
    antennas, radios = rest.get("antenna") or {}, rest.get("radio") or {}
    pairs = _pairs(rest, antennas, radios)
    built: dict[tuple[str, float | None], Pattern | None] = {}  # a file holds at any frequency
    patterns = {}
    for antenna, radio in pairs:
        frequency_mhz = (radios[radio] or {}).get("frequency_mhz") or _ANY_FREQUENCY_MHZ
        key = antenna, None if "file" in (antennas[antenna] or {}) else float(frequency_mhz)
        if key not in built:
            built[key] = _built(findings, antenna, antennas[antenna], radio, float(frequency_mhz))
        pattern = built[key]
        if pattern is not None:
            patterns[antenna, radio] = pattern
    used = {antenna for antenna, _ in pairs}
    for antenna in antennas:
        if antenna not in used:
            _built(findings, antenna, antennas[antenna], "", _ANY_FREQUENCY_MHZ)
    _check_tilts(findings, rest, patterns)
    return patterns


def _check_tilts(findings: Findings, rest: Rest, patterns: dict[tuple[str, str], Pattern]) -> None:
    """Electrical tilts that an antenna cannot have."""
    for number, tower in enumerate(rest.get("tower") or []):
        for place, sector in enumerate((tower or {}).get("sector") or []):
            keys: Rest = sector or {}
            antenna_and_radio: Any = keys.get("antenna"), keys.get("radio")
            tilt_deg = keys.get("electrical_downtilt_deg")
            if antenna_and_radio not in patterns or tilt_deg is None:
                continue
            try:
                patterns[antenna_and_radio].steering_deg(tilt_deg)
            except PatternError as error:
                location = ("tower", number, "sector", place, "electrical_downtilt_deg")
                for problem in error.problems:
                    findings.add(location, found=problem.found, allowed=problem.allowed)


def _pairs(rest: Rest, antennas: Rest, radios: Rest) -> list[tuple[Any, Any]]:
    """(antenna, radio) of all sectors, each once, as far as there are such tables."""
    sectors = [
        sector or {}
        for tower in rest.get("tower") or []
        for sector in (tower or {}).get("sector") or []
    ]
    pairs = [(sector.get("antenna"), sector.get("radio")) for sector in sectors]
    return list(dict.fromkeys((a, r) for a, r in pairs if a in antennas and r in radios))


def _built(
    findings: Findings, antenna: str, keys: Any, radio: str, frequency_mhz: float
) -> Pattern | None:
    """One pattern; None where something is wrong with it, which is then among the findings."""
    sound = isinstance(keys, dict) and None not in keys.values() and "gain_dbi" in keys
    if not sound or ("file" in keys) == ("formula" in keys):
        return None
    gain_dbi = float(keys["gain_dbi"])
    try:
        if "formula" in keys:
            others: dict[str, Any] = {
                key: float(value) if isinstance(value, int) and key not in _COUNTS else value
                for key, value in keys.items()
                if key not in ("formula", "gain_dbi", "interpolation")
            }
            return formula_pattern(
                antenna,
                keys["formula"],
                frequency_mhz=frequency_mhz,
                gain_dbi=gain_dbi,
                **others,
            )
        path = findings.file.path.parent / keys["file"]
        if trouble_with_file(path):
            return None
        cuts = read_two_cut_csv(path, name=antenna, gain_dbi=gain_dbi)
        if "interpolation" in keys:
            cuts = replace(cuts, interpolation=keys["interpolation"])
        return cuts
    except PatternError as error:
        for problem in error.problems:
            _add_pattern_problem(findings, antenna, radio, problem)
        return None


def _add_pattern_problem(findings: Findings, antenna: str, radio: str, problem: Problem) -> None:
    """A problem of an antenna formula or file, at the key of the plan that it comes from."""
    found = problem.found
    start = f"antenna.{antenna}."
    if not problem.where.startswith(start):  # it lies in the file
        location: Location = ("antenna", antenna, "file")
        found = f"{problem.where}: {found}"
    elif problem.where == f"{start}frequency_mhz":
        location = ("radio", radio, "frequency_mhz")
        found = f"{found}, used with antenna {shown(antenna)}"
    else:
        location = ("antenna", antenna, problem.where.removeprefix(start))
    findings.add(location, found=found, allowed=problem.allowed, advice=problem.advice)
