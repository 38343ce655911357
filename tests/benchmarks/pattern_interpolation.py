"""How well two cuts tell the whole pattern: the table of docs/models.md.

    python tests/benchmarks/pattern_interpolation.py [--front-only]

Patterns that are known in every direction are cut through their peak, put together again from the
cuts by each interpolation, and compared over the sphere. ``--front-only`` withholds the vertical
cut's half behind the antenna.
"""

import argparse
from dataclasses import astuple

import numpy as np
from known_patterns import cuts_of, known_patterns, misfit

from planner.antenna.interpolation import INTERPOLATIONS


def main() -> None:
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--front-only", action="store_true")
    rear_half = not parser.parse_args().front_only
    columns = " | ".join(f"{way}" for way in INTERPOLATIONS)
    print(f"| pattern | widths | {columns} |")
    print("|---|---|" + "---|" * len(INTERPOLATIONS))
    every = []
    for name, gains in known_patterns():
        row, found = [], []
        for way in INTERPOLATIONS:
            pattern, peak_db = cuts_of(gains, way, rear_half=rear_half)
            found.append(astuple(misfit(pattern, gains, peak_db)))
            row.append(_cell(found[-1]))
        every.append(found)
        widths = f"{pattern.azimuth_beamwidth_deg:.0f} × {pattern.elevation_beamwidth_deg:.0f}"
        print(f"| {name} | {widths} | {' | '.join(row)} |")
    figures = np.array(every)
    rms, worst = np.sqrt((figures**2).mean(axis=0)), np.abs(figures).max(axis=0)
    together = [(mean[0], top[1], mean[2], top[3], mean[4]) for mean, top in zip(rms, worst)]
    print(f"| **all** | | {' | '.join(_cell(figures) for figures in together)} |")


def _cell(figures: tuple[float, ...]) -> str:
    near_rms, near_worst, wide_rms, wide_worst, power = figures
    return f"{near_rms:.2f} / {near_worst:.1f}; {wide_rms:.1f} / {wide_worst:.0f}; {power:+.2f}"


if __name__ == "__main__":
    main()
