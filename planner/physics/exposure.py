"""How far from a mast the power density of its antennas has fallen to an exposure limit.

A caution for planning work near antennas, never a certificate: it knows no other antennas on the
site, no reflecting metal, no local limits of parts of the body, and the limits are from memory.

OET Bulletin 65 gives two near-field models. "column" is its cylindrical model: the power leaves a
cylinder about the antenna evenly over its height and its azimuth beamwidth. "dish" is its surface
model: four times the mean over the aperture, up to D²/4λ, from there falling as 1/distance. Both
stay below c / distance with a c of the antenna, so that several antennas add as numbers.
"""

import math
from collections.abc import Sequence
from dataclasses import dataclass
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from planner.physics.exposure_limits import ExposureLimit
from planner.physics.free_space import wavelength_m_scalar
from planner.physics.near_field import reactive_near_field_m_scalar

# A perfect mirror doubles the field; OET Bulletin 65, equation (6).
GROUND_REFLECTION_POWER_FACTOR = 4.0


@dataclass(frozen=True, slots=True, kw_only=True)
class Radiator:
    """One antenna of a mast that is on all the time; lengths and powers are above 0."""

    frequency_mhz: float
    power_w: float  # into the antenna
    gain_dbi: float  # at the peak
    azimuth_beamwidth_deg: float  # 360 for an antenna that radiates all around
    largest_dimension_m: float  # height of a column, diameter of a dish
    shape: Literal["column", "dish"]


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class LimitDistance:
    """Distances at which all antennas together fall to a limit, by direction; shapes (n,)."""

    far_field_m: NDArray[np.float64]  # by the far-field formula with ground reflection
    near_field_m: NDArray[np.float64]  # by the near-field models
    reactive_near_field_m: float  # of the antenna whose reactive near field reaches farthest

    @property
    def distance_m(self) -> NDArray[np.float64]:
        """The largest of the three. [m]"""
        larger = np.maximum(self.far_field_m, self.near_field_m)
        return np.maximum(larger, self.reactive_near_field_m)


def limit_distance(
    radiators: Sequence[Radiator], share: NDArray[np.float64], limit: ExposureLimit
) -> LimitDistance:
    r"""Distance from a mast at which the power density of all its antennas falls to a limit.

    Parameters
    ----------
    radiators : sequence of m
        All of the mast, taken to stand in one place.
    share : array (m, n)
        What each antenna radiates in each of n directions over what it does at its peak, 0 to 1.
    limit : ExposureLimit

    Returns
    -------
    LimitDistance. NaN in all directions where the limit does not hold at a radiator's frequency.

    Notes
    -----
    Each antenna counts as the share of its own limit that it fills; the shares add to 1 at

    .. math::

        r_{far} = \sqrt{\sum_i \frac{4 \, s_i P_i G_i}{4 \pi S_i}}, \quad
        r_{near} = \sum_i \frac{s_i c_i}{S_i}, \quad
        c_{column} = \frac{180 P}{\varphi \pi h}, \quad
        c_{dish} = \frac{16 P}{\pi D^2} \frac{D^2}{4 \lambda}

    The 4 is the ground reflection. A dish's near field counts for nothing where the power density
    at the surfaces of all dishes, 4 P / A, already fills less than the whole limit. The column's
    model overstates the far field, where it falls as 1/r: the larger distance stands all the same.

    References
    ----------
    FCC OET Bulletin 65, edition 97-01 (1997): equations (4), (6) for the far field, (11) to (16)
    for aperture antennas, (20), (21) for the cylindrical model; from memory.
    """
    shares = np.asarray(share, dtype=float)
    if shares.ndim != 2 or shares.shape[0] != len(radiators):
        raise ValueError(f"share has the shape {shares.shape}, needed: ({len(radiators)}, n)")
    far_squared = np.zeros(shares.shape[1])
    columns, dishes, surfaces = (np.zeros(shares.shape[1]) for _ in range(3))
    reactive_m = 0.0
    for radiator, part in zip(radiators, shares, strict=True):
        limit_w_m2 = limit.power_density_w_m2(radiator.frequency_mhz)
        wavelength_m = wavelength_m_scalar(radiator.frequency_mhz)
        size_m = radiator.largest_dimension_m
        reactive_m = max(reactive_m, reactive_near_field_m_scalar(size_m, wavelength_m))
        eirp_w = radiator.power_w * 10.0 ** (radiator.gain_dbi / 10.0)
        far_squared += GROUND_REFLECTION_POWER_FACTOR * part * eirp_w / (4.0 * math.pi * limit_w_m2)
        if radiator.shape == "column":
            spread = radiator.azimuth_beamwidth_deg / 180.0 * math.pi * size_m
            columns += part * radiator.power_w / spread / limit_w_m2
        else:
            surface_w_m2 = 16.0 * radiator.power_w / (math.pi * size_m**2)  # 4 P / A
            surfaces += part * surface_w_m2 / limit_w_m2
            dishes += part * surface_w_m2 * size_m**2 / (4.0 * wavelength_m) / limit_w_m2
    return LimitDistance(
        far_field_m=np.sqrt(far_squared),
        near_field_m=columns + np.where(surfaces < 1.0, 0.0, dishes),
        reactive_near_field_m=reactive_m,
    )
