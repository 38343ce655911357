"""The pictures of an antenna: nothing covers anything, they say what the figures say."""

import itertools
from pathlib import Path

import matplotlib
import pytest
from analytic_patterns import Analytic, cosine_power, line_source
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.colors import to_hex

from planner.antenna import Isotropic, formula_pattern
from planner.antenna.flat_ground import flat_ground_rings
from planner.antenna.key_figures import key_figures
from planner.handout.antenna_picture import antenna_figure, write_antenna_picture
from planner.handout.colours import ACCENT
from planner.handout.ground_picture import ground_figure, write_ground_picture

LONG_NAME = "a very long name of a file " * 9
PATTERNS = {
    "sector": formula_pattern(
        "panel",
        "TR 36.814",
        frequency_mhz=5600.0,
        gain_dbi=15.0,
        azimuth_beamwidth_deg=65.0,
        elevation_beamwidth_deg=8.0,
    ),
    "isotropic": Isotropic(name="i", gain_dbi=2.0),
    "line": Analytic(intensity=line_source(20.0), name=LONG_NAME),
    "dish": Analytic(intensity=cosine_power(20_000, azimuth_deg=30.0, elevation_deg=-20.0)),
}
MOUNTS = [
    (30.0, 4.0, 0.0),
    (30.0, 0.0, 0.0),
    (2.0, -9.5, 2.25),
    (900.0, 30.0, 15.0),
    (30.0, 0.3, 0.0),
]


def drawn_texts(figure):
    """(text, extent) of all that is written, tick labels included."""
    canvas = figure.canvas
    assert isinstance(canvas, FigureCanvasAgg)
    canvas.draw()
    renderer = canvas.get_renderer()
    found = [text for text in figure.texts if text.get_text()]
    for axes in figure.axes:
        for labels, (low, high) in (
            (axes.get_xticklabels(), axes.get_xlim()),
            (axes.get_yticklabels(), axes.get_ylim()),
        ):
            at = 0 if labels and labels[0] in axes.get_xticklabels() else 1
            found += [
                label
                for label in labels
                if label.get_text() and low - 1e-9 <= label.get_position()[at] <= high + 1e-9
            ]
    return [(text.get_text(), text.get_window_extent(renderer)) for text in found]


def check(figure):
    boxes = drawn_texts(figure)
    assert len(boxes) > 15
    width, height = figure.bbox.width, figure.bbox.height
    for text, box in boxes:
        assert 0.0 <= box.x0 < box.x1 <= width, text
        assert 0.0 <= box.y0 < box.y1 <= height, text
    for (one, box), (other, other_box) in itertools.combinations(boxes, 2):
        assert not box.overlaps(other_box), (one, other)


@pytest.mark.parametrize("name", PATTERNS)
def test_nothing_covers_anything_in_the_picture_of_a_pattern(name):
    """All texts with their drawn extents; none leaves the picture."""
    pattern = PATTERNS[name]
    check(antenna_figure(pattern, key_figures(pattern)))


@pytest.mark.parametrize("mount", MOUNTS)
@pytest.mark.parametrize("name", PATTERNS)
def test_nothing_covers_anything_in_the_picture_of_the_ground(name, mount):
    """Beams near and far, above the horizon, and none at all."""
    figure = figure_on_ground(PATTERNS[name], mount)
    check(figure)


def figure_on_ground(pattern, mount, power_dbm=None):
    height, mechanical, electrical = mount
    rings = flat_ground_rings(
        pattern,
        antenna_height_m=height,
        mechanical_downtilt_deg=mechanical,
        electrical_downtilt_deg=electrical,
    )
    return ground_figure(
        pattern,
        rings,
        antenna_height_m=height,
        mechanical_downtilt_deg=mechanical,
        electrical_downtilt_deg=electrical,
        power_dbm=power_dbm,
    )


def test_the_accent_marks_an_impossible_gain_only():
    """2 dBi from an isotropic pattern; 15 dBi from a sector is no cause to act."""
    for name, act in (("isotropic", True), ("sector", False)):
        figure = antenna_figure(PATTERNS[name], key_figures(PATTERNS[name]))
        colours = {to_hex(text.get_color()) for text in figure.texts}
        assert (ACCENT in colours) == act
        assert any("impossible" in text.get_text() for text in figure.texts) == act


def test_the_ground_s_rings_stand_where_they_are_said_to():
    """30 m up, 4 deg down, 8 deg high: 429 m; its edges at 0 deg and at 8 deg, 213 m."""
    figure = figure_on_ground(PATTERNS["sector"], MOUNTS[0], power_dbm=24.0)
    texts = [text.get_text() for text in figure.texts]
    assert "main beam lands at 429 m (−4.0° elevation)" in texts
    assert "lower 3 dB edge lands at 213 m (−8.0° elevation)" in texts
    assert any(text.startswith("downtilt 4° mechanical, 0° electrical; 24 dBm") for text in texts)
    [curve] = figure.axes[0].get_lines()
    distance, density = curve.get_data()
    at = abs(distance - 429.02).argmin()
    # 39 dBm over 4 pi (30² + 429²)
    assert density[at] == pytest.approx(39.0 - 10.992 - 52.671, abs=0.02)


def test_the_same_antenna_gives_the_same_bytes_whatever_the_settings(tmp_path: Path):
    """Twice, once with other matplotlib settings: equal, and the settings are as they were."""
    pattern = PATTERNS["sector"]
    figures = key_figures(pattern)
    rings = flat_ground_rings(pattern, antenna_height_m=30.0, mechanical_downtilt_deg=4.0)

    def write(name: str) -> tuple[bytes, bytes]:
        one, two = tmp_path / f"{name}-a.png", tmp_path / f"{name}-g.png"
        write_antenna_picture(one, pattern, figures)
        write_ground_picture(
            two,
            pattern,
            rings,
            antenna_height_m=30.0,
            mechanical_downtilt_deg=4.0,
            electrical_downtilt_deg=0.0,
            power_dbm=None,
        )
        return one.read_bytes(), two.read_bytes()

    before = write("before")
    with matplotlib.rc_context({"font.size": 20.0, "axes.grid": True, "lines.linestyle": ":"}):
        assert write("after") == before
        assert matplotlib.rcParams["font.size"] == 20.0
    assert before[0] != before[1]
