"""The sector pattern of 3GPP TR 36.814."""

from dataclasses import dataclass

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
from planner.physics._jit import over_arrays, scalar


@scalar
def tr36814_relative_gain_db_scalar(
    azimuth_offset_deg: float,
    elevation_from_peak_deg: float,
    azimuth_beamwidth_deg: float,
    elevation_beamwidth_deg: float,
    front_to_back_db: float,
    side_lobe_db: float,
) -> float:
    horizontal_db = 12.0 * (azimuth_offset_deg / azimuth_beamwidth_deg) ** 2
    if horizontal_db > front_to_back_db:
        horizontal_db = front_to_back_db
    vertical_db = 12.0 * (elevation_from_peak_deg / elevation_beamwidth_deg) ** 2
    if vertical_db > side_lobe_db:
        vertical_db = side_lobe_db
    loss_db = horizontal_db + vertical_db
    if loss_db > front_to_back_db:
        loss_db = front_to_back_db
    return -loss_db


relative_gain_db = over_arrays(tr36814_relative_gain_db_scalar)


@dataclass(frozen=True, slots=True, kw_only=True)
class Tr36814Sector(Pattern):
    r"""Sector pattern for system studies, a parabola in dB in each plane.

    Notes
    -----
    .. math::

        A_H = -\min(12 (\varphi/\varphi_{3dB})^2, A_m) \\
        A_V = -\min(12 ((\theta - \theta_{tilt})/\theta_{3dB})^2, SLA_v) \\
        A = -\min(-(A_H + A_V), A_m)

    The beamwidths are the plan's; the Table's own are 70 and 10 degrees. A_m = 25 dB and
    SLA_v = 20 dB are the Table's. Electrical downtilt shifts the vertical cut, as theta_tilt does.
    The Table names no frequency range. Straight above and below, the formula still depends on
    the azimuth (by up to A_m - SLA_v): it was made for directions near the horizon.

    References
    ----------
    3GPP TR 36.814 V9.2.0 (2017), Table A.2.1.1-2.
    """

    front_to_back_db: float = 25.0  # A_m
    side_lobe_db: float = 20.0  # SLA_v

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
        steering_deg = self.steering_deg(electrical_downtilt_deg)
        azimuth_deg, elevation = checked_angles(azimuth_offset_deg, elevation_deg)
        with np.errstate(invalid="ignore"):  # comparing NaN in a compiled loop may raise the flag
            relative_db = relative_gain_db(
                azimuth_deg,
                elevation + steering_deg,
                self.azimuth_beamwidth_deg,
                self.elevation_beamwidth_deg,
                self.front_to_back_db,
                self.side_lobe_db,
            )
        return np.asarray(self.gain_dbi + relative_db)
