"""True directions and lengths on the WGS 84 ellipsoid, and how a metric grid departs from them.

A grid of squares in metres is not true to scale and its north is not true north.
:class:`LocalFrame` holds what is needed to turn a step on the grid into a true bearing and a true
distance about one point: scale factor, its gradient and the grid convergence. This is the only
place where grid north meets true north.

The frame is measured, not looked up: a few points around the place are carried through PROJ to
WGS 84 and their geodesics solved (C. F. F. Karney, "Algorithms for geodesics", Journal of Geodesy
87, 2013, as in GeographicLib). So it holds for every conformal projection and contains the change
of datum as well: a grid on another ellipsoid differs in length by up to 1 part in 8,000.
"""

import math
from collections.abc import Sequence
from dataclasses import dataclass
from functools import lru_cache
from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray
from pyproj import CRS, Geod, Transformer

from planner.errors import Problem, TerrainError
from planner.physics._jit import inlined, scalar

WGS84 = Geod(ellps="WGS84")

USABLE_SCALE = (0.999, 1.001)  # a grid whose scale stays inside is used as it is
_CONFORMAL_DIFFERENCE = 2e-5  # largest difference of the scales east and north of a conformal grid
_SCALE_STEP_M = 500.0  # half length of the lines on which scale and convergence are measured
_GRADIENT_STEP_M = 2000.0  # half distance of the points whose scales give the gradient

# Words in the names of projection methods (EPSG Geodetic Parameter Dataset, ISO 19162) that are
# conformal. Others may look conformal near their centre, as an equal-area projection does.
_CONFORMAL_WORDS = ("mercator", "conformal", "stereographic", "krovak", "gauss")
_NOT_CONFORMAL_WORDS = ("pseudo", "equal area", "equidistant", "spherical")


@inlined
def chord_distance_m(
    delta_east_m: Any,
    delta_north_m: Any,
    scale: Any,
    gradient_east_per_m: Any,
    gradient_north_per_m: Any,
) -> Any:
    """True length of a straight step on the grid, for steps of up to some tens of kilometres.

    Parameters: the step on the grid [m], the point scale at its start [unitless] and the gradient
    of the scale [1/m]; floats, or arrays that broadcast. NaN gives NaN.

    Returns the length on the ellipsoid [m]: the grid length over the scale at the middle of the
    chord.
    """
    middle_scale = scale + 0.5 * (
        gradient_east_per_m * delta_east_m + gradient_north_per_m * delta_north_m
    )
    return np.sqrt(delta_east_m * delta_east_m + delta_north_m * delta_north_m) / middle_scale


@scalar
def chord_true_azimuth_deg(
    delta_east_m: Any,
    delta_north_m: Any,
    convergence_deg: Any,
    scale: Any,
    gradient_east_per_m: Any,
    gradient_north_per_m: Any,
) -> Any:
    r"""True azimuth, at its start, of the geodesic between the ends of a straight grid step.

    Parameters as for :func:`chord_distance_m`, and the grid convergence at the start [deg],
    counted so that true azimuth = grid azimuth + convergence. NaN gives NaN; a step of no length
    gives the convergence.

    Returns degrees clockwise from true north, 0 <= azimuth < 360.

    Notes
    -----
    On a conformal grid geodesics bend like light in a medium of index 1 / scale, towards the
    smaller scale. Half the bend over the chord is the angle between the two ("arc-to-chord", t -
    T):

    .. math:: t - T = (g_E \, \Delta N - g_N \, \Delta E) / (2 k)

    with the gradient g of the scale k (J. P. Snyder, Map Projections: A Working Manual, USGS
    Professional Paper 1395, 1987, gives it for the single projections; the general form follows
    from Fermat's principle and is tested against geodesics).
    """
    arc_to_chord_rad = (
        0.5 * (gradient_east_per_m * delta_north_m - gradient_north_per_m * delta_east_m) / scale
    )
    azimuth_deg = (
        np.degrees(np.arctan2(delta_east_m, delta_north_m) + arc_to_chord_rad) + convergence_deg
    )
    # Twice, since the remainder of a tiny negative angle rounds to 360.
    return np.mod(np.mod(azimuth_deg, 360.0), 360.0)


@dataclass(frozen=True, slots=True, kw_only=True)
class LocalFrame:
    """True directions and lengths about one point of a conformal metric grid."""

    latitude: float  # of the point, WGS 84
    longitude: float
    easting_m: float  # of the point, on the grid
    northing_m: float
    scale: float  # length on the grid over length on the ellipsoid, at the point
    scale_gradient_east_per_m: float
    scale_gradient_north_per_m: float
    convergence_deg: float  # true azimuth = grid azimuth + convergence; -180 <= c < 180

    def true_azimuth_deg(
        self, delta_east_m: ArrayLike, delta_north_m: ArrayLike
    ) -> NDArray[np.float64]:
        """True azimuth at the point towards the end of a grid step; any shapes that broadcast.

        Within 0.02 degrees of the geodesic for steps of up to 30 km where the scale stays within
        0.99 to 1.01. See :func:`chord_true_azimuth_deg`.
        """
        return np.asarray(
            chord_true_azimuth_deg.py_func(
                np.asarray(delta_east_m, dtype=float),
                np.asarray(delta_north_m, dtype=float),
                self.convergence_deg,
                self.scale,
                self.scale_gradient_east_per_m,
                self.scale_gradient_north_per_m,
            )
        )

    def distance_m(self, delta_east_m: ArrayLike, delta_north_m: ArrayLike) -> NDArray[np.float64]:
        """True length of a grid step from the point; any shapes that broadcast.

        Within 1 m of the geodesic for steps of up to 30 km. See :func:`chord_distance_m`.
        """
        return np.asarray(
            chord_distance_m.py_func(
                np.asarray(delta_east_m, dtype=float),
                np.asarray(delta_north_m, dtype=float),
                self.scale,
                self.scale_gradient_east_per_m,
                self.scale_gradient_north_per_m,
            )
        )


@lru_cache(maxsize=64)
def transformer_to_wgs84(crs: CRS) -> Transformer:
    """From (easting, northing) of a CRS to (longitude, latitude), in this order."""
    return Transformer.from_crs(crs, CRS.from_epsg(4326), always_xy=True)


@lru_cache(maxsize=64)
def transformer_from_wgs84(crs: CRS) -> Transformer:
    """From (longitude, latitude) to (easting, northing) of a CRS, in this order."""
    return Transformer.from_crs(CRS.from_epsg(4326), crs, always_xy=True)


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class _Distortion:
    """How a grid departs from the ellipsoid at some points; arrays of one shape."""

    scale_east: NDArray[np.float64]
    scale_north: NDArray[np.float64]
    convergence_deg: NDArray[np.float64]  # true azimuth of grid north
    axes_angle_deg: NDArray[np.float64]  # true azimuth of grid east less that of grid north


def _turn_deg(to_deg: NDArray[np.float64], from_deg: NDArray[np.float64]) -> NDArray[np.float64]:
    """``to - from`` on the circle, -180 <= turn < 180."""
    return np.asarray(np.mod(to_deg - from_deg + 180.0, 360.0) - 180.0)


def _distortion(crs: CRS, easting_m: ArrayLike, northing_m: ArrayLike) -> _Distortion:
    """Scales and directions of the grid's axes, measured on short lines through each point."""
    easting = np.asarray(easting_m, dtype=float)
    northing = np.asarray(northing_m, dtype=float)
    step = _SCALE_STEP_M
    east = np.array([0.0, step, -step, 0.0, 0.0]).reshape((5,) + (1,) * easting.ndim)
    north = np.array([0.0, 0.0, 0.0, step, -step]).reshape((5,) + (1,) * easting.ndim)
    longitude, latitude = transformer_to_wgs84(crs).transform(easting + east, northing + north)
    with np.errstate(invalid="ignore"):
        lost = ~(np.isfinite(longitude) & np.isfinite(latitude)).all(axis=0)
    longitude = np.where(lost, np.nan, longitude)
    latitude = np.where(lost, np.nan, latitude)

    def azimuth_and_length(end: int) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
        azimuth, _, length = WGS84.inv(longitude[0], latitude[0], longitude[end], latitude[end])
        return np.asarray(azimuth), np.asarray(length)

    to_east, east_m = azimuth_and_length(1)
    to_west, west_m = azimuth_and_length(2)
    to_north, north_m = azimuth_and_length(3)
    to_south, south_m = azimuth_and_length(4)
    # The mean of the directions there and back is free of the bend of the geodesic.
    north_deg = to_north + 0.5 * _turn_deg(to_south + 180.0, to_north)
    east_deg = to_east + 0.5 * _turn_deg(to_west + 180.0, to_east)
    return _Distortion(
        scale_east=2.0 * step / (east_m + west_m),
        scale_north=2.0 * step / (north_m + south_m),
        convergence_deg=_turn_deg(north_deg, np.zeros_like(north_deg)),
        axes_angle_deg=_turn_deg(east_deg, north_deg),
    )


def local_frame(crs: CRS, easting_m: float, northing_m: float) -> LocalFrame:
    """The frame about a point of a conformal metric grid.

    At a pole, where every direction is south, azimuths count from the meridian that ``longitude``
    names. Raises TerrainError where the CRS has no meaning at the point.
    """
    step = _GRADIENT_STEP_M
    measured = _distortion(
        crs,
        easting_m + np.array([0.0, step, -step, 0.0, 0.0]),
        northing_m + np.array([0.0, 0.0, 0.0, step, -step]),
    )
    scale = 0.5 * (measured.scale_east + measured.scale_north)
    if not np.isfinite(scale).all():
        raise TerrainError(
            Problem(
                where=f"easting {easting_m:.1f} m, northing {northing_m:.1f} m",
                found=f"a place outside the range of the grid's projection ({crs.name})",
                advice="Choose a grid that covers the place",
            )
        )
    longitude, latitude = transformer_to_wgs84(crs).transform(easting_m, northing_m)
    return LocalFrame(
        latitude=float(latitude),
        longitude=float(longitude),
        easting_m=float(easting_m),
        northing_m=float(northing_m),
        scale=float(scale[0]),
        scale_gradient_east_per_m=float((scale[1] - scale[2]) / (2.0 * step)),
        scale_gradient_north_per_m=float((scale[3] - scale[4]) / (2.0 * step)),
        convergence_deg=float(measured.convergence_deg[0]),
    )


def true_bearing_and_distance(
    from_latitude: ArrayLike,
    from_longitude: ArrayLike,
    to_latitude: ArrayLike,
    to_longitude: ArrayLike,
) -> tuple[NDArray[np.float64], NDArray[np.float64], NDArray[np.float64]]:
    """Geodesics on WGS 84: azimuth at the start, azimuth at the end back to the start, length.

    Any shapes that broadcast; degrees from true north, 0 <= a < 360, and metres. NaN gives NaN.
    Source: Karney 2013, as in PROJ.
    """
    broadcast = np.broadcast_arrays(
        *(
            np.asarray(value, dtype=float)
            for value in (from_longitude, from_latitude, to_longitude, to_latitude)
        )
    )
    azimuth, back_azimuth, distance = WGS84.inv(
        broadcast[0], broadcast[1], broadcast[2], broadcast[3]
    )
    return (
        np.mod(np.mod(np.asarray(azimuth), 360.0), 360.0),
        np.mod(np.mod(np.asarray(back_azimuth), 360.0), 360.0),
        np.asarray(distance),
    )


def point_at(
    latitude: ArrayLike, longitude: ArrayLike, azimuth_deg: ArrayLike, distance_m: ArrayLike
) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """(latitude, longitude) at a true azimuth and distance from a point; shapes broadcast."""
    broadcast = np.broadcast_arrays(
        *(
            np.asarray(value, dtype=float)
            for value in (longitude, latitude, azimuth_deg, distance_m)
        )
    )
    end_longitude, end_latitude, _ = WGS84.fwd(
        broadcast[0], broadcast[1], broadcast[2], broadcast[3]
    )
    return np.asarray(end_latitude), np.asarray(end_longitude)


def central_point(centres: Sequence[tuple[float, float]]) -> tuple[float, float]:
    """(latitude, longitude) in the middle of places, also across the 180th meridian or a pole."""
    degrees = np.radians(np.asarray(centres, dtype=float).reshape(-1, 2))
    latitude, longitude = degrees[:, 0], degrees[:, 1]
    x = float(np.mean(np.cos(latitude) * np.cos(longitude)))
    y = float(np.mean(np.cos(latitude) * np.sin(longitude)))
    z = float(np.mean(np.sin(latitude)))
    return math.degrees(math.atan2(z, math.hypot(x, y))), math.degrees(math.atan2(y, x))


def utm_or_ups_crs(latitude: float, longitude: float) -> CRS:
    """The UTM zone (WGS 84) of a place, or UPS north of 84 N and south of 80 S.

    Zones are 6 degrees wide from 180 W on, without the exceptions that military grids make around
    Norway. Source: NGA.SIG.0012, The Universal Grids and the Transverse Mercator and Polar
    Stereographic Map Projections, 2014.
    """
    if latitude > 84.0:
        return CRS.from_epsg(5041)
    if latitude < -80.0:
        return CRS.from_epsg(5042)
    zone = math.floor(((longitude + 180.0) % 360.0) / 6.0) % 60 + 1
    return CRS.from_epsg((32600 if latitude >= 0.0 else 32700) + zone)


def horizontal_crs(crs: CRS) -> CRS:
    """The horizontal part: a compound CRS without its vertical axis, a 3D one flattened."""
    if crs.is_compound:
        return horizontal_crs(crs.sub_crs_list[0])
    return crs.to_2d() if len(crs.axis_info) == 3 else crs


def projection_trouble(crs: CRS) -> str:
    """Why a CRS cannot be a metric grid wherever it is used; "" if it can."""
    flat = horizontal_crs(crs)
    base = flat.source_crs if flat.is_bound and flat.source_crs is not None else flat
    if not base.is_projected or base.coordinate_operation is None:
        return "it is not projected"
    if any(abs(axis.unit_conversion_factor - 1.0) > 1e-9 for axis in base.axis_info):
        return f"its unit is the {base.axis_info[0].unit_name}"
    if "west" in {axis.direction.lower() for axis in base.axis_info}:
        return "its axes do not point east and north"
    method = base.coordinate_operation.method_name.lower()
    if not any(word in method for word in _CONFORMAL_WORDS) or any(
        word in method for word in _NOT_CONFORMAL_WORDS
    ):
        return f"its projection ({base.coordinate_operation.method_name}) is not conformal"
    return ""


def grid_trouble(
    crs: CRS,
    bounds: tuple[float, float, float, float],
    *,
    smallest_scale: float = USABLE_SCALE[0],
    largest_scale: float = USABLE_SCALE[1],
) -> str:
    """Why a CRS cannot be the metric grid over (left, bottom, right, top); "" if it can.

    It must be projected, in metres, east and north, conformal, and its scale on the WGS 84
    ellipsoid must stay within the two limits at 5 by 5 points over the bounds.
    """
    trouble = projection_trouble(crs)
    if trouble:
        return trouble
    left, bottom, right, top = bounds
    easting, northing = np.meshgrid(np.linspace(left, right, 5), np.linspace(bottom, top, 5))
    measured = _distortion(crs, easting, northing)
    scale = 0.5 * (measured.scale_east + measured.scale_north)
    if not np.isfinite(scale).all():
        return "part of the area lies outside the range of its projection"
    if (
        np.abs(measured.scale_east - measured.scale_north).max() > _CONFORMAL_DIFFERENCE
        or np.abs(measured.axes_angle_deg - 90.0).max() > 0.005
    ):
        return "it is not conformal over the area"
    if scale.min() < smallest_scale or scale.max() > largest_scale:
        return f"its scale over the area runs from {scale.min():.5f} to {scale.max():.5f}"
    return ""


def grid_is_usable(crs: CRS, bounds: tuple[float, float, float, float]) -> bool:
    """Metric, conformal and within 0.999 to 1.001 of true scale over (left, bottom, right, top)."""
    return grid_trouble(crs, bounds) == ""
