"""What may stand in a plan file, table by table; every key is explained in docs/plan-file.md.

These models live at the file's edge only: ``read`` turns them into plain frozen objects. Each
field's ``description`` says what may stand there, as error messages and the docs page give it.
Types are strict: text is never read as a number, nor a truth value; whole numbers pass as decimals.
What needs more than one key to be judged is in ``checks``.
"""

import datetime
from collections.abc import Iterator, Sequence
from typing import Annotated, Any, Literal, get_args, get_origin

from pydantic import BaseModel, ConfigDict, Field
from pydantic.fields import FieldInfo

from planner.antenna import FORMULAS
from planner.antenna.dish import LARGEST_DIAMETER_M
from planner.antenna.interpolation import INTERPOLATIONS, Interpolation
from planner.antenna.m2101 import MOST_ELEMENTS, SPACINGS_WAVELENGTHS, WIDEST_STEERING_DEG
from planner.antenna.pattern import HIGHEST_GAIN_DBI, HIGHEST_TILT_DEG, LOWEST_GAIN_DBI
from planner.units import STANDARD_K_FACTOR

FormulaName = Literal[
    "F.1336-5",
    "F.1336-5 omnidirectional",
    "F.699",
    "F.1245",
    "TR 36.814",
    "TR 38.901",
    "M.2101",
    "isotropic",
]
LayerName = Literal[
    "received_signal",
    "best_server",
    "server_margin",
    "path_loss",
    "line_of_sight",
    "fresnel_clearance",
    "needed_height",
]
ALL_LAYERS: tuple[LayerName, ...] = get_args(LayerName)
USUAL_LAYERS: tuple[LayerName, ...] = ALL_LAYERS[:4]

ID_PATTERN = r"^[A-Za-z0-9][A-Za-z0-9._-]{0,63}$"
ID_RULE = "1 to 64 of the letters A-Z a-z, digits, - _ . and a letter or digit first"
# Control characters, line separators and marks that turn the direction of writing.
_UNPRINTABLE = r"\p{Cc}\p{Zl}\p{Zp}\x{202A}-\x{202E}\x{2066}-\x{2069}"
_NOT_BLANK = rf"^[^{_UNPRINTABLE}]*[^\s{_UNPRINTABLE}][^{_UNPRINTABLE}]*$"
_REQUIRED: Any = ...


def _number(
    lowest: float,
    highest: float,
    unit: str = "",
    *,
    default: float | None = _REQUIRED,
    below: bool = False,
) -> Any:
    """A number from ``lowest`` to ``highest``; ``below`` leaves ``highest`` itself out."""
    between = "to below" if below else "to"
    limit: dict[str, Any] = {"lt": highest} if below else {"le": highest}
    return Field(
        default=default,
        ge=lowest,
        **limit,
        allow_inf_nan=False,
        description=f"{lowest:.10g} {between} {highest:.10g} {unit}".strip(),
    )


def _listed(words: Sequence[str]) -> str:
    """ "a", "b" or "c"."""
    quoted = [f'"{word}"' for word in words]
    return " or ".join((", ".join(quoted[:-1]), quoted[-1]))


def _whole_number(lowest: int, highest: int, *, default: int | None = _REQUIRED) -> Any:
    return Field(
        default=default, ge=lowest, le=highest, description=f"a whole number, {lowest} to {highest}"
    )


def _words(allowed: str, *, default: Any = _REQUIRED) -> Any:
    return Field(default=default, description=allowed)


def _id() -> Any:
    return Field(pattern=ID_PATTERN, description=ID_RULE)


def _file(*, default: str | None = _REQUIRED, what: str = "a file") -> Any:
    return Field(
        default=default,
        pattern=_NOT_BLANK,
        max_length=1000,
        description=f"{what}, relative to the plan's folder",
    )


_FileName = Annotated[str, Field(pattern=_NOT_BLANK, max_length=1000)]
_Id = Annotated[str, Field(pattern=ID_PATTERN)]
_Unit = Literal["metre", "foot"]
_UNITS = '"metre" or "foot"'


class Table(BaseModel):
    """A table of the plan file: strict types, unknown keys refused."""

    model_config = ConfigDict(strict=True, extra="forbid", frozen=True)


class TerrainTable(Table):
    """[terrain]"""

    rasters: list[_FileName] = Field(
        min_length=1,
        max_length=10_000,
        description="one or more files, relative to the plan's folder",
    )
    vertical_unit: _Unit = _words(_UNITS, default="metre")
    kind: Literal["ground", "surface"] = _words('"ground" or "surface"', default="ground")
    obstacles: str | None = _file(default=None)
    obstacle_unit: _Unit = _words(_UNITS, default="metre")
    fill_holes_up_to_cells: int = _whole_number(0, 1_000_000, default=0)
    lowering_radius_m: float = _number(0, 500, "m", default=0.0)


class ModelTable(Table):
    """[model]"""

    radius_km: float = _number(0.1, 100, "km")
    cell_m: float | None = _number(0.5, 1000, "m", default=None)
    grid_epsg: int | None = _whole_number(1024, 32767, default=None)
    k_factor: float = _number(0.3, 10, default=STANDARD_K_FACTOR)
    polarization: Literal["vertical", "horizontal"] = _words(
        '"vertical" or "horizontal"', default="vertical"
    )
    obstacle_clearing_m: float = _number(0, 1000, "m", default=50.0)
    magnetic_date: datetime.date = Field(
        default=datetime.date(2026, 1, 1),
        ge=datetime.date(1990, 1, 1),
        le=datetime.date(2099, 12, 31),
        description="a date, 1990-01-01 to 2099-12-31",
    )


class AntennaTable(Table):
    """[antenna.NAME]"""

    formula: FormulaName | None = _words(_listed(FORMULAS), default=None)
    file: str | None = _file(default=None)
    interpolation: Interpolation | None = _words(_listed(INTERPOLATIONS), default=None)
    gain_dbi: float | None = _number(LOWEST_GAIN_DBI, HIGHEST_GAIN_DBI, "dBi", default=None)
    azimuth_beamwidth_deg: float | None = _number(1, 360, "deg", default=None, below=True)
    elevation_beamwidth_deg: float | None = _number(0.5, 180, "deg", default=None, below=True)
    side_lobes: Literal["average", "peak"] | None = _words('"average" or "peak"', default=None)
    k_p: float | None = _number(0, 1, default=None)
    k_a: float | None = _number(0, 1, default=None)
    k_h: float | None = _number(0, 1, default=None)
    k_v: float | None = _number(0, 1, default=None)
    k: float | None = _number(0, 1, default=None)
    front_to_back_db: float | None = _number(3, 100, "dB", default=None)
    side_lobe_db: float | None = _number(3, 100, "dB", default=None)
    diameter_m: float | None = _number(0.01, LARGEST_DIAMETER_M, "m", default=None)
    rows: int | None = _whole_number(1, MOST_ELEMENTS, default=None)
    columns: int | None = _whole_number(1, MOST_ELEMENTS, default=None)
    row_spacing_wavelengths: float | None = _number(*SPACINGS_WAVELENGTHS, default=None)
    column_spacing_wavelengths: float | None = _number(*SPACINGS_WAVELENGTHS, default=None)
    beam_azimuth_offset_deg: float | None = _number(
        -WIDEST_STEERING_DEG, WIDEST_STEERING_DEG, "deg", default=None
    )
    element_azimuth_beamwidth_deg: float | None = _number(1, 360, "deg", default=None, below=True)
    element_elevation_beamwidth_deg: float | None = _number(
        0.5, 180, "deg", default=None, below=True
    )
    largest_dimension_m: float | None = _number(0.01, 50, "m", default=None)


class RadioTable(Table):
    """[radio.NAME]"""

    frequency_mhz: float = _number(30, 100_000, "MHz")
    channel_width_mhz: float = _number(0.001, 2000, "MHz")
    transmit_power_dbm: float = _number(-50, 80, "dBm")
    feeder_loss_db: float = _number(0, 50, "dB", default=0.0)
    noise_figure_db: float = _number(0, 30, "dB")
    eirp_limit_dbm: float | None = _number(-50, 120, "dBm", default=None)
    service_threshold_dbm: float | None = _number(-150, 0, "dBm", default=None)


class TerminalTable(Table):
    """[terminal]"""

    antenna_height_m: float = _number(0.5, 1000, "m")
    antenna_gain_dbi: float = _number(LOWEST_GAIN_DBI, HIGHEST_GAIN_DBI, "dBi")
    feeder_loss_db: float = _number(0, 50, "dB", default=0.0)
    service_threshold_dbm: float | None = _number(-150, 0, "dBm", default=None)


class SectorTable(Table):
    """[[tower.sector]]"""

    id: str = _id()
    antenna: str = _words("a NAME of the [antenna.NAME] tables")
    radio: str = _words("a NAME of the [radio.NAME] tables")
    antenna_height_m: float = _number(0.5, 1000, "m")
    azimuth_deg: float = _number(0, 360, "deg", below=True)
    mechanical_downtilt_deg: float = _number(
        -HIGHEST_TILT_DEG, HIGHEST_TILT_DEG, "deg", default=0.0
    )
    electrical_downtilt_deg: float | None = _number(
        -HIGHEST_TILT_DEG, HIGHEST_TILT_DEG, "deg", default=None
    )
    on: bool = _words("true or false", default=True)


class TowerTable(Table):
    """[[tower]]"""

    id: str = _id()
    latitude: float | None = _number(-90, 90, "deg", default=None)
    longitude: float | None = _number(-180, 180, "deg", default=None)
    easting_m: float | None = _number(-50_000_000, 50_000_000, "m", default=None)
    northing_m: float | None = _number(-50_000_000, 50_000_000, "m", default=None)
    epsg: int | None = _whole_number(1024, 32767, default=None)
    sector: list[SectorTable] = Field(
        default=[], max_length=32, description="up to 32 [[tower.sector]] tables"
    )


class CustomersTable(Table):
    """[customers]"""

    file: str = _file()


class OutputTable(Table):
    """[output]"""

    folder: str = _file(default="out", what="a folder")
    layers: list[LayerName] = Field(
        default=list(USUAL_LAYERS),
        description="a list of any of " + ", ".join(f'"{name}"' for name in ALL_LAYERS),
    )
    needed_height_limit_m: float = _number(0.5, 100, "m", default=20.0)
    online_base_map: bool = _words("true or false", default=False)


class PlanTable(Table):
    """The plan file."""

    name: str = Field(
        pattern=_NOT_BLANK,
        max_length=200,
        description="1 to 200 characters in one line, not all blank",
    )
    terrain: TerrainTable = _words("a [terrain] table")
    model: ModelTable = _words("a [model] table")
    antenna: dict[_Id, AntennaTable] = Field(
        min_length=1,
        max_length=1000,
        description=f"1 to 1000 [antenna.NAME] tables, NAME being {ID_RULE}",
    )
    radio: dict[_Id, RadioTable] = Field(
        min_length=1,
        max_length=1000,
        description=f"1 to 1000 [radio.NAME] tables, NAME being {ID_RULE}",
    )
    terminal: TerminalTable = _words("a [terminal] table")
    tower: list[TowerTable] = Field(
        min_length=1, max_length=1000, description="1 to 1000 [[tower]] tables"
    )
    customers: CustomersTable | None = _words("a [customers] table", default=None)
    output: OutputTable = Field(default=OutputTable(), description="an [output] table")


def table_and_field(location: Sequence[str | int]) -> tuple[type[Table] | None, FieldInfo | None]:
    """The table that holds the last key of a location, and its field; None where it is unknown."""
    table: type[Table] | None = None
    field: FieldInfo | None = None
    inside: type[Table] | None = PlanTable
    is_element = False  # the part is a number in a list or a name that the plan has given
    for part in location:
        if is_element or inside is None:
            is_element = False
            continue
        table, field = inside, inside.model_fields.get(str(part))
        inside = _inner_table(field) if field is not None else None
        is_element = field is not None and get_origin(field.annotation) in (list, dict)
    return table, field


def every_key(table: type[Table] = PlanTable, header: str = "") -> Iterator[tuple[str, str]]:
    """(header of its table, key) of every key there is; tables themselves are no keys."""
    for key, field in table.model_fields.items():
        inner = _inner_table(field)
        if inner is None:
            yield header, key
            continue
        name = f"{header.strip('[]')}.{key}" if header else key
        if get_origin(field.annotation) is dict:
            yield from every_key(inner, f"[{name}.NAME]")
        elif get_origin(field.annotation) is list:
            yield from every_key(inner, f"[[{name}]]")
        else:
            yield from every_key(inner, f"[{name}]")


def _inner_table(field: FieldInfo) -> type[Table] | None:
    """The table that a field holds: one, several in a list, named ones, or one that is optional."""
    for choice in (field.annotation, *get_args(field.annotation)):
        if isinstance(choice, type) and issubclass(choice, Table):
            return choice
    return None
