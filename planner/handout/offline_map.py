"""The map page: one HTML file that asks no network for anything.

folium makes the page and its Leaflet map; Leaflet, style and script are inlined from package data,
and everything that the script draws comes as JSON in the page. Text from files reaches the page
only inside that JSON, with the characters escaped that could end the element it stands in, and is
put on screen as text, never as markup.
"""

import html
import json
import math
from collections.abc import Mapping, Sequence
from importlib.resources import files
from pathlib import Path
from typing import Any

import folium
import numpy as np
from branca.element import Element
from pyproj import Transformer

from planner.antenna import Pattern, half_power_edges_deg
from planner.customers import CustomerAnswer
from planner.geodesy import point_at
from planner.handout.colours import signal_classes
from planner.handout.map_cells import MapCells
from planner.handout.map_pictures import (
    MARGIN_FLOOR_DB,
    SIGNAL_FLOOR_DBM,
    SIGNAL_STEP_DB,
    label_places,
    read_out,
    relief_picture,
    server_picture,
    signal_picture,
)
from planner.handout.mercator import LONGEST_SIDE_PX, MercatorView
from planner.io.atomic import replaced
from planner.network import Tower
from planner.terrain import Terrain

_ARC_STEP_DEG = 4.0
_OPEN_STREET_MAP = "https://tile.openstreetmap.org/{z}/{x}/{y}.png"


class _OfflineMap(folium.Map):
    """A folium map without the scripts and styles that it would fetch."""

    default_js: list[tuple[str, str]] = []  # noqa: RUF012  folium reads them from the class
    default_css: list[tuple[str, str]] = []  # noqa: RUF012


class _Literal(Element):
    """Text that goes into the page as it is: never read as a template, whatever it holds."""

    def __init__(self, text: str) -> None:
        super().__init__()
        self._text = text

    def render(self, **kwargs: Any) -> str:
        return self._text


def write_offline_map(
    path: Path,
    *,
    title: str,
    terrain: Terrain,
    cells: MapCells,
    colours: Sequence[str],
    towers: Sequence[Tower],
    patterns: Mapping[str, Pattern],
    answers: Sequence[CustomerAnswer],
    version: str,
    online_base_map: bool = False,
) -> None:
    """Write the page to ``path``; the same inputs give the same bytes.

    ``towers`` carry the sectors that are on, numbered from 1 in their order, as in ``cells``;
    ``colours`` are theirs. The ramp of the signal follows from the cells that are shown.
    With ``online_base_map`` the page may fetch OpenStreetMap tiles; without it nothing at all.
    """
    page = _page(
        title, terrain, cells, colours, towers, patterns, answers, version, online=online_base_map
    )
    with replaced(path) as target:
        target.write_text(page, encoding="utf-8")


def _page(
    title: str,
    terrain: Terrain,
    cells: MapCells,
    colours: Sequence[str],
    towers: Sequence[Tower],
    patterns: Mapping[str, Pattern],
    answers: Sequence[CustomerAnswer],
    version: str,
    *,
    online: bool,
) -> str:
    view = cells.view
    sectors = [sector for tower in towers for sector in tower.sectors]
    threshold_dbm = min((s.radio.service_threshold_dbm for s in sectors), default=-math.inf)
    served = cells.received_signal_dbm[cells.best_server > 0]
    # The few cells under the mast would stretch the ramp over signals that nobody maps.
    strongest_dbm = float(np.percentile(served, 99.0)) if served.size else threshold_dbm
    classes = signal_classes(threshold_dbm, strongest_dbm) if sectors else ()
    data = {
        "title": title,
        "version": version,
        "south": view.south,
        "west": view.west,
        "north": view.north,
        "east": view.east,
        "rows": view.cell_index.shape[0],
        "cols": view.cell_index.shape[1],
        "shown_cell_m": _shown_cell_m(view, terrain),
        "cell_m": terrain.grid.cell_m,
        "longest_side_px": LONGEST_SIDE_PX,
        "signal_floor_dbm": SIGNAL_FLOOR_DBM,
        "signal_step_db": SIGNAL_STEP_DB,
        "margin_floor_db": MARGIN_FLOOR_DB,
        "threshold_dbm": threshold_dbm if sectors else None,
        "classes": [
            {"from_dbm": lower, "to_dbm": None if math.isinf(upper) else upper, "colour": colour}
            for lower, upper, colour in classes
        ],
        "relief": relief_picture(terrain, view),
        "signal": signal_picture(cells, classes),
        "server": server_picture(cells, colours),
        "values": read_out(cells),
        "labels": _labels(cells, len(sectors)),
        "sectors": [
            {"id": sector.id, "colour": colour}
            for sector, colour in zip(sectors, colours, strict=True)
        ],
        "towers": [_tower(tower, patterns, terrain) for tower in towers],
        "customers": [_customer(answer) for answer in answers],
        "online": online,
    }
    # Named tiles would make folium fetch their settings; the layer is added by hand instead.
    the_map = _OfflineMap(
        location=[0.5 * (view.south + view.north), 0.5 * (view.west + view.east)],
        tiles=None,
        zoom_start=11,
        zoom_snap=0.25,
        attributionControl=False,
        prefer_canvas=False,
    )
    the_map._id = "planner"
    if online:
        layer = folium.TileLayer(
            tiles=_OPEN_STREET_MAP,
            attr="© OpenStreetMap contributors",
            name="OpenStreetMap",
        )
        layer._id = "online"
        layer.add_to(the_map)
    figure: Any = the_map.get_root()
    figure._id = "page"
    figure.title = None
    leaflet = _asset("leaflet-1.9.4/leaflet.js").replace("//# sourceMappingURL=leaflet.js.map", "")
    licence = _asset("leaflet-1.9.4/LICENSE").replace("--", "- -")
    head = (
        f"<title>{html.escape(title)}</title>\n<!-- Leaflet 1.9.4\n{licence}-->\n"
        f"<style>{_without_pictures(_asset('leaflet-1.9.4/leaflet.css'))}</style>\n"
        f"<style>{_asset('map.css')}</style>\n<script>{leaflet}</script>"
    )
    figure.header.add_child(_Literal(head), name="planner_head")
    body = (
        _asset("map_panel.html")
        + f'<script type="application/json" id="planner-data">{_embedded(data)}</script>'
    )
    figure.html.add_child(_Literal(body), name="planner_body")
    figure.script.add_child(_Literal(_asset("map.js")), name="planner_script")
    return str(figure.render())


def _asset(name: str) -> str:
    return files("planner.handout").joinpath("assets", *name.split("/")).read_text("utf-8")


def _without_pictures(css: str) -> str:
    """Leaflet's style less the lines that name picture files, which this page does not use."""
    return "\n".join(line for line in css.splitlines() if "url(" not in line)


def _embedded(data: dict[str, Any]) -> str:
    """JSON that cannot end the script element it stands in."""
    text = json.dumps(data, ensure_ascii=True, allow_nan=False, separators=(",", ":"))
    for character in "<>&":
        text = text.replace(character, f"\\u{ord(character):04x}")
    return text


def _shown_cell_m(view: MercatorView, terrain: Terrain) -> float:
    """True side of a pixel in the middle of the picture, never finer than the grid's cell."""
    middle = math.radians(0.5 * (view.south + view.north))
    return max(round(float(view.transform.a) * math.cos(middle), 1), terrain.grid.cell_m)


def _labels(cells: MapCells, sectors: int) -> list[dict[str, Any]]:
    to_degrees = Transformer.from_crs(3857, 4326, always_xy=True)
    labels = []
    for number, row, col in label_places(cells, sectors):
        longitude, latitude = to_degrees.transform(*(cells.view.transform @ (col + 0.5, row + 0.5)))
        labels.append({"sector": number, "at": _place(latitude, longitude)})
    return labels


def _place(latitude: float, longitude: float) -> list[float]:
    return [round(latitude, 6), round(longitude, 6)]


def _tower(tower: Tower, patterns: Mapping[str, Pattern], terrain: Terrain) -> dict[str, Any]:
    """A tower's place and, for each sector, rays at the half-power edges, arc and tick."""
    left, bottom, right, top = terrain.grid.bounds
    radius_m = 0.055 * min(right - left, top - bottom)

    def at(azimuth_deg: float, distance_m: float) -> list[float]:
        latitude, longitude = point_at(tower.latitude, tower.longitude, azimuth_deg, distance_m)
        return _place(float(latitude), float(longitude))

    drawn = []
    for sector in tower.sectors:
        left_deg, right_deg = half_power_edges_deg(patterns[sector.id])
        width = right_deg - left_deg
        steps = max(2, math.ceil(width / _ARC_STEP_DEG) + 1)
        arc = sector.azimuth_deg + np.linspace(left_deg, right_deg, steps)
        centre = _place(tower.latitude, tower.longitude)
        edges = [] if width >= 360.0 else [arc[0], arc[-1]]
        drawn.append(
            {
                "rays": [[centre, at(float(edge), radius_m)] for edge in edges],
                "arc": [at(float(azimuth), radius_m) for azimuth in arc],
                "tick": [
                    at(sector.azimuth_deg, 0.86 * radius_m),
                    at(sector.azimuth_deg, 1.16 * radius_m),
                ],
                "lines": [
                    sector.id,
                    f"azimuth {sector.azimuth_deg:03.0f}° T, half-power width {width:.0f}°",
                    f"downtilt {sector.mechanical_downtilt_deg:g}° mechanical, "
                    f"{sector.electrical_downtilt_deg:g}° electrical",
                    f"antenna {sector.antenna_height_m:g} m above ground, "
                    f"{sector.radio.frequency_mhz:g} MHz",
                ],
            }
        )
    return {"id": tower.id, "at": _place(tower.latitude, tower.longitude), "sectors": drawn}


def _customer(answer: CustomerAnswer) -> dict[str, Any]:
    """What the page shows of a customer; place None where the list gives none."""
    customer = answer.customer
    known = math.isfinite(customer.latitude) and math.isfinite(customer.longitude)
    known = known and abs(customer.latitude) <= 85.0 and abs(customer.longitude) <= 360.0
    lines = []
    if answer.verdict != "not computed":
        sight = "line of sight" if answer.line_of_sight else "no line of sight"
        lines = [
            f"{answer.received_signal_dbm:.1f} dBm, margin {answer.fade_margin_db:+.1f} dB",
            f"{answer.sector_id}, {answer.distance_m / 1000.0:.2f} km",
            f"aim {answer.bearing_to_tower_deg % 360.0:05.1f}° T, elevation "
            f"{answer.elevation_angle_deg:+.1f}°",
            f"{sight}, antenna {answer.antenna_height_m:g} m",
        ]
    lines = [
        line.replace("-", "\u2212") if "dBm" in line or "°" in line else line for line in lines
    ]
    return {
        "id": customer.id,
        "address": customer.address,
        "at": _place(customer.latitude, customer.longitude) if known else None,
        "verdict": answer.verdict,
        "lines": lines,
        "reason": answer.reason,
    }
