"""Make both customer lists again: ``python demo_sites/make_customers.py [FOLDER]``.

Run ``make_terrain.py`` first: houses stand on gentle ground, out of water and woods. No people are
in the lists and all names are invented. Some rows of the lake's list are wrong on purpose.
"""

import csv
import itertools
import sys
from pathlib import Path
from typing import NamedTuple

import landforms
import numpy as np
import rasterio
import sites
from landforms import Floats
from numpy.random import RandomState
from rasterio.warp import Resampling, reproject
from rasterio.warp import transform as transformed
from scipy import ndimage

HERE = Path(__file__).parent
UTM = "EPSG:32710"
DEGREES = "EPSG:4326"
CELL_M = 20.0


class House(NamedTuple):
    """A house to be: where it stands (UTM) and what is written on its gate."""

    easting_m: float
    northing_m: float
    address: str


class Land:
    """Where one can build: heights on cells of 20 m, and the cells that are no good for it."""

    def __init__(self, rasters: list[Path], woods: Path | None, lake_level_m, square) -> None:
        self.left_m, self.top_m, cells = square
        shape = (cells, cells)
        height = np.full(shape, np.nan)
        for path in rasters:
            tile = self._warped(path, shape, Resampling.bilinear)
            height = np.where(np.isnan(height), tile, height)
        self.height_m = np.where(np.isnan(height), 1e4, height)
        slope = np.hypot(*np.gradient(ndimage.gaussian_filter(self.height_m, 1), CELL_M))
        river = self.height_m < ndimage.uniform_filter(self.height_m, 9) - 0.9
        lake = np.abs(self.height_m - (np.nan if lake_level_m is None else lake_level_m)) < 0.01
        wet = ndimage.binary_dilation((river & (slope < 0.15)) | lake, iterations=2)
        self.price = (
            1.0 + (slope / 0.06) ** 2 + np.where(wet, 12.0, 0.0) + np.where(lake, 200.0, 0.0)
        )
        self.unfit = (slope > 0.28) | wet
        if woods:
            trees = self._warped(woods, shape, Resampling.nearest) > 0
            self.unfit |= ndimage.binary_dilation(trees, iterations=3)

    def _warped(self, path: Path, shape: tuple[int, int], how: Resampling) -> Floats:
        out = np.full(shape, np.nan)
        with rasterio.open(path) as raster:
            reproject(
                rasterio.band(raster, 1),
                out,
                dst_transform=rasterio.transform.from_origin(
                    self.left_m, self.top_m, CELL_M, CELL_M
                ),
                dst_crs=UTM,
                dst_nodata=np.nan,
                resampling=how,
            )
        return out

    def cell(self, easting_m: float, northing_m: float) -> tuple[int, int]:
        return int((self.top_m - northing_m) // CELL_M), int((easting_m - self.left_m) // CELL_M)

    def is_fit(self, easting_m: float, northing_m: float) -> bool:
        row, col = self.cell(easting_m, northing_m)
        inside = 0 <= row < self.unfit.shape[0] and 0 <= col < self.unfit.shape[1]
        return inside and not self.unfit[row, col]

    def road(self, places: list[tuple[float, float]]) -> Floats:
        """Eastings and northings (n, 2) of the cheapest way from place to place."""
        stride = 3
        price = self.price[::stride, ::stride]
        legs = []
        for start, end in itertools.pairwise(places):
            ends = [tuple(index // stride for index in self.cell(*place)) for place in (start, end)]
            line = landforms.least_cost_line(price, *ends)
            legs.append(ndimage.gaussian_filter1d(line, 1.5, axis=0, mode="nearest"))
        line = np.concatenate(legs) * stride * CELL_M
        return np.stack((self.left_m + line[:, 1], self.top_m - line[:, 0]), axis=1)


def village_houses(land: Land, random: RandomState, village: sites.Village) -> list[House]:
    """Houses along a main street and, in larger places, lanes across it, with uneven gaps."""
    houses: list[House] = []
    for number, (street, share) in enumerate(village.streets):
        bearing_rad = np.radians(village.street_bearing_deg + 75 * number)
        wanted = round(village.houses * share)
        along_m, gate = -45.0 * wanted / 2, 0
        found = 0
        while found < wanted and along_m < 1500:
            gate += 1
            along_m += random.uniform(14, 76)
            bend_m = 45 * np.sin(along_m / 190)
            off_m = (22 if gate % 2 else -22) + random.uniform(-12, 16) + bend_m
            east = along_m * np.sin(bearing_rad) + off_m * np.cos(bearing_rad)
            north = along_m * np.cos(bearing_rad) - off_m * np.sin(bearing_rad)
            place = (village.easting_m + east, village.northing_m + north)
            if land.is_fit(*place):
                houses.append(House(*place, f"{gate} {street}, {village.name}"))
                found += 1
    return houses


def roadside_houses(
    land: Land, random: RandomState, road: Floats, name: str, count: int, away_from
) -> list[House]:
    """Single houses beside a road, at random distances, not inside the villages."""
    middle = 0.5 * (road[1:] + road[:-1])
    ahead = np.diff(road, axis=0)
    length_m = np.maximum(np.hypot(ahead[:, 0], ahead[:, 1]), 1e-9)
    aside = np.stack((ahead[:, 1], -ahead[:, 0]), axis=1) / length_m[:, None]
    walked_m = np.cumsum(length_m)
    houses: list[House] = []
    for _ in range(4000):
        if len(houses) == count:
            break
        at = int(np.searchsorted(walked_m, random.uniform(0, walked_m[-1])))
        at = min(at, len(middle) - 1)
        side = 1 if random.random_sample() < 0.5 else -1
        place = middle[at] + side * random.uniform(25, 60) * aside[at]
        far = all(np.hypot(*(place - other)) > 550 for other in away_from)
        if far and land.is_fit(*place):
            gate = 2 * int(walked_m[at] / 20) + (side > 0)
            houses.append(House(float(place[0]), float(place[1]), f"{gate} {name}"))
    return sorted(houses, key=lambda house: int(house.address.split()[0]))


def farm_house(land: Land, easting_m: float, northing_m: float, address: str) -> House:
    """The farm on the nearest ground that is fit for it."""
    row, col = land.cell(easting_m, northing_m)
    rows, cols = np.nonzero(~land.unfit)
    nearest = int(np.argmin((rows - row) ** 2 + (cols - col) ** 2))
    return House(
        land.left_m + CELL_M * (cols[nearest] + 0.5),
        land.top_m - CELL_M * (rows[nearest] + 0.5),
        address,
    )


def customer_rows(site: sites.Site, folder: Path) -> list[list[str]]:
    """id, address, latitude, longitude, height_m for every house of a site, in order."""
    random = RandomState(site.seed)
    place = folder / site.folder
    woods = place / site.woods if site.woods else None
    land = Land([place / name for name in site.rasters], woods, site.lake_level_m, site.square)
    houses: list[House] = []
    for village in site.villages:
        houses += village_houses(land, random, village)
    centres = [np.array([v.easting_m, v.northing_m]) for v in site.villages]
    for road in site.roads:
        line = land.road(list(road.places))
        houses += roadside_houses(land, random, line, road.name, road.houses, centres)
    houses += [farm_house(land, *farm) for farm in site.farms]
    east, north = ([house[axis] for house in houses] for axis in (0, 1))
    longitude, latitude = transformed(UTM, DEGREES, east, north)
    rows = []
    for number, (house, lat, lon) in enumerate(zip(houses, latitude, longitude, strict=True), 1):
        tall = random.random_sample()
        height = "9" if tall < 0.04 else "7.5" if tall < 0.08 else "3.5" if tall < 0.12 else ""
        rows.append(
            [f"{site.prefix}-{number:03d}", house.address, f"{lat:.5f}", f"{lon:.5f}", height]
        )
    return rows


def main() -> None:
    folder = Path(sys.argv[1]) if len(sys.argv) > 1 else HERE
    for site in (sites.VALE, sites.LAKE):
        rows = customer_rows(site, folder) + [list(row) for row in site.wrong_rows]
        with (folder / site.folder / "customers.csv").open(
            "w", newline="", encoding="utf-8"
        ) as out:
            writer = csv.writer(out, lineterminator="\n")
            writer.writerow(["id", "address", "latitude", "longitude", "height_m"])
            writer.writerows(rows)


if __name__ == "__main__":
    main()
