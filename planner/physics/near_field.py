"""Power density about an antenna, and where its far field begins."""

import math
from typing import Any

from numpy.typing import ArrayLike

from planner.physics._jit import over_arrays, scalar


@scalar
def power_density_w_m2_scalar(eirp_w: float, distance_m: float) -> float:
    if not distance_m > 0.0:
        return math.nan
    return eirp_w / (4.0 * math.pi * distance_m * distance_m)


@scalar
def reactive_near_field_m_scalar(largest_dimension_m: float, wavelength_m: float) -> float:
    aperture_m = 0.62 * math.sqrt(largest_dimension_m**3 / wavelength_m)
    return max(aperture_m, wavelength_m / (2.0 * math.pi))


@scalar
def far_field_m_scalar(largest_dimension_m: float, wavelength_m: float) -> float:
    return 2.0 * largest_dimension_m * largest_dimension_m / wavelength_m


_power_density_w_m2 = over_arrays(power_density_w_m2_scalar)
_reactive_near_field_m = over_arrays(reactive_near_field_m_scalar)
_far_field_m = over_arrays(far_field_m_scalar)


def power_density_w_m2(eirp_w: ArrayLike, distance_m: ArrayLike) -> Any:
    r"""Power density in free space, in the far field. [W/m²]

    Parameters
    ----------
    eirp_w : float or array, any shape
        Power into the antenna times its gain in the direction in question. [W]
    distance_m : float or array, broadcast
        Distance from the antenna, above 0. [m]

    Returns
    -------
    float or array, broadcast shape. NaN where an argument is NaN or the distance is not above 0.

    Notes
    -----
    .. math:: W = \frac{P G}{4 \pi r^2}

    so that the radiation intensity U = r² W does not depend on the distance.

    References
    ----------
    C. A. Balanis, *Antenna Theory*, 3rd edition (2005), sections 2.2 to 2.4; numbers from memory.
    """
    return _power_density_w_m2(eirp_w, distance_m)


def reactive_near_field_m(largest_dimension_m: ArrayLike, wavelength_m: ArrayLike) -> Any:
    r"""Distance up to which the field about an antenna is reactive. [m]

    Parameters
    ----------
    largest_dimension_m : float or array, any shape
        Largest dimension of the antenna, 0 or more. [m]
    wavelength_m : float or array, broadcast
        Wavelength, above 0. [m]

    Returns
    -------
    float or array, broadcast shape. NaN gives NaN.

    Notes
    -----
    .. math:: \max(0.62 \sqrt{D^3 / \lambda}, \; \lambda / 2 \pi)

    The first is for antennas that are large against the wavelength, the second for a short dipole;
    the larger is taken.

    References
    ----------
    Common practice, as in C. A. Balanis, *Antenna Theory*, 3rd edition (2005), section 2.2.4;
    number from memory.
    """
    return _reactive_near_field_m(largest_dimension_m, wavelength_m)


def far_field_m(largest_dimension_m: ArrayLike, wavelength_m: ArrayLike) -> Any:
    r"""Distance from which on a pattern holds; below it lies the radiating near field. [m]

    Parameters
    ----------
    largest_dimension_m : float or array, any shape
        Largest dimension of the antenna, 0 or more. [m]
    wavelength_m : float or array, broadcast
        Wavelength, above 0. [m]

    Returns
    -------
    float or array, broadcast shape. NaN gives NaN.

    Notes
    -----
    .. math:: 2 D^2 / \lambda

    Where the paths from middle and rim of the antenna differ by a sixteenth of a wavelength. Nulls
    are filled and first side lobes raised some way beyond.

    References
    ----------
    As :func:`reactive_near_field_m`.
    """
    return _far_field_m(largest_dimension_m, wavelength_m)
