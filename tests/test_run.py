"""The whole job: demo sites and real elevation data from plan file to finished outputs."""

import json
import math
import re
import shutil
import signal
import subprocess
import sys
from pathlib import Path

import geopandas
import numpy as np
import pandas as pd
import pytest
import rasterio
import rasterio.warp
from places import jacksboro_degrees

from planner.customers import check_customers
from planner.errors import OutputError, PlanError
from planner.io.path_store import PathStore
from planner.io.terrain_files import read_terrain
from planner.plan import read_plan
from planner.plan.demo import demo_plan_path
from planner.plan.path_tasks import run_task, tower_tasks
from planner.plan.run import RunResult, run_plan

SITES = Path(__file__).parents[1] / "demo_sites"
LAYERS = ("received_signal.tif", "best_server.tif", "server_margin.tif")


@pytest.fixture(scope="module")
def harrow(tmp_path_factory) -> RunResult:
    folder = tmp_path_factory.mktemp("harrow")
    return run_plan(read_plan(SITES / "harrow_vale" / "plan.toml"), folder=folder)


@pytest.fixture(scope="module")
def ondrel(tmp_path_factory) -> RunResult:
    folder = tmp_path_factory.mktemp("ondrel")
    return run_plan(read_plan(SITES / "lake_ondrel" / "plan.toml"), folder=folder)


def jacksboro_plan(folder: Path, **model: object) -> Path:
    """A plan on the USGS grid in degrees, as a file without a nodata tag."""
    elevation, transform = jacksboro_degrees()
    with rasterio.open(
        folder / "jacksboro.tif",
        "w",
        driver="GTiff",
        width=elevation.shape[1],
        height=elevation.shape[0],
        count=1,
        dtype="int16",
        crs="EPSG:4326",
        transform=transform,
    ) as raster:
        raster.write(elevation, 1)
    settings = {"radius_km": 8, **model}
    lines = "\n".join(f"{key} = {value}" for key, value in settings.items())
    (folder / "customers.csv").write_text(
        "id,address,latitude,longitude\n"
        "near,1 Ridge Road,36.60,-84.24\nfar,9 Far Road,36.47,-84.08\nlost,no place,,\n",
        encoding="utf-8",
    )
    path = folder / "plan.toml"
    path.write_text(
        f"""
name = "Ridge above the fault"
[terrain]
rasters = ["jacksboro.tif"]
[model]
{lines}
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
id = "ridge"
latitude = 36.58
longitude = -84.25
[[tower.sector]]
id = "ridge-1"
antenna = "panel"
radio = "access"
antenna_height_m = 30
azimuth_deg = 40
mechanical_downtilt_deg = 2
[[tower.sector]]
id = "ridge-2"
antenna = "panel"
radio = "access"
antenna_height_m = 24
azimuth_deg = 220
[customers]
file = "customers.csv"
""",
        encoding="utf-8",
    )
    return path


def contents(folder: Path) -> dict[str, bytes]:
    """Every file of a run but the record, which holds the clock, by its path in the folder."""
    return {
        str(file.relative_to(folder)): file.read_bytes()
        for file in sorted(folder.rglob("*"))
        if file.is_file() and file.name != "run.json"
    }


def test_a_demo_site_gives_every_file_that_is_promised(harrow):
    """Layers, customer tables, map, record and kept path fields; else only the classes' side file.

    The record names the file of each path field.
    """
    assert sorted(file.name for file in harrow.folder.iterdir()) == sorted(
        [
            *LAYERS,
            "best_server.tif.aux.xml",
            "path_loss_shoulder.tif",
            "customers.csv",
            "customers.gpkg",
            "map.html",
            "path_fields",
            "run.json",
        ]
    )
    [kept] = harrow.record["path_fields"]
    assert (kept["tower"], kept["source"]) == ("shoulder", "computed")
    assert [harrow.folder / kept["file"]] == list((harrow.folder / "path_fields").iterdir())
    assert harrow.demands_met
    assert json.loads((harrow.folder / "run.json").read_text(encoding="utf-8")) == harrow.record


def test_layers_agree_with_each_other(harrow):
    """Signal, server and margin are about the same cells; the threshold divides them."""
    arrays = {}
    for name in LAYERS:
        with rasterio.open(harrow.folder / name) as layer:
            arrays[name] = layer.read(1)
            assert layer.crs.to_epsg() == 32710
            assert layer.block_shapes == [(256, 256)]
            assert layer.overviews(1)
            assert layer.tags()["PLAN_SHA256"] == harrow.record["plan"]["sha256"]
            assert layer.tags()["FREQUENCY_MHZ"] == "5600"
    signal, server, margin = (arrays[name] for name in LAYERS)
    np.testing.assert_array_equal(np.isnan(signal), server == -1)
    np.testing.assert_array_equal(signal >= np.float32(-75.0), server > 0)
    assert set(np.unique(server)) == {-1, 0, 1, 2, 3}
    assert np.nanmin(margin) >= 0.0
    counts = harrow.record["counts"]
    assert counts["cells_computed"] == int((server >= 0).sum())
    assert counts["cells_served"] == int((server > 0).sum())


def test_received_signal_is_the_budget_over_the_path_loss(harrow):
    """Power - feeder + gain - path loss + terminal gain: within the pattern's limits everywhere."""
    with rasterio.open(harrow.folder / "path_loss_shoulder.tif") as layer:
        loss = layer.read(1)
        assert layer.units == ("dB",)
    with rasterio.open(harrow.folder / "received_signal.tif") as layer:
        signal = layer.read(1)
        assert layer.units == ("dBm",)
    gain = signal + loss - (19.0 - 1.0 + 19.0)
    assert np.nanmax(gain) <= 17.001
    assert np.nanmax(gain) > 16.5


def test_customers_rows_and_map_pixels_agree(harrow):
    """Every computed customer's signal is that of its pixel, within the map/path tolerance."""
    table = pd.read_csv(harrow.folder / "customers.csv")
    source = pd.read_csv(SITES / "harrow_vale" / "customers.csv")
    assert list(table["id"]) == list(source["id"])
    points = geopandas.read_file(harrow.folder / "customers.gpkg")
    assert list(points["id"]) == list(source["id"])
    computed = table["received_signal_dbm"].notna() & source["height_m"].isna()
    inside = points[computed.to_numpy()].to_crs(32710)
    with rasterio.open(harrow.folder / "received_signal.tif") as layer:
        pixels = np.array([v[0] for v in layer.sample([(p.x, p.y) for p in inside.geometry])])
    difference = np.abs(pixels - table.loc[computed, "received_signal_dbm"].to_numpy())
    assert computed.sum() > 100
    assert np.median(difference) <= 0.3  # a pixel stands for up to half a cell around its centre
    assert np.percentile(difference, 90) <= 3.0
    verdicts = table["verdict"].value_counts()
    assert int(verdicts["served"]) == harrow.record["counts"]["customers_served"]
    assert 0.5 <= verdicts["served"] / len(table) <= 0.9


def test_the_same_inputs_give_the_same_bytes(harrow, tmp_path):
    """A second run writes the same bytes in every file but the record, which holds the clock."""
    again = run_plan(read_plan(SITES / "harrow_vale" / "plan.toml"), folder=tmp_path)
    assert contents(tmp_path) == contents(harrow.folder)
    first, second = dict(harrow.record), dict(again.record)
    assert first.pop("stages") != second.pop("stages")
    assert first == second


def test_the_lake_site_uses_tiles_woods_and_three_kinds_of_antenna(ondrel):
    """Two tiles in degrees and a canopy raster are resampled; bad rows say why."""
    record = ondrel.record
    assert record["model"]["grid"] == "EPSG:32710"
    assert len(record["inputs"]) >= 5
    assert record["counts"]["towers"] >= 3
    table = pd.read_csv(ondrel.folder / "customers.csv")
    counts = record["counts"]
    assert len(table) == counts["customers"]
    assert counts["customers_not_computed"] >= 3
    unexplained = table[(table["verdict"] != "served") & table["reason"].isna()]
    assert unexplained.empty
    for tower in ("marl-head", "sallow-knoll", "north-brow"):
        assert (ondrel.folder / f"path_loss_{tower}.tif").is_file()


def test_real_elevation_in_degrees_from_plan_to_map(tmp_path):
    """The USGS grid of the Jacksboro fault: resampled to UTM, two antenna heights, all files."""
    result = run_plan(read_plan(jacksboro_plan(tmp_path)))
    assert result.folder == tmp_path / "out"
    assert result.record["model"]["grid"] == "EPSG:32616"
    assert 70.0 < result.record["model"]["cell_m"] < 95.0
    names = {file.name for file in result.folder.iterdir()}
    assert {"path_loss_ridge.tif", "path_loss_ridge_24m_5600mhz.tif"} <= names
    table = pd.read_csv(result.folder / "customers.csv").set_index("id")
    assert table.loc["near", "verdict"] in ("served", "not served")
    assert table.loc["far", "verdict"] == "not computed"
    assert table.loc["lost", "verdict"] == "not computed"
    assert math.isnan(table.loc["lost", "received_signal_dbm"])
    assert not table.loc["near", "reason"] or isinstance(table.loc["far", "reason"], str)
    cells = result.record["counts"]["cells_computed"]
    expected = math.pi * 8000.0**2 / result.record["model"]["cell_m"] ** 2
    assert cells == pytest.approx(expected, rel=0.01)


def test_only_the_layers_asked_for_are_written(tmp_path):
    """A plan that asks for one layer gets one layer."""
    path = jacksboro_plan(tmp_path)
    text = path.read_text(encoding="utf-8")
    path.write_text(text + '[output]\nlayers = ["best_server"]\n', encoding="utf-8")
    result = run_plan(read_plan(path), folder=tmp_path / "results")
    tifs = sorted(file.name for file in result.folder.glob("*.tif"))
    assert tifs == ["best_server.tif"]


def test_progress_names_the_stages_and_an_interrupt_leaves_no_result(tmp_path):
    """Stages report from 0 to 1; Ctrl-C during the second of a tower's two fields keeps the first.

    Nothing else is written, and the next run computes the second only.
    """
    plan = read_plan(jacksboro_plan(tmp_path))
    seen: dict[str, list[float]] = {}

    def interrupt(stage: str, share: float) -> None:
        seen.setdefault(stage, []).append(share)
        if stage == "path field ridge" and share > 0.5:
            raise KeyboardInterrupt

    with pytest.raises(KeyboardInterrupt):
        run_plan(plan, progress=interrupt)
    [first] = contents(tmp_path / "out")
    assert first.startswith("path_fields/")
    assert seen["read terrain"][0] == 0.0
    assert seen["read terrain"][-1] == 1.0
    record = run_plan(plan).record
    assert sources(record) == {("ridge", 30.0): "reused", ("ridge", 24.0): "computed"}


def sources(record: dict) -> dict[tuple[str, float], str]:
    """Whether each path field was computed or reused, by tower and antenna height."""
    return {
        (kept["tower"], kept["antenna_height_m"]): kept["source"] for kept in record["path_fields"]
    }


def two_towers(folder: Path, *edits: tuple[str, str]) -> Path:
    """The plan on the USGS grid with a second tower, and with texts replaced."""
    path = jacksboro_plan(folder)
    text = path.read_text(encoding="utf-8")
    text = text.replace(
        "[customers]",
        """[[tower]]
id = "knoll"
latitude = 36.62
longitude = -84.20
[[tower.sector]]
id = "knoll-1"
antenna = "panel"
radio = "access"
antenna_height_m = 20
azimuth_deg = 100
[customers]""",
    )
    for old, new in edits:
        assert old in text
        text = text.replace(old, new)
    path.write_text(text, encoding="utf-8")
    return path


KILLED_RUN = """
import os, signal, sys
from pathlib import Path
from planner.plan import read_plan
from planner.plan.run import run_plan

def kill(stage, share):
    if stage == "path field knoll" and share > 0.5:
        os.kill(os.getpid(), signal.SIGKILL)

run_plan(read_plan(Path(sys.argv[1])), folder=Path(sys.argv[2]), progress=kill)
"""


def test_a_killed_run_goes_on_where_it_was(tmp_path):
    """kill -9 within the second mast: the first mast's fields are reused, and every file is the
    same to the byte as from a run that nothing interrupted."""
    path = two_towers(tmp_path)
    killed, whole = tmp_path / "killed", tmp_path / "whole"
    ended = subprocess.run([sys.executable, "-c", KILLED_RUN, str(path), str(killed)], check=False)
    assert ended.returncode == -signal.SIGKILL
    assert len(list((killed / "path_fields").iterdir())) == 2
    assert not (killed / "run.json").exists()
    resumed = run_plan(read_plan(path), folder=killed)
    assert sources(resumed.record) == {
        ("ridge", 30.0): "reused",
        ("ridge", 24.0): "reused",
        ("knoll", 20.0): "computed",
    }
    names = [stage["name"] for stage in resumed.record["stages"]]
    assert "path field ridge reused" in names
    assert "path field knoll" in names
    uninterrupted = run_plan(read_plan(path), folder=whole)
    assert set(sources(uninterrupted.record).values()) == {"computed"}
    assert contents(killed) == contents(whole)


def test_only_what_decides_paths_computes_anew(tmp_path):
    """Aim, power and antenna reuse every field; one sector's height computes one; a damaged file
    is computed anew, with a warning in the record; other towers may come and go."""
    folder = tmp_path / "out"
    first = run_plan(read_plan(two_towers(tmp_path)), folder=folder).record
    aimed = (
        ("mechanical_downtilt_deg = 2", "mechanical_downtilt_deg = 6"),
        ("azimuth_deg = 220", "azimuth_deg = 10\nelectrical_downtilt_deg = 3"),
        ("transmit_power_dbm = 19", "transmit_power_dbm = 12"),
        ("azimuth_beamwidth_deg = 70", "azimuth_beamwidth_deg = 90"),
    )
    again = run_plan(read_plan(two_towers(tmp_path, *aimed)), folder=folder).record
    assert set(sources(again).values()) == {"reused"}
    assert again["counts"]["cells_served"] != first["counts"]["cells_served"]
    fresh = run_plan(read_plan(two_towers(tmp_path, *aimed)), folder=tmp_path / "fresh").record
    assert again["counts"] == fresh["counts"]
    assert contents(folder) == contents(tmp_path / "fresh")

    damaged = folder / first["path_fields"][0]["file"]
    content = damaged.read_bytes()
    damaged.write_bytes(content[:-9])
    raised = [("antenna_height_m = 20", "antenna_height_m = 21")]
    last = run_plan(read_plan(two_towers(tmp_path, *raised)), folder=folder).record
    assert sources(last) == {
        ("ridge", 30.0): "computed",
        ("ridge", 24.0): "reused",
        ("knoll", 21.0): "computed",
    }
    [warning] = [text for text in last["warnings"] if "path field" in text]
    assert str(damaged) in warning
    assert damaged.read_bytes() == content


def test_a_field_computed_elsewhere_is_used(tmp_path):
    """Two processes given the same task as JSON leave the one file that a run then finds."""
    plan = read_plan(two_towers(tmp_path))
    [task] = tower_tasks(plan, plan.towers[1]).values()
    folder = tmp_path / "out" / "path_fields"
    script = (
        "import sys; from pathlib import Path\n"
        "from planner.plan.path_tasks import PathFieldTask, run_task\n"
        "print(run_task(PathFieldTask.from_json(sys.argv[1]), Path(sys.argv[2])))"
    )
    command = [sys.executable, "-c", script, task.to_json(), str(folder)]
    workers = [subprocess.Popen(command, stdout=subprocess.PIPE, text=True) for _ in range(2)]
    told = {worker.communicate()[0].strip() for worker in workers}
    assert [worker.returncode for worker in workers] == [0, 0]
    assert {str(file) for file in folder.iterdir()} == told
    written = {file: file.stat().st_ino for file in folder.iterdir()}
    assert run_task(task, folder) == Path(told.pop())
    assert {file: file.stat().st_ino for file in folder.iterdir()} == written
    record = run_plan(plan).record
    assert sources(record)["knoll", 20.0] == "reused"
    assert list(sources(record).values()).count("computed") == 2


def test_path_fields_beyond_the_bound_are_removed_after_the_run(tmp_path, monkeypatch):
    """Those that the run has used stay."""
    monkeypatch.setattr(PathStore.prune, "__defaults__", (0,))
    run_plan(read_plan(two_towers(tmp_path)))
    last = run_plan(
        read_plan(two_towers(tmp_path, ("frequency_mhz = 5600", "frequency_mhz = 5800")))
    )
    kept = {file.name for file in (tmp_path / "out" / "path_fields").iterdir()}
    assert kept == {Path(field["file"]).name for field in last.record["path_fields"]}
    assert len(kept) == 3


@pytest.mark.skipif(not Path("/proc/self/smaps").exists(), reason="no /proc/self/smaps here")
def test_path_fields_take_memory_only_while_they_are_looked_at(tmp_path):
    """Between stages none of them is resident, however many there are."""
    resident: dict[tuple[str, float], int] = {}

    def look(stage: str, share: float) -> None:
        blocks = re.split(r"\n(?=[0-9a-f]+-[0-9a-f]+ )", Path("/proc/self/smaps").read_text())
        resident[stage, share] = sum(
            int(re.search(r"^Rss: +(\d+) kB", block, re.M)[1])
            for block in blocks
            if str(tmp_path) in block and ".pathfield" in block
        )

    run_plan(read_plan(two_towers(tmp_path)), progress=look)
    assert resident["layers", 0.0] == 0
    assert resident["write map", 0.0] == 0


def test_a_run_that_cannot_keep_path_fields_says_where(tmp_path):
    """Before the sweep, with the folder's name."""
    plan = read_plan(jacksboro_plan(tmp_path))
    (tmp_path / "out").mkdir()
    (tmp_path / "out" / "path_fields").write_bytes(b"in the way")
    stages = []
    with pytest.raises(OutputError) as caught:
        run_plan(plan, progress=lambda stage, share: stages.append((stage, share)))
    assert str(tmp_path / "out" / "path_fields") in str(caught.value)
    assert stages[-1] == ("path field ridge", 0.0)
    assert (tmp_path / "out" / "path_fields").read_bytes() == b"in the way"


@pytest.mark.parametrize("name", ["out/path_fields/customers.csv", "out/path_fields"])
def test_no_input_may_lie_where_path_fields_are_kept(tmp_path, name):
    """The plan is refused: that folder may be deleted at will."""
    path = jacksboro_plan(tmp_path)
    (tmp_path / name).parent.mkdir(parents=True, exist_ok=True)
    shutil.copy(tmp_path / "customers.csv", tmp_path / name)
    text = path.read_text(encoding="utf-8")
    path.write_text(text.replace('"customers.csv"', f'"{name}"'), encoding="utf-8")
    with pytest.raises(PlanError, match="overwrite the input"):
        read_plan(path)


def test_the_demo_site_of_the_package_is_the_one_in_the_source_tree():
    """`planner demo` runs a plan that can be read."""
    assert read_plan(demo_plan_path()).name


def test_a_customer_is_checked_as_on_its_own(harrow):
    """A row of the list does not depend on the other rows."""
    plan = read_plan(SITES / "harrow_vale" / "plan.toml")
    from planner.io.customer_files import read_customers

    customers = read_customers(plan.customers_file)
    places = [(tower.latitude, tower.longitude) for tower in plan.towers]
    terrain = read_terrain(plan.terrain, places, plan.radius_m)
    alone = check_customers(
        terrain,
        plan.towers,
        plan.patterns,
        plan.terminal,
        customers[17:18],
        radius_m=plan.radius_m,
        k_factor=plan.k_factor,
        polarization=plan.polarization,
        obstacle_clearing_m=plan.obstacle_clearing_m,
    )[0]
    row = pd.read_csv(harrow.folder / "customers.csv").iloc[17]
    assert row["received_signal_dbm"] == pytest.approx(alone.received_signal_dbm, abs=0.006)
    assert row["bearing_to_tower_deg"] == pytest.approx(alone.bearing_to_tower_deg, abs=0.006)


@pytest.mark.parametrize(
    "name", ["bigtujunga.tif", "srtm_oetztal.tif", "N33E035.hgt", "N57E011.hgt"]
)
def test_real_rasters_beside_the_checkout(name, tmp_path):
    """Each shared raster gives a run: projected, degrees without nodata tag, bathymetry, coast."""
    raster = Path(__file__).parents[2] / "shared" / "terrain" / name
    if not raster.is_file():
        pytest.skip(f"no {name} beside the checkout")
    shutil.copy(raster, tmp_path / name)
    with rasterio.open(raster) as dataset:
        array = dataset.read(1)
        row, col = np.unravel_index(np.argmax(array), array.shape)
        row = min(max(int(row), 60), array.shape[0] - 60)
        col = min(max(int(col), 60), array.shape[1] - 60)
        x, y = dataset.xy(row, col)
        lon, lat = rasterio.warp.transform(dataset.crs, "EPSG:4326", [x], [y])
    path = jacksboro_plan(tmp_path, radius_km=5)
    text = path.read_text(encoding="utf-8").replace("jacksboro.tif", name)
    text = text.replace("latitude = 36.58", f"latitude = {lat[0]}")
    text = text.replace("longitude = -84.25", f"longitude = {lon[0]}")
    path.write_text(text, encoding="utf-8")
    result = run_plan(read_plan(path))
    assert result.record["counts"]["cells_computed"] > 3000
    assert result.record["counts"]["customers_not_computed"] == 3
