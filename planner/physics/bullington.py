"""The Bullington construction on one profile, ITU-R P.526-15 section 4.5.1.

Equation numbers are from memory; tests hold the results to published examples.

======================  =====  ====================================================================
symbol of the source    unit   meaning here
======================  =====  ====================================================================
S_tim                   m/m    steepest slope from the transmitter to a profile point, bulge added
S_rim                   m/m    steepest slope from the receiver to a profile point, bulge added
S_tr                    m/m    slope of the direct ray
h_ts, h_rs              m      antenna heights above the datum
C_e                     1/m    1 / effective earth radius
======================  =====  ====================================================================
"""

import math

from numpy.typing import NDArray

from planner.physics._jit import inlined, scalar
from planner.physics.elementary import exp
from planner.physics.fresnel import fresnel_parameter_scalar
from planner.physics.knife_edge import knife_edge_loss_db_scalar


@inlined
def bullington_loss_db_scalar(nu: float, distance_m: float) -> float:
    """Loss of the construction from nu of its one edge: equations (52), (53) or (58), then (59)."""
    edge_loss_db = knife_edge_loss_db_scalar(nu)
    return edge_loss_db + (1.0 - exp(edge_loss_db * (-1.0 / 6.0))) * (10.0 + 0.02e-3 * distance_m)


@inlined
def bullington_point_nu_scalar(
    tx_slope: float,
    rx_slope: float,
    tx_height_m: float,
    rx_height_m: float,
    distance_m: float,
    wavelength_m: float,
) -> float:
    """nu of the point where the two horizon lines meet: equations (55) to (57)."""
    point_m = (rx_height_m - tx_height_m + rx_slope * distance_m) / (tx_slope + rx_slope)
    rest_m = distance_m - point_m
    ray_m = (tx_height_m * rest_m + rx_height_m * point_m) / distance_m
    height_m = tx_height_m + tx_slope * point_m - ray_m
    return fresnel_parameter_scalar(height_m, point_m, rest_m, wavelength_m)


@scalar
def bullington_profile_loss_db(
    distance_m: NDArray,
    height_m: NDArray,
    tx_height_m: float,
    rx_height_m: float,
    earth_radius_m: float,
    wavelength_m: float,
) -> float:
    """Bullington loss of a whole profile, its end points left out. [dB]

    ``distance_m`` and ``height_m`` (terrain with obstacles, above the datum) are one-dimensional
    and equally long, the first and last entries being the ends; antenna heights stand above the
    datum. A NaN height at an intermediate point gives NaN. A profile without an intermediate
    point has no loss.
    """
    total_m = distance_m[-1]
    direct_slope = (rx_height_m - tx_height_m) / total_m
    tx_slope = -math.inf
    for i in range(1, distance_m.size - 1):
        d = distance_m[i]
        bulge = d * (total_m - d) / (2.0 * earth_radius_m)
        slope = (height_m[i] + bulge - tx_height_m) / d
        if math.isnan(slope):
            return math.nan
        tx_slope = max(tx_slope, slope)
    if tx_slope < direct_slope:
        nu = -math.inf
        for i in range(1, distance_m.size - 1):
            d = distance_m[i]
            rest = total_m - d
            bulge = d * rest / (2.0 * earth_radius_m)
            ray = (tx_height_m * rest + rx_height_m * d) / total_m
            nu = max(nu, fresnel_parameter_scalar(height_m[i] + bulge - ray, d, rest, wavelength_m))
    else:
        rx_slope = -math.inf
        for i in range(1, distance_m.size - 1):
            d = distance_m[i]
            rest = total_m - d
            bulge = d * rest / (2.0 * earth_radius_m)
            rx_slope = max(rx_slope, (height_m[i] + bulge - rx_height_m) / rest)
        nu = bullington_point_nu_scalar(
            tx_slope, rx_slope, tx_height_m, rx_height_m, total_m, wavelength_m
        )
    return bullington_loss_db_scalar(nu, total_m)
