"""The antenna element of 3GPP TR 38.901."""

from dataclasses import dataclass
from typing import ClassVar

import numpy as np
from numpy.typing import ArrayLike, NDArray

from planner.antenna.pattern import (
    Pattern,
    checked_angles,
    gain_notes,
    gain_problems,
    raise_problems,
    range_problems,
    with_notes,
)
from planner.antenna.tr36814 import relative_gain_db


@dataclass(frozen=True, slots=True, kw_only=True)
class Tr38901Element(Pattern):
    r"""One element of a panel: a parabola in dB in each plane, both capped alike.

    Notes
    -----
    .. math::

        A_V = -\min(12 ((\theta - 90)/\theta_{3dB})^2, SLA_V) \\
        A_H = -\min(12 (\varphi/\varphi_{3dB})^2, A_{max}) \\
        A = -\min(-(A_V + A_H), A_{max})

    with the zenith angle theta = 90 degrees less the elevation. The Table has 65 degrees in both
    planes, SLA_V = A_max = 30 dB and 8 dBi. It names no frequency range here; TR 38.901 is for 0.5
    to 100 GHz. An element has no electrical tilt: arrays have. Straight above and below, the
    formula still depends on the azimuth, by up to 7 dB.

    References
    ----------
    3GPP TR 38.901 V16.1.0 (2019), Table 7.3-1, recalled from memory.
    """

    tilts_electrically: ClassVar[bool] = False

    azimuth_beamwidth_deg: float = 65.0
    elevation_beamwidth_deg: float = 65.0
    front_to_back_db: float = 30.0  # A_max
    side_lobe_db: float = 30.0  # SLA_V

    def __post_init__(self) -> None:
        beams = self.azimuth_beamwidth_deg, self.elevation_beamwidth_deg
        problems = gain_problems(self.name, self.gain_dbi)
        problems += range_problems(
            self.name, "azimuth_beamwidth_deg", beams[0], 1.0, 360.0, unit="deg", below=True
        )
        problems += range_problems(
            self.name, "elevation_beamwidth_deg", beams[1], 0.5, 180.0, unit="deg", below=True
        )
        for key in ("front_to_back_db", "side_lobe_db"):
            problems += range_problems(self.name, key, getattr(self, key), 3.0, 100.0, unit="dB")
        raise_problems(problems)
        object.__setattr__(self, "notes", with_notes(self.notes, gain_notes(self.gain_dbi, *beams)))

    def gain(
        self,
        azimuth_offset_deg: ArrayLike,
        elevation_deg: ArrayLike,
        *,
        electrical_downtilt_deg: float | None = None,
    ) -> NDArray[np.float64]:
        """Gain towards a direction: see :meth:`Pattern.gain`."""
        self.steering_deg(electrical_downtilt_deg)
        azimuth_deg, elevation = checked_angles(azimuth_offset_deg, elevation_deg)
        relative_db = relative_gain_db(
            azimuth_deg,
            elevation,
            self.azimuth_beamwidth_deg,
            self.elevation_beamwidth_deg,
            self.front_to_back_db,
            self.side_lobe_db,
        )
        return np.asarray(self.gain_dbi + relative_db)
