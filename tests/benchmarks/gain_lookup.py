"""Time of gain lookups over 28 million cells with stored departure angles, by pattern.

    python tests/benchmarks/gain_lookup.py [--millions 28]

Each cell has its place and the stored elevation angle at which its path leaves the mast; the kernel
is made of the same pieces as that of the layers. CPU time is summed over all threads and the least
of several runs counts; wall time is that of the quickest run.
"""

import argparse
import time
from collections.abc import Iterator

import numpy as np
from known_patterns import array_gains, cuts_of
from numba import get_num_threads, prange
from numpy.typing import NDArray

from planner.antenna import Pattern, formula_pattern, gain_table
from planner.antenna.lookup import vector_gain_dbi
from planner.coverage.kernels import _directions
from planner.physics._jit import parallel

CELL_M = 10.0


@parallel
def gains(
    elevation_deg: NDArray[np.float32],
    levels: NDArray[np.uint32],
    nodes_per_row: int,
    azimuth_places: NDArray[np.uint32],
    elevation_places: NDArray[np.uint32],
    peak_dbi: float,
    tilt_cosine: float,
    tilt_sine: float,
    gain_dbi: NDArray[np.float32],
) -> None:
    """Gain towards each cell of a square with the mast in its middle, row by row."""
    cells = elevation_deg.shape[0]
    for row in prange(cells):
        east_m = (np.arange(cells).astype(np.float32) - np.float32(0.5 * cells - 0.3)) * np.float32(
            CELL_M
        )
        north_m = np.float32((0.5 * cells - 0.2 - row) * CELL_M)
        loss_db, north = np.empty(cells, np.float32), np.empty(cells, np.float32)
        east, up = np.empty(cells, np.float32), np.empty(cells, np.float32)
        none = np.float32(0.0)
        _directions(
            elevation_deg[row], elevation_deg[row], east_m, north_m, none, none, loss_db, north,
            east, up,
        )  # fmt: skip
        for i in range(cells):
            gain_dbi[row, i] = vector_gain_dbi(
                levels, nodes_per_row, azimuth_places, elevation_places, peak_dbi, tilt_cosine,
                tilt_sine, north[i], east[i], up[i],
            )  # fmt: skip


def patterns() -> Iterator[tuple[str, Pattern]]:
    beams = {"azimuth_beamwidth_deg": 90.0, "elevation_beamwidth_deg": 7.0}
    common = {"frequency_mhz": 5600.0, "gain_dbi": 17.0}
    yield "F.1336-5", formula_pattern("panel", "F.1336-5", **common, **beams)
    yield "TR 36.814", formula_pattern("panel", "TR 36.814", **common, **beams)
    dish = common | {"gain_dbi": 28.0, "diameter_m": 0.6}
    yield "F.699, 0.6 m", formula_pattern("dish", "F.699", **dish)
    for columns in (1, 4, 8):
        array = common | {"gain_dbi": 20.0, "rows": 8, "columns": columns}
        yield f"M.2101, 8 × {columns}", formula_pattern("array", "M.2101", **array)
    for columns in (2, 8):
        cuts, _ = cuts_of(array_gains(8, columns, tapered=False), "projected")
        yield f"two cuts with sharp nulls, 8 × {columns}", cuts


def main() -> None:
    parser = argparse.ArgumentParser(
        description=__doc__, formatter_class=argparse.RawTextHelpFormatter
    )
    parser.add_argument("--millions", type=float, default=28.0, help="number of cells")
    cells = round((parser.parse_args().millions * 1e6) ** 0.5)
    rng = np.random.default_rng(5)
    elevation_deg = rng.normal(-1.5, 1.0, (cells, cells)).astype(np.float32)
    gain_dbi = np.empty_like(elevation_deg)
    print(f"{cells**2 / 1e6:.1f} million cells, {get_num_threads()} threads")
    for name, pattern in patterns():
        table = gain_table(pattern, azimuth_deg=0.0, mechanical_downtilt_deg=2.0).arrays
        single = [np.float32(value) for value in table[3:]]
        arguments = (
            elevation_deg, table.levels.ravel(), np.int32(table.levels.shape[1]),
            table.azimuth_places, table.elevation_places, *single, gain_dbi,
        )  # fmt: skip
        gains(*arguments)  # compiles
        wall, cpu = [], []
        for _ in range(5):
            start, cpu_start = time.perf_counter(), time.process_time()
            gains(*arguments)
            wall.append(time.perf_counter() - start)
            cpu.append(time.process_time() - cpu_start)
        megabytes = table.levels.nbytes / 1e6
        print(
            f"{name}: {min(wall):.2f} s, {min(cpu) * 1e9 / cells**2:.1f} ns of CPU a lookup; "
            f"table {megabytes:.1f} MB"
        )


if __name__ == "__main__":
    main()
