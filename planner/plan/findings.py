"""Every problem found in a plan, in the order of the file."""

from collections.abc import Callable
from functools import partial
from typing import Any, get_args

from pydantic import ValidationError

from planner.errors import PlanError, Problem
from planner.plan.schema import every_key, table_and_field
from planner.plan.shown import nearest, shown
from planner.plan.toml_file import Location, TomlFile

MOST_PROBLEMS = 100  # told at once; a file with more is no plan yet


class Findings:
    """Collects problems with the places that they belong to."""

    def __init__(self, file: TomlFile) -> None:
        self.file = file
        self._found: dict[tuple[Location, str, str], Problem] = {}
        self._left_out = 0

    def add(
        self,
        location: Location,
        *,
        found: str,
        allowed: str = "",
        advice: str | Callable[[], str] = "",
    ) -> None:
        """Note one problem; ``advice`` may be a function where it takes time to find."""
        key = (location, found, allowed)
        if key in self._found:
            return
        if len(self._found) >= MOST_PROBLEMS:
            self._left_out += 1
            return
        self._found[key] = Problem(
            where=self.file.where(location),
            found=found,
            allowed=allowed,
            advice=advice if isinstance(advice, str) else advice(),
        )

    def __bool__(self) -> bool:
        return bool(self._found)

    def error(self) -> PlanError:
        """All of it, as it stands in the file from top to bottom."""

        def place(item: tuple[tuple[Location, str, str], Problem]) -> tuple[bool, int]:
            line = self.file.line(item[0][0])
            return line is None, line or 0

        problems = [problem for _, problem in sorted(self._found.items(), key=place)]
        if self._left_out:
            problems.append(
                Problem(where=self.file.where(()), found=f"{self._left_out:,} more problems")
            )
        return PlanError(problems)


def add_schema_problems(findings: Findings, error: ValidationError) -> list[Location]:
    """Put every mismatch with the schema into the findings; the places that cannot be used."""
    places: list[Location] = []
    for mismatch in error.errors(include_url=False, include_context=False):
        location: Location = tuple(mismatch["loc"])
        kind, value = mismatch["type"], mismatch["input"]
        if location[-1:] == ("[key]",):  # the name of an antenna or a radio
            location = location[:-1]
            found = f"the name {shown(location[-1])}"
            findings.add(location, found=found, allowed=_allowed(location))
            continue
        if kind == "missing":
            findings.add(location, found="nothing", allowed=_allowed(location))
            continue
        places.append(location)
        if kind == "extra_forbidden":
            advice = partial(_unknown_key_advice, location)
            findings.add(location, found="an unknown key", advice=advice)
        else:
            findings.add(
                location,
                found=shown(value),
                allowed=_allowed(location),
                advice=partial(_value_advice, findings.file.table, location, value),
            )
    return places


def without(table: dict[str, Any], places: list[Location]) -> dict[str, Any]:
    """The plan's table with None in the places that cannot be used; the original stays as it is.

    What is left has the types of the schema, so that the checks across tables can go on.
    """
    rest = dict(table)
    copies: dict[Location, Any] = {}  # only what is on the way to a place; the rest is shared
    for place in places:
        inner: Any = rest
        for depth in range(1, len(place)):
            path = place[:depth]
            if path not in copies:
                copies[path] = inner[path[-1]].copy()
                inner[path[-1]] = copies[path]
            inner = copies[path]
        inner[place[-1]] = None
    return rest


def _allowed(location: Location) -> str:
    _, field = table_and_field(location)
    return (field.description or "") if field is not None else ""


def _unknown_key_advice(location: Location) -> str:
    key = str(location[-1])
    homes = [header for header, known in every_key() if known == key]
    if homes == [""]:
        return "It belongs at the top of the file, before any table"
    if homes:
        return f"It belongs in {' or '.join(homes)}"
    table, _ = table_and_field(location)
    known = list(table.model_fields) if table is not None else []
    match = nearest(key, known)
    if match is not None:
        return f"Nearest known key: {match}"
    return f"Known keys here: {', '.join(known)}"


def _value_advice(table: dict[str, Any], location: Location, value: Any) -> str:
    """What else there is to say about a value that is not allowed."""
    _, field = table_and_field(location)
    if field is None:
        return ""
    choices = [word for word in _choices(field.annotation) if isinstance(word, str)]
    if choices and isinstance(value, str):
        match = nearest(value, choices)
        return f'Did you mean "{match}"?' if match else ""
    is_number = _holds_number(field.annotation)
    if is_number and isinstance(value, str):
        return "Write the number without quotation marks"
    if location[-1] == "latitude" and is_number and _is_swapped(table, location, value):
        return "Latitude and longitude swapped?"
    return ""


def _is_swapped(table: Any, location: Location, latitude: Any) -> bool:
    for key in location[:-1]:
        table = table[key]
    longitude = table.get("longitude")
    return all(
        isinstance(angle, int | float) and not isinstance(angle, bool)
        for angle in (latitude, longitude)
    ) and (90.0 < abs(latitude) <= 180.0 and abs(longitude) <= 90.0)


def _choices(annotation: Any) -> list[Any]:
    """The words of a Literal, also inside lists and optional types."""
    inner = get_args(annotation)
    return [
        word
        for choice in inner
        for word in ([choice] if isinstance(choice, str) else _choices(choice))
    ]


def _holds_number(annotation: Any) -> bool:
    return annotation in (int, float) or bool({int, float} & set(get_args(annotation)))
