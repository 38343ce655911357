"""Colours, tones and type sizes that map and pictures share.

Ink on paper: the ground is a warm low-contrast relief, signal is ink, one accent marks what the
reader should act on. The signal ramp is F. Crameri's scientific colour map "davos", reversed (even
in lightness, readable for colour-blind people); the sector hues are those of M. Okabe and K. Ito,
"Color Universal Design" (2008). See docs/references.md.
"""

import numpy as np
from numpy.typing import NDArray

PAPER = "#fcfaf5"
STONE = "#9e9992"
INK = "#2b2a28"
QUIET = "#6b675f"  # second-rank type and thin rules
RULE = "#d8d3c8"
ACCENT = "#b5472b"

# Least to most signal.
SIGNAL_RAMP = (
    "#f1f2cf",
    "#c1cc98",
    "#91a787",
    "#729190",
    "#557e9b",
    "#38649a",
    "#1d4084",
    "#05175b",
)
SIGNAL_OPACITY = 0.72
SIGNAL_STEP_DB = 5.0

SECTOR_HUES = ("#0072b2", "#e69f00", "#cc79a7", "#009e73", "#d55e00", "#56b4e9")
SECTOR_OPACITY = 0.55

# Classes of line of sight: the bluish green of the sector hues, from a trace to full depth.
SIGHT_COLOURS = {1: "#e3f1ec", 2: "#a5d6c4", 3: "#4fae8f", 4: "#00684c"}

SMALL_PT, TEXT_PT, TITLE_PT = 7.5, 9.0, 12.0


def sector_colours(best_server: NDArray[np.int16], count: int) -> tuple[str, ...]:
    """One hue a sector, in plan order, neighbours apart as far as six hues allow.

    ``best_server`` numbers each cell's sector from 1. Sector by sector, the hue is taken that has
    the shortest common border with sectors that have it already, and of these the least used.
    """
    counted = np.zeros((count + 1) ** 2)
    for one, other in (
        (best_server[:, 1:], best_server[:, :-1]),
        (best_server[1:, :], best_server[:-1, :]),
    ):
        meet = (one != other) & (one > 0) & (other > 0)
        pairs = one[meet].astype(np.int64) * (count + 1) + other[meet]
        counted += np.bincount(pairs, minlength=counted.size)
    borders = counted.reshape(count + 1, count + 1)
    borders += borders.T
    chosen: list[int] = []
    for number in range(1, count + 1):
        shared = [
            sum(borders[number, before + 1] for before, hue in enumerate(chosen) if hue == h)
            for h in range(len(SECTOR_HUES))
        ]
        chosen.append(min(range(len(SECTOR_HUES)), key=lambda h: (shared[h], chosen.count(h), h)))
    return tuple(SECTOR_HUES[hue] for hue in chosen)


def signal_classes(
    threshold_dbm: float, strongest_dbm: float
) -> tuple[tuple[float, float, str], ...]:
    """Classes (from dBm, to dBm, colour) upwards from the threshold in steps of 5 dB.

    As many as there is signal for, at most as many as the ramp has; the last has no upper limit
    (infinity). Few classes are spread over the whole ramp.
    """
    wanted = int(max(strongest_dbm - threshold_dbm, 0.0) // SIGNAL_STEP_DB) + 1
    count = min(max(wanted, 1), len(SIGNAL_RAMP))
    last = len(SIGNAL_RAMP) - 1
    classes = []
    for number in range(count):
        colour = SIGNAL_RAMP[last if count == 1 else round(number * last / (count - 1))]
        lower = threshold_dbm + number * SIGNAL_STEP_DB
        upper = lower + SIGNAL_STEP_DB if number < count - 1 else float("inf")
        classes.append((lower, upper, colour))
    return tuple(classes)


def rgb(colour: str) -> tuple[int, int, int]:
    """Red, green and blue, 0 to 255, of a colour written #rrggbb."""
    return int(colour[1:3], 16), int(colour[3:5], 16), int(colour[5:7], 16)
