"""Make the invented antennas of the sites again: ``python demo_sites/make_antenna.py [FOLDER]``.

Vertical cuts: elements 0.8 wavelengths apart, fed alike, each weaker to the sides, nulls filled.
Horizontal cuts: 65 and 90 degrees between the half-power points, with a back lobe. The lake's panel
is a CSV of two cuts, the vale's a file of the open standard for patterns, WG16.99.050.
"""

import csv
import sys
from collections.abc import Iterator
from pathlib import Path

import numpy as np

HERE = Path(__file__).parent
SPACING_WAVELENGTHS = 0.8
NULLS = 0.03  # of the peak's field


def horizontal_db(angle_deg: float, half_width_deg: float) -> float:
    """Cosine-shaped front that is 3 dB down at the half width, joined to a small back lobe."""
    power = -3.0 / (20 * np.log10(np.cos(np.radians(half_width_deg))))
    front = max(float(np.cos(np.radians(angle_deg))), 1e-6) ** power
    back = 0.045 * max(-float(np.cos(np.radians(angle_deg))), 0.0) ** 2
    return float(20 * np.log10(np.hypot(front, back + 0.03) / np.hypot(1.0, 0.03)))


def vertical_db(angle_deg: float, elements: int) -> float:
    """Sum of the elements towards an elevation, with the nulls filled."""
    phase = 2 * np.pi * SPACING_WAVELENGTHS * np.sin(np.radians(angle_deg))
    total = np.abs(np.exp(1j * phase * np.arange(elements)).sum()) / elements
    element = np.cos(np.radians(angle_deg)) ** 1.2
    return float(20 * np.log10(np.hypot(total * element, NULLS) / np.hypot(1.0, NULLS)))


def write_two_cuts(path: Path) -> None:
    """The lake's panel as a table: 65 degrees wide, ten elements."""
    horizontal = range(-180, 180, 5)
    vertical = [*range(-90, -30, 5), *range(-30, 31), *range(35, 91, 5)]
    with path.open("w", newline="", encoding="utf-8") as out:
        writer = csv.writer(out, lineterminator="\n")
        writer.writerow(["angle_deg", "horizontal_db", "vertical_db"])
        for angle in sorted({*horizontal, *vertical}):
            across = f"{horizontal_db(angle, 32.5):.2f}" if angle in horizontal else ""
            up = f"{vertical_db(angle, 10):.2f}" if angle in vertical else ""
            writer.writerow([angle, across, up])


def standard_lines() -> Iterator[str]:
    """The vale's panel: 90 degrees wide, nine elements, from 5.15 to 5.85 GHz."""
    yield from (
        "REVNUM:,NSMA WG16.99.050",
        "REVDAT:,19990520",
        "ANTMAN:,Invented for the demo",
        "MODNUM:,VALE-90",
        "DESCR1:,Sector panel of 90 degrees",
        "LOWFRQ:,5150",
        "HGHFRQ:,5850",
        "GUNITS:,DBI/DBR",
        "MDGAIN:,17",
        "AZWIDT:,90",
        "ELWIDT:,7",
        "ATVSWR:,1.5",
        "ELTILT:,0",
        "PATTYP:,typical",
        "NOFREQ:,1",
        "PATFRE:,5500",
        "NUMCUT:,2",
    )
    azimuths = range(-180, 180, 5)
    yield from ("PATCUT:,AZ", "POLARI:,V/V", f"NUPOIN:,{len(azimuths)}", "FSTLST:,-180,175")
    yield from (f"{angle},{horizontal_db(angle, 45.0):.2f}" for angle in azimuths)
    elevations = range(-90, 91)
    yield from ("PATCUT:,EL", "POLARI:,V/V", f"NUPOIN:,{len(elevations)}", "FSTLST:,-90,90")
    yield from (f"{angle},{vertical_db(angle, 9):.2f}" for angle in elevations)
    yield "ENDFIL:,EOF"


def main() -> None:
    folder = Path(sys.argv[1]) if len(sys.argv) > 1 else HERE
    for site in ("lake_ondrel", "harrow_vale"):
        (folder / site).mkdir(parents=True, exist_ok=True)
    write_two_cuts(folder / "lake_ondrel" / "panel-65.csv")
    standard = "".join(f"{line}\n" for line in standard_lines())
    (folder / "harrow_vale" / "panel-90.txt").write_text(standard, encoding="utf-8", newline="")


if __name__ == "__main__":
    main()
