"""The map page: no network, right place, right values, hostile text harmless, usable on a phone."""

import datetime
import re
from dataclasses import replace
from html.parser import HTMLParser
from pathlib import Path

import numpy as np
import pytest
from affine import Affine
from browser import chromium, opened, requests_of, sized
from places import latitude_longitude, plain
from pyproj import CRS, Transformer

from planner.antenna import formula_pattern, gain_table
from planner.coverage import combine
from planner.customers import check_customers
from planner.handout.hillshade import hillshade
from planner.handout.map_cells import MapCells
from planner.handout.mercator import mercator_view
from planner.handout.offline_map import write_offline_map
from planner.network import Customer, Radio, Sector, Terminal, Tower
from planner.sweep import OUT_OF_RANGE, path_field
from planner.terrain import Grid

__all__ = ["chromium"]  # a fixture
HOSTILE = '<script>window.hurt=1</script></script>"><img src=x onerror="window.hurt=2">{{7*7}}'
TERMINAL = Terminal(antenna_height_m=5.0, antenna_gain_dbi=19.0)


def made_map(path: Path, *, hostile: str = HOSTILE, online: bool = False):
    """A small invented plan with a hole, two sectors and three customers; its coverage."""
    rows, cols = np.mgrid[:161, :141]
    ground = (200 + 60 * np.sin(rows / 15) * np.cos(cols / 11)).astype(np.float32)
    ground[20:30, 100:115] = np.nan
    terrain = plain(ground=ground, cell_m=25.0)
    latitude, longitude = latitude_longitude(terrain, 80.2, 70.4)
    radio = Radio(
        id="access",
        frequency_mhz=5600.0,
        channel_width_mhz=20.0,
        transmit_power_dbm=19.0,
        feeder_loss_db=1.0,
        noise_figure_db=5.0,
        service_threshold_dbm=-75.0,
    )
    sectors = tuple(
        Sector(
            id=f"mast-{number}",
            antenna="panel",
            radio=radio,
            antenna_height_m=30.0,
            azimuth_deg=azimuth,
            mechanical_downtilt_deg=2.0,
        )
        for number, azimuth in ((1, 40.0), (2, 220.0))
    )
    tower = Tower(id="mast", latitude=latitude, longitude=longitude, sectors=sectors)
    pattern = formula_pattern(
        "panel",
        "TR 36.814",
        frequency_mhz=5600.0,
        gain_dbi=17.0,
        azimuth_beamwidth_deg=70.0,
        elevation_beamwidth_deg=10.0,
    )
    patterns = {sector.id: pattern for sector in sectors}
    way = {"frequency_mhz": 5600.0, "k_factor": 4 / 3, "polarization": "vertical"}
    field = path_field(
        terrain,
        latitude=latitude,
        longitude=longitude,
        antenna_height_m=30.0,
        receiver_height_m=5.0,
        radius_m=1600.0,
        **way,
    )
    items = [
        (field, s, gain_table(pattern, azimuth_deg=s.azimuth_deg, mechanical_downtilt_deg=2.0))
        for s in sectors
    ]
    coverage = combine(terrain.grid.rows, terrain.grid.cols, items, TERMINAL)
    near = latitude_longitude(terrain, 60.0, 90.0)
    customers = [
        Customer(row=2, id="c1", address=hostile, latitude=near[0], longitude=near[1]),
        Customer(row=3, id=hostile, address="2 Lane", latitude=near[0] + 0.004, longitude=near[1]),
        Customer(
            row=4, id="c3", address="", latitude=float("nan"), longitude=float("nan"), trouble="no"
        ),
    ]
    answers = check_customers(
        terrain,
        [tower],
        patterns,
        TERMINAL,
        customers,
        radius_m=1600.0,
        k_factor=4 / 3,
        polarization="vertical",
    )
    cells = MapCells(mercator_view(terrain.grid), terrain.grid)
    cells.take_rows(0, coverage)
    write_offline_map(
        path,
        title=f"Field {hostile}",
        terrain=terrain,
        cells=cells,
        colours=("#0072b2", "#e69f00"),
        towers=[tower],
        patterns=patterns,
        answers=answers,
        version="9.9.9",
        online_base_map=online,
    )
    return terrain, coverage


@pytest.fixture(scope="module")
def page(tmp_path_factory):
    path = tmp_path_factory.mktemp("map") / "map.html"
    terrain, coverage = made_map(path)
    return path, terrain, coverage


class Links(HTMLParser):
    """Collects what a page refers to, and the text of styles."""

    def __init__(self) -> None:
        super().__init__()
        self.found: list[str] = []
        self.styles: list[str] = []
        self.scripts = 0
        self._inside = ""

    def handle_starttag(self, tag, attrs):
        self._inside = tag
        self.scripts += tag == "script"
        for name, value in attrs:
            if name in ("src", "href", "data", "action", "poster", "srcset") and value:
                self.found.append(value)
            if name == "style" and value:
                self.styles.append(value)

    def handle_endtag(self, tag):
        self._inside = ""

    def handle_data(self, data):
        if self._inside == "style":
            self.styles.append(data)


def test_the_page_refers_to_nothing_outside_itself(page):
    """No src, href, url() or @import leads out of the file."""
    links = Links()
    links.feed(page[0].read_text(encoding="utf-8"))
    assert links.styles
    assert [link for link in links.found if not link.startswith(("data:", "#"))] == []
    for style in links.styles:
        assert "@import" not in style
        assert not re.search(r"url\(\s*['\"]?(?!data:|#)", style)


def test_hostile_text_stays_inside_the_data(page):
    """The page has as many scripts as with harmless names, and its title is escaped."""
    text = page[0].read_text(encoding="utf-8")
    assert "<script>window.hurt" not in text
    assert 'onerror="' not in text
    counts = []
    for hostile in ("plain", HOSTILE):
        made_map(page[0].with_name("again.html"), hostile=hostile)
        links = Links()
        links.feed(page[0].with_name("again.html").read_text(encoding="utf-8"))
        counts.append(links.scripts)
    assert counts[0] == counts[1]


@pytest.mark.parametrize(
    "name", ["{{7*7}}", "{%endraw%}{{7*7}}{%raw%}", "{% endr{% endraw %}aw %}{{7*7}}{% raw %}"]
)
def test_a_name_is_never_run_as_a_template(name, tmp_path):
    """Template marks in a plan's name or an address come out as they went in."""
    made_map(tmp_path / "map.html", hostile=name)
    text = (tmp_path / "map.html").read_text(encoding="utf-8")
    assert f"<title>Field {name}</title>" in text
    assert f'"title":"Field {name}"' in text


def test_the_same_inputs_give_the_same_page(page, tmp_path):
    """No clock, no random name."""
    made_map(tmp_path / "map.html")
    assert (tmp_path / "map.html").read_bytes() == page[0].read_bytes()
    year = str(datetime.date.today().year)
    assert f"{year}-" not in page[0].read_text(encoding="utf-8").split("planner-data")[0]


def test_an_online_base_map_only_where_asked_for(page, tmp_path):
    """The tile server's address stands in the page only when the plan turns it on."""
    assert "openstreetmap.org" not in page[0].read_text(encoding="utf-8")
    made_map(tmp_path / "map.html", online=True)
    assert "openstreetmap.org" in (tmp_path / "map.html").read_text(encoding="utf-8")


def test_pixels_lie_within_half_a_cell_of_the_truth():
    """Corner and centre cells: the pixel at their place shows them or a cell half a cell off."""
    terrain = plain(300, 260, cell_m=25.0)
    grid = terrain.grid
    for longest in (2048, 200):
        view = mercator_view(grid, longest)
        assert max(view.cell_index.shape) <= longest
        to_mercator = Transformer.from_crs(grid.crs, 3857, always_xy=True)
        pixel = max(1.0, max(grid.rows, grid.cols) / longest)
        for row, col in ((2, 2), (297, 257), (150, 130), (2, 257), (297, 2)):
            x, y = to_mercator.transform(*grid.easting_northing(row, col))
            c, r = ~view.transform @ (x, y)
            shown = view.cell_index[int(r), int(c)]
            assert shown >= 0
            down, right = shown // grid.cols - row, shown % grid.cols - col
            # The pixel's centre lies up to half a pixel from the place, its cell half a cell more.
            assert max(abs(down), abs(right)) <= 0.5 * pixel + 0.5 + 0.2
        # Exactly: the cell under each pixel's centre, within half a cell and a little.
        rng = np.random.default_rng(1)
        back = Transformer.from_crs(3857, grid.crs, always_xy=True)
        for _ in range(300):
            r = int(rng.integers(0, view.cell_index.shape[0]))
            c = int(rng.integers(0, view.cell_index.shape[1]))
            if view.cell_index[r, c] < 0:
                continue
            easting, northing = back.transform(*(view.transform @ (c + 0.5, r + 0.5)))
            row, col = grid.row_col(easting, northing)
            assert abs(view.cell_index[r, c] // grid.cols - row) <= 0.6
            assert abs(view.cell_index[r, c] % grid.cols - col) <= 0.6


def test_cells_picked_by_bands_are_those_of_the_whole(page):
    """Bands of any height keep what one band keeps: each pixel that of its cell, else nothing."""
    _, terrain, coverage = page
    grid = terrain.grid
    rng = np.random.default_rng(6)
    shape = (grid.rows, grid.cols)
    coverage = replace(
        coverage,
        received_signal_dbm=rng.normal(-80.0, 9.0, shape).astype(np.float32),
        server_margin_db=rng.normal(9.0, 4.0, shape).astype(np.float32),
        best_server=rng.integers(1, 5, shape).astype(np.int16),
        status=rng.integers(0, 3, shape).astype(np.uint8),
    )
    index = mercator_view(grid, 97).cell_index.copy()
    index[:3, :5] = -1
    view = replace(mercator_view(grid, 97), cell_index=index)
    names = ("received_signal_dbm", "server_margin_db", "best_server", "status")
    outside = (np.nan, np.nan, -1, OUT_OF_RANGE)
    for height in (1, 30, grid.rows):
        cells = MapCells(view, grid)
        for start in range(0, grid.rows, height):
            part = slice(start, start + height)
            arrays = {name: getattr(coverage, name)[part] for name in names}
            cells.take_rows(start, replace(coverage, **arrays))
        for name, nothing in zip(names, outside, strict=True):
            layer = getattr(coverage, name).ravel()
            expected = [nothing if i < 0 else layer[i] for i in view.cell_index.ravel()]
            actual = getattr(cells, name)
            assert actual.dtype == layer.dtype
            np.testing.assert_array_equal(expected, actual.ravel(), err_msg=name)
    assert 0 in view.cell_index % grid.cols  # the first cell of a row, and of a band


@pytest.mark.parametrize("longest", [2048, 300])
def test_pixels_show_the_cell_that_the_projections_give(longest):
    """Far from the central meridian and at 64 degrees north: as every pixel's own projection."""
    transform = Affine(100.0, 0.0, 700_000.0, 0.0, -100.0, 7_200_000.0)
    grid = Grid(crs=CRS.from_epsg(32633), transform=transform, rows=1000, cols=900)
    view = mercator_view(grid, longest)
    rows, cols = np.mgrid[: view.cell_index.shape[0], : view.cell_index.shape[1]] + 0.5
    x = view.transform.c + cols * view.transform.a
    y = view.transform.f + rows * view.transform.e
    back = Transformer.from_crs(3857, grid.crs, always_xy=True)
    row, col = grid.row_col(*back.transform(x, y))
    inside = grid.contains(row, col)
    expected = np.where(inside, np.rint(row) * grid.cols + np.rint(col), -1)
    # Only where a pixel's centre lies within 0.02 cells of a border may the neighbour be taken.
    shown = view.cell_index >= 0
    down = np.abs(view.cell_index // grid.cols - row)[shown]
    right = np.abs(view.cell_index % grid.cols - col)[shown]
    assert np.maximum(down, right).max() < 0.52
    assert (expected != view.cell_index).mean() < 0.01
    assert shown.any()
    assert not shown.all()


def test_hillshade_is_that_of_the_whole_ground():
    """Picked cells have the slope that numpy's gradient gives to the whole, edges included."""
    ground = np.random.default_rng(4).normal(0, 20, (30, 40)).astype(np.float32)
    ground[10, 10] = np.nan
    southwards, eastwards = np.gradient(ground.astype(float) * 1.5, 25.0)
    normal = np.stack([-eastwards, southwards, np.ones_like(eastwards)])
    azimuth, elevation = np.radians(315.0), np.radians(40.0)
    sun = [np.sin(azimuth) * np.cos(elevation), np.cos(azimuth) * np.cos(elevation)]
    light = np.tensordot([*sun, np.sin(elevation)], normal, 1) / np.linalg.norm(normal, axis=0)
    row, col = np.array([[0, 29, 10, 11, 17]]), np.array([[0], [39], [10], [5]])
    actual = hillshade(ground, 25.0, row, col)
    np.testing.assert_allclose(actual, np.clip(light, 0.0, 1.0)[row, col], rtol=0, atol=1e-6)


def test_hillshade_of_a_tilted_plane_is_lamberts_cosine():
    """A plane facing the sun squarely is full light, a level one the sine of its elevation."""
    rows, cols = np.mgrid[:20, :20]
    cells = (rows, cols)
    level = hillshade(np.zeros((20, 20)), 10.0, *cells, exaggeration=1.0)
    np.testing.assert_allclose(level, np.sin(np.radians(40.0)))
    # Sun from the north-west at 40 degrees: a slope of 50 degrees down towards the north-west.
    rise = np.tan(np.radians(50.0)) / np.sqrt(2.0) * 10.0
    facing = hillshade((rows + cols) * rise, 10.0, *cells, exaggeration=1.0)
    np.testing.assert_allclose(facing, 1.0, atol=1e-12)
    away = hillshade(-(rows + cols) * rise, 10.0, *cells, exaggeration=1.0)
    np.testing.assert_allclose(away, 0.0, atol=1e-12)
    assert np.isnan(hillshade(np.full((4, 4), np.nan), 10.0, *np.mgrid[:4, :4])).all()


@pytest.mark.browser
def test_the_page_works_with_the_network_cut(page, chromium):
    """It asks for nothing but itself and embedded data, and logs no error."""
    opened(chromium, page[0])
    chromium.execute_script("document.querySelector('input[value=server]').click()")
    asked = requests_of(chromium)
    assert asked
    assert [url for url in asked if not url.startswith(("file:", "data:", "blob:"))] == []
    assert [entry for entry in chromium.get_log("browser") if entry["level"] == "SEVERE"] == []
    assert chromium.execute_script("return typeof window.hurt") == "undefined"


@pytest.mark.browser
def test_values_under_the_pointer_are_those_of_the_layers(page, chromium):
    """At 20 cell centres signal, server and margin equal the arrays' within the step."""
    path, terrain, coverage = page
    opened(chromium, path)
    rng = np.random.default_rng(3)
    rows, cols = np.nonzero(coverage.best_server >= 0)
    for number in rng.choice(rows.size, 20, replace=False):
        row, col = int(rows[number]), int(cols[number])
        place = latitude_longitude(terrain, row, col)
        found = chromium.execute_script(
            "return plannerMap.valueAt(L.latLng(arguments[0], arguments[1]))", *place
        )
        around = (slice(max(row - 1, 0), row + 2), slice(max(col - 1, 0), col + 2))
        signal = -140.0 + 0.5 * (found["signal"] - 1)
        margin = -40.0 + 0.5 * (found["margin"] - 1)
        assert (np.abs(coverage.server_margin_db[around] - margin) <= 0.26).any()
        same = np.abs(coverage.received_signal_dbm[around] - signal) <= 0.26
        server = np.maximum(coverage.best_server[around], 0) == found["server"]
        assert (same & server).any()


@pytest.mark.browser
def test_pointer_layers_opacity_and_popup(page, chromium):
    """The read-out follows the pointer, layers switch, opacity acts, a popup shows plain text."""
    path, terrain, _ = page
    opened(chromium, path)
    place = latitude_longitude(terrain, 70.0, 85.0)
    chromium.execute_script(
        """const p = plannerMap.map.latLngToContainerPoint(L.latLng(arguments[0], arguments[1]));
        const box = plannerMap.map.getContainer(), at = box.getBoundingClientRect();
        box.dispatchEvent(new MouseEvent("mousemove",
          {clientX: at.left + p.x, clientY: at.top + p.y, bubbles: true}));""",
        *place,
    )
    text = chromium.execute_script("return document.getElementById('readout').textContent")
    assert re.search(r"\u2212\d+\.\d dBm, mast-[12]", text)
    shown = "return ['signal','server'].map(n => plannerMap.map.hasLayer(plannerMap.layers[n]))"
    assert chromium.execute_script(shown) == [True, False]
    chromium.execute_script("document.querySelector('input[value=server]').click()")
    assert chromium.execute_script(shown) == [False, True]
    chromium.execute_script(
        "const o = document.getElementById('opacity'); o.value = 40;"
        "o.dispatchEvent(new Event('input'))"
    )
    opacity = chromium.execute_script("return plannerMap.layers.server.options.opacity")
    assert opacity == pytest.approx(0.4)
    chromium.execute_script(
        "plannerMap.map.eachLayer(l => { if (l.getPopup && l.getPopup() && !window.done &&"
        " l.getPopup().getContent().textContent.startsWith('c1')) { l.openPopup(); done = 1; } })"
    )
    popup = chromium.execute_script(
        "return document.querySelector('.leaflet-popup-content').textContent"
    )
    assert HOSTILE in popup
    assert "dBm" in popup
    assert chromium.execute_script("return typeof window.hurt") == "undefined"


@pytest.mark.browser
def test_on_a_phone_the_legend_folds_away(page, chromium):
    """At 390 x 844 the map fills the screen; the legend opens by its button."""
    try:
        sized(chromium, 390, 844)
        opened(chromium, page[0])
        height = "return document.getElementById('sheet').getBoundingClientRect().height"
        shut = chromium.execute_script(height)
        assert shut <= 60
        chromium.execute_script("document.getElementById('fold').click()")
        assert chromium.execute_script(height) > 200
        assert chromium.execute_script("return document.documentElement.scrollWidth") <= 390
    finally:
        sized(chromium, 1400, 900)
