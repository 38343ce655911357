"""Writing pattern files: what is written reads back to the same file and the same pattern."""

import math
from dataclasses import asdict, replace
from pathlib import Path

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from pattern_texts import (
    ANGLES,
    ELEVATIONS,
    across_db,
    beam_db,
    block,
    cut,
    fixed,
    standard,
    up_db,
    written,
)

from planner.errors import PatternError
from planner.io.pattern_files import (
    PatternFile,
    pattern_of,
    read_pattern,
    read_pattern_file,
    write_csv,
    write_fixed_form,
    write_standard,
)

AZIMUTHS = np.linspace(-180.0, 180.0, 73)[np.newaxis, :]
ALL_ELEVATIONS = np.linspace(-90.0, 90.0, 37)[:, np.newaxis]


def same_points(first: PatternFile, second: PatternFile) -> None:
    """Both files have the same frequencies and cuts, to the last digit."""
    assert [b.frequency_mhz for b in first.blocks] == [b.frequency_mhz for b in second.blocks]
    for one, other in zip(first.blocks, second.blocks, strict=True):
        assert len(one.cuts) == len(other.cuts)
        for a, b in zip(one.cuts, other.cuts, strict=True):
            assert (a.name, a.azimuth_deg, a.polarization) == (
                b.name, b.azimuth_deg, b.polarization,
            )  # fmt: skip
            np.testing.assert_array_equal(a.angle_deg, b.angle_deg)
            np.testing.assert_array_equal(a.level, b.level)
            assert (a.phase_deg is None) == (b.phase_deg is None)
            if a.phase_deg is not None and b.phase_deg is not None:
                np.testing.assert_array_equal(a.phase_deg, b.phase_deg)


def gains(file: PatternFile) -> np.ndarray:
    return pattern_of(file, name="x").gain(AZIMUTHS, ALL_ELEVATIONS)


def rich() -> list[str]:
    """All fields, two frequencies, phases, cross-polar cuts, both ends of the circle."""
    closed = {a: across_db(a) for a in range(-180, 181, 10)}
    first = ["PATFRE:,5200.25", "NUMCUT:,3", *cut("H", closed), *block(names="H V")[42:]]
    first += cut("H", dict.fromkeys(ANGLES, -31.25), "V/H")
    second = [
        line if ":" in line else f"{line},{number * 7 % 360 - 180}.5"
        for number, line in enumerate(block(5500))
    ]
    return standard(
        first, second, COMNT2="two", DESCR1="one", FIELD1="free: text, with comma",
        LWGAIN="11", HGGAIN="12", ELTILT="0,0.5", ANTWID="0.21", ANTDEP="0.12", ANTWGT="3.75",
        CONTYP="N", MAXPOW="50", POTOPO="28", FILNUM="3", FEDORN="own", PATTYP="envelope",
    )  # fmt: skip


def test_the_standard_reads_back_the_same(tmp_path: Path) -> None:
    """Every field, every point and every cut comes back, and so does every byte."""
    first = read_pattern_file(written(tmp_path, rich()))
    assert first.warnings == ()
    assert len(first.blocks[0].cuts) == 3
    write_standard(tmp_path / "again.txt", first)
    again = read_pattern_file(tmp_path / "again.txt")
    assert asdict(again.header) == asdict(first.header)
    assert again.warnings == ()
    same_points(first, again)
    write_standard(tmp_path / "third.txt", again)
    content = (tmp_path / "again.txt").read_bytes()
    assert (tmp_path / "third.txt").read_bytes() == content
    assert content.startswith(b"REVNUM:,NSMA WG16.99.050\r\nREVDAT:,19990520\r\n")
    assert content.endswith(b"\r\nENDFIL:,EOF\r\n")
    assert content.count(b"\r\n") == content.count(b"\n")


@pytest.mark.parametrize(
    "units", ["DBI/DBR", "DBD/DBR", "DBI/DBI", "DBD/DBD", "LPI/LPR", "LPI/LPI"]
)
def test_units_are_kept(tmp_path: Path, units: str) -> None:
    """A file is written in the units that it was read in."""
    gain, level = units.split("/")
    lines = block()
    for index, line in enumerate(lines):
        if ":" not in line:
            angle, text = line.split(",")
            value = float(text) + (9.0 if level in ("DBI", "DBD", "LPI") else 0.0)
            value = 10.0 ** (value / 10.0) if level.startswith("L") else value
            lines[index] = f"{angle},{value!r}"
    stated = "7.5" if gain == "LPI" else "9"
    first = read_pattern_file(written(tmp_path, standard(lines, GUNITS=units, MDGAIN=stated)))
    write_standard(tmp_path / "again.txt", first)
    again = read_pattern_file(tmp_path / "again.txt")
    same_points(first, again)
    np.testing.assert_array_equal(gains(first), gains(again))
    write_csv(tmp_path / "again.csv", first)
    np.testing.assert_allclose(
        gains(read_pattern_file(tmp_path / "again.csv")), gains(first), rtol=0.0, atol=1e-9
    )


def sphere() -> list[str]:
    lines = ["PATFRE:,5500", "NUMCUT:,24"]
    for azimuth in range(0, 360, 15):
        lines += cut(f"{azimuth}", {180 - e - 90: beam_db(azimuth, e) for e in range(90, -91, -10)})
    return lines


@pytest.mark.parametrize("kind", ["two cuts", "tilted", "sphere"])
def test_csv_reads_back_the_same_pattern(tmp_path: Path, kind: str) -> None:
    """Standard to CSV to standard: the same gain everywhere, the same tilt, kind and frequency."""
    lines = {
        "two cuts": standard(block(), PATTYP="envelope"),
        "tilted": standard(block(tilt=5.0), ELTILT="5"),
        "sphere": standard(sphere()),
    }[kind]
    first = read_pattern_file(written(tmp_path, lines))
    write_csv(tmp_path / "copy.csv", first)
    copy = read_pattern_file(tmp_path / "copy.csv")
    write_standard(tmp_path / "back.txt", copy)
    back = read_pattern_file(tmp_path / "back.txt")
    patterns = [pattern_of(file, name="x", frequency_mhz=5500.0) for file in (first, copy, back)]
    for pattern in patterns[1:]:
        np.testing.assert_array_equal(
            pattern.gain(AZIMUTHS, ALL_ELEVATIONS), patterns[0].gain(AZIMUTHS, ALL_ELEVATIONS)
        )
        assert pattern.kind == patterns[0].kind
        assert pattern.electrical_downtilt_deg == patterns[0].electrical_downtilt_deg
        assert type(pattern) is type(patterns[0])
    assert patterns[0].electrical_downtilt_deg == (5.0 if kind == "tilted" else 0.0)
    assert copy.blocks[0].frequency_mhz == 5500.0


def test_a_plain_csv_becomes_standard(tmp_path: Path) -> None:
    """CSV rows in any order, with no more than a gain, make a file of the standard."""
    rows = [f"h,{a},{across_db(a)}" for a in ANGLES] + [f"v,{e},{up_db(e)}" for e in ELEVATIONS]
    np.random.default_rng(3).shuffle(rows)
    lines = ["# gain_dbi: 11.5", "cut,angle_deg,level_db", *rows]
    first = read_pattern_file(written(tmp_path, lines, name="plain.csv"))
    write_standard(tmp_path / "plain.txt", first)
    again = read_pattern_file(tmp_path / "plain.txt")
    assert again.form == "WG16.99.050"
    np.testing.assert_array_equal(gains(first), gains(again))
    (warning,) = again.warnings
    assert "no PATFRE before this cut, so its frequency is not known" in warning


def test_one_frequency_of_several_as_csv(tmp_path: Path) -> None:
    """A file with several frequencies needs one to be named."""
    file = read_pattern_file(written(tmp_path, rich()))
    write_csv(tmp_path / "one.csv", file, frequency_mhz=5500.0)
    assert read_pattern_file(tmp_path / "one.csv").blocks[0].frequency_mhz == 5500.0
    for wrong in (None, 5300.0):
        with pytest.raises(PatternError) as caught:
            write_csv(tmp_path / "none.csv", file, frequency_mhz=wrong)
        assert "allowed: 5200.25, 5500 MHz" in str(caught.value)
        assert not (tmp_path / "none.csv").exists()


def test_the_fixed_form_reads_back_the_same(tmp_path: Path) -> None:
    """Header, gain and points of the older form come back."""
    first = read_pattern_file(written(tmp_path, fixed()))
    write_fixed_form(tmp_path / "again.txt", first)
    again = read_pattern_file(tmp_path / "again.txt")
    assert again.header == first.header
    same_points(first, again)
    text = (tmp_path / "again.txt").read_text(encoding="utf-8").splitlines()
    assert text[3] == "NONE"
    assert text[10:12] == ["VV 36", "   -180    -25"]
    bare = replace(first, header=replace(first.header, mid_band_gain=None, model=""))
    write_fixed_form(tmp_path / "bare.txt", bare)
    assert read_pattern_file(tmp_path / "bare.txt").header == bare.header


def test_what_the_fixed_form_cannot_hold_is_refused(tmp_path: Path) -> None:
    """Where the pattern would change, nothing is written, and every reason is told."""
    file = read_pattern_file(written(tmp_path, rich()))
    with pytest.raises(PatternError) as caught:
        write_fixed_form(tmp_path / "no.txt", file)
    found = [problem.found for problem in caught.value.problems]
    assert found == ["2 frequencies", "an electrical tilt", "the type envelope"]
    long = [f"h,{a},{across_db(a) - 0.123456:.6f}" for a in ANGLES if a] + ["h,0,0"]
    long += [f"v,{e},{up_db(e)}" for e in ELEVATIONS]
    lines = ["# polarization: V/V", "cut,angle_deg,level_db", *long]
    file = read_pattern_file(written(tmp_path, lines, name="plain.csv"))
    with pytest.raises(PatternError, match=r"the number -25\.123456; allowed: up to 7 characters"):
        write_fixed_form(tmp_path / "no.txt", file)
    assert not (tmp_path / "no.txt").exists()


def test_texts_that_would_not_read_back(tmp_path: Path) -> None:
    """An exclamation mark begins a comment, so no text may hold one."""
    file = read_pattern_file(written(tmp_path, standard()))
    loud = replace(file, header=replace(file.header, model="SEC!", comments=("two\nlines",)))
    with pytest.raises(PatternError) as caught:
        write_standard(tmp_path / "no.txt", loud)
    assert len(caught.value.problems) == 2
    assert not (tmp_path / "no.txt").exists()


LEVEL = st.floats(-200.0, 0.0, allow_nan=False)


@settings(max_examples=40, deadline=None)
@given(
    across=st.lists(LEVEL, min_size=24, max_size=24),
    up=st.lists(LEVEL, min_size=19, max_size=19),
    gain=st.floats(-20.0, 40.0),
)
def test_any_levels_come_back(
    tmp_path_factory: pytest.TempPathFactory, across: list[float], up: list[float], gain: float
) -> None:
    """Numbers are written with all their digits, tiny ones too."""
    folder = tmp_path_factory.mktemp("levels")
    across[3], up[9] = 0.0, 0.0
    rows = [f"h,{15 * n},{level!r}" for n, level in enumerate(across)]
    rows += [f"v,{10 * n - 90},{level!r}" for n, level in enumerate(up)]
    lines = [f"# gain_dbi: {gain!r}", "# frequency_mhz: 5500", "cut,angle_deg,level_db", *rows]
    first = read_pattern_file(written(folder, lines, name="any.csv"))
    assert first.blocks[0].cuts[0].level.tolist() == across
    write_standard(folder / "any.txt", first)
    write_csv(folder / "copy.csv", first)
    for name in ("any.txt", "copy.csv"):
        again = read_pattern_file(folder / name)
        same_points(first, again)
        assert read_pattern(folder / name, name="x").gain_dbi == gain
        assert not math.isnan(float(gains(again).sum()))
