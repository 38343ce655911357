"""The antenna patterns of a plan: one for each antenna and radio that go together."""

from dataclasses import replace
from pathlib import Path
from typing import Any

from planner.antenna import Pattern, TwoCutPattern, formula_pattern
from planner.errors import PatternError, Problem
from planner.io.pattern_files import PatternFile, pattern_of, read_pattern_file
from planner.plan.checks import NOT_OF_THE_PATTERN, Rest, trouble_with_file
from planner.plan.findings import Findings
from planner.plan.shown import shown
from planner.plan.toml_file import Location

# An antenna that no sector uses is checked all the same, at a frequency where every formula holds.
_ANY_FREQUENCY_MHZ = 5000.0
_COUNTS = ("rows", "columns")  # stay whole numbers


def built_patterns(findings: Findings, rest: Rest) -> dict[tuple[str, str], Pattern]:
    """Patterns by (antenna, radio) of all sectors; what is wrong goes into the findings.

    Their electrical tilt is the antenna's whole tilt: what a file's levels hold is not applied
    twice.
    """
    antennas, radios = rest.get("antenna") or {}, rest.get("radio") or {}
    pairs = _pairs(rest, antennas, radios)
    polarization = (rest.get("model") or {}).get("polarization") or "vertical"
    builder = _Builder(findings, polarization)
    built: dict[tuple[str, float | None], Pattern | None] = {}
    patterns = {}
    for antenna, radio in pairs:
        frequency_mhz = (radios[radio] or {}).get("frequency_mhz")
        key = antenna, None if frequency_mhz is None else float(frequency_mhz)
        if key not in built:
            built[key] = builder.pattern(antenna, antennas[antenna], radio, key[1])
        pattern = built[key]
        if pattern is not None:
            patterns[antenna, radio] = pattern
    used = {antenna for antenna, _ in pairs}
    for antenna in antennas:
        if antenna not in used:
            builder.pattern(antenna, antennas[antenna], "", None)
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


class _Builder:
    """Builds patterns one by one; reads each file once."""

    def __init__(self, findings: Findings, polarization: Any) -> None:
        self._findings, self._polarization = findings, polarization
        self._files: dict[Path, PatternFile] = {}

    def pattern(
        self, antenna: str, keys: Any, radio: str, frequency_mhz: float | None
    ) -> Pattern | None:
        """One pattern; None where something is wrong with it, which is then among the findings."""
        sound = isinstance(keys, dict) and None not in keys.values()
        if not sound or ("file" in keys) == ("formula" in keys):
            return None
        if "formula" in keys and "gain_dbi" not in keys:
            return None
        try:
            if "formula" in keys:
                return self._of_formula(antenna, keys, frequency_mhz)
            return self._of_file(antenna, keys, frequency_mhz)
        except PatternError as error:
            for problem in error.problems:
                _add_pattern_problem(self._findings, antenna, radio, problem)
            return None

    def _of_formula(self, antenna: str, keys: Rest, frequency_mhz: float | None) -> Pattern:
        others: dict[str, Any] = {
            key: float(value) if isinstance(value, int) and key not in _COUNTS else value
            for key, value in keys.items()
            if key not in ("formula", "gain_dbi", "interpolation", *NOT_OF_THE_PATTERN)
        }
        return formula_pattern(
            antenna,
            keys["formula"],
            frequency_mhz=frequency_mhz or _ANY_FREQUENCY_MHZ,
            gain_dbi=float(keys["gain_dbi"]),
            **others,
        )

    def _of_file(self, antenna: str, keys: Rest, frequency_mhz: float | None) -> Pattern | None:
        path = self._findings.file.path.parent / keys["file"]
        if trouble_with_file(path):
            return None
        if path not in self._files:
            self._files[path] = read_pattern_file(path)
        gain_dbi = keys.get("gain_dbi")
        pattern = pattern_of(
            self._files[path],
            name=antenna,
            gain_dbi=None if gain_dbi is None else float(gain_dbi),
            frequency_mhz=frequency_mhz,
            polarization=self._polarization,
        )
        if "interpolation" not in keys:
            return pattern
        if not isinstance(pattern, TwoCutPattern):
            self._findings.add(
                ("antenna", antenna, "interpolation"),
                found=shown(keys["interpolation"]),
                allowed="nothing: the file holds levels all over the sphere",
            )
            return None
        return replace(pattern, interpolation=keys["interpolation"])


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
