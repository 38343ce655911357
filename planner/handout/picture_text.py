"""Text in pictures: one typeface whatever is installed, any characters, cut where room ends."""

from functools import lru_cache
from pathlib import Path

import matplotlib
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.figure import Figure
from matplotlib.font_manager import FontProperties, get_font
from matplotlib.text import Text

_LONGEST = 200  # characters of a name that are looked at


@lru_cache(maxsize=2)
def _font_file(bold: bool) -> Path:
    name = "DejaVuSans-Bold.ttf" if bold else "DejaVuSans.ttf"
    return Path(matplotlib.get_data_path(), "fonts", "ttf", name)


@lru_cache(maxsize=2)
def _glyphs(bold: bool) -> frozenset[int]:
    return frozenset(get_font(str(_font_file(bold))).get_charmap())


def font(size_pt: float, *, bold: bool = False) -> FontProperties:
    """DejaVu Sans as it comes with matplotlib."""
    return FontProperties(fname=_font_file(bold), size=size_pt)


def plain(text: str) -> str:
    """Text from a file in one line, with a box for each character that the typeface lacks."""
    glyphs = _glyphs(False) & _glyphs(True)
    words = " ".join(text[:_LONGEST].split())
    return "".join(
        character if character.isprintable() and ord(character) in glyphs else "\N{WHITE SQUARE}"
        for character in words
    )


def signed(value: float) -> str:
    """A number with its sign: +20, 0, −5."""
    return with_minus(f"{value:+g}") if value else "0"


def with_minus(text: str) -> str:
    """A number as text with a proper minus sign."""
    return text.replace("-", "\N{MINUS SIGN}")


def bearing(azimuth_deg: float) -> str:
    """A true bearing: 042° T."""
    return f"{round(azimuth_deg) % 360:03d}° T"


def length(length_m: float) -> str:
    """A length: 850 m, 12.34 km."""
    return f"{length_m:.0f} m" if round(length_m) < 1000 else f"{length_m / 1000.0:,.2f} km"


def write(
    figure: Figure,
    x_px: float,
    y_px: float,
    text: str,
    size_pt: float,
    *,
    colour: str,
    bold: bool = False,
    align: str = "left",
) -> Text:
    """Text with its baseline at a pixel of the figure, counted from the top left."""
    width_px, height_px = figure.get_size_inches() * figure.dpi
    return figure.text(
        x_px / width_px,
        1.0 - y_px / height_px,
        text,
        fontproperties=font(size_pt, bold=bold),
        color=colour,
        horizontalalignment=align,
        verticalalignment="baseline",
        parse_math=False,
    )


def width_px(figure: Figure, text: Text) -> float:
    """Width of a text as it will be drawn."""
    canvas = figure.canvas
    assert isinstance(canvas, FigureCanvasAgg)
    return float(text.get_window_extent(canvas.get_renderer()).width)


def fit(figure: Figure, text: Text, room_px: float) -> None:
    """Cut a text short with an ellipsis where it is wider than its room."""
    content = text.get_text()
    if width_px(figure, text) <= room_px:
        return
    fits, too_long = 0, len(content)
    while too_long - fits > 1:
        middle = (fits + too_long) // 2
        text.set_text(content[:middle].rstrip() + "…")
        if width_px(figure, text) <= room_px:
            fits = middle
        else:
            too_long = middle
    text.set_text(content[:fits].rstrip() + "…")
