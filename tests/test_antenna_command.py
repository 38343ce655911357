"""`planner antenna`: files, formulas and sectors of plans; text and JSON; what is called out."""

import copy
import json
import math
from pathlib import Path

import pytest
from command_line import planner
from plans import PLAN, write_plan

from planner.antenna.key_figures import key_figures
from planner.customers import CustomerAnswer
from planner.io.pattern_files import read_pattern
from planner.network import Customer
from planner.plan import read_plan
from planner.plan.record import near_field_warnings
from planner.report_antenna import antenna_text

PANEL = Path(__file__).parents[1] / "demo_sites" / "lake_ondrel" / "panel-65.csv"
EVERYTHING = (
    *("--set", "gain_dbi=17", "--set", "frequency_mhz=3600", "--set", "vswr=1.5"),
    *("--set", "transmit_power_dbm=24", "--set", "feeder_loss_db=1"),
    *("--set", "largest_dimension_m=0.7", "--set", "electrical_downtilt_deg=2"),
    *("--height-m", "30", "--downtilt-deg", "4"),
)


def record_of(monkeypatch, capsys, *arguments) -> dict:
    code, out, err = planner(monkeypatch, capsys, "antenna", *arguments, "--json")
    assert (code, err) == (0, "")
    return json.loads(out)


def leaves(value, place=()):
    """Places of all numbers of a record."""
    if isinstance(value, dict):
        for key, inner in value.items():
            yield from leaves(inner, (*place, key))
    elif isinstance(value, list):
        for at, inner in enumerate(value):
            yield from leaves(inner, (*place, at))
    elif isinstance(value, int | float) and not isinstance(value, bool):
        yield place


def test_text_and_json_say_the_same(monkeypatch, capsys):
    """The text is made of the JSON, and changes with every number in it."""
    record = record_of(monkeypatch, capsys, PANEL, *EVERYTHING)
    code, out, _ = planner(monkeypatch, capsys, "antenna", PANEL, *EVERYTHING)
    assert code == 0
    assert out == antenna_text(record) + "\n"
    places = list(leaves(record))
    assert len(places) > 80
    for place in places:
        if "nulls" in place and place[-1] != "distance_m":
            continue  # the text names nulls by their distance alone
        changed = copy.deepcopy(record)
        inner = changed
        for key in place[:-1]:
            inner = inner[key]
        inner[place[-1]] += 7.0
        assert antenna_text(changed) != antenna_text(record), place


def test_figures_of_a_file(monkeypatch, capsys):
    """Values that follow from what is given: 23 dBm in, 17 dBi, 14 m from 30 m at 6 + 2 deg."""
    record = record_of(monkeypatch, capsys, PANEL, *EVERYTHING)
    assert record["kind"] == "measured"
    assert record["power_density"]["eirp_dbm"] == 40.0
    at_100_m = record["power_density"]["in_the_main_beam"][2]
    assert at_100_m["power_density_w_m2"] == pytest.approx(10.0 / (4e4 * math.pi), rel=1e-3)
    assert record["field_regions"]["far_field_m"] == pytest.approx(0.98 * 3.6 / 0.299792, abs=0.01)
    assert record["port"] == {
        "vswr": 1.5,
        "reflection_coefficient": 0.2,
        "return_loss_db": 14.0,
        "mismatch_loss_db": 0.18,
    }
    assert record["figures"]["electrical_downtilt_found_deg"] == 2.0
    beam = record["flat_ground"]["main_beam"]
    assert beam["distance_m"] == pytest.approx(30.0 / math.tan(math.radians(6.0)), abs=0.1)
    public = record["exposure"]["limits"][0]
    assert public["far_field_m"] == pytest.approx(math.sqrt(10.0 / (math.pi * 10.0)), abs=1e-3)
    assert public["distance_m"] == public["reactive_near_field_m"] == pytest.approx(1.26, abs=0.01)
    assert "no compliance certificate" in record["exposure"]["caution"]
    assert any("Within 11.8 m" in warning for warning in record["warnings"])


def test_every_figure_is_in_its_place(tmp_path, monkeypatch, capsys):
    """A lopsided antenna, so that no two figures are alike: the record against the figures."""
    angles = [-180, -150, -120, -90, -60, -30, 0, 10, 40, 70, 100, 130, 160]
    levels = [-31, -24, -28, -20, -26, -7, -0.5, 0, -5, -17, -33, -21, -35]
    vertical = [(-90, -30), (-60, -25), (-30, -32), (-12, -14), (-8, -25), (-5, -6), (-3, 0),
                (0, -3.5), (4, -20), (9, -17), (30, -25), (60, -26), (90, -30)]  # fmt: skip
    rows = [f"h,{a},{level}" for a, level in zip(angles, levels, strict=True)]
    rows += [f"v,{a},{level}" for a, level in vertical]
    file = tmp_path / "lopsided.csv"
    file.write_text("\n".join(("cut,angle_deg,level_db", *rows)) + "\n", encoding="utf-8")
    found = record_of(monkeypatch, capsys, file, "--set", "gain_dbi=12")["figures"]
    figures = key_figures(read_pattern(file, name="x", gain_dbi=12.0))
    for key in ("squint_deg", "front_to_back_db", "front_to_back_region_db", "efficiency",
                "directivity_dbi", "gain_above_directivity_db", "peak_azimuth_offset_deg",
                "peak_elevation_deg", "electrical_downtilt_found_deg"):  # fmt: skip
        assert found[key] == pytest.approx(getattr(figures, key), abs=0.0501), key
    for name in ("azimuth", "elevation"):
        cut = getattr(figures, name)
        for key in ("half_power_beamwidth_deg", "first_null_beamwidth_deg", "side_lobe_level_db"):
            assert found[name][key] == pytest.approx(getattr(cut, key), abs=0.0501), key
        for side in ("lower", "upper"):
            lobe_db = getattr(cut, side)[0].peak_db
            assert found[name][f"first_{side}_side_lobe_db"] == pytest.approx(lobe_db, abs=0.0501)
    numbers = [value for value in found.values() if isinstance(value, float)]
    assert len(set(numbers)) >= len(numbers) - 1  # the tilt found is the peak's elevation


def test_a_file_that_states_too_much_gain_is_called_out(tmp_path, monkeypatch, capsys):
    """The vale's panel has 17.3 dBi at most; with 20 in its own MDGAIN it is impossible."""
    panel = PANEL.parents[1] / "harrow_vale" / "panel-90.txt"
    sound = record_of(monkeypatch, capsys, panel)
    assert sound["figures"]["gain_verdict"] == "possible"
    boasting = tmp_path / "boasting.txt"
    text = panel.read_text(encoding="utf-8")
    assert "MDGAIN:,17\n" in text
    boasting.write_text(text.replace("MDGAIN:,17\n", "MDGAIN:,20\n"), encoding="utf-8")
    record = record_of(monkeypatch, capsys, boasting)
    assert record["figures"]["gain_verdict"] == "impossible"
    assert any("2.7 dB above the directivity" in warning for warning in record["warnings"])


def test_an_inconsistent_gain_is_called_out(monkeypatch, capsys):
    """23 dBi for a pattern of 19.1 dBi is impossible; 9 dBi is rather a slip; 17 dBi is neither."""
    high = record_of(monkeypatch, capsys, PANEL, "--set", "gain_dbi=23")
    assert high["figures"]["gain_verdict"] == "impossible"
    assert any("3.9 dB above the directivity" in warning for warning in high["warnings"])
    low = record_of(monkeypatch, capsys, PANEL, "--set", "gain_dbi=9")
    assert low["figures"]["gain_verdict"] == "possible"
    assert any("10.1 dB below the directivity" in warning for warning in low["warnings"])
    right = record_of(monkeypatch, capsys, PANEL, "--set", "gain_dbi=17")
    assert not any("directivity" in warning for warning in right["warnings"])


def test_an_envelope_is_not_judged(monkeypatch, capsys):
    """F.1336-5: no verdict, and the text says why."""
    arguments = ("f.1336-5", *(w for key in (
        "gain_dbi=25", "frequency_mhz=5600", "azimuth_beamwidth_deg=90", "elevation_beamwidth_deg=7"
    ) for w in ("--set", key)))  # fmt: skip
    record = record_of(monkeypatch, capsys, *arguments)
    assert record["figures"]["gain_verdict"] == "not judged"
    _, out, _ = planner(monkeypatch, capsys, "antenna", *arguments)
    assert "not judged: an envelope is not what the antenna radiates" in out
    assert record["exposure"] == {"reason": "no transmit_power_dbm of F.1336-5"}
    assert record["flat_ground"] is None


def test_pictures(tmp_path, monkeypatch, capsys):
    """Without a height the pattern, with one the ground."""
    one, two = tmp_path / "one.png", tmp_path / "two.png"
    arguments = ("--set", "gain_dbi=17")
    assert record_of(monkeypatch, capsys, PANEL, *arguments, "--picture", one)["picture"] == str(
        one
    )
    record_of(monkeypatch, capsys, PANEL, *arguments, "--height-m", "20", "--picture", two)
    assert one.read_bytes().startswith(b"\x89PNG")
    assert two.read_bytes().startswith(b"\x89PNG")
    assert one.read_bytes() != two.read_bytes()


WRONG = {
    "unknown key": (
        (PANEL, "--set", "gain_db=17", "--set", "vswr=0.5"),
        ["error: --set: found \"gain_db\"", "Nearest known key: gain_dbi",
         'error: --set vswr: found "0.5"; allowed: 1 to 100', "2 problems"],
    ),
    "no gain": (
        ("tr 36.814", "--set", "frequency_mhz=5600"),
        ["error: --set gain_dbi: found nothing; allowed: -20 to 60 dBi"],
    ),
    "no gain in the file either": ((PANEL,), ["panel-65.csv"]),
    "no number": ((PANEL, "--set", "gain_dbi=nan"), ['--set gain_dbi: found "nan"']),
    "given twice": (
        (PANEL, "--set", "gain_dbi=17", "--set", "gain_dbi=18"),
        ["--set gain_dbi: found two values"],
    ),
    "a beam beside a file": (
        (PANEL, "--set", "gain_dbi=17", "--set", "azimuth_beamwidth_deg=65"),
        ["--set azimuth_beamwidth_deg: found 65; allowed: no azimuth_beamwidth_deg beside"],
    ),
    "formula without a frequency or beam": (
        ("TR 36.814", "--set", "gain_dbi=17"),
        ["--set frequency_mhz: found nothing; allowed: 30 to 100000 MHz"],
    ),
    "formula without a beam": (
        ("TR 36.814", "--set", "gain_dbi=17", "--set", "frequency_mhz=3600"),
        ["--set azimuth_beamwidth_deg: found nothing", "--set elevation_beamwidth_deg: found"],
    ),
    "no such file": (
        ("panel.csv", "--set", "gain_dbi=17"),
        ["panel.csv: found no such file; allowed: a pattern file, a plan file (.toml) or a"],
    ),
    "a name that no file can have": (("x" * 5000, "--set", "gain_dbi=17"), ["found no such file"]),
    "sector without a plan": (
        (PANEL, "--set", "gain_dbi=17", "--sector", "a"),
        ['--sector: found "a"; allowed: only beside a plan file'],
    ),
}  # fmt: skip


@pytest.mark.parametrize("name", WRONG)
def test_wrong_inputs(name, monkeypatch, capsys):
    """Every problem with its key, exit code 1, nothing on stdout."""
    arguments, messages = WRONG[name]
    code, out, err = planner(monkeypatch, capsys, "antenna", *arguments)
    assert (code, out) == (1, "")
    assert [message for message in messages if message not in err] == []


@pytest.mark.parametrize(
    "arguments",
    [("--set", "gain_dbi"), ("--downtilt-deg", "3"), ("--height-m", "0")],
)
def test_a_wrong_command_line(arguments, monkeypatch, capsys):
    """Usage on stderr, exit code 2."""
    code, out, err = planner(monkeypatch, capsys, "antenna", PANEL, *arguments)
    assert (code, out) == (2, "")
    assert "Usage:" in err


@pytest.fixture
def plan(tmp_path: Path) -> Path:
    """The plan of the docs page, its antennas 0.6 m high."""
    return write_plan(
        tmp_path,
        PLAN.replace("[antenna.panel-90]\n", "[antenna.panel-90]\nlargest_dimension_m = 0.6\n"),
    )


def test_a_sector_of_a_plan(plan, monkeypatch, capsys):
    """Aim, height and power come from the plan; the mast's sectors count together."""
    the_plan = read_plan(plan)
    tower = the_plan.towers[0]
    sector = tower.sectors[0]
    record = record_of(monkeypatch, capsys, plan, "--sector", sector.id)
    assert record["flat_ground"]["antenna_height_m"] == sector.antenna_height_m
    assert record["flat_ground"]["mechanical_downtilt_deg"] == sector.mechanical_downtilt_deg
    assert record["exposure"]["antennas"] == [one.id for one in tower.sectors]
    power_dbm = sector.radio.transmit_power_dbm - sector.radio.feeder_loss_db
    watts = len(tower.sectors) * 10.0 ** (power_dbm / 10.0) / 1000.0
    assert record["exposure"]["power_w"] == pytest.approx(watts, rel=1e-4)
    public = record["exposure"]["limits"][0]
    alone = math.sqrt(10.0 ** ((power_dbm + 17.0) / 10.0) / 1000.0 / (math.pi * 10.0))
    assert alone < public["far_field_m"] < math.sqrt(len(tower.sectors)) * alone
    other = record_of(
        monkeypatch, capsys, plan, "--sector", sector.id, "--height-m", 12, "--downtilt-deg", 9
    )
    assert other["flat_ground"]["antenna_height_m"] == 12.0
    assert other["flat_ground"]["mechanical_downtilt_deg"] == 9.0


def test_a_plan_needs_one_of_its_sectors_and_says_the_rest(plan, monkeypatch, capsys):
    """The sectors that are on are named; what the plan says may not be set beside it."""
    for arguments in ((), ("--sector", "nowhere")):
        code, _, err = planner(monkeypatch, capsys, "antenna", plan, *arguments)
        assert code == 1
        assert "allowed: west-1" in err
    code, _, err = planner(monkeypatch, capsys, "antenna", plan, "--set", "gain_dbi=17")
    assert code == 1
    assert "--set gain_dbi: found 17; allowed: only vswr beside a plan" in err


def test_customers_inside_the_far_field_distance_are_named(plan):
    """2 D²/lambda of 0.6 m at 5.6 GHz is 13.4 m: the house at 12 m is named, that at 15 m not."""
    sector = read_plan(plan).sectors[0]

    def answer(name: str, distance_m: float) -> CustomerAnswer:
        customer = Customer(row=2, id=name, address="", latitude=0.0, longitude=0.0)
        return CustomerAnswer(
            customer=customer, verdict="served", sector_id=sector.id, distance_m=distance_m
        )

    answers = answer("near", 12.0), answer("far", 15.0)
    [warning] = near_field_warnings(read_plan(plan), answers)
    assert warning == (
        f"sector {sector.id}: the far field of its antenna begins at 13.4 m; within it stands "
        "near, whose signal is not to be trusted"
    )
    assert near_field_warnings(read_plan(plan), answers[1:]) == []
