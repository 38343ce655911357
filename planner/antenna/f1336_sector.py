"""A sectoral antenna after ITU-R F.1336-5 as a pattern object."""

from dataclasses import dataclass, field
from typing import Literal

import numpy as np
from numpy.typing import ArrayLike, NDArray

from planner.antenna import f1336
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
from planner.physics._jit import over_arrays

LOWEST_FREQUENCY_MHZ = 400.0
BOUNDARY_FREQUENCY_MHZ = 6000.0  # recommends 3.1 up to here, 3.2 above
HIGHEST_FREQUENCY_MHZ = 70000.0
ELEVATION_BEAMWIDTHS_DEG = 0.5, 22.5  # at 22.5 four beamwidths reach 90 deg: no side lobes left
WIDEST_SECTOR_DEG = 120.0  # the estimate of the elevation beamwidth holds up to about here

_azimuth_relative_gain_db = over_arrays(f1336.azimuth_relative_gain_db_scalar)
_elevation_relative_gain_db = over_arrays(f1336.elevation_relative_gain_db_scalar)
_above_6_ghz_relative_gain_db = over_arrays(f1336.above_6_ghz_relative_gain_db_scalar)
_compression = over_arrays(f1336.compression_scalar)
_electrical_elevation_deg = over_arrays(f1336.electrical_elevation_deg_scalar)


@dataclass(frozen=True, slots=True, kw_only=True)
class F1336Sector(Pattern):
    r"""Reference pattern of a sectoral antenna.

    Notes
    -----
    400 MHz to 6 GHz (recommends 3.1), with x the angle over the 3 dB width:

    .. math::

        G = G_0 + G_{hr}(x_h) + R \, G_{vr}(x_v), \quad
        R = \frac{G_{hr}(x_h) - G_{hr}(180/\varphi_3)}{G_{hr}(0) - G_{hr}(180/\varphi_3)}

    Above 6 GHz up to 70 GHz (recommends 3.2):

    .. math:: G = G_0 - 12 x^2 \text{ or } G_0 - 12 - 15 \log_{10} x, \quad x = \psi/\psi_\alpha

    "average" is the pattern that side lobes have in the mean, fit for predicting coverage; "peak"
    is the envelope that they stay below, fit for judging interference. The side lobe forms join
    their main beam with a step of 0.1 to 0.3 dB: that is the Recommendation's.

    Electrical downtilt maps the elevation so that the beam comes to lie at the tilt and +90 and
    -90 degrees stay where they are (recommends 3 on tilted beams).

    References
    ----------
    ITU-R F.1336-5 (2019), recommends 3.1 and 3.2, recalled from memory.
    """

    kind: PatternKind = field(init=False, default="envelope")
    frequency_mhz: float
    side_lobes: Literal["average", "peak"] = "average"
    k_p: float = 0.7  # relative minimum gain of the peak form
    k_a: float = 0.7  # relative minimum gain of the average form
    k_h: float = 0.8  # leaked power in azimuth: 0.8 typical, 0.7 improved side lobes
    k_v: float = 0.7  # leaked power in elevation: 0.7 typical, 0.3 improved side lobes

    def __post_init__(self) -> None:
        raise_problems(self._problems())
        notes = gain_notes(self.gain_dbi, self.azimuth_beamwidth_deg, self.elevation_beamwidth_deg)
        object.__setattr__(self, "notes", with_notes(self.notes, notes))

    def _problems(self) -> list[Problem]:
        problems = gain_problems(self.name, self.gain_dbi)
        problems += range_problems(
            self.name,
            "frequency_mhz",
            self.frequency_mhz,
            LOWEST_FREQUENCY_MHZ,
            HIGHEST_FREQUENCY_MHZ,
            unit="MHz for F.1336-5",
            advice='Use formula "TR 36.814" or a pattern file',
        )
        problems += range_problems(
            self.name, "azimuth_beamwidth_deg", self.azimuth_beamwidth_deg, 1.0, 180.0, unit="deg",
            below=True,
        )  # fmt: skip
        problems += range_problems(
            self.name,
            "elevation_beamwidth_deg",
            self.elevation_beamwidth_deg,
            *ELEVATION_BEAMWIDTHS_DEG,
            unit="deg for F.1336-5",
            below=True,
            advice='For a wider beam use formula "TR 36.814" or a pattern file',
        )
        for key in ("k_p", "k_a", "k_h", "k_v"):
            problems += range_problems(self.name, key, getattr(self, key), 0.0, 1.0, unit="")
        if self.side_lobes not in ("average", "peak"):
            where = f"antenna.{self.name}.side_lobes"
            problems.append(
                Problem(where=where, found=repr(self.side_lobes), allowed='"average" or "peak"')
            )
        return problems

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
            elevation = _electrical_elevation_deg(elevation, steering_deg)
            if self.frequency_mhz > BOUNDARY_FREQUENCY_MHZ:
                return self._above_6_ghz_gain(azimuth_deg, elevation)
            return self._up_to_6_ghz_gain(azimuth_deg, elevation)

    def _above_6_ghz_gain(
        self, azimuth_deg: NDArray[np.float64], elevation_deg: NDArray[np.float64]
    ) -> NDArray[np.float64]:
        relative_db = _above_6_ghz_relative_gain_db(
            azimuth_deg,
            elevation_deg,
            self.azimuth_beamwidth_deg,
            self.elevation_beamwidth_deg,
            self.side_lobes == "average",
        )
        return np.asarray(self.gain_dbi + relative_db)

    def _up_to_6_ghz_gain(
        self, azimuth_deg: NDArray[np.float64], elevation_deg: NDArray[np.float64]
    ) -> NDArray[np.float64]:
        # Each cut on its own axis: a table of angles then costs two cuts and one product.
        average = self.side_lobes == "average"
        k_floor = self.k_a if average else self.k_p
        floor_db = f1336.floor_db_scalar(self.elevation_beamwidth_deg, k_floor, average)
        cut = self.azimuth_beamwidth_deg, self.k_h, floor_db
        horizontal_db = _azimuth_relative_gain_db(azimuth_deg, *cut)
        vertical_db = _elevation_relative_gain_db(
            elevation_deg, self.elevation_beamwidth_deg, k_floor, self.k_v, average
        )
        compression = _compression(horizontal_db, _azimuth_relative_gain_db(180.0, *cut))
        return np.asarray(self.gain_dbi + horizontal_db + compression * vertical_db)
