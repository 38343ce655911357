"""What must hold between the keys of a plan, beyond what each key allows by itself.

The checks work on the plain table of the file with None where the schema has refused a value, so
that one wrong value does not hide what else is wrong.
"""

import os
import stat
from collections.abc import Iterator
from functools import partial
from pathlib import Path
from typing import Any

from planner.plan.findings import Findings
from planner.plan.places import latitude_longitude, metric_crs
from planner.plan.schema import table_and_field
from planner.plan.shown import nearest, shown
from planner.plan.toml_file import Location

# Keys of an antenna that its pattern does not depend on.
NOT_OF_THE_PATTERN = ("largest_dimension_m",)

Rest = dict[str, Any]  # a table as the file has it, None where a value cannot be used

_DEGREES, _METRES = ("latitude", "longitude"), ("easting_m", "northing_m", "epsg")
_MOST_FILES_LOOKED_AT = 1000
OUTPUT_FILES = (
    *("received_signal.tif", "best_server.tif", "server_margin.tif"),
    *("customers.csv", "customers.gpkg", "map.html", "run.json"),
)
PATH_FIELDS_FOLDER = "path_fields"  # within the output folder


def add_problems_between_keys(findings: Findings, rest: Rest) -> None:
    """Put everything into the findings that is wrong between keys, tables and files."""
    _check_terrain(findings, _table(rest, "terrain"))
    _check_grid(findings, _table(rest, "model"))
    _check_antennas(findings, rest)
    _check_thresholds(findings, rest)
    _check_towers(findings, rest)
    _check_files(findings, rest)
    _check_output(findings, rest)


def _table(rest: Rest, key: str) -> Rest:
    return rest.get(key) or {}


def _towers(rest: Rest) -> Iterator[tuple[Location, Rest]]:
    for number, tower in enumerate(rest.get("tower") or []):
        yield ("tower", number), tower or {}


def _sectors(rest: Rest) -> Iterator[tuple[Location, Rest]]:
    for place, tower in _towers(rest):
        for number, sector in enumerate(tower.get("sector") or []):
            yield (*place, "sector", number), sector or {}


def _check_terrain(findings: Findings, terrain: Rest) -> None:
    surface = terrain.get("kind", "ground") == "surface"
    if surface and terrain.get("obstacles") is not None:
        findings.add(
            ("terrain", "obstacles"),
            found=shown(terrain["obstacles"]),
            allowed='no obstacles with kind = "surface"',
            advice="A surface model already contains trees and roofs",
        )
    if terrain.get("kind", "ground") == "ground" and terrain.get("lowering_radius_m"):
        findings.add(
            ("terrain", "lowering_radius_m"),
            found=shown(terrain["lowering_radius_m"]),
            allowed='0 m with kind = "ground"',
            advice='Lowering is for rasters with kind = "surface"',
        )
    if terrain.get("obstacle_unit") is not None and "obstacles" not in terrain:
        findings.add(
            ("terrain", "obstacle_unit"),
            found=shown(terrain["obstacle_unit"]),
            allowed="nothing without terrain.obstacles",
        )


def _check_grid(findings: Findings, model: Rest) -> None:
    epsg = model.get("grid_epsg")
    if epsg is not None:
        _check_epsg(findings, ("model", "grid_epsg"), epsg)


def _check_epsg(findings: Findings, location: Location, epsg: int) -> bool:
    _, trouble = metric_crs(epsg)
    if trouble:
        findings.add(
            location,
            found=f"EPSG {epsg}, {trouble}",
            allowed="the code of a projected CRS in metres, eastings and northings",
        )
    return not trouble


def _check_antennas(findings: Findings, rest: Rest) -> None:
    for name, antenna in _table(rest, "antenna").items():
        if antenna is None:
            continue
        place: Location = ("antenna", name)
        sources = [key for key in ("formula", "file") if key in antenna]
        if len(sources) != 1:
            findings.add(
                place,
                found="both formula and file" if sources else "neither formula nor file",
                allowed="one of them",
            )
        elif sources == ["formula"]:
            if "gain_dbi" not in antenna:
                _, gain = table_and_field((*place, "gain_dbi"))
                allowed = (gain.description or "") if gain is not None else ""
                findings.add((*place, "gain_dbi"), found="nothing", allowed=allowed)
            if antenna.get("interpolation") is not None:
                findings.add(
                    (*place, "interpolation"),
                    found=shown(antenna["interpolation"]),
                    allowed="nothing: a formula holds in every direction",
                    advice="Leave the key out",
                )
        elif sources == ["file"]:
            for key in antenna:
                own = ("file", "gain_dbi", "interpolation", *NOT_OF_THE_PATTERN)
                if key not in own and antenna[key] is not None:
                    findings.add(
                        (*place, key),
                        found=shown(antenna[key]),
                        allowed=f"no {key} beside a pattern file, which says it itself",
                    )
        elif antenna.get("interpolation") is not None:
            findings.add(
                (*place, "interpolation"),
                found=shown(antenna["interpolation"]),
                allowed="nothing: a formula holds in every direction",
                advice="Leave the key out",
            )


def _check_thresholds(findings: Findings, rest: Rest) -> None:
    """The terminal's threshold may be left out where every radio has its own."""
    terminal, radios = rest.get("terminal"), rest.get("radio")
    if terminal is None or "service_threshold_dbm" in terminal or not radios:
        return
    lacking = [
        name for name, radio in radios.items() if "service_threshold_dbm" not in (radio or {})
    ]
    if lacking:
        findings.add(
            ("terminal", "service_threshold_dbm"),
            found="nothing",
            allowed="-150 to 0 dBm",
            advice=f"Radio {shown(lacking[0])} has none of its own",
        )


def _check_towers(findings: Findings, rest: Rest) -> None:
    for place, tower in _towers(rest):
        _check_place(findings, place, tower)
    _check_ids(findings, list(_towers(rest)))
    _check_ids(findings, list(_sectors(rest)))
    for place, sector in _sectors(rest):
        for kind in ("antenna", "radio"):
            known = rest.get(kind)
            if isinstance(sector.get(kind), str) and known and sector[kind] not in known:
                findings.add(
                    (*place, kind),
                    found=shown(sector[kind]),
                    allowed=f"a NAME of the [{kind}.NAME] tables",
                    advice=partial(_name_advice, sector[kind], list(known)),
                )
    _check_some_sector_is_on(findings, rest)


def _check_some_sector_is_on(findings: Findings, rest: Rest) -> None:
    towers = list(_towers(rest))
    if not towers or any(tower.get("sector", []) is None for _, tower in towers):
        return  # told already
    sectors = list(_sectors(rest))
    if not any(sector.get("on", True) is not False for _, sector in sectors):
        findings.add(
            ("tower",),
            found="only sectors that are off" if sectors else "no sector",
            allowed="one or more sectors that are on",
            advice="" if sectors else "Add a [[tower.sector]] table",
        )


def _name_advice(name: str, known: list[str]) -> str:
    match = nearest(name, known)
    return f"Nearest known name: {match}" if match else f"Known names: {', '.join(known[:20])}"


def _check_place(findings: Findings, place: Location, tower: Rest) -> None:
    """Exactly one way of saying where the tower stands, and that there is such a place."""
    degrees = [key for key in _DEGREES if key in tower]
    metres = [key for key in _METRES if key in tower]
    ways = "either latitude and longitude, or easting_m, northing_m and epsg"
    if bool(degrees) == bool(metres):
        found = " and ".join(degrees + metres) if degrees else "no place"
        findings.add(place, found=found, allowed=ways)
        return
    for key in _DEGREES if degrees else _METRES:
        if key not in tower:
            findings.add((*place, key), found="nothing", allowed=ways)
    epsg, easting_m, northing_m = tower.get("epsg"), tower.get("easting_m"), tower.get("northing_m")
    if epsg is None or not _check_epsg(findings, (*place, "epsg"), epsg):
        return
    if easting_m is None or northing_m is None:
        return
    if latitude_longitude(epsg, easting_m, northing_m) is None:
        findings.add(
            place,
            found=f"easting_m {shown(easting_m)}, northing_m {shown(northing_m)}",
            allowed=f"coordinates within the range of EPSG {epsg}",
        )


def _check_ids(findings: Findings, items: list[tuple[Location, Rest]]) -> None:
    """Ids are unique, also where the case of letters does not count, as in names of files."""
    first: dict[str, tuple[Location, str]] = {}
    for place, item in items:
        name = item.get("id")
        if not isinstance(name, str):
            continue
        known_place, known = first.setdefault(name.lower(), (place, name))
        if known_place != place:
            where = ".".join(map(str, known_place))
            findings.add(
                (*place, "id"),
                found=shown(name),
                allowed="an id of its own",
                advice=f"{where} has the same"
                if known == name
                else f"{where} has {shown(known)}, which differs only in case",
            )


def named_files(rest: Rest) -> list[tuple[Location, str]]:
    """Every input file that the plan names, and the key that names it."""
    terrain = _table(rest, "terrain")
    named: list[tuple[Location, str | None]] = [
        (("terrain", "rasters", number), name)
        for number, name in enumerate(terrain.get("rasters") or [])
    ]
    named.append((("terrain", "obstacles"), terrain.get("obstacles")))
    for antenna_name, antenna in _table(rest, "antenna").items():
        named.append((("antenna", antenna_name, "file"), (antenna or {}).get("file")))
    named.append((("customers", "file"), _table(rest, "customers").get("file")))
    return [(location, name) for location, name in named if name is not None]


def _check_files(findings: Findings, rest: Rest) -> None:
    folder = findings.file.path.parent
    for location, name in named_files(rest):
        trouble = trouble_with_file(folder / name)
        if trouble:
            findings.add(
                location,
                found=f"{shown(name)}: {trouble}",
                allowed="a file, relative to the plan's folder",
                advice=partial(_file_advice, folder / name),
            )


def trouble_with_file(path: Path) -> str:
    """Why a file cannot be an input; "" if it can, as far as can be told without reading it."""
    try:
        mode = path.stat().st_mode
        if stat.S_ISDIR(mode):
            return "a folder"
        if not stat.S_ISREG(mode):
            return "a device or pipe"
        with path.open("rb"):
            return ""
    except (FileNotFoundError, NotADirectoryError):
        return "no such file"
    except OSError as error:
        return f"cannot be read ({error.strerror or type(error).__name__})"


def _file_advice(path: Path) -> str:
    try:
        names = []
        for _, entry in zip(range(_MOST_FILES_LOOKED_AT), path.parent.iterdir(), strict=False):
            if entry.is_file():
                names.append(entry.name)
    except OSError:
        return ""
    match = nearest(path.name, sorted(names))
    return f"Nearest file there: {shown(match)}" if match and match != path.name else ""


def _check_output(findings: Findings, rest: Rest) -> None:
    output = _table(rest, "output")
    seen = set()
    for number, layer in enumerate(output.get("layers") or []):
        if layer is not None and layer in seen:
            findings.add(
                ("output", "layers", number),
                found=f"{shown(layer)} again",
                allowed="each layer once",
            )
        seen.add(layer)
    if "folder" in output and output["folder"] is None:
        return
    plan_folder = findings.file.path.parent
    folder = plan_folder / output.get("folder", "out")
    location: Location = ("output", "folder")
    trouble = _trouble_with_folder(folder)
    if trouble:
        findings.add(location, found=trouble, allowed="a folder, or a name that is free")
        return
    clashing = clashes(folder, [plan_folder / name for _, name in named_files(rest)])
    for path in clashing:
        findings.add(
            location,
            found=f"a folder where the results would overwrite the input {shown(path.name)}",
            allowed="a folder of its own",
        )


def _trouble_with_folder(folder: Path) -> str:
    try:
        for part in (folder, *folder.parents):
            if part.exists():
                return "" if part.is_dir() else f"{shown(part.name)}, which is no folder"
    except OSError as error:
        return f"a path that cannot be used ({error.strerror or type(error).__name__})"
    return ""


def clashes(folder: Path, inputs: list[Path]) -> list[Path]:
    """The inputs that results written into ``folder`` would overwrite, or whose folder they use."""

    def is_result(name: str) -> bool:
        lower = name.lower()
        is_path_loss = lower.startswith("path_loss_") and lower.endswith(".tif")
        return lower in (*OUTPUT_FILES, PATH_FIELDS_FOLDER) or is_path_loss

    folder_itself = os.path.realpath(folder)
    path_fields = os.path.realpath(Path(folder) / PATH_FIELDS_FOLDER)

    def is_hit(path: Path) -> bool:
        parent = os.path.realpath(path.parent)
        return (is_result(path.name) and parent == folder_itself) or parent == path_fields

    return [path for path in inputs if is_hit(path)]
