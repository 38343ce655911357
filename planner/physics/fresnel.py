"""First Fresnel zone and the Fresnel-Kirchhoff diffraction parameter, ITU-R P.526."""

import math
from typing import Any

from numpy.typing import ArrayLike

from planner.physics._jit import inlined, over_arrays, scalar


@scalar
def fresnel_radius_m_scalar(distance_a_m: float, distance_b_m: float, wavelength_m: float) -> float:
    return math.sqrt(wavelength_m * distance_a_m * distance_b_m / (distance_a_m + distance_b_m))


@inlined
def fresnel_parameter_scalar(
    height_m: float, distance_a_m: float, distance_b_m: float, wavelength_m: float
) -> float:
    return height_m * math.sqrt(
        2.0 * (distance_a_m + distance_b_m) / (wavelength_m * distance_a_m * distance_b_m)
    )


_fresnel_radius_m = over_arrays(fresnel_radius_m_scalar)
_fresnel_parameter = over_arrays(fresnel_parameter_scalar)


def fresnel_radius_m(
    distance_a_m: ArrayLike, distance_b_m: ArrayLike, wavelength_m: ArrayLike
) -> Any:
    r"""Radius of the first Fresnel zone at a point of the path. [m]

    Parameters
    ----------
    distance_a_m, distance_b_m : float or array, broadcast
        Distances from the point to the two ends. [m]
    wavelength_m : float or array, broadcast
        Wavelength. [m]

    Returns
    -------
    float or array, broadcast shape; 0 at either end, NaN gives NaN.

    Notes
    -----
    .. math:: F_1 = \sqrt{\lambda d_1 d_2 / (d_1 + d_2)}

    References
    ----------
    ITU-R P.526-15 (2019), section 2.1, the n = 1 zone, in metres.
    """
    return _fresnel_radius_m(distance_a_m, distance_b_m, wavelength_m)


def fresnel_parameter(
    height_m: ArrayLike, distance_a_m: ArrayLike, distance_b_m: ArrayLike, wavelength_m: ArrayLike
) -> Any:
    r"""Fresnel-Kirchhoff diffraction parameter nu of an edge. [unitless]

    Parameters
    ----------
    height_m : float or array, broadcast
        Height of the edge above the straight line between the ends; negative below it. [m]
    distance_a_m, distance_b_m : float or array, broadcast
        Distances from the edge to the two ends, above 0. [m]
    wavelength_m : float or array, broadcast
        Wavelength. [m]

    Returns
    -------
    float or array, broadcast shape; NaN gives NaN. nu = -sqrt(2) where the first Fresnel zone is
    just free, -0.849 where 60 % of it is.

    Notes
    -----
    .. math:: \nu = h \sqrt{\frac{2}{\lambda} \left(\frac{1}{d_1} + \frac{1}{d_2}\right)}

    References
    ----------
    ITU-R P.526-15 (2019), section 4.1, equation (26); number from memory.
    """
    return _fresnel_parameter(height_m, distance_a_m, distance_b_m, wavelength_m)
