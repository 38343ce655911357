"""A pattern over the whole sphere, given by levels on a grid of azimuth and elevation."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from planner.antenna.beamwidth import half_power_beamwidth_deg
from planner.antenna.pattern import (
    Pattern,
    PatternKind,
    checked_angles,
    gain_problems,
    raise_problems,
    with_notes,
)
from planner.errors import Problem

WIDEST_GAP_DEG = 30.0  # between neighbouring points; more would be guessing
LOWEST_LEVEL_DB = -200.0
PEAK_TOLERANCE_DB = 0.5  # a sampled sphere may miss its own peak by this much
SAME_LEVEL_DB = 0.01  # one direction given twice, as 0 and 360
SHIFTED_UP_TO_DEG = 45.0  # elevations that electrical tilt moves as they are


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class GridPattern(Pattern):
    """Gain by interpolation between the points of a grid; made by :func:`grid_pattern`.

    Between points the level in dB is interpolated linearly in azimuth, all around the circle, and
    in elevation. At the zenith and at the nadir there is one value, whatever the azimuth.

    Electrical downtilt moves the pattern down by the tilt at all azimuths, for elevations from -45
    to 45 degrees; from there to the zenith and the nadir, which stay where they are, the shift
    fades out evenly. Towards the horizon this is what a phase slope along the antenna does; further
    up and down it is our convention.
    """

    kind: PatternKind = "measured"
    electrical_downtilt_deg: float = 0.0
    azimuth_deg: NDArray[np.float64]  # of n, -180 to 180 with both ends, increasing
    elevation_deg: NDArray[np.float64]  # of m, -90 to 90 with both ends, increasing
    level_db: NDArray[np.float64]  # m by n, 0 at the highest point; a pole's row is constant

    def gain(
        self,
        azimuth_offset_deg: ArrayLike,
        elevation_deg: ArrayLike,
        *,
        electrical_downtilt_deg: float | None = None,
    ) -> NDArray[np.float64]:
        """Gain towards a direction: see :meth:`Pattern.gain`."""
        steering_deg = self.steering_deg(electrical_downtilt_deg)
        azimuths, elevations = checked_angles(azimuth_offset_deg, elevation_deg)
        if steering_deg != 0.0:
            edge_deg = SHIFTED_UP_TO_DEG
            elevations = np.interp(
                elevations,
                [-90.0, -edge_deg, edge_deg, 90.0],
                [
                    -90.0,
                    steering_deg - edge_deg,
                    steering_deg + edge_deg,
                    90.0,
                ],
            )
        left, across = _place(self.azimuth_deg, azimuths)
        lower, upwards = _place(self.elevation_deg, elevations)
        below_db = _between(self.level_db[lower, left], self.level_db[lower, left + 1], across)
        above_db = _between(
            self.level_db[lower + 1, left], self.level_db[lower + 1, left + 1], across
        )
        return np.asarray(self.gain_dbi + _between(below_db, above_db, upwards))


def grid_pattern(
    *,
    name: str,
    gain_dbi: float,
    azimuth_deg: ArrayLike,
    elevation_deg: ArrayLike,
    level_db: ArrayLike,
    kind: PatternKind = "measured",
    notes: tuple[str, ...] = (),
) -> GridPattern:
    """Pattern from levels on a grid.

    Parameters
    ----------
    name : str
        As in the plan.
    gain_dbi : float
        Gain where the level is 0. [dBi]
    azimuth_deg : array of n
        Clockwise from the boresight seen from above, -180 to 180 or 0 to 360, all around, in any
        order, neighbours at most 30 degrees apart. [deg]
    elevation_deg : array of m
        Positive upwards, in any order, neighbours at most 30 degrees apart. The outermost may lie
        off the zenith and the nadir by as much as the widest step between neighbours. [deg]
    level_db : array of m by n
        Relative to the peak, 0 or negative. [dB]

    Raises
    ------
    PatternError
        With every problem found.

    Notes
    -----
    Levels at a pole that differ from azimuth to azimuth are replaced by their mean power; where no
    point stands at a pole, its level is the mean power of the nearest ring. Notes say so. A highest
    level within 0.5 dB below 0 is raised to 0, and a note says so.
    """
    azimuths = np.array(azimuth_deg, dtype=float).ravel()
    elevations = np.array(elevation_deg, dtype=float).ravel()
    levels = np.array(level_db, dtype=float)
    problems = gain_problems(name, gain_dbi)
    said = list(notes)
    where = f"antenna.{name}: grid"
    problems += _shape_problems(where, azimuths, elevations, levels)
    raise_problems(problems)
    azimuths, levels = _around(where, azimuths, levels, problems)
    order = np.argsort(elevations, kind="stable")
    elevations, levels = elevations[order], levels[order]
    problems += _gap_problems(where, azimuths, elevations)
    raise_problems(problems)
    peak_db = float(levels.max())
    if peak_db < 0.0:
        levels = levels - peak_db
        said.append(f"The highest level of the grid, {peak_db:g} dB, was raised to 0 dB.")
    elevations, levels = _with_poles(elevations, levels, said)
    for array in (azimuths, elevations, levels):
        array.setflags(write=False)
    row, column = np.unravel_index(int(np.argmax(levels)), levels.shape)
    beams = (
        half_power_beamwidth_deg(azimuths, levels[row], around=True),
        half_power_beamwidth_deg(elevations, levels[:, column], around=False),
    )
    return GridPattern(
        name=name,
        gain_dbi=gain_dbi,
        azimuth_beamwidth_deg=beams[0],
        elevation_beamwidth_deg=beams[1],
        notes=with_notes(tuple(said), ()),
        kind=kind,
        azimuth_deg=azimuths,
        elevation_deg=elevations,
        level_db=levels,
    )


def _place(
    nodes_deg: NDArray[np.float64], angle_deg: NDArray[np.float64]
) -> tuple[NDArray[np.int64], NDArray[np.float64]]:
    """Index of the node at or below each angle, and how far on to the next it lies; NaN stays."""
    index = np.searchsorted(nodes_deg, angle_deg, side="right") - 1
    index = np.clip(index, 0, nodes_deg.size - 2)
    start = nodes_deg[index]
    return index, (angle_deg - start) / (nodes_deg[index + 1] - start)


def _between(
    first: NDArray[np.float64], second: NDArray[np.float64], part: NDArray[np.float64]
) -> NDArray[np.float64]:
    return first + part * (second - first)


def _shape_problems(
    where: str,
    azimuths: NDArray[np.float64],
    elevations: NDArray[np.float64],
    levels: NDArray[np.float64],
) -> list[Problem]:
    if azimuths.size < 2 or elevations.size < 2:
        found = f"{azimuths.size} azimuths and {elevations.size} elevations"
        return [Problem(where=where, found=found, allowed="a whole sphere")]
    if levels.shape != (elevations.size, azimuths.size):
        found = f"levels of shape {levels.shape}"
        allowed = f"{elevations.size} elevations by {azimuths.size} azimuths"
        return [Problem(where=where, found=found, allowed=allowed)]
    problems = []
    allowed = "-180 to 180 or 0 to 360"
    for angle in azimuths[~((azimuths >= -180.0) & (azimuths <= 360.0))]:
        problems.append(Problem(where=where, found=f"azimuth {angle:g} deg", allowed=allowed))
    for angle in elevations[~(np.abs(elevations) <= 90.0)]:
        found = f"elevation {angle:g} deg"
        problems.append(Problem(where=where, found=found, allowed="-90 to 90 deg"))
    if np.unique(elevations).size < elevations.size:
        problems.append(
            Problem(where=where, found="an elevation twice", allowed="each elevation once")
        )
    bad = ~((levels >= LOWEST_LEVEL_DB) & (levels <= 0.0))
    if bad.any():
        row, column = np.argwhere(bad)[0]
        found = (
            f"{int(bad.sum())} levels out of range, first {levels[row, column]:g} dB at azimuth "
            f"{azimuths[column]:g}, elevation {elevations[row]:g} deg"
        )
        allowed = f"{LOWEST_LEVEL_DB:g} to 0 dB, relative to the peak"
        problems.append(Problem(where=where, found=found, allowed=allowed))
    elif levels.max() < -PEAK_TOLERANCE_DB:
        problems.append(
            Problem(where=where, found=f"highest level {levels.max():g} dB",
                    allowed="0 dB at the peak",
                    advice="Subtract the highest level from every level")
        )  # fmt: skip
    return problems


def _around(
    where: str,
    azimuths: NDArray[np.float64],
    levels: NDArray[np.float64],
    problems: list[Problem],
) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Columns in order from -180 to 180, both ends present, each direction once."""
    reduced = np.where(azimuths >= 180.0, azimuths - 360.0, azimuths)
    order = np.argsort(reduced, kind="stable")
    reduced, levels = reduced[order], levels[:, order]
    again = np.flatnonzero(np.diff(reduced) == 0.0)
    for index in again:
        if np.abs(levels[:, index + 1] - levels[:, index]).max() > SAME_LEVEL_DB:
            found = f"two different columns at azimuth {reduced[index]:g} deg"
            problems.append(Problem(where=where, found=found, allowed="each direction once"))
    kept = np.concatenate(([True], np.diff(reduced) > 0.0))
    reduced, levels = reduced[kept], levels[:, kept]
    gap_deg = 360.0 - (reduced[-1] - reduced[0])
    if gap_deg > WIDEST_GAP_DEG:
        found = f"azimuths from {reduced[0]:g} to {reduced[-1]:g} deg"
        problems.append(Problem(where=where, found=found, allowed="the whole circle"))
        return reduced, levels
    part = (180.0 - reduced[-1]) / gap_deg
    seam = levels[:, -1] + part * (levels[:, 0] - levels[:, -1])
    if reduced[0] > -180.0:
        reduced = np.concatenate(([-180.0], reduced))
        levels = np.column_stack((seam, levels))
    return np.append(reduced, 180.0), np.column_stack((levels, seam))


def _gap_problems(
    where: str, azimuths: NDArray[np.float64], elevations: NDArray[np.float64]
) -> list[Problem]:
    problems = []
    for which, angles in (("azimuth", azimuths), ("elevation", elevations)):
        for index in np.flatnonzero(np.diff(angles) > WIDEST_GAP_DEG):
            found = f"no {which} between {angles[index]:g} and {angles[index + 1]:g} deg"
            allowed = f"gaps of {WIDEST_GAP_DEG:g} deg at most"
            problems.append(Problem(where=where, found=found, allowed=allowed))
    step_deg = min(float(np.diff(elevations).max()), WIDEST_GAP_DEG) + 1e-9
    if elevations[0] + 90.0 > step_deg or 90.0 - elevations[-1] > step_deg:
        found = f"elevations from {elevations[0]:g} to {elevations[-1]:g} deg"
        problems.append(Problem(where=where, found=found, allowed="-90 to 90 deg"))
    return problems


def _with_poles(
    elevations: NDArray[np.float64], levels: NDArray[np.float64], notes: list[str]
) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """One level at the nadir and one at the zenith, as rows of their own."""
    for end, pole_deg, word in ((0, -90.0, "nadir"), (-1, 90.0, "zenith")):
        ring = levels[end, :-1]
        lowest, highest = float(ring.min()), float(ring.max())
        # the mean of equal levels is that level, to the last digit
        mean_db = highest + 10.0 * np.log10(np.mean(10.0 ** ((ring - highest) / 10.0)))
        row = np.full((1, levels.shape[1]), min(mean_db, 0.0))
        if elevations[end] == pole_deg:
            levels = levels.copy()
            levels[end] = row
            if highest - lowest > SAME_LEVEL_DB:
                notes.append(
                    f"Levels at the {word} from {lowest:g} to {highest:g} dB were replaced by "
                    f"their mean power, {mean_db:.2f} dB: it is one direction."
                )
            continue
        notes.append(
            f"The {word} has no point: its level is the mean power at {elevations[end]:g} degrees, "
            f"{mean_db:.2f} dB."
        )
        if end == 0:
            elevations, levels = np.append(pole_deg, elevations), np.vstack((row, levels))
        else:
            elevations, levels = np.append(elevations, pole_deg), np.vstack((levels, row))
    return elevations, levels
