"""Omnidirectional antennas after ITU-R F.1336-5 recommends 2."""

import math
from dataclasses import dataclass, field
from typing import Literal

import numpy as np
from numpy.typing import ArrayLike, NDArray

from planner.antenna.f1336 import electrical_elevation_deg_scalar
from planner.antenna.pattern import (
    Pattern,
    PatternKind,
    checked_angles,
    gain_notes,
    gain_problems,
    raise_problems,
    range_problems,
    with_notes,
)
from planner.errors import Problem
from planner.physics._jit import over_arrays, scalar

LOWEST_FREQUENCY_MHZ = 400.0
HIGHEST_FREQUENCY_MHZ = 70000.0
IMPROVED_FROM_MHZ = 3000.0  # from here on all antennas count as having improved side lobes
TYPICAL_K = 0.7
WIDEST_BEAM_DEG = 90.0


@scalar
def omnidirectional_relative_gain_db_scalar(
    elevation_deg: float, elevation_beamwidth_deg: float, k: float, average: bool
) -> float:
    """Relative gain, recommends 2.1 (peak) or 2.2 (average)."""
    ratio = abs(elevation_deg) / elevation_beamwidth_deg
    if average:
        knee_db = 15.0
        knee_ratio = math.sqrt(1.25 - math.log10(k + 1.0) / 1.2)
    else:
        knee_db = 12.0
        knee_ratio = math.sqrt(1.0 - math.log10(k + 1.0) / 1.2)
    if ratio < knee_ratio:
        return -12.0 * ratio * ratio
    if ratio < 1.0:  # in the peak form only: a shelf up to the beamwidth
        return -knee_db + 10.0 * math.log10(k + 1.0)
    return -knee_db + 10.0 * math.log10(ratio**-1.5 + k)


_relative_gain_db = over_arrays(omnidirectional_relative_gain_db_scalar)
_electrical_elevation_deg = over_arrays(electrical_elevation_deg_scalar)


def estimated_omnidirectional_beamwidth_deg(gain_dbi: float) -> float:
    r"""Elevation beamwidth of an omnidirectional antenna of known gain. [deg]

    Notes
    -----
    .. math:: \theta_3 = 107.6 \cdot 10^{-0.1 G_0}

    NaN gives NaN.

    References
    ----------
    ITU-R F.1336-5 (2019), recommends 2.1 (from memory).
    """
    return float(107.6 * 10.0 ** (-0.1 * gain_dbi))


@dataclass(frozen=True, slots=True, kw_only=True)
class F1336Omnidirectional(Pattern):
    r"""Reference pattern of an antenna that radiates alike all around.

    Notes
    -----
    x is the elevation over the 3 dB width.

    .. math::

        G = G_0 - 12 x^2, \quad x < x_4 \\
        G = G_0 - 12 + 10 \log_{10}(k + 1), \quad x_4 \le x < 1 \\
        G = G_0 - 12 + 10 \log_{10}(x^{-1.5} + k), \quad x \ge 1

    with :math:`x_4 = \sqrt{1 - \log_{10}(k + 1)/1.2}` for side_lobes = "peak" (recommends 2.1). The
    average form (recommends 2.2) has 15 in place of 12 and :math:`\sqrt{1.25 - \log_{10}(k +
    1)/1.2}` in place of x_4, and steps there by 0.1 dB for k = 0.7 and 0.7 dB for k = 0: that is
    the Recommendation's.

    k is 0.7 for typical antennas below 3 GHz and 0 for improved side lobes and for all antennas
    from 3 GHz upwards (recommends 2.3 and 2.4). Electrical tilt maps the elevation as for
    :class:`F1336Sector`.

    References
    ----------
    ITU-R F.1336-5 (2019), recommends 2, recalled from memory.
    """

    kind: PatternKind = field(init=False, default="envelope")
    azimuth_beamwidth_deg: float = field(init=False, default=360.0)
    frequency_mhz: float
    side_lobes: Literal["average", "peak"] = "average"
    k: float | None = None  # None: by frequency

    def __post_init__(self) -> None:
        problems = gain_problems(self.name, self.gain_dbi)
        problems += range_problems(
            self.name,
            "frequency_mhz",
            self.frequency_mhz,
            LOWEST_FREQUENCY_MHZ,
            HIGHEST_FREQUENCY_MHZ,
            unit="MHz for F.1336-5 omnidirectional",
            advice="Use a pattern file",
        )
        problems += range_problems(
            self.name, "elevation_beamwidth_deg", self.elevation_beamwidth_deg, 0.5,
            WIDEST_BEAM_DEG, unit="deg for F.1336-5 omnidirectional", below=True,
        )  # fmt: skip
        if self.k is not None:
            problems += range_problems(self.name, "k", self.k, 0.0, 1.0, unit="")
        if self.side_lobes not in ("average", "peak"):
            where = f"antenna.{self.name}.side_lobes"
            problems.append(
                Problem(where=where, found=repr(self.side_lobes), allowed='"average" or "peak"')
            )
        raise_problems(problems)
        # Spread evenly all around, a beam of a given height has the gain of 360 by that height.
        notes = gain_notes(self.gain_dbi, 360.0, self.elevation_beamwidth_deg)
        object.__setattr__(self, "notes", with_notes(self.notes, notes))

    def gain(
        self,
        azimuth_offset_deg: ArrayLike,
        elevation_deg: ArrayLike,
        *,
        electrical_downtilt_deg: float | None = None,
    ) -> NDArray[np.float64]:
        """Gain towards a direction: see :meth:`Pattern.gain`."""
        steering_deg = self.steering_deg(electrical_downtilt_deg)
        azimuth_deg, elevation = checked_angles(azimuth_offset_deg, elevation_deg)
        k = self.k
        if k is None:
            k = TYPICAL_K if self.frequency_mhz < IMPROVED_FROM_MHZ else 0.0
        relative_db = _relative_gain_db(
            _electrical_elevation_deg(elevation, steering_deg),
            self.elevation_beamwidth_deg,
            k,
            self.side_lobes == "average",
        )
        return np.asarray(self.gain_dbi + relative_db + 0.0 * azimuth_deg)
