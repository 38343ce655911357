"""Read antenna patterns from files: a horizontal and a vertical cut as CSV.

Two layouts are read, told apart by their header; docs/antennas.md describes both::

    angle_deg,horizontal_db,vertical_db        cut,angle_deg,level_db
    -90,-15.0,-30.0                            horizontal,-90,-15.0
    0,0.0,0.0                                  vertical,-90,-30.0
"""

import csv
import io
import math
from collections.abc import Iterator, Sequence
from dataclasses import dataclass, field, replace
from pathlib import Path

from planner.antenna import TwoCutPattern, two_cut_pattern
from planner.errors import PatternError, Problem

LARGEST_FILE_BYTES = 2_000_000  # a cut in steps of 0.1 degree has 3600 points of some 20 bytes
MOST_PROBLEMS = 50  # told one by one; the rest is counted

BOTH_CUTS = ("angle_deg", "horizontal_db", "vertical_db")
CUT_BY_CUT = ("cut", "angle_deg", "level_db")
CUT_NAMES = {"horizontal": "horizontal", "h": "horizontal", "vertical": "vertical", "v": "vertical"}
ADVICE = "Use commas between columns, points in numbers and UTF-8 text"


@dataclass(slots=True)
class _Points:
    """Points of one cut, as they come."""

    angle_deg: list[float] = field(default_factory=list)
    level_db: list[float] = field(default_factory=list)


def read_two_cut_csv(path: Path, *, name: str, gain_dbi: float) -> TwoCutPattern:
    """Pattern from a CSV file of a horizontal and a vertical cut.

    Parameters
    ----------
    path : Path
        File of at most 2 MB in one of the two layouts; blank lines and lines that begin with ``#``
        are passed over.
    name : str
        Name of the antenna in the plan.
    gain_dbi : float
        Gain where both levels are 0. [dBi]

    Raises
    ------
    PatternError
        With every problem found: rows that cannot be read (by line of the file, the first being
        line 1), cuts that are not complete, levels that are not relative to the peak.
    """
    path = Path(path)
    rows = list(_rows(path))
    if not rows:
        raise PatternError(Problem(where=path.name, found="no rows", allowed=_layouts()))
    (header_line, header), body = rows[0], rows[1:]
    columns = [text.strip().lower() for text in header]
    if sorted(columns) not in (sorted(BOTH_CUTS), sorted(CUT_BY_CUT)):
        raise PatternError(
            Problem(
                where=f"{path.name} line {header_line}",
                found=f"columns {', '.join(repr(text) for text in columns)[:200]}",
                allowed=_layouts(),
                advice=ADVICE,
            )
        )
    problems: list[Problem] = []
    cuts = {"horizontal": _Points(), "vertical": _Points()}
    for line, texts in body:
        where = f"{path.name} line {line}"
        if len(texts) != len(columns):
            allowed = f"{len(columns)} columns"
            problems.append(
                Problem(where=where, found=f"{len(texts)} columns", allowed=allowed, advice=ADVICE)
            )
            continue
        row = dict(zip(columns, (text.strip() for text in texts), strict=True))
        if "cut" in row:
            _take_point(where, row, cuts, problems)
        else:
            _take_both(where, row, cuts, problems)
    if problems:
        raise PatternError(_shortened(path, problems))
    try:
        return two_cut_pattern(
            name=name,
            gain_dbi=gain_dbi,
            horizontal_angle_deg=cuts["horizontal"].angle_deg,
            horizontal_level_db=cuts["horizontal"].level_db,
            vertical_angle_deg=cuts["vertical"].angle_deg,
            vertical_level_db=cuts["vertical"].level_db,
        )
    except PatternError as error:
        told = [
            replace(problem, where=problem.where.replace(f"antenna.{name}: ", f"{path.name}: "))
            for problem in error.problems
        ]
        raise PatternError(_shortened(path, told)) from None


def _rows(path: Path) -> Iterator[tuple[int, list[str]]]:
    """(line of the file, texts of its columns) of every row that is not blank or a comment."""
    text = _text(path)
    reader = csv.reader(io.StringIO(text, newline=""), strict=True)
    while True:
        try:
            texts = next(reader)
        except StopIteration:
            return
        except csv.Error as error:
            where = f"{path.name} line {reader.line_num}"
            raise PatternError(
                Problem(where=where, found=f"a row that is not CSV ({error})", advice=ADVICE)
            ) from None
        if any(cell.strip() for cell in texts) and not texts[0].lstrip().startswith("#"):
            yield reader.line_num, texts


def _text(path: Path) -> str:
    try:
        if not path.exists():
            raise PatternError(Problem(where=str(path), found="no such file"))
        if not path.is_file():
            raise PatternError(Problem(where=str(path), found="not a file", allowed="a CSV file"))
        with path.open("rb") as file:
            content = file.read(LARGEST_FILE_BYTES + 1)
    except OSError as error:
        found = f"a file that cannot be read ({error.strerror})"
        raise PatternError(Problem(where=str(path), found=found)) from None
    if len(content) > LARGEST_FILE_BYTES:
        found = f"more than {LARGEST_FILE_BYTES // 1_000_000} MB"
        raise PatternError(
            Problem(where=path.name, found=found, allowed="two cuts in less than that")
        )
    try:
        return content.decode("utf-8-sig")
    except UnicodeDecodeError as error:
        line = content[: error.start].count(b"\n") + 1
        raise PatternError(
            Problem(where=f"{path.name} line {line}", found="bytes that are not UTF-8 text",
                    advice=ADVICE)
        ) from None  # fmt: skip


def _take_point(
    where: str, row: dict[str, str], cuts: dict[str, _Points], problems: list[Problem]
) -> None:
    which = CUT_NAMES.get(row["cut"].lower())
    if which is None:
        problems.append(
            Problem(where=f"{where}: cut", found=repr(row["cut"][:40]),
                    allowed='"horizontal" or "vertical" (or "h", "v")')
        )  # fmt: skip
    angle_deg = _number(f"{where}: angle_deg", row["angle_deg"], problems)
    level_db = _number(f"{where}: level_db", row["level_db"], problems)
    if which is not None:
        cuts[which].angle_deg.append(angle_deg)
        cuts[which].level_db.append(level_db)


def _take_both(
    where: str, row: dict[str, str], cuts: dict[str, _Points], problems: list[Problem]
) -> None:
    """A row of both cuts; an empty level means that the cut has no point at this angle."""
    angle_deg = _number(f"{where}: angle_deg", row["angle_deg"], problems)
    for which, points in cuts.items():
        text = row[f"{which}_db"]
        if text:
            points.angle_deg.append(angle_deg)
            points.level_db.append(_number(f"{where}: {which}_db", text, problems))


def _number(where: str, text: str, problems: list[Problem]) -> float:
    try:
        number = float(text.replace("\N{MINUS SIGN}", "-"))
    except ValueError:
        number = math.nan
    if not math.isfinite(number) or "_" in text:
        advice = ADVICE if "," in text or ";" in text else ""
        problems.append(
            Problem(where=where, found=repr(text[:40]), allowed="a number", advice=advice)
        )
    return number


def _layouts() -> str:
    return f'the columns "{",".join(BOTH_CUTS)}" or "{",".join(CUT_BY_CUT)}"'


def _shortened(path: Path, problems: Sequence[Problem]) -> list[Problem]:
    if len(problems) <= MOST_PROBLEMS:
        return list(problems)
    rest = len(problems) - MOST_PROBLEMS
    return [*problems[:MOST_PROBLEMS], Problem(where=path.name, found=f"{rest} more problems")]
