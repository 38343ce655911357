"""What a run would compute, told from metadata: counts against the sweep, and how they grow."""

from dataclasses import asdict, replace
from pathlib import Path

import numpy as np
import pytest
import rasterio
from places import latitude_longitude, plain
from plans import changed, write_plan
from rasterio.crs import CRS

from planner.errors import TerrainError
from planner.plan import Plan, estimate, read_plan
from planner.plan.estimate import run_estimate
from planner.sweep import OUT_OF_RANGE, path_field

LATITUDE, LONGITUDE = latitude_longitude(plain(121, 121), 40.3, 80.6)
NORTH_EAST = f"latitude = {LATITUDE!r}\nlongitude = {LONGITUDE!r}"
PLACE = "latitude = -46.2041\nlongitude = -121.4122"


def site(folder: Path, *edits: tuple[str, str], radius_km: float = 1.5) -> Plan:
    """The plan on a flat raster of 121 x 121 cells of 50 m, its tower in the upper right part."""
    path = write_plan(
        folder,
        changed((PLACE, NORTH_EAST), ("radius_km = 10", f"radius_km = {radius_km}"), *edits),
    )
    terrain = plain(121, 121)
    with rasterio.open(
        folder / "terrain.tif",
        "w",
        driver="GTiff",
        width=terrain.grid.cols,
        height=terrain.grid.rows,
        count=1,
        dtype="float32",
        crs=CRS.from_epsg(32710),
        transform=terrain.grid.transform,
    ) as raster:
        raster.write(terrain.ground_elevation_m, 1)
    return read_plan(path)


@pytest.mark.parametrize("radius_km", [0.5, 1.5, 4.0])
def test_cells_are_those_of_the_sweep(tmp_path: Path, radius_km: float) -> None:
    """The count within the radius is that of the path field, also where the grid cuts the circle.

    The sweep measures each cell's distance with the change of scale over the area; cells on the
    very edge may differ: at most 1 in 1,000.
    """
    plan = site(tmp_path, radius_km=radius_km)
    [tower] = plan.towers
    terrain = plain(121, 121)
    field = path_field(
        terrain,
        latitude=tower.latitude,
        longitude=tower.longitude,
        antenna_height_m=30.0,
        receiver_height_m=5.0,
        frequency_mhz=5600.0,
        radius_m=plan.radius_m,
        k_factor=plan.k_factor,
        polarization=plan.polarization,
    )
    swept = int(np.count_nonzero(field.status != OUT_OF_RANGE))
    [counted] = run_estimate(plan).fields
    assert counted.cells == pytest.approx(swept, rel=1e-3)
    assert counted.window_cells <= field.status.size
    if radius_km == 0.5:  # whole circle: pi r^2 in cells of 50 m
        assert counted.cells == pytest.approx(np.pi * 10.0**2, rel=0.05)
    if radius_km == 4.0:
        assert counted.cells < 121 * 121


def test_facts_of_the_grid(tmp_path: Path) -> None:
    """The raster that can be used as it is gives the grid; another cell size resamples it."""
    as_it_is = run_estimate(site(tmp_path))
    assert (as_it_is.grid, as_it_is.unresampled, as_it_is.cell_m) == ("EPSG:32710", True, 50.0)
    assert (as_it_is.radius_m, as_it_is.towers, as_it_is.sectors) == (1500.0, 1, 2)
    resampled = run_estimate(site(tmp_path, ("[antenna.panel", "cell_m = 25\n[antenna.panel")))
    assert (resampled.unresampled, resampled.cell_m) == (False, 25.0)
    assert resampled.cells == pytest.approx(4 * as_it_is.cells, rel=0.02)


def test_one_field_for_each_height_and_frequency(tmp_path: Path) -> None:
    """Sectors that share mast, height and frequency share a path field; others do not."""
    [shared] = run_estimate(site(tmp_path)).fields
    assert (shared.tower_id, shared.sectors) == ("west", 2)
    assert (shared.antenna_height_m, shared.frequency_mhz) == (30.0, 5600.0)
    two_heights = site(
        tmp_path,
        ("antenna_height_m = 30\nazimuth_deg = 140", "antenna_height_m = 25\nazimuth_deg = 140"),
    )
    apart = run_estimate(two_heights)
    assert [(field.antenna_height_m, field.sectors) for field in apart.fields] == [
        (30.0, 1),
        (25.0, 1),
    ]
    assert apart.cells == 2 * shared.cells


def test_towers_without_sectors_cost_nothing(tmp_path: Path) -> None:
    """A tower whose sectors are off is not computed, so it may even lie off the terrain."""
    bare = '[[tower]]\nid = "bare"\nlatitude = 10\nlongitude = 10\n\n[customers]'
    with_bare = run_estimate(site(tmp_path, ("[customers]", bare)))
    assert with_bare == run_estimate(site(tmp_path))


def test_time_counts_each_kind_of_work(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """With a rate of one cell a second the time is the number of cells of that kind of work."""
    plan = site(tmp_path)
    usual = run_estimate(plan)
    grid_cells = usual.rows * usual.cols
    for rate, plan_at_rate, cells in (
        ("SWEEP_CELLS_PER_SECOND", plan, usual.cells),
        ("HEIGHT_CELLS_PER_SECOND", plan, 0),
        ("LAYER_CELLS_PER_SECOND", plan, 2 * usual.cells),
        ("READ_CELLS_PER_SECOND", plan, grid_cells),
        ("RESAMPLED_CELLS_PER_SECOND", plan, 0),
        ("WRITTEN_CELLS_PER_SECOND", plan, 4 * grid_cells),
        ("WRITTEN_CELLS_PER_SECOND", replace(plan, layers=("best_server",)), grid_cells),
    ):
        with monkeypatch.context() as patch:
            patch.setattr(estimate, rate, 1.0)
            seconds = run_estimate(plan_at_rate).seconds
        assert seconds == pytest.approx(cells + usual.seconds, abs=0.2), rate


def test_memory_counts_grid_and_windows(tmp_path: Path) -> None:
    """Memory grows with the grid, with the windows of the path fields and with obstacles."""
    plan = site(tmp_path)
    usual, wider = run_estimate(plan), run_estimate(site(tmp_path, radius_km=2.5))
    grid_cells = wider.rows * wider.cols - usual.rows * usual.cols
    windows = wider.fields[0].window_cells - usual.fields[0].window_cells
    assert grid_cells > 0
    assert wider.memory_bytes - usual.memory_bytes == (
        grid_cells * estimate.GRID_BYTES_PER_CELL + windows * estimate.FIELD_BYTES_PER_CELL
    )
    terrain = replace(plan.terrain, obstacles=tmp_path / "terrain.tif")
    with_obstacles = run_estimate(replace(plan, terrain=terrain))
    assert with_obstacles.memory_bytes - usual.memory_bytes == 4 * usual.rows * usual.cols


def test_needed_heights_take_time_and_memory(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    """A layer that is asked for is counted as another walk over the cells."""
    plan = site(tmp_path)
    asking = replace(plan, layers=(*plan.layers, "needed_height"))
    usual, more = run_estimate(plan), run_estimate(asking)
    assert more.memory_bytes - usual.memory_bytes == (
        usual.rows * usual.cols * estimate.HEIGHT_BYTES_PER_CELL
    )
    monkeypatch.setattr(estimate, "HEIGHT_CELLS_PER_SECOND", 1.0)
    assert run_estimate(asking).seconds == pytest.approx(usual.cells + usual.seconds, abs=0.3)


def test_masts_are_in_memory_one_at_a_time(tmp_path: Path) -> None:
    """Two path fields of a tower take no more than one."""
    one = run_estimate(site(tmp_path))
    two = run_estimate(
        site(
            tmp_path,
            (
                "antenna_height_m = 30\nazimuth_deg = 140",
                "antenna_height_m = 25\nazimuth_deg = 140",
            ),
        )
    )
    assert len(two.fields) == 2
    assert two.memory_bytes == one.memory_bytes


def test_plain_data(tmp_path: Path) -> None:
    """The estimate is plain data that prints as JSON."""
    record = asdict(run_estimate(site(tmp_path)))
    assert record["fields"][0]["tower_id"] == "west"
    assert isinstance(record["seconds"], float)
    assert isinstance(record["memory_bytes"], int)


def test_tower_off_the_terrain(tmp_path: Path) -> None:
    """What reading the terrain would refuse is refused here, with the tower's id."""
    plan = site(tmp_path, (NORTH_EAST, PLACE))
    with pytest.raises(TerrainError, match=r"tower west .*outside the terrain rasters"):
        run_estimate(plan)
