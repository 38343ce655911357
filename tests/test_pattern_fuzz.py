"""Damaged pattern files: a message of ours or a pattern, in bounded time and memory."""

import random
import tracemalloc
from pathlib import Path

import numpy as np
import pytest
from pattern_texts import beam_db, block, cut, fixed, problems, standard

from planner.errors import PatternError
from planner.io.pattern_files import pattern_of, read_pattern_file
from planner.io.pattern_files.text import (
    LARGEST_FILE_BYTES,
    LONGEST_LINE,
    MOST_LINES,
    MOST_POINTS,
    MOST_PROBLEMS,
    MOST_WARNINGS,
)

SPHERE = ["PATFRE:,5500", "NUMCUT:,12"]
for _azimuth in range(0, 360, 30):
    SPHERE += cut(f"{_azimuth}", {e: beam_db(_azimuth, e) for e in range(-90, 91, 30)})
GRID = ["# gain_dbi: 7", "azimuth_deg,elevation_deg,level_db"]
GRID += [f"{a},{e},{beam_db(a, e)}" for a in range(0, 360, 30) for e in range(-90, 91, 30)]
CUTS = ["angle_deg,horizontal_db,vertical_db"]
CUTS += [f"{a},{-abs(a) / 10},{-abs(a) / 6}" for a in range(-180, 181, 20)]
SOUND = {
    "standard": standard(block(5200), block(5500)),
    "sphere": standard(SPHERE),
    "fixed": fixed(),
    "grid": GRID,
    "cuts": CUTS,
}
PIECES = [
    b"\0", b"\xff\xfe", b"\xef\xbb\xbf", b"\xff", b",", b",,", b"\r", b"\n", b"\r\n", b"!", b":,",
    b"-", b"1e999", b"nan", b"inf", b"-inf", b"99999999999999999999", b'"', b"'", b";", b"\t",
    "−5".encode(), "٣".encode(), b"NUPOIN:,999999999999", b"NUMCUT:,-1", b"NOFREQ:,1e9",
    b"PATCUT:,H", b"PATCUT:,1e308", b"PATFRE:,0", b"GUNITS:,LPI/LPI", b"GUNITS:,DBD/DBR",
    b"ENDFIL:,EOF", b"POLARI:,", b"FSTLST:,", b"0,0", b"360,-3", b"HH 361", b"ELVV 0", b"# kind: x",
    b"# gain_dbi: nan", b"1_0", b"0x10", b"+-3", b" " * 40, b"9" * 400, b"\x0b", b"\x1c", b"\x85",
    "\u2028".encode(), "\U0001f4e1".encode(),
]  # fmt: skip


def damaged(content: bytes, rng: random.Random) -> bytes:
    """The bytes with some damage of a random kind."""
    for _ in range(rng.randint(1, 3)):
        at = rng.randrange(len(content) + 1)
        until = min(len(content), at + int(rng.expovariate(1 / 30.0)))
        kind = rng.randrange(8)
        if kind == 0:
            content = content[:at]
        elif kind == 1:
            content = content[:at] + rng.choice(PIECES) + content[at:]
        elif kind == 2:
            content = content[:at] + rng.choice(PIECES) + content[until:]
        elif kind == 3:
            content = content[:at] + content[until:]
        elif kind == 4:
            content = content[:at] + content[at:until] * rng.randint(2, 20) + content[until:]
        elif kind == 5:
            content = content[:at] + rng.randbytes(until - at) + content[until:]
        elif kind == 6:
            lines = content.split(b"\n")
            first, second = rng.randrange(len(lines)), rng.randrange(len(lines))
            lines[first], lines[second] = lines[second], lines[first]
            content = b"\n".join(lines)
        else:
            line_end = rng.choice([b"\r", b"\n", b"\r\n", b"\n\n"])
            content = content.replace(b"\r\n", b"\n").replace(b"\n", line_end)
        if not content:
            return content
    return content


def check_told(error: PatternError) -> None:
    """Not too many problems, each with the file's name, printable and not too long."""
    assert 0 < len(error.problems) <= MOST_PROBLEMS + 1
    for problem in error.problems:
        assert problem.where.startswith("panel.txt"), problem
        assert str(problem).isprintable(), problem
        assert len(str(problem)) < 1000


@pytest.mark.parametrize("form", SOUND)
@pytest.mark.parametrize("encoding", ["utf-8", "utf-8-sig", "cp1252", "utf-16"])
def test_damaged_files(tmp_path: Path, form: str, encoding: str) -> None:
    """Either every problem is told with the file's name, or what was read is a whole pattern."""
    rng = random.Random(f"{form} {encoding}")
    sound = "\r\n".join(SOUND[form]).encode(encoding)
    path = tmp_path / "panel.txt"
    read = refused = 0
    for _ in range(150):
        path.write_bytes(damaged(sound, rng))
        try:
            file = read_pattern_file(path)
        except PatternError as error:
            refused += 1
            check_told(error)
            continue
        read += 1
        assert len(file.warnings) <= MOST_WARNINGS + 1
        try:
            pattern = pattern_of(file, name="x", gain_dbi=10.0)
        except PatternError as error:
            raise AssertionError(f"read without a fault, but no pattern: {error}") from error
        gain = pattern.gain(np.linspace(-180, 180, 25), np.linspace(-90, 90, 13)[:, np.newaxis])
        assert np.isfinite(gain).all()
        assert gain.max() <= 10.0 + 1e-9
    assert refused > 20
    assert encoding == "utf-16" or read > 2  # not everything is refused


def test_binary_files(tmp_path: Path) -> None:
    """Random bytes are refused, whatever they begin with."""
    path = tmp_path / "panel.txt"
    rng = random.Random(5)
    for start in (b"", b"REVNUM:,", b"\x89PNG\r\n", b"PK\x03\x04", b"%PDF-", b"\xff\xfe", b"angle"):
        for size in (1, 30, 4000):
            path.write_bytes(start + rng.randbytes(size))
            assert problems(path)


@pytest.mark.parametrize(
    "lines",
    [
        pytest.param(["REVNUM:,X", "PATFRE:,1", "PATCUT:,H", *["0,0"] * 490_000], id="points"),
        pytest.param(["PATFRE:,1", *["PATCUT:,H"] * 490_000], id="cuts"),
        pytest.param([f"PATFRE:,{n}" for n in range(1, 490_000)], id="frequencies"),
        pytest.param(["REVNUM:,X", *["COMNT1:,text"] * 490_000], id="comments"),
        pytest.param(["REVNUM:,X", *["ABCDEF:,text"] * 490_000], id="unknown records"),
        pytest.param(["angle_deg,horizontal_db,vertical_db", *["x,y,z"] * 490_000], id="faults"),
        pytest.param(["cut,angle_deg,level_db", *["h,0,0"] * 490_000], id="same point"),
        pytest.param(
            ["azimuth_deg,elevation_deg,level_db", *[f"{n / 1e4},0,0" for n in range(490_000)]],
            id="azimuths",
        ),
        pytest.param([*fixed()[:10], "HH 9", *["0 0"] * 480_000], id="fixed points"),
        pytest.param([*fixed()[:10], *["HH 1", "0 0"] * 240_000], id="fixed cuts"),
        pytest.param(["\r"] * 3_900_000, id="empty lines"),
    ],
)
def test_floods_are_bounded(tmp_path: Path, lines: list[str]) -> None:
    """A file about as large as allowed, of one kind of line, is refused with few messages."""
    path = tmp_path / "panel.txt"
    path.write_bytes("\n".join(lines).encode()[:LARGEST_FILE_BYTES])
    told = problems(path)
    assert len(told) <= MOST_PROBLEMS + 1
    assert sum(map(len, told)) < 20_000


def test_memory_is_bounded(tmp_path: Path) -> None:
    """A file of nothing but points, or of nothing but faults, takes little memory."""
    path = tmp_path / "panel.txt"
    for line in ("0,0", "x,y"):
        path.write_text("\n".join(["REVNUM:,X", "PATFRE:,1", "PATCUT:,H", *[line] * 30_000]))
        tracemalloc.start()
        try:
            problems(path)
            _, peak = tracemalloc.get_traced_memory()
        finally:
            tracemalloc.stop()
        assert peak < 2 * LARGEST_FILE_BYTES + 30_000 * 300


def test_huge_counts_cost_nothing(tmp_path: Path) -> None:
    """Declared counts are compared, never allocated."""
    path = tmp_path / "panel.txt"
    for start in ("NUPOIN", "NUMCUT", "NOFREQ"):
        for count in ("9" * 15, "1e300", "-5", "0", "2.5"):
            lines = standard()
            at = next(n for n, line in enumerate(lines) if line.startswith(start))
            lines[at] = f"{start}:,{count}"
            path.write_text("\n".join(lines))
            tracemalloc.start()
            told = problems(path)
            _, peak = tracemalloc.get_traced_memory()
            tracemalloc.stop()
            assert told[0].startswith(f"panel.txt line {at + 1}: found ")
            assert peak < LARGEST_FILE_BYTES + 1_000_000  # the buffer for reading


def test_the_longest_line(tmp_path: Path) -> None:
    """One character too many in a line is told; at the limit the file is read."""
    path = tmp_path / "panel.txt"
    for extra in (0, 1):
        text = "COMNT2:,".ljust(LONGEST_LINE + extra, "x")
        path.write_text("\n".join([*standard()[:2], text, *standard()[2:]]))
        if extra:
            assert problems(path) == [
                "panel.txt line 3: found 1,001 characters; allowed: lines of up to 1000"
            ]
        else:
            assert read_pattern_file(path).header.comments[0] == text[8:]


@pytest.mark.parametrize("end", ["\n", "\r", "\r\n"])
def test_too_many_lines(tmp_path: Path, end: str) -> None:
    """More lines than allowed are refused before they are split; at the limit they are read."""
    path = tmp_path / "panel.txt"
    sound = end.join(standard()) + end
    path.write_bytes((sound + end * (MOST_LINES - sound.count(end) - 1)).encode())
    assert read_pattern_file(path).header.model == "SEC-90"
    for lines in (MOST_LINES, 3_900_000):
        path.write_bytes((end * lines).encode())
        assert problems(path) == [
            "panel.txt: found more than 500,000 lines; allowed: that many in one file"
        ]


def test_a_fine_sphere_is_not_too_large(tmp_path: Path) -> None:
    """A whole sphere in steps of one degree is well within the limits."""
    path = tmp_path / "panel.csv"
    rows = ["azimuth_deg,elevation_deg,gain_dbi"]
    rows += [f"{a},{e},{beam_db(a, e):.2f}" for a in range(360) for e in range(-90, 91)]
    assert len(rows) < MOST_POINTS / 5
    path.write_text("\n".join(rows))
    pattern = pattern_of(read_pattern_file(path), name="x")
    assert float(pattern.gain(37.0, -12.0)) == round(beam_db(37, -12), 2)
