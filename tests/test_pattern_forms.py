"""Reading the older fixed form WG16.89.003, grids as CSV, and values stated in CSV comments."""

from pathlib import Path

import numpy as np
import pytest
from pattern_texts import ANGLES, ELEVATIONS, across_db, beam_db, fixed, problems, up_db, written

from planner.antenna import GridPattern, TwoCutPattern
from planner.io.pattern_files import read_pattern, read_pattern_file


def test_fixed_form(tmp_path: Path) -> None:
    """Ten header lines and two blocks of points give the antenna and its gain."""
    path = written(tmp_path, fixed())
    file = read_pattern_file(path)
    header = file.header
    assert (file.form, file.warnings) == ("WG16.89.003", ())
    assert (header.manufacturer, header.model) == ("Nobody", "SEC-90")
    assert header.comments == ("an invented antenna",)
    assert (header.registration_id, header.reverse_pattern_id) == ("", "")
    assert (header.data_date, header.pattern_id) == ("02/29/2024", "7")
    assert (header.lowest_frequency_mhz, header.highest_frequency_mhz) == (5150.0, 5850.0)
    assert (header.mid_band_gain, header.gain_unit) == (16.5 - 5.0, "DBI")
    assert header.azimuth_beamwidth_deg == 90.0
    pattern = read_pattern(path, name="panel")
    assert isinstance(pattern, TwoCutPattern)
    for angle in ANGLES:
        assert 11.5 + across_db(angle) == float(pattern.gain(angle, 0.0))
    for elevation in ELEVATIONS:
        assert 11.5 + up_db(elevation) == float(pattern.gain(0.0, elevation))


def test_fixed_columns_without_a_space(tmp_path: Path) -> None:
    """Seven characters each: numbers that fill their columns stand without a space between."""
    lines = fixed()
    lines = [
        f"{float(line[:7]):7.2f}{float(line[7:]):7.2f}" if line[:1] in " -" else line
        for line in lines
    ]
    assert any(" " not in line for line in lines[11:]) is False  # short numbers still have spaces
    lines[11] = "-180.00-025.00"
    pattern = read_pattern(written(tmp_path, lines), name="panel")
    assert float(pattern.gain(180.0, 0.0)) == pytest.approx(11.5 + across_db(-180))


@pytest.mark.parametrize(
    ("index", "new", "told"),
    [
        (7, "wide", "panel.txt line 8: found frequency range 'wide'; allowed: two frequencies"),
        (8, "much", "panel.txt line 9: found mid-band gain 'much'; allowed: -60 to 100 dBi"),
        (8, "75", "panel.txt line 9: found mid band gain 75 DBI; allowed: -20 to 60 dBi"),
        (10, "VV 300", "panel.txt line 11: found 300 points declared for cut H V/V; allowed: 36"),
        (13, "   -200   -25", "panel.txt line 14: found angle -200 deg; allowed: -180 to 180 or"),
        (13, "   -175   -25", "panel.txt line 14: found angle -175 deg after"),
        (13, "   -160    +1", "panel.txt line 14: found level 1 dB; allowed: -200 to 0 dB"),
        (13, "   -160   nan", "panel.txt line 14: found level 'nan'; allowed: a number"),
        (13, "   -160", "panel.txt line 14: found '-160'; allowed: angle and level, or a line"),
        (0, None, "panel.txt line 10: found 9 header lines; allowed: 10, with NONE for what is"),
        (47, "VH 37", "panel.txt line 11: found no vertical cut beside H V/V; allowed: two cuts"),
    ],
)
def test_faults_of_the_fixed_form(tmp_path: Path, index: int, new: str | None, told: str) -> None:
    """Each fault has its line."""
    lines = fixed()
    if new is None:
        del lines[index]
    else:
        lines[index] = new
    if index == 13 and new == "   -175   -25":
        lines[12] = "   -165   -25"
    messages = problems(written(tmp_path, lines))
    assert any(message.startswith(told) for message in messages), messages


def test_fixed_form_without_a_gain(tmp_path: Path) -> None:
    """NONE is no gain; then the plan must give it."""
    lines = fixed()
    lines[7:10] = ["NONE", "none", "NONE"]
    path = written(tmp_path, lines)
    with pytest.raises(ValueError) as caught:
        read_pattern(path, name="panel")
    assert str(caught.value) == (
        "antenna.panel.gain_dbi: found nothing; allowed: -20 to 60 dBi. Give gain_dbi, or a gain "
        "with its unit in the file (MDGAIN and GUNITS)"
    )
    assert read_pattern(path, name="panel", gain_dbi=12.0).gain_dbi == 12.0


def grid_lines(gain_dbi: float | None = None) -> list[str]:
    last = "level_db" if gain_dbi is None else "gain_dbi"
    rows = [
        f"{azimuth},{elevation},{beam_db(azimuth, elevation) + (gain_dbi or 0.0):.3f}"
        for elevation in range(-90, 91, 10)
        for azimuth in range(0, 360, 20)
    ]
    return [f"azimuth_deg,elevation_deg,{last}", *rows]


@pytest.mark.parametrize("gain_dbi", [None, 8.25])
def test_a_grid_as_csv(tmp_path: Path, gain_dbi: float | None) -> None:
    """Levels over the peak with the gain in a comment, or gains in dBi: the same pattern."""
    lines = grid_lines(gain_dbi)
    if gain_dbi is None:
        lines.insert(0, "# gain_dbi: 8.25")
    pattern = read_pattern(written(tmp_path, lines, name="dish.csv"), name="dish")
    assert isinstance(pattern, GridPattern)
    assert pattern.gain_dbi == 8.25
    assert pattern.notes == ()
    azimuths, elevations = np.meshgrid(np.arange(-180, 180, 20), np.arange(-90, 91, 10))
    expected = [beam_db(a, e) + 8.25 for a, e in zip(azimuths.flat, elevations.flat, strict=True)]
    np.testing.assert_allclose(
        pattern.gain(azimuths, elevations).ravel(), expected, rtol=0.0, atol=1e-9
    )


@pytest.mark.parametrize(
    ("at", "new", "told"),
    [
        (40, "0,0,2", "dish.csv line 41: found level 2 dB; allowed: -200 to 0 dB, relative to the"),
        (40, "400,0,-2", "dish.csv line 41: found azimuth 400 deg; allowed: -180 to 180 or 0 to"),
        (40, "20,100,-2", "dish.csv line 41: found elevation 100 deg; allowed: -90 to 90 deg"),
        (40, "x,0,-2", "dish.csv line 41: found azimuth 'x'; allowed: a number"),
        (40, "20,y,-2", "dish.csv line 41: found angle 'y'; allowed: a number"),
        (40, "20,-80", "dish.csv line 41: found 2 columns; allowed: 3 columns"),
        (40, "0,-70,-9", "dish.csv line 41: found direction -70 deg again, with level -9; line 38"),
        (40, "", "dish.csv line 1: found 1 directions without a row, first azimuth 60, elevation "),
        (2, "# gain_dbi: lots", "dish.csv line 3: found gain_dbi 'lots'; allowed: -60 to 100 dBi"),
        (2, "# kind: good", "dish.csv line 3: found kind 'good'; allowed: typical, envelope"),
    ],
)
def test_faults_of_a_grid(tmp_path: Path, at: int, new: str, told: str) -> None:
    """Each fault has its line; a grid with a hole names the first direction that is missing."""
    lines = grid_lines()
    lines[at] = new
    messages = problems(written(tmp_path, lines, name="dish.csv"))
    assert any(message.startswith(told) for message in messages), messages


def test_half_a_sphere_is_refused(tmp_path: Path) -> None:
    """A grid that does not go around, or ends short of the poles, is no pattern."""
    lines = [line for line in grid_lines() if not line.startswith(("2", "3"))]
    (told,) = problems(written(tmp_path, lines, name="dish.csv"))
    assert told.startswith("dish.csv line 1: found a grid that does not go around")
    lines = [line for line in grid_lines() if ",90," not in line and ",80," not in line]
    (told,) = problems(written(tmp_path, lines, name="dish.csv"))
    assert "found elevations from -90 to 70 deg (grid); allowed: -90 to 90 deg" in told


def test_values_stated_in_comments(tmp_path: Path) -> None:
    """A CSV file may state its gain, frequency, tilt, kind and polarization."""
    lines = [
        "# measured on a range",
        "# gain_dbi = 12.5",
        "# frequency_mhz: 5500,,",
        "# electrical_downtilt_deg: 5",
        "# kind: envelope",
        "# polarization: H/H",
        "# cuts: H/V",
        "# colour: white",
        "cut,angle_deg,level_db",
        *(f"h,{angle},{across_db(angle) + up_db(0.0, 5.0)}" for angle in ANGLES),
        *(f"v,{elevation},{up_db(elevation, 5.0)}" for elevation in ELEVATIONS),
    ]
    path = written(tmp_path, lines, name="panel.csv")
    file = read_pattern_file(path)
    assert (file.form, file.header.kind) == ("CSV", "envelope")
    assert file.blocks[0].frequency_mhz == 5500.0
    assert [(cut.name, cut.polarization) for cut in file.blocks[0].cuts] == [
        ("H", "H/H"), ("V", "H/H"),
    ]  # fmt: skip
    pattern = read_pattern(path, name="panel", frequency_mhz=5500.0)
    assert (pattern.gain_dbi, pattern.kind, pattern.electrical_downtilt_deg) == (
        12.5,
        "envelope",
        5.0,
    )
