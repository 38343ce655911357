"""The columns of customer tables, read and written, and how text stays text in a spreadsheet.

A spreadsheet takes a cell that begins with ``=``, ``+``, ``-`` or ``@`` for a formula, and lists
come from anywhere. Such text is written with an apostrophe before it, and read without it, so that
our own table can be read again. A plain negative number is no formula and stays as it is.
"""

import math
import re
from collections.abc import Callable, Iterable, Sequence
from dataclasses import dataclass

from planner.customers.answer import CustomerAnswer

NEEDED_COLUMNS = ("id", "address", "latitude", "longitude")
HEIGHT_COLUMNS = ("height_m", "antenna_height_m")  # the antenna above ground; one of them, or none

# Begins a formula: in any spreadsheet, and the wide forms in some; tab and line ends are skipped by
# some before they look.
_FORMULA_STARTS = frozenset("=+-@\t\r\n＝＋－＠")
_NEGATIVE_NUMBER = re.compile(r"-[0-9]+(\.[0-9]*)?([eE][-+]?[0-9]+)?", re.ASCII)


def _needs_apostrophe(text: str) -> bool:
    bare = text.lstrip("'")
    return bare[:1] in _FORMULA_STARTS and not _NEGATIVE_NUMBER.fullmatch(bare) and bare != ""


def spreadsheet_text(text: str) -> str:
    """A cell that stays text in a spreadsheet; undone by :func:`plain_text`."""
    return "'" + text if _needs_apostrophe(text) else text


def plain_text(cell: str) -> str:
    """The text of a cell, without the apostrophe that :func:`spreadsheet_text` put before it."""
    return cell[1:] if cell.startswith("'") and _needs_apostrophe(cell[1:]) else cell


@dataclass(frozen=True, slots=True, kw_only=True)
class Column:
    """A column that every customer table has."""

    name: str
    value: Callable[[CustomerAnswer], str | float]  # NaN: not computed
    decimals: int | None = None  # None: text

    def number(self, answer: CustomerAnswer) -> float:
        """The value rounded as it is written; NaN where there is none."""
        assert self.decimals is not None
        rounded = round(float(self.value(answer)), self.decimals) + 0.0  # without a minus before 0
        return 0.0 if self.name.startswith("bearing_") and rounded == 360.0 else rounded

    def cell(self, answer: CustomerAnswer) -> str:
        """The value as text: empty where it was not computed."""
        if self.decimals is None:
            return spreadsheet_text(str(self.value(answer)))
        number = self.number(answer)
        return f"{number:.{self.decimals}f}" if math.isfinite(number) else ""


def _line_of_sight(answer: CustomerAnswer) -> str:
    return {True: "yes", False: "no", None: ""}[answer.line_of_sight]


COLUMNS = (
    Column(name="id", value=lambda answer: answer.customer.id),
    Column(name="address", value=lambda answer: answer.customer.address),
    Column(name="latitude", value=lambda answer: answer.customer.latitude, decimals=7),
    Column(name="longitude", value=lambda answer: answer.customer.longitude, decimals=7),
    Column(name="antenna_height_m", value=lambda answer: answer.antenna_height_m, decimals=2),
    Column(name="verdict", value=lambda answer: answer.verdict),
    Column(name="reason", value=lambda answer: answer.reason),
    Column(name="note", value=lambda answer: answer.note),
    Column(name="best_sector", value=lambda answer: answer.sector_id),
    Column(name="tower", value=lambda answer: answer.tower_id),
    Column(name="distance_m", value=lambda answer: answer.distance_m, decimals=1),
    Column(name="bearing_to_tower_deg", value=lambda a: a.bearing_to_tower_deg, decimals=2),
    Column(name="elevation_angle_deg", value=lambda a: a.elevation_angle_deg, decimals=2),
    Column(name="received_signal_dbm", value=lambda a: a.received_signal_dbm, decimals=2),
    Column(name="fade_margin_db", value=lambda answer: answer.fade_margin_db, decimals=2),
    Column(name="second_sector", value=lambda answer: answer.second_sector_id),
    Column(name="server_margin_db", value=lambda answer: answer.server_margin_db, decimals=2),
    Column(name="sector_gain_dbi", value=lambda answer: answer.sector_gain_dbi, decimals=2),
    Column(name="line_of_sight", value=_line_of_sight),
    Column(name="blocking_distance_m", value=lambda a: a.blocking_distance_m, decimals=1),
    Column(name="blocking_latitude", value=lambda a: a.blocking_latitude, decimals=6),
    Column(name="blocking_longitude", value=lambda a: a.blocking_longitude, decimals=6),
    Column(name="blocking_excess_m", value=lambda answer: answer.blocking_excess_m, decimals=1),
    Column(name="blocking_ground_m", value=lambda answer: answer.blocking_ground_m, decimals=1),
    Column(name="blocking_obstacle_m", value=lambda a: a.blocking_obstacle_m, decimals=1),
    Column(name="path_loss_db", value=lambda answer: answer.path_loss_db, decimals=2),
    Column(name="free_space_loss_db", value=lambda a: a.free_space_loss_db, decimals=2),
    Column(name="diffraction_loss_db", value=lambda a: a.diffraction_loss_db, decimals=2),
)

# A list that has all of these is a table that we wrote; they are computed anew.
COMPUTED_COLUMNS = tuple(column.name for column in COLUMNS if column.name not in NEEDED_COLUMNS)


def carried_names(answers: Sequence[CustomerAnswer]) -> tuple[str, ...]:
    """Names of the columns that the list carries besides ours, in order."""
    names: dict[str, None] = {}
    for answer in answers:
        names.update((name, None) for name, _ in answer.customer.extra)
    return tuple(names)


def numbered_names(names: Iterable[str]) -> tuple[str, ...]:
    """The names, with ``_2``, ``_3``, ... after each that stood before."""
    used: set[str] = set()
    distinct = []
    for name in names:
        candidate, number = name, 1
        while candidate in used:
            number += 1
            candidate = f"{name}_{number}"
        used.add(candidate)
        distinct.append(candidate)
    return tuple(distinct)


def distinct_names(names: Iterable[str], taken: Iterable[str]) -> tuple[str, ...]:
    """The names, with ``_given`` (and a number) after each that is taken already in any case."""
    used = {name.casefold() for name in taken}
    distinct = []
    for name in names:
        candidate, number = name, 1
        while candidate.casefold() in used:
            candidate = f"{name}_given" + (f"_{number}" if number > 1 else "")
            number += 1
        used.add(candidate.casefold())
        distinct.append(candidate)
    return tuple(distinct)
