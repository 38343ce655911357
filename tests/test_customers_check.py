"""The check of a customer list: closed forms on a plain, the rule of the layers, reasons."""

import math
from dataclasses import replace

import numpy as np
import pytest
from places import jacksboro, latitude_longitude, plain
from pyproj import Geod

from planner.antenna import Isotropic, Tr36814Sector, gain_table
from planner.coverage import combine
from planner.customers import check as check_module
from planner.customers import check_customers
from planner.errors import CustomersError
from planner.network import Customer, Radio, Sector, Terminal, Tower
from planner.sweep import path_field
from planner.terrain import Terrain

TERMINAL = Terminal(antenna_height_m=5.0, antenna_gain_dbi=19.0, feeder_loss_db=0.5)
RADIO = Radio(
    id="access",
    frequency_mhz=5600.0,
    channel_width_mhz=20.0,
    transmit_power_dbm=19.0,
    feeder_loss_db=1.0,
    noise_figure_db=5.0,
    service_threshold_dbm=-75.0,
)
MODEL = {"radius_m": 3000.0, "k_factor": 4.0 / 3.0, "polarization": "vertical"}
OMNI = Isotropic(name="omni", gain_dbi=8.0)


def sector(name: str, **changes) -> Sector:
    values = {"id": name, "antenna": "omni", "radio": RADIO, "antenna_height_m": 30.0}
    return Sector(**{**values, "azimuth_deg": 0.0, **changes})


def tower(terrain: Terrain, row: float, col: float, name: str, *sectors: Sector) -> Tower:
    latitude, longitude = latitude_longitude(terrain, row, col)
    return Tower(id=name, latitude=latitude, longitude=longitude, sectors=sectors)


def customer(terrain: Terrain, row: float, col: float, line: int = 2, **changes) -> Customer:
    latitude, longitude = latitude_longitude(terrain, row, col)
    values = {"row": line, "id": f"c{line}", "address": "", "latitude": latitude}
    return Customer(**{**values, "longitude": longitude, **changes})


def checked(terrain, towers, customers, patterns=None, **changes):
    names = [each.id for one in towers for each in one.sectors]
    patterns = patterns or dict.fromkeys(names, OMNI)
    return check_customers(terrain, towers, patterns, TERMINAL, customers, **{**MODEL, **changes})


def test_signal_over_a_clear_plain_is_the_budget_with_free_space():
    """19 - 1 + 8 - (32.45 + 20 log f/MHz + 20 log d/km) + 19 - 0.5 dBm, the form of ITU-R P.525-4
    eq. (6) to its printed digits; nothing blocks, and the margin is over the threshold."""
    terrain = plain()
    mast = tower(terrain, 40.0, 20.0, "mast", sector("a"))
    house = customer(terrain, 40.0, 40.0)
    (answer,) = checked(terrain, [mast], [house])
    azimuth, back, distance = Geod(ellps="WGS84").inv(
        mast.longitude, mast.latitude, house.longitude, house.latitude
    )
    slant_km = math.hypot(distance, 25.0) / 1000.0
    loss = 32.45 + 20.0 * math.log10(5600.0) + 20.0 * math.log10(slant_km)
    assert answer.verdict == "served"
    assert answer.reason == ""
    assert answer.note == ""
    assert answer.received_signal_dbm == pytest.approx(19.0 - 1.0 + 8.0 - loss + 18.5, abs=0.005)
    assert answer.fade_margin_db == pytest.approx(answer.received_signal_dbm + 75.0, abs=1e-9)
    assert answer.free_space_loss_db == pytest.approx(loss, abs=0.005)
    assert answer.diffraction_loss_db == 0.0
    assert answer.path_loss_db == answer.free_space_loss_db
    assert answer.distance_m == pytest.approx(distance, abs=1e-6)
    assert answer.bearing_to_tower_deg == pytest.approx(back % 360.0, abs=1e-9)
    assert abs((answer.bearing_to_tower_deg - azimuth) % 360.0 - 180.0) < 0.02
    assert (answer.tower_id, answer.sector_id, answer.second_sector_id) == ("mast", "a", "")
    assert math.isnan(answer.server_margin_db)
    assert answer.line_of_sight is True
    assert math.isnan(answer.blocking_distance_m)
    assert math.isnan(answer.blocking_latitude)
    assert answer.antenna_height_m == 5.0
    assert answer.sector_gain_dbi == 8.0


def test_the_antenna_is_aimed_by_true_bearing_and_its_gain_counts():
    """TR 36.814 seen from behind: 25 dB less than at its boresight, and the reason says so."""
    terrain = plain()
    house = customer(terrain, 40.0, 40.0)
    away, towards = sector("away"), sector("towards")
    mast = tower(terrain, 40.0, 20.0, "mast", away, towards)
    azimuth = Geod(ellps="WGS84").inv(
        mast.longitude, mast.latitude, house.longitude, house.latitude
    )[0]
    away = replace(away, azimuth_deg=(azimuth + 180.0) % 360.0)
    towards = replace(towards, azimuth_deg=azimuth % 360.0)
    panel = Tr36814Sector(
        name="panel", gain_dbi=17.0, azimuth_beamwidth_deg=65.0, elevation_beamwidth_deg=90.0
    )
    patterns = {"away": panel, "towards": panel}
    (both,) = checked(terrain, [replace(mast, sectors=(away, towards))], [house], patterns)
    assert both.sector_id == "towards"
    assert both.second_sector_id == "away"
    # The vertical cut takes 12 (1.4/90)^2 dB at this elevation from the boresight only.
    assert both.server_margin_db == pytest.approx(25.0, abs=0.01)
    deaf = replace(away, radio=replace(RADIO, service_threshold_dbm=-50.0))
    (answer,) = checked(terrain, [replace(mast, sectors=(deaf,))], [house], {"away": panel})
    assert answer.verdict == "not served"
    assert answer.reason == (
        f"{-answer.fade_margin_db:.1f} dB below the threshold of -50 dBm; in sight 1.00 km away; "
        "the sector's gain here is 25.0 dB below its peak"
    )


def test_best_is_the_strongest_that_reaches_its_own_threshold():
    """A weaker sector that serves beats a stronger one below its own threshold; without any, the
    strongest is named; equal ones go to the earlier."""
    terrain = plain()
    house = customer(terrain, 40.0, 40.0)
    strong = sector("strong", radio=replace(RADIO, service_threshold_dbm=-30.0))
    weak = sector("weak", radio=replace(RADIO, transmit_power_dbm=9.0))
    twin = sector("twin", radio=replace(RADIO, transmit_power_dbm=9.0))
    mast = tower(terrain, 40.0, 20.0, "mast", strong, weak, twin)
    (answer,) = checked(terrain, [mast], [house])
    assert answer.sector_id == "weak"
    assert answer.verdict == "served"
    assert answer.second_sector_id == "strong"
    assert answer.server_margin_db == pytest.approx(-10.0, abs=1e-9)
    none = [
        replace(each, radio=replace(each.radio, service_threshold_dbm=-10.0))
        for each in (weak, strong, twin)
    ]
    (answer,) = checked(terrain, [replace(mast, sectors=tuple(none))], [house])
    assert answer.sector_id == "strong"
    assert answer.verdict == "not served"
    assert answer.fade_margin_db == pytest.approx(answer.received_signal_dbm + 10.0, abs=1e-9)


def test_signal_exactly_at_the_threshold_serves():
    """At least the threshold, not above it."""
    terrain = plain()
    house = customer(terrain, 40.0, 40.0)
    mast = tower(terrain, 40.0, 20.0, "mast", sector("a"))
    (answer,) = checked(terrain, [mast], [house])
    exact = replace(RADIO, service_threshold_dbm=answer.received_signal_dbm)
    (again,) = checked(terrain, [replace(mast, sectors=(sector("a", radio=exact),))], [house])
    assert (again.verdict, again.fade_margin_db) == ("served", 0.0)
    strong = sector("b", radio=replace(RADIO, transmit_power_dbm=29.0, service_threshold_dbm=0.0))
    both = replace(mast, sectors=(strong, sector("a", radio=exact)))
    (among,) = checked(terrain, [both], [house])
    assert (among.verdict, among.sector_id) == ("served", "a")


def test_sectors_with_one_height_and_frequency_share_a_path(monkeypatch):
    """Three sectors, two heights: two paths for each customer."""
    terrain = plain()
    calls = []

    def counted(*args, **keywords):
        calls.append(keywords["a_height_m"])
        return real(*args, **keywords)

    real = check_module.path_between
    monkeypatch.setattr(check_module, "path_between", counted)
    mast = tower(
        terrain, 40.0, 20.0, "mast", sector("a"), sector("b"), sector("c", antenna_height_m=20.0)
    )
    checked(terrain, [mast], [customer(terrain, 40.0, 40.0), customer(terrain, 30.0, 40.0, 3)])
    assert calls == [30.0, 20.0, 30.0, 20.0]


def test_a_wall_is_named_with_its_place():
    """The blocking point lies on the wall, seen from the customer, and the reason tells of it."""
    ground = np.zeros((81, 81), dtype=np.float32)
    ground[:, 30] = 90.0
    terrain = plain(ground=ground)
    mast = tower(terrain, 40.0, 20.0, "mast", sector("a"))
    (answer,) = checked(terrain, [mast], [customer(terrain, 40.0, 60.0)])
    assert answer.verdict == "not served"
    assert answer.line_of_sight is False
    assert answer.blocking_distance_m == pytest.approx(1500.0, abs=1.0)
    latitude, longitude = latitude_longitude(terrain, 40.0, 30.0)
    assert answer.blocking_latitude == pytest.approx(latitude, abs=2e-6)
    assert answer.blocking_longitude == pytest.approx(longitude, abs=2e-6)
    bulge = 500.0 * 1500.0 / (2.0 * 4.0 / 3.0 * 6_371_000.0)
    assert answer.blocking_excess_m == pytest.approx(90.0 + bulge - 23.75, abs=0.01)
    assert answer.blocking_ground_m == pytest.approx(90.0, abs=1e-3)
    assert answer.blocking_obstacle_m == 0.0
    assert answer.reason == (
        f"{-answer.fade_margin_db:.1f} dB below the threshold of -75 dBm; blocked 1.50 km away, "
        f"66.3 m above the direct ray (diffraction {answer.diffraction_loss_db:.1f} dB)"
    )


def test_a_ray_that_passes_close_above_a_wall_is_in_sight_and_loses():
    """A metre below the ray: the reason tells of the Fresnel zone and what it costs."""
    ground = np.zeros((81, 81), dtype=np.float32)
    ground[:, 40] = 16.4
    terrain = plain(ground=ground)
    weak = sector("a", radio=replace(RADIO, service_threshold_dbm=-60.0))
    mast = tower(terrain, 40.0, 20.0, "mast", weak)
    (answer,) = checked(terrain, [mast], [customer(terrain, 40.0, 60.0)])
    assert answer.line_of_sight is True
    assert answer.diffraction_loss_db > 3.0
    assert math.isnan(answer.blocking_excess_m)
    assert answer.reason == (
        f"{-answer.fade_margin_db:.1f} dB below the threshold of -60 dBm; in sight 2.00 km away, "
        f"but the Fresnel zone is obstructed (diffraction {answer.diffraction_loss_db:.1f} dB)"
    )


def test_the_list_may_give_a_height_of_its_own():
    """A mast at the house that looks over the wall is served; else the plan's height counts."""
    ground = np.zeros((81, 81), dtype=np.float32)
    ground[:, 50] = 40.0
    terrain = plain(ground=ground)
    mast = tower(terrain, 40.0, 20.0, "mast", sector("a"))
    low, high = (
        customer(terrain, 40.0, 60.0),
        customer(terrain, 40.0, 60.0, 3, antenna_height_m=60.0),
    )
    answers = checked(terrain, [mast], [low, high])
    assert [answer.antenna_height_m for answer in answers] == [5.0, 60.0]
    assert [answer.line_of_sight for answer in answers] == [False, True]
    assert [answer.verdict for answer in answers] == ["not served", "served"]


def test_every_row_is_answered_in_order_with_a_reason():
    """Trouble from the list, too far, off the terrain, on a hole, behind a hole, and a good one."""
    ground = np.zeros((81, 81), dtype=np.float32)
    ground[60:63, 10:60] = np.nan
    terrain = plain(ground=ground)
    mast = tower(terrain, 40.0, 20.0, "mast", sector("a"))
    rows = [
        customer(terrain, 40.0, 40.0, 2, latitude=math.nan, trouble="latitude is missing"),
        customer(terrain, 40.0, 120.0, 3),
        customer(terrain, 40.0, -10.0, 4),
        customer(terrain, 61.0, 20.0, 5),
        customer(terrain, 75.0, 20.0, 6),
        customer(terrain, 40.0, 30.0, 7),
        customer(terrain, 40.0, 20.0, 8),
    ]
    answers = checked(terrain, [mast], rows)
    assert [answer.customer for answer in answers] == rows
    assert [(answer.verdict, answer.reason) for answer in answers] == [
        ("not computed", "latitude is missing"),
        (
            "not computed",
            "5.00 km from tower mast, the nearest; "
            "paths are computed up to the plan's radius of 3 km",
        ),
        ("not computed", "the place lies outside the terrain data"),
        ("not computed", "the terrain data has a hole at this place"),
        (
            "not computed",
            "to tower mast, the only one within the radius: the path crosses missing terrain data",
        ),
        ("served", ""),
        (
            "not computed",
            "to tower mast, the only one within the radius: both ends are in one place",
        ),
    ]
    for answer in answers:
        if answer.verdict == "not computed":
            assert math.isnan(answer.received_signal_dbm)
            assert math.isnan(answer.path_loss_db)
            assert answer.line_of_sight is None
            assert answer.sector_id == ""
    assert answers[0].tower_id == ""
    assert math.isnan(answers[0].distance_m)
    # Where the place is known, the nearest tower, its distance and bearing are told all the same.
    assert answers[1].tower_id == "mast"
    assert answers[1].distance_m == pytest.approx(5000.0, abs=3.0)
    assert answers[1].bearing_to_tower_deg == pytest.approx(270.0, abs=1.0)


def test_a_tower_behind_a_hole_is_left_out_with_a_note():
    """The other tower answers, and the row says who was left out."""
    ground = np.zeros((81, 81), dtype=np.float32)
    ground[:, 50] = np.nan
    terrain = plain(ground=ground)
    towers = [
        tower(terrain, 40.0, 60.0, "east", sector("e")),
        tower(terrain, 40.0, 10.0, "west", sector("w")),
    ]
    (answer,) = checked(terrain, towers, [customer(terrain, 40.0, 45.0)])
    assert (answer.verdict, answer.sector_id) == ("served", "w")
    assert answer.note == "tower east is left out: the path crosses missing terrain data"
    ground = np.zeros((81, 81), dtype=np.float32)
    ground[:, [30, 50]] = np.nan
    terrain = plain(ground=ground)
    (answer,) = checked(terrain, towers, [customer(terrain, 40.0, 42.0)])
    assert answer.reason == (
        "no path to any of the 2 towers within the radius could be computed; to tower east, "
        "the nearest: the path crosses missing terrain data"
    )


def test_the_radius_is_inclusive_and_measured_on_the_ellipsoid():
    """A customer exactly at the radius is computed, a millimetre less radius and it is not."""
    terrain = plain()
    mast = tower(terrain, 40.0, 20.0, "mast", sector("a"))
    house = customer(terrain, 40.0, 60.0)
    (answer,) = checked(terrain, [mast], [house])
    (at,) = checked(terrain, [mast], [house], radius_m=answer.distance_m)
    (beyond,) = checked(terrain, [mast], [house], radius_m=answer.distance_m - 0.001)
    assert (at.verdict, beyond.verdict) == ("served", "not computed")


def test_a_swapped_row_is_told_and_not_mended():
    """As given far away, swapped close to the tower: told with advice, coordinates untouched."""
    terrain = jacksboro()
    mast = tower(terrain, 500.0, 500.0, "mast", sector("a"))
    good = customer(terrain, 520.0, 520.0)
    swapped = replace(good, row=3, id="c3", latitude=good.longitude, longitude=good.latitude)
    answers = checked(terrain, [mast], [good, swapped])
    assert answers[0].verdict != "not computed"
    assert answers[1].verdict == "not computed"
    assert answers[1].customer == swapped
    distance_km = (
        Geod(ellps="WGS84").inv(mast.longitude, mast.latitude, swapped.longitude, swapped.latitude)[
            2
        ]
        / 1000.0
    )
    assert answers[1].reason == (
        "latitude and longitude seem to be swapped: as given the place is "
        f"{distance_km:,.0f} km from tower mast, the nearest; swapped it is 848 m from tower mast. "
        "Swap the two in the list"
    )


def test_a_list_that_is_swapped_throughout_is_refused():
    """Every usable row swapped: one error that names them; a row with trouble does not count."""
    terrain = jacksboro()
    mast = tower(terrain, 500.0, 500.0, "mast", sector("a"))
    rows = []
    for line in range(2, 15):
        good = customer(terrain, 520.0 + line, 520.0, line)
        rows.append(replace(good, latitude=good.longitude, longitude=good.latitude))
    rows.append(replace(rows[0], row=15, latitude=math.nan, trouble="latitude is missing"))
    with pytest.raises(CustomersError) as caught:
        checked(terrain, [mast], rows)
    assert str(caught.value) == (
        "customer list, rows 2, 3, 4, 5, 6, 7, 8, 9, 10, 11 and 3 more: found places that are in "
        "range of a tower only with latitude and longitude swapped; allowed: latitude (-90 to 90) "
        "and longitude (-180 to 180) each in its own column. Swap the names of the two columns in "
        "the first line"
    )


def test_duplicate_and_missing_ids_are_computed_with_a_note():
    """The rows stay apart, each computed; the note names the other rows."""
    terrain = plain()
    mast = tower(terrain, 40.0, 20.0, "mast", sector("a"))
    rows = [customer(terrain, 40.0, 30.0 + line, line, id="7") for line in (2, 3, 4)]
    rows.append(customer(terrain, 40.0, 35.0, 5, id=""))
    rows.append(customer(terrain, 40.0, 35.0, 6, id=""))
    answers = checked(terrain, [mast], rows)
    assert [answer.verdict for answer in answers] == ["served"] * 5
    assert [answer.note for answer in answers] == [
        "the same id also stands in rows 3, 4",
        "the same id also stands in rows 2, 4",
        "the same id also stands in rows 2, 3",
        "the row has no id",
        "the row has no id",
    ]


def test_a_plan_without_sectors_answers_every_row():
    """Towers whose sectors are all off serve nobody, and every row says so."""
    terrain = plain()
    mast = tower(terrain, 40.0, 20.0, "mast")
    (answer,) = checked(terrain, [mast], [customer(terrain, 40.0, 30.0)], {"x": OMNI})
    assert answer.verdict == "not computed"
    assert answer.reason == "the plan has no sector that is switched on"
    assert checked(terrain, [mast], [], {"x": OMNI}) == ()


def test_progress_counts_customers_and_an_interrupt_passes_through():
    """0 of n, then each; an exception from the callback ends the check as it is."""
    terrain = plain()
    mast = tower(terrain, 40.0, 20.0, "mast", sector("a"))
    rows = [customer(terrain, 40.0, 30.0 + line, line) for line in (2, 3)]
    seen = []
    checked(terrain, [mast], rows, progress=lambda done, total: seen.append((done, total)))
    assert seen == [(0, 2), (1, 2), (2, 2)]

    def interrupt(done, total):
        if done == 1:
            raise KeyboardInterrupt

    with pytest.raises(KeyboardInterrupt):
        checked(terrain, [mast], rows, progress=interrupt)


def test_rows_agree_with_the_layers():
    """On real terrain, three tilted sectors: 400 random cell centres checked as customers against
    the layers. Bounds on signal as for path and raster; the best server differs nowhere by more
    than that."""
    terrain = jacksboro()
    radius_m = 8400.0
    row, col = np.unravel_index(
        np.nanargmax(terrain.ground_elevation_m[300:700, 300:700]), (400, 400)
    )
    aims = [("a", 20.0), ("b", 140.0), ("c", 260.0)]
    sectors = [
        sector(name, azimuth_deg=azimuth, mechanical_downtilt_deg=2.0) for name, azimuth in aims
    ]
    mast = tower(terrain, 300.0 + row + 0.3, 300.0 + col - 0.2, "mast", *sectors)
    panel = Tr36814Sector(
        name="panel", gain_dbi=17.0, azimuth_beamwidth_deg=65.0, elevation_beamwidth_deg=10.0
    )
    field = path_field(
        terrain,
        latitude=mast.latitude,
        longitude=mast.longitude,
        antenna_height_m=30.0,
        receiver_height_m=5.0,
        frequency_mhz=5600.0,
        radius_m=radius_m,
        k_factor=4.0 / 3.0,
        polarization="vertical",
    )
    items = [
        (
            field,
            each,
            gain_table(
                panel,
                azimuth_deg=each.azimuth_deg,
                mechanical_downtilt_deg=2.0,
                electrical_downtilt_deg=0.0,
            ),
        )
        for each in sectors
    ]
    layers = combine(terrain.grid.rows, terrain.grid.cols, items, TERMINAL)
    cells = np.argwhere(np.isfinite(layers.received_signal_dbm))
    cells = cells[np.random.default_rng(5).choice(len(cells), 400, replace=False)]
    rows = [customer(terrain, r, c, line) for line, (r, c) in enumerate(cells.tolist(), start=2)]
    answers = checked(terrain, [mast], rows, dict.fromkeys("abc", panel), radius_m=radius_m)
    signal = np.array([answer.received_signal_dbm for answer in answers])
    margin = np.array([answer.server_margin_db for answer in answers])
    difference = np.abs(signal - layers.received_signal_dbm[tuple(cells.T)])
    margin_difference = np.abs(margin - layers.server_margin_db[tuple(cells.T)])
    print(
        f"\nrows and layers, |difference|: median {np.median(difference):.3f} dB, "
        f"95th percentile {np.percentile(difference, 95):.3f} dB; "
        f"margin: median {np.median(margin_difference):.4f} dB"
    )
    assert np.median(difference) <= 0.1
    assert np.percentile(difference, 95) <= 1.5
    assert np.median(margin_difference) <= 0.01
    served = np.array([answer.verdict == "served" for answer in answers])
    layer_served = layers.best_server[tuple(cells.T)] > 0
    close = np.abs(signal - RADIO.service_threshold_dbm) < 3.0
    # A single cell may lie many decibels off, where an edge stands right before the receiver.
    assert (served != layer_served)[~close].mean() <= 0.01
    assert served.any()
    assert not served.all()


def test_a_wood_that_blocks_is_told_apart_from_its_ground():
    """Ground of 10 m with trees of 40 m on it: both heights are reported."""
    ground = np.full((81, 81), 10.0, dtype=np.float32)
    wood = np.zeros((81, 81), dtype=np.float32)
    wood[:, 38] = 40.0
    terrain = plain(ground=ground, obstacle=wood)
    mast = tower(terrain, 40.0, 20.0, "mast", sector("a"))
    (answer,) = checked(terrain, [mast], [customer(terrain, 40.0, 60.0)])
    assert answer.line_of_sight is False
    assert answer.blocking_ground_m == pytest.approx(10.0, abs=1e-3)
    assert answer.blocking_obstacle_m == pytest.approx(40.0, abs=0.1)
