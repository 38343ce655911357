"""Draw one path: the direct ray as a straight line, and what comes near it.

Height in the picture is metres above or below the direct ray, so the ray is the horizontal line at
0 and what rises through it blocks. The bulge of the earth, with its effective radius, is part of
the ground. Each label has a strip of its own outside the drawing, so that none covers another.
"""

import math
from dataclasses import dataclass
from pathlib import Path as FilePath

import matplotlib
import numpy as np
from matplotlib.artist import Artist
from matplotlib.axes import Axes
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.figure import Figure
from matplotlib.lines import Line2D
from matplotlib.patches import Rectangle
from matplotlib.ticker import FuncFormatter, MaxNLocator
from numpy.typing import NDArray

from planner.errors import Problem, TerrainError
from planner.handout.colours import (
    ACCENT,
    INK,
    PAPER,
    QUIET,
    RULE,
    SIGNAL_RAMP,
    SMALL_PT,
    TEXT_PT,
    TITLE_PT,
)
from planner.handout.picture_text import (
    bearing,
    fit,
    font,
    length,
    plain,
    signed,
    width_px,
    with_minus,
    write,
)
from planner.io.atomic import replaced
from planner.physics.free_space import wavelength_m_scalar
from planner.physics.fresnel import fresnel_radius_m
from planner.sweep import Path
from planner.units import EARTH_RADIUS_KM

# Paper and stone tones of the ground, and what stands on it.
GROUND = "#d9d1c3"
GROUND_EDGE = "#8f8676"
OBSTACLE = "#b9b8a0"
ZONE = SIGNAL_RAMP[5]
BLOCKED = "#dcab97"  # the accent, pale: what rises through the ray

WIDTH_PX, HEIGHT_PX, DPI = 1504, 864, 150
_LEFT, _RIGHT, _TOP, _BOTTOM = 104, 1464, 208, 736  # of the drawing, from the top left
_WANTED_RATIO = 0.6  # of the first Fresnel radius; common planning aim, as in ITU-R P.530-18, 2.2.2


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class _Profile:
    """The path about its straightened ray; heights in metres above the ray."""

    distance_km: NDArray[np.float64]  # (n,)
    ground_m: NDArray[np.float64]  # (n,)
    surface_m: NDArray[np.float64]  # (n,) with obstacles
    zone_distance_km: NDArray[np.float64]  # (m,) for the zone, which is smooth on any profile
    zone_m: NDArray[np.float64]  # (m,) first Fresnel radius


def write_profile_picture(
    target: FilePath,
    path: Path,
    *,
    a_name: str,
    b_name: str,
    received_signal_dbm: float | None,
    threshold_dbm: float | None,
) -> None:
    """Write the picture of a path as PNG, the same bytes for the same path.

    Parameters
    ----------
    target : path of the file
    path : Path
        A computed path; its end a stands on the left.
    a_name, b_name : str
        What stands at the ends; any text.
    received_signal_dbm, threshold_dbm : float or None
        Signal at b, and the weakest that counts as service; None leaves it out. [dBm]

    Raises
    ------
    TerrainError
        The path could not be computed.
    OutputError
        The file could not be written.
    """
    if path.reason:
        raise TerrainError(
            Problem(where=f"{a_name} to {b_name}", found=f"no path to draw: {path.reason}")
        )
    with matplotlib.rc_context():
        matplotlib.rcdefaults()  # the settings of this machine must not change the picture
        figure = profile_figure(
            path,
            a_name=a_name,
            b_name=b_name,
            received_signal_dbm=received_signal_dbm,
            threshold_dbm=threshold_dbm,
        )
        with replaced(FilePath(target)) as file:
            figure.savefig(file, format="png", dpi=DPI, metadata={"Software": None})


def profile_figure(
    path: Path,
    *,
    a_name: str,
    b_name: str,
    received_signal_dbm: float | None,
    threshold_dbm: float | None,
) -> Figure:
    """The figure of :func:`write_profile_picture`."""
    figure = Figure(figsize=(WIDTH_PX / DPI, HEIGHT_PX / DPI), dpi=DPI, facecolor=PAPER)
    FigureCanvasAgg(figure)
    a_name, b_name = plain(a_name), plain(b_name)
    profile = _profile(path)
    _write_head(figure, path, f"{a_name} to {b_name}", received_signal_dbm, threshold_dbm)
    _write_ends(figure, path, a_name, b_name)
    axes = _axes(figure, profile)
    _draw(axes, profile)
    _name_worst_point(figure, axes, path, a_name)
    _write_foot(figure, axes, path, profile, a_name)
    return figure


def _profile(path: Path) -> _Profile:
    surface = -path.clearance_m()
    total = path.distance_m
    zone_distance = total * (0.5 - 0.5 * np.cos(np.linspace(0.0, math.pi, 181)))
    wavelength = wavelength_m_scalar(path.frequency_mhz)
    return _Profile(
        distance_km=path.profile_distance_m / 1000.0,
        ground_m=surface - path.profile_obstacle_m,
        surface_m=surface,
        zone_distance_km=zone_distance / 1000.0,
        zone_m=np.asarray(fresnel_radius_m(zone_distance, total - zone_distance, wavelength)),
    )


def _limits_m(profile: _Profile) -> tuple[float, float]:
    """Lowest and highest metres drawn: all that rises, both masts, and the ground near the ray.

    Deep valleys run out of the picture: they do not matter, and would flatten what does.
    """
    zone = float(profile.zone_m.max())
    highest = max(float(profile.surface_m.max()), 0.0)
    masts = -min(float(profile.ground_m[0]), float(profile.ground_m[-1]))
    top = max(1.3 * zone, 1.1 * highest, 0.12 * masts)
    bottom = max(1.35 * masts, 6.0 * zone, 0.5 * highest)
    deepest = -float(profile.ground_m.min())
    return -max(min(bottom, 1.15 * deepest), 1.2 * masts), top


def _axes(figure: Figure, profile: _Profile) -> Axes:
    axes = figure.add_axes(
        (
            _LEFT / WIDTH_PX,
            1.0 - _BOTTOM / HEIGHT_PX,
            (_RIGHT - _LEFT) / WIDTH_PX,
            (_BOTTOM - _TOP) / HEIGHT_PX,
        ),
        facecolor="none",
    )
    axes.set_xlim(0.0, float(profile.distance_km[-1]))
    axes.set_ylim(*_limits_m(profile))
    axes.xaxis.set_major_locator(MaxNLocator(nbins=9, steps=[1, 2, 2.5, 5, 10]))
    axes.yaxis.set_major_locator(MaxNLocator(nbins=7, steps=[1, 2, 5, 10]))
    axes.xaxis.set_major_formatter(FuncFormatter(lambda value, _: f"{value:g}"))
    axes.yaxis.set_major_formatter(FuncFormatter(lambda value, _: signed(round(value, 6))))
    axes.tick_params(length=4, width=0.6, color=QUIET, labelcolor=QUIET, pad=5)
    axes.tick_params(axis="y", length=0)
    for label in (*axes.get_xticklabels(), *axes.get_yticklabels()):
        label.set_fontproperties(font(SMALL_PT))
    axes.grid(axis="y", color=RULE, linewidth=0.6)
    axes.set_axisbelow(True)
    for side in ("top", "right", "left"):
        axes.spines[side].set_visible(False)
    axes.spines["bottom"].set(color=QUIET, linewidth=0.6)
    return axes


def _draw(axes: Axes, profile: _Profile) -> None:
    x, ground, surface = profile.distance_km, profile.ground_m, profile.surface_m
    bottom = axes.get_ylim()[0]
    axes.fill_between(x, bottom, surface, color=OBSTACLE, linewidth=0, zorder=1.0)
    axes.fill_between(x, bottom, ground, color=GROUND, linewidth=0, zorder=1.1)
    blocked = surface > 0.0
    if blocked.any():
        axes.fill_between(
            x, 0.0, surface, where=blocked.tolist(), interpolate=True, color=BLOCKED,
            linewidth=0, zorder=1.2,
        )  # fmt: skip
    axes.plot(x, surface, color=GROUND_EDGE, linewidth=0.6, zorder=1.3)
    axes.plot(x, ground, color=GROUND_EDGE, linewidth=0.9, zorder=1.4)
    for share, dashes in ((1.0, None), (-1.0, None), (-_WANTED_RATIO, (5, 3))):
        (line,) = axes.plot(
            profile.zone_distance_km, share * profile.zone_m, color=ZONE, linewidth=0.8, zorder=2
        )
        if dashes:
            line.set_dashes(dashes)
    axes.plot((0.0, x[-1]), (0.0, 0.0), color=INK, linewidth=1.2, zorder=3, clip_on=False)
    for at in (0, -1):
        axes.plot(
            (x[at], x[at]), (ground[at], 0.0), color=INK, linewidth=2.4, zorder=3,
            clip_on=False, solid_capstyle="butt",
        )  # fmt: skip
        axes.plot(
            x[at], 0.0, marker="o", markersize=6, markerfacecolor=PAPER, markeredgecolor=INK,
            markeredgewidth=1.4, zorder=4, clip_on=False,
        )  # fmt: skip


def _write_head(
    figure: Figure,
    path: Path,
    title: str,
    received_signal_dbm: float | None,
    threshold_dbm: float | None,
) -> None:
    distance = write(
        figure, _RIGHT, 48, length(path.distance_m), TITLE_PT, colour=INK, align="right"
    )
    room = _RIGHT - _LEFT - width_px(figure, distance) - 32
    fit(figure, write(figure, _LEFT, 48, title, TITLE_PT, colour=INK, bold=True), room)
    losses = (
        f"free space {path.free_space_loss_db:.1f} dB + diffraction "
        f"{path.diffraction.loss_db:.1f} dB = path loss {path.path_loss_db:.1f} dB "
        f"at {path.frequency_mhz:,.6g} MHz"
    )
    write(figure, _LEFT, 80, losses, SMALL_PT, colour=QUIET)
    if received_signal_dbm is None or math.isnan(received_signal_dbm):
        return
    text, colour = f"received {with_minus(f'{received_signal_dbm:.1f}')} dBm", QUIET
    if threshold_dbm is not None:
        margin_db = received_signal_dbm - threshold_dbm
        text += (
            f", {abs(margin_db):.1f} dB {'below' if margin_db < 0.0 else 'above'} "
            f"the threshold of {with_minus(f'{threshold_dbm:g}')} dBm"
        )
        colour = ACCENT if margin_db < 0.0 else QUIET
    write(figure, _RIGHT, 80, text, TEXT_PT, colour=colour, align="right")


def _write_ends(figure: Figure, path: Path, a_name: str, b_name: str) -> None:
    """Name, height, bearing and elevation of each end, above its mast."""
    ends = (
        (a_name, path.a_height_m, 0, path.azimuth_deg, path.elevation_angle_deg),
        (b_name, path.b_height_m, -1, path.back_azimuth_deg, path.back_elevation_angle_deg),
    )
    towards = "" if path.line_of_sight else " to the horizon"
    for name, height_m, at, azimuth_deg, elevation_deg in ends:
        x, align = (_LEFT, "left") if at == 0 else (_RIGHT, "right")
        title = write(figure, x, 124, name, TEXT_PT, colour=INK, bold=True, align=align)
        fit(figure, title, 0.48 * (_RIGHT - _LEFT))
        above_ground_m = height_m - float(path.profile_ground_m[at])
        text = (
            f"antenna {above_ground_m:,.1f} m above ground, aims {bearing(azimuth_deg)}, "
            f"elevation {with_minus(f'{elevation_deg:+.2f}')}°{towards}"
        )
        write(figure, x, 146, text, SMALL_PT, colour=QUIET, align=align)


def _name_worst_point(figure: Figure, axes: Axes, path: Path, a_name: str) -> None:
    """Say what blocks or comes nearest, in the strip above the drawing, with a line to it."""
    clearance_m, ratio = path.worst_clearance_m, path.worst_clearance_ratio
    if math.isnan(ratio):  # nothing stands between the ends
        return
    at_m = path.worst_clearance_distance_m
    index = int(np.argmin(np.abs(path.profile_distance_m - at_m)))
    obstacle_m = float(path.profile_obstacle_m[index])
    thing = "the ground" if obstacle_m == 0.0 else "an obstacle"
    name = a_name if len(a_name) <= 24 else a_name[:23].rstrip() + "…"
    text = f"{length(at_m)} from {name}: {thing} "
    if clearance_m <= 0.0:
        text += f"rises {-clearance_m:,.1f} m above the direct ray"
    elif ratio < 1.0:
        text += (
            f"stays {clearance_m:,.1f} m below the direct ray, "
            f"{100.0 * ratio:.0f} % of the first Fresnel radius"
        )
    else:
        text += f"stays {clearance_m:,.1f} m below the direct ray, out of the first Fresnel zone"
    act = ratio < _WANTED_RATIO
    colour = ACCENT if act else INK
    x_px = _LEFT + (_RIGHT - _LEFT) * at_m / path.distance_m
    label = write(figure, 0, 188, text, TEXT_PT, colour=colour, bold=act)
    width = width_px(figure, label)
    label.set_x(min(max(x_px - width / 2.0, _LEFT), _RIGHT - width) / WIDTH_PX)
    low, high = axes.get_ylim()
    y_px = _TOP + (_BOTTOM - _TOP) * min((high + clearance_m) / (high - low), 1.0)
    figure.add_artist(
        Line2D(
            (x_px / WIDTH_PX, x_px / WIDTH_PX),
            (1.0 - 196 / HEIGHT_PX, 1.0 - y_px / HEIGHT_PX),
            color=colour,
            linewidth=0.9,
            zorder=5,
        )
    )
    figure.add_artist(
        Line2D(
            (x_px / WIDTH_PX,), (1.0 - y_px / HEIGHT_PX,), marker="o", markersize=4.5,
            markerfacecolor=colour, markeredgecolor=PAPER, markeredgewidth=0.6, zorder=6,
        )
    )  # fmt: skip


def _write_foot(figure: Figure, axes: Axes, path: Path, profile: _Profile, a_name: str) -> None:
    """Titles of the axes, the key, and what the drawing does not show."""
    middle = 0.5 * (_LEFT + _RIGHT)
    title = write(figure, middle, 792, f"km from {a_name}", SMALL_PT, colour=QUIET, align="center")
    fit(figure, title, 0.5 * (_RIGHT - _LEFT))
    deepest_m = float(profile.ground_m.min())
    if deepest_m < axes.get_ylim()[0]:
        text = f"deepest ground {-deepest_m:,.0f} m below the ray"
        write(figure, _RIGHT, 792, text, SMALL_PT, colour=QUIET, align="right")
    figure.text(
        36 / WIDTH_PX, 1.0 - 0.5 * (_TOP + _BOTTOM) / HEIGHT_PX, "metres from the direct ray",
        fontproperties=font(SMALL_PT), color=QUIET, rotation=90.0,
        horizontalalignment="center", verticalalignment="center",
    )  # fmt: skip
    key: list[tuple[str, str, tuple[float, float] | None]] = [
        ("direct ray", INK, None),
        ("first Fresnel zone", ZONE, None),
        (f"{100.0 * _WANTED_RATIO:.0f} % of its radius", ZONE, (5.0, 3.0)),
        ("ground", GROUND, None),
    ]
    if np.any(path.profile_obstacle_m > 0.0):
        key.append(("obstacles", OBSTACLE, None))
    x = float(_LEFT)
    for text, colour, dashes in key:
        figure.add_artist(_swatch(x, 826, colour, dashes))
        label = write(figure, x + 46, 830, text, SMALL_PT, colour=QUIET)
        x += 46 + width_px(figure, label) + 32
    k_factor = path.effective_earth_radius_km / EARTH_RADIUS_KM
    text = f"ground bulges with the earth, k = {k_factor:.3g}"
    write(figure, _RIGHT, 830, text, SMALL_PT, colour=QUIET, align="right")


def _swatch(x_px: float, y_px: float, colour: str, dashes: tuple[float, float] | None) -> Artist:
    """A sample of a line, or of an area, for the key."""
    x, y = x_px / WIDTH_PX, 1.0 - y_px / HEIGHT_PX
    width, height = 36 / WIDTH_PX, 14 / HEIGHT_PX
    if colour in (GROUND, OBSTACLE):
        return Rectangle(
            (x, y - height / 2.0), width, height, facecolor=colour, edgecolor=GROUND_EDGE,
            linewidth=0.6,
        )  # fmt: skip
    line = Line2D((x, x + width), (y, y), color=colour, linewidth=1.2 if colour == INK else 0.9)
    if dashes:
        line.set_dashes(dashes)
    return line
