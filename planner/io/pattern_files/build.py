"""From what a pattern file holds to a pattern: levels over the peak, gain over isotropic."""

from dataclasses import replace
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from planner.antenna import Pattern, grid_pattern, two_cut_pattern
from planner.antenna.pattern import HIGHEST_GAIN_DBI, LOWEST_GAIN_DBI, PatternKind
from planner.errors import PatternError, Problem
from planner.io.pattern_files.choice import (
    ChosenCuts,
    candidates,
    check_cuts,
    chosen_block,
    chosen_cuts,
)
from planner.io.pattern_files.gain import stated_gain_dbi
from planner.io.pattern_files.model import FrequencyBlock, PatternCut, PatternFile
from planner.io.pattern_files.points import decibels
from planner.io.pattern_files.sphere import sphere_grid
from planner.io.pattern_files.text import Faults

PEAK_TOLERANCE_DB = 0.5  # a sampled cut may miss its own peak by this much
SAME_PLANE_DB = 1.0  # between the H cut's peak and the V cut at the horizon
TILT_TOLERANCE_DEG = 1.0
_ABSOLUTE = ("DBI", "DBD", "LPI")


def check_blocks(file: PatternFile, faults: Faults) -> None:
    """Tell what is wrong with the cuts of every frequency, and what was read although it is odd."""
    for block in file.blocks:
        check_cuts(block, faults, standard=file.form != "CSV")
        for cuts in candidates(block):
            _check_levels(file, cuts, faults)
            if cuts.plane is None:
                sphere_grid(cuts.sphere, file.header.level_unit, faults)
            else:
                _check_tilt(file, cuts.plane[1], faults)
    if not faults.problems:
        for block in file.blocks:
            _check_whole(file, block, faults)


def pattern_of(
    file: PatternFile,
    *,
    name: str,
    gain_dbi: float | None = None,
    frequency_mhz: float | None = None,
    polarization: Literal["vertical", "horizontal"] | None = None,
) -> Pattern:
    """The pattern that a file holds for a radio.

    Parameters
    ----------
    file : PatternFile
    name : str
        As in the plan.
    gain_dbi : float, optional
        Gain at the peak; outranks the file's, and a note says so where they differ. [dBi]
    frequency_mhz : float, optional
        The radio's; the nearest block of the file is taken. [MHz]
    polarization : "vertical" or "horizontal", optional
        Of the wave, where the file has several co-polar sets of cuts.

    Returns
    -------
    Pattern. ``electrical_downtilt_deg`` is the tilt that its levels hold, ``kind`` is "envelope"
    where the file says so, ``notes`` hold the file's warnings and what was chosen.

    Raises
    ------
    PatternError
        With every problem found: a frequency outside the file's band, no gain.
    """
    block, said = chosen_block(file, name=name, frequency_mhz=frequency_mhz)
    cuts, more = chosen_cuts(file, block, polarization)
    notes = [*file.warnings, *said, *more]
    at_mhz = block.frequency_mhz if frequency_mhz is None else frequency_mhz
    gain, gain_notes = gain_at_dbi(file, cuts, at_mhz)
    notes += gain_notes
    if gain_dbi is not None:
        if gain is not None and abs(gain - gain_dbi) > 0.05:
            notes.append(
                f"{file.file_name} states a gain of {gain:.2f} dBi; the plan's {gain_dbi:g} dBi "
                "is used."
            )
        gain = gain_dbi
    if gain is None:
        advice = "Give gain_dbi, or a gain with its unit in the file (MDGAIN and GUNITS)"
        where = f"antenna.{name}.gain_dbi"
        allowed = f"{LOWEST_GAIN_DBI:g} to {HIGHEST_GAIN_DBI:g} dBi"
        raise PatternError(Problem(where=where, found="nothing", allowed=allowed, advice=advice))
    kind: PatternKind = "envelope" if file.header.kind == "envelope" else "measured"
    pattern = _built(file, cuts, name=name, gain_dbi=gain, notes=tuple(notes))
    return replace(pattern, kind=kind, electrical_downtilt_deg=_carried_downtilt_deg(file, cuts))


def gain_at_dbi(
    file: PatternFile, cuts: ChosenCuts, frequency_mhz: float | None
) -> tuple[float | None, tuple[str, ...]]:
    """Gain at a frequency and what to say about it; None where the file does not tell it."""
    stated, notes = stated_gain_dbi(file, frequency_mhz)
    if file.header.level_unit not in _ABSOLUTE:
        return stated, notes
    peak_dbi = max(float(_file_db(file, cut).max()) for cut in cuts.all())
    if stated is not None and abs(stated - peak_dbi) > PEAK_TOLERANCE_DB:
        notes = (
            *notes,
            f"{file.file_name} states a gain of {stated:.2f} dBi, but its levels reach "
            f"{peak_dbi:.2f} dBi: these are used.",
        )
    return peak_dbi, notes


def _file_db(file: PatternFile, cut: PatternCut) -> NDArray[np.float64]:
    return decibels(cut.level, file.header.level_unit)


def relative_db(file: PatternFile, cuts: ChosenCuts) -> list[NDArray[np.float64]]:
    """Levels of all cuts over the peak."""
    levels = [_file_db(file, cut) for cut in cuts.all()]
    if file.header.level_unit not in _ABSOLUTE:
        return levels
    peak = max(float(level.max()) for level in levels)
    return [level - peak for level in levels]


def _check_levels(file: PatternFile, cuts: ChosenCuts, faults: Faults) -> None:
    """Relative levels must reach 0 at the peak."""
    levels = relative_db(file, cuts)
    if any(level.size == 0 for level in levels):
        return  # told already
    advice = "Subtract the highest level from every level of this cut"
    if cuts.plane is None:
        highest = max(float(level.max()) for level in levels)
        if highest < -PEAK_TOLERANCE_DB:
            found = f"highest level {highest:g} dB"
            faults.add(cuts.sphere[0].first_line, found, "0 dB at the peak", advice)
        return
    horizontal, vertical = cuts.plane
    across, up = (float(level.max()) for level in levels)
    if up < -PEAK_TOLERANCE_DB:
        line = int(vertical.lines[levels[1].argmax()])
        faults.add(line, f"highest level of the cut {up:g} dB", "0 dB at the peak", advice)
        return
    horizon_db = _at_horizon(vertical.angle_deg, levels[1])
    line = int(horizontal.lines[levels[0].argmax()])
    if horizontal.name == "AZ":
        if across < -PEAK_TOLERANCE_DB:
            faults.add(line, f"highest level of the cut {across:g} dB", "0 dB at the peak", advice)
        return
    if across < -PEAK_TOLERANCE_DB and abs(across - horizon_db) > SAME_PLANE_DB:
        faults.add(
            line,
            f"highest level of the cut {across:g} dB",
            f"0 dB, or {horizon_db:.3g} dB as in the vertical cut at the horizon",
        )
    elif across >= -PEAK_TOLERANCE_DB and horizon_db < -SAME_PLANE_DB - PEAK_TOLERANCE_DB:
        faults.warn(
            line,
            f"the cut H reaches {across:g} dB although the vertical cut has {horizon_db:.3g} dB at "
            "the horizon; it was read as relative to its own peak",
        )


def _at_horizon(angle_deg: NDArray[np.float64], level_db: NDArray[np.float64]) -> float:
    elevation = np.where(angle_deg > 180.0, angle_deg - 360.0, angle_deg)
    order = np.argsort(elevation, kind="stable")
    return float(np.interp(0.0, elevation[order], level_db[order]))


def _peak_elevation_deg(cut: PatternCut) -> float:
    """Where a vertical cut is highest; the middle where several points are as high."""
    elevation = np.where(cut.angle_deg > 180.0, cut.angle_deg - 360.0, cut.angle_deg)
    best = elevation[cut.level == cut.level.max()]
    return float(0.5 * (best.min() + best.max()))


def _tilt_tolerance_deg(file: PatternFile) -> float:
    stated = file.header.electrical_downtilt_tolerance_deg or 0.0
    return max(TILT_TOLERANCE_DEG, stated, 0.25 * (file.header.elevation_beamwidth_deg or 0.0))


def _check_tilt(file: PatternFile, vertical: PatternCut, faults: Faults) -> None:
    """Whether the vertical cut peaks where the file says that the beam is tilted to."""
    if vertical.angle_deg.size == 0:
        return
    peak_deg, tolerance_deg = _peak_elevation_deg(vertical), _tilt_tolerance_deg(file)
    tilt_deg = file.header.electrical_downtilt_deg
    line = int(vertical.lines[vertical.level.argmax()])
    if tilt_deg is None:
        if abs(peak_deg) >= TILT_TOLERANCE_DEG:
            faults.warn(
                line,
                f"the vertical cut peaks at elevation {peak_deg:g} deg, but no electrical tilt is "
                "stated: a tilt in the plan comes on top of it",
            )
        return
    if abs(peak_deg + tilt_deg) <= tolerance_deg:
        return
    text = (
        f"the vertical cut peaks at elevation {peak_deg:g} deg, not at {0.0 - tilt_deg:g} deg as "
        "the stated electrical tilt has it; the points count, and a tilt in the plan comes on top"
    )
    if abs(peak_deg - tilt_deg) <= tolerance_deg:
        text += ". If the angles count downwards, turn their sign"
    faults.warn(line, text)


def _carried_downtilt_deg(file: PatternFile, cuts: ChosenCuts) -> float:
    """The stated tilt where the points hold it, else 0."""
    tilt_deg = file.header.electrical_downtilt_deg or 0.0
    if cuts.plane is None:
        return tilt_deg
    off_deg = abs(_peak_elevation_deg(cuts.plane[1]) + tilt_deg)
    return tilt_deg if off_deg <= _tilt_tolerance_deg(file) else 0.0


def _built(
    file: PatternFile, cuts: ChosenCuts, *, name: str, gain_dbi: float, notes: tuple[str, ...]
) -> Pattern:
    levels = relative_db(file, cuts)
    if cuts.plane is None:
        faults = Faults(file.file_name)  # what there is to say was said when the file was read
        azimuths, elevations, grid = sphere_grid(cuts.sphere, file.header.level_unit, faults)
        return grid_pattern(
            name=name,
            gain_dbi=gain_dbi,
            azimuth_deg=azimuths,
            elevation_deg=elevations,
            level_db=grid - grid.max() if file.header.level_unit in _ABSOLUTE else grid,
            notes=notes,
        )
    horizontal, vertical = cuts.plane
    horizontal_db = levels[0]
    lowered_db = float(horizontal_db.max())
    if lowered_db < -PEAK_TOLERANCE_DB:
        horizontal_db = horizontal_db - lowered_db
        notes = (
            *notes,
            f"{file.file_name}: the horizontal cut reaches {lowered_db:.2f} dB, as the vertical "
            "cut has it at the horizon; it was taken as relative to its own peak.",
        )
    return two_cut_pattern(
        name=name,
        gain_dbi=gain_dbi,
        horizontal_angle_deg=horizontal.angle_deg,
        horizontal_level_db=horizontal_db,
        vertical_angle_deg=vertical.angle_deg,
        vertical_level_db=levels[1],
        notes=notes,
    )


def _check_whole(file: PatternFile, block: FrequencyBlock, faults: Faults) -> None:
    """Tell gaps and missing parts of the cuts, as the pattern's own rules find them."""
    for cuts in candidates(block):
        try:
            _built(file, cuts, name="", gain_dbi=0.0, notes=())
        except PatternError as error:
            lines = {"grid": block.first_line}
            if cuts.plane is not None:
                horizontal, vertical = cuts.plane
                lines = {
                    "horizontal cut": horizontal.first_line,
                    "vertical cut": vertical.first_line,
                }
            for problem in error.problems:
                part = problem.where.removeprefix("antenna.: ")
                faults.add(
                    lines.get(part, block.first_line),
                    f"{problem.found} ({part})",
                    problem.allowed,
                    problem.advice,
                )
