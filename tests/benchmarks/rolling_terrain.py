"""Invented rolling terrain of any size, from a fixed seed, written as a GeoTIFF.

Spectral synthesis: random phases under an amplitude that falls with wave number as k^-1.6
(amplitude, so power k^-3.2, near the slope measured on many real landscapes, common practice, no
source), which makes hills and valleys of all sizes; relief is scaled to a standard deviation of
90 m, and the mast's place is the grid's centre.
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


def rolling_ground(cells: int, seed: int = 20, deviation_m: float = 90.0) -> NDArray[np.float32]:
    """(cells, cells) heights [m], the same for the same arguments."""
    rng = np.random.default_rng(seed)
    noise = rng.standard_normal((cells, cells), dtype=np.float32)
    spectrum = np.fft.rfft2(noise)
    del noise
    ky = np.fft.fftfreq(cells)[:, np.newaxis]
    kx = np.fft.rfftfreq(cells)[np.newaxis, :]
    k = np.hypot(kx, ky) * cells
    k[0, 0] = 1.0
    spectrum *= (k**2 + 9.0) ** -0.8
    spectrum[0, 0] = 0.0
    ground = np.fft.irfft2(spectrum, s=(cells, cells))
    ground *= deviation_m / ground.std()
    ground += 600.0
    return ground.astype(np.float32)


def write_rolling_terrain(path: Path, cells: int) -> None:
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
        transform=from_origin(470_000.0, 4_930_000.0, CELL_M, CELL_M),
        tiled=True,
    ) as raster:
        raster.write(rolling_ground(cells), 1)


if __name__ == "__main__":
    write_rolling_terrain(Path(sys.argv[1]), int(sys.argv[2]))
