"""Write checked customers as CSV and GeoPackage; reading the list stands here as well."""

import csv
import io
import math
from collections.abc import Iterator, Sequence
from contextlib import contextmanager
from datetime import date
from pathlib import Path

import geopandas
import pyogrio
import shapely
from pyogrio.errors import DataLayerError, DataSourceError, FeatureError, FieldError, GeometryError

from planner.customers.answer import CustomerAnswer
from planner.errors import OutputError
from planner.io.atomic import replaced
from planner.io.customer_columns import COLUMNS, carried_names, distinct_names, spreadsheet_text
from planner.io.customer_list import CustomerList, read_customer_list, read_customers

__all__ = [
    "CustomerList",
    "read_customer_list",
    "read_customers",
    "write_customers_csv",
    "write_customers_gpkg",
]

LAYER = "customers"
_DATE_OPTION = "OGR_CURRENT_DATE"  # GDAL stamps a layer with it instead of the clock
_OWN_GPKG_COLUMNS = ("fid", "geom")  # names that a GeoPackage layer uses itself


def write_customers_csv(path: Path, answers: Sequence[CustomerAnswer]) -> None:
    """One line per answer, in order, after a header. UTF-8, commas, line ends as in RFC 4180.

    Numbers have fixed decimals and are empty where they were not computed. Text that a spreadsheet
    would take for a formula has an apostrophe before it. Columns of the list that are not ours
    follow at the end as they were. Raises OutputError.
    """
    names = carried_names(answers)
    own = [column.name for column in COLUMNS]
    text = io.StringIO(newline="")
    writer = csv.writer(text)
    writer.writerow([*own, *(spreadsheet_text(name) for name in distinct_names(names, own))])
    for answer in answers:
        extra = dict(answer.customer.extra)
        writer.writerow(
            [
                *(column.cell(answer) for column in COLUMNS),
                *(spreadsheet_text(extra.get(name, "")) for name in names),
            ]
        )
    with replaced(Path(path)) as target:
        target.write_bytes(text.getvalue().encode("utf-8"))


def write_customers_gpkg(path: Path, answers: Sequence[CustomerAnswer], day: date) -> None:
    """One point per answer, in order, in the layer "customers", WGS 84 (EPSG:4326).

    The columns of the CSV with numbers as numbers (NULL where not computed) and text as it is. A
    customer without a usable place has an empty geometry. ``day`` is the time stamp in the file, so
    that the same answers give the same bytes. Raises OutputError.
    """
    names = carried_names(answers)
    own = [column.name for column in COLUMNS]
    values: dict[str, list[str] | list[float]] = {}
    for column in COLUMNS:
        if column.decimals is None:
            values[column.name] = [str(column.value(answer)) for answer in answers]
        else:
            values[column.name] = [column.number(answer) for answer in answers]
    extras = [dict(answer.customer.extra) for answer in answers]
    for name, distinct in zip(
        names, distinct_names(names, [*own, *_OWN_GPKG_COLUMNS]), strict=True
    ):
        values[distinct] = [extra.get(name, "") for extra in extras]
    places = [_point(answer) for answer in answers]
    table = geopandas.GeoDataFrame(values, geometry=places, crs="EPSG:4326")
    path = Path(path)
    with replaced(path) as target, _stamped(day):
        try:
            pyogrio.write_dataframe(
                table, target, driver="GPKG", layer=LAYER, geometry_type="Point"
            )
        except (DataSourceError, DataLayerError, FeatureError, FieldError, GeometryError) as error:
            raise OutputError(f"{path}: could not be written: {error}") from error


def _point(answer: CustomerAnswer) -> shapely.Point:
    customer = answer.customer
    if math.isfinite(customer.latitude) and math.isfinite(customer.longitude):
        return shapely.Point(customer.longitude, customer.latitude)
    return shapely.Point()


@contextmanager
def _stamped(day: date) -> Iterator[None]:
    """Let GDAL take ``day`` for the present time."""
    before = pyogrio.get_gdal_config_option(_DATE_OPTION)
    pyogrio.set_gdal_config_options({_DATE_OPTION: f"{day.isoformat()}T00:00:00.000Z"})
    try:
        yield
    finally:
        pyogrio.set_gdal_config_options({_DATE_OPTION: before})
