"""A pattern over the whole sphere: where its peak lies, and its mean."""

import math
from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from planner.errors import PatternError, Problem

Gain = Callable[[ArrayLike, ArrayLike], NDArray[np.float64]]  # of azimuth offset and elevation
Angles = NDArray[np.float64]

WANTED_SHARE = 1e-4  # of the mean, as its error: 0.0004 dB
_COARSE_CELL_DEG = 4.0  # halves come to whole degrees, where measured patterns have their corners
_MOST_ROUNDS = 14  # of halving: cells of less than a thousandth of a degree
_MOST_CELLS = 100_000  # of one round, each with 36 directions
_CHUNK_CELLS = 20_000
# Gauss-Legendre nodes and weights with three points on 0 to 1.
_NODES = np.array([0.5 - math.sqrt(0.15), 0.5, 0.5 + math.sqrt(0.15)])
_WEIGHTS = np.array([5.0, 8.0, 5.0]) / 18.0

_SEARCH_STEP_DEG = 1.0
_ZOOM_POINTS = 31
_ZOOM = 0.2
_ZOOM_ROUNDS = 8  # 1.5 degrees times 0.2 to the power 8: 4 millionths of a degree
_SAME_LEVEL_DB = 1e-6


@dataclass(frozen=True, slots=True, kw_only=True)
class SphereMean:
    """Mean over all directions of the gain as a ratio, and how far it may be wrong."""

    ratio: float  # radiated power over the power put in, if the gain is true: the efficiency
    error_db: float  # estimate, from halving all cells once more


def sphere_mean(gain: Gain, name: str) -> SphereMean:
    r"""Mean gain over all directions, as a ratio.

    Parameters
    ----------
    gain : function of azimuth offset and elevation in degrees, arrays
        Gain in dBi; minus infinity where nothing is radiated.
    name : str
        Of the antenna, for messages.

    Returns
    -------
    SphereMean

    Raises
    ------
    PatternError
        The pattern has no gain (NaN) in some direction.

    Notes
    -----
    .. math:: \bar g = \frac{1}{4 \pi} \int\!\!\int 10^{G/10} \cos\theta \, d\varphi \, d\theta

    Cells of 4 degrees, each with nine Gauss points, are halved both ways where the halves tell
    another integral than the whole, until all differences together are below 1e-4 of the mean. The
    error stated is the sum of the differences: that of the wholes, though the halves are used.
    """
    grid = np.meshgrid(
        np.arange(-180.0, 180.0, _COARSE_CELL_DEG),
        np.arange(-90.0, 90.0, _COARSE_CELL_DEG),
        indexing="ij",
    )
    west, south = grid[0].ravel(), grid[1].ravel()
    width = np.full(west.size, _COARSE_CELL_DEG)
    height = width
    whole = _integrals(gain, west, south, width, height, name)
    done, done_error = 0.0, 0.0
    for _ in range(_MOST_ROUNDS):
        halves = _halves(west, south, width, height)
        parts = _integrals(gain, *halves, name).reshape(4, -1)
        error = np.abs(parts.sum(axis=0) - whole)
        total = done + float(parts.sum())
        order = np.argsort(error)
        # Where too many cells were left as they are, the rest need not be much better.
        allowed = max(WANTED_SHARE * total, 2.0 * done_error) - done_error
        # The cells with the smallest errors are left as they are, the rest is halved.
        kept = int(np.searchsorted(np.cumsum(error[order]), 0.5 * allowed, side="right"))
        kept = max(kept, order.size - _MOST_CELLS // 4)
        if float(error.sum()) <= allowed:
            kept = order.size
        left, split = order[:kept], order[kept:]
        done += float(parts[:, left].sum())
        done_error += float(error[left].sum())
        if split.size == 0:
            break
        west, south, width, height = (values.reshape(4, -1)[:, split].ravel() for values in halves)
        whole = parts[:, split].ravel()
    else:
        done += float(whole.sum())
        done_error += float(error[split].sum())
    mean = done / (4.0 * math.pi)
    if mean == 0.0:
        found = "a pattern that radiates nothing in any direction"
        raise PatternError(Problem(where=f"antenna.{name}", found=found))
    return SphereMean(ratio=mean, error_db=10.0 * math.log10(1.0 + done_error / done))


def _halves(
    west: Angles, south: Angles, width: Angles, height: Angles
) -> tuple[Angles, Angles, Angles, Angles]:
    half_width, half_height = 0.5 * width, 0.5 * height
    return (
        np.concatenate((west, west + half_width, west, west + half_width)),
        np.concatenate((south, south, south + half_height, south + half_height)),
        np.tile(half_width, 4),
        np.tile(half_height, 4),
    )


def _integrals(
    gain: Gain, west: Angles, south: Angles, width: Angles, height: Angles, name: str
) -> Angles:
    """Integral over each cell of the gain as a ratio, over solid angle in steradians."""
    sums = np.empty(west.size)
    for start in range(0, west.size, _CHUNK_CELLS):
        cells = slice(start, start + _CHUNK_CELLS)
        azimuth = (west[cells, np.newaxis] + width[cells, np.newaxis] * _NODES)[:, :, np.newaxis]
        elevation = (south[cells, np.newaxis] + height[cells, np.newaxis] * _NODES)[
            :, np.newaxis, :
        ]
        gain_dbi = gain(azimuth, elevation)
        if np.isnan(gain_dbi).any():
            found = "directions without a gain (NaN)"
            raise PatternError(
                Problem(where=f"antenna.{name}", found=found, allowed="a gain all around")
            )
        density = 10.0 ** (gain_dbi / 10.0) * np.cos(np.radians(elevation))
        sums[cells] = np.einsum("cij,i,j->c", density, _WEIGHTS, _WEIGHTS)
    return sums * np.radians(width) * np.radians(height)


def peak_direction_deg(gain: Gain) -> tuple[float, float]:
    """Azimuth offset and elevation of the highest gain, within 0.0001 degree. [deg]

    Of several directions with the same gain the one nearest to the boresight is taken; NaN counts
    for nothing.
    """
    azimuths = np.arange(-180.0, 180.0, _SEARCH_STEP_DEG)
    azimuths = azimuths[np.argsort(np.abs(azimuths), kind="stable")]
    elevations = np.arange(-90.0, 90.0 + _SEARCH_STEP_DEG, _SEARCH_STEP_DEG)
    elevations = elevations[np.argsort(np.abs(elevations), kind="stable")]
    azimuth_deg, elevation_deg = _highest(gain, azimuths, elevations)
    reach_deg = 1.5 * _SEARCH_STEP_DEG
    middle_first = np.linspace(-1.0, 1.0, _ZOOM_POINTS)
    middle_first = middle_first[np.argsort(np.abs(middle_first), kind="stable")]
    for _ in range(_ZOOM_ROUNDS):
        near = np.clip(elevation_deg + reach_deg * middle_first, -90.0, 90.0)
        azimuth_deg, elevation_deg = _highest(gain, azimuth_deg + reach_deg * middle_first, near)
        reach_deg *= _ZOOM
    return azimuth_deg, elevation_deg


def _highest(gain: Gain, azimuths: Angles, elevations: Angles) -> tuple[float, float]:
    """Direction of the highest gain; the first of those that are as high but for rounding."""
    level = np.nan_to_num(gain(azimuths[:, np.newaxis], elevations[np.newaxis, :]), nan=-np.inf)
    first, second = np.unravel_index(np.argmax(level >= level.max() - _SAME_LEVEL_DB), level.shape)
    return float(azimuths[first]), float(elevations[second])
