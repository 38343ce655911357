"""Read a pattern file of any form that is known; its content says which, never its name."""

from dataclasses import replace
from pathlib import Path
from typing import Literal

from planner.antenna import Pattern
from planner.antenna.pattern import HIGHEST_GAIN_DBI, LOWEST_GAIN_DBI
from planner.io.pattern_files.build import check_blocks, pattern_of
from planner.io.pattern_files.csv_form import read_csv
from planner.io.pattern_files.fixed_form import is_fixed_form, read_fixed_form
from planner.io.pattern_files.gain import gain_in_dbi
from planner.io.pattern_files.model import PatternFile
from planner.io.pattern_files.standard import is_standard, read_standard
from planner.io.pattern_files.text import Faults, read_text


def read_pattern_file(path: Path) -> PatternFile:
    """Everything that a pattern file holds.

    Parameters
    ----------
    path : Path
        File of at most 8 MB: the open standard WG16.99.050 (TIA/EIA-804-B), the older fixed form
        WG16.89.003, or CSV.

    Raises
    ------
    PatternError
        With every problem found, by line of the file, the first being line 1.
    """
    text = read_text(Path(path))
    faults = Faults(text.file_name)
    if is_standard(text):
        file = read_standard(text, faults)
    elif is_fixed_form(text):
        file = read_fixed_form(text, faults)
    else:
        file = read_csv(text, faults)
    if text.not_utf8_line is not None:
        faults.warn(text.not_utf8_line, "bytes that are not UTF-8; read as Windows-1252 text")
    _check_gains(file, faults)
    check_blocks(file, faults)
    faults.raise_problems()
    return replace(file, warnings=faults.all_warnings())


def read_pattern(
    path: Path,
    *,
    name: str,
    gain_dbi: float | None = None,
    frequency_mhz: float | None = None,
    polarization: Literal["vertical", "horizontal"] | None = None,
) -> Pattern:
    """Pattern from a file: :func:`read_pattern_file`, then :func:`pattern_of`."""
    return pattern_of(
        read_pattern_file(path),
        name=name,
        gain_dbi=gain_dbi,
        frequency_mhz=frequency_mhz,
        polarization=polarization,
    )


def _check_gains(file: PatternFile, faults: Faults) -> None:
    header = file.header
    allowed = f"{LOWEST_GAIN_DBI:g} to {HIGHEST_GAIN_DBI:g} dBi"
    if header.gain_unit is None:
        return
    for attribute in ("low_band_gain", "mid_band_gain", "high_band_gain"):
        gain = getattr(header, attribute)
        if gain is None:
            continue
        gain_dbi = gain_in_dbi(gain, header.gain_unit)
        if not LOWEST_GAIN_DBI <= gain_dbi <= HIGHEST_GAIN_DBI:
            found = f"{attribute.replace('_', ' ')} {gain:g} {header.gain_unit}"
            faults.add(file.header_lines.get(attribute), found, allowed)
