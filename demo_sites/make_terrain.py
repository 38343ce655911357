"""Make the terrain of both demo sites again: ``python demo_sites/make_terrain.py [FOLDER]``.

Everything is invented and seeded. Land rises, faster on both sides of a belt; rivers cut into it
for a long while, on ever finer cells; slopes creep and slip; valley floors fill; a river winds on
them. The lake stands behind a bar of rubble across its valley. Heights are rounded after each step,
so that the last bits of a floating-point unit cannot grow into other landforms.
"""

import sys
from concurrent.futures import ProcessPoolExecutor
from pathlib import Path
from typing import NamedTuple

import landforms
import numpy as np
import rasterio
from affine import Affine
from landforms import Floats
from numpy.random import RandomState
from rasterio.warp import transform as transformed
from scipy import ndimage

HERE = Path(__file__).parent
UTM = "EPSG:32710"  # WGS 84 / UTM zone 10S: both sites lie in it
DEGREES = "EPSG:4326"
WEB_MERCATOR = "EPSG:3857"

DOMAIN_M = 32_400.0  # side of the square in which the rivers run; the files hold the middle of it
COARSE_CELLS = 270
INFLOW_M2 = 5e8  # drained by the main river before it enters at the top
TALUS = 0.6  # rise over run at which rubble slips

# The valley: cell (744, 840) of the domain is the mast's spur; 1,220 cells of 20 m about it.
VALLEY_CELLS = 1220
VALLEY_CENTRE = (744, 840)
VALLEY_CENTRE_UTM = (622_520.0, 4_882_240.0)  # easting, northing of that cell's top left corner

# The lake: cell (430, 500) of its domain lies at this place; tiles of 1 arc-second about it.
LAKE_CELL_M = 30.0
LAKE_CENTRE = (430, 500)
LAKE_CENTRE_UTM = (576_000.0, 4_836_000.0)
LAKE_LEVEL_M = 90.0
LAKE_TOP_SECONDS, LAKE_BOTTOM_SECONDS = -167_460, -168_216  # latitude of the outer rows
LAKE_LEFT_SECONDS, LAKE_RIGHT_SECONDS = -439_722, -438_534  # longitude of the outer columns
LAKE_SEAM_SECONDS = -439_200  # 122 degrees west: the column that both tiles hold


class Stage(NamedTuple):
    """Erosion on cells ``factor`` times finer than the coarse ones."""

    factor: int
    steps: int
    time: float  # of one step, in units in which 1 m of retreat costs 1 m of sqrt(drainage area)
    creep_m2: float  # soil diffusion per unit of time
    threshold_m2: float  # drainage area below which water hardly cuts
    grain_m: float  # roughness of bedrock on a slope of 45 degrees


COARSE = Stage(1, 80, 0.25, 7000, 1.5e5, 0.0)
VALLEY_STAGES = (Stage(3, 8, 0.1, 7000, 1.5e5, 4.5), Stage(6, 3, 0.05, 2500, 4e4, 6.0))
LAKE_STAGES = (Stage(4, 10, 0.1, 5500, 1.2e5, 5.0),)


class Land(NamedTuple):
    """Heights of a domain, what drains through each cell, where its river runs in and out."""

    height_m: Floats
    area_m2: Floats
    inflow_col: int
    outflow_col: int


def eroded(height: Floats, lift: Floats, rock: Floats, inflow_col: int, stage: Stage) -> Land:
    """The land after the stage's steps of rise, cutting, creep and slip."""
    cell_m = DOMAIN_M / height.shape[0]
    outlet = np.zeros(height.shape, dtype=bool)
    outlet[-1] = True
    source = np.full(height.shape, cell_m**2)
    source[0, inflow_col] += INFLOW_M2
    rise = lift * stage.time
    rise[-1] = 0.0
    area = source
    for _ in range(stage.steps):
        height = height + rise
        drainage = landforms.Drainage(height, outlet)
        area = drainage.accumulated(source)
        strength = rock * stage.time * area / np.sqrt(area + stage.threshold_m2)
        height = landforms.incised(height, drainage, strength, cell_m)
        height = landforms.crept(height, stage.creep_m2 * stage.time, cell_m)
        height = np.round(landforms.slipped(height, cell_m, TALUS), 3)
    return Land(height, area, inflow_col, int(np.argmax(area[-1])))


def mountain_country(random: RandomState, stages: tuple[Stage, ...]) -> Land:
    """Two ranges along a belt that hardly rises, with the main river in it."""
    n = COARSE_CELLS
    shape, trend_deg = (n, n), 28.0
    down, right = (np.mgrid[0:n, 0:n] + 0.5) / n
    cosine, sine = np.cos(np.radians(trend_deg)), np.sin(np.radians(trend_deg))
    along = -(down - 0.5) * cosine + (right - 0.5) * sine
    bend = 0.045 * np.sin(along * 9 + 0.8) + 0.05 * landforms.smooth_noise(random, shape, n / 2.5)
    across = (right - 0.5) * cosine + (down - 0.5) * sine + bend
    ranges = landforms.fractal_noise(
        random, shape, n / 3, octaves=3, stretch=1.6, trend_deg=trend_deg
    )
    lift = 0.8 + 0.35 * np.tanh((np.abs(across) - 0.16) / 0.12) + 0.25 * ranges
    lift = 42.0 * np.maximum(lift, 0.2) * (1 - 0.8 * np.exp(-((across / 0.055) ** 2)))
    beds = landforms.smooth_noise(random, shape, 9, stretch=4, trend_deg=trend_deg)
    rock = np.exp(0.28 * beds + 0.22 * landforms.smooth_noise(random, shape, 30))
    height = 60 * (1 - down) + 350 * np.clip(np.abs(across) - 0.05, 0, 0.35)
    height += 25 * landforms.fractal_noise(random, shape, n / 5, octaves=5)
    height += 6 * random.random_sample(shape)
    inflow_col = int(np.argmin(height[0]))
    land = eroded(height, lift, rock, inflow_col, COARSE)
    for stage in stages:
        height = landforms.enlarged(
            land.height_m, stage.factor * n // land.height_m.shape[0], order=3
        )
        cell_m = DOMAIN_M / height.shape[0]
        grain = landforms.fractal_noise(
            random, height.shape, 240 / cell_m, octaves=4, roughness=0.6
        )
        height = height + stage.grain_m * np.hypot(*np.gradient(height, cell_m)) * grain
        seams = np.exp(0.15 * landforms.smooth_noise(random, height.shape, 4))
        land = eroded(
            height,
            landforms.enlarged(lift, stage.factor, order=1),
            landforms.enlarged(rock, stage.factor, order=1) * seams,
            inflow_col * stage.factor + stage.factor // 2,
            stage,
        )
    return land


def river_bed(
    height: Floats, random: RandomState, start: tuple[int, int], end: tuple[int, int]
) -> Floats:
    """How deep the main river lies in its floor (m); it winds where the floor is wide."""
    cell_m = DOMAIN_M / height.shape[0]
    stride = round(60 / cell_m)
    coarse = height[::stride, ::stride]
    above_m = np.maximum(coarse - ndimage.minimum_filter(coarse, 13) - 3.0, 0)
    cost = 0.25 + np.exp(landforms.smooth_noise(random, coarse.shape, 14)) + (above_m / 2.5) ** 2
    ends = ((start[0] // stride, start[1] // stride), (end[0] // stride, end[1] // stride))
    line = landforms.least_cost_line(cost, *ends) * stride
    line = ndimage.gaussian_filter1d(line, 3.0, axis=0, mode="nearest")
    place = np.linspace(0, len(line) - 1, len(line) * stride * 4)
    row, col = (np.interp(place, np.arange(len(line)), line[:, axis]) for axis in (0, 1))
    room_m = ndimage.distance_transform_edt(above_m < 3.0) * 60.0
    room_m = ndimage.map_coordinates(room_m, (row / stride, col / stride), order=1, mode="nearest")
    swing_m = np.clip(0.45 * ndimage.gaussian_filter1d(room_m, 40, mode="nearest"), 0, 170)
    step = np.maximum(np.hypot(np.gradient(row), np.gradient(col)), 1e-9)
    whim = ndimage.gaussian_filter1d(random.standard_normal(row.size), 150, mode="nearest")
    phase = 2 * np.pi * np.cumsum(step) * cell_m / 850.0 + 1.6 * whim / whim.std()
    swing = swing_m / cell_m * np.sin(phase)
    rows = np.round(row - swing * np.gradient(col) / step).astype(int)
    cols = np.round(col + swing * np.gradient(row) / step).astype(int)
    dry = np.ones(height.shape, dtype=bool)
    dry[np.clip(rows, 0, dry.shape[0] - 1), np.clip(cols, 0, dry.shape[1] - 1)] = False
    distance_m = ndimage.distance_transform_edt(dry) * cell_m
    return np.asarray(2.2 * np.exp(-((distance_m / 28.0) ** 2)))


def valley_heights() -> Floats:
    """Heights of the valley on 1,220 x 1,220 cells of 20 m, in steps of a quarter metre."""
    random = RandomState(103)
    land = mountain_country(random, VALLEY_STAGES)
    height = landforms.alluviated(land.height_m, land.area_m2, 20.0, stream_m2=1.5e6, depth_m=8.0)
    last = height.shape[0] - 1
    height = height - river_bed(height, random, (0, land.inflow_col), (last, land.outflow_col))
    top, left = (centre - VALLEY_CELLS // 2 for centre in VALLEY_CENTRE)
    return np.round(height[top : top + VALLEY_CELLS, left : left + VALLEY_CELLS] * 4) / 4


def lake_domain() -> tuple[Floats, Floats]:
    """Heights and canopy heights (m) of the whole domain about the lake, on cells of 30 m."""
    random = RandomState(111)
    land = mountain_country(random, LAKE_STAGES)
    height = landforms.alluviated(
        land.height_m, land.area_m2, LAKE_CELL_M, stream_m2=1.5e6, depth_m=6.0
    )
    height = height[:, ::-1]  # the other way round, so that the two sites do not look alike
    last, outflow_col = height.shape[0] - 1, height.shape[1] - 1 - land.outflow_col
    row, col = np.mgrid[0 : height.shape[0], 0 : height.shape[1]].astype(float)
    lumps = landforms.smooth_noise(random, height.shape, 14)
    bearing = np.arctan2(col - 655, row - 548)  # of the arc on which the bar lies
    off_arc_m = np.hypot(row - 548, col - 655) * LAKE_CELL_M - 2600 - 60 * lumps
    notch = 11 * np.exp(-(((bearing - 0.25) / 0.06) ** 2))
    bar = LAKE_LEVEL_M + 12 + 3 * lumps - (off_arc_m / 28) ** 2 / 7 - notch
    barred = 4 * np.logaddexp(height / 4, np.maximum(bar, -500) / 4)
    height = np.where(np.abs(bearing) < 1.45, barred, height)
    outlet = (round(548 + 90 * np.cos(0.25)), round(655 + 90 * np.sin(0.25)))
    height = height - river_bed(height, random, outlet, (last, outflow_col))
    wet, _ = ndimage.label(height < LAKE_LEVEL_M)
    lake = wet == wet[400, 600]
    return np.where(lake, LAKE_LEVEL_M, height), canopy_heights(height, lake, random)


def canopy_heights(height: Floats, lake, random: RandomState) -> Floats:
    """Woods on the slopes, none on lake, valley floors and high ridges: metres above ground."""
    slope = np.hypot(*np.gradient(ndimage.gaussian_filter(height, 2), LAKE_CELL_M))
    low_m = height - ndimage.minimum_filter(height, 33)
    woods = landforms.fractal_noise(random, height.shape, 60, octaves=4, roughness=0.7)
    woods = woods + 3.0 * np.clip(slope - 0.12, 0, 0.3) - 0.004 * np.maximum(height - 420, 0)
    woods = woods - np.where(low_m < 22, 1.5, 0.0)
    tall = 15 + 4 * landforms.smooth_noise(random, height.shape, 20)
    tall = tall + 2.0 * random.standard_normal(height.shape)
    shore = ndimage.binary_dilation(lake, iterations=4)
    return np.where((woods > 0.55) & ~shore, np.clip(tall, 5, 28), 0.0)


def sampled(values: Floats, x, y, crs: str, order: int) -> Floats:
    """The lake's domain read at places of another CRS."""
    easting, northing = transformed(crs, UTM, x.ravel(), y.ravel())
    col = LAKE_CENTRE[1] - 0.5 + (np.array(easting) - LAKE_CENTRE_UTM[0]) / LAKE_CELL_M
    row = LAKE_CENTRE[0] - 0.5 - (np.array(northing) - LAKE_CENTRE_UTM[1]) / LAKE_CELL_M
    return np.asarray(ndimage.map_coordinates(values, (row, col), order=order).reshape(x.shape))


def write_raster(
    path: Path, values, *, crs: str, transform: Affine, predictor: int, **options
) -> None:
    path.parent.mkdir(parents=True, exist_ok=True)
    with rasterio.open(
        path, "w", driver="GTiff", dtype=values.dtype, count=1, crs=crs, transform=transform,
        height=values.shape[0], width=values.shape[1], compress="deflate", zlevel=9,
        predictor=predictor, tiled=True, blockxsize=256, blockysize=256, **options,
    ) as raster:  # fmt: skip
        raster.write(values, 1)
        raster.update_tags(TIFFTAG_IMAGEDESCRIPTION="Invented landforms, no survey of any place")


def write_valley(folder: Path) -> None:
    height = valley_heights()
    left = VALLEY_CENTRE_UTM[0] - 20.0 * (VALLEY_CELLS // 2)
    top = VALLEY_CENTRE_UTM[1] + 20.0 * (VALLEY_CELLS // 2)
    write_raster(
        folder / "harrow_vale" / "terrain.tif", height.astype("float32"),
        crs=UTM, transform=Affine(20.0, 0, left, 0, -20.0, top), predictor=3,
    )  # fmt: skip


def write_lake(folder: Path) -> None:
    height, canopy = lake_domain()
    folder = folder / "lake_ondrel"
    latitude = np.arange(LAKE_TOP_SECONDS, LAKE_BOTTOM_SECONDS - 1, -1) / 3600
    second = 1 / 3600
    for name, first, last in (
        ("terrain_west.tif", LAKE_LEFT_SECONDS, LAKE_SEAM_SECONDS),
        ("terrain_east.tif", LAKE_SEAM_SECONDS, LAKE_RIGHT_SECONDS),
    ):
        longitude = np.arange(first, last + 1) / 3600
        tile = sampled(height, *np.meshgrid(longitude, latitude), DEGREES, order=1)
        corner = Affine(second, 0, longitude[0] - second / 2, 0, -second, latitude[0] + second / 2)
        write_raster(
            folder / name, np.round(tile).astype("int16"),
            crs=DEGREES, transform=corner, predictor=2, nodata=-32768,
        )  # fmt: skip
    x, y = transformed(
        DEGREES, WEB_MERCATOR,
        [LAKE_LEFT_SECONDS / 3600, LAKE_RIGHT_SECONDS / 3600],
        [LAKE_BOTTOM_SECONDS / 3600, LAKE_TOP_SECONDS / 3600],
    )  # fmt: skip
    left, top = np.floor(x[0] / 80) * 80, np.ceil(y[1] / 80) * 80
    centres = np.meshgrid(np.arange(left + 40, x[1], 80), np.arange(top - 40, y[0], -80))
    woods = sampled(canopy, *centres, WEB_MERCATOR, order=0)
    write_raster(
        folder / "woodland.tif", np.round(woods).astype("uint8"),
        crs=WEB_MERCATOR, transform=Affine(80, 0, left, 0, -80, top), predictor=2,
    )  # fmt: skip


def main() -> None:
    folder = Path(sys.argv[1]) if len(sys.argv) > 1 else HERE
    with ProcessPoolExecutor(max_workers=2) as workers:
        for site in (workers.submit(write_valley, folder), workers.submit(write_lake, folder)):
            site.result()


if __name__ == "__main__":
    main()
