"""Key figures of a pattern, measured from its gain over all directions.

Nothing is taken from what a pattern says of itself but the level of its gain, which is then held
against the directivity of its shape. docs/antenna-figures.md tells what each figure means.
"""

import math
from dataclasses import dataclass
from functools import partial
from typing import Literal

import numpy as np
from numpy.typing import ArrayLike, NDArray

from planner.antenna.cuts import STEP_DEG, Lobe, Side, half_power_distance_deg, side_lobes
from planner.antenna.pattern import Pattern, PatternKind
from planner.antenna.sphere import Gain, peak_direction_deg, sphere_mean

BACK_REGION_DEG = 30.0  # either side of straight back
# What a pattern put together from two cuts may miss of its directivity.
GAIN_TOLERANCE_DB = 1.0
# Gain = this / (azimuth beamwidth * elevation beamwidth in degrees). The higher is the whole sphere
# in square degrees, the lower what real antennas with side lobes reach. Common practice, no source.
ESTIMATE_SQUARE_DEGREES = 32_000.0, 41_000.0
_SAME_LEVEL_DB = 1e-6

Verdict = Literal["possible", "impossible", "not judged"]


@dataclass(frozen=True, slots=True, kw_only=True)
class CutFigures:
    """One cut through the peak. Angles are those of the cut; levels relative to the peak.

    ``lower`` is to the left in azimuth and below in elevation, ``upper`` right and above. What a
    cut does not have is None.
    """

    half_power_edges_deg: tuple[float, float] | None  # lower, upper
    lower: tuple[Lobe, ...]  # nulls and lobes outwards, angles away from the peak
    upper: tuple[Lobe, ...]

    @property
    def half_power_beamwidth_deg(self) -> float | None:
        """Full angle between the directions 3 dB below the peak. [deg]"""
        if self.half_power_edges_deg is None:
            return None
        return self.half_power_edges_deg[1] - self.half_power_edges_deg[0]

    @property
    def first_null_beamwidth_deg(self) -> float | None:
        """Full angle between the first nulls on both sides. [deg]"""
        if not self.lower or not self.upper:
            return None
        return self.lower[0].null_deg + self.upper[0].null_deg

    @property
    def side_lobe_level_db(self) -> float | None:
        """The highest of all side lobes, relative to the peak, negative. [dB]"""
        return max((lobe.peak_db for lobe in (*self.lower, *self.upper)), default=None)


@dataclass(frozen=True, slots=True, kw_only=True)
class BeamFigures:
    """Peak of a pattern and the cuts through it; angles in the antenna's own frame."""

    peak_gain_dbi: float
    peak_azimuth_offset_deg: float  # clockwise from the boresight
    peak_elevation_deg: float  # positive upwards
    azimuth: CutFigures  # at the peak's elevation, all around
    elevation: CutFigures  # at the peak's azimuth, from nadir to zenith


@dataclass(frozen=True, slots=True, kw_only=True)
class KeyFigures(BeamFigures):
    """What a pattern does; angles in the antenna's own frame."""

    kind: PatternKind
    front_to_back_db: float  # at 180 degrees from the peak in the azimuth cut; may be infinite
    front_to_back_region_db: float  # the least over 180 - 30 to 180 + 30 degrees
    directivity_dbi: float
    directivity_error_db: float
    gain_verdict: Verdict

    @property
    def squint_deg(self) -> float | None:
        """Middle between the half-power edges in azimuth, from the boresight. [deg]"""
        edges = self.azimuth.half_power_edges_deg
        return None if edges is None else 0.5 * (edges[0] + edges[1])

    @property
    def electrical_downtilt_found_deg(self) -> float:
        """How far the peak lies below the antenna's own horizontal plane. [deg]"""
        return 0.0 - self.peak_elevation_deg

    @property
    def gain_above_directivity_db(self) -> float:
        """Gain less directivity: negative by the losses of an antenna that can be. [dB]"""
        return self.peak_gain_dbi - self.directivity_dbi

    @property
    def efficiency(self) -> float | None:
        """Radiated power over power put in, gain = efficiency * directivity; None if not judged."""
        if self.gain_verdict == "not judged":
            return None
        return float(10.0 ** (self.gain_above_directivity_db / 10.0))

    @property
    def gain_from_beamwidths_dbi(self) -> tuple[float, float] | None:
        """Estimates 32,000 and 41,000 over the product of the beamwidths in degrees. [dBi]"""
        widths = self.azimuth.half_power_beamwidth_deg, self.elevation.half_power_beamwidth_deg
        if widths[0] is None or widths[1] is None:
            return None
        low, high = (
            10.0 * math.log10(square_degrees / (widths[0] * widths[1]))
            for square_degrees in ESTIMATE_SQUARE_DEGREES
        )
        return low, high


def key_figures(pattern: Pattern, *, electrical_downtilt_deg: float = 0.0) -> KeyFigures:
    """Measure a pattern.

    Parameters
    ----------
    pattern : Pattern
    electrical_downtilt_deg : float
        Put in addition to what the pattern carries, positive downwards, -45 to 45. [deg]

    Raises
    ------
    PatternError
        The pattern has no gain in some direction, or the tilt is none.

    Notes
    -----
    Half power is 3 dB below the peak. A null is the lowest point before the level rises by 1 dB.

    Directivity is that of the pattern's shape, D = 4 pi U_max / P_rad, by integrating over the
    sphere. A gain above it by more than 1 dB asks for more power than is put in: "impossible". An
    envelope is "not judged": its side lobes are everywhere as high as the highest or the mean ones
    may be, so that their sum is not the power radiated.
    """
    gain: Gain = partial(pattern.gain, electrical_downtilt_deg=electrical_downtilt_deg)
    mean = sphere_mean(gain, pattern.name)
    beam = beam_figures(pattern, electrical_downtilt_deg=electrical_downtilt_deg)
    directivity_dbi = beam.peak_gain_dbi - 10.0 * math.log10(mean.ratio)
    back = 180.0 + np.arange(-BACK_REGION_DEG, BACK_REGION_DEG + STEP_DEG, STEP_DEG)
    levels = gain(beam.peak_azimuth_offset_deg + back, beam.peak_elevation_deg)
    straight_back = gain(beam.peak_azimuth_offset_deg + 180.0, beam.peak_elevation_deg)
    verdict: Verdict = "possible"
    if pattern.kind == "envelope":
        verdict = "not judged"
    elif beam.peak_gain_dbi - directivity_dbi > GAIN_TOLERANCE_DB + mean.error_db:
        verdict = "impossible"
    return KeyFigures(
        kind=pattern.kind,
        peak_gain_dbi=beam.peak_gain_dbi,
        peak_azimuth_offset_deg=beam.peak_azimuth_offset_deg,
        peak_elevation_deg=beam.peak_elevation_deg,
        azimuth=beam.azimuth,
        elevation=beam.elevation,
        front_to_back_db=beam.peak_gain_dbi - float(straight_back),
        front_to_back_region_db=beam.peak_gain_dbi - float(levels.max()),
        directivity_dbi=directivity_dbi,
        directivity_error_db=mean.error_db,
        gain_verdict=verdict,
    )


def beam_figures(pattern: Pattern, *, electrical_downtilt_deg: float = 0.0) -> BeamFigures:
    """The part of :func:`key_figures` that needs no integral."""
    gain: Gain = partial(pattern.gain, electrical_downtilt_deg=electrical_downtilt_deg)
    azimuth_deg, elevation_deg = _middle_of_peak(gain, *peak_direction_deg(gain))
    peak_dbi = float(gain(azimuth_deg, elevation_deg))

    def along_azimuth(sign: float) -> Side:
        return lambda away: gain(azimuth_deg + sign * away, elevation_deg) - peak_dbi

    def along_elevation(sign: float) -> Side:
        return lambda away: gain(azimuth_deg, elevation_deg + sign * away) - peak_dbi

    return BeamFigures(
        peak_gain_dbi=peak_dbi,
        peak_azimuth_offset_deg=azimuth_deg,
        peak_elevation_deg=elevation_deg,
        azimuth=_cut_figures(azimuth_deg, along_azimuth(-1.0), 180.0, along_azimuth(1.0), 180.0),
        elevation=_cut_figures(
            elevation_deg,
            along_elevation(-1.0),
            90.0 + elevation_deg,
            along_elevation(1.0),
            90.0 - elevation_deg,
        ),
    )


def _cut_figures(
    peak_deg: float, lower: Side, lower_reach_deg: float, upper: Side, upper_reach_deg: float
) -> CutFigures:
    below = half_power_distance_deg(lower, lower_reach_deg)
    above = half_power_distance_deg(upper, upper_reach_deg)
    edges = None
    if below is not None and above is not None:
        edges = peak_deg - below, peak_deg + above
    return CutFigures(
        half_power_edges_deg=edges,
        lower=side_lobes(lower, lower_reach_deg),
        upper=side_lobes(upper, upper_reach_deg),
    )


def _middle_of_peak(gain: Gain, azimuth_deg: float, elevation_deg: float) -> tuple[float, float]:
    """The middle of a top that is flat, in azimuth and then in elevation; else the same."""

    def turned(offset_deg: ArrayLike) -> NDArray[np.float64]:
        return gain(azimuth_deg + np.asarray(offset_deg), elevation_deg)

    azimuth_deg = azimuth_deg + _shift_to_middle(turned, 180.0, 180.0)

    def raised(offset_deg: ArrayLike) -> NDArray[np.float64]:
        return gain(azimuth_deg, elevation_deg + np.asarray(offset_deg))

    elevation_deg += _shift_to_middle(raised, 90.0 + elevation_deg, 90.0 - elevation_deg)
    return float(np.mod(azimuth_deg + 180.0, 360.0) - 180.0), elevation_deg


def _shift_to_middle(level: Side, lower_reach_deg: float, upper_reach_deg: float) -> float:
    """How far the middle of a flat top lies from a point on it; 0 where all is flat."""
    widths = []
    for sign, reach_deg in ((-1.0, lower_reach_deg), (1.0, upper_reach_deg)):
        away = np.arange(0.0, reach_deg, STEP_DEG)
        levels = level(sign * away)
        lower = np.flatnonzero(levels < levels[:1] - _SAME_LEVEL_DB)
        if lower.size == 0:
            return 0.0
        widths.append(float(away[max(int(lower[0]) - 1, 0)]))
    return 0.5 * (widths[1] - widths[0])
