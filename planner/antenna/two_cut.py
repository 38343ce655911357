"""A pattern put together from a horizontal and a vertical cut."""

import math
from dataclasses import dataclass
from typing import get_args

import numpy as np
from numpy.typing import ArrayLike, NDArray

from planner.antenna.beamwidth import half_power_beamwidth_deg, middle_of_peak_deg
from planner.antenna.interpolation import (
    INTERPOLATIONS,
    Interpolation,
    cross_weighted_db,
    projected_db,
    summed_db,
)
from planner.antenna.pattern import (
    HIGHEST_TILT_DEG,
    Pattern,
    PatternKind,
    checked_angles,
    gain_notes,
    gain_problems,
    raise_problems,
    range_problems,
    with_notes,
)
from planner.errors import Problem

WIDEST_GAP_DEG = 30.0  # between neighbouring points of a cut; more would be guessing
LOWEST_LEVEL_DB = -200.0
PEAK_TOLERANCE_DB = 0.5  # a sampled cut may miss its own peak by this much
SAME_LEVEL_DB = 0.01  # one direction given twice, as 0 and 360
REAR_NOTE = (
    "The vertical cut has no half behind the antenna: it was made up from the front half and the "
    "horizontal cut."
)
_FADES_FROM_POLE_DEG = 45.0  # as far as a tilt may go: so the order of elevations is kept
_LEAST_COSINE = 0.1  # of the elevation of the peak: above 84 degrees there is no horizontal cut

Cut = tuple[NDArray[np.float64], NDArray[np.float64]]  # angle and level, angles increasing


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class TwoCutPattern(Pattern):
    """Gain as peak gain plus a level put together from both cuts; see :func:`two_cut_pattern`.

    Between the points of a cut the level in dB is interpolated linearly around the circle, without
    a seam. Off the cuts ``interpolation`` says how they are put together, see
    :mod:`planner.antenna.interpolation`.

    Electrical downtilt steers the vertical cut: up to 45 degrees from the horizon it is shifted
    downwards by the tilt, at all azimuths; from there the shift fades, so that straight up and down
    stay where they are. A tilt that the cuts carry already is not applied again.
    """

    kind: PatternKind = "measured"
    electrical_downtilt_deg: float = 0.0
    interpolation: Interpolation = "projected"
    horizontal_angle_deg: NDArray[np.float64]  # -180 to 180, both ends present
    horizontal_level_db: NDArray[np.float64]  # 0 at the highest point
    vertical_angle_deg: NDArray[np.float64]  # the same; positive upwards, beyond 90 behind
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
        elevation = _steered_deg(elevation, steering_deg)
        horizontal_db = self._horizontal_db(azimuth_deg)
        vertical_db = self._vertical_db(elevation)
        if self.interpolation == "sum":
            return np.asarray(self.gain_dbi + summed_db(horizontal_db, vertical_db))
        if self.interpolation == "cross-weighted":
            return np.asarray(self.gain_dbi + cross_weighted_db(horizontal_db, vertical_db))
        peak_azimuth_deg, peak_elevation_deg = self._peak_deg()
        shares = np.cos(np.radians(elevation)) / max(
            math.cos(math.radians(peak_elevation_deg)), _LEAST_COSINE
        )
        level_db = projected_db(
            horizontal_db,
            vertical_db,
            self._vertical_db(_behind_deg(elevation)),
            rear_share=0.5 - 0.5 * np.cos(np.radians(azimuth_deg - peak_azimuth_deg)),
            horizon_share=np.minimum(shares, 1.0),
            rear_db=float(self._vertical_db(_behind_deg(np.asarray(peak_elevation_deg)))),
        )
        return np.asarray(self.gain_dbi + level_db)

    def _horizontal_db(self, azimuth_deg: NDArray[np.float64]) -> NDArray[np.float64]:
        return np.interp(azimuth_deg, self.horizontal_angle_deg, self.horizontal_level_db)

    def _vertical_db(self, angle_deg: NDArray[np.float64]) -> NDArray[np.float64]:
        return np.interp(angle_deg, self.vertical_angle_deg, self.vertical_level_db)

    def _peak_deg(self) -> tuple[float, float]:
        """Azimuth of the horizontal cut's peak, elevation of the vertical cut's in front."""
        front = np.abs(self.vertical_angle_deg) <= 90.0
        return (
            middle_of_peak_deg(self.horizontal_angle_deg, self.horizontal_level_db),
            middle_of_peak_deg(self.vertical_angle_deg[front], self.vertical_level_db[front]),
        )


def two_cut_pattern(
    *,
    name: str,
    gain_dbi: float,
    horizontal_angle_deg: ArrayLike,
    horizontal_level_db: ArrayLike,
    vertical_angle_deg: ArrayLike,
    vertical_level_db: ArrayLike,
    interpolation: Interpolation = "projected",
    kind: PatternKind = "measured",
    electrical_downtilt_deg: float = 0.0,
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
        above, all around, at the elevation of the peak. Vertical: elevation, positive upwards, at
        least -90 to 90, at the azimuth of the peak; beyond 90 it goes down behind the antenna.
        [deg]
    horizontal_level_db, vertical_level_db : array of n
        Relative to the cut's own peak, 0 or negative. [dB]
    interpolation : "projected", "cross-weighted" or "sum"
        How the cuts are put together off them: see :mod:`planner.antenna.interpolation`.
    kind : "measured", "model" or "envelope"
        What the levels are.
    electrical_downtilt_deg : float
        Tilt that the cuts already carry, positive downwards, -45 to 45. [deg]

    Raises
    ------
    PatternError
        With every problem found: a cut that is not complete, levels that are not relative to the
        peak, one angle with two levels.

    Notes
    -----
    A cut whose highest point lies within 0.5 dB below 0 is raised to 0, and a note says so. So
    does a note where the vertical cut has no half behind the antenna: then that half is taken to be
    the front's, shrunk so as to begin at the level straight up or down and to end at that of the
    horizontal cut behind; straight lines, where the antenna is stronger straight up than behind.
    """
    problems = gain_problems(name, gain_dbi)
    problems += range_problems(
        name, "electrical_downtilt_deg", electrical_downtilt_deg, -HIGHEST_TILT_DEG,
        HIGHEST_TILT_DEG, unit="deg, positive downwards",
    )  # fmt: skip
    for key, value, allowed in (
        ("interpolation", interpolation, INTERPOLATIONS),
        ("kind", kind, get_args(PatternKind)),
    ):
        if value not in allowed:
            words = ", ".join(f'"{word}"' for word in allowed)
            where = f"antenna.{name}.{key}"
            problems.append(Problem(where=where, found=repr(value), allowed=words))
    said = list(notes)
    horizontal = _cut(name, "horizontal", horizontal_angle_deg, horizontal_level_db, problems, said)
    vertical = _cut(name, "vertical", vertical_angle_deg, vertical_level_db, problems, said)
    raise_problems(problems)
    around = bool(vertical[0][-1] - vertical[0][0] == 360.0)
    beams = (
        half_power_beamwidth_deg(*horizontal, around=True),
        half_power_beamwidth_deg(*vertical, around=around),
    )
    if not around:
        peak_deg = middle_of_peak_deg(*horizontal)
        opposite_deg = peak_deg - 180.0 if peak_deg > 0.0 else peak_deg + 180.0
        vertical = _with_rear_half(vertical, float(np.interp(opposite_deg, *horizontal)))
        said.append(REAR_NOTE)
    arrays = (*horizontal, *vertical)
    for array in arrays:
        array.setflags(write=False)
    return TwoCutPattern(
        name=name,
        gain_dbi=gain_dbi,
        azimuth_beamwidth_deg=beams[0],
        elevation_beamwidth_deg=beams[1],
        notes=with_notes(tuple(said), gain_notes(gain_dbi, *beams)),
        kind=kind,
        electrical_downtilt_deg=electrical_downtilt_deg,
        interpolation=interpolation,
        horizontal_angle_deg=arrays[0],
        horizontal_level_db=arrays[1],
        vertical_angle_deg=arrays[2],
        vertical_level_db=arrays[3],
    )


def _steered_deg(elevation_deg: NDArray[np.float64], steering_deg: float) -> NDArray[np.float64]:
    """Elevation in the vertical cut, of an elevation when the beam is steered down; order kept."""
    to_pole = np.minimum(1.0, (90.0 - np.abs(elevation_deg)) / _FADES_FROM_POLE_DEG)
    return elevation_deg + steering_deg * to_pole


def _behind_deg(elevation_deg: NDArray[np.float64]) -> NDArray[np.float64]:
    """Angle in the vertical cut of an elevation behind the antenna, -180 to 180."""
    return np.copysign(180.0, elevation_deg) - elevation_deg


def _with_rear_half(front: Cut, rear_db: float) -> Cut:
    """A vertical cut from -180 to 180, made up behind the antenna, where it ends at ``rear_db``.

    An antenna as strong behind as in front gets the same half once more.
    """
    angles, levels = front
    poles_db = np.interp([-90.0, 90.0], angles, levels)
    made = [front]
    for sign, pole_db in zip((-1.0, 1.0), poles_db, strict=True):
        elevations = np.unique(np.clip(np.append(sign * angles, 0.0), 0.0, 90.0))
        elevations = elevations[180.0 - elevations > (sign * angles).max()]
        height = elevations / 90.0
        if (poles_db < min(rear_db, -SAME_LEVEL_DB)).all():
            deepest_db = poles_db.mean() + (pole_db - poles_db.mean()) * height
            depth = np.interp(sign * elevations, angles, levels) / deepest_db
            behind_db = rear_db + (deepest_db - rear_db) * depth
        else:
            behind_db = rear_db + (pole_db - rear_db) * height
        made.append((sign * (180.0 - elevations), behind_db))
    angles, levels = (np.concatenate(parts) for parts in zip(*made, strict=True))
    order = np.argsort(angles)
    return angles[order], np.maximum(levels[order], LOWEST_LEVEL_DB)


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
