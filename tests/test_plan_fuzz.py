"""Whatever a plan file holds, reading it gives a plan or says what is wrong, and soon."""

import string
import time
import tomllib
from pathlib import Path
from typing import Any

import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st
from plans import PLAN, write_plan

from planner.errors import PlanError
from planner.plan import Plan, read_plan
from planner.plan.findings import MOST_PROBLEMS
from planner.plan.schema import every_key

MANY = settings(
    max_examples=200,
    deadline=None,
    database=None,
    derandomize=True,
    suppress_health_check=[HealthCheck.function_scoped_fixture],
)
LINES = PLAN.splitlines()
KEYS = sorted({key for _, key in every_key()})
TABLES = ("terrain", "model", "antenna", "radio", "terminal", "tower", "customers", "output")

words = st.text(max_size=12) | st.sampled_from(["", "west", "access", "panel-90", "terrain.tif"])
values = st.recursive(
    st.none()
    | st.booleans()
    | st.integers()
    | st.floats()
    | words
    | st.dates()
    | st.datetimes()
    | st.times(),
    lambda inner: st.lists(inner, max_size=3) | st.dictionaries(words, inner, max_size=3),
    max_leaves=8,
)


def toml(value: Any) -> str:
    """A value in TOML, inline."""
    if isinstance(value, bool):
        return str(value).lower()
    if isinstance(value, str):
        return toml_text(value)
    if isinstance(value, float):
        return repr(value)  # nan and inf are spelt alike
    if isinstance(value, list):
        return f"[{', '.join(map(toml, value))}]"
    if isinstance(value, dict):
        return (
            f"{{{', '.join(f'{toml_text(key)} = {toml(inner)}' for key, inner in value.items())}}}"
        )
    return str(value)  # None becomes a mistake


def toml_text(text: str) -> str:
    plain = string.ascii_letters + string.digits + " ._-/"
    return '"' + "".join(c if c in plain else f"\\U{ord(c):08x}" for c in text) + '"'


def read_or_refused(path: Path) -> Plan | None:
    """The plan, or None where it was refused in an orderly way."""
    try:
        return read_plan(path)
    except PlanError as error:
        problems = error.problems
    assert 1 <= len(problems) <= MOST_PROBLEMS + 1
    assert [text for text in map(str, problems) if not text.isprintable()] == []
    assert [text for text in map(str, problems) if len(text) >= 2000] == []
    return None


@MANY
@given(data=st.binary(max_size=400))
def test_any_bytes(tmp_path: Path, data: bytes) -> None:
    """Random bytes are never a plan and never an accident."""
    path = tmp_path / "plan.toml"
    path.write_bytes(data)
    assert read_or_refused(path) is None


@MANY
@given(st.data())
def test_flipped_bytes(tmp_path: Path, data: st.DataObject) -> None:
    """A good plan with a few bytes changed, lost or put in."""
    content = bytearray(PLAN.encode())
    for _ in range(data.draw(st.integers(1, 4))):
        at = data.draw(st.integers(0, len(content) - 1))
        replacement = data.draw(st.binary(max_size=3))
        content[at : at + data.draw(st.integers(0, 3))] = replacement
    path = write_plan(tmp_path)
    path.write_bytes(content)
    read_or_refused(path)


@MANY
@given(st.data())
def test_moved_and_changed_lines(tmp_path: Path, data: st.DataObject) -> None:
    """A good plan with lines dropped, doubled, moved, and with other values and keys."""
    lines = list(LINES)
    for _ in range(data.draw(st.integers(1, 5))):
        at = data.draw(st.integers(0, len(lines) - 1))
        match data.draw(st.sampled_from(["drop", "double", "move", "value", "key", "own"])):
            case "drop":
                del lines[at]
            case "double":
                lines.insert(at, lines[at])
            case "move":
                lines.insert(data.draw(st.integers(0, len(lines) - 1)), lines.pop(at))
            case "value":
                lines[at] = f"{lines[at].partition('=')[0]}= {toml(data.draw(values))}"
            case "key":
                lines.insert(at, f"{data.draw(st.sampled_from(KEYS))} = {toml(data.draw(values))}")
            case "own":
                lines.insert(at, f"{toml_text(data.draw(words))} = {toml(data.draw(values))}")
    read_or_refused(write_plan(tmp_path, "\n".join(lines)))


@MANY
@given(st.dictionaries(st.sampled_from([*TABLES, "name", "x"]), values))
def test_any_tables(tmp_path: Path, tables: dict[str, Any]) -> None:
    """The right names with anything under them."""
    text = "\n".join(f"{name} = {toml(value)}" for name, value in tables.items())
    assert read_or_refused(write_plan(tmp_path, text)) is None


@MANY
@given(st.data())
def test_any_value_under_a_known_key(tmp_path: Path, data: st.DataObject) -> None:
    """A good plan in which one key of one table holds something else: all else is still judged."""
    table = tomllib.loads(PLAN)
    table["output"] = {}
    targets: list[Any] = [
        *(table[name] for name in ("terrain", "model", "terminal", "customers", "output")),
        table["antenna"]["panel-90"],
        table["radio"]["access"],
        table["tower"][0],
        table["tower"][0]["sector"][0],
    ]
    target = data.draw(st.sampled_from(targets))
    target[data.draw(st.sampled_from(KEYS))] = data.draw(values)
    text = "\n".join(f"{key} = {toml(value)}" for key, value in table.items())
    read_or_refused(write_plan(tmp_path, text))


@pytest.mark.parametrize(
    "text",
    [
        pytest.param("\n".join(f"k{i}=1" for i in range(200_000)), id="unknown keys"),
        pytest.param("tower=[" + "1," * 1_000_000 + "]", id="a list of no tables"),
        pytest.param("x=[" + "'a'," * 1_000_000 + "]", id="an unknown list"),
        pytest.param("[[tower]]\n" * 200_000, id="empty towers"),
        pytest.param("\n".join(f"[radio.r{i}]" for i in range(150_000)), id="empty radios"),
        pytest.param("[" + ".".join(["a"] * 50) + "]\n" + "k=1\n" * 9, id="deep header"),
        pytest.param("a" * 4_900_000, id="one key"),
        pytest.param("a.b = '" + "." * 4_900_000 + "'", id="dots"),
        pytest.param("name = '" + " " * 4_900_000 + "'", id="blanks in text"),
        pytest.param(" " * 4_900_000, id="blanks"),
        pytest.param("[" * 4_900_000, id="brackets"),
        pytest.param(("[" + "a" * 200 + "]\n") * 20_000, id="a table again and again"),
    ],
)
def test_a_large_file_takes_seconds(tmp_path: Path, text: str) -> None:
    """The largest of strange files are refused in a time that a person waits."""
    path = write_plan(tmp_path, text)
    start = time.perf_counter()
    assert read_or_refused(path) is None
    assert time.perf_counter() - start < 30.0
