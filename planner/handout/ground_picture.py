"""Draw power density along flat ground against distance, with the rings where the beam lands.

Three strips above the drawing name the main beam and its half-power edges, so that no label covers
another; nulls are marked at the foot of the drawing and named below it.
"""

from pathlib import Path

import matplotlib
import numpy as np
from matplotlib.axes import Axes
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.figure import Figure
from matplotlib.lines import Line2D
from matplotlib.ticker import FixedLocator, FuncFormatter, MaxNLocator, NullLocator
from numpy.typing import NDArray

from planner.antenna import Pattern, mounted_gain_dbi
from planner.antenna.flat_ground import FlatGroundRings, Ring
from planner.handout.colours import (
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
from planner.physics.near_field import power_density_w_m2
from planner.units import to_dbm, to_milliwatt

WIDTH_PX, HEIGHT_PX, DPI = 1504, 896, 150
WITHOUT_POWER_DBM = 30.0  # 1 W, where no transmit power is given; the picture says so
FARTHEST_M = 30_000.0  # beyond, the curve of the earth is no longer a detail
_DEPTH_DB = 60.0
_MOST_NULLS_NAMED = 14
_LEFT, _RIGHT, _TOP, _BOTTOM = 104, 1464, 256, 736  # of the drawing, from the top left
_BEAM = SIGNAL_RAMP[0]
_CURVE = SIGNAL_RAMP[-2]


def write_ground_picture(
    target: Path,
    pattern: Pattern,
    rings: FlatGroundRings,
    *,
    antenna_height_m: float,
    mechanical_downtilt_deg: float,
    electrical_downtilt_deg: float,
    power_dbm: float | None,
) -> None:
    """Write the picture of an antenna's signal along flat ground as PNG, always the same bytes.

    Parameters
    ----------
    target : path of the file
    pattern : Pattern
    rings : FlatGroundRings
        Of this pattern at this height and these tilts.
    antenna_height_m : float
        Above the ground. [m]
    mechanical_downtilt_deg, electrical_downtilt_deg : float
        Positive downwards. [deg]
    power_dbm : float or None
        Power into the antenna; None draws for 1 W and says so. [dBm]

    Raises
    ------
    OutputError
        The file could not be written.
    """
    with matplotlib.rc_context():
        matplotlib.rcdefaults()  # the settings of this machine must not change the picture
        figure = ground_figure(
            pattern,
            rings,
            antenna_height_m=antenna_height_m,
            mechanical_downtilt_deg=mechanical_downtilt_deg,
            electrical_downtilt_deg=electrical_downtilt_deg,
            power_dbm=power_dbm,
        )
        with replaced(Path(target)) as file:
            figure.savefig(file, format="png", dpi=DPI, metadata={"Software": None})


def ground_figure(
    pattern: Pattern,
    rings: FlatGroundRings,
    *,
    antenna_height_m: float,
    mechanical_downtilt_deg: float,
    electrical_downtilt_deg: float,
    power_dbm: float | None,
) -> Figure:
    """The figure of :func:`write_ground_picture`."""
    figure = Figure(figsize=(WIDTH_PX / DPI, HEIGHT_PX / DPI), dpi=DPI, facecolor=PAPER)
    FigureCanvasAgg(figure)
    distance_m = _distances(rings, antenna_height_m)
    density_dbm_m2 = _power_density_dbm_m2(
        pattern,
        rings.azimuth_offset_deg,
        distance_m,
        antenna_height_m=antenna_height_m,
        mechanical_downtilt_deg=mechanical_downtilt_deg,
        electrical_downtilt_deg=electrical_downtilt_deg,
        power_dbm=WITHOUT_POWER_DBM if power_dbm is None else power_dbm,
    )
    name = write(figure, _LEFT, 48, plain(pattern.name), TITLE_PT, colour=INK, bold=True)
    right = write(
        figure, _RIGHT, 48, f"{length(antenna_height_m)} above flat ground", TITLE_PT, colour=INK,
        align="right",
    )  # fmt: skip
    fit(figure, name, _RIGHT - _LEFT - width_px(figure, right) - 32)
    text = (
        f"downtilt {with_minus(f'{mechanical_downtilt_deg:g}')}° mechanical, "
        f"{with_minus(f'{electrical_downtilt_deg:g}')}° electrical; "
    )
    if power_dbm is None:
        text += "no transmit power given: drawn for 1 W (30 dBm) into the antenna"
    else:
        text += f"{with_minus(f'{power_dbm:g}')} dBm into the antenna"
    write(figure, _LEFT, 84, text, SMALL_PT, colour=QUIET)
    axes = _axes(figure, distance_m, density_dbm_m2)
    axes.plot(distance_m, density_dbm_m2, color=_CURVE, linewidth=1.4, zorder=3)
    _draw_rings(figure, axes, rings)
    _write_foot(figure, axes, rings)
    return figure


def _distances(rings: FlatGroundRings, antenna_height_m: float) -> NDArray[np.float64]:
    """Places drawn, evenly over the logarithm: from near the mast's foot to beyond the rings."""
    farthest_m = max(20.0 * antenna_height_m, 500.0)
    for ring, factor in (
        (rings.lower_edge, 4.0), (rings.main_beam, 4.0), (rings.upper_edge, 1.5)
    ):  # fmt: skip
        if ring is not None and ring.distance_m is not None:
            farthest_m = max(farthest_m, factor * ring.distance_m)
    nearest_m = max(0.1 * antenna_height_m, 0.5)
    return np.geomspace(nearest_m, min(farthest_m, FARTHEST_M), 3000)


def _power_density_dbm_m2(
    pattern: Pattern,
    azimuth_offset_deg: float,
    distance_m: NDArray[np.float64],
    *,
    antenna_height_m: float,
    mechanical_downtilt_deg: float,
    electrical_downtilt_deg: float,
    power_dbm: float,
) -> NDArray[np.float64]:
    gain_dbi = mounted_gain_dbi(
        pattern,
        true_azimuth_deg=azimuth_offset_deg,
        elevation_deg=-np.degrees(np.arctan2(antenna_height_m, distance_m)),
        azimuth_deg=0.0,
        mechanical_downtilt_deg=mechanical_downtilt_deg,
        electrical_downtilt_deg=electrical_downtilt_deg,
    )
    slant_m = np.hypot(distance_m, antenna_height_m)
    # The formula is linear in the power: in mW it gives mW/m2.
    return to_dbm(power_density_w_m2(to_milliwatt(power_dbm + gain_dbi), slant_m))


def _axes(
    figure: Figure, distance_m: NDArray[np.float64], density_dbm_m2: NDArray[np.float64]
) -> Axes:
    axes = figure.add_axes(
        (
            _LEFT / WIDTH_PX,
            1.0 - _BOTTOM / HEIGHT_PX,
            (_RIGHT - _LEFT) / WIDTH_PX,
            (_BOTTOM - _TOP) / HEIGHT_PX,
        ),
        facecolor="none",
    )
    axes.set_xscale("log")
    axes.set_xlim(distance_m[0], distance_m[-1])
    top = 5.0 * np.ceil((density_dbm_m2.max() + 1.0) / 5.0)
    lowest = 5.0 * np.floor((density_dbm_m2[np.isfinite(density_dbm_m2)].min() - 1.0) / 5.0)
    axes.set_ylim(max(top - _DEPTH_DB, lowest), top)
    ticks = [
        tick * 10.0**power
        for power in range(-1, 6)
        for tick in (1.0, 2.0, 5.0)
        if distance_m[0] <= tick * 10.0**power <= distance_m[-1]
    ]
    axes.xaxis.set_major_locator(FixedLocator(ticks))
    axes.xaxis.set_minor_locator(NullLocator())
    axes.xaxis.set_major_formatter(FuncFormatter(lambda value, _: f"{value:,g}"))
    axes.yaxis.set_major_locator(MaxNLocator(nbins=7, steps=[1, 2, 5, 10]))
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


def _draw_rings(figure: Figure, axes: Axes, rings: FlatGroundRings) -> None:
    low, high = axes.get_xlim()
    beam = _beam_on_ground(axes, rings)
    if beam is not None:
        axes.axvspan(*beam, color=_BEAM, linewidth=0, zorder=0.5)
    _name_ring(figure, axes, "upper 3 dB edge", rings.upper_edge, 136, bold=False)
    _name_ring(figure, axes, "main beam", rings.main_beam, 176, bold=True)
    _name_ring(figure, axes, "lower 3 dB edge", rings.lower_edge, 216, bold=False)
    for null in rings.nulls:
        if null.distance_m is not None and low <= null.distance_m <= high:
            axes.axvline(null.distance_m, color=QUIET, linewidth=0.6, dashes=(1, 3), zorder=1)


def _beam_on_ground(axes: Axes, rings: FlatGroundRings) -> tuple[float, float] | None:
    """From where to where in the drawing the gain is within 3 dB of the peak; None: nowhere. [m]"""
    low, high = axes.get_xlim()
    if rings.lower_edge is None or rings.lower_edge.distance_m is None:
        return None
    far = rings.upper_edge
    end_m = high if far is None or far.distance_m is None else min(far.distance_m, high)
    start_m = max(rings.lower_edge.distance_m, low)
    return (start_m, end_m) if start_m < end_m else None


def _name_ring(
    figure: Figure, axes: Axes, name: str, ring: Ring | None, y_px: float, *, bold: bool
) -> None:
    """Say where a ring lies, in a strip of its own, with a line down through the drawing."""
    low, high = axes.get_xlim()
    if ring is None:
        write(figure, _RIGHT, y_px, f"{name}: none", TEXT_PT, colour=INK, bold=bold, align="right")
        return
    angle = f"{with_minus(f'{round(ring.elevation_deg, 1) + 0.0:.1f}')}° elevation"
    if ring.distance_m is None or ring.distance_m > high:
        text = f"{name} ({angle}): "
        text += "does not meet flat ground" if ring.distance_m is None else length(ring.distance_m)
        write(figure, _RIGHT, y_px, text, TEXT_PT, colour=INK, bold=bold, align="right")
        return
    text = f"{name} lands at {length(ring.distance_m)} ({angle})"
    share = np.log(max(ring.distance_m, low) / low) / np.log(high / low)
    x_px = _LEFT + (_RIGHT - _LEFT) * share
    label = write(figure, 0, y_px, text, TEXT_PT, colour=INK, bold=bold)
    # To the left no other line comes so far up; to the right one may, and passes behind the paper.
    left_px = x_px - 10 - width_px(figure, label)
    label.set_x((left_px if left_px >= _LEFT else x_px + 10) / WIDTH_PX)
    label.set_bbox({"facecolor": PAPER, "edgecolor": "none", "pad": 2.0})
    figure.add_artist(
        Line2D(
            (x_px / WIDTH_PX, x_px / WIDTH_PX),
            (1.0 - (y_px - 18) / HEIGHT_PX, 1.0 - _BOTTOM / HEIGHT_PX),
            color=INK,
            linewidth=1.2 if bold else 0.8,
            linestyle="solid" if bold else (0, (5, 3)),
            zorder=2,
        )
    )


def _write_foot(figure: Figure, axes: Axes, rings: FlatGroundRings) -> None:
    middle = 0.5 * (_LEFT + _RIGHT)
    towards = with_minus(f"{round(rings.azimuth_offset_deg, 1) + 0.0:g}")
    text = f"m from the mast along flat ground, {towards}° clockwise from the boresight"
    if towards == "0":
        text = "m from the mast along flat ground, in the boresight's azimuth"
    write(figure, middle, 792, text, SMALL_PT, colour=QUIET, align="center")
    figure.text(
        36 / WIDTH_PX, 1.0 - 0.5 * (_TOP + _BOTTOM) / HEIGHT_PX, "power density, dBm/m²",
        fontproperties=font(SMALL_PT), color=QUIET, rotation=90.0,
        horizontalalignment="center", verticalalignment="center",
    )  # fmt: skip
    low, high = axes.get_xlim()
    distances = [ring.distance_m for ring in rings.nulls if ring.distance_m is not None]
    drawn = [distance for distance in distances if low <= distance <= high]
    named = ", ".join(f"{d:,.0f}" if d >= 10.0 else f"{d:.1f}" for d in drawn[:_MOST_NULLS_NAMED])
    text = f"dotted: nulls at {named} m" if drawn else "no nulls on the ground drawn"
    if len(drawn) > _MOST_NULLS_NAMED:
        text += f" and {len(drawn) - _MOST_NULLS_NAMED} farther out"
    fit(figure, write(figure, _LEFT, 826, text, SMALL_PT, colour=QUIET), _RIGHT - _LEFT)
    text = "free space without reflection; ground and earth taken to be flat"
    if _beam_on_ground(axes, rings) is not None:
        text = f"tinted: gain within 3 dB of the peak; {text}"
    write(figure, _LEFT, 856, text, SMALL_PT, colour=QUIET)
