"""From the plan file to one frozen object that holds everything a run needs."""

import datetime
from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path
from types import MappingProxyType

from pydantic import ValidationError

from planner.antenna import Pattern
from planner.io.terrain_files import TerrainSource
from planner.network import Radio, Sector, Terminal, Tower
from planner.physics.diffraction import Polarization
from planner.physics.link import eirp_dbm
from planner.plan.checks import add_problems_between_keys
from planner.plan.findings import Findings, add_schema_problems, without
from planner.plan.patterns import built_patterns
from planner.plan.places import latitude_longitude
from planner.plan.schema import AntennaTable, PlanTable, SectorTable, TowerTable
from planner.plan.toml_file import TomlFile, read_toml_file

_SAME_POWER_DB = 1e-6  # sums of decimals are not exact


@dataclass(frozen=True, slots=True, kw_only=True)
class Plan:
    """A plan that has been read and found right; lengths in metres, paths absolute."""

    path: Path  # of the plan file
    folder: Path  # that relative names in the plan start from
    name: str
    hash: str  # SHA-256 of the plan file's bytes
    terrain: TerrainSource
    grid_crs: str | None  # "EPSG:32710"; None: chosen from the terrain
    cell_m: float | None  # None: the terrain's own
    radius_m: float
    k_factor: float
    polarization: Polarization
    obstacle_clearing_m: float  # obstacles nearer than this to either end of a path do not count
    magnetic_date: datetime.date  # stamped into file formats that carry a date
    patterns: Mapping[str, Pattern]  # by the id of each sector that is on
    pattern_files: tuple[Path, ...]  # those that the sectors' patterns were read from
    radios: Mapping[str, Radio]  # by name
    terminal: Terminal
    towers: tuple[Tower, ...]  # all of them; their sectors are those that are on
    customers_file: Path | None
    output_folder: Path
    layers: tuple[str, ...]
    needed_height_limit_m: float  # greatest height that the layer of needed heights tries
    online_base_map: bool

    @property
    def sectors(self) -> tuple[Sector, ...]:
        """Every sector that is on, in the order of the plan."""
        return tuple(sector for tower in self.towers for sector in tower.sectors)


@dataclass(frozen=True, slots=True, kw_only=True)
class EirpExcess:
    """A sector that radiates more than the plan allows."""

    sector_id: str
    eirp_dbm: float
    limit_dbm: float


def read_plan(path: Path) -> Plan:
    """Read and validate a plan file, and build the antenna patterns it names.

    Terrain and customers are only looked for, not opened.

    Raises
    ------
    PlanError
        With every problem found, from the top of the file to its end.
    """
    file = read_toml_file(Path(path))
    findings = Findings(file)
    tables: PlanTable | None = None
    rest = file.table
    try:
        tables = PlanTable.model_validate(file.table)
    except ValidationError as error:
        rest = without(file.table, add_schema_problems(findings, error))
    add_problems_between_keys(findings, rest)
    patterns = built_patterns(findings, rest)
    if findings or tables is None:
        raise findings.error()
    return _plan(file, tables, patterns)


def eirp_excesses(plan: Plan) -> tuple[EirpExcess, ...]:
    """The sectors whose peak EIRP is above their radio's limit, in the order of the plan."""
    excesses = []
    for sector in plan.sectors:
        radio = sector.radio
        if radio.eirp_limit_dbm is None:
            continue
        peak_dbm = float(
            eirp_dbm(
                transmit_power_dbm=radio.transmit_power_dbm,
                feeder_loss_db=radio.feeder_loss_db,
                antenna_gain_dbi=plan.patterns[sector.id].gain_dbi,
            )
        )
        if peak_dbm > radio.eirp_limit_dbm + _SAME_POWER_DB:
            excesses.append(
                EirpExcess(sector_id=sector.id, eirp_dbm=peak_dbm, limit_dbm=radio.eirp_limit_dbm)
            )
    return tuple(excesses)


def _plan(file: TomlFile, tables: PlanTable, patterns: Mapping[tuple[str, str], Pattern]) -> Plan:
    """The plan of tables in which nothing is wrong; patterns by (antenna, radio)."""
    folder = file.path.parent
    radios = _radios(tables)
    towers = tuple(_tower(tower, radios, tables.antenna, patterns) for tower in tables.tower)
    terminal, model = tables.terminal, tables.model
    used = [sector for tower in tables.tower for sector in tower.sector if sector.on]
    used_antennas = dict.fromkeys(sector.antenna for sector in used)
    files = [tables.antenna[name].file for name in used_antennas]
    return Plan(
        path=file.path,
        folder=folder,
        name=tables.name,
        hash=file.sha256,
        terrain=_terrain(tables, folder),
        grid_crs=None if model.grid_epsg is None else f"EPSG:{model.grid_epsg}",
        cell_m=model.cell_m,
        radius_m=model.radius_km * 1000.0,
        k_factor=model.k_factor,
        polarization=model.polarization,
        obstacle_clearing_m=model.obstacle_clearing_m,
        magnetic_date=model.magnetic_date,
        patterns=MappingProxyType(
            {sector.id: patterns[sector.antenna, sector.radio] for sector in used}
        ),
        pattern_files=tuple(dict.fromkeys(folder / name for name in files if name is not None)),
        radios=MappingProxyType(radios),
        terminal=Terminal(
            antenna_height_m=terminal.antenna_height_m,
            antenna_gain_dbi=terminal.antenna_gain_dbi,
            feeder_loss_db=terminal.feeder_loss_db,
        ),
        towers=towers,
        customers_file=None if tables.customers is None else folder / tables.customers.file,
        output_folder=folder / tables.output.folder,
        layers=tuple(tables.output.layers),
        needed_height_limit_m=tables.output.needed_height_limit_m,
        online_base_map=tables.output.online_base_map,
    )


def _terrain(tables: PlanTable, folder: Path) -> TerrainSource:
    terrain = tables.terrain
    return TerrainSource(
        rasters=tuple(folder / name for name in terrain.rasters),
        vertical_unit=terrain.vertical_unit,
        kind=terrain.kind,
        obstacles=None if terrain.obstacles is None else folder / terrain.obstacles,
        obstacle_unit=terrain.obstacle_unit,
        fill_holes_up_to_cells=terrain.fill_holes_up_to_cells,
        lowering_radius_m=terrain.lowering_radius_m,
    )


def _radios(tables: PlanTable) -> dict[str, Radio]:
    radios = {}
    for name, radio in tables.radio.items():
        own = radio.service_threshold_dbm
        threshold_dbm = tables.terminal.service_threshold_dbm if own is None else own
        if threshold_dbm is None:
            raise AssertionError(f"radio {name} has passed the checks without a threshold")
        radios[name] = Radio(
            id=name,
            frequency_mhz=radio.frequency_mhz,
            channel_width_mhz=radio.channel_width_mhz,
            transmit_power_dbm=radio.transmit_power_dbm,
            feeder_loss_db=radio.feeder_loss_db,
            noise_figure_db=radio.noise_figure_db,
            eirp_limit_dbm=radio.eirp_limit_dbm,
            service_threshold_dbm=threshold_dbm,
        )
    return radios


def _tower(
    tower: TowerTable,
    radios: Mapping[str, Radio],
    antennas: Mapping[str, AntennaTable],
    patterns: Mapping[tuple[str, str], Pattern],
) -> Tower:
    place: tuple[float, float] | None
    if tower.latitude is not None and tower.longitude is not None:
        place = tower.latitude, tower.longitude
    elif tower.epsg is not None and tower.easting_m is not None and tower.northing_m is not None:
        place = latitude_longitude(tower.epsg, tower.easting_m, tower.northing_m)
    else:
        place = None
    if place is None:
        raise AssertionError(f"tower {tower.id} has passed the checks without a place")
    latitude, longitude = place
    sectors = tuple(
        _sector(sector, radios, antennas, patterns[sector.antenna, sector.radio])
        for sector in tower.sector
        if sector.on
    )
    return Tower(id=tower.id, latitude=latitude, longitude=longitude, sectors=sectors)


def _sector(
    sector: SectorTable,
    radios: Mapping[str, Radio],
    antennas: Mapping[str, AntennaTable],
    pattern: Pattern,
) -> Sector:
    tilt_deg = sector.electrical_downtilt_deg
    return Sector(
        id=sector.id,
        antenna=sector.antenna,
        radio=radios[sector.radio],
        antenna_height_m=sector.antenna_height_m,
        azimuth_deg=sector.azimuth_deg + 0.0,  # -0.0 becomes 0.0
        mechanical_downtilt_deg=sector.mechanical_downtilt_deg,
        electrical_downtilt_deg=pattern.electrical_downtilt_deg if tilt_deg is None else tilt_deg,
        largest_dimension_m=antennas[sector.antenna].largest_dimension_m,
    )
