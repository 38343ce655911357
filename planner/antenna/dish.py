"""Reference patterns of directional dishes, ITU-R F.699 and F.1245.

| symbol | name here | meaning |
|---|---|---|
| Gmax | gain_dbi | peak gain |
| D / lambda | diameter_wavelengths | diameter over wavelength |
| phi | off_axis_deg | angle off the boresight |
| G1 | first_lobe_dbi | gain of the first side lobe, 2 + 15 log(D / lambda) |
| phi_m | main_edge_deg | where the main beam has fallen to G1 |
| phi_r | shelf_end_deg | where the first side lobe ends |

The texts of the Recommendations were not at hand: the formulas are recalled from memory and their
equation numbers are left out. F.699 for D / lambda above 100 was compared with an independent
implementation; the forms for D / lambda up to 100 were checked by hand and by their joins.
"""

import math
from dataclasses import dataclass, field
from typing import ClassVar, Literal

import numpy as np
from numpy.typing import ArrayLike, NDArray

from planner.antenna.pattern import (
    Pattern,
    PatternKind,
    checked_angles,
    gain_problems,
    raise_problems,
    range_problems,
    with_notes,
)
from planner.errors import Problem
from planner.physics._jit import over_arrays, scalar
from planner.units import SPEED_OF_LIGHT_M_S

Recommendation = Literal["F.699", "F.1245"]
LOWEST_FREQUENCY_MHZ = 1000.0
HIGHEST_FREQUENCY_MHZ = {"F.699": 86000.0, "F.1245": 70000.0}
DIAMETERS_WAVELENGTHS = 2.1, 2000.0  # below 100/48 the side lobe of F.699 would end behind 48 deg
# From the boresight to half power the main beam falls as 2.5e-3 (D/lambda phi)^2 dB.
HALF_POWER_DEG_WAVELENGTHS = 2.0 * math.sqrt(3.0 / 2.5e-3)
# Gain of a dish of known size and back, with an efficiency of about 60 %: both Recommendations.
GAIN_OF_ONE_WAVELENGTH_DBI = 7.7
WHOLE_APERTURE_DBI = 20.0 * math.log10(math.pi)  # of one wavelength, evenly lit, without loss
LARGEST_DIAMETER_M = 30.0


@scalar
def f699_gain_dbi_scalar(
    off_axis_deg: float, gain_dbi: float, diameter_wavelengths: float
) -> float:
    """G(phi) of ITU-R F.699 recommends 2, from 1 GHz, 0 <= phi <= 180."""
    size_db = 10.0 * math.log10(diameter_wavelengths)
    first_lobe_dbi = 2.0 + 1.5 * size_db
    main_edge_deg = 20.0 / diameter_wavelengths * math.sqrt(gain_dbi - first_lobe_dbi)
    if off_axis_deg < main_edge_deg:
        return gain_dbi - 2.5e-3 * (diameter_wavelengths * off_axis_deg) ** 2
    if diameter_wavelengths > 100.0:
        shelf_end_deg = 15.85 * diameter_wavelengths**-0.6
        lift_db = 0.0
    else:
        shelf_end_deg = 100.0 / diameter_wavelengths
        lift_db = 20.0 - size_db
    if off_axis_deg < shelf_end_deg:
        return first_lobe_dbi
    if off_axis_deg < 48.0:
        return 32.0 + lift_db - 25.0 * math.log10(off_axis_deg)
    return -10.0 + lift_db + 0.0 * off_axis_deg


@scalar
def f1245_gain_dbi_scalar(
    off_axis_deg: float, gain_dbi: float, diameter_wavelengths: float
) -> float:
    """G(phi) of ITU-R F.1245 recommends 2, 0 <= phi <= 180."""
    size_db = 10.0 * math.log10(diameter_wavelengths)
    first_lobe_dbi = 2.0 + 1.5 * size_db
    main_edge_deg = 20.0 / diameter_wavelengths * math.sqrt(gain_dbi - first_lobe_dbi)
    if off_axis_deg < main_edge_deg:
        return gain_dbi - 2.5e-3 * (diameter_wavelengths * off_axis_deg) ** 2
    lift_db = 0.0
    if diameter_wavelengths > 100.0:
        if off_axis_deg < 12.02 * diameter_wavelengths**-0.6:
            return first_lobe_dbi
    else:
        lift_db = 10.0 - 0.5 * size_db
    if off_axis_deg < 48.0:
        return 29.0 + lift_db - 25.0 * math.log10(off_axis_deg)
    return -13.0 + lift_db + 0.0 * off_axis_deg


@scalar
def off_axis_deg_scalar(azimuth_offset_deg: float, elevation_deg: float) -> float:
    """Angle between a direction and the boresight; keeps its digits near both ends."""
    azimuth_rad = math.radians(azimuth_offset_deg)
    elevation_rad = math.radians(elevation_deg)
    forward = math.cos(azimuth_rad) * math.cos(elevation_rad)
    right = math.sin(azimuth_rad) * math.cos(elevation_rad)
    return math.degrees(math.atan2(math.hypot(right, math.sin(elevation_rad)), forward))


_GAIN_DBI = {
    "F.699": over_arrays(f699_gain_dbi_scalar),
    "F.1245": over_arrays(f1245_gain_dbi_scalar),
}
_off_axis_deg = over_arrays(off_axis_deg_scalar)


@dataclass(frozen=True, slots=True, kw_only=True)
class Dish(Pattern):
    r"""A dish after ITU-R F.699 (peak of the side lobes) or F.1245 (their mean).

    Notes
    -----
    .. math::

        G_1 = 2 + 15 \log(D/\lambda), \quad \varphi_m = 20 \lambda/D \sqrt{G_{max} - G_1} \\
        G = G_{max} - 2.5 \cdot 10^{-3} (D/\lambda \, \varphi)^2, \quad \varphi < \varphi_m

    Further out:

    | | F.699 | F.1245 |
    |---|---|---|
    | D/lambda > 100 | G1 up to 15.85 (D/lambda)^-0.6 deg, 32 - 25 log phi, -10 from 48 deg | \
G1 up to 12.02 (D/lambda)^-0.6 deg, 29 - 25 log phi, -13 from 48 deg |
    | D/lambda <= 100 | G1 up to 100 lambda/D deg, 52 - 10 log(D/lambda) - 25 log phi, \
10 - 10 log(D/lambda) from 48 deg | 39 - 5 log(D/lambda) - 25 log phi, -3 - 5 log(D/lambda) from \
48 deg |

    F.1245 for D/lambda <= 100 has no shelf at G1 and steps down at phi_m (by 3 dB for D/lambda =
    11): that is the Recommendation's. A diameter left out follows from the gain,
    20 log(D/lambda) = Gmax - 7.7. A dish has no electrical tilt.

    References
    ----------
    ITU-R F.699-8 (2018), recommends 2, and ITU-R F.1245-3 (2019), recommends 2, from memory.
    """

    tilts_electrically: ClassVar[bool] = False
    is_round: ClassVar[bool] = True

    kind: PatternKind = field(init=False, default="envelope")
    azimuth_beamwidth_deg: float = field(init=False, default=math.nan)
    elevation_beamwidth_deg: float = field(init=False, default=math.nan)
    recommendation: Recommendation
    frequency_mhz: float
    diameter_m: float | None = None  # None: from the gain

    def __post_init__(self) -> None:
        problems = gain_problems(self.name, self.gain_dbi)
        problems += range_problems(
            self.name,
            "frequency_mhz",
            self.frequency_mhz,
            LOWEST_FREQUENCY_MHZ,
            HIGHEST_FREQUENCY_MHZ[self.recommendation],
            unit=f"MHz for {self.recommendation}",
            advice="Use a pattern file",
        )
        if self.diameter_m is not None:
            problems += range_problems(
                self.name,
                "diameter_m",
                self.diameter_m,
                0.0,
                LARGEST_DIAMETER_M,
                unit="m",
                above=True,
            )
        raise_problems(problems)
        raise_problems(self._size_problems())
        width_deg = HALF_POWER_DEG_WAVELENGTHS / self.diameter_wavelengths
        object.__setattr__(self, "azimuth_beamwidth_deg", width_deg)
        object.__setattr__(self, "elevation_beamwidth_deg", width_deg)
        object.__setattr__(self, "notes", with_notes(self.notes, self._size_notes()))

    @property
    def diameter_wavelengths(self) -> float:
        """D / lambda, from the diameter or else from the gain."""
        if self.diameter_m is None:
            return float(10.0 ** (0.05 * (self.gain_dbi - GAIN_OF_ONE_WAVELENGTH_DBI)))
        return self.diameter_m * self.frequency_mhz * 1e6 / SPEED_OF_LIGHT_M_S

    def _size_problems(self) -> list[Problem]:
        size = self.diameter_wavelengths
        lowest, highest = DIAMETERS_WAVELENGTHS
        key = "gain_dbi" if self.diameter_m is None else "diameter_m"
        found = f"{getattr(self, key):g}, so {size:.3g} wavelengths"
        where = f"antenna.{self.name}.{key}"
        if not lowest <= size <= highest:
            allowed = f"{lowest:g} to {highest:g} wavelengths across for {self.recommendation}"
            return [Problem(where=where, found=found, allowed=allowed)]
        first_lobe_dbi = 2.0 + 15.0 * math.log10(size)
        highest_dbi = WHOLE_APERTURE_DBI + 20.0 * math.log10(size) + 1.0
        if first_lobe_dbi + 3.0 <= self.gain_dbi <= highest_dbi:
            return []
        allowed = (
            f"{first_lobe_dbi + 3.0:.1f} to {highest_dbi:.1f} dBi for a dish {size:.3g} "
            "wavelengths across"
        )
        where = f"antenna.{self.name}.gain_dbi"
        return [
            Problem(where=where, found=f"{self.gain_dbi:g}", allowed=allowed,
                    advice="Check gain and diameter against the data sheet")
        ]  # fmt: skip

    def _size_notes(self) -> tuple[str, ...]:
        if self.diameter_m is not None:
            return ()
        return (
            f"Diameter not given: {self.diameter_wavelengths:.1f} wavelengths estimated from the "
            f"gain (ITU-R {self.recommendation}).",
        )

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
        gain_dbi = _GAIN_DBI[self.recommendation](
            _off_axis_deg(azimuth_deg, elevation), self.gain_dbi, self.diameter_wavelengths
        )
        return np.asarray(gain_dbi)
