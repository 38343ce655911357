"""Points of one cut as they are gathered from a file, and what can be wrong with them."""

import math
from dataclasses import dataclass, field
from itertools import pairwise

import numpy as np
from numpy.typing import NDArray

from planner.io.pattern_files.model import DIPOLE_GAIN_DBI, CutName, LevelUnit, PatternCut
from planner.io.pattern_files.text import MOST_POINTS, Faults, number_in, quoted

LOWEST_LEVEL_DB = -200.0
HIGHEST_LEVEL_DBI = 60.0
SAME_LEVEL_DB = 0.01  # one direction given twice, as 0 and 360
_LOGARITHMIC = ("DBR", "DBI", "DBD")


@dataclass(slots=True)
class GatheredCut:
    """A cut that is being read."""

    name: CutName
    first_line: int
    azimuth_deg: float | None = None
    polarization: str = ""
    declared_points: int | None = None
    declared_line: int = 0
    declared_ends: tuple[float, float] | None = None
    ends_line: int = 0
    angle_deg: list[float] = field(default_factory=list)
    level: list[float] = field(default_factory=list)
    phase_deg: list[float] = field(default_factory=list)
    lines: list[int] = field(default_factory=list)
    label: str = ""  # in a message, where the name is not what the file says
    spoilt: int = 0  # points that could not be read and are told already

    def title(self) -> str:
        """The cut in words."""
        if self.label:
            return f"the {self.label} cut"
        which = self.name if self.azimuth_deg is None else f"{self.azimuth_deg:g} deg"
        return f"cut {which} {self.polarization}".rstrip()

    def cut(self) -> PatternCut:
        """The cut with its points."""
        return PatternCut(
            name=self.name,
            azimuth_deg=self.azimuth_deg,
            polarization=self.polarization,
            angle_deg=np.array(self.angle_deg, dtype=float),
            level=np.array(self.level, dtype=float),
            phase_deg=np.array(self.phase_deg) if self.phase_deg else None,
            lines=np.array(self.lines, dtype=np.int64),
            first_line=self.first_line,
        )


class PointCounter:
    """Counts the points of a file against what one file may hold."""

    def __init__(self, faults: Faults) -> None:
        self._faults = faults
        self._points = 0

    def add(self, line: int) -> None:
        """One more point; raises ``PatternError`` with all that was found where it is too many."""
        self._points += 1
        if self._points > MOST_POINTS:
            found = f"more than {MOST_POINTS:,} points"
            self._faults.stop(line, found, "that many in one file")


def add_point(
    cut: GatheredCut,
    line: int,
    texts: list[str],
    level_unit: LevelUnit,
    faults: Faults,
    advice: str = "",
) -> None:
    """Take an angle, a level and perhaps a phase; what cannot be used is told."""
    names = ("angle", "level", "phase")
    numbers = [number_in(text) for text in texts]
    bad = [i for i, number in enumerate(numbers) if math.isnan(number)]
    for index in bad:
        faults.add(line, f"{names[index]} {quoted(texts[index].strip())}", "a number", advice)
    if bad:
        cut.spoilt += 1
        return
    angle_deg, level = numbers[:2]
    fault = angle_fault(angle_deg)
    if fault:
        faults.add(line, *fault)
    level_problem = level_fault(level, level_unit)
    if level_problem:
        faults.add(line, *level_problem)
    if fault or level_problem:
        cut.spoilt += 1
        return
    cut.angle_deg.append(angle_deg)
    cut.level.append(level)
    if len(numbers) > 2:
        cut.phase_deg.append(numbers[2])
    cut.lines.append(line)


def angle_fault(angle_deg: float) -> tuple[str, str] | None:
    """(found, allowed) where an angle lies off the circle."""
    if -180.0 <= angle_deg <= 360.0:
        return None
    return f"angle {angle_deg:g} deg", "-180 to 180 or 0 to 360"


def level_fault(level: float, unit: LevelUnit) -> tuple[str, ...] | None:
    """(found, allowed, advice) where a level cannot be one in its unit."""
    if unit == "DBR":
        if LOWEST_LEVEL_DB <= level <= 0.0:
            return None
        allowed = f"{LOWEST_LEVEL_DB:g} to 0 dB, relative to the peak"
        advice = ""
        if level > 0.0:
            advice = "Gains in dBi or dBd need a unit that says so, losses the other sign"
        return f"level {level:g} dB", allowed, advice
    if unit in _LOGARITHMIC:
        if LOWEST_LEVEL_DB <= level <= HIGHEST_LEVEL_DBI:
            return None
        return f"level {level:g}", f"{LOWEST_LEVEL_DB:g} to {HIGHEST_LEVEL_DBI:g} {unit}", ""
    highest = 1.0 if unit == "LPR" else 10.0 ** (HIGHEST_LEVEL_DBI / 10.0)
    if 10.0 ** (LOWEST_LEVEL_DB / 10.0) <= level <= highest:
        return None
    advice = "No power at all has no level in dB: give the least that was measurable"
    return f"level {level:g}", f"above 0, up to {highest:g} {unit}", advice if level == 0.0 else ""


def decibels(level: NDArray[np.float64], unit: LevelUnit) -> NDArray[np.float64]:
    """Levels of a file in dB: over the peak, or over isotropic where the unit is absolute."""
    if unit in ("LPR", "LPI"):
        return np.asarray(10.0 * np.log10(level))
    return level + DIPOLE_GAIN_DBI if unit == "DBD" else level


def check_order(cut: GatheredCut, level_unit: LevelUnit, faults: Faults) -> None:
    """Angles must increase, and each direction may have one level only."""
    angles = np.array(cut.angle_deg)
    if angles.size < 2:
        return
    steps = np.diff(angles)
    if (steps < 0.0).all():
        found = f"angles that fall all along, from {angles[0]:g} to {angles[-1]:g} deg"
        faults.add(cut.lines[0], found, f"increasing angles in {cut.title()}")
        return
    for index in np.flatnonzero(steps < 0.0):
        found = f"angle {angles[index + 1]:g} deg after {angles[index]:g} deg"
        faults.add(cut.lines[index + 1], found, f"increasing angles in {cut.title()}")
    if angles.min() < 0.0 and angles.max() > 180.0:
        found = f"angles from {angles.min():g} to {angles.max():g} deg"
        faults.add(cut.first_line, found, "-180 to 180 or 0 to 360")
    if (steps >= 0.0).all():
        check_directions(cut, level_unit, faults, exact=True)


def check_directions(
    cut: GatheredCut, level_unit: LevelUnit, faults: Faults, *, exact: bool
) -> None:
    """Each direction once; both ends of a circle may stand if their levels agree.

    ``exact``: the same angle may not stand twice at all, not even with the same level.
    """
    angles = np.array(cut.angle_deg)
    if angles.size < 2:
        return
    levels_db = decibels(np.array(cut.level), level_unit)
    reduced = np.where(angles >= 180.0, angles - 360.0, angles)
    order = np.argsort(reduced, kind="stable")
    for first, again in pairwise(order):
        if reduced[first] != reduced[again]:
            continue
        same_angle = angles[first] == angles[again]
        if not (exact and same_angle) and (
            abs(levels_db[first] - levels_db[again]) <= SAME_LEVEL_DB
        ):
            continue
        found = (
            f"direction {angles[again]:g} deg again, with level {cut.level[again]:g}; line "
            f"{cut.lines[first]} has {angles[first]:g} deg with {cut.level[first]:g}"
        )
        faults.add(cut.lines[again], found, f"one level for each direction of {cut.title()}")


def check_counts(cut: GatheredCut, faults: Faults) -> None:
    """Declared number of points and declared ends against what is there."""
    found = len(cut.angle_deg) + cut.spoilt
    if not cut.angle_deg:
        if not cut.spoilt:
            faults.add(cut.first_line, f"no points in {cut.title()}", "a whole cut")
        return
    ends = cut.angle_deg[0], cut.angle_deg[-1]
    right_ends = cut.declared_ends is None or cut.declared_ends == ends
    declared = cut.declared_points
    if declared is None:
        faults.warn(cut.first_line, f"{cut.title()} has no NUPOIN; {found} points were found")
    elif declared != found:
        steps = np.diff(cut.angle_deg)
        even = bool(steps.size and np.allclose(steps, steps[0], rtol=0.0, atol=1e-6))
        told = f"NUPOIN says {declared:,}, but {found} points stand in {cut.title()}"
        if even and cut.declared_ends == ends and abs(declared - found) == 1:
            faults.warn(
                cut.declared_line,
                f"{told}; they run evenly from the first to the last angle of FSTLST, so all of "
                "them were read",
            )
        else:
            faults.add(
                cut.declared_line,
                f"{declared:,} points declared for {cut.title()}",
                f"{found}, as many as there are",
                "Points may be lost: compare with the source",
            )
            return
    if not right_ends and cut.declared_ends is not None and not cut.spoilt:
        first, last = cut.declared_ends
        faults.warn(
            cut.ends_line,
            f"FSTLST says {first:g} to {last:g} deg, but {cut.title()} runs from {ends[0]:g} to "
            f"{ends[1]:g} deg",
        )
