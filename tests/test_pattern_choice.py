"""What is taken from a pattern file: frequency, gain, polarization, kind; and its tilt, once."""

from pathlib import Path

import numpy as np
import pytest
from pattern_texts import ANGLES, ELEVATIONS, across_db, block, cut, standard, up_db, written
from plans import changed, write_plan

from planner.antenna import Pattern
from planner.antenna.two_cut import REAR_NOTE
from planner.errors import PatternError, PlanError
from planner.io.pattern_files import read_pattern, read_pattern_file
from planner.plan.read import read_plan


def said(pattern: Pattern) -> tuple[str, ...]:
    """The notes of a pattern but for the one on what no cut tells."""
    return tuple(note for note in pattern.notes if note != REAR_NOTE)


def narrow(frequency: float, width: float) -> list[str]:
    """A block whose horizontal cut is 3 dB down at half the width."""
    levels = {a: round(-min(12.0 * (a / width) ** 2, 25.0), 3) + 0.0 for a in ANGLES}
    vertical = {e: up_db(e) for e in ELEVATIONS}
    return [f"PATFRE:,{frequency:g}", "NUMCUT:,2", *cut("AZ", levels), *cut("EL", vertical)]


@pytest.mark.parametrize(
    ("frequency", "used", "width"),
    [(5150, 5200, 100), (5200, 5200, 100), (5349, 5200, 100), (5351, 5500, 80), (5850, 5800, 60)],
)
def test_the_nearest_frequency(tmp_path: Path, frequency: float, used: float, width: float) -> None:
    """The block nearest to the radio's frequency is taken, and a message says which."""
    path = written(tmp_path, standard(narrow(5200, 100), narrow(5500, 80), narrow(5800, 60)))
    pattern = read_pattern(path, name="panel", frequency_mhz=frequency)
    assert float(pattern.gain(40.0, 0.0)) == pytest.approx(
        11.5 - 12.0 * (40 / width) ** 2, abs=1e-3
    )
    assert said(pattern) == (
        f"panel.txt: for {frequency} MHz the pattern at {used} MHz is used, the nearest of 5200, "
        "5500, 5800 MHz.",
    )


def test_outside_the_band(tmp_path: Path) -> None:
    """A radio outside the band that the file states is refused, at the radio's key."""
    path = written(tmp_path, standard())
    with pytest.raises(PatternError) as caught:
        read_pattern(path, name="panel", frequency_mhz=6000.0)
    assert str(caught.value) == (
        "antenna.panel.frequency_mhz: found 6000 MHz; allowed: 5150 to 5850 MHz, the band that "
        "panel.txt states"
    )
    open_band = written(tmp_path, standard(LOWFRQ="", HGHFRQ=""))
    (note,) = said(read_pattern(open_band, name="panel", frequency_mhz=6000.0))
    assert note == "panel.txt: for 6000 MHz the pattern at 5500 MHz is used."


def test_without_a_frequency(tmp_path: Path) -> None:
    """The block in the middle is taken, and said, where nobody asks for a frequency."""
    path = written(tmp_path, standard(narrow(5800, 60), narrow(5200, 100), narrow(5500, 80)))
    pattern = read_pattern(path, name="panel")
    assert float(pattern.gain(40.0, 0.0)) == pytest.approx(11.5 - 3.0, abs=1e-3)
    assert said(pattern) == (
        "panel.txt: no frequency was asked for; of 5200, 5500, 5800 MHz the pattern at 5500 MHz is "
        "used.",
    )


@pytest.mark.parametrize(("frequency", "gain"), [(5150, 10.0), (5325, 10.75), (5675, 11.75)])
def test_gain_over_the_band(tmp_path: Path, frequency: float, gain: float) -> None:
    """Gains at both edges and in the middle are joined by straight lines over frequency."""
    path = written(tmp_path, standard(LWGAIN="10", HGGAIN="12"))
    pattern = read_pattern(path, name="panel", frequency_mhz=frequency)
    assert pattern.gain_dbi == pytest.approx(gain)
    assert f"gain of {gain:.2f} dBi at {frequency} MHz, between 10.00 at 5150" in said(pattern)[-1]


def test_gains_that_are_missing_or_contradict(tmp_path: Path) -> None:
    """No gain is an error; two are told; the plan's counts."""
    with pytest.raises(PatternError, match=r"panel\.gain_dbi: found nothing"):
        read_pattern(written(tmp_path, standard(MDGAIN="")), name="panel")
    no_unit = written(tmp_path, standard(GUNITS=""))
    with pytest.raises(PatternError, match=r"panel\.gain_dbi: found nothing"):
        read_pattern(no_unit, name="panel")
    assert said(read_pattern(no_unit, name="panel", gain_dbi=11.0)) == (
        "panel.txt states a gain without its unit (GUNITS), so it was not used.",
    )
    pattern = read_pattern(written(tmp_path, standard()), name="panel", gain_dbi=10.0)
    assert (pattern.gain_dbi, said(pattern)) == (
        10.0,
        ("panel.txt states a gain of 11.50 dBi; the plan's 10 dBi is used.",),
    )
    absolute = [
        line if ":" in line else "{},{}".format(line.split(",")[0], float(line.split(",")[1]) + 9)
        for line in block()
    ]  # fmt: skip
    pattern = read_pattern(written(tmp_path, standard(absolute, GUNITS="DBI/DBI")), name="panel")
    assert pattern.gain_dbi == 9.0
    assert "states a gain of 11.50 dBi, but its levels reach 9.00 dBi" in said(pattern)[0]


def test_polarization_of_the_wave(tmp_path: Path) -> None:
    """Of several co-polar sets the wave's own is taken; cross-polar cuts never are."""
    both = [
        "PATFRE:,5500", "NUMCUT:,5",
        *cut("AZ", dict.fromkeys(ANGLES, -40.0), "H/V"),
        *block()[2:],
        *cut("AZ", {a: across_db(a) / 2.0 for a in ANGLES}, "H/H"),
        *cut("EL", {e: up_db(e) for e in ELEVATIONS}, "H/H"),
    ]  # fmt: skip
    path = written(tmp_path, standard(both))
    for polarization, share in (("vertical", 1.0), ("horizontal", 0.5), (None, 1.0)):
        pattern = read_pattern(path, name="panel", polarization=polarization)  # type: ignore[arg-type]
        assert float(pattern.gain(90.0, 0.0)) == pytest.approx(11.5 - 12.0 * share)
        used = "H/H" if share == 0.5 else "V/V"
        assert said(pattern)[0] == (
            f"panel.txt: of the polarizations V/V, H/H the cuts {used} are used."
        )


def test_cuts_through_the_peak_come_first(tmp_path: Path) -> None:
    """Where both stand, AZ and EL are used rather than H and V."""
    lines = block()
    lines[1] = "NUMCUT:,4"
    lines += cut("H", {a: across_db(a) / 2.0 for a in ANGLES})
    lines += cut("V", {e: up_db(e) / 2.0 for e in ELEVATIONS})
    pattern = read_pattern(written(tmp_path, standard(lines)), name="panel")
    assert float(pattern.gain(90.0, 0.0)) == pytest.approx(11.5 + across_db(90))
    assert float(pattern.gain(0.0, 30.0)) == pytest.approx(11.5 + up_db(30))


@pytest.mark.parametrize(
    ("stated", "kind"), [("envelope", "envelope"), ("Typical", "measured"), ("", "measured")]
)
def test_kind(tmp_path: Path, stated: str, kind: str) -> None:
    """An envelope is marked as one."""
    assert read_pattern(written(tmp_path, standard(PATTYP=stated)), name="panel").kind == kind


def peak_deg(pattern: Pattern, tilt: float | None) -> float:
    elevations = np.arange(-90.0, 90.01, 0.5)
    gain = pattern.gain(0.0, elevations, electrical_downtilt_deg=tilt)
    return float(elevations[gain.argmax()])


def test_a_tilt_in_the_file_is_not_applied_twice(tmp_path: Path) -> None:
    """Set to the tilt that the levels carry the beam stays; set to another it moves by the rest."""
    pattern = read_pattern(written(tmp_path, standard(block(tilt=5.0), ELTILT="5")), name="panel")
    assert pattern.electrical_downtilt_deg == 5.0
    assert peak_deg(pattern, None) == -5.0  # as the file has it
    for tilt in (0.0, 5.0, 9.0):
        assert peak_deg(pattern, tilt) == -tilt


def test_a_tilt_that_the_levels_do_not_show(tmp_path: Path) -> None:
    """Where the vertical cut peaks elsewhere the points count, and a warning says so."""
    for found, hint in ((0.0, False), (-5.0, True)):
        path = written(tmp_path, standard(block(tilt=found), ELTILT="5", ELWIDT="4"))
        (warning,) = read_pattern_file(path).warnings
        assert f"peaks at elevation {0.0 - found:g} deg, not at -5 deg as the stated" in warning
        assert ("turn their sign" in warning) == hint
        assert read_pattern(path, name="panel").electrical_downtilt_deg == 0.0
    path = written(tmp_path, standard(block(tilt=5.0), ELTILT=""))
    (warning,) = read_pattern_file(path).warnings
    assert "peaks at elevation -5 deg, but no electrical tilt is stated" in warning
    within = written(tmp_path, standard(block(tilt=5.0), ELTILT="7,2", ELWIDT="4"))
    assert read_pattern_file(within).warnings == ()


def plan_with(folder: Path, file: str, extra: str = "", tilt: str = "") -> Path:
    return write_plan(
        folder,
        changed(
            ('formula = "F.1336-5"', f'file = "{file}"'),
            ("gain_dbi = 17\n", extra),
            ("azimuth_beamwidth_deg = 90\nelevation_beamwidth_deg = 7\n", ""),
            ("azimuth_deg = 20\n", f"azimuth_deg = 20\n{tilt}"),
            ("frequency_mhz = 5600", "frequency_mhz = 5600"),
        ),
    )


def test_in_a_plan(tmp_path: Path) -> None:
    """A plan takes gain and tilt from the file, whatever its name; what it states itself counts."""
    written(tmp_path, standard(block(tilt=5.0), ELTILT="5"), name="panel.dat")
    plan = read_plan(plan_with(tmp_path, "panel.dat"))
    first, second = plan.sectors[:2]
    assert plan.patterns[first.id].gain_dbi == 11.5
    assert (first.electrical_downtilt_deg, second.electrical_downtilt_deg) == (5.0, 5.0)
    assert peak_deg(plan.patterns[first.id], first.electrical_downtilt_deg) == -5.0
    assert any("for 5600 MHz the pattern at 5500 MHz" in n for n in said(plan.patterns[first.id]))
    stated = plan_with(tmp_path, "panel.dat", "gain_dbi = 10\n", "electrical_downtilt_deg = 2\n")
    plan = read_plan(stated)
    first, second = plan.sectors[:2]
    assert plan.patterns[first.id].gain_dbi == 10.0
    assert (first.electrical_downtilt_deg, second.electrical_downtilt_deg) == (2.0, 5.0)
    assert peak_deg(plan.patterns[first.id], 2.0) == -2.0


def test_faults_in_a_plan(tmp_path: Path) -> None:
    """What is wrong with the file is told at the plan's key; a missing gain and band as well."""
    lines = standard()
    lines[26] = "-120,5"
    written(tmp_path, lines)
    with pytest.raises(PlanError) as caught:
        read_plan(plan_with(tmp_path, "panel.txt"))
    assert "antenna.panel-90.file (line 10): found panel.txt line 27: level 5 dB; allowed" in str(
        caught.value
    )
    written(tmp_path, standard(MDGAIN="", LOWFRQ="5150", HGHFRQ="5650"))
    with pytest.raises(PlanError) as caught:
        read_plan(plan_with(tmp_path, "panel.txt"))
    assert "antenna.panel-90.gain_dbi (line 9): found nothing; allowed: -20 to 60 dBi" in str(
        caught.value
    )
    written(tmp_path, standard(LOWFRQ="5150", HGHFRQ="5550"))
    with pytest.raises(PlanError) as caught:
        read_plan(plan_with(tmp_path, "panel.txt"))
    assert "radio.access.frequency_mhz" in str(caught.value)
    assert "5150 to 5550 MHz, the band that panel.txt states" in str(caught.value)


def test_a_formula_still_needs_its_gain(tmp_path: Path) -> None:
    """Only a file may bring the gain with it."""
    with pytest.raises(PlanError) as caught:
        read_plan(write_plan(tmp_path, changed(("gain_dbi = 17\n", ""))))
    (problem,) = caught.value.problems
    assert "antenna.panel-90.gain_dbi" in problem.where
    assert (problem.found, problem.allowed) == ("nothing", "-20 to 60 dBi")
