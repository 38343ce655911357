"""docs/pattern-files.md says what the program does."""

import re
from pathlib import Path

import pytest
from pattern_texts import problems, written

from planner.antenna import Pattern
from planner.antenna.two_cut import REAR_NOTE
from planner.io.pattern_files import PatternHeader, read_pattern, read_pattern_file
from planner.io.pattern_files.csv_form import LAYOUTS, STATED_NUMBERS, STATED_WORDS
from planner.io.pattern_files.tags import BLOCK_TAGS, HEADER_TAGS, NUMBERED, UNIT_PAIRS

PAGE = (Path(__file__).parents[1] / "docs" / "pattern-files.md").read_text(encoding="utf-8")
EXAMPLE = re.findall(r"```text\n(REVNUM.*?)```", PAGE, flags=re.DOTALL)[0].splitlines()
ROWS = re.findall(r"^\| (\d+) \| `(.+?)` \| `(.+?)` \|$", PAGE, flags=re.MULTILINE)


def said(pattern: Pattern) -> tuple[str, ...]:
    """The notes of a pattern but for the one on what no cut tells."""
    return tuple(note for note in pattern.notes if note != REAR_NOTE)


def test_the_example_is_read(tmp_path: Path) -> None:
    """The file that the page shows is read without a warning."""
    pattern = read_pattern(written(tmp_path, EXAMPLE), name="example", frequency_mhz=5500.0)
    assert (pattern.gain_dbi, said(pattern), pattern.kind) == (8.0, (), "measured")
    assert float(pattern.gain(-90.0, 0.0)) == -4.0
    assert float(pattern.gain(0.0, 30.0)) == 5.0
    assert read_pattern_file(written(tmp_path, EXAMPLE)).header.model == "EXAMPLE-90"


@pytest.mark.parametrize(("line", "new", "message"), ROWS)
def test_the_messages_are_those_given(tmp_path: Path, line: str, new: str, message: str) -> None:
    """Each change of the table gives its message."""
    lines = EXAMPLE.copy()
    lines[int(line) - 1] = new
    told = problems(written(tmp_path, lines))
    assert any(one.startswith(f"panel.txt line {line}: {message}") for one in told), told


def test_there_are_messages() -> None:
    """The table of messages was found."""
    assert len(ROWS) == 9


def test_every_field_is_in_the_table() -> None:
    """All tags and the names of all attributes of the header are on the page."""
    for tag in (*HEADER_TAGS, *BLOCK_TAGS, *NUMBERED, "GUNITS", "PATTYP", "ENDFIL"):
        assert re.search(rf"\| .*`{tag}1?`.* \|", PAGE), tag
    older = {"reverse_pattern_id", "registration_id", "electrical_downtilt_tolerance_deg"}
    for attribute in set(PatternHeader.__dataclass_fields__) - older:
        assert f"`{attribute}`" in PAGE, attribute
    for pair in UNIT_PAIRS:
        assert f"`{'/'.join(pair)}`" in PAGE, pair


def test_csv_layouts_and_comments_are_on_the_page() -> None:
    """All columns and all values that a comment may state are told."""
    for layout in LAYOUTS:
        assert f"`{','.join(layout)}`" in PAGE, layout
    for key in (*STATED_NUMBERS, *STATED_WORDS):
        assert f"`# {key}: " in PAGE, key
