"""Read the open standard for digitised patterns, NSMA WG16.99.050, issued also as TIA/EIA-804-B.

Records ``TAG:,value`` first describe the antenna; then each PATFRE opens a frequency, each PATCUT a
cut, whose points follow as ``angle,level`` or ``angle,level,phase``. From memory and public
summaries, not from the standard's own text: docs/pattern-files.md.
"""

import math
import re
from typing import Any, get_args

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
    check_counts,
    check_order,
)
from planner.io.pattern_files.tags import (
    BLOCK_TAGS,
    GAIN_UNITS,
    HEADER_TAGS,
    LEVEL_UNITS,
    REVISION_NAMES,
    UNIT_PAIRS,
    UNIT_WORDS,
    numbered_attribute,
)
from planner.io.pattern_files.text import Faults, PatternText, number_in, quoted

MOST_CUTS = 5000  # in one file; a sphere in steps of half a degree has 720 at each frequency
MOST_FREQUENCIES = 1000
MOST_TEXTS = 100  # records of free text of one name

_RECORD = re.compile(r"\s*([A-Za-z][A-Za-z0-9]{3,6})\s*:\s*(,?)(.*)")
_UNIT_BEHIND = re.compile(r"(.*?)\s*(dBi|dBd|dB)", re.IGNORECASE)
_PLANE_CUTS = tuple(name for name in get_args(CutName) if name != "SPHERE")


def is_standard(text: PatternText) -> bool:
    """Whether one of the first records looks like one of this standard."""
    lines = [line for line in text.lines[:200] if line.strip()]
    tags = {match[1].upper() for line in lines[:60] if (match := _RECORD.match(line))}
    return bool(tags & {*HEADER_TAGS, *BLOCK_TAGS, "GUNITS", "PATTYP"})


def read_standard(text: PatternText, faults: Faults) -> PatternFile:
    """The file; raises ``PatternError`` with every problem found, later ones by ``build``."""
    reader = _Reader(text, faults)
    for line, raw in enumerate(text.lines, start=1):
        content = raw.split("!", 1)[0].strip()
        if content and not reader.take(line, content):
            break
    return reader.file()


class _Reader:
    """Takes one record after the other."""

    def __init__(self, text: PatternText, faults: Faults) -> None:
        self.text, self.faults = text, faults
        self.header: dict[str, Any] = {}
        self.given: dict[str, tuple[int, str]] = {}  # line and value of header records
        self.counter = PointCounter(faults)
        self.blocks: list[FrequencyBlock] = []
        self.cuts: list[PatternCut] = []  # of the block that is open
        self.cut: GatheredCut | None = None
        self.block_line = 0  # 0: none open
        self.frequency_mhz: float | None = None
        self.frequencies_mhz: set[float] = set()
        self.polarization = ""  # for cuts that do not state one
        self.declared_cuts: tuple[int, int] | None = None  # number and line
        self.declared_blocks: tuple[int, int] | None = None
        self.total_cuts = 0
        self.homeless_points = 0
        self.ended = False
        self.level_unit: LevelUnit = "DBR"

    def take(self, line: int, content: str) -> bool:
        """Take a line; False where the file ends."""
        record = _RECORD.fullmatch(content)
        if record is None:
            self._take_point(line, content)
            return True
        tag, comma, value = record[1].upper(), record[2], record[3].strip().rstrip(",").strip()
        if not comma:
            self.faults.warn(line, f"{tag} has no comma behind its colon")
        if tag == "ENDFIL":
            self.ended = True
            if any(later.strip() for later in self.text.lines[line:]):
                self.faults.warn(line, "what follows ENDFIL was not read")
            return False
        if tag in BLOCK_TAGS:
            getattr(self, f"_take_{tag.lower()}")(line, value)
        else:
            self._take_header(line, tag, value)
        return True

    # The header

    def _take_header(self, line: int, tag: str, value: str) -> None:
        texts = numbered_attribute(tag)
        if texts is not None:
            kept = self.header.get(texts, ())
            if value and len(kept) < MOST_TEXTS:
                self.header[texts] = (*kept, value)
            return
        if tag not in HEADER_TAGS and tag not in ("GUNITS", "PATTYP"):
            self.faults.warn(line, f"the record {tag} is not known and was not read")
            return
        if tag in self.given:
            before, old = self.given[tag]
            if old.upper() != value.upper():
                what = "mixed units: " if tag == "GUNITS" else ""
                found = f"{what}{tag} {quoted(value)} again, {quoted(old)} in line {before}"
                self.faults.add(line, found, "one value")
            return
        self.given[tag] = line, value
        if not value:
            return  # an empty record says nothing
        if tag == "GUNITS":
            self._take_units(line, value)
        elif tag == "PATTYP":
            self._take_kind(line, value)
        elif HEADER_TAGS[tag].content == "number":
            self._take_number(line, tag, value)
        else:
            self._take_text(line, tag, value)

    def _take_text(self, line: int, tag: str, value: str) -> None:
        self.header[HEADER_TAGS[tag].attribute] = value
        if tag == "REVNUM" and not any(name in value.upper() for name in REVISION_NAMES):
            self.faults.warn(line, f"REVNUM {quoted(value)} is not {' or '.join(REVISION_NAMES)}")
        if HEADER_TAGS[tag].content == "date" and not re.fullmatch(r"\d{8}", value):
            self.faults.warn(line, f"{tag} {quoted(value)} is no date such as 19990520")

    def _take_units(self, line: int, value: str) -> None:
        gain, slash, level = (part.strip() for part in value.upper().partition("/"))
        allowed = ", ".join("/".join(pair) for pair in UNIT_PAIRS)
        if gain not in GAIN_UNITS or level not in LEVEL_UNITS or not slash:
            self.faults.add(line, f"GUNITS {quoted(value)}", allowed)
        elif (gain, level) not in UNIT_PAIRS:
            self.faults.add(line, f"mixed units: gain in {gain}, levels in {level}", allowed)
        else:
            self.header |= {"gain_unit": gain, "level_unit": level}
            self.level_unit = level  # type: ignore[assignment]
            if self.total_cuts:
                self.faults.add(line, "GUNITS behind the first cut", "GUNITS before the points")

    def _take_kind(self, line: int, value: str) -> None:
        kind = value.lower()
        if kind in ("typical", "envelope"):
            self.header["kind"] = kind
        else:
            self.faults.warn(line, f"PATTYP {quoted(value)} is neither typical nor envelope")

    def _take_number(self, line: int, tag: str, value: str) -> None:
        known = HEADER_TAGS[tag]
        first, comma, rest = value.partition(",")
        number = number_in(first)
        unit = _UNIT_BEHIND.fullmatch(first.strip())
        if math.isnan(number) and unit is not None:
            number = number_in(unit[1])
            word = UNIT_WORDS[unit[2].upper()]
            self._check_unit_word(line, tag, word)
        allowed = f"{known.lowest:g} to {known.highest:g} {known.unit}".strip()
        if math.isnan(number):
            self.faults.add(line, f"{tag} {quoted(value)}", allowed)
            return
        if not known.lowest <= number <= known.highest:
            self.faults.add(line, f"{tag} {number:g}", allowed)
            return
        self.header[known.attribute] = number
        if not comma:
            return
        second = number_in(rest.split(",")[0])
        if tag == "ELTILT" and second >= 0.0:
            self.header["electrical_downtilt_tolerance_deg"] = second
        else:
            self.faults.warn(line, f"only the first value of {tag} {quoted(value)} was read")

    def _check_unit_word(self, line: int, tag: str, word: str) -> None:
        if not tag.endswith("GAIN") or not word:
            return
        declared = self.header.get("gain_unit")
        if declared is None:
            self.header["gain_unit"] = word
            self.faults.warn(line, f"{tag} brings its own unit, {word}, before any GUNITS")
        elif declared != word:
            self.faults.add(line, f"mixed units: {tag} in {word}", f"{declared}, as GUNITS says")

    # Frequencies and cuts

    def _take_nofreq(self, line: int, value: str) -> None:
        number = self._count(line, "NOFREQ", value)
        self.declared_blocks = self.declared_blocks if number is None else (number, line)

    def _take_patfre(self, line: int, value: str) -> None:
        self._close_block()
        self.block_line, self.polarization = line, ""
        frequency_mhz = number_in(value.split(",")[0])
        if not 1.0 <= frequency_mhz <= 1_000_000.0:
            self.faults.add(line, f"PATFRE {quoted(value)}", "1 to 1,000,000 MHz")
            frequency_mhz = 1.0  # told: the file will not be used
        elif frequency_mhz in self.frequencies_mhz:
            self.faults.add(line, f"PATFRE {frequency_mhz:g} again", "each frequency once")
        self.frequency_mhz = frequency_mhz
        self.frequencies_mhz.add(frequency_mhz)
        if len(self.blocks) >= MOST_FREQUENCIES:
            self.faults.stop(line, f"more than {MOST_FREQUENCIES:,} frequencies", "that many")

    def _take_numcut(self, line: int, value: str) -> None:
        number = self._count(line, "NUMCUT", value)
        self.declared_cuts = self.declared_cuts if number is None else (number, line)

    def _take_patcut(self, line: int, value: str) -> None:
        self._close_cut()
        name = value.upper()
        azimuth_deg = number_in(value)
        if name in _PLANE_CUTS:
            self._open_cut(line, name, None)
        elif -180.0 <= azimuth_deg <= 360.0:
            self._open_cut(line, "SPHERE", azimuth_deg)
        else:
            allowed = f"{', '.join(_PLANE_CUTS)} or an azimuth, -180 to 360 deg"
            self.faults.add(line, f"PATCUT {quoted(value)}", allowed)
            self._open_cut(line, "SPHERE", None)  # told: keeps the points from being told too

    def _take_polari(self, line: int, value: str) -> None:
        polarization = value.upper().replace(" ", "")
        if not re.fullmatch(r"[A-Z]{1,4}/[A-Z]{1,4}", polarization):
            allowed = "antenna/illumination, such as V/V or SLR/SLL"
            self.faults.add(line, f"POLARI {quoted(value)}", allowed)
            polarization = ""
        if self.cut is None:
            self.polarization = polarization
        elif self.cut.angle_deg or self.cut.spoilt:  # the same cut, another polarization
            name, azimuth_deg = self.cut.name, self.cut.azimuth_deg
            self._close_cut()
            self._open_cut(line, name, azimuth_deg).polarization = polarization
        else:
            self.cut.polarization = polarization

    def _take_nupoin(self, line: int, value: str) -> None:
        number = self._count(line, "NUPOIN", value)
        if self.cut is None:
            self.faults.add(line, "NUPOIN before any PATCUT", "NUPOIN within a cut")
        elif number is not None:
            self.cut.declared_points, self.cut.declared_line = number, line

    def _take_fstlst(self, line: int, value: str) -> None:
        first, _, last = value.partition(",")
        ends = number_in(first), number_in(last)
        if math.isnan(ends[0]) or math.isnan(ends[1]):
            self.faults.add(line, f"FSTLST {quoted(value)}", "two angles, such as -180,179")
        elif self.cut is None:
            self.faults.add(line, "FSTLST before any PATCUT", "FSTLST within a cut")
        else:
            self.cut.declared_ends, self.cut.ends_line = ends, line

    def _count(self, line: int, tag: str, value: str) -> int | None:
        number = number_in(value.split(",")[0])
        if math.isnan(number) or number < 1.0 or number != math.floor(number):
            self.faults.add(line, f"{tag} {quoted(value)}", "a whole number, 1 or more")
            return None
        return int(number)

    def _take_point(self, line: int, content: str) -> None:
        texts = content.rstrip(",").split(",")
        if self.cut is None:
            self.homeless_points += 1
            if self.homeless_points == 1:
                self.faults.add(
                    line, f"{quoted(content)}, before any PATCUT", "a record such as PATCUT:,H"
                )
            return
        if len(texts) not in (2, 3):
            self.faults.add(
                line, quoted(content), "a record TAG:,value or a point angle,level[,phase]"
            )
            self.cut.spoilt += 1
            return
        self.counter.add(line)
        add_point(self.cut, line, texts, self.level_unit, self.faults)

    def _open_cut(self, line: int, name: Any, azimuth_deg: float | None) -> GatheredCut:
        if not self.block_line:
            self.faults.warn(line, "no PATFRE before this cut, so its frequency is not known")
            self.block_line, self.frequency_mhz = line, None
        self.total_cuts += 1
        if self.total_cuts > MOST_CUTS:
            self.faults.stop(line, f"more than {MOST_CUTS:,} cuts", "that many in one file")
        self.cut = GatheredCut(name, line, azimuth_deg, self.polarization)
        return self.cut

    def _close_cut(self) -> None:
        if self.cut is None:
            return
        gathered, self.cut = self.cut, None
        check_counts(gathered, self.faults)
        check_order(gathered, self.level_unit, self.faults)
        if gathered.phase_deg and len(gathered.phase_deg) != len(gathered.angle_deg):
            self.faults.warn(
                gathered.first_line, f"phases of {gathered.title()} stand in some lines only"
            )
            gathered.phase_deg = []
        self.cuts.append(gathered.cut())

    def _close_block(self) -> None:
        self._close_cut()
        if not self.block_line:
            return
        found = len(self.cuts)
        if self.declared_cuts is not None and self.declared_cuts[0] != found:
            number, line = self.declared_cuts
            self.faults.add(line, f"{number:,} cuts declared", f"{found}, as many as there are")
        self.blocks.append(
            FrequencyBlock(
                frequency_mhz=self.frequency_mhz,
                cuts=tuple(self.cuts),
                first_line=self.block_line,
            )
        )
        self.cuts, self.declared_cuts, self.block_line = [], None, 0

    def file(self) -> PatternFile:
        """The whole file, after its last line."""
        self._close_block()
        faults = self.faults
        if not self.blocks:
            faults.add(None, "no cut", "PATFRE and PATCUT records with points")
        elif self.declared_blocks is not None and self.declared_blocks[0] != len(self.blocks):
            number, line = self.declared_blocks
            faults.add(
                line,
                f"{number:,} frequencies declared",
                f"{len(self.blocks)}, as many as there are",
            )
        if not self.ended:
            faults.warn(
                len(self.text.lines), "no ENDFIL at the end: the file may have been cut off"
            )
        low, high = (self.header.get(f"{which}_frequency_mhz") for which in ("lowest", "highest"))
        if low is not None and high is not None and low > high:
            found = f"LOWFRQ {low:g} above HGHFRQ {high:g}"
            faults.add(self.given["LOWFRQ"][0], found, "the lower edge of the band first")
        return PatternFile(
            file_name=self.text.file_name,
            form="WG16.99.050",
            header=PatternHeader(**self.header),
            blocks=tuple(self.blocks),
            warnings=(),
            header_lines={
                HEADER_TAGS[tag].attribute: line
                for tag, (line, _) in self.given.items()
                if tag in HEADER_TAGS
            },
        )
