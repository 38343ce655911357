"""Complete delta-Bullington diffraction loss, ITU-R P.526-15 section 4.5.

The loss is Bullington's on the real profile, plus what a smooth spherical earth would add beyond
Bullington's on the smooth profile. The parts stand in ``bullington``, ``smooth_surface`` and
``spherical_earth``; the raster sweep combines the same parts.
"""

import math
from dataclasses import dataclass
from typing import Literal

import numpy as np
from numpy.typing import ArrayLike, NDArray

from planner.physics._jit import scalar
from planner.physics.bullington import bullington_profile_loss_db
from planner.physics.free_space import wavelength_m_scalar
from planner.physics.smooth_surface import profile_smooth_surface_ends
from planner.physics.spherical_earth import spherical_earth_loss_db_scalar

Polarization = Literal["vertical", "horizontal"]


@dataclass(frozen=True, slots=True, kw_only=True)
class DiffractionResult:
    """Delta-Bullington loss of one path and its parts."""

    actual_bullington_db: float  # Bullington on terrain with obstacles
    smooth_bullington_db: float  # Bullington on the smooth profile
    spherical_earth_db: float  # smooth spherical earth
    loss_db: float  # actual + max(spherical - smooth, 0)
    effective_tx_height_m: float  # above the fitted smooth surface
    effective_rx_height_m: float  # above the fitted smooth surface


@scalar
def combined_loss_db(actual_db: float, smooth_db: float, spherical_db: float) -> float:
    """Equation (60) of P.526-15: what the sphere adds beyond Bullington's smooth-earth loss."""
    return actual_db + max(spherical_db - smooth_db, 0.0)


@scalar
def delta_bullington_parts(
    distance_m: NDArray,
    ground_m: NDArray,
    surface_m: NDArray,
    tx_height_m: float,
    rx_height_m: float,
    earth_radius_m: float,
    frequency_mhz: float,
    vertical: bool,
    sea_fraction: float,
) -> tuple[float, float, float, float, float, float]:
    """Parts of the loss of one profile, all heights above the datum, all lengths in metres.

    Returns actual, smooth, spherical and combined loss, then the two effective heights.
    """
    wavelength = wavelength_m_scalar(frequency_mhz)
    actual = bullington_profile_loss_db(
        distance_m, surface_m, tx_height_m, rx_height_m, earth_radius_m, wavelength
    )
    tx_surface, rx_surface = profile_smooth_surface_ends(
        distance_m, ground_m, tx_height_m, rx_height_m
    )
    tx_effective = tx_height_m - tx_surface
    rx_effective = rx_height_m - rx_surface
    smooth = bullington_profile_loss_db(
        distance_m,
        np.zeros(distance_m.size),
        tx_effective,
        rx_effective,
        earth_radius_m,
        wavelength,
    )
    spherical = spherical_earth_loss_db_scalar(
        distance_m[-1],
        tx_effective,
        rx_effective,
        earth_radius_m,
        wavelength,
        frequency_mhz,
        vertical,
        sea_fraction,
    )
    return (
        actual,
        smooth,
        spherical,
        combined_loss_db(actual, smooth, spherical),
        tx_effective,
        rx_effective,
    )


def delta_bullington(
    distance_km: ArrayLike,
    ground_elevation_m: ArrayLike,
    *,
    tx_height_m: float,
    rx_height_m: float,
    frequency_mhz: float,
    effective_earth_radius_km: float,
    polarization: Polarization = "vertical",
    obstacle_height_m: ArrayLike | None = None,
    sea_fraction: float = 0.0,
) -> DiffractionResult:
    """Diffraction loss of one path by the complete delta-Bullington method.

    Parameters
    ----------
    distance_km : array, shape (n,), n >= 2
        Distances of the profile points from the transmitter, first 0, strictly rising. [km]
    ground_elevation_m : array, shape (n,)
        Bare ground above the datum. [m]
    tx_height_m, rx_height_m : float
        Antenna heights above the ground at the first and last point, above 0. [m]
    frequency_mhz : float
        Frequency; the Recommendation gives no hard limits, its spherical part is meant for
        10 MHz and above. [MHz]
    effective_earth_radius_km : float
        Effective earth radius, k times 6371. [km]
    polarization : "vertical" or "horizontal"
        Polarization; acts in the spherical part only.
    obstacle_height_m : array, shape (n,), optional
        Trees and buildings above the ground; the end points' values are not used. [m]
    sea_fraction : float
        Share of the path over sea, 0 to 1. [unitless]

    Returns
    -------
    DiffractionResult
        Every field NaN when a height of the profile is NaN: a path over missing data has no loss.

    Raises
    ------
    ValueError
        Shapes differ, fewer than two points, distances not rising from 0, or a number outside
        its range.

    References
    ----------
    ITU-R P.526-15 (2019), sections 4.5.1 and 4.5.2, equations (48) to (60), and section 3.2;
    effective heights by the smooth-surface fit of ITU-R P.1812-7 (2023), section 5.6.2. Equation
    numbers are from memory. See docs/references.md.
    """
    distance = np.ascontiguousarray(distance_km, dtype=np.float64) * 1000.0
    ground = np.ascontiguousarray(ground_elevation_m, dtype=np.float64)
    if distance.ndim != 1 or distance.size < 2 or ground.shape != distance.shape:
        raise ValueError(
            "distance_km and ground_elevation_m must be one-dimensional, equally long, 2 or more"
        )
    if distance[0] != 0.0 or not np.all(np.diff(distance) > 0.0):
        raise ValueError("distance_km must begin at 0 and rise strictly")
    surface = ground.copy()
    if obstacle_height_m is not None:
        obstacle = np.asarray(obstacle_height_m, dtype=np.float64)
        if obstacle.shape != ground.shape:
            raise ValueError("obstacle_height_m must be as long as ground_elevation_m")
        surface[1:-1] += obstacle[1:-1]
    for name, value in (
        ("tx_height_m", tx_height_m),
        ("rx_height_m", rx_height_m),
        ("frequency_mhz", frequency_mhz),
        ("effective_earth_radius_km", effective_earth_radius_km),
    ):
        if not (value > 0.0 and math.isfinite(value)):
            raise ValueError(f"{name} is {value}, must be above 0")
    if not 0.0 <= sea_fraction <= 1.0:
        raise ValueError(f"sea_fraction is {sea_fraction}, outside 0..1")
    if polarization not in ("vertical", "horizontal"):
        raise ValueError(f"polarization is {polarization!r}, must be 'vertical' or 'horizontal'")
    if np.isnan(ground).any() or np.isnan(surface).any():
        parts = (math.nan,) * 6
    else:
        parts = delta_bullington_parts(
            distance,
            ground,
            surface,
            ground[0] + tx_height_m,
            ground[-1] + rx_height_m,
            effective_earth_radius_km * 1000.0,
            float(frequency_mhz),
            polarization == "vertical",
            float(sea_fraction),
        )
    actual, smooth, spherical, loss, tx_effective, rx_effective = parts
    return DiffractionResult(
        actual_bullington_db=actual,
        smooth_bullington_db=smooth,
        spherical_earth_db=spherical,
        loss_db=loss,
        effective_tx_height_m=tx_effective,
        effective_rx_height_m=rx_effective,
    )
