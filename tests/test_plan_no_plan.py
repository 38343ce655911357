"""Files that are no plan: unreadable, no TOML, or without end."""

import os
import re
from pathlib import Path

import pytest
from plans import changed, problems_of, write_plan

from planner.plan.findings import MOST_PROBLEMS


def test_files_that_are_no_plan(tmp_path: Path) -> None:
    """A path that leads to no readable text gives one problem that says why."""
    assert problems_of(tmp_path / "none.toml") == [
        f"{tmp_path}/none.toml: found no such file; allowed: a plan file (TOML)"
    ]
    assert problems_of(tmp_path) == [f"{tmp_path}: found a folder; allowed: a plan file (TOML)"]
    path = tmp_path / "plan.toml"
    path.write_bytes(b"name = 1\n# caf\xe9\n")
    assert problems_of(path) == [
        f"{path}: found text that is not UTF-8 (line 2, byte 0xe9); allowed: UTF-8. "
        "Save the file with the encoding UTF-8"
    ]
    path.write_bytes(b"#" * 5_000_001)
    assert problems_of(path) == [f"{path}: found a larger file; allowed: up to 5 MB. Is it a plan?"]
    path.write_bytes(b"#" * 5_000_000)
    assert problems_of(path)[0].startswith("plan.toml: name: found nothing")
    os.mkfifo(tmp_path / "pipe")
    assert problems_of(tmp_path / "pipe") == [
        f"{tmp_path}/pipe: found a device or pipe; allowed: a plan file (TOML)"
    ]
    long = tmp_path / ("x" * 300)
    assert problems_of(long) == [
        f"{long}: found a file that cannot be read (File name too long); "
        "allowed: a plan file (TOML)"
    ]


@pytest.mark.parametrize(
    ("text", "line"),
    [
        pytest.param("a = \n", 1, id="no value"),
        pytest.param('a = 1\nb = "x\nc = 2\n', 2, id="open text"),
        pytest.param("a = [1,\n2\n\n", 2, id="open list"),
        pytest.param("a = 1\n[b]\n[b]\n", 3, id="table twice"),
        pytest.param("\r\na = 01\r\n", 2, id="Windows line ends"),
    ],
)
def test_toml_mistakes(tmp_path: Path, text: str, line: int) -> None:
    """A mistake in the TOML is one problem with its line; the words are the parser's."""
    path = write_plan(tmp_path, text)
    path.write_bytes(text.encode())
    [problem] = problems_of(path)
    assert problem.startswith(f"{path}: found a mistake in the TOML: ")
    assert re.findall(r"line (\d+)", problem) == [str(line)]


def test_number_without_end(tmp_path: Path) -> None:
    """A number of more digits than Python converts is refused."""
    path = write_plan(tmp_path, f"a = {'9' * 5000}")
    assert problems_of(path) == [f"{path}: found a number of thousands of digits"]


@pytest.mark.parametrize("text", ["a = " + "[" * 50_000, "a = " + "{a=" * 50_000])
def test_nesting_without_end(tmp_path: Path, text: str) -> None:
    """Lists and tables nested without end are refused, not followed."""
    path = write_plan(tmp_path, text)
    assert problems_of(path) == [
        f"{path}: found lists or tables nested too deeply; allowed: what docs/plan-file.md lists"
    ]


def test_keys_of_very_many_parts(tmp_path: Path) -> None:
    """Dotted keys cost the parser the square of their parts, so very many are refused."""
    path = write_plan(tmp_path, ".".join(["a"] * 4000) + " = 1\n")
    assert problems_of(path) == [
        f"{path}: found too many dots in one line, as in deeply nested keys; "
        "allowed: keys of a few parts. Spread long lists over several lines"
    ]


def test_collections_without_end(tmp_path: Path) -> None:
    """A table or list of more elements than any plan has is refused before it is looked through."""
    path = write_plan(tmp_path, "\n".join(f"[radio.r{number}]" for number in range(10_001)))
    assert problems_of(path) == [
        f"{path}: found a table or list of 10,001 elements; allowed: up to 10,000"
    ]


def test_very_many_problems_are_cut(tmp_path: Path) -> None:
    """A file that is no plan at all does not flood the screen."""
    text = "\n".join(f"key{number} = 1" for number in range(9_000)) + "\n" + changed()
    problems = problems_of(write_plan(tmp_path, text))
    assert len(problems) == MOST_PROBLEMS + 1
    assert problems[-1] == f"plan.toml: found {9_000 - MOST_PROBLEMS:,} more problems"
