"""A plan file as bytes, text, table and line numbers, before anything in it is judged."""

import hashlib
import tomllib
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from planner.errors import PlanError, Problem
from planner.plan.shown import printable, shown_key

LARGEST_FILE_BYTES = 5_000_000
# Dots make nested keys, and the parser's work grows with their square; a plan needs few.
MOST_DOT_STEPS = 10_000_000
MOST_ELEMENTS = 10_000  # of one table or list

Location = tuple[str | int, ...]  # keys and places in lists: ("tower", 0, "latitude")

_LONGEST_KEY = 300  # longer ones get no line number
_NOT_IN_A_KEY = frozenset("#[]{},=")


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class TomlFile:
    """A file that is TOML."""

    path: Path  # absolute
    sha256: str  # of the file's bytes
    table: dict[str, Any]
    lines: dict[Location, int]  # line of each header and key, as far as they were recognised

    def line(self, location: Location) -> int | None:
        """The line of a key, or of the nearest table around it; from 1."""
        for length in range(len(location), 0, -1):
            if location[:length] in self.lines:
                return self.lines[location[:length]]
        return None

    def where(self, location: Location) -> str:
        """A place in words: "plan.toml: tower.0.latitude (tower west, line 31)"."""
        notes = [*self._owners(location)]
        line = self.line(location)
        if line is not None:
            notes.append(f"line {line}")
        key = ".".join(shown_key(part) for part in location)
        text = f"{printable(self.path.name)}: {key}" if key else printable(self.path.name)
        return f"{text} ({', '.join(notes)})" if notes else text

    def _owners(self, location: Location) -> list[str]:
        """Which tower and sector a place belongs to, where they have said their ids."""
        owners = []
        table: Any = self.table
        for number, key in enumerate(location):
            try:
                table = table[key]
            except (KeyError, IndexError, TypeError):
                break
            inside_list = isinstance(key, int) and isinstance(table, dict) and number > 0
            if inside_list and location[number - 1] in ("tower", "sector"):
                name = table.get("id")
                if isinstance(name, str) and name.strip():
                    owners.append(f"{location[number - 1]} {printable(name, 64)}")
        return owners


def read_toml_file(path: Path) -> TomlFile:
    """Read a TOML file; PlanError where it is missing, no file, too large, not UTF-8, not TOML."""
    data = _file_bytes(path)
    text = _decoded(path, data)
    steps = _dot_steps(text)
    if steps > MOST_DOT_STEPS:
        raise _plan_error(
            path,
            "too many dots in one line, as in deeply nested keys",
            "keys of a few parts",
            "Spread long lists over several lines",
        )
    try:
        table = tomllib.loads(text)
    except tomllib.TOMLDecodeError as error:
        raise _plan_error(path, f"a mistake in the TOML: {_parser_words(text, error)}") from None
    except RecursionError:
        raise _plan_error(
            path, "lists or tables nested too deeply", "what docs/plan-file.md lists"
        ) from None
    except ValueError:  # not the TOML is wrong but Python's limit for digits is reached
        raise _plan_error(path, "a number of thousands of digits") from None
    longest = _longest_collection(table)
    if longest > MOST_ELEMENTS:
        raise _plan_error(
            path, f"a table or list of {longest:,} elements", f"up to {MOST_ELEMENTS:,}"
        )
    return TomlFile(
        path=path.absolute(),
        sha256=hashlib.sha256(data).hexdigest(),
        table=table,
        lines=_key_lines(text),
    )


def _plan_error(path: Path, found: str, allowed: str = "", advice: str = "") -> PlanError:
    where = printable(str(path), 1000)
    return PlanError(Problem(where=where, found=found, allowed=allowed, advice=advice))


def _file_bytes(path: Path) -> bytes:
    try:
        trouble = _trouble_with_place(path)
        if not trouble:
            with path.open("rb") as file:
                data = file.read(LARGEST_FILE_BYTES + 1)
    except OSError as error:
        trouble = f"a file that cannot be read ({error.strerror or type(error).__name__})"
    if trouble:
        raise _plan_error(path, trouble, "a plan file (TOML)")
    if len(data) > LARGEST_FILE_BYTES:
        raise _plan_error(
            path, "a larger file", f"up to {LARGEST_FILE_BYTES // 1_000_000} MB", "Is it a plan?"
        )
    return data


def _trouble_with_place(path: Path) -> str:
    if path.is_dir():
        return "a folder"
    if not path.exists():
        return "no such file"
    return "" if path.is_file() else "a device or pipe"


def _decoded(path: Path, data: bytes) -> str:
    try:
        return data.decode("utf-8-sig").replace("\r\n", "\n")
    except UnicodeDecodeError as error:
        line = data.count(b"\n", 0, error.start) + 1
        raise _plan_error(
            path,
            f"text that is not UTF-8 (line {line}, byte 0x{data[error.start]:02x})",
            "UTF-8",
            "Save the file with the encoding UTF-8",
        ) from None


def _dot_steps(text: str) -> int:
    """About how many steps the parser needs for nested keys."""
    dots = [line.count(".") for line in text.split("\n")]
    return max(dots) * len(dots) + sum(count * count for count in dots)


def _longest_collection(table: dict[str, Any]) -> int:
    """Number of elements of the longest table or list, at any depth."""
    longest = 0
    waiting: list[Any] = [table]
    while waiting:
        collection = waiting.pop()
        longest = max(longest, len(collection))
        inner = collection.values() if isinstance(collection, dict) else collection
        waiting.extend(value for value in inner if isinstance(value, dict | list))
    return longest


def _parser_words(text: str, error: tomllib.TOMLDecodeError) -> str:
    """The parser's message with the line always in it."""
    message = printable(str(error), 300)
    if "(at end of document)" in message:
        last = text.rstrip().count("\n") + 1
        message = message.replace("(at end of document)", f"(at the end, line {last})")
    return message


def _key_lines(text: str) -> dict[Location, int]:
    """Line of each header and key. A help for the reader only: odd spellings are passed over."""
    lines: dict[Location, int] = {}
    counts: dict[Location, int] = {}  # how many elements each list of tables has so far
    table: Location = ()
    for number, line in enumerate(text.split("\n"), start=1):
        if line.lstrip().startswith("["):
            brackets, name = _header(line)
            if name:
                table = _resolved(_key_parts(name), counts, new_element=brackets == 2)
                lines.setdefault(table, number)
                if brackets == 2:
                    lines.setdefault(table[:-1], number)  # the list begins at its first table
            continue
        key, equals, _ = line.partition("=")
        if equals and _is_key(key):
            lines.setdefault((*table, *_key_parts(key)), number)
    return lines


def _header(line: str) -> tuple[int, str]:
    """Number of brackets and what stands between them; (0, "") where it is no header."""
    inner = line.partition("#")[0].strip()
    brackets = 2 if inner.startswith("[[") else 1
    name = inner[brackets:-brackets]
    if inner.endswith("]" * brackets) and _is_key(name):
        return brackets, name
    return 0, ""


def _is_key(text: str) -> bool:
    return bool(text.strip()) and len(text) <= _LONGEST_KEY and _NOT_IN_A_KEY.isdisjoint(text)


def _key_parts(name: str) -> tuple[str, ...]:
    return tuple(part.strip().strip("\"'") for part in name.split("."))


def _resolved(
    parts: tuple[str, ...], counts: dict[Location, int], *, new_element: bool
) -> Location:
    """The place that a header opens: lists of tables stand for their latest element."""
    location: Location = ()
    for position, part in enumerate(parts):
        location = (*location, part)
        if new_element and position == len(parts) - 1:
            counts[location] = counts.get(location, 0) + 1
        if location in counts:
            location = (*location, counts[location] - 1)
    return location
