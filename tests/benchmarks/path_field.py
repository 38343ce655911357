"""The path field against GDAL's visibility map, its growth with size, its memory, its compile time.

    python tests/benchmarks/path_field.py ratio      alternately with gdal_viewshed, five each
    python tests/benchmarks/path_field.py growth     2,000 to 8,000 cells a side
    python tests/benchmarks/path_field.py memory     peak memory of the path field, and of a run
    python tests/benchmarks/path_field.py compile    first call, cold and with compiled code on disk

5.6 GHz, mast 40 m on the highest cell in the middle, receiver 5 m, cells of 10 m, radius half the
width. Seconds of a shared machine say little: look at the ratios and their spread.
"""

import argparse
import os
import resource
import shutil
import statistics
import subprocess
import sys
import tempfile
import time
from pathlib import Path

import numba
from pyproj import Transformer
from rolling_terrain import CELL_M, mast_easting_northing, write_rolling_terrain

from planner.io.terrain_files import TerrainSource, read_terrain
from planner.sweep import COMPUTED, PathField, load_kernels, path_field

HEIGHT_M, RECEIVER_M, FREQUENCY_MHZ = 40.0, 5.0, 5600.0


def raster(folder: Path, cells: int) -> Path:
    path = folder / f"rolling_{cells}.tif"
    if not path.exists():
        write_rolling_terrain(path, cells)
    return path


def stage(path: Path, cells: int) -> tuple[float, float, PathField]:
    """(seconds of reading, seconds of the sweep, the field)."""
    east, north = mast_easting_northing(cells)
    to_degrees = Transformer.from_crs(32710, 4326, always_xy=True)
    longitude, latitude = to_degrees.transform(east, north)
    radius_m = cells * CELL_M / 2.0
    start = time.perf_counter()
    terrain = read_terrain(
        TerrainSource(rasters=(path,)), [(latitude, longitude)], radius_m, names=["mast"]
    )
    read = time.perf_counter()
    field = path_field(
        terrain,
        latitude=latitude,
        longitude=longitude,
        antenna_height_m=HEIGHT_M,
        receiver_height_m=RECEIVER_M,
        frequency_mhz=FREQUENCY_MHZ,
        radius_m=radius_m,
        k_factor=4.0 / 3.0,
        polarization="vertical",
    )
    return read - start, time.perf_counter() - read, field


def viewshed_seconds(path: Path, cells: int) -> float:
    east, north = mast_easting_northing(cells)
    with tempfile.TemporaryDirectory() as folder:
        command = ["gdal_viewshed", "-q", "-md", str(cells * CELL_M / 2.0)]
        command += ["-ox", str(east), "-oy", str(north)]
        command += ["-oz", str(HEIGHT_M), "-tz", str(RECEIVER_M)]
        start = time.perf_counter()
        subprocess.run([*command, str(path), f"{folder}/seen.tif"], check=True)
        return time.perf_counter() - start


def ratio(folder: Path, cells: int, repeats: int) -> None:
    path = raster(folder, cells)
    stage(path, cells)
    viewshed_seconds(path, cells)
    ours, theirs, reading = [], [], []
    for _ in range(repeats):
        read_s, sweep_s, field = stage(path, cells)
        ours.append(read_s + sweep_s)
        reading.append(read_s)
        theirs.append(viewshed_seconds(path, cells))
        print(f"read {read_s:.2f} s, sweep {sweep_s:.2f} s, gdal_viewshed {theirs[-1]:.2f} s")
    pairs = [a / b for a, b in zip(ours, theirs, strict=True)]
    computed = int((field.status == COMPUTED).sum())
    print(f"{computed} cells computed of {field.status.size}")
    print(
        f"path-field stage {statistics.median(ours):.2f} s (reading "
        f"{statistics.median(reading):.2f}), gdal_viewshed "
        f"{statistics.median(theirs):.2f} s; ratio of medians "
        f"{statistics.median(ours) / statistics.median(theirs):.2f}, pair by pair "
        f"{min(pairs):.2f} to {max(pairs):.2f}"
    )


def growth(folder: Path, repeats: int) -> None:
    for cells in (2000, 4000, 6000, 8000):
        path = raster(folder, cells)
        best_wall, best_cpu = 1e9, 1e9
        for _ in range(repeats + 1):
            cpu = time.process_time()
            _, sweep_s, field = stage(path, cells)
            best_cpu = min(best_cpu, time.process_time() - cpu)
            best_wall = min(best_wall, sweep_s)
        computed = int((field.status == COMPUTED).sum())
        print(
            f"{cells} x {cells}: {computed} cells, sweep {best_wall:.2f} s, "
            f"{best_wall / computed * 1e9:.0f} ns a cell of the clock, "
            f"{best_cpu / computed * 1e9:.0f} ns of processor with reading"
        )


def memory(folder: Path, cells: int) -> None:
    if os.environ.get("ONLY_THE_FIELD"):
        stage(raster(folder, cells), cells)
        peak = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss * 1024
        print(f"peak memory of a process that computes the path field: {peak / 1e9:.2f} GB")
        return
    raster(folder, cells)
    command = [sys.executable, __file__, "memory", "--folder", str(folder), "--cells", str(cells)]
    subprocess.run(command, check=True, env={**os.environ, "ONLY_THE_FIELD": "1"})
    plan = folder / "plan.toml"
    plan.write_text(_plan(folder, cells), encoding="utf-8")
    shutil.rmtree(folder / "out", ignore_errors=True)
    command = [sys.executable, "-c", "from planner.cli import main; main()", "run", str(plan)]
    for what in ("computed", "reused"):
        start = time.perf_counter()
        subprocess.run(command, check=True, capture_output=True)
        peak = resource.getrusage(resource.RUSAGE_CHILDREN).ru_maxrss * 1024
        print(
            f"whole run, path field {what}: {time.perf_counter() - start:.1f} s; largest peak "
            f"so far {peak / 1e9:.2f} GB"
        )


def _plan(folder: Path, cells: int) -> str:
    east, north = mast_easting_northing(cells)
    longitude, latitude = Transformer.from_crs(32710, 4326, always_xy=True).transform(east, north)
    sectors = "".join(
        f"""
[[tower.sector]]
id = "mast-{number}"
antenna = "panel"
radio = "access"
antenna_height_m = 40
azimuth_deg = {azimuth}
mechanical_downtilt_deg = 2
"""
        for number, azimuth in enumerate((0, 120, 240), start=1)
    )
    return f"""
name = "Rolling terrain"

[terrain]
rasters = ["rolling_{cells}.tif"]

[model]
radius_km = {cells * CELL_M / 2000.0}

[antenna.panel]
formula = "TR 36.814"
gain_dbi = 17
azimuth_beamwidth_deg = 90
elevation_beamwidth_deg = 7

[radio.access]
frequency_mhz = 5600
channel_width_mhz = 20
transmit_power_dbm = 20
noise_figure_db = 5

[terminal]
antenna_height_m = 5
antenna_gain_dbi = 23
service_threshold_dbm = -80

[[tower]]
id = "mast"
latitude = {latitude:.8f}
longitude = {longitude:.8f}
{sectors}
"""


def compile_times() -> None:
    script = (
        "import time; t = time.perf_counter(); from planner.sweep import load_kernels; "
        "u = time.perf_counter(); load_kernels(); v = time.perf_counter(); "
        "print(f'import {u - t:.2f} s, sweep ready after {v - u:.2f} s')"
    )
    with tempfile.TemporaryDirectory() as folder:
        for what in ("cold", "compiled code on disk", "compiled code on disk"):
            environment = {**os.environ, "NUMBA_CACHE_DIR": folder}
            result = subprocess.run(
                [sys.executable, "-c", script], env=environment, capture_output=True, text=True
            )
            print(f"{what}: {result.stdout.strip() or result.stderr}")


def main() -> None:
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    parser.add_argument("what", choices=["ratio", "growth", "memory", "compile"])
    parser.add_argument("--cells", type=int, default=6000)
    parser.add_argument("--repeats", type=int, default=5)
    parser.add_argument("--folder", type=Path, default=Path(tempfile.gettempdir()) / "rolling")
    options = parser.parse_args()
    options.folder.mkdir(exist_ok=True)
    processor = "unknown processor"
    for line in Path("/proc/cpuinfo").read_text(encoding="utf-8").splitlines():
        if line.startswith("model name"):
            processor = line.split(":", 1)[1].strip()
    print(f"{processor}, {os.cpu_count()} cores, {numba.get_num_threads()} threads")
    if options.what == "ratio":
        print(
            subprocess.run(["gdalinfo", "--version"], capture_output=True, text=True).stdout.strip()
        )
        load_kernels()
        ratio(options.folder, options.cells, options.repeats)
    elif options.what == "growth":
        load_kernels()
        growth(options.folder, options.repeats)
    elif options.what == "memory":
        memory(options.folder, options.cells)
    else:
        compile_times()


if __name__ == "__main__":
    main()
