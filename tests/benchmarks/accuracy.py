"""How far the path field is from the exact single path, over random cells and as a map.

    python tests/benchmarks/accuracy.py RASTER.tif [--place summit|valley|both] [--map OUT.png]
    python tests/benchmarks/accuracy.py rolling

A mast of 30 m on the highest or the lowest cell of the raster's middle half, receiver 5 m,
5.6 GHz. The exact path runs to the cell's centre over a bilinear profile sampled at cell spacing.
"""

import argparse
import tempfile
from pathlib import Path

import matplotlib as mpl
import numpy as np
from numpy.typing import NDArray
from rolling_terrain import mast_easting_northing, write_rolling_terrain

from planner.io.terrain_files import TerrainSource, read_terrain
from planner.sweep import COMPUTED, PathField, path_between, path_field
from planner.sweep import Path as ExactPath
from planner.terrain import Grid, Terrain

mpl.use("Agg")
RADIO = {"frequency_mhz": 5600.0, "k_factor": 4.0 / 3.0, "polarization": "vertical"}
HEIGHT_M, RECEIVER_M = 30.0, 5.0


def place_of(grid: Grid, row: float, col: float) -> tuple[float, float]:
    latitude, longitude = grid.to_geographic(*grid.easting_northing(row, col))
    return float(latitude), float(longitude)


def field_and_exact(terrain: Terrain, mast: tuple[float, float], radius_m: float):
    """The path field and a function that computes the exact path to a cell of its window."""
    latitude, longitude = place_of(terrain.grid, *mast)
    field = path_field(
        terrain,
        latitude=latitude,
        longitude=longitude,
        antenna_height_m=HEIGHT_M,
        receiver_height_m=RECEIVER_M,
        radius_m=radius_m,
        **RADIO,
    )

    def exact(row: int, col: int) -> ExactPath:
        there = place_of(terrain.grid, row + field.row_start, col + field.col_start)
        return path_between(
            terrain,
            a_latitude=latitude,
            a_longitude=longitude,
            a_height_m=HEIGHT_M,
            b_latitude=there[0],
            b_longitude=there[1],
            b_height_m=RECEIVER_M,
            **RADIO,
        )

    return field, exact


def compare(name: str, field: PathField, exact, count: int) -> None:
    rows, cols = np.nonzero(field.status == COMPUTED)
    chosen = np.random.default_rng(3).choice(rows.size, min(count, rows.size), replace=False)
    loss, elevation, ratio, clear = [], [], [], []
    for row, col in zip(rows[chosen], cols[chosen], strict=True):
        path = exact(row, col)
        loss.append(field.path_loss_db[row, col] - path.path_loss_db)
        elevation.append(field.departure_elevation_deg[row, col] - path.elevation_angle_deg)
        ratio.append(field.fresnel_clearance_ratio[row, col] - min(path.worst_clearance_ratio, 1.0))
        clear.append(path.line_of_sight)
    difference, clear = np.array(loss), np.array(clear)
    for part, where in (("all", clear | ~clear), ("in sight", clear), ("obstructed", ~clear)):
        values = difference[where & np.isfinite(difference)]
        if values.size:
            print(
                f"{name}, {part}: {values.size} cells, median |difference| "
                f"{np.median(np.abs(values)):.4f} dB, 95th percentile "
                f"{np.percentile(np.abs(values), 95):.3f} dB, mean {values.mean():+.4f} dB, "
                f"largest {np.abs(values).max():.1f} dB"
            )
    angle, near = np.abs(elevation), np.abs(ratio)
    print(
        f"{name}: departure elevation median {np.nanmedian(angle):.4f} deg, 95th percentile "
        f"{np.nanpercentile(angle, 95):.3f}; clearance ratio median {np.nanmedian(near):.3f}, "
        f"95th percentile {np.nanpercentile(near, 95):.2f}"
    )


def draw(path: Path, terrain: Terrain, field: PathField, exact, mast: tuple[float, float]) -> None:
    """The difference on every n-th cell, over the terrain."""
    from matplotlib import pyplot as plt

    step = max(max(field.status.shape) // 130, 1)
    rows = np.arange(step // 2, field.status.shape[0], step)
    cols = np.arange(step // 2, field.status.shape[1], step)
    difference: NDArray[np.float64] = np.full((rows.size, cols.size), np.nan)
    for i, row in enumerate(rows):
        for j, col in enumerate(cols):
            if field.status[row, col] == COMPUTED:
                difference[i, j] = field.path_loss_db[row, col] - exact(row, col).path_loss_db
    km = terrain.grid.cell_m / 1000.0
    left, top = field.col_start - mast[1], mast[0] - field.row_start
    extent = (left * km, (left + field.status.shape[1]) * km,
              (top - field.status.shape[0]) * km, top * km)  # fmt: skip
    figure, axes = plt.subplots(figsize=(7.0, 6.0), layout="constrained")
    window = np.s_[
        field.row_start : field.row_start + field.status.shape[0],
        field.col_start : field.col_start + field.status.shape[1],
    ]
    axes.contour(
        terrain.ground_elevation_m[window], 8, colors="0.75", linewidths=0.4, extent=extent,
        origin="upper",
    )  # fmt: skip
    image = axes.imshow(
        difference, cmap="PuOr", vmin=-3.0, vmax=3.0, extent=extent, interpolation="nearest",
        alpha=0.85,
    )  # fmt: skip
    axes.plot(0.0, 0.0, marker="o", ms=7, mfc="none", mec="black")
    axes.set_xlabel("east of the mast, km")
    axes.set_ylabel("north of the mast, km")
    axes.set_title("Path field less exact path", fontsize=11)
    figure.colorbar(image, ax=axes, label="difference, dB", extend="both", shrink=0.85)
    figure.savefig(path, dpi=80)


def main() -> None:
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    parser.add_argument("raster", help='a raster, or "rolling" for invented terrain')
    parser.add_argument("--place", choices=["summit", "valley", "both"], default="both")
    parser.add_argument("--radius-m", type=float, default=8400.0)
    parser.add_argument("--cells", type=int, default=5000)
    parser.add_argument("--map", type=Path)
    options = parser.parse_args()
    if options.raster == "rolling":
        with tempfile.TemporaryDirectory() as folder:
            raster = Path(folder) / "rolling.tif"
            write_rolling_terrain(raster, 2000)
            from pyproj import Transformer

            to_degrees = Transformer.from_crs(32710, 4326, always_xy=True)
            longitude, latitude = to_degrees.transform(*mast_easting_northing(2000))
            terrain = read_terrain(
                TerrainSource(rasters=(raster,)), [(latitude, longitude)], 10_000.0, names=["mast"]
            )
    else:
        import rasterio
        from rasterio.warp import transform

        with rasterio.open(options.raster) as raster:
            middle = raster.xy(raster.height // 2, raster.width // 2)
            lon, lat = transform(raster.crs, "EPSG:4326", [middle[0]], [middle[1]])
        terrain = read_terrain(
            TerrainSource(rasters=(Path(options.raster),)),
            [(lat[0], lon[0])],
            30_000.0,
            names=["middle"],
        )
    ground = terrain.ground_elevation_m
    rows, cols = ground.shape
    middle = ground[rows // 4 : 3 * rows // 4, cols // 4 : 3 * cols // 4]
    for place, pick in (("summit", np.nanargmax), ("valley", np.nanargmin)):
        if options.place not in (place, "both"):
            continue
        row, col = np.unravel_index(pick(middle), middle.shape)
        mast = float(row + rows // 4), float(col + cols // 4)
        field, exact = field_and_exact(terrain, mast, options.radius_m)
        compare(place, field, exact, options.cells)
        if options.map is not None:
            draw(options.map.with_stem(f"{options.map.stem}_{place}"), terrain, field, exact, mast)


if __name__ == "__main__":
    main()
