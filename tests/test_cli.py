"""The command line: whole messages, exit codes, JSON that equals the text, no half outputs."""

import json
import re
from pathlib import Path

import numpy as np
import pytest
import rasterio
from affine import Affine
from command_line import planner

SITE = Path(__file__).parents[1] / "demo_sites" / "harrow_vale" / "plan.toml"

PLAN = """\
name = "Test field"
[terrain]
rasters = ["terrain.tif"]
[model]
radius_km = 1
[antenna.panel]
formula = "TR 36.814"
gain_dbi = 17
azimuth_beamwidth_deg = 70
elevation_beamwidth_deg = 10
[radio.access]
frequency_mhz = 5600
channel_width_mhz = 20
transmit_power_dbm = 19
feeder_loss_db = 1
noise_figure_db = 5
eirp_limit_dbm = 36
[terminal]
antenna_height_m = 5
antenna_gain_dbi = 19
service_threshold_dbm = -75
[[tower]]
id = "west"
latitude = -46.2041
longitude = -121.4122
[[tower.sector]]
id = "west-1"
antenna = "panel"
radio = "access"
antenna_height_m = 30
azimuth_deg = 20
[customers]
file = "customers.csv"
"""


@pytest.fixture
def field(tmp_path: Path) -> Path:
    """A small plan that is right; tests spoil it. Returns its folder."""
    write_terrain(tmp_path)
    (tmp_path / "customers.csv").write_text(
        "id,address,latitude,longitude\na,1 Mill Lane,-46.2041,-121.4062\n", encoding="utf-8"
    )
    (tmp_path / "plan.toml").write_text(PLAN, encoding="utf-8")
    return tmp_path


def write_terrain(folder: Path, crs: str | None = "EPSG:32710") -> None:
    with rasterio.open(
        folder / "terrain.tif",
        "w",
        driver="GTiff",
        width=150,
        height=150,
        count=1,
        dtype="float32",
        crs=crs,
        transform=Affine(20, 0, 621_000, 0, -20, 4_884_500),
    ) as raster:
        rows, cols = np.mgrid[:150, :150]
        raster.write((200 + 20 * np.sin(rows / 20) + cols / 5).astype(np.float32), 1)


def spoil(folder: Path, old: str, new: str) -> None:
    text = (folder / "plan.toml").read_text(encoding="utf-8")
    assert old in text
    (folder / "plan.toml").write_text(text.replace(old, new), encoding="utf-8")


def files_in(folder: Path) -> set[str]:
    return {str(file.relative_to(folder)) for file in folder.rglob("*")}


def test_run_prints_the_record_and_ends_with_0(field, monkeypatch, capsys):
    """Text and JSON show the same facts; progress and notices go to stderr only."""
    code, out, err = planner(monkeypatch, capsys, "run", field / "plan.toml")
    assert code == 0
    assert "Test field" in out
    assert "1 served, 0 not served, 0 not computed, of 1" in out
    assert "kernels" in err
    code, out, _ = planner(monkeypatch, capsys, "run", field / "plan.toml", "--json", "--quiet")
    assert code == 0
    record = json.loads(out)
    assert record["counts"]["customers_served"] == 1
    assert record["files"][-1] == "run.json"
    written = json.loads((field / "out" / "run.json").read_text(encoding="utf-8"))
    assert {key: record[key] for key in written} == written


def test_out_overrides_the_plan_s_folder(field, monkeypatch, capsys):
    """--out DIR is where everything goes."""
    target = field / "elsewhere"
    code, _, _ = planner(
        monkeypatch, capsys, "run", field / "plan.toml", "--out", target, "--quiet"
    )
    assert code == 0
    assert (target / "map.html").is_file()
    assert not (field / "out").exists()


def test_results_never_replace_an_input(field, monkeypatch, capsys):
    """--out pointing at the folder of a raster that is named like a layer is refused."""
    (field / "terrain.tif").rename(field / "received_signal.tif")
    spoil(field, "terrain.tif", "received_signal.tif")
    before = (field / "received_signal.tif").read_bytes()
    code, _, err = planner(
        monkeypatch, capsys, "run", field / "plan.toml", "--out", field, "--quiet"
    )
    assert code == 1
    assert "received_signal.tif: found an input that a result would overwrite" in err
    assert (field / "received_signal.tif").read_bytes() == before
    assert not (field / "map.html").exists()


def test_a_sector_above_its_eirp_limit_is_said_loudly_and_ends_with_3(field, monkeypatch, capsys):
    """All outputs are written; stderr names sector, EIRP and limit."""
    spoil(field, "eirp_limit_dbm = 36", "eirp_limit_dbm = 30")
    code, _, err = planner(monkeypatch, capsys, "run", field / "plan.toml", "--quiet")
    assert code == 3
    assert "sector west-1: EIRP 35.0 dBm is above the plan's limit of 30.0 dBm" in err
    assert (field / "out" / "map.html").is_file()
    record = json.loads((field / "out" / "run.json").read_text(encoding="utf-8"))
    assert record["eirp_above_limit"] == ["west-1"]
    assert any("EIRP 35.0 dBm" in warning for warning in record["warnings"])
    code, out, _ = planner(monkeypatch, capsys, "check", field / "plan.toml")
    assert code == 3
    assert "EIRP above limit" in out


def test_check_computes_and_writes_nothing(field, monkeypatch, capsys):
    """It says cells, radius, time and memory; the folder is as before."""
    before = files_in(field)
    code, out, _ = planner(monkeypatch, capsys, "check", field / "plan.toml")
    assert code == 0
    assert files_in(field) == before
    for words in ("cells in all", "radius", "1 km", "time, about", "memory, about"):
        assert words in out
    code, out, _ = planner(monkeypatch, capsys, "check", field / "plan.toml", "--json")
    assert code == 0
    cells = json.loads(out)["estimate"]["cells"]
    _, printed, _ = planner(monkeypatch, capsys, "run", field / "plan.toml", "--json", "--quiet")
    assert json.loads(printed)["counts"]["cells_computed"] == pytest.approx(cells, rel=0.01)


BAD_INPUTS = {
    "missing raster": (
        lambda f: (f / "terrain.tif").unlink(),
        r"error: plan\.toml.*terrain\.rasters.*terrain\.tif",
    ),
    "wrong key": (
        lambda f: spoil(f, "feeder_loss_db = 1", "feder_loss_db = 1"),
        r"feder_loss_db.*feeder_loss_db",
    ),
    "raster without CRS": (
        lambda f: write_terrain(f, crs=None),
        r"error: .*terrain\.tif.*(CRS|coordinate)",
    ),
    "tower off the raster": (
        lambda f: spoil(f, "latitude = -46.2041", "latitude = -45.2041"),
        r"error: .*west.*(raster|terrain)",
    ),
    "text where a number belongs": (
        lambda f: spoil(f, "antenna_height_m = 30", 'antenna_height_m = "thirty"'),
        r"antenna_height_m.*thirty",
    ),
    "empty customers file": (
        lambda f: (f / "customers.csv").write_text("", encoding="utf-8"),
        r"error: .*customers\.csv.*empty",
    ),
    "tower's latitude and longitude swapped": (
        lambda f: spoil(
            f,
            "latitude = -46.2041\nlongitude = -121.4122",
            "latitude = -121.4122\nlongitude = -46.2041",
        ),
        r"latitude.*-121\.4122.*[Ss]wapped",
    ),
    "customers' latitude and longitude swapped": (
        lambda f: (f / "customers.csv").write_text(
            "id,address,latitude,longitude\na,1 Mill Lane,-121.4062,-46.2041\n", encoding="utf-8"
        ),
        r"error: .*customers\.csv.*swap",
    ),
    "broken TOML": (lambda f: spoil(f, "[terrain]", "[terrain"), r"error: .*plan\.toml.*at line 2"),
}


@pytest.mark.parametrize("name", BAD_INPUTS)
def test_bad_inputs_give_one_clear_message_and_no_output(name, field, monkeypatch, capsys):
    """One message naming file, key or row; exit code 1; no traceback; nothing written."""
    damage, message = BAD_INPUTS[name]
    damage(field)
    before = files_in(field)
    code, out, err = planner(monkeypatch, capsys, "run", field / "plan.toml", "--quiet")
    print(err)
    assert code == 1
    assert out == ""
    assert "Traceback" not in err
    errors = [line for line in err.splitlines() if line.startswith("error: ")]
    assert len(errors) == 1
    assert re.search(message, errors[0])
    assert files_in(field) == before


def test_every_problem_is_reported_at_once(field, monkeypatch, capsys):
    """Three wrong keys give three messages and a count."""
    spoil(field, "azimuth_deg = 20", "azimuth_deg = 400")
    spoil(field, "frequency_mhz = 5600", 'frequency_mhz = "5.6 GHz"')
    spoil(field, "radius_km = 1", "radius_km = -1")
    code, _, err = planner(monkeypatch, capsys, "check", field / "plan.toml")
    assert code == 1
    for key in ("azimuth_deg", "frequency_mhz", "radius_km"):
        assert sum(key in line for line in err.splitlines()) == 1
    assert "3 problems; nothing was written" in err


def test_missing_plan(tmp_path, monkeypatch, capsys):
    """The file is named, the exit code is 1."""
    code, _, err = planner(monkeypatch, capsys, "run", tmp_path / "no.toml", "--quiet")
    assert code == 1
    message = f"error: {tmp_path / 'no.toml'}: found no such file; allowed: a plan file (TOML)"
    assert err.strip() == message


@pytest.mark.parametrize(
    "arguments",
    [
        ["run"],
        ["run", SITE, "--no-such-option"],
        ["profile", SITE],
        ["profile", SITE, "--tower", "shoulder"],
        ["profile", SITE, "--tower", "shoulder", "--to", "one,two"],
        ["profile", SITE, "--tower", "shoulder", "--to", "-46.2"],
        ["profile", SITE, "--tower", "shoulder", "--to", "-46.2,-121.4", "--to-tower", "shoulder"],
        ["nonsense"],
    ],
)
def test_a_wrong_command_line_ends_with_2(arguments, monkeypatch, capsys):
    """Usage on stderr, nothing on stdout."""
    code, out, err = planner(monkeypatch, capsys, *arguments)
    assert code == 2
    assert out == ""
    assert "Usage:" in err


def test_profile_prints_draws_and_gives_json(tmp_path, monkeypatch, capsys):
    """Text and JSON hold the same path; the picture is a PNG."""
    picture = tmp_path / "path.png"
    arguments = ["profile", SITE, "--tower", "shoulder", "--to=-46.18485,-121.45111"]
    code, out, _ = planner(monkeypatch, capsys, *arguments, "--picture", picture)
    assert code == 0
    assert picture.read_bytes().startswith(b"\x89PNG")
    code, printed, _ = planner(monkeypatch, capsys, *arguments, "--json")
    assert code == 0
    record = json.loads(printed)
    assert f"{record['path_loss_db']:.1f} dB" in out
    assert f"{record['bearing_deg']:05.1f}° T" in out
    parts = record["free_space_loss_db"] + record["diffraction_loss_db"]
    assert record["path_loss_db"] == pytest.approx(parts, abs=0.002)
    assert record["received_signal_dbm"] is not None


def test_profile_to_another_tower(monkeypatch, capsys):
    """Tower to tower: a path without a signal, since the feed's antennas are not in the plan."""
    site = SITE.parents[1] / "lake_ondrel" / "plan.toml"
    arguments = ["profile", site, "--tower", "marl-head", "--to-tower", "north-brow"]
    code, out, _ = planner(monkeypatch, capsys, *arguments)
    assert code == 0
    assert "tower north-brow" in out
    assert "not stated" in out
    code, printed, _ = planner(monkeypatch, capsys, *arguments, "--json", "--height-m", "12")
    assert code == 0
    record = json.loads(printed)
    assert record["to_antenna_height_m"] == 12.0
    assert record["received_signal_dbm"] is None
    assert record["line_of_sight"] in (True, False)


def test_profile_of_an_unknown_tower_and_of_places_off_the_terrain(monkeypatch, capsys):
    """Both are wrong inputs: exit code 1 and a message that says what would do."""
    code, _, err = planner(
        monkeypatch, capsys, "profile", SITE, "--tower", "sholder", "--to=-46.2,-121.4"
    )
    assert code == 1
    assert "'sholder'" in err
    assert "shoulder" in err
    code, _, err = planner(
        monkeypatch, capsys, "profile", SITE, "--tower", "shoulder", "--to=-40.0,-121.4"
    )
    assert code == 1
    assert err.startswith("error: ")
    code, _, err = planner(
        monkeypatch, capsys, "profile", SITE, "--tower", "shoulder", "--to=-121.4,-46.2"
    )
    assert code == 1
    assert "swapped?" in err


def test_version_and_help(monkeypatch, capsys):
    """--version prints the version; every command has help with an example."""
    code, out, _ = planner(monkeypatch, capsys, "--version")
    assert code == 0
    assert re.fullmatch(r"ptmp-planner \d+\.\d+\.\d+\n", out)
    for command in ("run", "check", "profile", "antenna", "demo"):
        code, out, _ = planner(monkeypatch, capsys, command, "--help")
        assert code == 0
        assert "Example: planner " + command in out


def test_demo_runs_from_anywhere(tmp_path, monkeypatch, capsys):
    """`planner demo` needs no file of the user's."""
    monkeypatch.chdir(tmp_path)
    code, out, _ = planner(monkeypatch, capsys, "demo", "--quiet")
    assert code == 0
    assert "invented" in out.lower() or "Harrow Vale" in out
    assert (tmp_path / "planner_demo" / "map.html").is_file()
