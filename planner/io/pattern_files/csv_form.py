"""Read patterns from CSV: a horizontal and a vertical cut, or levels over the whole sphere.

Three layouts, told apart by their header; docs/pattern-files.md describes them::

    angle_deg,horizontal_db,vertical_db     cut,angle_deg,level_db     azimuth_deg,elevation_deg,
    -90,-15.0,-30.0                         horizontal,-90,-15.0          gain_dbi (or level_db)
    0,0.0,0.0                               vertical,-90,-30.0         -90,10,3.5

Lines that begin with ``#`` are comments, save those that state a value: ``# gain_dbi: 16.5``.
"""

import csv
import math
import re
from typing import Any

from planner.errors import PatternError, Problem
from planner.io.pattern_files.model import (
    CutName,
    FrequencyBlock,
    LevelUnit,
    PatternCut,
    PatternFile,
    PatternHeader,
)
from planner.io.pattern_files.points import (
    GatheredCut,
    PointCounter,
    add_point,
    angle_fault,
    check_directions,
)
from planner.io.pattern_files.text import Faults, PatternText, number_in, quoted

BOTH_CUTS = ("angle_deg", "horizontal_db", "vertical_db")
CUT_BY_CUT = ("cut", "angle_deg", "level_db")
GRID_LEVEL = ("azimuth_deg", "elevation_deg", "level_db")
GRID_GAIN = ("azimuth_deg", "elevation_deg", "gain_dbi")
LAYOUTS = (BOTH_CUTS, CUT_BY_CUT, GRID_LEVEL, GRID_GAIN)
CUT_NAMES = {"horizontal": "horizontal", "h": "horizontal", "vertical": "vertical", "v": "vertical"}
ADVICE = "Use commas between columns, points in numbers and UTF-8 text"
# Values that a comment line may state; what each says is in the header or beside the cuts.
STATED_NUMBERS = {
    "gain_dbi": (-60.0, 100.0, "dBi"),
    "frequency_mhz": (1.0, 1_000_000.0, "MHz"),
    "electrical_downtilt_deg": (-45.0, 45.0, "deg, positive downwards"),
}
STATED_WORDS = {
    "kind": ("typical", "envelope"),
    "cuts": ("AZ/EL", "H/V"),
    "polarization": ("V/V", "H/H", "SLR/SLR", "SLL/SLL", "RCP/RCP", "LCP/LCP"),
}
MOST_AZIMUTHS = 5000

_STATED = re.compile(r"\s*#\s*([a-z_]+)\s*[:=]\s*(.*?)[\s,]*", re.IGNORECASE)


def read_csv(text: PatternText, faults: Faults) -> PatternFile:
    """The file; raises ``PatternError`` where it has no known layout.

    Cuts are in any order of angle. They are named AZ and EL, relative to their own peaks, unless
    the file states ``# cuts: H/V``.
    """
    if text.not_utf8_line is not None:
        found = "bytes that are not UTF-8 text"
        raise PatternError(
            Problem(where=text.where(text.not_utf8_line), found=found, advice=ADVICE)
        )
    return _Reader(text, faults).file()


class _Reader:
    """Takes one row after the other."""

    def __init__(self, text: PatternText, faults: Faults) -> None:
        self.text, self.faults = text, faults
        self.stated: dict[str, Any] = {}
        self.columns: list[str] = []
        self.header_line = 0
        self.level_unit: LevelUnit = "DBR"
        self.cuts: dict[Any, GatheredCut] = {}
        self.counter = PointCounter(faults)
        for line, raw in enumerate(text.lines, start=1):
            if raw.lstrip().startswith("#"):
                self._take_comment(line, raw)
                continue
            texts = self._texts(line, raw)
            if not any(texts):
                continue
            if self.columns:
                self._take_row(line, texts)
            else:
                self._take_columns(line, texts)

    def _texts(self, line: int, raw: str) -> list[str]:
        if '"' not in raw:
            return [text.strip() for text in raw.split(",")]
        try:
            return [text.strip() for text in next(csv.reader([raw], strict=True), [])]
        except csv.Error as error:
            self.faults.add(line, f"a row that is not CSV ({error})", advice=ADVICE)
            return []

    def _take_comment(self, line: int, raw: str) -> None:
        match = _STATED.fullmatch(raw)
        key, value = (match[1].lower(), match[2]) if match else ("", "")
        if key in STATED_NUMBERS:
            lowest, highest, unit = STATED_NUMBERS[key]
            number = number_in(value)
            if lowest <= number <= highest:
                self._state(line, key, number)
            else:
                self.faults.add(line, f"{key} {quoted(value)}", f"{lowest:g} to {highest:g} {unit}")
        elif key in STATED_WORDS:
            words = {word.lower(): word for word in STATED_WORDS[key]}
            if value.lower() in words:
                self._state(line, key, words[value.lower()])
            else:
                self.faults.add(line, f"{key} {quoted(value)}", ", ".join(STATED_WORDS[key]))

    def _state(self, line: int, key: str, value: Any) -> None:
        if self.stated.setdefault(key, value) != value:
            self.faults.add(line, f"{key} again, with another value", "one value")

    def _take_columns(self, line: int, texts: list[str]) -> None:
        columns = [text.lower() for text in texts]
        if sorted(columns) not in [sorted(layout) for layout in LAYOUTS]:
            self.faults.raise_problems()
            raise PatternError(
                Problem(
                    where=self.text.where(line),
                    found=f"columns {', '.join(repr(text) for text in columns)[:200]}",
                    allowed=layouts(),
                    advice=ADVICE,
                )
            )
        self.columns, self.header_line = columns, line
        if "gain_dbi" in columns:
            self.level_unit = "DBI"

    def _take_row(self, line: int, texts: list[str]) -> None:
        if len(texts) != len(self.columns):
            found, allowed = f"{len(texts)} columns", f"{len(self.columns)} columns"
            self.faults.add(line, found, allowed, ADVICE)
            return
        self.counter.add(line)
        row = dict(zip(self.columns, texts, strict=True))
        if "cut" in row:
            which = CUT_NAMES.get(row["cut"].lower())
            if which is None:
                allowed = '"horizontal" or "vertical" (or "h", "v")'
                self.faults.add(line, f"cut {quoted(row['cut'])}", allowed)
            cut = self._cut(which, line)
            self._point(cut, line, row["angle_deg"], row["level_db"])
        elif "azimuth_deg" in row:
            self._grid_point(line, row)
        else:
            for which in ("horizontal", "vertical"):
                if row[f"{which}_db"]:  # empty: the cut has no point at this angle
                    self._point(self._cut(which, line), line, row["angle_deg"], row[f"{which}_db"])

    def _grid_point(self, line: int, row: dict[str, str]) -> None:
        azimuth_deg = number_in(row["azimuth_deg"])
        fault = angle_fault(azimuth_deg)
        elevation_deg = number_in(row["elevation_deg"])
        if math.isnan(azimuth_deg):
            found = f"azimuth {quoted(row['azimuth_deg'])}"
            self.faults.add(line, found, "a number", ADVICE)
        elif fault:
            self.faults.add(line, f"azimuth {azimuth_deg:g} deg", fault[1])
        if abs(elevation_deg) > 90.0:
            self.faults.add(line, f"elevation {elevation_deg:g} deg", "-90 to 90 deg")
            return
        key = None if math.isnan(azimuth_deg) or fault else azimuth_deg
        level = row["gain_dbi" if self.level_unit == "DBI" else "level_db"]
        self._point(self._cut(key, line), line, row["elevation_deg"], level)

    def _cut(self, key: Any, line: int) -> GatheredCut:
        """The cut of a name or an azimuth; None is one that was told and will not be used."""
        cut = self.cuts.get(key)
        if cut is None:
            azimuth_deg = key if isinstance(key, float) else None
            if len(self.cuts) > MOST_AZIMUTHS:
                self.faults.stop(line, f"more than {MOST_AZIMUTHS:,} azimuths", "that many")
            name: CutName = {"horizontal": "AZ", "vertical": "EL"}.get(key, "SPHERE")  # type: ignore[assignment]
            cut = self.cuts[key] = GatheredCut(name, line, azimuth_deg)
            cut.label = key if isinstance(key, str) else ""
        return cut

    def _point(self, cut: GatheredCut, line: int, angle: str, level: str) -> None:
        advice = ADVICE if any(mark in angle + level for mark in ",;") else ""
        add_point(cut, line, [angle, level], self.level_unit, self.faults, advice)

    def file(self) -> PatternFile:
        """The whole file, after its last line."""
        faults = self.faults
        if not self.columns:
            faults.raise_problems()
            faults.add(None, "no rows", layouts())
            faults.raise_problems()
        gathered = [cut for key, cut in self.cuts.items() if key is not None]
        for cut in gathered:
            cut.polarization = self.stated.get("polarization", "")
            if self.stated.get("cuts") == "H/V" and cut.name in ("AZ", "EL"):
                cut.name = "H" if cut.name == "AZ" else "V"
            if cut.name != "SPHERE" and cut.angle_deg:
                low, high = min(cut.angle_deg), max(cut.angle_deg)
                if low < 0.0 and high > 180.0:
                    found = f"angles from {low:g} to {high:g} deg in {cut.title()}"
                    faults.add(cut.first_line, found, "-180 to 180 or 0 to 360")
            check_directions(cut, self.level_unit, faults, exact=False)
        if "azimuth_deg" in self.columns and not faults.problems:
            self._check_full(gathered)
        number = self.stated.get("frequency_mhz")
        header = PatternHeader(
            gain_unit="DBI",
            level_unit=self.level_unit,
            mid_band_gain=self.stated.get("gain_dbi"),
            electrical_downtilt_deg=self.stated.get("electrical_downtilt_deg"),
            kind=self.stated.get("kind"),
        )
        cuts: tuple[PatternCut, ...] = tuple(cut.cut() for cut in gathered)
        return PatternFile(
            file_name=self.text.file_name,
            form="CSV",
            header=header,
            blocks=(FrequencyBlock(frequency_mhz=number, cuts=cuts, first_line=self.header_line),),
            header_lines={},
            warnings=(),
        )

    def _check_full(self, gathered: list[GatheredCut]) -> None:
        """Every azimuth of a grid must have every elevation."""
        everywhere = sorted({angle for cut in gathered for angle in cut.angle_deg})
        missing, first = 0, ""
        for cut in gathered:
            lacking = len(everywhere) - len(set(cut.angle_deg))
            if lacking and not missing:
                angle = next(angle for angle in everywhere if angle not in set(cut.angle_deg))
                first = f"azimuth {cut.azimuth_deg:g}, elevation {angle:g} deg"
            missing += lacking
        if missing:
            found = f"{missing:,} directions without a row, first {first}"
            self.faults.add(self.header_line, found, "every elevation at every azimuth")


def layouts() -> str:
    """The layouts in words."""
    return "the columns " + " or ".join(f'"{",".join(layout)}"' for layout in LAYOUTS)
