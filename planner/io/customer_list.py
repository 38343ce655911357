"""Read a customer list: CSV as spreadsheets and registers write it, every row kept.

A row that cannot be computed is kept with its ``trouble``; a file that cannot be read as a list is
a CustomersError with everything that is wrong with it.
"""

import csv
import difflib
import io
import re
from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path

from planner.customers.reasons import rows_text
from planner.errors import CustomersError, Problem
from planner.io.customer_columns import (
    COMPUTED_COLUMNS,
    HEIGHT_COLUMNS,
    NEEDED_COLUMNS,
    numbered_names,
    plain_text,
)
from planner.io.customer_row import ReadRow, read_row, shown
from planner.network import Customer

LARGEST_FILE_BYTES = 16 * 1024 * 1024
LARGEST_ROWS = 100_000
LARGEST_COLUMNS = 100
_MOST_PROBLEMS = 20  # of one kind in one message

_FORMAT = "CSV text in UTF-8 with the columns " + ", ".join(NEEDED_COLUMNS)
_DELIMITERS = {",": "comma", ";": "semicolon", "\t": "tab"}
# What other lists call a column; only to advise, never to guess.
_OTHER_NAMES = {
    "id": ("name", "number", "customer", "customer_id", "no", "nr"),
    "address": ("street", "addr"),
    "latitude": ("lat", "y", "breite"),
    "longitude": ("lon", "long", "lng", "x", "laenge"),
}


@dataclass(frozen=True, slots=True, kw_only=True)
class CustomerList:
    """The customers of a file in its order, and what was assumed in reading it."""

    customers: tuple[Customer, ...]
    notes: tuple[str, ...]  # sentences for the reader of a run's record


def read_customers(path: Path) -> tuple[Customer, ...]:
    """The customers of a CSV file: see :func:`read_customer_list`."""
    return read_customer_list(path).customers


def read_customer_list(path: Path) -> CustomerList:
    """Every row of a CSV file, in order, with what was assumed.

    The first line names the columns: id, address, latitude, longitude; height_m (or
    antenna_height_m) is optional, the antenna's height above ground. All other columns are carried
    through. Comma, semicolon or tab; UTF-8, else Windows-1252 with a note. Raises CustomersError.
    """
    path = Path(path)
    text, notes = _text(path)
    delimiter, skipped_lines = _delimiter(text)
    records = _records(path, text, delimiter, skipped_lines)
    header_line, header = records.pop(0)
    columns = _columns(f"{path} line {header_line}", header, [cells for _, cells in records])
    if columns.computed:
        notes.append(
            f"{path.name}: the columns of an earlier check are computed anew; a height of its own "
            "for a customer belongs into a column height_m"
        )
    rows = [_row(columns, line, cells, decimal_comma=delimiter != ",") for line, cells in records]
    if not rows:
        raise CustomersError(
            Problem(
                where=str(path),
                found="a header and no customers",
                allowed="one customer in each line after the first",
            )
        )
    _refuse_swapped(path, rows)
    commas = [row.customer.row for row in rows if row.decimal_comma]
    if commas:
        notes.append(f"{path.name}: numbers with a decimal comma in {rows_text(commas)}")
    return CustomerList(customers=tuple(row.customer for row in rows), notes=tuple(notes))


def _text(path: Path) -> tuple[str, list[str]]:
    """The file's text and a note where it is not UTF-8."""
    data = _bytes(path)
    found = advice = ""
    if data.startswith((b"\xff\xfe", b"\xfe\xff")):
        found, advice = "text in UTF-16", "Save it as CSV in UTF-8"
    elif data.startswith(b"PK\x03\x04"):
        found, advice = "a spreadsheet or another packed file", "Save the sheet as CSV in UTF-8"
    elif b"\x00" in data:
        found, advice = "a file that is not text", "Save the list as CSV in UTF-8"
    if found:
        raise CustomersError(Problem(where=str(path), found=found, allowed=_FORMAT, advice=advice))
    try:
        return data.decode("utf-8-sig"), []
    except UnicodeDecodeError as error:
        line = data.count(b"\n", 0, error.start) + 1
    try:
        text = data.decode("cp1252")
    except UnicodeDecodeError as error:
        line = data.count(b"\n", 0, error.start) + 1
        raise CustomersError(
            Problem(
                where=f"{path} line {line}",
                found="bytes that are text neither in UTF-8 nor in Windows-1252",
                allowed=_FORMAT,
                advice="Save the list as CSV in UTF-8",
            )
        ) from None
    return text, [
        f"{path.name}: not UTF-8 (line {line}), read as Windows-1252; check letters with accents"
    ]


def _bytes(path: Path) -> bytes:
    found = advice = ""
    allowed = _FORMAT
    try:
        if not path.exists():
            found = "no such file"
        elif path.is_dir():
            found = "a folder"
        elif not path.is_file():
            found = "something that is not a file"
        else:
            with path.open("rb") as file:
                data = file.read(LARGEST_FILE_BYTES + 1)
            if len(data) <= LARGEST_FILE_BYTES:
                return data
            found = f"a file larger than {LARGEST_FILE_BYTES // 1024**2} MB"
            allowed = f"up to {LARGEST_FILE_BYTES // 1024**2} MB"
            advice = "Split the list"
    except (OSError, ValueError) as error:
        found = f"a file that cannot be read ({getattr(error, 'strerror', None) or error})"
    raise CustomersError(Problem(where=str(path), found=found, allowed=allowed, advice=advice))


def _delimiter(text: str) -> tuple[str, int]:
    """The delimiter by which the header has the most known names, and lines before the header."""
    stated = re.match(r"sep=([,;\t])(\r\n|\r|\n)", text)
    if stated:
        return stated[1], 1
    known = {*NEEDED_COLUMNS, *HEIGHT_COLUMNS}

    def score(delimiter: str) -> tuple[int, int]:
        reader = csv.reader(io.StringIO(text, newline=""), delimiter=delimiter)
        try:
            first = next((cells for cells in reader if not _is_blank(cells)), [])
        except csv.Error:
            first = []
        names = [_column_name(cell).casefold() for cell in first]
        return len(known.intersection(names)), len(names)

    return max(_DELIMITERS, key=score), 0  # the first of equals


def _records(
    path: Path, text: str, delimiter: str, skipped_lines: int
) -> list[tuple[int, list[str]]]:
    """(line, cells) of the header and of each row after it; empty lines are no rows."""
    reader = csv.reader(io.StringIO(text, newline=""), delimiter=delimiter, strict=True)
    records: list[tuple[int, list[str]]] = []
    problems: list[Problem] = []
    while len(problems) < _MOST_PROBLEMS:
        line = reader.line_num + 1
        try:
            cells = next(reader)
        except StopIteration:
            break
        except csv.Error as error:
            problems.append(_quoting_problem(path, line, str(error)))
            continue
        if _is_blank(cells) or line <= skipped_lines:
            continue
        records.append((line, cells))
        if len(records) > LARGEST_ROWS + 1:
            problems.append(
                Problem(
                    where=str(path),
                    found=f"more than {LARGEST_ROWS:,} customers",
                    allowed=f"up to {LARGEST_ROWS:,}",
                    advice="Split the list",
                )
            )
            break
    if not problems and not any("".join(cells).strip() for _, cells in records):
        problems.append(Problem(where=str(path), found="an empty file", allowed=_FORMAT))
    if problems:
        raise CustomersError(problems)
    return records


def _is_blank(cells: Sequence[str]) -> bool:
    """An empty line, or one of spaces; a line of delimiters is a row."""
    return not cells or (len(cells) == 1 and not cells[0].strip())


def _quoting_problem(path: Path, line: int, error: str) -> Problem:
    where = f"{path} line {line}"
    if "unexpected end" in error:
        return Problem(
            where=where,
            found="a quotation mark that is never closed",
            allowed="a cell in quotation marks, with each one inside it doubled",
        )
    if "field larger" in error:
        return Problem(
            where=where,
            found="a cell of more than 131,072 characters",
            allowed="shorter cells",
            advice="Look for a quotation mark that is not closed",
        )
    return Problem(
        where=where,
        found="text after the closing quotation mark of a cell",
        allowed="a cell in quotation marks, with each one inside it doubled",
    )


def _column_name(cell: str) -> str:
    return " ".join(plain_text(cell).split())


@dataclass(frozen=True, slots=True, kw_only=True)
class _Columns:
    """Which cell of a row is what."""

    count: int
    needed: tuple[int, ...]  # in the order of NEEDED_COLUMNS
    height: int | None
    carried: tuple[tuple[int, str], ...]  # number and name of each column to carry through
    computed: bool  # the list is a table of an earlier check


def _columns(where: str, header: Sequence[str], rows: Sequence[Sequence[str]]) -> _Columns:
    names = [_column_name(cell) for cell in header]
    # Spreadsheets write columns that are empty throughout; a column with cells gets a name.
    used = {number for cells in rows for number, cell in enumerate(cells) if cell.strip()}
    names = [
        name or (f"column_{number + 1}" if number in used else "")
        for number, name in enumerate(names)
    ]
    while names and not names[-1]:
        names.pop()
    folded = [name.casefold() for name in names]
    problems = _header_problems(where, names, folded)
    if problems:
        raise CustomersError(problems)
    computed = set(COMPUTED_COLUMNS) <= set(folded)
    dropped = {"", *NEEDED_COLUMNS, *(COMPUTED_COLUMNS if computed else ())}
    height = next(
        (folded.index(n) for n in HEIGHT_COLUMNS if n in folded and n not in dropped), None
    )
    carried = [number for number, name in enumerate(folded) if name not in dropped]
    # One name for the height, so that a table that we wrote gives it back.
    titles = [HEIGHT_COLUMNS[0] if number == height else names[number] for number in carried]
    return _Columns(
        count=len(names),
        needed=tuple(folded.index(name) for name in NEEDED_COLUMNS),
        height=height,
        carried=tuple(zip(carried, numbered_names(titles), strict=True)),
        computed=computed,
    )


def _header_problems(where: str, names: Sequence[str], folded: Sequence[str]) -> list[Problem]:
    needed = ", ".join(NEEDED_COLUMNS)
    if len(names) > LARGEST_COLUMNS:
        found = f"{len(names)} columns"
        return [Problem(where=where, found=found, allowed=f"up to {LARGEST_COLUMNS}")]
    alike = {name: _alike(name, folded) for name in NEEDED_COLUMNS}
    if not set(NEEDED_COLUMNS) & set(folded) and not any(alike.values()):
        return [
            Problem(
                where=where,
                found=f"no header but {shown(', '.join(names), 60)}",
                allowed=f"the names of the columns: {needed}",
                advice="Put a line with the names before the first customer",
            )
        ]
    problems = []
    for name in NEEDED_COLUMNS:
        other = alike[name]
        if name not in folded:
            advice = (
                f"Is it the column {shown(names[folded.index(other)])}? Rename it" if other else ""
            )
            found = f"no column {name}"
            problems.append(Problem(where=where, found=found, allowed=needed, advice=advice))
    for name in (*NEEDED_COLUMNS, *HEIGHT_COLUMNS):
        if folded.count(name) > 1:
            found = f"{folded.count(name)} columns named {name}"
            problems.append(Problem(where=where, found=found, allowed="one of that name"))
    if set(HEIGHT_COLUMNS) <= set(folded) and not set(COMPUTED_COLUMNS) <= set(folded):
        found = f"both columns {' and '.join(HEIGHT_COLUMNS)}"
        problems.append(
            Problem(where=where, found=found, allowed="one height: the antenna's above ground")
        )
    return problems


def _alike(name: str, folded: Sequence[str]) -> str:
    """A column that may be meant by another name; empty if there is none."""
    if name in folded:
        return ""
    free = [each for each in folded if each and each not in NEEDED_COLUMNS]
    for other in _OTHER_NAMES[name]:
        if other in free:
            return other
    close = difflib.get_close_matches(name, free, n=1, cutoff=0.75)
    return close[0] if close else ""


def _row(columns: _Columns, line: int, cells: Sequence[str], *, decimal_comma: bool) -> ReadRow:
    surplus = [cell for cell in cells[columns.count :] if cell.strip()]
    texts = [plain_text(cell) for cell in cells[: columns.count]]
    texts += [""] * (columns.count - len(texts))
    trouble = ""
    if surplus:
        trouble = (
            f"the row has {len(cells)} cells and the header {columns.count}: "
            "is there a delimiter in a cell without quotation marks?"
        )
    return read_row(
        line,
        [texts[number] for number in columns.needed],
        None if columns.height is None else texts[columns.height],
        tuple((name, texts[number]) for number, name in columns.carried),
        shape_trouble=trouble,
        decimal_comma=decimal_comma,
    )


def _refuse_swapped(path: Path, rows: Sequence[ReadRow]) -> None:
    """A list whose every row with two numbers is swapped has its headings mixed up."""
    numeric = [row for row in rows if row.numeric]
    if not numeric or not all(row.swapped for row in numeric):
        return
    raise CustomersError(
        Problem(
            where=f"{path}, {rows_text([row.customer.row for row in numeric])}",
            found="latitudes outside -90 to 90 beside longitudes that would be latitudes",
            allowed="latitude (-90 to 90) and longitude (-180 to 180) each in its own column",
            advice="Latitude and longitude are swapped: swap the names of the two columns",
        )
    )
