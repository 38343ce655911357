"""Read the older fixed form for digitised patterns, NSMA WG16.89.003.

Ten header lines in a fixed order, "NONE" for what is absent; then blocks, each a line with a
polarization and the number of points, followed by lines of angle and level in dB below the peak.
From memory and public summaries: docs/pattern-files.md.
"""

import math
import re
from typing import Any

import numpy as np

from planner.io.pattern_files.model import (
    CutName,
    FrequencyBlock,
    PatternCut,
    PatternFile,
    PatternHeader,
)
from planner.io.pattern_files.points import (
    GatheredCut,
    PointCounter,
    add_point,
    check_order,
)
from planner.io.pattern_files.text import Faults, PatternText, number_in, quoted

HEADER_LINES = 10
COLUMN = 7  # characters
ABSENT = "NONE"
# In the order of the lines; None: read apart.
HEADER_TEXTS = (
    "manufacturer",
    "model",
    "comments",
    "registration_id",
    "reverse_pattern_id",
    "data_date",
    "pattern_id",
    None,
    None,
    None,
)
MOST_CUTS = 100

_CUT_LINE = re.compile(r"\s*(EL|AZ)?([A-Z]{2})[\s,]+(\d{1,12})\s*", re.IGNORECASE)
_TWO_NUMBERS = re.compile(r"\D*?(\d+(?:\.\d*)?)\D+(\d+(?:\.\d*)?)\D*")
_GAIN = re.compile(r"(.*?)\s*(dBi|dBd|dB)?", re.IGNORECASE)


def is_fixed_form(text: PatternText) -> bool:
    """Whether a line such as "HH 361" follows a header, with points behind it."""
    return _first_cut_line(text) is not None


def _first_cut_line(text: PatternText) -> int | None:
    """Index of the first line that opens a cut; where it belongs, if one stands there."""
    for index in (HEADER_LINES, *range(1, min(40, len(text.lines)))):
        if index < len(text.lines) and _CUT_LINE.fullmatch(text.lines[index]):
            below = next((later for later in text.lines[index + 1 :] if later.strip()), "")
            if not math.isnan(number_in(_point_texts(below)[0])):
                return index
    return None


def read_fixed_form(text: PatternText, faults: Faults) -> PatternFile:
    """The file; raises ``PatternError`` only for sizes, everything else goes into the faults."""
    first = _first_cut_line(text)
    assert first is not None  # the caller has asked is_fixed_form
    header: dict[str, Any] = {"gain_unit": "DBI", "level_unit": "DBR"}
    if first != HEADER_LINES:
        faults.add(
            first + 1, f"{first} header lines", f"{HEADER_LINES}, with {ABSENT} for what is absent"
        )
    else:
        _read_header(text, header, faults)
    cuts = _read_cuts(text, first, faults)
    return PatternFile(
        file_name=text.file_name,
        form="WG16.89.003",
        header=PatternHeader(**header),
        blocks=(FrequencyBlock(frequency_mhz=None, cuts=cuts, first_line=first + 1),),
        header_lines={"mid_band_gain": 9},
        warnings=(),
    )


def _read_header(text: PatternText, header: dict[str, Any], faults: Faults) -> None:
    values = [line.strip() for line in text.lines[:HEADER_LINES]]
    values = ["" if value.upper() == ABSENT else value for value in values]
    for attribute, value in zip(HEADER_TEXTS, values, strict=True):
        if attribute is not None and value:
            header[attribute] = (value,) if attribute == "comments" else value
    band, gain, width = values[7:]
    if band:
        ends = _TWO_NUMBERS.fullmatch(band)
        low, high = (float(ends[1]), float(ends[2])) if ends else (math.nan, math.nan)
        if 1.0 <= low <= high <= 1_000_000.0:
            header |= {"lowest_frequency_mhz": low, "highest_frequency_mhz": high}
        else:
            faults.add(8, f"frequency range {quoted(band)}", "two frequencies in MHz: 5725-5875")
    if gain:
        match = _GAIN.fullmatch(gain)
        number, unit = number_in(match[1] if match else gain), (match and match[2]) or ""
        if not -60.0 <= number <= 100.0:
            faults.add(9, f"mid-band gain {quoted(gain)}", "-60 to 100 dBi")
        else:
            header["mid_band_gain"] = number
        if unit.upper() == "DBD":
            header["gain_unit"] = "DBD"
            faults.warn(9, "the gain says dBd where this form has dBi; it was read as dBd")
    if width:
        number = number_in(re.sub(r"\s*deg.*", "", width, flags=re.IGNORECASE))
        if 0.01 <= number <= 360.0:
            header["azimuth_beamwidth_deg"] = number
        else:
            faults.warn(10, f"the half-power width {quoted(width)} was not read")


def _read_cuts(text: PatternText, first: int, faults: Faults) -> tuple[PatternCut, ...]:
    cuts: list[PatternCut] = []
    gathered: GatheredCut | None = None
    counter = PointCounter(faults)
    for line, raw in enumerate(text.lines[first:], start=first + 1):
        if not raw.strip():
            continue
        match = _CUT_LINE.fullmatch(raw)
        if match is None:
            assert gathered is not None  # the first line is one of a cut
            texts = _point_texts(raw)
            counter.add(line)
            if len(texts) != 2:
                faults.add(line, quoted(raw.strip()), "angle and level, or a line such as HH 361")
                gathered.spoilt += 1
            else:
                add_point(gathered, line, texts, "DBR", faults)
            continue
        if gathered is not None:
            cuts.append(_finished(gathered, faults))
        if len(cuts) >= MOST_CUTS:
            faults.add(line, f"more than {MOST_CUTS} cuts", "that many in one file")
            return tuple(cuts)
        name: CutName = "V" if (match[1] or "").upper() == "EL" else "H"
        pair = match[2].upper()
        gathered = GatheredCut(name, line, None, f"{pair[0]}/{pair[1]}")
        gathered.declared_points, gathered.declared_line = int(match[3]), line
    if gathered is not None:
        cuts.append(_finished(gathered, faults))
    return tuple(cuts)


def _finished(gathered: GatheredCut, faults: Faults) -> PatternCut:
    found = len(gathered.angle_deg) + gathered.spoilt
    if gathered.declared_points != found:
        faults.add(
            gathered.declared_line,
            f"{gathered.declared_points:,} points declared for {gathered.title()}",
            f"{found}, as many as there are",
            "Points may be lost: compare with the source",
        )
    elif not found:
        faults.add(gathered.first_line, f"no points in {gathered.title()}", "a whole cut")
    check_order(gathered, "DBR", faults)
    return gathered.cut()


def _point_texts(line: str) -> list[str]:
    """Angle and level, by white space or comma, else by columns of seven characters."""
    texts = line.replace(",", " ").split()
    if len(texts) == 2 or len(line.rstrip()) <= COLUMN:
        return texts or [""]
    columns = [line[:COLUMN], line[COLUMN : 2 * COLUMN]]
    if len(texts) == 1 and not any(np.isnan(number_in(column)) for column in columns):
        return columns
    return texts or [""]
