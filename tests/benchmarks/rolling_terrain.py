"""Invented rolling terrain of any size, from a fixed seed, written as a GeoTIFF.

Spectral synthesis: random phases under an amplitude that falls with wave number as k^-2.2, which
makes hills of all sizes with slopes as in farmland: with a standard deviation of 60 m for each
20 km of width the root mean square slope of a 10 m cell is 7 %. The ground is periodic, so it can
be rolled until its highest cell lies in the middle, where the mast stands.

    python tests/benchmarks/rolling_terrain.py OUT.tif CELLS
"""

import sys
from pathlib import Path

import numpy as np
import rasterio
from numpy.typing import NDArray
from rasterio.crs import CRS
from rasterio.transform import from_origin

CELL_M = 10.0
EPSG = 32710
DEVIATION_M = 60.0  # for each 2,000 cells of width, in a spectrum that has no hills beyond a third
PERIODS = 3.0  # of the largest hills over 2,000 cells
WEST_M, NORTH_M = 470_000.0, 4_930_000.0


def rolling_ground(
    cells: int, seed: int = 20, deviation_m: float = DEVIATION_M, summit: bool = True
) -> NDArray[np.float32]:
    """(cells, cells) heights [m], the highest in the middle, or the median one.

    The hills are of the same sizes whatever the number of cells.
    """
    noise = np.random.default_rng(seed).standard_normal((cells, cells), dtype=np.float32)
    spectrum = np.fft.rfft2(noise).astype(np.complex64)
    del noise
    ky = np.fft.fftfreq(cells).astype(np.float32)[:, np.newaxis] * 2000.0
    kx = np.fft.rfftfreq(cells).astype(np.float32)[np.newaxis, :] * 2000.0
    spectrum *= (kx**2 + ky**2 + PERIODS**2) ** np.float32(-1.1)
    spectrum[0, 0] = 0.0
    ground = np.fft.irfft2(spectrum, s=(cells, cells)).astype(np.float32)
    ground *= deviation_m / ground.std()
    ground += 600.0
    middle = ground[cells // 4 : 3 * cells // 4, cells // 4 : 3 * cells // 4]
    if summit:
        row, col = np.unravel_index(np.argmax(ground), ground.shape)
    else:
        row, col = np.unravel_index(np.argmin(np.abs(middle - np.median(ground))), middle.shape)
        row, col = row + cells // 4, col + cells // 4
    return np.roll(ground, (cells // 2 - row, cells // 2 - col), (0, 1))


def write_rolling_terrain(path: Path, cells: int, *, summit: bool = True) -> None:
    """The terrain as a tiled GeoTIFF without compression, so that reading it costs little."""
    with rasterio.open(
        path,
        "w",
        driver="GTiff",
        width=cells,
        height=cells,
        count=1,
        dtype="float32",
        crs=CRS.from_epsg(EPSG),
        transform=from_origin(WEST_M, NORTH_M, CELL_M, CELL_M),
        tiled=True,
    ) as raster:
        raster.write(rolling_ground(cells, summit=summit), 1)


def mast_easting_northing(cells: int) -> tuple[float, float]:
    """The middle cell's centre, where the ground is highest."""
    along = (cells // 2 + 0.5) * CELL_M
    return WEST_M + along, NORTH_M - along


if __name__ == "__main__":
    write_rolling_terrain(Path(sys.argv[1]), int(sys.argv[2]))
