"""Reading antenna patterns from files."""

import re
import stat
from pathlib import Path

import numpy as np
import pytest

from planner.antenna.two_cut import REAR_NOTE
from planner.errors import PatternError
from planner.io.pattern_files import read_pattern
from planner.io.pattern_files.text import LARGEST_FILE_BYTES

HORIZONTAL = {angle: -min(12.0 * (angle / 90.0) ** 2, 25.0) for angle in range(-180, 180, 15)}
VERTICAL = {angle: -min(12.0 * (angle / 8.0) ** 2, 30.0) for angle in range(-90, 91, 2)}


def cut_by_cut() -> list[str]:
    lines = ["cut,angle_deg,level_db"]
    lines += [f"horizontal,{angle},{level}" for angle, level in HORIZONTAL.items()]
    lines += [f"v,{angle},{level}" for angle, level in VERTICAL.items()]
    return lines


def both_cuts() -> list[str]:
    lines = ["angle_deg,horizontal_db,vertical_db"]
    for angle in sorted(HORIZONTAL.keys() | VERTICAL.keys()):
        lines.append(f"{angle},{HORIZONTAL.get(angle, '')},{VERTICAL.get(angle, '')}")
    return lines


def written(folder: Path, lines: list[str] | str, **how: str) -> Path:
    path = folder / "panel.csv"
    text = lines if isinstance(lines, str) else "\n".join(lines) + "\n"
    path.write_bytes(text.encode(how.get("encoding", "utf-8")))
    return path


def problems(path: Path) -> list[str]:
    with pytest.raises(PatternError) as caught:
        read_pattern(path, name="panel", gain_dbi=16.0)
    return [str(problem) for problem in caught.value.problems]


@pytest.mark.parametrize("lines", [cut_by_cut(), both_cuts()], ids=["cut by cut", "both cuts"])
def test_both_layouts_give_the_same_pattern(tmp_path: Path, lines: list[str]) -> None:
    """Every point of the file comes back as gain, whichever layout holds it."""
    pattern = read_pattern(written(tmp_path, lines), name="panel", gain_dbi=16.0)
    assert (pattern.name, pattern.gain_dbi) == ("panel", 16.0)
    for angle, level in HORIZONTAL.items():
        assert 16.0 + level == float(pattern.gain(angle, 0.0))
    for angle, level in VERTICAL.items():
        assert 16.0 + level == float(pattern.gain(0.0, angle))


def test_comments_blank_lines_and_byte_order_mark(tmp_path: Path) -> None:
    """What spreadsheets and people add around the table does not matter."""
    lines = ["# measured on a range", "", *cut_by_cut(), ",,", "# end"]
    lines[2] = " Cut , ANGLE_DEG,level_db"
    lines[3:] = [line.replace("-", "\N{MINUS SIGN}") for line in lines[3:]]
    text = "\r\n".join(lines)
    pattern = read_pattern(
        written(tmp_path, text, encoding="utf-8-sig"), name="panel", gain_dbi=16.0
    )
    assert float(pattern.gain(-45.0, 0.0)) == 13.0


def test_bad_rows_are_all_told_with_their_lines(tmp_path: Path) -> None:
    """Each cell that cannot be read is told with its line, its column and what stands there."""
    lines = cut_by_cut()
    lines[1] = "horizontal,east,-20"
    lines[2] = "sideways,-165,-25"
    lines[3] = "h,-150"
    lines[4] = 'h,-135,"-25,5"'
    lines[5] = "h,nan,-inf"
    advice = ". Use commas between columns, points in numbers and UTF-8 text"
    assert problems(written(tmp_path, lines)) == [
        "panel.csv line 2: found angle 'east'; allowed: a number",
        'panel.csv line 3: found cut \'sideways\'; allowed: "horizontal" or "vertical" (or '
        '"h", "v")',
        "panel.csv line 4: found 2 columns; allowed: 3 columns" + advice,
        "panel.csv line 5: found level '-25,5'; allowed: a number" + advice,
        "panel.csv line 6: found angle 'nan'; allowed: a number",
        "panel.csv line 6: found level '-inf'; allowed: a number",
    ]


def test_incomplete_cuts_name_the_file(tmp_path: Path) -> None:
    """What is wrong with a cut as a whole is told with the file's name."""
    lines = [line for line in cut_by_cut() if not line.startswith("horizontal,1")]
    assert problems(written(tmp_path, lines)) == [
        "panel.csv line 2: found angles from -180 to 90 deg (horizontal cut); allowed: the whole "
        "circle. Give both sides of the antenna"
    ]
    lines = [line for line in cut_by_cut() if not line.startswith("v,")]
    assert problems(written(tmp_path, lines)) == [
        "panel.csv line 1: found no vertical cut; allowed: a horizontal and a vertical cut"
    ]


def test_levels_in_dbi_are_told(tmp_path: Path) -> None:
    """Gains in dBi instead of levels relative to the peak are refused, not guessed."""
    lines = [cut_by_cut()[0]]
    lines += [f"h,{angle},{level + 16.0}" for angle, level in HORIZONTAL.items()]
    lines += [f"v,{angle},{level}" for angle, level in VERTICAL.items()]
    told = problems(written(tmp_path, lines))
    assert len(told) == sum(level + 16.0 > 0.0 for level in HORIZONTAL.values())
    assert told[0] == (
        "panel.csv line 8: found level 4 dB; allowed: -200 to 0 dB, relative to the peak. Gains in "
        "dBi or dBd need a unit that says so, losses the other sign"
    )


@pytest.mark.parametrize(
    "header",
    ["cut;angle_deg;level_db", "angle_deg,horizontal_db", "cut,angle_deg,level_db,phase", "1,2,3"],
)
def test_other_headers_are_refused(tmp_path: Path, header: str) -> None:
    """A header that is no layout is told with all of them."""
    (told,) = problems(written(tmp_path, [header, *cut_by_cut()[1:]]))
    assert told.startswith("panel.csv line 1: found columns '")
    assert told.endswith(
        'allowed: the columns "angle_deg,horizontal_db,vertical_db" or "cut,angle_deg,level_db" or '
        '"azimuth_deg,elevation_deg,level_db" or "azimuth_deg,elevation_deg,gain_dbi". '
        "Use commas between columns, points in numbers and UTF-8 text"
    )


@pytest.mark.parametrize("text", ["", "\n\n", "# nothing\n"])
def test_empty_files(tmp_path: Path, text: str) -> None:
    """A file without rows is told so."""
    (told,) = problems(written(tmp_path, text))
    assert told.startswith("panel.csv: found no rows; allowed: the columns")


def test_files_that_are_none(tmp_path: Path) -> None:
    """A missing file, a folder and a file without permission are told apart."""
    missing = tmp_path / "missing.csv"
    assert problems(missing) == [f"{missing}: found no such file"]
    assert problems(tmp_path) == [f"{tmp_path}: found not a file; allowed: a pattern file"]
    locked = written(tmp_path, cut_by_cut())
    locked.chmod(0)
    try:
        locked.read_bytes()
    except PermissionError:
        (told,) = problems(locked)
        assert told == f"{locked}: found a file that cannot be read (Permission denied)"
    finally:
        locked.chmod(stat.S_IRUSR | stat.S_IWUSR)


def test_bytes_that_are_not_text(tmp_path: Path) -> None:
    """Bytes that are not UTF-8, and broken quoting, are told with their line."""
    path = tmp_path / "panel.csv"
    path.write_bytes(b"cut,angle_deg,level_db\nh,0,\xff\n")
    (told,) = problems(path)
    assert told.startswith("panel.csv line 2: found bytes that are not UTF-8 text")
    path.write_bytes(b'cut,angle_deg,level_db\nh,0,"0"x\n')
    *_, told = problems(path)
    assert told.startswith("panel.csv line 2: found a row that is not CSV")


def test_hostile_sizes(tmp_path: Path) -> None:
    """A huge file is refused unread, a huge cell too, and many problems are counted."""
    path = tmp_path / "panel.csv"
    path.write_bytes(b"0" * (LARGEST_FILE_BYTES + 1))
    (told,) = problems(path)
    assert told == "panel.csv: found more than 8 MB; allowed: a pattern in less than that"
    path.write_text("cut,angle_deg,level_db\nh,0," + "9" * 200_000)
    assert problems(path) == [
        "panel.csv line 2: found 200,004 characters; allowed: lines of up to 1000"
    ]
    told_all = problems(written(tmp_path, ["cut,angle_deg,level_db", *["x,y,z"] * 1000]))
    assert len(told_all) == 51
    assert told_all[-1] == "panel.csv: found 2951 more problems"


def test_gain_from_the_plan_is_checked(tmp_path: Path) -> None:
    """A gain that no antenna has is told under the plan's key."""
    path = written(tmp_path, cut_by_cut())
    with pytest.raises(PatternError) as caught:
        read_pattern(path, name="panel", gain_dbi=160.0)
    assert str(caught.value) == "antenna.panel.gain_dbi: found 160; allowed: -20 to 60 dBi"


def test_beamwidths_of_the_file(tmp_path: Path) -> None:
    """The half-power widths are measured from the points."""
    pattern = read_pattern(written(tmp_path, both_cuts()), name="panel", gain_dbi=16.0)
    assert pattern.azimuth_beamwidth_deg == pytest.approx(90.0, abs=0.5)
    assert pattern.elevation_beamwidth_deg == pytest.approx(8.0, abs=0.2)
    assert np.isfinite(pattern.gain(np.linspace(-400, 400, 50), np.linspace(-90, 90, 50))).all()


def test_the_example_in_the_documentation(tmp_path: Path) -> None:
    """The file shown in docs/antennas.md is one that can be read."""
    page = (Path(__file__).parents[1] / "docs" / "antennas.md").read_text(encoding="utf-8")
    (example,) = re.findall(r"```csv\n(.*?)```", page, flags=re.DOTALL)
    pattern = read_pattern(written(tmp_path, example), name="panel", gain_dbi=16.0)
    assert (float(pattern.gain(-90.0, 0.0)), float(pattern.gain(0.0, 4.0))) == (2.0, 13.0)
    assert pattern.elevation_beamwidth_deg == 8.0
    assert pattern.notes == (REAR_NOTE,)
