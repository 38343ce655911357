"""CPU time of combining three sectors of one mast, per cell: what a new aim costs.

    python tests/benchmarks/re_aim.py 6000 [--bands 8]

The path field is invented: smooth waves and some noise in a circle that fills a square of cells.
CPU time is summed over all threads; the best of several runs counts, since others share the
machine. The pass of plain numpy over the same arrays tells how fast the machine is.
"""

import argparse
import time
from collections.abc import Callable, Sequence
from dataclasses import replace
from functools import partial
from itertools import pairwise

import numpy as np

from planner.antenna import F1336Sector, GainTable, Pattern, Tr36814Sector, gain_table
from planner.coverage import combine
from planner.geodesy import LocalFrame
from planner.network import Radio, Sector, Terminal
from planner.sweep import COMPUTED, OUT_OF_RANGE, PathField

CELL_M = 10.0
TERMINAL = Terminal(antenna_height_m=5.0, antenna_gain_dbi=19.0)
RADIO = Radio(
    id="access",
    frequency_mhz=5600.0,
    channel_width_mhz=20.0,
    transmit_power_dbm=19.0,
    service_threshold_dbm=-75.0,
    noise_figure_db=5.0,
)
PANELS: tuple[Pattern, ...] = (
    Tr36814Sector(
        name="TR 36.814", gain_dbi=17.0, azimuth_beamwidth_deg=90.0, elevation_beamwidth_deg=8.0
    ),
    F1336Sector(
        name="F.1336-5",
        gain_dbi=17.0,
        azimuth_beamwidth_deg=90.0,
        elevation_beamwidth_deg=8.0,
        frequency_mhz=5600.0,
    ),
)
Item = tuple[PathField, Sector, GainTable]


def synthetic_field(cells: int) -> PathField:
    """A circle that fills a square of ``cells`` by ``cells``, its mast in the middle."""
    rng = np.random.default_rng(7)
    middle = 0.5 * (cells - 1) + 0.3
    place = np.arange(cells) - middle
    distance_m = (np.hypot(place[:, np.newaxis], place[np.newaxis, :]) * CELL_M).astype(np.float32)
    waves = np.sin(place[:, np.newaxis] / 37.0) * np.cos(place[np.newaxis, :] / 23.0)
    noise = rng.standard_normal((cells, cells), dtype=np.float32)
    loss_db = 47.4 + 20.0 * np.log10(distance_m) + 12.0 * waves**2 + noise
    relief_m = 60.0 * waves + noise
    elevation_deg = np.degrees(np.arctan2(relief_m - 40.0, distance_m))
    clearance = np.minimum(2.0 * waves + 0.1 * noise, 1.0)
    outside = distance_m > 0.5 * cells * CELL_M
    for layer in (loss_db, elevation_deg, clearance):
        layer[outside] = np.nan
    return PathField(
        row_start=0,
        col_start=0,
        mast_row=middle,
        mast_col=middle,
        mast_ground_m=100.0,
        frame=LocalFrame(
            latitude=-46.2,
            longitude=-121.4,
            easting_m=500_000.0,
            northing_m=4_880_000.0,
            scale=0.9996,
            scale_gradient_east_per_m=2e-9,
            scale_gradient_north_per_m=0.0,
            convergence_deg=1.5,
        ),
        cell_m=CELL_M,
        frequency_mhz=5600.0,
        antenna_height_m=30.0,
        receiver_height_m=5.0,
        radius_m=0.5 * cells * CELL_M,
        path_loss_db=loss_db.astype(np.float32),
        departure_elevation_deg=elevation_deg.astype(np.float32),
        fresnel_clearance_ratio=clearance.astype(np.float32),
        status=np.where(outside, OUT_OF_RANGE, COMPUTED).astype(np.uint8),
    )


def sectors(field: PathField, table: GainTable) -> list[Item]:
    """Three sectors a third of a turn apart."""
    return [
        (
            field,
            Sector(
                id=f"s{azimuth:g}", antenna="panel", radio=RADIO, antenna_height_m=30.0,
                azimuth_deg=azimuth,
            ),
            replace(table, azimuth_deg=azimuth),
        )
        for azimuth in (20.0, 140.0, 260.0)
    ]  # fmt: skip


def combined(field: PathField, items: Sequence[Item], bands: int) -> None:
    rows, cols = field.path_loss_db.shape
    edges = np.linspace(0, rows, bands + 1).astype(int).tolist()
    for band in pairwise(edges):
        combine(rows, cols, items, TERMINAL, rows=band)


def numpy_pass(field: PathField) -> None:
    """Read the same arrays and write as many as a coverage has, with one sum each."""
    for layer in (field.path_loss_db, field.departure_elevation_deg, field.fresnel_clearance_ratio):
        layer + np.float32(1.0)
    (field.status + np.uint8(1)).astype(np.int16)


def least_cpu_ns(work: Callable[[], object], runs: int = 5) -> float:
    work()  # compiles
    times = []
    for _ in range(runs):
        start = time.process_time_ns()
        work()
        times.append(time.process_time_ns() - start)
    return float(min(times))


def main() -> None:
    parser = argparse.ArgumentParser(
        description=__doc__, formatter_class=argparse.RawTextHelpFormatter
    )
    parser.add_argument("cells", type=int, help="side of the square path field, in cells")
    parser.add_argument("--bands", type=int, default=1, help="combine in so many bands of rows")
    given = parser.parse_args()
    field = synthetic_field(given.cells)
    number = given.cells**2
    plain_ns = least_cpu_ns(partial(numpy_pass, field)) / number
    print(f"plain numpy pass: {plain_ns:.2f} ns/cell")
    for panel in PANELS:
        table = partial(
            gain_table,
            panel,
            azimuth_deg=0.0,
            mechanical_downtilt_deg=2.0,
            electrical_downtilt_deg=3.0,
        )
        table_ns = least_cpu_ns(table)
        items = sectors(field, table())
        ns = least_cpu_ns(partial(combined, field, items, given.bands)) / number
        print(
            f"{panel.name}: {ns:.2f} ns/cell for three sectors, {ns / plain_ns:.1f} plain passes; "
            f"gain table {table_ns * 1e-6:.0f} ms"
        )


if __name__ == "__main__":
    main()
