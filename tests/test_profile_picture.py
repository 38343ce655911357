"""The picture of a path: what it says, that nothing covers anything, that its bytes are stable."""

import itertools
import math
from functools import cache
from pathlib import Path as FilePath

import matplotlib
import numpy as np
import pytest
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.colors import to_hex
from matplotlib.figure import Figure
from matplotlib.text import Text
from PIL import Image
from places import jacksboro, latitude_longitude, plain

from planner.errors import TerrainError
from planner.handout.colours import ACCENT
from planner.handout.profile_picture import profile_figure, write_profile_picture
from planner.sweep import Path, path_between
from planner.terrain import Terrain

EARTH_M = 4.0 / 3.0 * 6_371_000.0


def path_at(terrain: Terrain, a, b, heights=(30.0, 5.0), frequency_mhz=5600.0) -> Path:
    a_place, b_place = latitude_longitude(terrain, *a), latitude_longitude(terrain, *b)
    return path_between(
        terrain,
        a_latitude=a_place[0],
        a_longitude=a_place[1],
        a_height_m=heights[0],
        b_latitude=b_place[0],
        b_longitude=b_place[1],
        b_height_m=heights[1],
        frequency_mhz=frequency_mhz,
        k_factor=4.0 / 3.0,
        polarization="vertical",
    )


def figure_of(
    path: Path, a_name="tower west", b_name="Mill Lane 3", signal=-71.23, threshold=-75.0
):
    return profile_figure(
        path,
        a_name=a_name,
        b_name=b_name,
        received_signal_dbm=signal,
        threshold_dbm=threshold,
    )


def texts(figure: Figure) -> dict[str, Text]:
    return {text.get_text(): text for text in figure.texts}


def wall(height_m: float, *, obstacle: bool = False) -> Terrain:
    """A flat plain with a wall across column 40, as ground or as an obstacle."""
    values = np.zeros((81, 81), dtype=np.float32)
    values[:, 40] = height_m
    return plain(obstacle=values) if obstacle else plain(ground=values)


@cache
def real_paths() -> dict[str, Path]:
    """Paths of many kinds on real elevation data and on invented ground."""
    terrain = jacksboro()
    summit = tuple(
        float(v) for v in np.unravel_index(np.nanargmax(terrain.ground_elevation_m), (1088, 1033))
    )
    paths = {
        "200 m": path_at(terrain, summit, (summit[0] + 4.0, summit[1] + 5.4)),
        "within a cell": path_at(terrain, summit, (summit[0] + 0.3, summit[1] + 0.4)),
        "30 km": path_at(terrain, (60.0, 60.0), (800.0, 720.0), (60.0, 60.0)),
        "odd frequency": path_at(terrain, (60.0, 60.0), (90.0, 900.0), (5.0, 1.5), 23_850.25),
        "obstacle": path_at(wall(20.0, obstacle=True), (40.0, 20.0), (40.0, 60.0)),
        "at the near end": path_at(wall(60.0), (40.0, 39.0), (40.0, 75.0)),
        "at the far end": path_at(wall(60.0), (40.0, 5.0), (40.0, 41.0)),
    }
    rng = np.random.default_rng(4)
    for number in range(8):
        a, b = rng.uniform(60.0, 1000.0, 2), rng.uniform(60.0, 1000.0, 2)
        paths[f"random {number}"] = path_at(terrain, tuple(a), tuple(b))
    return {name: path for name, path in paths.items() if not path.reason}


def test_no_text_covers_another_or_leaves_the_picture():
    """All texts with their drawn extents, short and very long names, strong and weak signals."""
    names = [
        ("west", "east"),
        ("a very long name of a tower " * 9, "住所 with $\\frac$ and <b> " * 9),
    ]
    checked = 0
    for (name, path), (a_name, b_name) in itertools.product(real_paths().items(), names):
        figure = figure_of(path, a_name, b_name, signal=-171.23, threshold=-75.25)
        canvas = figure.canvas
        assert isinstance(canvas, FigureCanvasAgg)
        canvas.draw()
        renderer = canvas.get_renderer()
        (axes,) = figure.axes
        ticks = []
        for labels, at, (low, high) in (
            (axes.get_xticklabels(), 0, axes.get_xlim()),
            (axes.get_yticklabels(), 1, axes.get_ylim()),
        ):
            ticks += [label for label in labels if low <= label.get_position()[at] <= high]
        shown = [text for text in figure.texts if text.get_text()]
        boxes = [(text.get_text(), text.get_window_extent(renderer)) for text in (*shown, *ticks)]
        width, height = figure.bbox.width, figure.bbox.height
        for text, box in boxes:
            assert 0.0 <= box.x0 < box.x1 <= width, (name, text)
            assert 0.0 <= box.y0 < box.y1 <= height, (name, text)
        for (one, box), (other, other_box) in itertools.combinations(boxes, 2):
            assert not box.overlaps(other_box), (name, one, other)
            checked += 1
        drawing = axes.get_window_extent(renderer)
        for text, box in boxes:
            assert not box.overlaps(drawing), (name, text)
    assert checked > 2000


def test_a_blocked_path_names_the_place_and_the_metres_in_the_accent():
    """A 60 m wall half-way: bulge and all 42.5 m and a little above the ray."""
    path = path_at(wall(60.0), (40.0, 20.0), (40.0, 60.0))
    found = texts(figure_of(path, signal=-80.0))
    excess = 60.0 + 1000.0**2 / (2.0 * EARTH_M) - 17.5
    label = found[f"1.00 km from tower west: the ground rises {excess:.1f} m above the direct ray"]
    assert to_hex(label.get_color()) == ACCENT
    short = found["received −80.0 dBm, 5.0 dB below the threshold of −75 dBm"]
    assert to_hex(short.get_color()) == ACCENT
    loss, bent = path.free_space_loss_db, path.diffraction.loss_db
    assert (
        f"free space {loss:.1f} dB + diffraction {bent:.1f} dB = path loss {loss + bent:.1f} dB "
        "at 5,600 MHz"
    ) in found
    assert {"tower west to Mill Lane 3", "2.00 km", "tower west", "Mill Lane 3"} <= set(found)
    end = f"antenna 30.0 m above ground, aims {path.azimuth_deg:03.0f}° T, elevation +1.71°"
    assert end + " to the horizon" in found


def test_a_clear_path_says_so_without_the_accent():
    """Nothing to act on: no text in the accent."""
    path = path_at(plain(), (40.0, 20.0), (40.0, 60.0))
    figure = figure_of(path)
    assert path.worst_clearance_ratio > 1.0
    assert ACCENT not in {to_hex(text.get_color()) for text in figure.texts}
    assert any("out of the first Fresnel zone" in text for text in texts(figure))
    assert "received −71.2 dBm, 3.8 dB above the threshold of −75 dBm" in texts(figure)
    quiet = texts(figure_of(path, signal=None, threshold=None))
    assert not any(text.startswith("received") for text in quiet)


@pytest.mark.parametrize(("height_m", "act"), [(14.5, True), (13.5, False)])
def test_less_than_60_percent_of_the_zone_asks_for_action(height_m, act):
    """Half-way on 2 km at 5.6 GHz the radius is 5.17 m; the ray is 17.5 m up, the bulge 0.06 m."""
    path = path_at(wall(height_m), (40.0, 20.0), (40.0, 60.0))
    radius = math.sqrt(299_792_458.0 / 5.6e9 * 1000.0 * 1000.0 / 2000.0)
    share = (17.5 - height_m - 1000.0**2 / (2.0 * EARTH_M)) / radius
    assert act == (share < 0.6)
    found = texts(figure_of(path))
    clearance = path.worst_clearance_m
    label = found[
        f"1.00 km from tower west: the ground stays {clearance:.1f} m below the direct ray, "
        f"{100.0 * share:.0f} % of the first Fresnel radius"
    ]
    assert (to_hex(label.get_color()) == ACCENT) == act


def test_an_obstacle_is_called_one_and_has_a_key():
    """The wall as an obstacle: named so, and the key explains its tone."""
    found = texts(figure_of(path_at(wall(60.0, obstacle=True), (40.0, 20.0), (40.0, 60.0))))
    assert any(": an obstacle rises 42.6 m above" in text for text in found)
    assert "obstacles" in found
    assert "obstacles" not in texts(figure_of(path_at(wall(60.0), (40.0, 20.0), (40.0, 60.0))))


def test_the_drawing_holds_all_that_rises_and_both_masts():
    """Highest point, zone and mast feet lie within the drawing, and all of the distance."""
    for name, path in real_paths().items():
        (axes,) = figure_of(path).axes
        low, high = axes.get_ylim()
        above = -path.clearance_m()
        assert high > max(float(above.max()), 0.0), name
        assert low < min(float(above[0]), float(above[-1])), name
        assert high > float(path.fresnel_radius_m().max()), name
        assert axes.get_xlim() == (0.0, path.profile_distance_m[-1] / 1000.0), name


def test_the_same_path_gives_the_same_bytes_whatever_the_settings(tmp_path: FilePath):
    """Twice, once with other matplotlib settings: equal, without clock or version, and the
    settings are as they were."""
    path = real_paths()["30 km"]
    one, two = tmp_path / "one.png", tmp_path / "two.png"

    def write(target: FilePath) -> None:
        write_profile_picture(
            target,
            path,
            a_name="west",
            b_name="east",
            received_signal_dbm=-71.2,
            threshold_dbm=-75.0,
        )

    write(one)
    changes = {
        "font.size": 20.0,
        "savefig.facecolor": "black",
        "savefig.bbox": "tight",
        "axes.grid": True,
        "lines.linestyle": ":",
        "path.simplify": False,
    }
    with matplotlib.rc_context(changes):
        write(two)
        assert matplotlib.rcParams["font.size"] == 20.0
    assert one.read_bytes() == two.read_bytes()
    assert sorted(path.name for path in tmp_path.iterdir()) == ["one.png", "two.png"]
    with Image.open(one) as picture:
        assert picture.size == (1504, 864)
        assert picture.info.keys() <= {"dpi"}


def test_a_path_that_was_not_computed_is_no_picture(tmp_path: FilePath):
    """An error that says why, and no file."""
    ground = np.zeros((81, 81), dtype=np.float32)
    ground[:, 40] = np.nan
    path = path_at(plain(ground=ground), (40.0, 20.0), (40.0, 60.0))
    with pytest.raises(TerrainError) as caught:
        write_profile_picture(
            tmp_path / "no.png",
            path,
            a_name="west",
            b_name="east",
            received_signal_dbm=None,
            threshold_dbm=None,
        )
    assert str(caught.value) == (
        "west to east: found no path to draw: the path crosses missing terrain data"
    )
    assert list(tmp_path.iterdir()) == []
