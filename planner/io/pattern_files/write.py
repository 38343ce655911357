"""Write what a pattern file holds: the open standard, the older fixed form, or CSV.

Each reads back to the same pattern: numbers are written with all their digits. What a form has no
place for is told as a problem where the pattern would change, and else left out.
"""

from collections.abc import Iterator
from dataclasses import replace
from pathlib import Path

import numpy as np

from planner.errors import PatternError, Problem
from planner.io.atomic import replaced
from planner.io.pattern_files.build import gain_at_dbi, relative_db
from planner.io.pattern_files.choice import ChosenCuts, candidates
from planner.io.pattern_files.fixed_form import ABSENT, COLUMN
from planner.io.pattern_files.gain import stated_gain_dbi
from planner.io.pattern_files.model import FrequencyBlock, PatternCut, PatternFile
from planner.io.pattern_files.sphere import sphere_grid
from planner.io.pattern_files.tags import HEADER_TAGS, NUMBERED, REVISION, REVISION_DATE
from planner.io.pattern_files.text import Faults, number_text

_LINE_END = "\r\n"  # as both forms of the standard have it


def write_standard(path: Path, file: PatternFile) -> None:
    """Write the open standard WG16.99.050, all frequencies, cuts and polarizations.

    Raises
    ------
    PatternError
        Where a text holds an exclamation mark, which begins a comment, or a line end.
    OutputError
        Where the file cannot be written; what stood there before is then untouched.
    """
    lines = list(_standard_lines(file))
    bad = [line for line in lines if "!" in line or "\n" in line or "\r" in line]
    if bad:
        raise PatternError(
            Problem(where=str(path), found=repr(line[:60]), allowed="no line end and no !")
            for line in bad
        )
    _write(path, lines)


def _standard_lines(file: PatternFile) -> Iterator[str]:
    header = file.header
    values = {"REVNUM": REVISION, "REVDAT": REVISION_DATE}
    if file.form == "WG16.99.050":
        values["REVNUM"] = header.standard or REVISION
        values["REVDAT"] = header.standard_date or REVISION_DATE
    for tag, known in HEADER_TAGS.items():
        value = values.get(tag, getattr(header, known.attribute))
        if tag == "LWGAIN" and header.gain_unit is not None:
            yield f"GUNITS:,{header.gain_unit}/{header.level_unit}"
        if value is None or value == "":
            continue
        text = value if isinstance(value, str) else number_text(value)
        tolerance_deg = header.electrical_downtilt_tolerance_deg
        if tag == "ELTILT" and tolerance_deg is not None:
            text += f",{number_text(tolerance_deg)}"
        yield f"{tag}:,{text}"
        if tag == "REVDAT":
            for start, attribute in NUMBERED.items():
                for number, said in enumerate(getattr(header, attribute), start=1):
                    yield f"{start}{number}:,{said}"
    if header.kind is not None:
        yield f"PATTYP:,{header.kind}"
    if all(block.frequency_mhz is not None for block in file.blocks):
        yield f"NOFREQ:,{len(file.blocks)}"
    for block in file.blocks:
        if block.frequency_mhz is not None:
            yield f"PATFRE:,{number_text(block.frequency_mhz)}"
        yield f"NUMCUT:,{len(block.cuts)}"
        for cut in block.cuts:
            yield from _cut_lines(cut)
    yield "ENDFIL:,EOF"


def _cut_lines(cut: PatternCut) -> Iterator[str]:
    cut = _in_order(cut)
    name = cut.name if cut.azimuth_deg is None else number_text(cut.azimuth_deg)
    yield f"PATCUT:,{name}"
    if cut.polarization:
        yield f"POLARI:,{cut.polarization}"
    yield f"NUPOIN:,{cut.angle_deg.size}"
    yield f"FSTLST:,{number_text(cut.angle_deg[0])},{number_text(cut.angle_deg[-1])}"
    for index in range(cut.angle_deg.size):
        text = f"{number_text(cut.angle_deg[index])},{number_text(cut.level[index])}"
        if cut.phase_deg is not None:
            text += f",{number_text(cut.phase_deg[index])}"
        yield text


def write_fixed_form(path: Path, file: PatternFile) -> None:
    """Write the older fixed form WG16.89.003.

    Raises
    ------
    PatternError
        Where the file has several frequencies, more than two plane cuts of a polarization, levels
        that are not relative, numbers that do not fit seven characters, or a tilt or envelope mark,
        for which this form has no place.
    """
    _write(path, list(_fixed_lines(Path(path), file)))


def _fixed_lines(path: Path, file: PatternFile) -> Iterator[str]:
    header = file.header
    problems = []

    def refuse(found: str, allowed: str) -> None:
        advice = "Write WG16.99.050 instead"
        problems.append(Problem(where=str(path), found=found, allowed=allowed, advice=advice))

    if len(file.blocks) > 1:
        refuse(f"{len(file.blocks)} frequencies", "one in WG16.89.003")
    if header.level_unit != "DBR":
        refuse(f"levels in {header.level_unit}", "levels relative to the peak in WG16.89.003")
    if header.electrical_downtilt_deg is not None:
        refuse("an electrical tilt", "none in WG16.89.003")
    if header.kind is not None:
        refuse(f"the type {header.kind}", "none in WG16.89.003")
    gain, _ = stated_gain_dbi(file, None)
    cuts = file.blocks[0].cuts
    names = {"H": "", "AZ": "", "V": "EL", "EL": "EL"}
    seen = set()
    for cut in cuts:
        pair = cut.polarization.replace("/", "")
        if cut.name not in names or len(pair) != 2 or (names[cut.name], pair) in seen:
            refuse(f"cut {cut.name} {cut.polarization}".rstrip(),
                   "one horizontal and one vertical cut of a polarization such as V/V")  # fmt: skip
        seen.add((names.get(cut.name, cut.name), pair))
        for number in (*cut.angle_deg, *cut.level):
            if len(number_text(number)) > COLUMN:
                refuse(f"the number {number_text(number)}", f"up to {COLUMN} characters")
                break
    if problems:
        raise PatternError(problems)
    low, high = header.lowest_frequency_mhz, header.highest_frequency_mhz
    band = "" if low is None or high is None else f"{number_text(low)}-{number_text(high)}"
    width = header.azimuth_beamwidth_deg
    for value in (
        header.manufacturer,
        header.model,
        " ".join(header.comments),
        header.registration_id,
        header.reverse_pattern_id,
        header.data_date,
        header.pattern_id,
        band,
        "" if gain is None else number_text(gain),
        "" if width is None else number_text(width),
    ):
        yield value or ABSENT
    for cut in cuts:
        cut = _in_order(cut)
        yield f"{names[cut.name]}{cut.polarization.replace('/', '')} {cut.angle_deg.size}"
        for angle, level in zip(cut.angle_deg, cut.level, strict=True):
            yield f"{number_text(angle):>{COLUMN}}{number_text(level):>{COLUMN}}"


def write_csv(path: Path, file: PatternFile, *, frequency_mhz: float | None = None) -> None:
    """Write one frequency as CSV: two cuts, or a grid where the file has a whole sphere.

    ``frequency_mhz`` is that of a block, needed where there are several. The first complete
    co-polar set of cuts is written.

    Raises
    ------
    PatternError
        Where no block has that frequency.
    OutputError
        Where the file cannot be written; what stood there before is then untouched.
    """
    blocks = [
        block
        for block in file.blocks
        if frequency_mhz is None or block.frequency_mhz == frequency_mhz
    ]
    if len(blocks) != 1:
        known = ", ".join(f"{block.frequency_mhz:g}" for block in file.blocks[:20])
        found = "no frequency" if frequency_mhz is None else f"{frequency_mhz:g} MHz"
        raise PatternError(
            Problem(where=f"{file.file_name}: frequency_mhz", found=found, allowed=f"{known} MHz")
        )
    _write(path, list(_csv_lines(file, blocks[0])), line_end="\n")


def _csv_lines(file: PatternFile, block: FrequencyBlock) -> Iterator[str]:
    cuts = candidates(block)[0]
    unit = file.header.level_unit
    yield from _stated_lines(file, block, cuts)
    if cuts.plane is None:
        azimuths, elevations, grid = sphere_grid(cuts.sphere, unit, Faults(file.file_name))
        absolute = unit not in ("DBR", "LPR")
        yield f"azimuth_deg,elevation_deg,{'gain_dbi' if absolute else 'level_db'}"
        for column, azimuth in enumerate(azimuths):
            for row, elevation in enumerate(elevations):
                yield ",".join(number_text(x) for x in (azimuth, elevation, grid[row, column]))
        return
    levels = relative_db(file, cuts)
    yield "cut,angle_deg,level_db"
    for name, cut, level in zip(("horizontal", "vertical"), cuts.all(), levels, strict=True):
        for angle, value in zip(cut.angle_deg, level, strict=True):
            yield f"{name},{number_text(angle)},{number_text(value)}"


def _stated_lines(file: PatternFile, block: FrequencyBlock, cuts: ChosenCuts) -> Iterator[str]:
    header = file.header
    gain_dbi, _ = gain_at_dbi(file, cuts, block.frequency_mhz)
    if gain_dbi is not None:
        yield f"# gain_dbi: {number_text(gain_dbi)}"
    if block.frequency_mhz is not None:
        yield f"# frequency_mhz: {number_text(block.frequency_mhz)}"
    if header.electrical_downtilt_deg is not None:
        yield f"# electrical_downtilt_deg: {number_text(header.electrical_downtilt_deg)}"
    if header.kind is not None:
        yield f"# kind: {header.kind}"
    if cuts.polarization:
        yield f"# polarization: {cuts.polarization}"
    if cuts.plane is not None and cuts.plane[0].name == "H":
        yield "# cuts: H/V"


def _in_order(cut: PatternCut) -> PatternCut:
    """The same points by increasing angle, each angle once."""
    _, index = np.unique(cut.angle_deg, return_index=True)
    return replace(
        cut,
        angle_deg=cut.angle_deg[index],
        level=cut.level[index],
        phase_deg=None if cut.phase_deg is None else cut.phase_deg[index],
        lines=cut.lines[index],
    )


def _write(path: Path, lines: list[str], *, line_end: str = _LINE_END) -> None:
    with replaced(Path(path)) as temporary:
        temporary.write_bytes("".join(line + line_end for line in lines).encode())
