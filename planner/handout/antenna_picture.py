"""Draw a pattern: its two cuts through the peak as polar plots, and all of it as a map of levels.

Levels are relative to the peak. Nothing is written inside the drawings; each label has a place of
its own outside.
"""

import math
from collections.abc import Callable
from pathlib import Path

import matplotlib
import numpy as np
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.colors import BoundaryNorm, ListedColormap
from matplotlib.figure import Figure
from matplotlib.patches import Rectangle
from matplotlib.projections.polar import PolarAxes
from numpy.typing import NDArray

from planner.antenna import Pattern
from planner.antenna.beamwidth import HALF_POWER_DB
from planner.antenna.key_figures import CutFigures, KeyFigures
from planner.handout.colours import (
    ACCENT,
    INK,
    PAPER,
    QUIET,
    RULE,
    SIGNAL_RAMP,
    SIGNAL_STEP_DB,
    SMALL_PT,
    TEXT_PT,
    TITLE_PT,
)
from planner.handout.picture_text import fit, font, plain, width_px, with_minus, write
from planner.io.atomic import replaced

Level = Callable[[NDArray[np.float64], NDArray[np.float64]], NDArray[np.float64]]

WIDTH_PX, HEIGHT_PX, DPI = 1504, 1584, 150
FLOOR_DB = -40.0  # at the centre of the polar plots
RING_STEP_DB = 10.0
_LOWEST_DB = -1000.0
_LEFT, _RIGHT = 104, 1464
_POLAR_TOP, _POLAR_SIZE = 232, 540
_POLAR_LEFTS = 120, 856
_MAP_LEFT, _MAP_TOP, _MAP_WIDTH, _MAP_HEIGHT = 104, 956, 1056, 528
_CURVE = SIGNAL_RAMP[-2]


def write_antenna_picture(
    target: Path, pattern: Pattern, figures: KeyFigures, *, electrical_downtilt_deg: float = 0.0
) -> None:
    """Write the picture of a pattern as PNG, the same bytes for the same pattern.

    Parameters
    ----------
    target : path of the file
    pattern : Pattern
    figures : KeyFigures
        Of this pattern at this tilt.
    electrical_downtilt_deg : float
        Positive downwards. [deg]

    Raises
    ------
    OutputError
        The file could not be written.
    """
    with matplotlib.rc_context():
        matplotlib.rcdefaults()  # the settings of this machine must not change the picture
        figure = antenna_figure(pattern, figures, electrical_downtilt_deg=electrical_downtilt_deg)
        with replaced(Path(target)) as file:
            figure.savefig(file, format="png", dpi=DPI, metadata={"Software": None})


def antenna_figure(
    pattern: Pattern, figures: KeyFigures, *, electrical_downtilt_deg: float = 0.0
) -> Figure:
    """The figure of :func:`write_antenna_picture`."""
    figure = Figure(figsize=(WIDTH_PX / DPI, HEIGHT_PX / DPI), dpi=DPI, facecolor=PAPER)
    FigureCanvasAgg(figure)

    def level_db(
        azimuth_deg: NDArray[np.float64], elevation_deg: NDArray[np.float64]
    ) -> NDArray[np.float64]:
        gain_dbi = pattern.gain(
            azimuth_deg, elevation_deg, electrical_downtilt_deg=electrical_downtilt_deg
        )
        return np.asarray(gain_dbi - figures.peak_gain_dbi)

    _write_head(figure, pattern, figures, electrical_downtilt_deg)
    peak = np.array(figures.peak_azimuth_offset_deg), np.array(figures.peak_elevation_deg)
    around = np.linspace(-180.0, 180.0, 2881)
    _draw_polar(
        figure,
        _POLAR_LEFTS[0],
        f"azimuth cut at {_signed(float(peak[1]))} elevation",
        "seen from above, boresight up, clockwise",
        around,
        level_db(around, peak[1]),
        figures.azimuth,
        upright=True,
    )
    front = np.abs(around) <= 90.0
    _draw_polar(
        figure,
        _POLAR_LEFTS[1],
        f"elevation cut at {_signed(float(peak[0]))} azimuth",
        "seen from the side, boresight to the right",
        around,
        level_db(
            np.where(front, peak[0], peak[0] + 180.0),
            np.where(front, around, np.copysign(180.0, around) - around),
        ),
        figures.elevation,
        upright=False,
    )
    _draw_map(figure, level_db)
    return figure


def _write_head(
    figure: Figure, pattern: Pattern, figures: KeyFigures, electrical_downtilt_deg: float
) -> None:
    gain = write(
        figure, _RIGHT, 48, f"{_decimal(figures.peak_gain_dbi)} dBi", TITLE_PT, colour=INK,
        align="right",
    )  # fmt: skip
    name = write(figure, _LEFT, 48, plain(pattern.name), TITLE_PT, colour=INK, bold=True)
    fit(figure, name, _RIGHT - _LEFT - width_px(figure, gain) - 32)
    widths = [
        "all around" if width is None else f"{width:.1f}°"
        for width in (
            figures.azimuth.half_power_beamwidth_deg,
            figures.elevation.half_power_beamwidth_deg,
        )
    ]
    text = f"half-power beamwidth {widths[0]} in azimuth, {widths[1]} in elevation"
    if math.isfinite(figures.front_to_back_region_db):
        text += f"; front-to-back {figures.front_to_back_region_db:.1f} dB over 180° ± 30°"
    if electrical_downtilt_deg:
        text += f"; electrical downtilt {with_minus(f'{electrical_downtilt_deg:g}')}°"
    fit(figure, write(figure, _LEFT, 84, text, SMALL_PT, colour=QUIET), _RIGHT - _LEFT)
    text, act = _gain_against_directivity(figures)
    label = write(figure, _LEFT, 116, text, TEXT_PT, colour=ACCENT if act else INK, bold=act)
    fit(figure, label, _RIGHT - _LEFT)


def _gain_against_directivity(figures: KeyFigures) -> tuple[str, bool]:
    """What the integral over the sphere says of the gain, and whether the reader should act."""
    directivity = f"directivity {_decimal(figures.directivity_dbi)} dBi by integration"
    if figures.gain_verdict == "impossible":
        return (
            f"{directivity}: the gain is {figures.gain_above_directivity_db:.1f} dB above it, "
            "which is impossible",
            True,
        )
    if figures.efficiency is None:
        return "an envelope: gain is not held against directivity", False
    return f"{directivity}; the gain implies {100.0 * figures.efficiency:.0f} % efficiency", False


def _draw_polar(
    figure: Figure,
    left_px: int,
    title: str,
    subtitle: str,
    angle_deg: NDArray[np.float64],
    level_db: NDArray[np.float64],
    cut: CutFigures,
    *,
    upright: bool,
) -> None:
    """One cut; ``upright`` has 0 at the top and runs clockwise, else 0 is right and up is up."""
    middle = left_px + 0.5 * _POLAR_SIZE
    write(figure, middle, _POLAR_TOP - 64, title, TEXT_PT, colour=INK, bold=True, align="center")
    axes = figure.add_axes(
        (
            left_px / WIDTH_PX,
            1.0 - (_POLAR_TOP + _POLAR_SIZE) / HEIGHT_PX,
            _POLAR_SIZE / WIDTH_PX,
            _POLAR_SIZE / HEIGHT_PX,
        ),
        projection="polar",
        facecolor="none",
    )
    assert isinstance(axes, PolarAxes)
    if upright:
        axes.set_theta_zero_location("N")
        axes.set_theta_direction(-1)
    axes.set_ylim(FLOOR_DB, 0.0)
    axes.set_yticks(np.arange(FLOOR_DB + RING_STEP_DB, 1.0, RING_STEP_DB), labels=[])
    directions = range(0, 360, 30)
    names = [_signed(d if d <= 180 else d - 360) for d in directions]
    axes.set_thetagrids(directions, names)
    for label in axes.get_xticklabels():
        label.set_fontproperties(font(SMALL_PT))
        label.set_color(QUIET)
    axes.tick_params(pad=4)
    axes.grid(color=RULE, linewidth=0.6)
    axes.spines["polar"].set(color=QUIET, linewidth=0.6)
    shown_db = np.clip(level_db, FLOOR_DB, 0.0)
    axes.plot(np.radians(angle_deg), shown_db, color=_CURVE, linewidth=1.2)
    if cut.half_power_edges_deg is not None:
        for edge_deg in cut.half_power_edges_deg:
            axes.plot(
                (math.radians(edge_deg),) * 2, (FLOOR_DB, 0.0), color=INK, linewidth=0.7,
                linestyle=(0, (5, 3)),
            )  # fmt: skip
    below = _POLAR_TOP + _POLAR_SIZE
    write(figure, middle, below + 68, subtitle, SMALL_PT, colour=QUIET, align="center")
    rings = f"rings every {RING_STEP_DB:g} dB, centre {-FLOOR_DB:g} dB below the peak" + (
        "; dashed: 3 dB edges" if cut.half_power_edges_deg is not None else ""
    )
    write(figure, middle, below + 92, rings, SMALL_PT, colour=QUIET, align="center")


def _draw_map(figure: Figure, level_db: Level) -> None:
    """Levels over the sphere in steps of 5 dB, with the line 3 dB below the peak."""
    title = "all directions: level relative to the peak"
    write(figure, _MAP_LEFT, _MAP_TOP - 28, title, TEXT_PT, colour=INK, bold=True)
    axes = figure.add_axes(
        (
            _MAP_LEFT / WIDTH_PX,
            1.0 - (_MAP_TOP + _MAP_HEIGHT) / HEIGHT_PX,
            _MAP_WIDTH / WIDTH_PX,
            _MAP_HEIGHT / HEIGHT_PX,
        )
    )
    azimuths = np.linspace(-180.0, 180.0, 1057)
    elevations = np.linspace(-90.0, 90.0, 529)
    levels = level_db(azimuths[np.newaxis, :], elevations[:, np.newaxis])
    levels = np.clip(levels, _LOWEST_DB, 0.0)  # also what is nothing, minus infinity
    bounds = [-SIGNAL_STEP_DB * step for step in range(len(SIGNAL_RAMP) - 1, 0, -1)]
    axes.imshow(
        levels,
        extent=(-180.0, 180.0, -90.0, 90.0),
        origin="lower",
        aspect="auto",
        interpolation="nearest",
        cmap=ListedColormap(SIGNAL_RAMP),
        norm=BoundaryNorm([_LOWEST_DB, *bounds, 1.0], len(SIGNAL_RAMP)),
    )
    falls = bool(levels.min() < -HALF_POWER_DB)
    if falls:
        axes.contour(
            azimuths, elevations, levels, levels=[-HALF_POWER_DB], colors=[PAPER], linewidths=0.9,
            linestyles="solid",
        )  # fmt: skip
    axes.set_xticks(np.arange(-180, 181, 30), [_signed(a) for a in range(-180, 181, 30)])
    axes.set_yticks(np.arange(-90, 91, 30), [_signed(e) for e in range(-90, 91, 30)])
    axes.tick_params(length=4, width=0.6, color=QUIET, labelcolor=QUIET, pad=5)
    for label in (*axes.get_xticklabels(), *axes.get_yticklabels()):
        label.set_fontproperties(font(SMALL_PT))
    for spine in axes.spines.values():
        spine.set(color=QUIET, linewidth=0.6)
    text = "azimuth from the boresight, clockwise; elevation upwards"
    middle = _MAP_LEFT + 0.5 * _MAP_WIDTH
    write(figure, middle, _MAP_TOP + _MAP_HEIGHT + 64, text, SMALL_PT, colour=QUIET, align="center")
    _write_key(figure, falls)


def _write_key(figure: Figure, falls: bool) -> None:
    x, y = float(_MAP_LEFT + _MAP_WIDTH + 48), float(_MAP_TOP)
    write(figure, x, y + 12, "dB below the peak", SMALL_PT, colour=QUIET)
    for number, colour in enumerate(reversed(SIGNAL_RAMP)):
        top = y + 32 + 40 * number
        figure.add_artist(
            Rectangle(
                (x / WIDTH_PX, 1.0 - (top + 28) / HEIGHT_PX), 40 / WIDTH_PX, 28 / HEIGHT_PX,
                facecolor=colour, edgecolor=RULE, linewidth=0.6,
            )
        )  # fmt: skip
        from_db, to_db = SIGNAL_STEP_DB * number, SIGNAL_STEP_DB * (number + 1)
        last = number == len(SIGNAL_RAMP) - 1
        text = f"more than {from_db:g} dB" if last else f"{from_db:g} to {to_db:g} dB"
        write(figure, x + 56, top + 21, text, SMALL_PT, colour=QUIET)
    top = y + 32 + 40 * len(SIGNAL_RAMP) + 16
    if falls:
        text = f"light line: {HALF_POWER_DB:g} dB below"
        write(figure, x, top + 20, text, SMALL_PT, colour=QUIET)


def _decimal(value: float) -> str:
    return with_minus(f"{round(value, 1) + 0.0:.1f}")


def _signed(angle_deg: float) -> str:
    rounded = round(float(angle_deg), 1) + 0.0
    return with_minus(f"{rounded:+g}°") if rounded else "0°"
