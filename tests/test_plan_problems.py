"""What is wrong with a plan: every problem at once, each with place, value, range and a way out."""

from pathlib import Path

import pytest
from plans import changed, problems_of, write_plan

from planner.plan.findings import without

EPSG_RULE = "the code of a projected CRS in metres, eastings and northings"
ID_RULE = "1 to 64 of the letters A-Z a-z, digits, - _ . and a letter or digit first"
WAYS = "either latitude and longitude, or easting_m, northing_m and epsg"
FILE_RULE = "a file, relative to the plan's folder"
SECOND_TOWER = '\n[[tower]]\nid = "{}"\nlatitude = -46.3\nlongitude = -121.5\n'
PLACE = "latitude = -46.2041\nlongitude = -121.4122"


def case(name: str, *edits: tuple[str, str], says: list[str]) -> object:
    return pytest.param(changed(*edits), says, id=name)


# fmt: off
CASES = [
    case(
        "misspelt key",
        ("radius_km", "radius_k"),
        says=[
            "plan.toml: model.radius_km (line 6): found nothing; allowed: 0.1 to 100 km",
            "plan.toml: model.radius_k (line 7): found an unknown key. "
            "Nearest known key: radius_km",
        ],
    ),
    case(
        "key in other capitals",
        ("radius_km = 10", "radius_km = 10\nK_Factor = 1.3"),
        says=["plan.toml: model.K_Factor (line 8): found an unknown key. "
              "Nearest known key: k_factor"],
    ),
    case(
        "key like no other",
        ('file = "customers.csv"', 'file = "customers.csv"\nzzz = 1'),
        says=["plan.toml: customers.zzz (line 50): found an unknown key. Known keys here: file"],
    ),
    case(
        "key in the wrong table",
        ("radius_km = 10", "radius_km = 10\nnoise_figure_db = 5"),
        says=["plan.toml: model.noise_figure_db (line 8): found an unknown key. "
              "It belongs in [radio.NAME]"],
    ),
    case(
        "key that belongs in two tables",
        ("radius_km = 10", "radius_km = 10\nantenna_height_m = 5"),
        says=["plan.toml: model.antenna_height_m (line 8): found an unknown key. "
              "It belongs in [terminal] or [[tower.sector]]"],
    ),
    case(
        "name after the first table",
        ('name = "West mast at the mill pond"', ""),
        ("radius_km = 10", 'radius_km = 10\nname = "West"'),
        says=[
            "plan.toml: model.name (line 8): found an unknown key. "
            "It belongs at the top of the file, before any table",
            "plan.toml: name: found nothing; "
            "allowed: 1 to 200 characters in one line, not all blank",
        ],
    ),
    case(
        "unknown table",
        ("[customers]", "[customer]"),
        says=["plan.toml: customer (line 48): found an unknown key. "
              "Nearest known key: customers"],
    ),
    case(
        "key that needs quotation marks",
        ("radius_km = 10", 'radius_km = 10\n"a\\u001b[31m" = 1'),
        says=['plan.toml: model."a\\u001b[31m" (line 6): found an unknown key. '
              "Known keys here: radius_km, cell_m, grid_epsg, k_factor, polarization, "
              "obstacle_clearing_m, magnetic_date"],
    ),
    case(
        "text where a number belongs",
        ("radius_km = 10", 'radius_km = "10"'),
        says=['plan.toml: model.radius_km (line 7): found "10"; allowed: 0.1 to 100 km. '
              "Write the number without quotation marks"],
    ),
    case(
        "truth value where a number belongs",
        ("radius_km = 10", "radius_km = true"),
        says=["plan.toml: model.radius_km (line 7): found true; allowed: 0.1 to 100 km"],
    ),
    case(
        "number where a truth value belongs",
        ("azimuth_deg = 20", "azimuth_deg = 20\non = 1"),
        says=["plan.toml: tower.0.sector.0.on (tower west, sector west-1, line 39): found 1; "
              "allowed: true or false"],
    ),
    case(
        "nan",
        ("radius_km = 10", "radius_km = nan"),
        says=["plan.toml: model.radius_km (line 7): found nan; allowed: 0.1 to 100 km"],
    ),
    case(
        "inf",
        ("radius_km = 10", "radius_km = -inf"),
        says=["plan.toml: model.radius_km (line 7): found -inf; allowed: 0.1 to 100 km"],
    ),
    case(
        "number of 4000 digits",
        ("radius_km = 10", f"radius_km = 1{'0' * 4000}"),
        says=["plan.toml: model.radius_km (line 7): found a number of more than 20 digits; "
              "allowed: 0.1 to 100 km"],
    ),
    case(
        "hexadecimal number without end",
        ("radius_km = 10", f"radius_km = 10\ngrid_epsg = 0x{'f' * 9000}"),
        says=["plan.toml: model.grid_epsg (line 8): found a number of more than 20 digits; "
              "allowed: a whole number, 1024 to 32767"],
    ),
    case(
        "fraction where a whole number belongs",
        ("radius_km = 10", "radius_km = 10\ngrid_epsg = 32710.0"),
        says=["plan.toml: model.grid_epsg (line 8): found 32710; "
              "allowed: a whole number, 1024 to 32767"],
    ),
    case(
        "date with a time",
        ("radius_km = 10", "radius_km = 10\nmagnetic_date = 2026-01-01T12:00:00Z"),
        says=["plan.toml: model.magnetic_date (line 8): found 2026-01-01T12:00:00+00:00 "
              "(a date with a time); allowed: a date, 1990-01-01 to 2099-12-31"],
    ),
    case(
        "date as text",
        ("radius_km = 10", 'radius_km = 10\nmagnetic_date = "2026-01-01"'),
        says=['plan.toml: model.magnetic_date (line 8): found "2026-01-01"; '
              "allowed: a date, 1990-01-01 to 2099-12-31"],
    ),
    case(
        "azimuth of a full circle",
        ("azimuth_deg = 20", "azimuth_deg = 360"),
        says=["plan.toml: tower.0.sector.0.azimuth_deg (tower west, sector west-1, line 38): "
              "found 360; allowed: 0 to below 360 deg"],
    ),
    case(
        "azimuth below zero",
        ("azimuth_deg = 140", "azimuth_deg = -0.001"),
        says=["plan.toml: tower.0.sector.1.azimuth_deg (tower west, sector west-2, line 46): "
              "found -0.001; allowed: 0 to below 360 deg"],
    ),
    case(
        "latitude and longitude swapped",
        (PLACE, "latitude = -121.4122\nlongitude = -46.2041"),
        says=["plan.toml: tower.0.latitude (tower west, line 30): found -121.4122; "
              "allowed: -90 to 90 deg. Latitude and longitude swapped?"],
    ),
    case(
        "latitude out of range, longitude too",
        (PLACE, "latitude = 512.4\nlongitude = -181"),
        says=["plan.toml: tower.0.latitude (tower west, line 30): found 512.4; "
              "allowed: -90 to 90 deg",
              "plan.toml: tower.0.longitude (tower west, line 31): found -181; "
              "allowed: -180 to 180 deg"],
    ),
    case(
        "unknown word",
        ("radius_km = 10", 'radius_km = 10\npolarization = "horizontl"'),
        says=['plan.toml: model.polarization (line 8): found "horizontl"; '
              'allowed: "vertical" or "horizontal". Did you mean "horizontal"?'],
    ),
    case(
        "unknown formula",
        ('"F.1336-5"', '"F.1336"'),
        says=['plan.toml: antenna.panel-90.formula (line 10): found "F.1336"; '
              'allowed: "F.1336-5", "F.1336-5 omnidirectional", "F.699", "F.1245", "TR 36.814", '
              '"TR 38.901", "M.2101" or "isotropic". Did you mean "F.1336-5"?'],
    ),
    case(
        "unknown layer, and one twice",
        ("[customers]", '[output]\nlayers = ["path_los", "path_loss", "path_loss"]\n[customers]'),
        says=['plan.toml: output.layers.0 (line 49): found "path_los"; allowed: a list of any of '
              '"received_signal", "best_server", "server_margin", "path_loss", "line_of_sight", '
              '"fresnel_clearance", "needed_height". '
              'Did you mean "path_loss"?',
              'plan.toml: output.layers.2 (line 49): found "path_loss" again; '
              "allowed: each layer once"],
    ),
    case(
        "list where a word belongs",
        ("radius_km = 10", 'radius_km = 10\npolarization = ["vertical"]'),
        says=["plan.toml: model.polarization (line 8): found a list of 1; "
              'allowed: "vertical" or "horizontal"'],
    ),
    case(
        "single brackets around tower",
        ("[[tower]]", "[tower]"),
        says=["plan.toml: tower (line 28): found a table; allowed: 1 to 1000 [[tower]] tables"],
    ),
    case(
        "table where a number belongs",
        ("radius_km = 10", "radius_km.from = 10"),
        says=["plan.toml: model.radius_km (line 6): found a table; allowed: 0.1 to 100 km"],
    ),
    case(
        "no rasters",
        ('["terrain.tif"]', "[]"),
        says=["plan.toml: terrain.rasters (line 4): found an empty list; "
              "allowed: one or more files, relative to the plan's folder"],
    ),
    case(
        "raster that is no text",
        ('["terrain.tif"]', '["terrain.tif", 5]'),
        says=["plan.toml: terrain.rasters.1 (line 4): found 5; "
              "allowed: one or more files, relative to the plan's folder"],
    ),
    case(
        "blank title",
        ("West mast at the mill pond", "  "),
        says=['plan.toml: name (line 1): found "  "; '
              "allowed: 1 to 200 characters in one line, not all blank"],
    ),
    case(
        "title with control characters",
        ("West mast at the mill pond", "West\\u001b[31m\\u202e"),
        says=['plan.toml: name (line 1): found "West\\u001b[31m\\u202e"; '
              "allowed: 1 to 200 characters in one line, not all blank"],
    ),
    case(
        "title too long",
        ("West mast at the mill pond", "w" * 201),
        says=[f'plan.toml: name (line 1): found "{"w" * 57}..."; '
              "allowed: 1 to 200 characters in one line, not all blank"],
    ),
    case(
        "id that is no name for a file",
        ('id = "west"', 'id = "../west"'),
        says=['plan.toml: tower.0.id (tower ../west, line 29): found "../west"; '
              f"allowed: {ID_RULE}"],
    ),
    case(
        "name of an antenna with a blank",
        ("[antenna.panel-90]", '[antenna."panel 90"]'),
        ('antenna = "panel-90"', 'antenna = "panel 90"'),
        says=['plan.toml: antenna."panel 90" (line 9): found the name "panel 90"; '
              f"allowed: 1 to 1000 [antenna.NAME] tables, NAME being {ID_RULE}"],
    ),
    case(
        "same sector id",
        ('"west-2"', '"west-1"'),
        says=['plan.toml: tower.0.sector.1.id (tower west, sector west-1, line 42): '
              'found "west-1"; allowed: an id of its own. tower.0.sector.0 has the same'],
    ),
    case(
        "sector ids that differ in case only",
        ('"west-2"', '"WEST-1"'),
        says=['plan.toml: tower.0.sector.1.id (tower west, sector WEST-1, line 42): '
              'found "WEST-1"; allowed: an id of its own. '
              'tower.0.sector.0 has "west-1", which differs only in case'],
    ),
    case(
        "same tower id",
        ("\n[customers]", SECOND_TOWER.format("west") + "\n[customers]"),
        says=['plan.toml: tower.1.id (tower west, line 49): found "west"; '
              "allowed: an id of its own. tower.0 has the same"],
    ),
    case(
        "unknown antenna and radio",
        ('antenna = "panel-90"\nradio = "access"\nantenna_height_m = 30\nazimuth_deg = 20',
         'antenna = "panel-9"\nradio = "acess"\nantenna_height_m = 30\nazimuth_deg = 20'),
        says=['plan.toml: tower.0.sector.0.antenna (tower west, sector west-1, line 35): '
              'found "panel-9"; allowed: a NAME of the [antenna.NAME] tables. '
              "Nearest known name: panel-90",
              'plan.toml: tower.0.sector.0.radio (tower west, sector west-1, line 36): '
              'found "acess"; allowed: a NAME of the [radio.NAME] tables. '
              "Nearest known name: access"],
    ),
    case(
        "no place",
        (PLACE + "\n", ""),
        says=[f"plan.toml: tower.0 (tower west, line 28): found no place; allowed: {WAYS}"],
    ),
    case(
        "two places",
        (PLACE, PLACE + "\nepsg = 32710"),
        says=["plan.toml: tower.0 (tower west, line 28): "
              f"found latitude and longitude and epsg; allowed: {WAYS}"],
    ),
    case(
        "half a place",
        (PLACE, "latitude = -46.2041"),
        says=["plan.toml: tower.0.longitude (tower west, line 28): found nothing; "
              f"allowed: {WAYS}"],
    ),
    case(
        "projected place without a code",
        (PLACE, "easting_m = 500000\nnorthing_m = 4880000"),
        says=[f"plan.toml: tower.0.epsg (tower west, line 28): found nothing; allowed: {WAYS}"],
    ),
    case(
        "code of degrees",
        (PLACE, "easting_m = 500000\nnorthing_m = 4880000\nepsg = 4326"),
        says=["plan.toml: tower.0.epsg (tower west, line 32): "
              f"found EPSG 4326, which is not projected (WGS 84); allowed: {EPSG_RULE}"],
    ),
    case(
        "code of feet",
        (PLACE, "easting_m = 500000\nnorthing_m = 4880000\nepsg = 2225"),
        says=["plan.toml: tower.0.epsg (tower west, line 32): found EPSG 2225, which counts in "
              f"US survey foot (NAD83 / California zone 1 (ftUS)); allowed: {EPSG_RULE}"],
    ),
    case(
        "code that counts south and west",
        ("radius_km = 10", "radius_km = 10\ngrid_epsg = 2048"),
        says=["plan.toml: model.grid_epsg (line 8): found EPSG 2048, which does not count "
              f"eastings and northings (Hartebeesthoek94 / Lo19); allowed: {EPSG_RULE}"],
    ),
    case(
        "code that is not known",
        ("radius_km = 10", "radius_km = 10\ngrid_epsg = 9999"),
        says=["plan.toml: model.grid_epsg (line 8): found EPSG 9999, which is not known; "
              f"allowed: {EPSG_RULE}"],
    ),
    case(
        "coordinates beyond the projection",
        (PLACE, "easting_m = 5e7\nnorthing_m = -5e7\nepsg = 32710"),
        says=["plan.toml: tower.0 (tower west, line 28): found easting_m 50000000, northing_m "
              "-50000000; allowed: coordinates within the range of EPSG 32710"],
    ),
    case(
        "obstacles on a surface model",
        ("rasters", 'kind = "surface"\nobstacles = "terrain.tif"\nrasters'),
        says=['plan.toml: terrain.obstacles (line 5): found "terrain.tif"; '
              'allowed: no obstacles with kind = "surface". '
              "A surface model already contains trees and roofs"],
    ),
    case(
        "lowering and obstacle unit without need",
        ("rasters", 'lowering_radius_m = 5\nobstacle_unit = "foot"\nrasters'),
        says=["plan.toml: terrain.lowering_radius_m (line 4): found 5; "
              'allowed: 0 m with kind = "ground". Lowering is for rasters with kind = "surface"',
              'plan.toml: terrain.obstacle_unit (line 5): found "foot"; '
              "allowed: nothing without terrain.obstacles"],
    ),
    case(
        "no threshold",
        ("service_threshold_dbm = -75\n", ""),
        says=["plan.toml: terminal.service_threshold_dbm (line 23): found nothing; "
              'allowed: -150 to 0 dBm. Radio "access" has none of its own'],
    ),
    case(
        "formula and file",
        ('formula = "F.1336-5"', 'formula = "F.1336-5"\nfile = "terrain.tif"'),
        says=["plan.toml: antenna.panel-90 (line 9): found both formula and file; "
              "allowed: one of them"],
    ),
    case(
        "neither formula nor file",
        ('formula = "F.1336-5"\n', ""),
        says=["plan.toml: antenna.panel-90 (line 9): found neither formula nor file; "
              "allowed: one of them"],
    ),
    case(
        "beamwidth beside a file",
        ('formula = "F.1336-5"', 'file = "none.csv"'),
        says=[f'plan.toml: antenna.panel-90.file (line 10): found "none.csv": no such file; '
              f"allowed: {FILE_RULE}",
              "plan.toml: antenna.panel-90.azimuth_beamwidth_deg (line 12): found 90; "
              "allowed: no azimuth_beamwidth_deg beside a pattern file, which says it itself",
              "plan.toml: antenna.panel-90.elevation_beamwidth_deg (line 13): found 7; "
              "allowed: no elevation_beamwidth_deg beside a pattern file, which says it itself"],
    ),
    case(
        "key that the formula has not",
        ("gain_dbi = 17", "gain_dbi = 17\nside_lobe_db = 20"),
        says=["plan.toml: antenna.panel-90.side_lobe_db (line 12): found 20.0; allowed: nothing: "
              'the formula "F.1336-5" has no side_lobe_db. '
              "Leave the key out or choose another formula"],
    ),
    case(
        "frequency beyond the formula",
        ("frequency_mhz = 5600", "frequency_mhz = 300"),
        says=['plan.toml: radio.access.frequency_mhz (line 16): found 300, used with antenna '
              '"panel-90"; allowed: 400 to 70000 MHz for F.1336-5. '
              'Use formula "TR 36.814" or a pattern file'],
    ),
    case(
        "an interpolation of a formula",
        ("gain_dbi = 17", 'gain_dbi = 17\ninterpolation = "sum"'),
        says=['plan.toml: antenna.panel-90.interpolation (line 12): found "sum"; allowed: '
              "nothing: a formula holds in every direction. Leave the key out"],
    ),
    case(
        "a dish that is tilted electrically",
        ('formula = "F.1336-5"\ngain_dbi = 17\nazimuth_beamwidth_deg = 90\n'
         "elevation_beamwidth_deg = 7", 'formula = "F.699"\ngain_dbi = 28\ndiameter_m = 0.6'),
        ("azimuth_deg = 140", "azimuth_deg = 140\nelectrical_downtilt_deg = 3"),
        says=["plan.toml: tower.0.sector.1.electrical_downtilt_deg (tower west, sector west-2, "
              "line 46): found 3; allowed: 0 deg: antenna panel-90 has no electrical tilt"],
    ),
    case(
        "an antenna that no sector uses",
        ("[radio.access]",
         '[antenna.spare]\nformula = "TR 36.814"\ngain_dbi = 15\n\n[radio.access]'),
        says=['plan.toml: antenna.spare.azimuth_beamwidth_deg (line 15): found nothing; allowed: '
              'a beamwidth in degrees, which the formula "TR 36.814" needs',
              'plan.toml: antenna.spare.elevation_beamwidth_deg (line 15): found nothing; allowed: '
              'a beamwidth in degrees, which the formula "TR 36.814" needs'],
    ),
    case(
        "missing files",
        ('"terrain.tif"', '"terain.tif", "no/such.tif", "."'),
        ('"customers.csv"', '"customers\\u0007.csv"'),
        says=[f'plan.toml: terrain.rasters.0 (line 4): found "terain.tif": no such file; '
              f'allowed: {FILE_RULE}. Nearest file there: "terrain.tif"',
              f'plan.toml: terrain.rasters.1 (line 4): found "no/such.tif": no such file; '
              f"allowed: {FILE_RULE}",
              f'plan.toml: terrain.rasters.2 (line 4): found ".": a folder; allowed: {FILE_RULE}',
              f'plan.toml: customers.file (line 49): found "customers\\u0007.csv"; '
              f"allowed: {FILE_RULE}"],
    ),
    case(
        "name of a file that is too long for any disk",
        ('"customers.csv"', f'"{"c" * 900}"'),
        says=[f'plan.toml: customers.file (line 49): found "{"c" * 57}...": cannot be read '
              f"(File name too long); allowed: {FILE_RULE}"],
    ),
    case(
        "all sectors off",
        ("azimuth_deg = 20\n", "azimuth_deg = 20\non = false\n"),
        ("azimuth_deg = 140\n", "azimuth_deg = 140\non = false\n"),
        says=["plan.toml: tower (line 28): found only sectors that are off; "
              "allowed: one or more sectors that are on"],
    ),
    case(
        "results over the inputs",
        ("[customers]", '[output]\nfolder = "."\n\n[customers]'),
        says=["plan.toml: output.folder (line 49): found a folder where the results would "
              'overwrite the input "customers.csv"; allowed: a folder of its own'],
    ),
    case(
        "output folder that is no text",
        ("[customers]", "[output]\nfolder = 5\n\n[customers]"),
        says=["plan.toml: output.folder (line 49): found 5; "
              "allowed: a folder, relative to the plan's folder"],
    ),
    case(
        "output folder that is a file",
        ("[customers]", '[output]\nfolder = "terrain.tif/out"\n\n[customers]'),
        says=['plan.toml: output.folder (line 49): found "terrain.tif", which is no folder; '
              "allowed: a folder, or a name that is free"],
    ),
]
# fmt: on


@pytest.mark.parametrize(("text", "says"), CASES)
def test_message(tmp_path: Path, text: str, says: list[str]) -> None:
    """The whole of what is said about a plan that is wrong."""
    assert problems_of(write_plan(tmp_path, text)) == says


def test_no_tower(tmp_path: Path) -> None:
    """A plan without a tower, and one whose towers have no sector."""
    head = changed().split("[[tower]]")[0]
    path = write_plan(tmp_path, head)
    assert problems_of(path) == [
        "plan.toml: tower: found nothing; allowed: 1 to 1000 [[tower]] tables"
    ]
    path = write_plan(tmp_path, head + SECOND_TOWER.format("bare"))
    assert problems_of(path) == [
        "plan.toml: tower (line 29): found no sector; allowed: one or more sectors that are on. "
        "Add a [[tower.sector]] table"
    ]


def test_sectors_that_are_no_tables(tmp_path: Path) -> None:
    """Where sectors cannot be read, it is not said on top that there are none."""
    head = changed().split("[[tower.sector]]")[0]
    assert problems_of(write_plan(tmp_path, head + "sector = 5\n")) == [
        "plan.toml: tower.0.sector (tower west, line 33): found 5; "
        "allowed: up to 32 [[tower.sector]] tables"
    ]


def test_taking_out_leaves_the_original() -> None:
    """The table with the unusable values taken out is another one than the file's."""
    table = {"tower": [{"id": "a", "sector": [{"on": 1}]}], "name": "n"}
    rest = without(table, [("tower", 0, "sector", 0, "on"), ("tower", 0, "id")])
    assert rest == {"tower": [{"id": None, "sector": [{"on": None}]}], "name": "n"}
    assert table == {"tower": [{"id": "a", "sector": [{"on": 1}]}], "name": "n"}


def test_empty_file(tmp_path: Path) -> None:
    """An empty file lacks every table that a plan needs."""
    assert problems_of(write_plan(tmp_path, "")) == [
        "plan.toml: name: found nothing; allowed: 1 to 200 characters in one line, not all blank",
        "plan.toml: terrain: found nothing; allowed: a [terrain] table",
        "plan.toml: model: found nothing; allowed: a [model] table",
        "plan.toml: antenna: found nothing; allowed: 1 to 1000 [antenna.NAME] tables, "
        f"NAME being {ID_RULE}",
        f"plan.toml: radio: found nothing; allowed: 1 to 1000 [radio.NAME] tables, "
        f"NAME being {ID_RULE}",
        "plan.toml: terminal: found nothing; allowed: a [terminal] table",
        "plan.toml: tower: found nothing; allowed: 1 to 1000 [[tower]] tables",
    ]


def test_one_wrong_value_hides_nothing_else(tmp_path: Path) -> None:
    """Problems of types, ranges, references, places, files and formulas come out together."""
    text = changed(
        ("rasters = ", "raster = "),
        ("gain_dbi = 17", "gain_dbi = 17\nside_lobe_db = 20"),
        ("noise_figure_db = 5", 'noise_figure_db = "5"'),
        ("longitude = -121.4122", "longitude = -121.4122\neasting_m = 1"),
        ('radio = "access"\nantenna_height_m = 30\nazimuth_deg = 20',
         'radio = "acces"\nantenna_height_m = 30\nazimuth_deg = 400'),
        ('"west-2"', '"west-1"'),
        ('"customers.csv"', '"customer.csv"'),
    )  # fmt: skip
    where = [line.split(" ")[1] for line in problems_of(write_plan(tmp_path, text))]
    assert where == [
        "terrain.rasters",
        "terrain.raster",
        "antenna.panel-90.side_lobe_db",
        "radio.access.noise_figure_db",
        "tower.0",
        "tower.0.sector.0.radio",
        "tower.0.sector.0.azimuth_deg",
        "tower.0.sector.1.id",
        "customers.file",
    ]
