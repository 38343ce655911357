"""One exact path between two places: profile, losses, angles, clearance and what blocks it."""

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from planner.geodesy import local_frame, true_bearing_and_distance
from planner.physics.diffraction import DiffractionResult, Polarization, delta_bullington_parts
from planner.physics.free_space import free_space_loss_db_scalar, wavelength_m_scalar
from planner.physics.fresnel import fresnel_radius_m
from planner.sweep.sampling import sampled_line
from planner.sweep.state import LEAST_DISTANCE_M
from planner.terrain import Terrain
from planner.units import EARTH_RADIUS_KM

NOT_COMPUTED = DiffractionResult(
    actual_bullington_db=math.nan,
    smooth_bullington_db=math.nan,
    spherical_earth_db=math.nan,
    loss_db=math.nan,
    effective_tx_height_m=math.nan,
    effective_rx_height_m=math.nan,
)


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Path:
    """A path from a to b. Everything that could not be computed is NaN, ``reason`` says why."""

    distance_m: float  # on the ellipsoid, at ground level
    azimuth_deg: float  # true, at a towards b
    back_azimuth_deg: float  # true, at b towards a
    elevation_angle_deg: float  # at a, towards b, or the radio horizon where the path is obstructed
    back_elevation_angle_deg: float  # at b, towards a or the radio horizon
    free_space_loss_db: float
    diffraction: DiffractionResult
    path_loss_db: float
    line_of_sight: bool  # nothing reaches the direct ray
    profile_distance_m: NDArray[np.float64]  # (n,) from a
    profile_ground_m: NDArray[np.float64]  # (n,) above the datum
    profile_obstacle_m: NDArray[np.float64]  # (n,) above the ground, as it counted in the loss
    a_height_m: float  # antenna above the datum
    b_height_m: float  # antenna above the datum
    frequency_mhz: float
    effective_earth_radius_km: float
    worst_clearance_m: float  # where the first Fresnel zone is least free; negative: blocked
    worst_clearance_ratio: float  # the same in first Fresnel radii
    worst_clearance_distance_m: float  # from a
    crosses_hole: bool
    reason: str  # empty when everything was computed

    @property
    def blocking_distance_m(self) -> float | None:
        """Distance from a of the dominant obstruction; None where nothing blocks."""
        return self.worst_clearance_distance_m if self.blocking_excess_m is not None else None

    @property
    def blocking_excess_m(self) -> float | None:
        """How far the dominant obstruction rises above the direct ray; None where nothing does."""
        return -self.worst_clearance_m if self.worst_clearance_m <= 0.0 else None

    @property
    def blocking_ground_m(self) -> float | None:
        """Ground under the dominant obstruction, above the datum; None where nothing blocks."""
        return self._at_blocking_point(self.profile_ground_m)

    @property
    def blocking_obstacle_m(self) -> float | None:
        """Height of trees or roofs on that ground, as they counted; None where nothing blocks."""
        return self._at_blocking_point(self.profile_obstacle_m)

    def _at_blocking_point(self, heights_m: NDArray[np.float64]) -> float | None:
        place_m = self.blocking_distance_m
        if place_m is None:
            return None
        return float(heights_m[int(np.searchsorted(self.profile_distance_m, place_m))])

    def earth_bulge_m(self) -> NDArray[np.float64]:
        """Height of the curved earth above the straight chord, at each profile point. (n,)"""
        d = self.profile_distance_m
        return np.asarray(d * (d[-1] - d) / (2000.0 * self.effective_earth_radius_km))

    def clearance_m(self) -> NDArray[np.float64]:
        """Height of the direct ray above ground and obstacles, at each profile point. (n,)"""
        d = self.profile_distance_m
        ray = self.a_height_m + (self.b_height_m - self.a_height_m) * d / d[-1]
        return np.asarray(
            ray - self.profile_ground_m - self.profile_obstacle_m - self.earth_bulge_m()
        )

    def fresnel_radius_m(self) -> NDArray[np.float64]:
        """Radius of the first Fresnel zone at each profile point, 0 at the ends. (n,)"""
        d = self.profile_distance_m
        return np.asarray(
            fresnel_radius_m(d, d[-1] - d, wavelength_m_scalar(self.frequency_mhz)), dtype=float
        )


def path_between(
    terrain: Terrain,
    *,
    a_latitude: float,
    a_longitude: float,
    a_height_m: float,
    b_latitude: float,
    b_longitude: float,
    b_height_m: float,
    frequency_mhz: float,
    k_factor: float,
    polarization: Polarization,
    obstacle_clearing_m: float = 0.0,
) -> Path:
    """Path from a to b over the terrain, sampled bilinearly at cell spacing.

    Parameters
    ----------
    terrain : Terrain
        The surface.
    a_latitude, a_longitude, b_latitude, b_longitude : float
        The ends. [WGS 84 decimal degrees]
    a_height_m, b_height_m : float
        Antenna heights above the ground at either end, above 0. [m]
    frequency_mhz, k_factor : float
        Frequency [MHz]; effective earth radius factor. [unitless]
    polarization : "vertical" or "horizontal"
    obstacle_clearing_m : float
        Obstacles nearer than this to either end do not count. [m]

    Returns
    -------
    Path
        With ``reason`` set, and NaN in what could not be computed, where an end lies outside the
        terrain or on a hole, the ends coincide, or the path crosses a hole.
    """
    azimuth, back_azimuth, distance = (
        float(value)
        for value in true_bearing_and_distance(a_latitude, a_longitude, b_latitude, b_longitude)
    )
    grid = terrain.grid
    a_east, a_north = (float(value) for value in grid.from_geographic(a_latitude, a_longitude))
    b_east, b_north = (float(value) for value in grid.from_geographic(b_latitude, b_longitude))
    a_row, a_col = (float(value) for value in grid.row_col(a_east, a_north))
    b_row, b_col = (float(value) for value in grid.row_col(b_east, b_north))
    radius_m = k_factor * EARTH_RADIUS_KM * 1000.0

    distances = np.array([0.0, distance])
    ground = np.array([math.nan, math.nan])
    obstacle = np.zeros(2)
    reason = ""
    for name, row, col in (("near", a_row, a_col), ("far", b_row, b_col)):
        if not reason and not grid.contains(row, col):
            reason = f"the {name} end lies outside the terrain"
    if not reason and not distance > 0.0:
        reason = "both ends are in one place"
    if not reason:
        intervals = max(1, math.ceil(math.hypot(b_row - a_row, b_col - a_col) - 1e-9))
        frame = local_frame(grid.crs, a_east, a_north)
        shares = np.linspace(0.0, 1.0, intervals + 1)
        along = np.asarray(
            frame.distance_m(shares * (b_east - a_east), shares * (b_north - a_north))
        )
        distances = along * (distance / along[-1])
        ground = sampled_line(terrain.ground_elevation_m, a_row, a_col, b_row, b_col, intervals)
        ground[0] = terrain.standing_elevation_m(a_row, a_col)
        ground[-1] = terrain.standing_elevation_m(b_row, b_col)
        obstacle = np.zeros(intervals + 1)
        if terrain.obstacle_height_m is not None:
            obstacle = sampled_line(
                terrain.obstacle_height_m, a_row, a_col, b_row, b_col, intervals
            )
            obstacle[np.minimum(distances, distance - distances) < obstacle_clearing_m] = 0.0
            obstacle[[0, -1]] = 0.0
        for name, end in (("near", 0), ("far", -1)):
            if not reason and math.isnan(ground[end]):
                reason = f"no terrain data at the {name} end"
    crosses_hole = not reason and bool(np.isnan(ground).any())
    if crosses_hole:
        reason = "the path crosses missing terrain data"
    for array in (distances, ground, obstacle):
        array.flags.writeable = False

    tx_height = float(ground[0]) + a_height_m
    rx_height = float(ground[-1]) + b_height_m
    slant = math.hypot(distance, rx_height - tx_height)
    if not reason and slant < LEAST_DISTANCE_M:
        reason = "both antennas are in one place"
    free_space = free_space_loss_db_scalar(slant, frequency_mhz)
    diffraction = NOT_COMPUTED
    clear, ratio, where = math.nan, math.nan, math.nan
    elevation, back_elevation = math.nan, math.nan
    line_of_sight = False
    if not reason:
        surface = ground + obstacle
        parts = delta_bullington_parts(
            distances,
            np.ascontiguousarray(ground),
            surface,
            tx_height,
            rx_height,
            radius_m,
            frequency_mhz,
            polarization == "vertical",
            0.0,
        )
        diffraction = DiffractionResult(
            actual_bullington_db=parts[0],
            smooth_bullington_db=parts[1],
            spherical_earth_db=parts[2],
            loss_db=parts[3],
            effective_tx_height_m=parts[4],
            effective_rx_height_m=parts[5],
        )
        elevation = _horizon_angle_deg(distances, surface, tx_height, rx_height, radius_m)
        back_elevation = _horizon_angle_deg(
            distance - distances[::-1], surface[::-1], rx_height, tx_height, radius_m
        )
        clear, ratio, where, line_of_sight = _worst_clearance(
            distances, surface, tx_height, rx_height, radius_m, frequency_mhz
        )
    return Path(
        distance_m=distance,
        azimuth_deg=azimuth,
        back_azimuth_deg=back_azimuth,
        elevation_angle_deg=elevation,
        back_elevation_angle_deg=back_elevation,
        free_space_loss_db=free_space,
        diffraction=diffraction,
        path_loss_db=free_space + diffraction.loss_db,
        line_of_sight=line_of_sight,
        profile_distance_m=distances,
        profile_ground_m=ground,
        profile_obstacle_m=obstacle,
        a_height_m=tx_height,
        b_height_m=rx_height,
        frequency_mhz=frequency_mhz,
        effective_earth_radius_km=radius_m / 1000.0,
        worst_clearance_m=clear,
        worst_clearance_ratio=ratio,
        worst_clearance_distance_m=where,
        crosses_hole=crosses_hole,
        reason=reason,
    )


def _horizon_angle_deg(
    distance_m: NDArray[np.float64],
    surface_m: NDArray[np.float64],
    near_m: float,
    far_m: float,
    earth_radius_m: float,
) -> float:
    """Elevation angle at the near end of the steepest of: the far antenna, any profile point."""
    heights = np.append(surface_m[1:-1], far_m)
    d = distance_m[1:]
    return math.degrees(math.atan(np.max((heights - near_m) / d - d / (2.0 * earth_radius_m))))


def _worst_clearance(
    distance_m: NDArray[np.float64],
    surface_m: NDArray[np.float64],
    tx_height_m: float,
    rx_height_m: float,
    earth_radius_m: float,
    frequency_mhz: float,
) -> tuple[float, float, float, bool]:
    """Worst clearance [m], in Fresnel radii, its distance [m], and whether the ray is free.

    A path without a point between its ends is free and has no worst point (NaN).
    """
    if distance_m.size < 3:
        return math.nan, math.nan, math.nan, True
    d = distance_m[1:-1]
    rest = distance_m[-1] - d
    ray = (tx_height_m * rest + rx_height_m * d) / distance_m[-1]
    clearance = ray - surface_m[1:-1] - d * rest / (2.0 * earth_radius_m)
    ratio = clearance / fresnel_radius_m(d, rest, wavelength_m_scalar(frequency_mhz))
    worst = int(np.argmin(ratio))
    return (
        float(clearance[worst]),
        float(ratio[worst]),
        float(d[worst]),
        bool(np.all(clearance > 0.0)),
    )
