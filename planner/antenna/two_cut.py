"""A pattern put together from a measured horizontal and a vertical cut."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from planner.antenna.beamwidth import half_power_beamwidth_deg
from planner.antenna.pattern import (
    Pattern,
    checked_angles,
    gain_notes,
    gain_problems,
    raise_problems,
    with_notes,
)
from planner.errors import Problem

WIDEST_GAP_DEG = 30.0  # between neighbouring points of a cut; more would be guessing
LOWEST_LEVEL_DB = -200.0
PEAK_TOLERANCE_DB = 0.5  # a sampled cut may miss its own peak by this much
SAME_LEVEL_DB = 0.01  # one direction given twice, as 0 and 360

Cut = tuple[NDArray[np.float64], NDArray[np.float64]]  # angle and level, angles increasing


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class TwoCutPattern(Pattern):
    """Gain as peak gain plus the levels of both cuts, in dB; made by :func:`two_cut_pattern`.

    Between the points of a cut the level in dB is interpolated linearly, in the horizontal cut all
    around the circle. The plain sum of the two levels is exact in both cuts and a convention off
    them: there it tends to tell too little gain behind and beside the antenna.

    Electrical downtilt shifts the vertical cut downwards at all azimuths. Where that asks for
    directions beyond the zenith, the cut's own points there are used if the file has them, else
    the level at its end.
    """

    horizontal_angle_deg: NDArray[np.float64]  # -180 to 180, both ends present
    horizontal_level_db: NDArray[np.float64]  # 0 at the highest point
    vertical_angle_deg: NDArray[np.float64]  # positive upwards, at least -90 to 90
    vertical_level_db: NDArray[np.float64]

    def gain(
        self,
        azimuth_offset_deg: ArrayLike,
        elevation_deg: ArrayLike,
        *,
        electrical_downtilt_deg: float | None = None,
    ) -> NDArray[np.float64]:
        """Gain towards a direction: see :meth:`Pattern.gain`."""
        steering_deg = self.steering_deg(electrical_downtilt_deg)
        azimuth_deg, elevation = checked_angles(azimuth_offset_deg, elevation_deg)
        horizontal_db = np.interp(azimuth_deg, self.horizontal_angle_deg, self.horizontal_level_db)
        vertical_db = np.interp(
            elevation + steering_deg, self.vertical_angle_deg, self.vertical_level_db
        )
        return np.asarray(self.gain_dbi + horizontal_db + vertical_db)


def two_cut_pattern(
    *,
    name: str,
    gain_dbi: float,
    horizontal_angle_deg: ArrayLike,
    horizontal_level_db: ArrayLike,
    vertical_angle_deg: ArrayLike,
    vertical_level_db: ArrayLike,
    notes: tuple[str, ...] = (),
) -> TwoCutPattern:
    """Pattern from the points of two cuts.

    Parameters
    ----------
    name : str
        As in the plan.
    gain_dbi : float
        Gain where both levels are 0. [dBi]
    horizontal_angle_deg, vertical_angle_deg : array of n
        -180 to 180 or 0 to 360, in any order. Horizontal: clockwise from the boresight seen from
        above, all around. Vertical: elevation, positive upwards, at least -90 to 90. [deg]
    horizontal_level_db, vertical_level_db : array of n
        Relative to the cut's own peak, 0 or negative. [dB]

    Raises
    ------
    PatternError
        With every problem found: a cut that is not complete, levels that are not relative to the
        peak, one angle with two levels.

    Notes
    -----
    A cut whose highest point lies within 0.5 dB below 0 is raised to 0, and a note says so.
    """
    problems = gain_problems(name, gain_dbi)
    said = list(notes)
    horizontal = _cut(name, "horizontal", horizontal_angle_deg, horizontal_level_db, problems, said)
    vertical = _cut(name, "vertical", vertical_angle_deg, vertical_level_db, problems, said)
    raise_problems(problems)
    arrays = (*horizontal, *vertical)
    for array in arrays:
        array.setflags(write=False)
    vertical_goes_around = bool(vertical[0][-1] - vertical[0][0] == 360.0)
    beams = (
        half_power_beamwidth_deg(*horizontal, around=True),
        half_power_beamwidth_deg(*vertical, around=vertical_goes_around),
    )
    return TwoCutPattern(
        name=name,
        gain_dbi=gain_dbi,
        azimuth_beamwidth_deg=beams[0],
        elevation_beamwidth_deg=beams[1],
        notes=with_notes(tuple(said), gain_notes(gain_dbi, *beams)),
        horizontal_angle_deg=arrays[0],
        horizontal_level_db=arrays[1],
        vertical_angle_deg=arrays[2],
        vertical_level_db=arrays[3],
    )


def _cut(
    name: str,
    which: str,
    angle_deg: ArrayLike,
    level_db: ArrayLike,
    problems: list[Problem],
    notes: list[str],
) -> Cut:
    """Points of a cut in order of angle, -180 to 180 where they go around; problems are added."""
    where = f"antenna.{name}: {which} cut"
    angles = np.array(angle_deg, dtype=float).ravel()
    levels = np.array(level_db, dtype=float).ravel()
    found_before = len(problems)
    if angles.size != levels.size:
        problems.append(
            Problem(where=where, found=f"{angles.size} angles and {levels.size} levels",
                    allowed="as many levels as angles")
        )  # fmt: skip
        return angles, levels
    if angles.size == 0:
        problems.append(Problem(where=where, found="no points", allowed="a whole cut"))
        return angles, levels
    problems += _value_problems(where, angles, levels)
    if len(problems) > found_before:
        return angles, levels
    angles, levels = _in_order(where, angles, levels, problems)
    around = _goes_around(angles)
    if around:
        angles, levels = _closed(angles, levels)
    problems += _gap_problems(where, which, angles, around)
    peak_db = float(levels.max())
    if peak_db < -PEAK_TOLERANCE_DB:
        problems.append(
            Problem(where=where, found=f"highest level {peak_db:g} dB",
                    allowed="0 dB at the peak of the cut",
                    advice="Subtract the highest level from every level of this cut")
        )  # fmt: skip
    elif peak_db < 0.0:
        levels = levels - peak_db
        notes.append(f"The {which} cut's highest level, {peak_db:g} dB, was raised to 0 dB.")
    return angles, levels


def _value_problems(
    where: str, angles: NDArray[np.float64], levels: NDArray[np.float64]
) -> list[Problem]:
    problems = []
    for angle in angles[~((angles >= -180.0) & (angles <= 360.0))]:
        problems.append(
            Problem(where=where, found=f"angle {angle:g} deg", allowed="-180 to 180 or 0 to 360")
        )
    if not problems and angles.min() < 0.0 and angles.max() > 180.0:
        found = f"angles from {angles.min():g} to {angles.max():g} deg"
        problems.append(Problem(where=where, found=found, allowed="-180 to 180 or 0 to 360"))
    for angle, level in zip(angles, levels, strict=True):
        if not LOWEST_LEVEL_DB <= level <= 0.0:
            problems.append(
                Problem(where=where, found=f"level {level:g} dB at {angle:g} deg",
                        allowed=f"{LOWEST_LEVEL_DB:g} to 0 dB, relative to the peak")
            )  # fmt: skip
    return problems


def _in_order(
    where: str,
    angles: NDArray[np.float64],
    levels: NDArray[np.float64],
    problems: list[Problem],
) -> Cut:
    """Points with -180 <= angle < 180 in order, each direction once."""
    reduced = np.where(angles >= 180.0, angles - 360.0, angles)
    order = np.argsort(reduced, kind="stable")
    reduced, levels = reduced[order], levels[order]
    again = np.flatnonzero(np.diff(reduced) == 0.0)
    for index in again[np.abs(levels[again + 1] - levels[again]) > SAME_LEVEL_DB]:
        found = f"{levels[index]:g} and {levels[index + 1]:g} dB at {reduced[index]:g} deg"
        problems.append(Problem(where=where, found=found, allowed="one level for each direction"))
    kept = np.concatenate(([True], np.diff(reduced) > 0.0))
    return reduced[kept], levels[kept]


def _goes_around(angles: NDArray[np.float64]) -> bool:
    return bool(360.0 - (angles[-1] - angles[0]) <= WIDEST_GAP_DEG)


def _closed(angles: NDArray[np.float64], levels: NDArray[np.float64]) -> Cut:
    """The same points with both -180 and 180 present, so that there is no seam."""
    seam_db = np.interp(180.0, [angles[-1], angles[0] + 360.0], [levels[-1], levels[0]])
    if angles[0] > -180.0:
        angles = np.concatenate(([-180.0], angles))
        levels = np.concatenate(([seam_db], levels))
    return np.append(angles, 180.0), np.append(levels, seam_db)


def _gap_problems(
    where: str, which: str, angles: NDArray[np.float64], around: bool
) -> list[Problem]:
    problems = []
    if which == "horizontal" and not around:
        problems.append(
            Problem(where=where, found=f"angles from {angles[0]:g} to {angles[-1]:g} deg",
                    allowed="the whole circle", advice="Give both sides of the antenna")
        )  # fmt: skip
    if which == "vertical" and not around and (angles[0] > -90.0 or angles[-1] < 90.0):
        problems.append(
            Problem(where=where, found=f"angles from {angles[0]:g} to {angles[-1]:g} deg",
                    allowed="at least -90 to 90 deg, positive upwards")
        )  # fmt: skip
    for index in np.flatnonzero(np.diff(angles) > WIDEST_GAP_DEG):
        found = f"no point between {angles[index]:g} and {angles[index + 1]:g} deg"
        problems.append(
            Problem(where=where, found=found, allowed=f"gaps of {WIDEST_GAP_DEG:g} deg at most")
        )
    return problems
