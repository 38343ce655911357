"""Who lives where in the demo sites: invented names; eastings and northings are UTM zone 10S."""

from typing import NamedTuple


class Village(NamedTuple):
    name: str
    easting_m: float
    northing_m: float
    street_bearing_deg: float
    houses: int
    streets: tuple[tuple[str, float], ...]  # name, share of the houses; the lanes cross the first


class Road(NamedTuple):
    name: str
    houses: int  # scattered along it
    places: tuple[tuple[float, float], ...]  # easting, northing of the places that it joins


class Site(NamedTuple):
    folder: str
    prefix: str  # of the customers' ids
    seed: int
    rasters: tuple[str, ...]
    woods: str | None
    lake_level_m: float | None
    square: tuple[float, float, int]  # left, top, cells of 20 m of the land that is looked at
    villages: tuple[Village, ...]
    roads: tuple[Road, ...]
    farms: tuple[tuple[float, float, str], ...]
    wrong_rows: tuple[tuple[str, str, str, str, str], ...] = ()


def _vale(name, east_km, north_km, bearing_deg, houses, *streets) -> Village:
    """A village of the vale, placed in km from the mast's spur."""
    return Village(
        name, 622_530 + 1000 * east_km, 4_882_230 + 1000 * north_km, bearing_deg, houses, streets
    )


def _vale_farm(east_km, north_km, address) -> tuple[float, float, str]:
    return 622_530 + 1000 * east_km, 4_882_230 + 1000 * north_km, address


_VALE_VILLAGES = (
    _vale(
        "Corvane Bridge",
        -2.9,
        2.2,
        25,
        22,
        ("Ferry Row", 0.5),
        ("Tallow Lane", 0.3),
        ("Kiln Close", 0.2),
    ),
    _vale("Nether Ellerwin", -3.2, -6.4, 5, 16, ("Long Row", 0.65), ("Pound Lane", 0.35)),
    _vale("Upper Ellerwin", 4.4, 6.4, 55, 14, ("Church Row", 0.6), ("Mill Reach", 0.4)),
    _vale("Stapelow", 0.4, 4.4, 75, 8, ("Stapelow Green", 1.0)),
    _vale("Ledgers", -0.9, -0.5, 20, 6, ("Ledgers Bank", 1.0)),
    _vale("Quernfold", -2.5, -1.5, 0, 6, ("Quern Street", 1.0)),
    _vale("Dunmarrow", -3.1, -10.5, 20, 6, ("Weir Street", 1.0)),
    _vale("Thessenhythe", 7.0, 8.3, 45, 8, ("Hythe Street", 1.0)),
    _vale("Fallowrigg", -9.5, 3.3, 110, 7, ("Rigg Road", 1.0)),
    _vale("Kettlemoor", 1.5, 10.3, 150, 4, ("Kettle Road", 1.0)),
    _vale("Wexholm", -4.05, 9.2, 120, 4, ("Holm Road", 1.0)),
    _vale("Highmost", -10.3, 1.3, 20, 3, ("Highmost Track", 1.0)),
    _vale("Sallowmoor", -9.4, -1.7, 60, 4, ("Moor Road", 1.0)),
    _vale("Langmoor", 1.9, -1.2, 160, 6, ("Moor End", 1.0)),
    _vale("Harnagill", 3.2, 0.8, 0, 4, ("Gill Road", 1.0)),
    _vale("Orsby Foot", 0.3, 2.6, 30, 4, ("Foot Lane", 1.0)),
)
_BY_NAME = {v.name: (v.easting_m, v.northing_m) for v in _VALE_VILLAGES}

VALE = Site(
    folder="harrow_vale",
    prefix="HV",
    seed=4151,
    rasters=("terrain.tif",),
    woods=None,
    lake_level_m=None,
    square=(622_520.0 - 12_200, 4_882_240.0 + 12_200, 1220),
    villages=_VALE_VILLAGES,
    roads=(
        Road(
            "Vale Road",
            8,
            tuple(
                _BY_NAME[name]
                for name in (
                    "Dunmarrow",
                    "Nether Ellerwin",
                    "Quernfold",
                    "Corvane Bridge",
                    "Stapelow",
                    "Upper Ellerwin",
                    "Thessenhythe",
                )
            ),
        ),
        Road("Rigg Road", 2, (_BY_NAME["Corvane Bridge"], _BY_NAME["Fallowrigg"])),
    ),
    farms=(
        _vale_farm(-6.2, 1.0, "Tarrow Stead, Rigg Road"),
        _vale_farm(-5.6, -1.2, "Lambfold, Vale Road"),
        _vale_farm(-4.9, -3.2, "Quillet, Vale Road"),
        _vale_farm(-5.8, 3.1, "Rushy Hold, Rigg Road"),
        _vale_farm(-3.8, 4.9, "Otterholm, Kiln Road"),
        _vale_farm(-1.6, 6.3, "Sheepwash, Kiln Road"),
        _vale_farm(1.6, 6.9, "Brackenhold, Stapelow Road"),
        _vale_farm(-2.2, -3.4, "Hollin Stead, Vale Road"),
        _vale_farm(-1.0, -2.6, "Bield, Bield Track"),
        _vale_farm(-1.4, -5.5, "Sourmire, Bield Track"),
        _vale_farm(-5.3, -4.6, "Windle Hold, Vale Road"),
        _vale_farm(-5.0, -7.8, "Cawthwaite, Weir Road"),
        _vale_farm(-2.0, -8.2, "Clough Stead, Weir Road"),
        _vale_farm(3.3, 4.6, "Shadwath, Gill Road"),
        _vale_farm(6.4, 4.4, "Nettlegarth, Gill Road"),
        _vale_farm(1.9, 1.2, "Lone Stead, Gill Road"),
        _vale_farm(3.0, 9.0, "Starling Hold, Stapelow Road"),
        _vale_farm(8.6, 7.1, "Eastmost, Hythe Road"),
    ),
)


def _lake(name, east_km, north_km, bearing_deg, houses, *streets) -> Village:
    """A village of the lake; easting and northing in km."""
    return Village(name, 1000 * east_km, 1000 * north_km, bearing_deg, houses, streets)


def _lake_farm(east_km, north_km, address) -> tuple[float, float, str]:
    return 1000 * east_km, 1000 * north_km, address


_LAKE_VILLAGES = (
    _lake("Ondrel Quay", 581.7, 4829.6, 80, 12, ("Quay Street", 0.6), ("Bar Lane", 0.4)),
    _lake("Cold Landing", 579.7, 4839.1, 85, 12, ("Landing Road", 0.7), ("Net Lane", 0.3)),
    _lake("Sallow Bay", 574.5, 4834.2, 60, 8, ("Bay Road", 1.0)),
    _lake("Wether Point", 571.5, 4836.4, 130, 6, ("Point Road", 1.0)),
    _lake("Pennow", 572.9, 4843.6, 120, 8, ("Pennow Street", 1.0)),
    _lake("Tarsick", 567.4, 4842.7, 20, 7, ("Tarsick Row", 1.0)),
    _lake("Spit End", 578.1, 4833.4, 110, 4, ("Spit Road", 1.0)),
    _lake("Lower Ondrel", 582.0, 4826.4, 0, 6, ("Lower Street", 1.0)),
    _lake("Marl Cove", 582.6, 4836.9, 40, 5, ("Cove Road", 1.0)),
)

LAKE = Site(
    folder="lake_ondrel",
    prefix="LO",
    seed=3602,
    rasters=("terrain_west.tif", "terrain_east.tif"),
    woods="woodland.tif",
    lake_level_m=90.0,
    square=(564_600.0, 4_848_600.0, 1250),
    villages=_LAKE_VILLAGES,
    roads=(
        Road(
            "South Shore Road",
            6,
            (
                (582_000, 4_826_400),
                (581_700, 4_829_600),
                (574_500, 4_834_200),
                (571_500, 4_836_400),
            ),
        ),
        Road(
            "North Shore Road",
            4,
            ((579_700, 4_839_100), (574_700, 4_842_300), (572_900, 4_843_600)),
        ),
    ),
    farms=(
        _lake_farm(585.9, 4838.4, "Marl Hold, Cove Road"),
        _lake_farm(586.8, 4836.3, "Backwater, Cove Road"),
        _lake_farm(569.0, 4837.6, "Wether Stead, Point Road"),
        _lake_farm(573.0, 4832.2, "Sallow Hold, Bay Road"),
        _lake_farm(580.6, 4840.6, "Netherfell, Net Lane"),
        _lake_farm(577.5, 4843.3, "Skyfold, North Shore Road"),
        _lake_farm(575.2, 4844.9, "Pennow Head, North Shore Road"),
        _lake_farm(566.6, 4837.2, "Westmost, Point Road"),
        _lake_farm(569.0, 4844.7, "Holm House, Ondrel Holm"),
        _lake_farm(583.4, 4828.0, "Barrow Stead, Lower Street"),
    ),
    wrong_rows=(
        ("LO-901", "62 Pennow Street, Pennow", "", "-122.04417", ""),
        ("LO-902", "Far Ness", "-45.20310", "-120.90224", ""),
        ("LO-903", "57 Tarsick Row, Tarsick", "-122.11790", "-46.56380", ""),
        ("LO-904", "61 Bay Road, Sallow Bay", "46.6 south", "-122.02760", ""),
        ("LO-905", "59 Quay Street, Ondrel Quay", "-46.67950", "-121.93240", "as high as it takes"),
    ),
)
