"""Time, CPU time, size and peak memory of writing one layer, by way of compressing it.

    python tests/benchmarks/write_layers.py 6000

The layer is the path loss of one mast over rolling ground, and the classes of line of sight that
belong to it. Each setting runs in a process of its own that reads the layer from disk band by band,
so that its peak memory is that of Python, GDAL and the writing.
"""

import argparse
import hashlib
import json
import subprocess
import sys
import tempfile
import time
from pathlib import Path
from typing import Any

import numpy as np
from pyproj import CRS
from rasterio.transform import from_origin
from rolling_terrain import CELL_M, EPSG, rolling_ground

from planner.coverage import line_of_sight_class
from planner.io import geotiff
from planner.plan.outputs import row_bands, stored_db
from planner.sweep import path_field
from planner.terrain import Grid, Terrain

LOSS, SIGHT = "loss", "sight"
# layer, rounded, what differs from the setting in use
SETTINGS: tuple[tuple[str, bool, dict[str, Any]], ...] = (
    (LOSS, False, {}),
    (LOSS, False, {"predictor": 2}),
    (LOSS, False, {"zlevel": 6}),
    (LOSS, False, {"compress": "zstd", "zstd_level": 1}),
    (LOSS, False, {"compress": "lzw"}),
    (LOSS, True, {}),
    (LOSS, True, {"num_threads": 1}),
    (LOSS, True, {"predictor": 2}),
    (LOSS, True, {"zlevel": 6}),
    (LOSS, True, {"compress": "zstd", "zstd_level": 1}),
    (LOSS, True, {"compress": "lzw"}),
    (SIGHT, False, {}),
    (SIGHT, False, {"zlevel": 1}),
    (SIGHT, False, {"zlevel": 1, "predictor": 2}),
    (SIGHT, False, {"compress": "lzw"}),
)


def made_grid(cells: int) -> Grid:
    """The grid of the layers."""
    transform = from_origin(470_000.0, 4_930_000.0, CELL_M, CELL_M)
    return Grid(crs=CRS.from_epsg(EPSG), transform=transform, rows=cells, cols=cells)


def make_layers(cells: int, folder: Path) -> None:
    """The layers as plain files of numbers, row by row."""
    grid = made_grid(cells)
    terrain = Terrain(grid=grid, ground_elevation_m=rolling_ground(cells))
    middle = 0.5 * cells
    latitude, longitude = grid.to_geographic(*grid.easting_northing(middle, middle))
    field = path_field(
        terrain,
        latitude=float(latitude),
        longitude=float(longitude),
        antenna_height_m=30.0,
        receiver_height_m=5.0,
        frequency_mhz=5600.0,
        radius_m=0.49 * cells * CELL_M,
        k_factor=4.0 / 3.0,
        polarization="vertical",
    )
    loss_db = np.full((cells, cells), np.nan, dtype=np.float32)
    ratio = loss_db.copy()
    rows, cols = field.path_loss_db.shape
    window = (
        slice(field.row_start, field.row_start + rows),
        slice(field.col_start, field.col_start + cols),
    )
    loss_db[window] = field.path_loss_db
    ratio[window] = field.fresnel_clearance_ratio
    loss_db.tofile(folder / LOSS)
    line_of_sight_class(ratio).tofile(folder / SIGHT)


def peak_bytes() -> int:
    """Of this process alone; what getrusage tells may be the parent's."""
    status = Path("/proc/self/status").read_text(encoding="ascii")
    return 1024 * int(status.split("VmHWM:")[1].split()[0])


def write_one(job: dict[str, Any]) -> None:
    """Write one layer and print what it took, as JSON."""
    plain = geotiff._compression
    geotiff._compression = lambda kind: {**plain(kind), **job["setting"]}
    cells, source = job["cells"], Path(job["folder"]) / job["layer"]
    dtype = np.dtype(np.uint8 if job["layer"] == SIGHT else np.float32)
    nodata = 0 if job["layer"] == SIGHT else np.nan
    path = Path(job["folder"]) / "layer.tif"
    start, start_cpu = time.perf_counter(), time.process_time()
    with (
        source.open("rb") as file,
        geotiff.open_layer(
            path, made_grid(cells), dtype=dtype, description="", unit="", nodata=nodata, tags={}
        ) as layer,
    ):
        for first, stop in row_bands(cells):
            band = np.fromfile(file, dtype, (stop - first) * cells).reshape(-1, cells)
            layer.write_rows(first, stored_db(band) if job["rounded"] else band)
    print(
        json.dumps(
            {
                "seconds": time.perf_counter() - start,
                "cpu_seconds": time.process_time() - start_cpu,
                "bytes": path.stat().st_size,
                "peak_bytes": peak_bytes(),
                "sha256": hashlib.sha256(path.read_bytes()).hexdigest(),
            }
        )
    )


def main() -> None:
    """Measure every setting."""
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("cells", type=int, nargs="?", default=2000, help="a side")
    parser.add_argument("--job", help=argparse.SUPPRESS)
    arguments = parser.parse_args()
    if arguments.job:
        write_one(json.loads(arguments.job))
        return
    with tempfile.TemporaryDirectory() as name:
        make_layers(arguments.cells, Path(name))
        print("layer           seconds    CPU s       MB  peak MB  bytes   setting")
        for layer, rounded, setting in SETTINGS:
            job = {
                "cells": arguments.cells,
                "folder": name,
                "layer": layer,
                "rounded": rounded,
                "setting": setting,
            }
            command = [sys.executable, __file__, "--job", json.dumps(job)]
            done = subprocess.run(command, capture_output=True, text=True, check=True)
            found = json.loads(done.stdout)
            print(
                f"{layer + (' rounded' if rounded else ''):14}  {found['seconds']:7.2f}  "
                f"{found['cpu_seconds']:7.2f}  {found['bytes'] / 1e6:7.2f}  "
                f"{found['peak_bytes'] / 1e6:7.0f}  {found['sha256'][:6]}  {setting or 'in use'}",
                flush=True,
            )


if __name__ == "__main__":
    main()
