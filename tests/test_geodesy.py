"""True directions and lengths: against geodesics, a published example and closed forms."""

import math

import numpy as np
import pytest
from pyproj import CRS, Geod, Proj, Transformer

from planner import geodesy
from planner.errors import TerrainError

AZIMUTHS_DEG = np.arange(0.0, 360.0, 7.5)

# (what, EPSG code of the grid, latitude, longitude)
PLACES = [
    ("middle of a UTM zone", 32633, 47.0, 15.0),
    ("edge of a UTM zone at the equator", 32633, 0.1, 17.99),
    ("southern hemisphere", 32719, -33.4, -71.9),
    ("70 N, edge of a UTM zone", 32633, 70.0, 17.9),
    ("70 S", 32719, -70.0, -71.9),
    ("180th meridian", 32760, -17.0, 179.95),
    ("UPS at 86 N", 5041, 86.0, 40.0),
    ("UPS near the south pole", 5042, -89.9, 40.0),
    ("UPS at the north pole", 5041, 90.0, 0.0),
    ("Lambert conformal conic", 2154, 43.0, 6.9),
    ("transverse Mercator on the Bessel ellipsoid", 31287, 47.2, 10.2),
    ("transverse Mercator on the Airy ellipsoid", 27700, 57.0, -6.0),
    ("oblique Mercator", 21781, 46.5, 7.5),
]


def _frame_and_steps(code, latitude, longitude, distance_m):
    """The frame at a place, and grid steps to points at a distance all around it, from Geod."""
    crs = CRS.from_epsg(code)
    to_grid = Transformer.from_crs(4326, crs, always_xy=True)
    easting, northing = to_grid.transform(longitude, latitude)
    frame = geodesy.local_frame(crs, easting, northing)
    same = np.ones_like(AZIMUTHS_DEG)
    end_longitude, end_latitude, _ = Geod(ellps="WGS84").fwd(
        frame.longitude * same, frame.latitude * same, AZIMUTHS_DEG, distance_m * same
    )
    end_easting, end_northing = to_grid.transform(end_longitude, end_latitude)
    return frame, end_easting - easting, end_northing - northing


@pytest.mark.parametrize(("what", "code", "latitude", "longitude"), PLACES)
@pytest.mark.parametrize("distance_m", [100.0, 5_000.0, 30_000.0])
def test_frame_agrees_with_geodesics(what, code, latitude, longitude, distance_m):
    """Up to 30 km, azimuths agree with Karney's geodesics to 0.001 degrees and lengths to 0.2 m."""
    frame, east, north = _frame_and_steps(code, latitude, longitude, distance_m)
    turn_deg = (frame.true_azimuth_deg(east, north) - AZIMUTHS_DEG + 180.0) % 360.0 - 180.0
    assert float(np.abs(turn_deg).max()) < 0.001, what
    # A change of datum by seven parameters is itself only good to some parts in a million.
    assert float(np.abs(frame.distance_m(east, north) - distance_m).max()) < 0.2, what


def test_frame_meets_the_published_example():
    """Flinders Peak to Buninyong, as printed for zone 55.

    Geocentric Datum of Australia Technical Manual, ICSM, version 2.4, worked examples (on GRS 80,
    which differs from WGS 84 by 0.1 mm in the semi-minor axis); figures from memory.
    """
    flinders = (-(37 + 57 / 60 + 3.72030 / 3600), 144 + 25 / 60 + 29.52440 / 3600)
    buninyong = (-(37 + 39 / 60 + 10.15610 / 3600), 143 + 55 / 60 + 35.38390 / 3600)
    azimuth, back_azimuth, distance = geodesy.true_bearing_and_distance(*flinders, *buninyong)
    printed_azimuth_deg = 306 + 52 / 60 + 5.37 / 3600
    printed_back_azimuth_deg = 127 + 10 / 60 + 25.07 / 3600
    printed_distance_m = 54_972.271
    assert printed_azimuth_deg == pytest.approx(azimuth, abs=0.005 / 3600)
    assert printed_back_azimuth_deg == pytest.approx(back_azimuth, abs=0.005 / 3600)
    assert printed_distance_m == pytest.approx(distance, abs=0.0005)

    frame = geodesy.local_frame(CRS.from_epsg(32755), 273_741.297, 5_796_489.777)
    # The manual counts convergence from true to grid north, the other way round.
    printed_convergence_deg = 1 + 35 / 60 + 3.65 / 3600
    assert printed_convergence_deg == pytest.approx(frame.convergence_deg, abs=0.01 / 3600)
    east, north = 228_854.052 - 273_741.297, 5_828_259.038 - 5_796_489.777
    assert float(azimuth) == pytest.approx(frame.true_azimuth_deg(east, north), abs=0.001)
    assert printed_distance_m == pytest.approx(frame.distance_m(east, north), abs=0.5)


@pytest.mark.parametrize("code", [32633, 32719, 5041, 2154])
def test_frame_agrees_with_the_projections_own_factors(code):
    """Scale and convergence measured on short lines are those PROJ derives from its formulas."""
    place = {32633: (47.0, 12.1), 32719: (-33.4, -71.9), 5041: (86.0, 40.0), 2154: (43.0, 6.9)}
    latitude, longitude = place[code]
    crs = CRS.from_epsg(code)
    easting, northing = Transformer.from_crs(4326, crs, always_xy=True).transform(
        longitude, latitude
    )
    frame = geodesy.local_frame(crs, easting, northing)
    factors = Proj(crs).get_factors(longitude, latitude)
    assert factors.meridional_scale == pytest.approx(frame.scale, abs=2e-9)
    assert factors.meridian_convergence == pytest.approx(frame.convergence_deg, abs=1e-7)


def test_convergence_has_the_sign_of_the_side():
    """East of the central meridian in the north, grid north lies east of true north."""
    crs = CRS.from_epsg(32633)
    frame = geodesy.local_frame(crs, 600_000.0, 5_200_000.0)
    offset_deg = frame.longitude - 15.0
    expected = math.degrees(
        math.atan(math.tan(math.radians(offset_deg)) * math.sin(math.radians(frame.latitude)))
    )  # on the sphere: J. P. Snyder, USGS Professional Paper 1395 (1987), equation 8-5
    assert expected == pytest.approx(frame.convergence_deg, abs=0.002)
    assert expected > 0.9


def test_bend_of_the_geodesic_is_needed():
    """At the edge of a zone the arc-to-chord term is larger than the error that is left."""
    frame, east, north = _frame_and_steps(32633, 0.1, 17.99, 30_000.0)
    without = geodesy.chord_true_azimuth_deg(
        east[0], north[0], frame.convergence_deg, frame.scale, 0.0, 0.0
    )
    error_deg = abs((without - AZIMUTHS_DEG[0] + 180.0) % 360.0 - 180.0)
    left_deg = 0.005  # the test above leaves less than 0.001
    assert left_deg < error_deg


def test_compiled_formulas_are_the_plain_ones():
    """The kernels' compiled scalars and the arrays' plain code give the same numbers."""
    frame, east, north = _frame_and_steps(2154, 43.0, 6.9, 30_000.0)
    gradient = (frame.scale_gradient_east_per_m, frame.scale_gradient_north_per_m)
    for i in range(east.size):
        azimuth = geodesy.chord_true_azimuth_deg(
            east[i], north[i], frame.convergence_deg, frame.scale, *gradient
        )
        distance = geodesy.chord_distance_m(east[i], north[i], frame.scale, *gradient)
        plain_azimuth = float(frame.true_azimuth_deg(east[i], north[i]))
        assert plain_azimuth == pytest.approx(azimuth, abs=1e-11)
        assert float(frame.distance_m(east[i], north[i])) == pytest.approx(distance, rel=1e-15)


def test_azimuth_stays_below_360_and_keeps_nan():
    """A direction a hair west of north is 0 up to 360, never 360; NaN stays NaN."""
    azimuth = geodesy.chord_true_azimuth_deg(-1e-18, 1.0, 0.0, 1.0, 0.0, 0.0)
    assert 0.0 <= azimuth < 360.0
    assert math.isnan(geodesy.chord_true_azimuth_deg(math.nan, 1.0, 0.0, 1.0, 0.0, 0.0))
    assert math.isnan(geodesy.chord_distance_m(math.nan, 1.0, 1.0, 0.0, 0.0))
    assert geodesy.chord_distance_m(0.0, 0.0, 1.0, 0.0, 0.0) == 0.0
    exact = [
        geodesy.chord_true_azimuth_deg(east, north, 0.0, 1.0, 0.0, 0.0)
        for east, north in ((0.0, 1.0), (1.0, 0.0), (0.0, -1.0), (-1.0, 0.0))
    ]
    assert exact == [0.0, 90.0, 180.0, 270.0]


def test_frame_outside_the_projection_is_refused():
    """A place where the projection has no meaning is an error that names the place."""
    with pytest.raises(TerrainError, match=r"easting 90000000\.0 m.*outside the range"):
        geodesy.local_frame(CRS.from_epsg(32633), 9e7, 9e7)


def test_point_at_turns_bearing_and_distance_around():
    """Walking the bearing for the distance ends at the other place, in all shapes."""
    latitude, longitude = np.array([10.0, -60.0, 89.0]), np.array([179.9, 5.0, -100.0])
    azimuth, back_azimuth, distance = geodesy.true_bearing_and_distance(
        -5.0, 178.0, latitude, longitude
    )
    end_latitude, end_longitude = geodesy.point_at(-5.0, 178.0, azimuth, distance)
    np.testing.assert_allclose(end_latitude, latitude, atol=1e-10)
    np.testing.assert_allclose(end_longitude, longitude, atol=1e-8)
    start_latitude, _ = geodesy.point_at(latitude, longitude, back_azimuth, distance)
    np.testing.assert_allclose(start_latitude, -5.0, atol=1e-10)


@pytest.mark.parametrize(
    ("latitude", "longitude", "code"),
    [
        (46.0, 15.0, 32633),
        (-46.0, -121.4, 32710),
        (0.0, -180.0, 32601),
        (0.0, 180.0, 32601),
        (-0.1, 179.99, 32760),
        (60.0, 5.0, 32631),  # military grids would say zone 32
        (84.0, 0.0, 32631),
        (84.1, 0.0, 5041),
        (-80.0, 0.0, 32731),
        (-80.1, 0.0, 5042),
    ],
)
def test_zone_of_a_place(latitude, longitude, code):
    """UTM zones are 6 degrees wide from 180 W on; UPS beyond 84 N and 80 S."""
    assert code == geodesy.utm_or_ups_crs(latitude, longitude).to_epsg()


@pytest.mark.parametrize(
    ("code", "latitude", "longitude", "trouble"),
    [
        (32633, 47.0, 15.0, ""),
        (2056, 46.9, 7.4, ""),
        (25832, 52.0, 7.0, ""),
        (2154, 46.5, 3.0, ""),
        (32633, 47.0, 21.5, "scale over the area"),
        (4326, 47.0, 15.0, "not projected"),
        (4978, 47.0, 15.0, "not projected"),
        (3857, 47.0, 15.0, "not conformal"),
        (3857, 0.0, 15.0, "not conformal"),
        (3395, 47.0, 15.0, "scale over the area"),
        (3035, 52.0, 10.0, "not conformal"),  # though it looks so at its centre
        (6933, 30.0, 15.0, "not conformal"),
        (2263, 40.7, -74.0, "US survey foot"),
        (5513, 49.5, 15.0, "axes"),
        (5041, 88.0, 15.0, "scale over the area"),
    ],
)
def test_usable_grids(code, latitude, longitude, trouble):
    """A grid is metric, conformal and nearly true to scale, or the reason why not is told."""
    crs = CRS.from_epsg(code)
    to_grid = Transformer.from_crs(4326, crs, always_xy=True)
    x, y = to_grid.transform(longitude, latitude)
    bounds = (x - 10_000.0, y - 10_000.0, x + 10_000.0, y + 10_000.0)
    found = geodesy.grid_trouble(crs, bounds)
    assert (found == "") if trouble == "" else (trouble in found)
    assert (trouble == "") == geodesy.grid_is_usable(crs, bounds)


def test_horizontal_part_of_a_compound_crs():
    """The vertical axis is dropped; what lies below is untouched."""
    cases = (("EPSG:32633+5773", 32633), ("EPSG:4979", 4326), ("EPSG:32633", 32633))
    for whole, flat in cases:
        assert flat == geodesy.horizontal_crs(CRS.from_user_input(whole)).to_epsg()


def test_central_point_across_the_180th_meridian():
    """The middle of two places at 179 E and 179 W is at 180, not at 0."""
    latitude, longitude = geodesy.central_point([(10.0, 179.0), (10.0, -179.0)])
    expected = (10.0, 180.0)
    assert expected == pytest.approx((latitude, abs(longitude)), abs=0.01)
