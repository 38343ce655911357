"""Free-space basic transmission loss, ITU-R P.525."""

import math
from typing import Any

from numpy.typing import ArrayLike

from planner.physics._jit import inlined, over_arrays
from planner.physics._lanes import where
from planner.physics.elementary import log10
from planner.units import SPEED_OF_LIGHT_M_S


@inlined
def wavelength_m_scalar(frequency_mhz: float) -> float:
    return SPEED_OF_LIGHT_M_S / (frequency_mhz * 1e6)


@inlined
def free_space_loss_db_scalar(distance_m: Any, frequency_mhz: float) -> Any:
    # Two logarithms: in a loop over distances the second is taken once.
    per_metre = 4.0 * math.pi / wavelength_m_scalar(frequency_mhz)
    loss = 20.0 * log10(distance_m) + 20.0 * log10(per_metre)
    return where(distance_m > 0.0, loss, math.nan)


_free_space_loss_db = over_arrays(free_space_loss_db_scalar)
_wavelength_m = over_arrays(wavelength_m_scalar)


def wavelength_m(frequency_mhz: ArrayLike) -> Any:
    """Wavelength in vacuum. [m]

    Parameters
    ----------
    frequency_mhz : float or array, any shape
        Frequency, above 0. [MHz]

    Returns
    -------
    float or array, same shape. NaN gives NaN.
    """
    return _wavelength_m(frequency_mhz)


def free_space_loss_db(distance_m: ArrayLike, frequency_mhz: ArrayLike) -> Any:
    r"""Free-space basic transmission loss between isotropic antennas. [dB]

    Parameters
    ----------
    distance_m : float or array, any shape
        Distance along the ray (slant distance). [m]
    frequency_mhz : float or array, broadcast against ``distance_m``
        Frequency, above 0. [MHz]

    Returns
    -------
    float or array, broadcast shape. NaN where the distance is NaN, zero or negative: a loss
    between two antennas in one place has no meaning.

    Notes
    -----
    .. math:: L = 20 \log_{10}(4 \pi d / \lambda)

    Holds in the far field of both antennas. The Recommendation also prints the rounded form
    32.4 + 20log f(MHz) + 20log d(km); this function uses the exact one, 0.048 dB higher.

    References
    ----------
    ITU-R P.525-4 (2019), equation (3) and (4); number from memory.
    """
    return _free_space_loss_db(distance_m, frequency_mhz)
