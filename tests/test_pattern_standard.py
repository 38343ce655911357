"""Reading the open standard for digitised patterns, WG16.99.050, issued also as TIA/EIA-804-B."""

from pathlib import Path

import numpy as np
import pytest
from pattern_texts import (
    ANGLES,
    ELEVATIONS,
    across_db,
    beam_db,
    block,
    cut,
    line_of,
    problems,
    standard,
    up_db,
    written,
)

from planner.antenna import GridPattern, Pattern
from planner.antenna.two_cut import REAR_NOTE
from planner.io.pattern_files import PatternFile, read_pattern, read_pattern_file


def said(pattern: Pattern) -> tuple[str, ...]:
    """The notes of a pattern but for the one on what no cut tells."""
    return tuple(note for note in pattern.notes if note != REAR_NOTE)


def read(folder: Path, lines: list[str]) -> PatternFile:
    return read_pattern_file(written(folder, lines))


def test_every_point_comes_back_as_gain(tmp_path: Path) -> None:
    """Gain along both cuts is the stated gain plus the level of the point."""
    pattern = read_pattern(written(tmp_path, standard()), name="panel")
    assert (pattern.name, pattern.gain_dbi, pattern.kind) == ("panel", 11.5, "measured")
    assert said(pattern) == ()
    for angle in ANGLES:
        assert 11.5 + across_db(angle) == float(pattern.gain(angle, 0.0))
    for elevation in ELEVATIONS:
        assert 11.5 + up_db(elevation) == float(pattern.gain(0.0, elevation))


def test_all_fields(tmp_path: Path) -> None:
    """Each record of the header is kept under a name that says what it is, in its unit."""
    file = read(
        tmp_path,
        standard(
            COMNT2="second comment", DESCR1="sector", FIELD1="range 3", FILNUM="A12",
            FEDORN="measured in house", LWGAIN="16", HGGAIN="17", CONTYP="N female",
            MAXPOW="100", POTOPO="30", ANTWID="0.2", ANTDEP="0.1", ANTWGT="4.5", ELTILT="0,0.5",
        ),
    )  # fmt: skip
    header = file.header
    assert file.form == "WG16.99.050"
    assert file.warnings == ()
    assert (header.standard, header.standard_date) == ("NSMA WG16.99.050", "19990520")
    assert header.comments == ("an invented antenna", "second comment")
    assert (header.descriptions, header.user_fields) == (("sector",), ("range 3",))
    assert (header.manufacturer, header.model, header.pattern_id) == ("Nobody", "SEC-90", "7")
    assert (header.file_number, header.origin) == ("A12", "measured in house")
    assert header.data_date == "20240229"
    assert (header.lowest_frequency_mhz, header.highest_frequency_mhz) == (5150.0, 5850.0)
    assert (header.gain_unit, header.level_unit) == ("DBI", "DBR")
    gains = (header.low_band_gain, header.mid_band_gain, header.high_band_gain)
    assert gains == (16.0, 11.5, 17.0)
    assert (header.azimuth_beamwidth_deg, header.elevation_beamwidth_deg) == (90.0, 30.0)
    assert (header.connector, header.vswr, header.front_to_back_db) == ("N female", 1.5, 25.0)
    assert (header.highest_power_w, header.port_isolation_db) == (100.0, 30.0)
    assert header.electrical_downtilt_deg == 0.0
    assert header.electrical_downtilt_tolerance_deg == 0.5
    assert (header.length_m, header.width_m, header.depth_m) == (0.6, 0.2, 0.1)
    assert (header.weight_kg, header.kind) == (4.5, "typical")


def test_several_frequencies_cuts_and_polarizations(tmp_path: Path) -> None:
    """All blocks are kept, cross-polar cuts too, phases beside their levels."""
    rich = block(5500)
    rich[1] = "NUMCUT:,3"
    rich += cut("AZ", {angle: -20.0 + across_db(angle) for angle in ANGLES}, "V/H")
    rich[7:9] = ["-170,-25,30.5,", "-160,-25,-12,"]
    rich[6] = "-180,-25,7"
    rich[9 : 6 + len(ANGLES)] = [f"{line},0" for line in rich[9 : 6 + len(ANGLES)]]
    file = read(tmp_path, standard(block(5200), rich))
    assert [one.frequency_mhz for one in file.blocks] == [5200.0, 5500.0]
    assert [(one.name, one.polarization) for one in file.blocks[1].cuts] == [
        ("AZ", "V/V"), ("EL", "V/V"), ("AZ", "V/H"),
    ]  # fmt: skip
    assert [one.is_copolar for one in file.blocks[1].cuts] == [True, True, False]
    phases = file.blocks[1].cuts[0].phase_deg
    assert phases is not None
    assert list(phases[:3]) == [7.0, 30.5, -12.0]


@pytest.mark.parametrize("end", ["\r\n", "\n", "\r"])
def test_line_ends_comments_case_and_minus_signs(tmp_path: Path, end: str) -> None:
    """Whatever ends the lines; comments behind "!" and lower case change nothing."""
    lines = [line.replace("-", "\N{MINUS SIGN}") for line in standard(block())]
    lines[0] = "\N{BYTE ORDER MARK}revnum:,nsma wg16.99.050   ! the open standard"
    lines[2:2] = ["", "! a line of its own"]
    lines = [line.lower() if line.startswith(("GUNITS", "PATCUT")) else line for line in lines]
    pattern = read_pattern(written(tmp_path, lines, end=end), name="panel")
    assert said(pattern) == ()
    assert float(pattern.gain(-50.0, 0.0)) == 11.5 + across_db(-50)


@pytest.mark.parametrize(
    ("units", "gain", "shift", "expected_dbi"),
    [
        ("DBI/DBR", "11.5", 0.0, 11.5),
        ("DBD/DBR", "9.35", 0.0, 11.5),
        ("DBI/DBI", "11.5", 11.5, 11.5),
        ("DBD/DBD", "9.35", 9.35, 11.5),
    ],
)
def test_gain_units(
    tmp_path: Path, units: str, gain: str, shift: float, expected_dbi: float
) -> None:
    """dBd is 2.15 dB less than dBi; absolute levels give the same pattern as relative ones."""
    plain = block()
    lines = [
        f"{line.split(',')[0]},{float(line.split(',')[1]) + shift:.3f}"
        if line[0] in "-0123456789"
        else line
        for line in plain
    ]
    pattern = read_pattern(
        written(tmp_path, standard(lines, GUNITS=units, MDGAIN=gain)), name="panel"
    )
    assert pattern.gain_dbi == pytest.approx(expected_dbi, abs=1e-9)
    assert float(pattern.gain(60.0, 0.0)) == pytest.approx(expected_dbi + across_db(60), abs=1e-9)
    assert float(pattern.gain(0.0, 20.0)) == pytest.approx(expected_dbi + up_db(20), abs=1e-9)


def test_linear_units(tmp_path: Path) -> None:
    """Power over isotropic and power over the peak: 40 is 16.02 dBi, 0.5 is -3.01 dB."""
    lines = [
        *("PATFRE:,5500", "NUMCUT:,2"),
        *cut("AZ", {angle: 1.0 if abs(angle) < 50 else 0.5 for angle in ANGLES}),
        *cut("EL", {angle: 1.0 if abs(angle) < 10 else 0.01 for angle in ELEVATIONS}),
    ]
    path = written(tmp_path, standard(lines, GUNITS="LPI/LPR", MDGAIN="40"))
    pattern = read_pattern(path, name="panel")
    assert pattern.gain_dbi == pytest.approx(16.0206, abs=1e-4)
    assert float(pattern.gain(90.0, 0.0)) == pytest.approx(16.0206 - 3.0103, abs=1e-4)
    assert float(pattern.gain(0.0, 45.0)) == pytest.approx(16.0206 - 20.0, abs=1e-4)


def test_both_ends_of_the_circle(tmp_path: Path) -> None:
    """-180 and 180, or 0 and 360, may both stand; the pattern has no seam there."""
    for angles in (range(-180, 181, 10), range(0, 361, 10)):
        levels = {a: across_db(a - 360 if a > 180 else a) for a in angles}
        lines = ["PATFRE:,5500", "NUMCUT:,2", *cut("AZ", levels), *block()[6 + len(ANGLES) :]]
        pattern = read_pattern(written(tmp_path, standard(lines)), name="panel")
        assert said(pattern) == ()
        for angle in (-180.0, 180.0, 179.999, -90.0, 270.0, 0.0, 360.0):
            wrapped = (angle + 180.0) % 360.0 - 180.0
            assert float(pattern.gain(angle, 0.0)) == pytest.approx(
                11.5 + across_db(wrapped), abs=1e-3
            )


def test_horizontal_plane_and_cone_of_a_tilted_beam(tmp_path: Path) -> None:
    """H lies on the horizon, where the tilted beam is already down; AZ on the cone of the peak."""
    tilt, down = 10.0, up_db(0.0, 10.0)
    assert down == pytest.approx(-1.333, abs=1e-3)
    horizon = {angle: across_db(angle) + down for angle in ANGLES}
    cone = block(tilt=tilt)
    plane = ["PATFRE:,5500", "NUMCUT:,2", *cut("H", horizon)]
    plane += block(tilt=tilt, names="H V")[6 + len(ANGLES) :]
    patterns = [
        read_pattern(written(tmp_path, standard(lines, ELTILT="10")), name="panel")
        for lines in (plane, cone)
    ]
    assert 11.5 + horizon[0.0] == pytest.approx(float(patterns[0].gain(0.0, 0.0)))
    for angle in ANGLES:
        # Off the cone it is what the two cuts are put together to.
        assert 11.5 + horizon[angle] == pytest.approx(float(patterns[0].gain(angle, 0.0)), abs=1.5)
        assert 11.5 + across_db(angle) == pytest.approx(float(patterns[1].gain(angle, -tilt)))
    (note,) = said(patterns[0])
    assert note.startswith("panel.txt: the horizontal cut reaches -1.33 dB, as the vertical cut")
    assert said(patterns[1]) == ()


def sphere(angles: dict[float, float]) -> list[str]:
    """A sphere of cuts in steps of 15 degrees; ``angles`` are their angles with elevations."""
    lines = ["PATFRE:,5500", "NUMCUT:,24"]
    for azimuth in range(0, 360, 15):
        lines += cut(f"{azimuth}", {a: beam_db(azimuth, e) for a, e in angles.items()})
    return lines


@pytest.mark.parametrize("from_zenith", [False, True])
def test_a_sphere_of_cuts(tmp_path: Path, from_zenith: bool) -> None:
    """One cut for each azimuth, by elevation or by angle from the zenith, makes a grid."""
    angles = {a: 90.0 - a if from_zenith else a for a in range(0, 181, 10)}
    if not from_zenith:
        angles = {a: a for a in range(-90, 91, 10)}
    pattern = read_pattern(written(tmp_path, standard(sphere(angles))), name="dish")
    assert isinstance(pattern, GridPattern)
    azimuths, elevations = np.meshgrid(np.arange(-180, 180, 15), np.arange(-90, 91, 10))
    expected = [beam_db(a, e) for a, e in zip(azimuths.flat, elevations.flat, strict=True)]
    got = pattern.gain(azimuths, elevations) - 11.5
    np.testing.assert_allclose(got.ravel(), expected, rtol=0.0, atol=1e-9)
    assert len(said(pattern)) == int(from_zenith)
    assert not from_zenith or "counted from the zenith" in said(pattern)[0]


def test_a_sphere_of_full_circles(tmp_path: Path) -> None:
    """A cut over a full circle runs on behind the antenna, at the opposite azimuth."""
    lines = ["PATFRE:,5500", "NUMCUT:,12"]
    for azimuth in range(0, 180, 15):
        levels = {}
        for angle in range(-180, 181, 10):
            behind = abs(angle) > 90
            folded = float(np.copysign(180, angle) - angle) if behind else angle
            levels[angle] = beam_db(azimuth + 180 * behind, folded)
        lines += cut(f"{azimuth}", levels)
    pattern = read_pattern(written(tmp_path, standard(lines)), name="dish")
    assert said(pattern) == ()
    for azimuth, elevation in ((0, 0), (180, 0), (-165, 20), (195, -40), (30, 80)):
        expected = 11.5 + beam_db(azimuth, elevation)
        assert float(pattern.gain(azimuth, elevation)) == pytest.approx(expected, abs=1e-9)


def test_what_is_odd_is_read_with_a_warning(tmp_path: Path) -> None:
    """Oddities that leave the pattern clear are read, and told with their line."""
    lines = standard(FAVCOL="blue", DTDATA="spring", REVNUM="someone's own", PATTYP="guess")
    lines[line_of(lines, "MODNUM") - 1] = "MODNUM: SEC-90"
    at = line_of(lines, "NUPOIN")
    lines[at - 1] = "NUPOIN:,37"
    lines[line_of(lines, "FSTLST", at + 2) - 1] = "FSTLST:,-180,180"
    lines.remove("ENDFIL:,EOF")
    file = read(tmp_path, lines)
    assert file.header.model == "SEC-90"
    told = {warning.split(": ", 1)[0]: warning for warning in file.warnings}
    assert 'REVNUM "someone\'s own" is not' in told["panel.txt line 1"]
    assert "MODNUM has no comma" in told["panel.txt line 5"]
    assert "DTDATA 'spring' is no date" in told["panel.txt line 7"]
    assert "PATTYP 'guess' is neither" in told["panel.txt line 18"]
    assert "FAVCOL is not known" in told["panel.txt line 20"]
    assert "NUPOIN says 37, but 36 points" in told[f"panel.txt line {at}"]
    assert "FSTLST says -180 to 180 deg" in told[f"panel.txt line {line_of(lines, 'FSTLST', 65)}"]
    assert any("no ENDFIL" in warning for warning in file.warnings)
    assert len(file.warnings) == 8


def test_windows_text(tmp_path: Path) -> None:
    """A degree sign in an old code page is read and told."""
    path = tmp_path / "panel.txt"
    lines = standard(COMNT2="5° fixed")
    path.write_bytes("\r\n".join(lines).encode("cp1252"))
    file = read_pattern_file(path)
    assert file.header.comments[1] == "5° fixed"
    assert file.warnings == (
        f"panel.txt line {len(lines) - 1 - lines[::-1].index('COMNT2:,5° fixed') + 1}: bytes that "
        "are not UTF-8; read as Windows-1252 text",
    )


def test_a_file_of_another_name(tmp_path: Path) -> None:
    """The content decides, not the ending."""
    file = read_pattern_file(written(tmp_path, standard(), name="panel.csv"))
    assert file.form == "WG16.99.050"
    assert problems(written(tmp_path, ["nothing", "to see"]))[0].startswith("panel.txt line 1")


def changed_line(start: str, new: str, after: int = 0) -> tuple[list[str], int]:
    """The file with one line replaced, and the line's number."""
    lines = standard()
    at = line_of(lines, start, after)
    lines[at - 1] = new
    return lines, at


@pytest.mark.parametrize(
    ("start", "new", "told"),
    [
        ("-150,", "-175,-25", "found angle -175 deg after -160 deg; allowed: increasing angles"),
        ("-150,", "-160,-25", "found direction -160 deg again, with level -25; line 28 has -160"),
        ("-150,", "-150,3.5", "found level 3.5 dB; allowed: -200 to 0 dB, relative to the peak"),
        ("-150,", "-150,nan", "found level 'nan'; allowed: a number"),
        ("-150,", "-150,", "found '-150,'; allowed: a record TAG:,value or a point"),
        ("-150,", "west,-3", "found angle 'west'; allowed: a number"),
        ("-150,", "-150;-25", "found '-150;-25'; allowed: a record TAG:,value or a point"),
        ("NUPOIN", "NUPOIN:,360", "found 360 points declared for cut AZ V/V; allowed: 36, as"),
        ("NUPOIN", "NUPOIN:,many", "found NUPOIN 'many'; allowed: a whole number, 1 or more"),
        ("NUMCUT", "NUMCUT:,3", "found 3 cuts declared; allowed: 2, as many as there are"),
        ("NOFREQ", "NOFREQ:,4", "found 4 frequencies declared; allowed: 1, as many as there are"),
        ("PATFRE", "PATFRE:,fast", "found PATFRE 'fast'; allowed: 1 to 1,000,000 MHz"),
        ("PATCUT", "PATCUT:,DIAGONAL", "found PATCUT 'DIAGONAL'; allowed: H, V, AZ, EL or an azi"),
        ("POLARI", "POLARI:,up", "found POLARI 'up'; allowed: antenna/illumination, such as V/V"),
        ("FSTLST", "FSTLST:,-180", "found FSTLST '-180'; allowed: two angles"),
        ("GUNITS", "GUNITS:,DBI/DBD", "found mixed units: gain in DBI, levels in DBD; allowed"),
        ("GUNITS", "GUNITS:,volts", "found GUNITS 'volts'; allowed: DBI/DBR, DBD/DBR"),
        ("MDGAIN", "MDGAIN:,9.3 dBd", "found mixed units: MDGAIN in DBD; allowed: DBI, as GUNITS"),
        ("MDGAIN", "MDGAIN:,good", "found MDGAIN 'good'; allowed: -60 to 1e+06"),
        ("MDGAIN", "MDGAIN:,95", "found mid band gain 95 DBI; allowed: -20 to 60 dBi"),
        ("ELTILT", "ELTILT:,80", "found ELTILT 80; allowed: -45 to 45 deg, positive downwards"),
        ("LOWFRQ", "LOWFRQ:,5900", "found LOWFRQ 5900 above HGHFRQ 5850; allowed: the lower edge"),
        ("ATVSWR", "ATVSWR:,0.5", "found ATVSWR 0.5; allowed: 1 to 100"),
        ("MODNUM", "ANTMAN:,Somebody", "found ANTMAN 'Somebody' again, 'Nobody' in line 4"),
    ],
)  # fmt: skip
def test_each_fault_has_its_line(tmp_path: Path, start: str, new: str, told: str) -> None:
    """What is wrong is told with the line that it stands in, and what may stand there."""
    lines, at = changed_line(start, new)
    messages = problems(written(tmp_path, lines))
    assert any(message.startswith(f"panel.txt line {at}: {told}") for message in messages), messages


def test_faults_are_told_all_at_once(tmp_path: Path) -> None:
    """One reading tells every fault, from the top of the file to its end."""
    lines = standard()
    lines[line_of(lines, "ATVSWR") - 1] = "ATVSWR:,none"
    lines[line_of(lines, "-150,") - 1] = "-150,+2"
    vertical = line_of(lines, "PATCUT:,EL")
    lines[line_of(lines, "-80,", vertical) - 1] = "-95,-30"
    assert problems(written(tmp_path, lines)) == [
        "panel.txt line 14: found ATVSWR 'none'; allowed: 1 to 100",
        "panel.txt line 29: found level 2 dB; allowed: -200 to 0 dB, relative to the peak. Gains "
        "in dBi or dBd need a unit that says so, losses the other sign",
        f"panel.txt line {vertical + 6}: found angle -95 deg after -85 deg; allowed: increasing "
        "angles in cut EL V/V",
    ]


def test_missing_cuts(tmp_path: Path) -> None:
    """A frequency without its vertical cut, or with cross-polar cuts only, is told."""
    one = ["PATFRE:,5500", "NUMCUT:,1", *block()[2 : 6 + len(ANGLES)]]
    (told,) = problems(written(tmp_path, standard(block(5200), one)))
    at = line_of(standard(block(5200), one), "PATFRE:,5500")
    assert told.startswith(
        f"panel.txt line {at}: found no vertical cut beside AZ V/V; allowed: two"
    )
    crossed = [line.replace("V/V", "V/H") for line in block()]
    (told,) = problems(written(tmp_path, standard(crossed)))
    assert told.startswith("panel.txt line 20: found no co-polar cut; allowed: two cuts with the")
    (told,) = problems(written(tmp_path, [*standard()[:19], "ENDFIL:,EOF"]))
    assert told == "panel.txt: found no cut; allowed: PATFRE and PATCUT records with points"


def test_the_same_cut_twice(tmp_path: Path) -> None:
    """Two cuts of one name and polarization at one frequency contradict each other."""
    twice = [*block(), *block()[2 : 6 + len(ANGLES)]]
    twice[1] = "NUMCUT:,3"
    lines = standard(twice)
    (told,) = problems(written(tmp_path, lines))
    at = line_of(lines, "PATCUT:,AZ", line_of(lines, "PATCUT:,EL"))
    assert told.startswith(f"panel.txt line {at}: found cut AZ V/V again, first in line 22")
    lines = standard(block(), block())
    told, *_ = problems(written(tmp_path, lines))
    at = line_of(lines, "PATFRE", 30)
    assert told == f"panel.txt line {at}: found PATFRE 5500 again; allowed: each frequency once"


def test_levels_without_a_peak_and_holes(tmp_path: Path) -> None:
    """Cuts that do not reach 0 dB, end early or have holes are told with the cut's line."""
    low = [
        "PATFRE:,5500", "NUMCUT:,2",
        *cut("AZ", {angle: across_db(angle) - 3.0 for angle in ANGLES}),
        *cut("EL", {e: up_db(e) for e in ELEVATIONS if e <= 60}),
    ]  # fmt: skip
    lines = standard(low)
    assert problems(written(tmp_path, lines)) == [
        f"panel.txt line {line_of(lines, '0,-3')}: found highest level of the cut -3 dB; allowed: "
        "0 dB at the peak. Subtract the highest level from every level of this cut"
    ]
    low[2 : 6 + len(ANGLES)] = cut("AZ", {a: across_db(a) for a in ANGLES if not 0 < a < 50})
    lines = standard(low)
    assert problems(written(tmp_path, lines)) == [
        "panel.txt line 22: found no point between 0 and 50 deg (horizontal cut); allowed: gaps of "
        "30 deg at most",
        f"panel.txt line {line_of(lines, 'PATCUT:,EL')}: found angles from -90 to 60 deg (vertical "
        "cut); allowed: at least -90 to 90 deg, positive upwards",
    ]


def test_a_horizontal_cut_that_does_not_fit(tmp_path: Path) -> None:
    """An H cut may be as far down as the V cut at the horizon, but not otherwise."""
    plane = block(tilt=10.0, names="H V")
    plane[2 : 6 + len(ANGLES)] = cut("H", {angle: across_db(angle) - 6.0 for angle in ANGLES})
    (told,) = problems(written(tmp_path, standard(plane, ELTILT="10")))
    assert "found highest level of the cut -6 dB; allowed: 0 dB, or -1.33 dB as in the" in told
    plain = block(tilt=15.0, names="H V")
    file = read(tmp_path, standard(plain, ELTILT="15"))
    (warning,) = file.warnings
    assert "the cut H reaches 0 dB although the vertical cut has -3 dB at the horizon" in warning
