"""Patterns that are known in every direction, and what their two cuts make of them."""

from collections.abc import Callable, Iterable, Iterator
from dataclasses import astuple, dataclass

import numpy as np
from numpy.typing import NDArray

from planner.antenna import Pattern, TwoCutPattern, formula_pattern, two_cut_pattern
from planner.antenna.interpolation import INTERPOLATIONS, Interpolation

Gains = Callable[[NDArray[np.float64], NDArray[np.float64]], NDArray[np.float64]]
CUT_STEP_DEG = 0.5
AZIMUTHS_DEG = np.arange(-179.0, 180.0, 2.0)[np.newaxis, :]
ELEVATIONS_DEG = np.arange(-89.5, 90.0, 1.0)[:, np.newaxis]
LOWEST_DB = -100.0


def array_gains(
    rows: int, columns: int, *, tapered: bool, downtilt_deg: float = 0.0, behind_db: float = -30.0
) -> Gains:
    """A rectangular array before a reflector, summed element by element. [dB below its peak]

    Rows 0.7 and columns 0.5 wavelengths apart; evenly fed, or less towards the edges (a raised
    cosine on a pedestal of 0.35). An element radiates as ((1 + cos psi) / 2)^2, psi being the angle
    off the boresight, and besides ``behind_db`` all around.
    """

    def feed(number: int) -> NDArray[np.float64]:
        place = (np.arange(number) - 0.5 * (number - 1)) / max(0.5 * number, 1.0)
        shape = 0.35 + 0.65 * np.cos(0.5 * np.pi * place) ** 2 if tapered else np.ones(number)
        return shape / shape.sum()

    def line(number: int, spacing: float, sine: NDArray[np.float64]) -> NDArray[np.float64]:
        field = np.zeros(sine.shape, dtype=complex)
        for place, current in enumerate(feed(number)):
            field += current * np.exp(2j * np.pi * spacing * place * sine)
        return np.abs(field) ** 2

    def gains(
        azimuth_deg: NDArray[np.float64], elevation_deg: NDArray[np.float64]
    ) -> NDArray[np.float64]:
        azimuth_rad, elevation_rad = np.radians(azimuth_deg), np.radians(elevation_deg)
        forward = np.cos(elevation_rad) * np.cos(azimuth_rad)
        right = np.cos(elevation_rad) * np.sin(azimuth_rad)
        up = np.sin(elevation_rad) + np.sin(np.radians(downtilt_deg))
        element = (0.5 + 0.5 * forward) ** 2 + 10.0 ** (0.1 * behind_db)
        power = element * line(rows, 0.7, up) * line(columns, 0.5, right)
        return 10.0 * np.log10(np.maximum(power, 10.0 ** (0.1 * LOWEST_DB)))

    return gains


def formula_gains(formula: str, *, downtilt_deg: float = 0.0, **keys: float | str) -> Gains:
    """Gains of a published formula at 5.6 GHz unless ``frequency_mhz`` is given. [dBi]"""
    values: dict[str, float | str] = {"frequency_mhz": 5600.0, "gain_dbi": 17.0} | keys
    pattern: Pattern = formula_pattern("known", formula, **values)  # type: ignore[arg-type]
    tilt_deg = downtilt_deg if pattern.tilts_electrically else None

    def gains(
        azimuth_deg: NDArray[np.float64], elevation_deg: NDArray[np.float64]
    ) -> NDArray[np.float64]:
        return pattern.gain(azimuth_deg, elevation_deg, electrical_downtilt_deg=tilt_deg)

    return gains


def known_patterns() -> Iterator[tuple[str, Gains]]:
    """(name, gains) of the patterns of the study."""
    for tapered in (False, True):
        for rows, columns in ((4, 1), (8, 1), (8, 2), (8, 4), (8, 8)):
            name = f"{'tapered' if tapered else 'uniform'} array, {rows} × {columns}"
            yield name, array_gains(rows, columns, tapered=tapered)
    yield "tapered array, 12 × 2, tilt 6°", array_gains(12, 2, tapered=True, downtilt_deg=6.0)
    for width_deg in (65.0, 90.0, 120.0):
        keys = {"azimuth_beamwidth_deg": width_deg, "elevation_beamwidth_deg": 7.0}
        yield "F.1336-5, average", formula_gains("F.1336-5", **keys)
    yield "F.1336-5, peak", formula_gains("F.1336-5", side_lobes="peak", **keys)
    keys = {"azimuth_beamwidth_deg": 60.0, "elevation_beamwidth_deg": 7.0}
    yield "F.1336-5, 24 GHz", formula_gains("F.1336-5", frequency_mhz=24000.0, **keys)
    for columns in (1, 2, 4, 8):
        for tilt_deg in (0.0, 6.0):
            tilt = f", tilt {tilt_deg:g}°" if tilt_deg else ""
            yield (
                f"M.2101, 8 × {columns}{tilt}",
                formula_gains("M.2101", rows=8, columns=columns, row_spacing_wavelengths=0.7,
                              downtilt_deg=tilt_deg),
            )  # fmt: skip
    yield "TR 38.901 element", formula_gains("TR 38.901", gain_dbi=8.0)
    yield "F.1245 dish, 0.3 m", formula_gains("F.1245", gain_dbi=23.0, diameter_m=0.3)


def cuts_of(
    gains: Gains, interpolation: Interpolation, *, rear_half: bool = True
) -> tuple[TwoCutPattern, float]:
    """Pattern of the two cuts through the peak, its gain 0 dBi; and the true peak. [dB]"""
    around = np.arange(-180.0, 180.0, CUT_STEP_DEG)
    front = np.abs(around) <= 90.0
    elevations = np.where(front, around, np.copysign(180.0, around) - around)
    vertical = gains(np.where(front, 0.0, 180.0), elevations)
    peak_elevation = around[front][np.argmax(vertical[front])]
    horizontal = gains(around, np.full(around.size, peak_elevation))
    peak_db = float(horizontal.max())
    kept = np.ones(around.size, dtype=bool) if rear_half else front
    pattern = two_cut_pattern(
        name="cuts",
        gain_dbi=0.0,
        horizontal_angle_deg=around,
        horizontal_level_db=np.clip(horizontal - peak_db, LOWEST_DB, 0.0),
        vertical_angle_deg=around[kept],
        vertical_level_db=np.clip(vertical[kept] - peak_db, LOWEST_DB, 0.0),
        interpolation=interpolation,
    )
    return pattern, peak_db


@dataclass(frozen=True, slots=True, kw_only=True)
class Misfit:
    """How far an interpolation is from the truth, over the sphere. [dB]"""

    near_rms_db: float  # where the truth is within 15 dB of the peak
    near_worst_db: float
    wide_rms_db: float  # within 30 dB
    wide_worst_db: float
    radiated_power_db: float  # in excess of the truth: so much too low is the directivity


def misfit(pattern: Pattern, gains: Gains, peak_db: float) -> Misfit:
    """Compare on a grid of 2 by 1 degrees, each direction weighted by its share of the sphere."""
    true_db = gains(AZIMUTHS_DEG, ELEVATIONS_DEG) - peak_db
    error_db = pattern.gain(AZIMUTHS_DEG, ELEVATIONS_DEG) - true_db
    weight = np.broadcast_to(np.cos(np.radians(ELEVATIONS_DEG)), true_db.shape)
    near, wide = true_db > -15.0, true_db > -30.0

    def rms(where: NDArray[np.bool_]) -> float:
        return float(np.sqrt(np.average(error_db[where] ** 2, weights=weight[where])))

    def radiated(level_db: NDArray[np.float64]) -> float:
        return float(10.0 * np.log10(np.sum(weight * 10.0 ** (0.1 * level_db))))

    return Misfit(
        near_rms_db=rms(near),
        near_worst_db=float(np.abs(error_db[near]).max()),
        wide_rms_db=rms(wide),
        wide_worst_db=float(np.abs(error_db[wide]).max()),
        radiated_power_db=radiated(true_db + error_db) - radiated(true_db),
    )


def study_table(*, rear_half: bool = True) -> Iterator[str]:
    """Lines of a table: what each interpolation makes of each known pattern, and of all."""
    yield f"| pattern | widths | {' | '.join(INTERPOLATIONS)} |"
    yield "|---|---|" + "---|" * len(INTERPOLATIONS)
    every = []
    for name, gains in known_patterns():
        found = []
        for way in INTERPOLATIONS:
            pattern, peak_db = cuts_of(gains, way, rear_half=rear_half)
            found.append(astuple(misfit(pattern, gains, peak_db)))
        every.append(found)
        widths = f"{pattern.azimuth_beamwidth_deg:.0f} × {pattern.elevation_beamwidth_deg:.0f}"
        yield f"| {name} | {widths} | {' | '.join(_cell(figures) for figures in found)} |"
    figures = np.array(every)
    together = np.sqrt((figures**2).mean(axis=0))
    worst = np.abs(figures).max(axis=0)
    together[:, 1], together[:, 3] = worst[:, 1], worst[:, 3]
    yield f"| all | | {' | '.join(_cell(figures) for figures in together)} |"


def _cell(figures: Iterable[float]) -> str:
    near_rms, near_worst, wide_rms, wide_worst, power = figures
    return f"{near_rms:.2f}, {near_worst:.1f}; {wide_rms:.1f}, {wide_worst:.0f}; {power:+.2f}"
