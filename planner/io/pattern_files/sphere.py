"""A sphere that is given as vertical cuts, one for each azimuth."""

from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from planner.io.pattern_files.model import LevelUnit, PatternCut
from planner.io.pattern_files.points import decibels
from planner.io.pattern_files.text import Faults

STEEPEST_PEAK_DEG = 60.0  # a beam higher or lower than this was hardly meant
_SAME_ANGLE_DEG = 1e-6

_Column = tuple[float, NDArray[np.float64], NDArray[np.float64], int]


def sphere_grid(
    cuts: Sequence[PatternCut], level_unit: LevelUnit, faults: Faults
) -> tuple[NDArray[np.float64], NDArray[np.float64], NDArray[np.float64]]:
    """(azimuths of n, elevations of m, levels in dB of m by n) of cuts all around.

    Angles from -90 to 90 are elevations; those of a cut from 0 to 180 are counted from the zenith;
    a cut over more than 180 degrees runs on behind the antenna, at the opposite azimuth. Cuts with
    points at different elevations are interpolated in dB at all of them. What is wrong goes into
    the faults, and the arrays are then empty.
    """
    empty = np.empty(0), np.empty(0), np.empty((0, 0))
    if any(cut.angle_deg.size < 2 or cut.azimuth_deg is None for cut in cuts):
        for cut in cuts:
            if cut.angle_deg.size == 1:
                faults.add(cut.first_line, "one point in the cut", "elevations from -90 to 90 deg")
        return empty
    low = min(float(cut.angle_deg.min()) for cut in cuts)
    high = max(float(cut.angle_deg.max()) for cut in cuts)
    from_zenith = low >= 0.0 and 90.0 < high <= 180.0
    if from_zenith:
        faults.warn(
            cuts[0].first_line,
            f"angles from {low:g} to {high:g} deg in cuts of a sphere were read as counted from "
            "the zenith downwards",
        )
    columns = _columns(cuts, level_unit, from_zenith=from_zenith)
    first_deg, last_deg = columns[0][1][0], columns[0][1][-1]
    ragged = False
    for azimuth_deg, elevations, _, line in columns:
        ends = float(elevations[0]), float(elevations[-1])
        if max(abs(ends[0] - first_deg), abs(ends[1] - last_deg)) > _SAME_ANGLE_DEG:
            ragged = True
            faults.add(
                line,
                f"elevations from {ends[0]:g} to {ends[1]:g} deg at azimuth {azimuth_deg:g} deg",
                f"{first_deg:g} to {last_deg:g} deg, as in the first cut",
            )
    if ragged:
        return empty
    nodes = columns[0][1]
    if any(column[1].size != nodes.size or (column[1] != nodes).any() for column in columns):
        nodes = np.unique(np.concatenate([column[1] for column in columns]))
        if nodes.size > 4 * max(column[1].size for column in columns):
            faults.add(
                cuts[0].first_line, "cuts of a sphere with elevations of their own", "common ones"
            )
            return empty
    levels = np.column_stack([np.interp(nodes, column[1], column[2]) for column in columns])
    peak_deg = float(nodes[np.unravel_index(int(levels.argmax()), levels.shape)[0]])
    if abs(peak_deg) > STEEPEST_PEAK_DEG:
        faults.warn(
            cuts[0].first_line,
            f"the beam of this sphere points to elevation {peak_deg:g} deg: are its angles counted "
            "from the boresight?",
        )
    return np.array([column[0] for column in columns]), nodes, levels


def _columns(
    cuts: Sequence[PatternCut], level_unit: LevelUnit, *, from_zenith: bool
) -> list[_Column]:
    """(azimuth, elevations increasing, levels in dB, line) of every half plane."""
    columns: list[_Column] = []
    behind: list[_Column] = []
    for cut in cuts:
        assert cut.azimuth_deg is not None
        elevations = 90.0 - cut.angle_deg if from_zenith else cut.angle_deg
        elevations = np.where(elevations > 180.0, elevations - 360.0, elevations)
        levels = decibels(cut.level, level_unit)
        front = np.abs(elevations) <= 90.0
        columns.append(_column(cut, cut.azimuth_deg, elevations[front], levels[front]))
        if front.all():
            continue
        back = np.abs(elevations) >= 90.0
        folded = np.copysign(180.0, elevations[back]) - elevations[back]
        opposite_deg = float(np.mod(cut.azimuth_deg + 360.0, 360.0) - 180.0)
        behind.append(_column(cut, opposite_deg, folded, levels[back]))
    taken = {float(np.mod(column[0], 360.0)) for column in columns}
    columns += [column for column in behind if float(np.mod(column[0], 360.0)) not in taken]
    return [column for column in columns if column[1].size]


def _column(
    cut: PatternCut,
    azimuth_deg: float,
    elevations: NDArray[np.float64],
    levels: NDArray[np.float64],
) -> _Column:
    unique, index = np.unique(elevations, return_index=True)
    return azimuth_deg, unique, levels[index], cut.first_line
