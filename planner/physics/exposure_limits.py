"""Published whole-body limits of power density, by frequency, with their averaging times.

ICNIRP 2020, table 5: reference levels averaged over 30 minutes and the whole body, as incident
power density. FCC 47 CFR 1.1310(e)(1), table 1: maximum permissible exposure, which the rule gives
in mW/cm2 (1 mW/cm2 = 10 W/m2). Neither text was at hand: **all values are recalled from memory**.
Both tables join without a step.
"""

import math
from dataclasses import dataclass
from typing import Literal

Guideline = Literal["ICNIRP 2020", "FCC 47 CFR 1.1310"]
People = Literal["general public", "occupational"]


@dataclass(frozen=True, slots=True, kw_only=True)
class ExposureLimit:
    """One column of a table: bands upwards, without a gap."""

    guideline: Guideline
    people: People
    averaging_minutes: float
    # Upper end of each band in MHz, and the power density in W/m2 there as a + b * f(MHz).
    bands: tuple[tuple[float, float, float], ...]

    def power_density_w_m2(self, frequency_mhz: float) -> float:
        """The limit at a frequency, 30 MHz up to the last band's end; NaN outside. [W/m²]"""
        if not frequency_mhz >= LOWEST_FREQUENCY_MHZ:
            return math.nan
        for highest_mhz, fixed, per_mhz in self.bands:
            if frequency_mhz <= highest_mhz:
                return fixed + per_mhz * frequency_mhz
        return math.nan


LOWEST_FREQUENCY_MHZ = 30.0  # below it the tables limit the fields, and the planner has no radio

EXPOSURE_LIMITS = (
    ExposureLimit(
        guideline="ICNIRP 2020",
        people="general public",
        averaging_minutes=30.0,
        bands=((400.0, 2.0, 0.0), (2000.0, 0.0, 1.0 / 200.0), (300_000.0, 10.0, 0.0)),
    ),
    ExposureLimit(
        guideline="ICNIRP 2020",
        people="occupational",
        averaging_minutes=30.0,
        bands=((400.0, 10.0, 0.0), (2000.0, 0.0, 1.0 / 40.0), (300_000.0, 50.0, 0.0)),
    ),
    ExposureLimit(
        guideline="FCC 47 CFR 1.1310",
        people="general public",
        averaging_minutes=30.0,
        bands=((300.0, 2.0, 0.0), (1500.0, 0.0, 10.0 / 1500.0), (100_000.0, 10.0, 0.0)),
    ),
    ExposureLimit(
        guideline="FCC 47 CFR 1.1310",
        people="occupational",
        averaging_minutes=6.0,
        bands=((300.0, 10.0, 0.0), (1500.0, 0.0, 10.0 / 300.0), (100_000.0, 50.0, 0.0)),
    ),
)
