"""The pattern object: gain for any direction as seen from the antenna, and the isotropic antenna.

Directions are given in the antenna's own frame: azimuth offset clockwise from the boresight seen
from above, elevation positive above the plane that is horizontal when the antenna is not tilted
mechanically. ``mounting`` turns true directions into these.
"""

import math
from abc import ABC, abstractmethod
from collections.abc import Iterable
from dataclasses import dataclass, field
from typing import Any, ClassVar, Literal

import numpy as np
from numpy.typing import ArrayLike, NDArray

from planner.errors import PatternError, Problem

LOWEST_GAIN_DBI = -20.0  # common practice, no source: no sector antenna lies outside these
HIGHEST_GAIN_DBI = 60.0
HIGHEST_TILT_DEG = 45.0  # common practice, no source: either way, mechanical or electrical

# What a pattern's levels mean. An envelope is a line that side lobes stay below or swing about, so
# that it holds more power than any antenna radiates: it must not be integrated over the sphere.
PatternKind = Literal["envelope", "model", "measured"]

# Directivity of a beam that fills its half-power rectangle evenly, in square degrees:
# (180/pi)^2 * 4 pi. Kraus, Antennas (1950), chapter 2; from memory.
SQUARE_DEGREES_OF_SPHERE = 4.0 * math.pi * (180.0 / math.pi) ** 2


@dataclass(frozen=True, slots=True, kw_only=True)
class Pattern(ABC):
    """Gain of an antenna over all directions.

    ``azimuth_beamwidth_deg`` and ``elevation_beamwidth_deg`` are the full widths between the
    directions 3 dB below the peak, without electrical tilt; ``gain_dbi`` is the peak.
    ``electrical_downtilt_deg`` is what the pattern carries already, as a file measured at a tilt
    does; the tilt asked of :meth:`gain` is the whole tilt, and only the difference is steered.
    """

    tilts_electrically: ClassVar[bool] = True  # False: asking for an electrical tilt is an error
    is_round: ClassVar[bool] = False  # the gain depends on the angle off the boresight alone

    name: str  # as in the plan
    gain_dbi: float  # at the peak, over isotropic
    azimuth_beamwidth_deg: float  # between the 3 dB points, in the cut through the peak
    elevation_beamwidth_deg: float
    notes: tuple[str, ...] = ()  # what was assumed, for the reader of a report
    kind: PatternKind = field(init=False, default="model")
    electrical_downtilt_deg: float = field(init=False, default=0.0)  # carried; positive downwards

    @abstractmethod
    def gain(
        self,
        azimuth_offset_deg: ArrayLike,
        elevation_deg: ArrayLike,
        *,
        electrical_downtilt_deg: float | None = None,
    ) -> NDArray[np.float64]:
        """Gain towards a direction in the antenna's own frame. [dBi]

        Parameters
        ----------
        azimuth_offset_deg : float or array, any shape
            Clockwise from the boresight seen from above; any real number. [deg]
        elevation_deg : float or array, broadcast
            Positive upwards, -90 to 90. [deg]
        electrical_downtilt_deg : float or None
            The whole electrical tilt, positive downwards, -45 to 45; None: the pattern as it is.
            [deg]

        Returns
        -------
        array, broadcast shape. NaN where an angle is NaN or infinite, or the elevation lies
        outside -90 to 90.

        Raises
        ------
        PatternError
            Where the tilt is none, or the antenna has no electrical tilt.
        """

    def steering_deg(self, electrical_downtilt_deg: float | None) -> float:
        """How much further down than it is the pattern has to be steered; checked. [deg]"""
        if electrical_downtilt_deg is None:
            return 0.0
        steering_deg = electrical_downtilt_deg - self.electrical_downtilt_deg
        allowed = ""
        if not -HIGHEST_TILT_DEG <= electrical_downtilt_deg <= HIGHEST_TILT_DEG:
            allowed = f"{-HIGHEST_TILT_DEG:g} to {HIGHEST_TILT_DEG:g} deg, positive downwards"
        elif electrical_downtilt_deg != 0.0 and not self.tilts_electrically:
            allowed = f"0 deg: antenna {self.name} has no electrical tilt"
        elif abs(steering_deg) > HIGHEST_TILT_DEG:
            allowed = (
                f"at most {HIGHEST_TILT_DEG:g} deg from the {self.electrical_downtilt_deg:g} deg "
                f"that antenna {self.name} carries already"
            )
        if allowed:
            found = f"{electrical_downtilt_deg:g}"
            raise PatternError(
                Problem(where="electrical_downtilt_deg", found=found, allowed=allowed)
            )
        return steering_deg


@dataclass(frozen=True, slots=True, kw_only=True)
class Isotropic(Pattern):
    """The same gain in all directions. Tilt changes nothing."""

    azimuth_beamwidth_deg: float = 360.0
    elevation_beamwidth_deg: float = 180.0

    def __post_init__(self) -> None:
        raise_problems(gain_problems(self.name, self.gain_dbi))

    def gain(
        self,
        azimuth_offset_deg: ArrayLike,
        elevation_deg: ArrayLike,
        *,
        electrical_downtilt_deg: float | None = None,
    ) -> NDArray[np.float64]:
        """Gain towards any direction: see :meth:`Pattern.gain`."""
        self.steering_deg(electrical_downtilt_deg)
        azimuth_deg, elevation = checked_angles(azimuth_offset_deg, elevation_deg)
        zero = 0.0 * (azimuth_deg + elevation)
        return np.asarray(self.gain_dbi + zero)


def checked_angles(
    azimuth_offset_deg: ArrayLike, elevation_deg: ArrayLike
) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Offset reduced to -180 <= a < 180 and elevation; NaN where a direction is none."""
    azimuth_deg = np.asarray(azimuth_offset_deg, dtype=float)
    elevation = np.asarray(elevation_deg, dtype=float)
    azimuth_deg = np.where(np.isfinite(azimuth_deg), azimuth_deg, np.nan)
    reduced = np.mod(azimuth_deg + 180.0, 360.0) - 180.0
    return reduced, np.where(np.abs(elevation) <= 90.0, elevation, np.nan)


def gain_problems(name: str, gain_dbi: float) -> list[Problem]:
    """What is wrong with a peak gain."""
    return range_problems(name, "gain_dbi", gain_dbi, LOWEST_GAIN_DBI, HIGHEST_GAIN_DBI, unit="dBi")


def range_problems(
    name: str,
    key: str,
    value: Any,
    lowest: float,
    highest: float,
    *,
    unit: str,
    above: bool = False,
    below: bool = False,
    advice: str = "",
) -> list[Problem]:
    """A problem when ``value`` lies outside the range; ``above``/``below`` exclude the ends."""
    at_excluded_end = (above and value == lowest) or (below and value == highest)
    if lowest <= value <= highest and not at_excluded_end:
        return []
    allowed = f"{lowest:g} to {highest:g} {unit}".strip()
    if above:
        allowed = f"above {lowest:g}, up to {highest:g} {unit}".strip()
    if below:
        allowed = f"{lowest:g} to below {highest:g} {unit}".strip()
    where = f"antenna.{name}.{key}"
    return [Problem(where=where, found=f"{value:g}", allowed=allowed, advice=advice)]


def raise_problems(problems: Iterable[Problem]) -> None:
    """Raise every problem at once as a ``PatternError``; nothing where there is none."""
    found = tuple(problems)
    if found:
        raise PatternError(found)


def gain_notes(
    gain_dbi: float, azimuth_beamwidth_deg: float, elevation_beamwidth_deg: float
) -> tuple[str, ...]:
    """A note where no antenna of these beamwidths can have this gain."""
    bound_dbi = 10.0 * math.log10(
        SQUARE_DEGREES_OF_SPHERE / (azimuth_beamwidth_deg * elevation_beamwidth_deg)
    )
    if gain_dbi <= bound_dbi + 1.0:
        return ()
    return (
        f"A gain of {gain_dbi:g} dBi is more than a beam of {azimuth_beamwidth_deg:g} by "
        f"{elevation_beamwidth_deg:.3g} degrees can have (about {bound_dbi:.1f} dBi): check the "
        "data sheet.",
    )


def with_notes(notes: tuple[str, ...], added: Iterable[str]) -> tuple[str, ...]:
    """The notes and the added ones, each once."""
    return tuple(dict.fromkeys((*notes, *added)))
