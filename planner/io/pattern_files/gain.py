"""The gain that a file states, in dBi at a frequency."""

import math

import numpy as np

from planner.io.pattern_files.model import DIPOLE_GAIN_DBI, GainUnit, PatternFile


def gain_in_dbi(gain: float, unit: GainUnit) -> float:
    """A gain of a file in dBi; NaN where a linear gain is not above 0."""
    if unit == "LPI":
        return 10.0 * math.log10(gain) if gain > 0.0 else math.nan
    return gain + DIPOLE_GAIN_DBI if unit == "DBD" else gain


def stated_gain_dbi(
    file: PatternFile, frequency_mhz: float | None
) -> tuple[float | None, tuple[str, ...]]:
    """The gain at a frequency and what to say about it; None where the file does not tell it.

    Between the band's low edge, middle and high edge the gain in dB is interpolated linearly, as
    far as it is stated there; else the gain at mid-band holds for the whole band.
    """
    header = file.header
    stated = (header.low_band_gain, header.mid_band_gain, header.high_band_gain)
    if all(gain is None for gain in stated):
        return None, ()
    if header.gain_unit is None:
        text = "a gain without its unit (GUNITS), so it was not used"
        return None, (f"{file.file_name} states {text}.",)
    low_mhz, high_mhz = header.lowest_frequency_mhz, header.highest_frequency_mhz
    known: list[tuple[float, float]] = []
    if low_mhz is not None and high_mhz is not None:
        places = (low_mhz, 0.5 * (low_mhz + high_mhz), high_mhz)
        known = [
            (place, gain_in_dbi(gain, header.gain_unit))
            for place, gain in zip(places, stated, strict=True)
            if gain is not None
        ]
    if frequency_mhz is not None and len(known) > 1:
        places_mhz, gains_dbi = zip(*known, strict=True)
        gain_dbi = float(np.interp(frequency_mhz, places_mhz, gains_dbi))
        if len({gain for _, gain in known}) == 1:
            return gain_dbi, ()
        text = ", ".join(f"{gain:.2f} at {place:g}" for place, gain in known)
        return gain_dbi, (
            f"{file.file_name}: gain of {gain_dbi:.2f} dBi at {frequency_mhz:g} MHz, between "
            f"{text} MHz.",
        )
    if header.mid_band_gain is not None:
        return gain_in_dbi(header.mid_band_gain, header.gain_unit), ()
    if len(known) == 1:
        return known[0][1], (
            f"{file.file_name} states a gain at {known[0][0]:g} MHz only: {known[0][1]:.2f} dBi.",
        )
    return None, ()
