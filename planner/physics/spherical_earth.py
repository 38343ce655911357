"""Diffraction over a smooth spherical earth, ITU-R P.526-15 section 3.

Written as in P.1812-7 sections 4.3.2 and 4.3.3, which repeat P.526 with the units used here:
heights in metres above the smooth surface, distances and radii in km, frequency in GHz inside.
Section and equation numbers are from memory; tests hold the results to published examples.
"""

import math

from planner.physics._jit import inlined, scalar
from planner.physics._lanes import where
from planner.physics.elementary import arcsine, log10, power, sine_of_small

# Electrical constants of the ground, ITU-R P.1812-7 section 4.3.3 (relative permittivity, S/m).
LAND_PERMITTIVITY, LAND_CONDUCTIVITY_S_M = 22.0, 0.003
SEA_PERMITTIVITY, SEA_CONDUCTIVITY_S_M = 80.0, 5.0

TINY = 1e-30  # below any argument that counts; a logarithm is asked for it only to be left out

# Clearance without loss over sqrt(wavelength d1 d2 / d), all in metres: 0.552 of a Fresnel radius.
# P.526-15 section 3.2 gives 17.456 with distances in km.
REQUIRED_CLEARANCE = 17.456 / math.sqrt(1000.0)


@scalar
def _height_gain_db(scaled_height: float, beta: float, normalised_admittance: float) -> float:
    """G(Y) of P.526-15 equations (18) and (18a), with its lower limit."""
    b = beta * scaled_height
    high = 17.6 * math.sqrt(max(b - 1.1, 0.0)) - 5.0 * log10(max(b - 1.1, TINY)) - 8.0
    low = 20.0 * log10(max(b + 0.1 * b * b * b, TINY))
    return max(where(b > 2.0, high, low), 2.0 + 20.0 * log10(normalised_admittance))


@scalar
def _first_term_loss_db(
    distance_km: float,
    tx_height_m: float,
    rx_height_m: float,
    radius_km: float,
    frequency_ghz: float,
    vertical: bool,
    permittivity: float,
    conductivity_s_m: float,
) -> float:
    """First term of the residue series, P.526-15 equations (13) to (18)."""
    loss_term = (18.0 * conductivity_s_m / frequency_ghz) ** 2
    admittance = (
        0.036
        * power(radius_km * frequency_ghz, -1.0 / 3.0)
        * ((permittivity - 1.0) ** 2 + loss_term) ** -0.25
    )
    if vertical:
        admittance *= math.sqrt(permittivity**2 + loss_term)
    k2 = admittance * admittance
    k4 = k2 * k2
    beta = (1.0 + 1.6 * k2 + 0.67 * k4) / (1.0 + 4.5 * k2 + 1.53 * k4)
    cube_root = power(frequency_ghz / (radius_km * radius_km), 1.0 / 3.0)
    x = 21.88 * beta * cube_root * distance_km
    height_scale = 0.9575 * beta * power(frequency_ghz * frequency_ghz / radius_km, 1.0 / 3.0)
    far = 11.0 + 10.0 * log10(x) - 17.6 * x
    near = -20.0 * log10(x) - 5.6488 * power(x, 1.425)
    distance_term = where(x >= 1.6, far, near)
    return (
        -distance_term
        - _height_gain_db(height_scale * tx_height_m, beta, admittance)
        - _height_gain_db(height_scale * rx_height_m, beta, admittance)
    )


@scalar
def _first_term_mixed_loss_db(
    distance_km: float,
    tx_height_m: float,
    rx_height_m: float,
    radius_km: float,
    frequency_ghz: float,
    vertical: bool,
    sea_fraction: float,
) -> float:
    """First term over land and sea, mixed by the share of sea; P.1812-7 equation (29)."""
    land = _first_term_loss_db(
        distance_km,
        tx_height_m,
        rx_height_m,
        radius_km,
        frequency_ghz,
        vertical,
        LAND_PERMITTIVITY,
        LAND_CONDUCTIVITY_S_M,
    )
    if sea_fraction <= 0.0:
        return land
    sea = _first_term_loss_db(
        distance_km,
        tx_height_m,
        rx_height_m,
        radius_km,
        frequency_ghz,
        vertical,
        SEA_PERMITTIVITY,
        SEA_CONDUCTIVITY_S_M,
    )
    return (1.0 - sea_fraction) * land + sea_fraction * sea


@scalar
def nearest_clearance_m_scalar(
    distance_m: float, tx_height_m: float, rx_height_m: float, earth_radius_m: float
) -> tuple[float, float]:
    """Where the ray clears the sphere least and by how much; P.526-15 section 3.2.

    Returns the point's distance from the transmitter [m] and the clearance there [m]. The point is
    the one with the largest nu, which is also the geometric reflection point.
    """
    heights = tx_height_m + rx_height_m
    c = (tx_height_m - rx_height_m) / heights
    m = distance_m * distance_m / (4.0 * earth_radius_m * heights)
    # At most 1 in exact arithmetic, reached when one height vanishes; rounding may pass it.
    q = min(max(1.5 * c * math.sqrt(3.0 * m / ((m + 1.0) * (m + 1.0) * (m + 1.0))), -1.0), 1.0)
    # cos(pi / 3 + acos(q) / 3), without the difference of numbers close to each other.
    cosine = sine_of_small(arcsine(q) * (1.0 / 3.0))
    # Over a few centimetres the root would be lost in rounding; its limit is c.
    b = where(m < 1e-12, c, 2.0 * math.sqrt((m + 1.0) / (3.0 * m)) * cosine)
    d1 = 0.5 * distance_m * (1.0 + b)
    d2 = distance_m - d1
    clearance = (
        (tx_height_m - d1 * d1 / (2.0 * earth_radius_m)) * d2
        + (rx_height_m - d2 * d2 / (2.0 * earth_radius_m)) * d1
    ) / distance_m
    return d1, clearance


@scalar
def spherical_earth_loss_db_scalar(
    distance_m: float,
    tx_height_m: float,
    rx_height_m: float,
    earth_radius_m: float,
    wavelength_m: float,
    frequency_mhz: float,
    vertical: bool,
    sea_fraction: float,
) -> float:
    """Diffraction loss over a smooth sphere, 0 or more; P.526-15 section 3.2.

    Heights are above the smooth surface and positive. NaN gives NaN.
    """
    d = distance_m / 1000.0
    radius = earth_radius_m / 1000.0
    f = frequency_mhz / 1000.0
    horizon = math.sqrt(2.0 * radius) * (
        math.sqrt(0.001 * tx_height_m) + math.sqrt(0.001 * rx_height_m)
    )
    beyond = d >= horizon
    # Within the horizon a smaller earth counts whose horizon is just at this distance, and the
    # less the ray clears the sphere, the more of its first term.
    heights = math.sqrt(tx_height_m) + math.sqrt(rx_height_m)
    modified_radius = 500.0 * (d / heights) * (d / heights)
    loss = _first_term_mixed_loss_db(
        d,
        tx_height_m,
        rx_height_m,
        where(beyond, radius, modified_radius),
        f,
        vertical,
        sea_fraction,
    )
    point_m, clearance = nearest_clearance_m_scalar(
        distance_m, tx_height_m, rx_height_m, earth_radius_m
    )
    rest_m = distance_m - point_m
    required = REQUIRED_CLEARANCE * math.sqrt(point_m * rest_m * wavelength_m / distance_m)
    within = where(
        clearance > required, 0.0, (1.0 - clearance / required) * where(loss < 0.0, 0.0, loss)
    )
    return where(beyond, loss, within)


@inlined
def clears_sphere_scalar(
    distance_m: float,
    tx_height_m: float,
    rx_height_m: float,
    earth_radius_m: float,
    wavelength_m: float,
) -> bool:
    """Whether the loss over a smooth sphere is 0 by a bound that costs little; False: not known.

    With u = d1 / d the clearance is h1 (1 - u) + h2 u - d^2 u (1 - u) / (2 a), of which the first
    two are at least 2 sqrt(h1 h2 u (1 - u)), and the clearance required is a constant times
    sqrt(u (1 - u)). Divided by that root, the difference is least halfway, where u (1 - u) = 1/4.
    Own derivation from P.526-15 section 3.2.
    """
    required = REQUIRED_CLEARANCE * math.sqrt(distance_m * wavelength_m)
    least = 2.0 * math.sqrt(tx_height_m * rx_height_m)
    return least - distance_m * distance_m / (4.0 * earth_radius_m) > required
