"""A plan file that is right becomes one frozen object."""

import datetime
import hashlib
from dataclasses import FrozenInstanceError, replace
from pathlib import Path
from typing import Any

import pytest
from plans import PLAN, changed, write_plan
from pyproj import Transformer

from planner.antenna import Dish, F1336Sector, M2101Array, Tr36814Sector, TwoCutPattern
from planner.errors import PlanError
from planner.io.pattern_files import pattern_of
from planner.io.terrain_files import TerrainSource
from planner.network import Radio, Sector, Terminal
from planner.plan import EirpExcess, eirp_excesses, read_plan

UPPER_RADIO = """\
[radio.upper]
frequency_mhz = 11_000.0
channel_width_mhz = 40
transmit_power_dbm = 10
noise_figure_db = 6

"""
SECOND_SECTOR = 'radio = "access"\nantenna_height_m = 30\nazimuth_deg = 140'


def test_every_key_arrives_in_its_unit(tmp_path: Path) -> None:
    """Names, numbers and files of the plan are those of the object; kilometres become metres."""
    path = write_plan(tmp_path)
    plan = read_plan(path)
    radio = Radio(
        id="access",
        frequency_mhz=5600.0,
        channel_width_mhz=20.0,
        transmit_power_dbm=19.0,
        feeder_loss_db=1.0,
        noise_figure_db=5.0,
        eirp_limit_dbm=36.0,
        service_threshold_dbm=-75.0,
    )
    assert (plan.path, plan.folder) == (path, tmp_path)
    assert plan.name == "West mast at the mill pond"
    assert plan.hash == hashlib.sha256(path.read_bytes()).hexdigest()
    assert plan.terrain == TerrainSource(rasters=(tmp_path / "terrain.tif",))
    assert plan.radius_m == 10_000.0
    assert dict(plan.radios) == {"access": radio}
    assert plan.terminal == Terminal(antenna_height_m=5.0, antenna_gain_dbi=19.0)
    assert plan.customers_file == tmp_path / "customers.csv"
    [tower] = plan.towers
    assert (tower.id, tower.latitude, tower.longitude) == ("west", -46.2041, -121.4122)
    first = Sector(
        id="west-1",
        antenna="panel-90",
        radio=radio,
        antenna_height_m=30.0,
        azimuth_deg=20.0,
        mechanical_downtilt_deg=2.0,
    )
    assert plan.sectors[0] == first
    assert [sector.id for sector in plan.sectors] == ["west-1", "west-2"]


def test_defaults(tmp_path: Path) -> None:
    """What a plan leaves out is what the docs page says."""
    plan = read_plan(write_plan(tmp_path))
    assert (plan.grid_crs, plan.cell_m, plan.obstacle_clearing_m) == (None, None, 50.0)
    assert (plan.k_factor, plan.polarization) == (4.0 / 3.0, "vertical")
    assert plan.magnetic_date == datetime.date(2026, 1, 1)
    assert plan.layers == ("received_signal", "best_server", "server_margin", "path_loss")
    assert plan.output_folder == tmp_path / "out"
    assert not plan.online_base_map
    assert plan.sectors[1].mechanical_downtilt_deg == 0.0


def test_everything_else_can_be_set(tmp_path: Path) -> None:
    """Keys that have defaults are read too."""
    (tmp_path / "canopy.tif").touch()
    text = changed(
        (
            'rasters = ["terrain.tif"]',
            'rasters = ["terrain.tif", "terrain.tif"]\nvertical_unit = "foot"\n'
            'obstacles = "canopy.tif"\nobstacle_unit = "foot"\nfill_holes_up_to_cells = 9',
        ),
        (
            "radius_km = 10",
            'radius_km = 0.5\ncell_m = 20\ngrid_epsg = 32710\nk_factor = 1\n'
            'polarization = "horizontal"\nobstacle_clearing_m = 25\nmagnetic_date = 2027-06-30',
        ),
    )  # fmt: skip
    text += '\n[output]\nfolder = "results"\nlayers = ["path_loss"]\nonline_base_map = true\n'
    plan = read_plan(write_plan(tmp_path, text))
    assert plan.terrain == TerrainSource(
        rasters=(tmp_path / "terrain.tif", tmp_path / "terrain.tif"),
        vertical_unit="foot",
        obstacles=tmp_path / "canopy.tif",
        obstacle_unit="foot",
        fill_holes_up_to_cells=9,
    )
    assert (plan.radius_m, plan.cell_m, plan.grid_crs) == (500.0, 20.0, "EPSG:32710")
    assert (plan.k_factor, plan.polarization) == (1.0, "horizontal")
    assert (plan.obstacle_clearing_m, plan.magnetic_date) == (25.0, datetime.date(2027, 6, 30))
    assert plan.output_folder == tmp_path / "results"
    assert (plan.layers, plan.online_base_map) == (("path_loss",), True)


def test_surface_with_lowering(tmp_path: Path) -> None:
    """A surface model may ask for masts and customers to stand on the lowest cell near by."""
    text = changed(("rasters", 'kind = "surface"\nlowering_radius_m = 40\nrasters'))
    terrain = read_plan(write_plan(tmp_path, text)).terrain
    assert (terrain.kind, terrain.lowering_radius_m) == ("surface", 40.0)


def test_sectors_that_are_off_are_left_out(tmp_path: Path) -> None:
    """A sector with on = false is checked but not kept; a tower without any is kept."""
    text = changed(("azimuth_deg = 20\n", "azimuth_deg = 20\non = false\n"))
    text += '\n[[tower]]\nid = "bare"\nlatitude = -46.3\nlongitude = -121.5\n'
    plan = read_plan(write_plan(tmp_path, text))
    assert [sector.id for sector in plan.sectors] == ["west-2"]
    assert list(plan.patterns) == ["west-2"]
    assert [(tower.id, len(tower.sectors)) for tower in plan.towers] == [("west", 1), ("bare", 0)]


def test_a_radio_may_have_its_own_threshold(tmp_path: Path) -> None:
    """The radio's service threshold outranks the terminal's, which is then not needed."""
    text = changed(("noise_figure_db = 5", "noise_figure_db = 5\nservice_threshold_dbm = -70"))
    plan = read_plan(write_plan(tmp_path, text))
    assert plan.sectors[0].radio.service_threshold_dbm == -70.0
    without = text.replace("service_threshold_dbm = -75\n", "")
    assert read_plan(write_plan(tmp_path, without)).radios == plan.radios


@pytest.mark.parametrize(
    "epsg",
    [
        pytest.param(32710, id="UTM"),
        pytest.param(3857, id="Web Mercator"),
        pytest.param(2193, id="northing comes first in its definition"),
        pytest.param(3031, id="both axes point north"),
    ],
)
def test_projected_coordinates_of_a_tower(tmp_path: Path, epsg: int) -> None:
    """easting_m and northing_m with an EPSG code mean the same place as latitude and longitude."""
    to_metres = Transformer.from_crs(4326, epsg, always_xy=True)
    easting, northing = to_metres.transform(-121.4122, -46.2041)
    text = changed(
        ("latitude = -46.2041", f"easting_m = {easting!r}\nnorthing_m = {northing!r}"),
        ("longitude = -121.4122", f"epsg = {epsg}"),
    )
    [tower] = read_plan(write_plan(tmp_path, text)).towers
    assert (tower.latitude, tower.longitude) == pytest.approx((-46.2041, -121.4122), abs=1e-8)


def test_patterns_follow_antenna_and_frequency(tmp_path: Path) -> None:
    """One antenna with two radios gives two patterns, each at its radio's frequency."""
    text = changed(
        ("[terminal]", UPPER_RADIO + "[terminal]"),
        (SECOND_SECTOR, SECOND_SECTOR.replace("access", "upper")),
    )
    patterns = read_plan(write_plan(tmp_path, text)).patterns
    low, high = patterns["west-1"], patterns["west-2"]
    assert isinstance(low, F1336Sector)
    assert isinstance(high, F1336Sector)
    assert (low.frequency_mhz, high.frequency_mhz) == (5600.0, 11_000.0)
    assert (low.name, low.gain_dbi, low.azimuth_beamwidth_deg) == ("panel-90", 17.0, 90.0)


def test_formula_parameters_reach_the_pattern(tmp_path: Path) -> None:
    """Side-lobe forms and caps of the formulas are the plan's where it gives them."""
    text = changed(("gain_dbi = 17", 'gain_dbi = 17\nside_lobes = "peak"\nk_h = 0.7\nk_v = 0.3'))
    pattern = read_plan(write_plan(tmp_path, text)).patterns["west-1"]
    assert isinstance(pattern, F1336Sector)
    assert (pattern.side_lobes, pattern.k_h, pattern.k_v) == ("peak", 0.7, 0.3)
    text = changed(("F.1336-5", "TR 36.814"), ("gain_dbi = 17", "gain_dbi = 17\nside_lobe_db = 18"))
    pattern = read_plan(write_plan(tmp_path, text)).patterns["west-1"]
    assert isinstance(pattern, Tr36814Sector)
    assert (pattern.side_lobe_db, pattern.front_to_back_db) == (18.0, 25.0)


def test_frozen(tmp_path: Path) -> None:
    """Nothing can be changed in a plan that was read."""
    plan = read_plan(write_plan(tmp_path))
    with pytest.raises(FrozenInstanceError):
        plan.name = "other"  # type: ignore[misc]
    with pytest.raises(TypeError):
        plan.patterns["west-1"] = plan.patterns["west-2"]  # type: ignore[index]


def test_relative_to_the_plan_not_to_the_caller(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    """A plan given by a relative path from elsewhere finds its own files."""
    site = tmp_path / "site"
    site.mkdir()
    write_plan(site)
    monkeypatch.chdir(tmp_path)
    plan = read_plan(Path("site/plan.toml"))
    monkeypatch.chdir(site)
    assert plan.terrain.rasters == (site / "terrain.tif",)
    assert plan.path.is_file()


def test_other_spellings_of_the_same_file(tmp_path: Path) -> None:
    """A byte order mark, Windows line ends and inline tables change nothing but the hash."""
    plain = read_plan(write_plan(tmp_path))
    path = tmp_path / "plan.toml"
    path.write_bytes(b"\xef\xbb\xbf" + PLAN.replace("\n", "\r\n").encode())
    assert read_plan(path).towers == plain.towers
    text = changed(("[model]\nradius_km = 10\n", "")) + "\n"
    path.write_text("model.radius_km = 10\n" + text, encoding="utf-8")
    assert read_plan(path).radius_m == plain.radius_m


def test_pattern_file(tmp_path: Path) -> None:
    """An antenna may be a file of two cuts, read once for all radios; the plan names the file."""
    path = two_cut_plan(
        tmp_path,
        ("[terminal]", UPPER_RADIO + "[terminal]"),
        (SECOND_SECTOR, SECOND_SECTOR.replace("access", "upper")),
    )
    plan = read_plan(path)
    pattern = plan.patterns["west-1"]
    assert isinstance(pattern, TwoCutPattern)
    assert (pattern.name, pattern.gain_dbi) == ("panel-90", 17.0)
    assert isinstance(plan.patterns["west-2"], TwoCutPattern)
    assert plan.pattern_files == (tmp_path / "panel.csv",)


def two_cut_plan(folder: Path, *changes: tuple[str, str]) -> Path:
    rows = ["cut,angle_deg,level_db"]
    for cut in ("h", "v"):
        rows += [f"{cut},{angle},{-min(30, abs(angle) // 4)}" for angle in range(-180, 180, 10)]
    (folder / "panel.csv").write_text("\n".join(rows) + "\n", encoding="utf-8")
    text = changed(
        ('formula = "F.1336-5"', 'file = "panel.csv"'),
        ("azimuth_beamwidth_deg = 90\nelevation_beamwidth_deg = 7\n", ""),
        *changes,
    )
    return write_plan(folder, text)


def test_interpolation_of_two_cuts(tmp_path: Path) -> None:
    """The plan says how two cuts are put together; left out, they are projected."""
    assert read_plan(two_cut_plan(tmp_path)).patterns["west-1"].interpolation == "projected"
    asked = ("gain_dbi = 17", 'gain_dbi = 17\ninterpolation = "cross-weighted"')
    plan = read_plan(two_cut_plan(tmp_path, asked))
    assert plan.patterns["west-1"].interpolation == "cross-weighted"


def test_electrical_tilt_left_out_is_what_the_file_carries(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    """A sector without an electrical tilt has its pattern's own; one that is given outranks it."""

    def tilted(*args: Any, **kwargs: Any) -> TwoCutPattern:
        return replace(pattern_of(*args, **kwargs), electrical_downtilt_deg=4.0)

    monkeypatch.setattr("planner.plan.patterns.pattern_of", tilted)
    asked = ("azimuth_deg = 140", "azimuth_deg = 140\nelectrical_downtilt_deg = 0")
    [tower] = read_plan(two_cut_plan(tmp_path, asked)).towers
    assert [sector.electrical_downtilt_deg for sector in tower.sectors] == [4.0, 0.0]


def test_array_and_dish(tmp_path: Path) -> None:
    """Whole numbers of rows and columns stay whole, and a diameter may be one."""
    beams = ('formula = "F.1336-5"\ngain_dbi = 17\nazimuth_beamwidth_deg = 90\n'
             "elevation_beamwidth_deg = 7")  # fmt: skip
    text = changed((beams, 'formula = "M.2101"\ngain_dbi = 20\nrows = 8\ncolumns = 2'))
    pattern = read_plan(write_plan(tmp_path, text)).patterns["west-1"]
    assert pattern == M2101Array(name="panel-90", gain_dbi=20.0, rows=8, columns=2)
    text = changed((beams, 'formula = "F.1245"\ngain_dbi = 32\ndiameter_m = 1'))
    pattern = read_plan(write_plan(tmp_path, text)).patterns["west-1"]
    assert isinstance(pattern, Dish)
    assert (pattern.recommendation, pattern.diameter_m) == ("F.1245", 1.0)


def test_eirp_excess(tmp_path: Path) -> None:
    """A sector above its limit is told with both figures; at the limit is not above it."""
    assert eirp_excesses(read_plan(write_plan(tmp_path))) == ()  # 19 - 1 + 17 = 35 dBm under 36
    at_limit = changed(("transmit_power_dbm = 19", "transmit_power_dbm = 20"))
    assert eirp_excesses(read_plan(write_plan(tmp_path, at_limit))) == ()
    above = changed(("transmit_power_dbm = 19", "transmit_power_dbm = 24.5"))
    assert eirp_excesses(read_plan(write_plan(tmp_path, above))) == (
        EirpExcess(sector_id="west-1", eirp_dbm=40.5, limit_dbm=36.0),
        EirpExcess(sector_id="west-2", eirp_dbm=40.5, limit_dbm=36.0),
    )
    no_limit = above.replace("eirp_limit_dbm = 36\n", "")
    assert eirp_excesses(read_plan(write_plan(tmp_path, no_limit))) == ()


def test_rounding_does_not_exceed_a_limit(tmp_path: Path) -> None:
    """0.1 - 0.0 + 16.1 is 16.2 dBm, although the sum of the binary numbers is a little more."""
    assert 0.1 - 0.0 + 16.1 > 16.2
    text = changed(
        ("transmit_power_dbm = 19\nfeeder_loss_db = 1", "transmit_power_dbm = 0.1"),
        ("eirp_limit_dbm = 36", "eirp_limit_dbm = 16.2"),
        ("gain_dbi = 17\n", "gain_dbi = 16.1\n"),
    )
    assert eirp_excesses(read_plan(write_plan(tmp_path, text))) == ()


def test_errors_are_plan_errors(tmp_path: Path) -> None:
    """One type of error for all that is wrong with a plan; it carries the problems."""
    with pytest.raises(PlanError) as caught:
        read_plan(write_plan(tmp_path, changed(("radius_km = 10", "radius_km = 0"))))
    assert [problem.found for problem in caught.value.problems] == ["0"]
