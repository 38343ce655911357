"""The text of a pattern file within bounds: its lines, its numbers, and what is wrong with them.

A damaged file must cost neither memory nor time, so bytes, line length and the faults that are
kept have limits; points and blocks have theirs where they are gathered.
"""

import math
import re
from dataclasses import dataclass, field
from pathlib import Path
from typing import NoReturn

from planner.errors import PatternError, Problem

LARGEST_FILE_BYTES = 8_000_000  # a full sphere in steps of half a degree takes some 5 MB
LONGEST_LINE = 1000  # characters; free text in the open standard is far shorter
MOST_POINTS = 400_000  # in one file; a sphere in steps of half a degree has 259,920
MOST_LINES = 500_000
MOST_PROBLEMS = 50  # told one by one; the rest is counted
MOST_WARNINGS = 20

_LINE_END = re.compile(r"\r\n|\r|\n")
_NUMBER = re.compile(r"[+-]?(?:\d+\.?\d*|\.\d+)(?:[eE][+-]?\d{1,3})?", re.ASCII)
_MINUS_SIGNS = str.maketrans({"\N{MINUS SIGN}": "-", "\N{EN DASH}": "-", "\N{HYPHEN}": "-"})


@dataclass(frozen=True, slots=True, kw_only=True)
class PatternText:
    """Lines of a file without their ends; ``lines[0]`` is line 1."""

    file_name: str
    lines: tuple[str, ...]
    not_utf8_line: int | None  # first line with bytes that are not UTF-8; read as Windows-1252

    def where(self, line: int, key: str = "") -> str:
        """Place of a line for messages."""
        return f"{self.file_name} line {line}" + (f": {key}" if key else "")


@dataclass(slots=True)
class Faults:
    """Collects problems and warnings of one file; both within bounds."""

    file_name: str
    problems: list[tuple[int, Problem]] = field(default_factory=list)  # with its line, or 0
    warnings: list[str] = field(default_factory=list)
    more_problems: int = 0
    more_warnings: int = 0

    def add(self, line: int | None, found: str, allowed: str = "", advice: str = "") -> None:
        """Note a problem at a line of the file; None where it belongs to no line."""
        if len(self.problems) >= MOST_PROBLEMS:
            self.more_problems += 1
            return
        problem = Problem(where=self.where(line), found=found, allowed=allowed, advice=advice)
        self.problems.append((line or 0, problem))

    def stop(self, line: int, found: str, allowed: str) -> NoReturn:
        """Give up reading at a line: raise this problem and all that were found before."""
        del self.problems[MOST_PROBLEMS - 1 :]
        self.add(line, found, allowed)
        self.raise_problems()
        raise AssertionError("there is at least one problem")

    def warn(self, line: int | None, text: str) -> None:
        """Note something that was read all the same."""
        if len(self.warnings) >= MOST_WARNINGS:
            self.more_warnings += 1
            return
        self.warnings.append(f"{self.where(line)}: {text}")

    def where(self, line: int | None) -> str:
        """Place of a line for messages."""
        return self.file_name if line is None else f"{self.file_name} line {line}"

    def raise_problems(self) -> None:
        """Raise every problem at once, from the top of the file; nothing where there is none."""
        if not self.problems:
            return
        told = [problem for _, problem in sorted(self.problems, key=lambda one: one[0])]
        if self.more_problems:
            found = f"{self.more_problems} more problems"
            told.append(Problem(where=self.file_name, found=found))
        raise PatternError(told)

    def all_warnings(self) -> tuple[str, ...]:
        """The warnings, and how many more there were."""
        if not self.more_warnings:
            return tuple(self.warnings)
        return *self.warnings, f"{self.file_name}: {self.more_warnings} more warnings"


def read_text(path: Path) -> PatternText:
    """The lines of a pattern file.

    Raises
    ------
    PatternError
        Where there is no such file, it is larger than 8 MB, binary or UTF-16, or has more than
        500,000 lines or a line of more than 1000 characters.
    """
    content = _content(Path(path))
    name = Path(path).name
    if content.startswith((b"\xff\xfe", b"\xfe\xff")):
        raise PatternError(
            Problem(where=name, found="UTF-16 text", allowed="UTF-8 text",
                    advice="Save the file as UTF-8")
        )  # fmt: skip
    if b"\0" in content:
        at = len(_LINE_END.split(content[: content.index(b"\0")].decode("latin-1")))
        found = "a zero byte, as in a binary file"
        raise PatternError(Problem(where=f"{name} line {at}", found=found, allowed="text"))
    not_utf8_line = None
    try:
        text = content.decode("utf-8-sig")
    except UnicodeDecodeError as error:
        # latin-1 has a character for each byte and the same line ends
        not_utf8_line = len(_LINE_END.split(content[: error.start].decode("latin-1")))
        text = content.decode("cp1252", errors="replace")
    if text.count("\n") + text.count("\r") > 2 * MOST_LINES:  # before memory goes to the lines
        raise _too_many_lines(name)
    lines: list[str] = _LINE_END.split(text)
    if len(lines) > MOST_LINES:
        raise _too_many_lines(name)
    faults = Faults(name)
    for number, line in enumerate(lines, start=1):
        if len(line) > LONGEST_LINE:
            faults.add(number, f"{len(line):,} characters", f"lines of up to {LONGEST_LINE}")
    faults.raise_problems()
    return PatternText(file_name=name, lines=tuple(lines), not_utf8_line=not_utf8_line)


def _too_many_lines(name: str) -> PatternError:
    found = f"more than {MOST_LINES:,} lines"
    return PatternError(Problem(where=name, found=found, allowed="that many in one file"))


def _content(path: Path) -> bytes:
    try:
        if not path.exists():
            raise PatternError(Problem(where=str(path), found="no such file"))
        if not path.is_file():
            found = "not a file"
            raise PatternError(Problem(where=str(path), found=found, allowed="a pattern file"))
        with path.open("rb") as file:
            content = file.read(LARGEST_FILE_BYTES + 1)
    except PatternError:
        raise
    except OSError as error:
        found = f"a file that cannot be read ({error.strerror})"
        raise PatternError(Problem(where=str(path), found=found)) from None
    except ValueError:  # a zero character in the name
        raise PatternError(Problem(where=repr(str(path)), found="no file name")) from None
    if len(content) > LARGEST_FILE_BYTES:
        found = f"more than {LARGEST_FILE_BYTES // 1_000_000} MB"
        allowed = "a pattern in less than that"
        raise PatternError(Problem(where=path.name, found=found, allowed=allowed))
    return content


def number_in(text: str) -> float:
    """The finite number that a text is; NaN where it is none. Unicode minus signs are read."""
    plain = text.strip().translate(_MINUS_SIGNS)
    if not _NUMBER.fullmatch(plain):
        return math.nan
    number = float(plain)
    return number if math.isfinite(number) else math.nan


def number_text(number: float) -> str:
    """The shortest text that reads back as the same number."""
    text = repr(float(number))
    return text.removesuffix(".0")


def quoted(text: str) -> str:
    """What stands in a file, for a message: printable and short."""
    return repr(text if len(text) <= 40 else text[:40] + "…")
