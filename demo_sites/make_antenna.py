"""Make the invented antenna of the lake site again: ``python demo_sites/make_antenna.py [FOLDER]``.

Vertical cut: ten elements 0.8 wavelengths apart, fed alike, each weaker to the sides, nulls filled
to -30 dB. Horizontal cut: 65 degrees between the half-power points, with a back lobe.
"""

import csv
import sys
from pathlib import Path

import numpy as np

HERE = Path(__file__).parent
ELEMENTS, SPACING_WAVELENGTHS = 10, 0.8
HALF_WIDTH_DEG = 32.5


def horizontal_db(angle_deg: float) -> float:
    """Cosine-shaped front that is 3 dB down at the half width, joined to a small back lobe."""
    power = -3.0 / (20 * np.log10(np.cos(np.radians(HALF_WIDTH_DEG))))
    front = max(float(np.cos(np.radians(angle_deg))), 1e-6) ** power
    back = 0.045 * max(-float(np.cos(np.radians(angle_deg))), 0.0) ** 2
    return float(20 * np.log10(np.hypot(front, back + 0.03) / np.hypot(1.0, 0.03)))


def vertical_db(angle_deg: float) -> float:
    """Sum of the elements towards an elevation, with the nulls filled."""
    phase = 2 * np.pi * SPACING_WAVELENGTHS * np.sin(np.radians(angle_deg))
    total = np.abs(np.exp(1j * phase * np.arange(ELEMENTS)).sum()) / ELEMENTS
    element = np.cos(np.radians(angle_deg)) ** 1.2
    return float(20 * np.log10(np.hypot(total * element, 0.03) / np.hypot(1.0, 0.03)))


def main() -> None:
    folder = (Path(sys.argv[1]) if len(sys.argv) > 1 else HERE) / "lake_ondrel"
    folder.mkdir(parents=True, exist_ok=True)
    horizontal = range(-180, 180, 5)
    vertical = [*range(-90, -30, 5), *range(-30, 31), *range(35, 91, 5)]
    with (folder / "panel-65.csv").open("w", newline="", encoding="utf-8") as out:
        writer = csv.writer(out, lineterminator="\n")
        writer.writerow(["angle_deg", "horizontal_db", "vertical_db"])
        for angle in sorted({*horizontal, *vertical}):
            across = f"{horizontal_db(angle):.2f}" if angle in horizontal else ""
            up = f"{vertical_db(angle):.2f}" if angle in vertical else ""
            writer.writerow([angle, across, up])


if __name__ == "__main__":
    main()
