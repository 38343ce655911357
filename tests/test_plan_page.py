"""docs/plan-file.md against the schema: every key, unit, default and range, and the example."""

import datetime
import re
from pathlib import Path
from typing import Any

import pytest
from plans import PLAN, write_plan
from pydantic_core import PydanticUndefined

from planner.plan import read_plan
from planner.plan.schema import ALL_LAYERS, PlanTable, every_key, table_and_field
from planner.units import STANDARD_K_FACTOR

PAGE = (Path(__file__).parents[1] / "docs" / "plan-file.md").read_text(encoding="utf-8")
COLUMNS = ["Key", "Unit", "Default", "Range", "Meaning"]
UNITS = ("dBm", "dBi", "dB", "MHz", "km", "m", "deg")


def page_rows() -> dict[tuple[str, str], dict[str, str]]:
    """The page's tables: row by (header of the plan's table, key)."""
    rows: dict[tuple[str, str], dict[str, str]] = {}
    header = None
    for line in PAGE.splitlines():
        if line.startswith("## "):
            found = re.fullmatch(r"## `(\[.*\])`", line)
            header = found[1] if found else "" if line == "## At the top of the file" else None
        cells = [cell.strip() for cell in line.strip("|").split("|")]
        if header is None or not line.startswith("|") or set(line) <= {"|", "-"}:
            continue
        if cells[0] == "Key":
            assert cells == COLUMNS
            continue
        key = (header, cells[0].strip("`"))
        assert key not in rows
        rows[key] = dict(zip(COLUMNS, cells, strict=True))
    return rows


ROWS = page_rows()


def field_of(header: str, key: str) -> Any:
    parts: list[str | int] = []
    for part in filter(None, header.strip("[]").split(".")):
        parts.append(part)
        if part in ("tower", "sector"):
            parts.append(0)
    return table_and_field([*parts, key])[1]


def shown_default(default: Any) -> str:
    if default is PydanticUndefined or default is ...:
        return "needed"
    if default is None:
        return "none"
    if isinstance(default, bool):
        return str(default).lower()
    if default == STANDARD_K_FACTOR:
        return "4/3"
    if isinstance(default, str):
        return f'"{default}"'
    if isinstance(default, datetime.date):
        return default.isoformat()
    if isinstance(default, list):
        return "the first four" if default == list(ALL_LAYERS[:4]) else str(default)
    return f"{default:g}"


def test_page_and_schema_have_the_same_keys() -> None:
    """No key is missing in the page, and the page explains none that is not there."""
    assert set(ROWS) == set(every_key())


@pytest.mark.parametrize(("header", "key"), sorted(every_key()))
def test_unit_default_and_range(header: str, key: str) -> None:
    """Unit, default and range in the page are those that the program applies."""
    field, row = field_of(header, key), ROWS[header, key]
    unit = row["Unit"]
    assert (unit in UNITS) or unit == "–"
    allowed = row["Range"] if unit == "–" else f"{row['Range']} {unit}"
    assert field.description == allowed
    assert row["Default"] == shown_default(field.default)
    assert row["Meaning"].endswith(".")


@pytest.mark.parametrize(("header", "key"), sorted(every_key()))
def test_unit_is_in_the_key(header: str, key: str) -> None:
    """A key whose value has a unit ends with it; latitude and longitude alone do not."""
    unit = ROWS[header, key]["Unit"]
    if unit != "–" and key not in ("latitude", "longitude"):
        assert key.endswith(f"_{unit.lower()}")
    if unit == "–":
        assert not key.endswith(tuple(f"_{known.lower()}" for known in UNITS))


def test_the_example_is_a_plan(tmp_path: Path) -> None:
    """The whole plan on the page can be read, and is the one that the tests use."""
    [example] = re.findall(r"```toml\n(.*?)```", PAGE, flags=re.DOTALL)
    assert example == PLAN
    assert read_plan(write_plan(tmp_path, example)).name == "West mast at the mill pond"


def test_the_message_on_the_page(tmp_path: Path) -> None:
    """The error message on the page is what the program says."""
    path = write_plan(tmp_path, PLAN.replace("azimuth_deg = 140", "azimuth_deg = 400"))
    with pytest.raises(ValueError) as caught:
        read_plan(path)
    assert f"      {caught.value}\n" in PAGE


def test_tables_of_the_page_come_in_the_order_of_the_schema() -> None:
    """A reader finds tables and keys where the file has them."""
    assert list(ROWS) == list(every_key(PlanTable))
