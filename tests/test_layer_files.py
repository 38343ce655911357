"""Layers of a plan as files: values, classes, rounding; no whole layer is ever in memory."""

import tracemalloc
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest
import rasterio
from affine import Affine
from places import PLAIN_CRS, plain
from plans import write_plan

from planner.coverage import CellCounts, Coverage
from planner.geodesy import local_frame
from planner.handout.map_cells import MapCells
from planner.handout.mercator import mercator_view
from planner.plan import read_plan
from planner.plan.outputs import CoverageWriters, row_bands, stored_db, write_path_loss
from planner.plan.schema import ALL_LAYERS
from planner.sweep import COMPUTED, PathField
from planner.terrain import Grid

RATIOS = [np.nan, -0.2, 0.0, 0.01, 0.59, 0.6, 0.99, 1.0]
CLASSES = [0, 1, 1, 2, 2, 3, 3, 4]
NO_COUNTS = CellCounts(
    cells=0,
    out_of_range=0,
    in_range=0,
    computed=0,
    no_data=0,
    crosses_hole=0,
    served=0,
    served_by_sector=(0, 0),
)


def made_grid(rows: int, cols: int) -> Grid:
    transform = Affine(50.0, 0.0, 480_000.0, 0.0, -50.0, 4_900_000.0)
    return Grid(crs=PLAIN_CRS, transform=transform, rows=rows, cols=cols)


def made_coverage(rows: int, cols: int) -> Coverage:
    """Invented values; every row of the clearance holds the ratios in turn."""
    rng = np.random.default_rng(5)
    signal = rng.uniform(-120.0, -50.0, (rows, cols)).astype(np.float32)
    signal[0, :3] = np.nan, -75.0, np.nextafter(np.float32(-75.0), np.float32(-100.0))
    return Coverage(
        received_signal_dbm=signal,
        best_server=rng.integers(-1, 3, (rows, cols)).astype(np.int16),
        server_margin_db=rng.uniform(-5.0, 30.0, (rows, cols)).astype(np.float32),
        fresnel_clearance_ratio=np.resize(np.array(RATIOS, dtype=np.float32), (rows, cols)),
        status=np.full((rows, cols), COMPUTED, dtype=np.uint8),
        counts=NO_COUNTS,
    )


def made_plan(folder: Path, *layers: str):
    return replace(read_plan(write_plan(folder)), layers=layers)


def written(folder: Path, grid: Grid, *layers: str) -> Coverage:
    """Write an invented coverage's layers in bands of 256 rows."""
    folder.mkdir(exist_ok=True)
    plan = made_plan(folder, *layers)
    coverage = made_coverage(grid.rows, grid.cols)
    with CoverageWriters(folder / "out", plan, grid, plan.sectors) as writers:
        for start in range(0, grid.rows, 256):
            writers.write_rows(start, part_of(coverage, start, start + 256))
        writers.colour_sectors(["#0072b2", "#e69f00"])
    return coverage


def part_of(coverage: Coverage, start: int, stop: int) -> Coverage:
    return Coverage(
        received_signal_dbm=coverage.received_signal_dbm[start:stop],
        best_server=coverage.best_server[start:stop],
        server_margin_db=coverage.server_margin_db[start:stop],
        fresnel_clearance_ratio=coverage.fresnel_clearance_ratio[start:stop],
        status=coverage.status[start:stop],
        counts=NO_COUNTS,
    )


def test_line_of_sight_has_five_classes_with_names_and_one_hue(tmp_path):
    """Class by class as the clearance says; 0 is no data; from pale to deep, dark last."""
    written(tmp_path, made_grid(300, 320), "line_of_sight")
    with rasterio.open(tmp_path / "out" / "line_of_sight.tif") as layer:
        np.testing.assert_array_equal(layer.read(1), np.resize(CLASSES, (300, 320)))
        assert layer.dtypes == ("uint8",)
        assert layer.nodata == 0
        tags, colours = layer.tags(), layer.colormap(1)
    assert [tags[f"CATEGORY_{value}"] for value in range(5)] == [
        "no path is known",
        "blocked",
        "line free, less than 60 % of the first Fresnel zone",
        "60 % of the first Fresnel zone free",
        "first Fresnel zone free",
    ]
    assert colours[0][3] == 0
    assert [colours[value][3] for value in range(1, 5)] == [255] * 4
    lightness = [sum(colours[value][:3]) for value in range(1, 5)]
    assert lightness == sorted(lightness, reverse=True)
    assert len(set(lightness)) == 4


def test_fresnel_clearance_is_the_exact_ratio(tmp_path):
    """Not rounded, unit 1, NaN for no data."""
    coverage = written(tmp_path, made_grid(300, 320), "fresnel_clearance")
    with rasterio.open(tmp_path / "out" / "fresnel_clearance.tif") as layer:
        np.testing.assert_array_equal(layer.read(1), coverage.fresnel_clearance_ratio)
        assert (layer.dtypes, layer.units) == (("float32",), ("1",))
        assert np.isnan(layer.nodata)
        assert "ROUNDING" not in layer.tags()


def test_only_layers_of_the_plan_are_written(tmp_path):
    """Nothing is opened for the others."""
    written(tmp_path, made_grid(20, 30), "best_server")
    found = sorted(file.name for file in (tmp_path / "out").iterdir())
    assert found == ["best_server.tif", "best_server.tif.aux.xml"]
    with rasterio.open(tmp_path / "out" / "best_server.tif") as layer:
        assert layer.tags()["CATEGORY_2"] == "west-2"
        assert layer.colormap(1)[2] == (230, 159, 0, 255)


def test_decibels_in_files_keep_their_side_of_a_threshold(tmp_path):
    """At most 1/256 dB below what was computed; -75 dBm stays, the next number below is below."""
    coverage = written(tmp_path, made_grid(300, 320), "received_signal", "server_margin")
    for name, exact in (
        ("received_signal", coverage.received_signal_dbm),
        ("server_margin", coverage.server_margin_db),
    ):
        with rasterio.open(tmp_path / "out" / f"{name}.tif") as layer:
            stored = layer.read(1)
            assert "1/256 dB" in layer.tags()["ROUNDING"]
        np.testing.assert_array_equal(np.isnan(stored), np.isnan(exact))
        known = ~np.isnan(exact)
        below = exact[known].astype(float) - stored[known]
        assert below.min() >= 0.0
        assert 0.003 < below.max() < 1.0 / 256.0
        for limit in (-75.0, -82.5, 3.0):
            np.testing.assert_array_equal(exact >= limit, stored >= limit)


def test_an_exception_between_bands_leaves_no_layer(tmp_path):
    """Of all layers of a plan, none is left half-written."""
    grid = made_grid(300, 320)
    plan = made_plan(tmp_path, *ALL_LAYERS)

    def interrupted():
        with CoverageWriters(tmp_path / "out", plan, grid, plan.sectors) as writers:
            writers.write_rows(0, part_of(made_coverage(300, 320), 0, 256))
            raise KeyboardInterrupt

    with pytest.raises(KeyboardInterrupt):
        interrupted()
    assert list((tmp_path / "out").iterdir()) == []


def made_field(grid: Grid, rows: int, cols: int, row_start: int, col_start: int) -> PathField:
    """A window of invented losses; the other arrays are not looked at."""
    loss = np.arange(rows * cols, dtype=np.float32).reshape(rows, cols) / np.float32(1000.0)
    return PathField(
        row_start=row_start,
        col_start=col_start,
        mast_row=row_start + 0.5 * rows,
        mast_col=col_start + 0.5 * cols,
        mast_ground_m=0.0,
        frame=local_frame(grid.crs, 500_000.0, 4_880_000.0),
        cell_m=grid.cell_m,
        frequency_mhz=5600.0,
        antenna_height_m=30.0,
        receiver_height_m=5.0,
        radius_m=1000.0,
        path_loss_db=loss,
        departure_elevation_deg=loss,
        fresnel_clearance_ratio=loss,
        status=np.zeros((rows, cols), dtype=np.uint8),
    )


def test_path_loss_lies_where_its_window_lies(tmp_path):
    """A window across two bands of rows; NaN around it."""
    terrain = plain(1500, 200)
    field = made_field(terrain.grid, 700, 90, 600, 70)
    plan = made_plan(tmp_path, "path_loss")
    write_path_loss(tmp_path, "loss.tif", plan, terrain, field)
    expected = np.full((1500, 200), np.nan, dtype=np.float32)
    expected[600:1300, 70:160] = stored_db(field.path_loss_db)
    with rasterio.open(tmp_path / "loss.tif") as layer:
        np.testing.assert_array_equal(expected, layer.read(1))


def test_writing_makes_no_array_of_the_whole_grid(tmp_path):
    """All layers and the map's cells of 3,000 x 3,000 cells: less than two float32 layers."""
    side = 3000
    grid = made_grid(side, side)
    plan = made_plan(tmp_path, *ALL_LAYERS)
    terrain = plain(side, side)
    field = made_field(grid, side, side, 0, 0)
    band = made_coverage(1024, side)
    tracemalloc.start()
    try:
        cells = MapCells(mercator_view(grid, 1000), grid)
        with CoverageWriters(tmp_path / "out", plan, grid, plan.sectors) as writers:
            for start, stop in row_bands(side):
                part = part_of(band, 0, stop - start)
                writers.write_rows(start, part)
                cells.take_rows(start, part)
        write_path_loss(tmp_path / "out", "path_loss.tif", plan, terrain, field)
        peak = tracemalloc.get_traced_memory()[1]
    finally:
        tracemalloc.stop()
    assert peak < 2 * 4 * side * side
