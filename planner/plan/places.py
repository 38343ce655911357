"""Where a tower stands, from either way of saying it."""

from functools import lru_cache

from pyproj import CRS
from pyproj.exceptions import CRSError

from planner.geodesy import horizontal_crs, transformer_to_wgs84


@lru_cache(maxsize=64)
def metric_crs(epsg: int) -> tuple[CRS | None, str]:
    """(the CRS, "") where the code is a projected CRS in metres, east and north; else why not."""
    try:
        crs = horizontal_crs(CRS.from_epsg(epsg))
    except CRSError:
        return None, "which is not known"
    if not crs.is_projected:
        return None, f"which is not projected ({crs.name})"
    names = {axis.name.lower() for axis in crs.axis_info}
    if names != {"easting", "northing"}:
        return None, f"which does not count eastings and northings ({crs.name})"
    unit = crs.axis_info[0]
    if unit.unit_conversion_factor != 1.0:
        return None, f"which counts in {unit.unit_name} ({crs.name})"
    return crs, ""


def latitude_longitude(
    epsg: int, easting_m: float, northing_m: float
) -> tuple[float, float] | None:
    """WGS 84 place of projected coordinates; None where the projection has no such place."""
    crs, _ = metric_crs(epsg)
    if crs is None:
        return None
    longitude, latitude = transformer_to_wgs84(crs).transform(easting_m, northing_m)
    if not (abs(latitude) <= 90.0 and abs(longitude) <= 180.0):  # infinite where it failed
        return None
    return float(latitude), float(longitude)
