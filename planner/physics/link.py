"""Link budget: what leaves the antenna, what arrives, and the noise it competes with."""

import math
from typing import Any

import numpy as np
from numpy.typing import ArrayLike

from planner.physics._jit import over_arrays, scalar
from planner.units import BOLTZMANN_J_K, REFERENCE_TEMPERATURE_K


@scalar
def eirp_dbm_scalar(
    transmit_power_dbm: float, feeder_loss_db: float, antenna_gain_dbi: float
) -> float:
    return transmit_power_dbm - feeder_loss_db + antenna_gain_dbi


@scalar
def received_signal_dbm_scalar(
    eirp_dbm: float, path_loss_db: float, terminal_gain_dbi: float, terminal_feeder_loss_db: float
) -> float:
    return eirp_dbm - path_loss_db + terminal_gain_dbi - terminal_feeder_loss_db


@scalar
def thermal_noise_dbm_scalar(bandwidth_mhz: float, noise_figure_db: float) -> float:
    if not bandwidth_mhz > 0.0:
        return math.nan
    milliwatt_per_hz = BOLTZMANN_J_K * REFERENCE_TEMPERATURE_K * 1e3
    return 10.0 * math.log10(milliwatt_per_hz * bandwidth_mhz * 1e6) + noise_figure_db


_eirp_dbm = over_arrays(eirp_dbm_scalar)
_received_signal_dbm = over_arrays(received_signal_dbm_scalar)
_thermal_noise_dbm = over_arrays(thermal_noise_dbm_scalar)


def eirp_dbm(
    *, transmit_power_dbm: ArrayLike, feeder_loss_db: ArrayLike, antenna_gain_dbi: ArrayLike
) -> Any:
    """Equivalent isotropically radiated power in the direction of the gain. [dBm]

    Parameters
    ----------
    transmit_power_dbm : float or array, any shape
        Power at the radio's port. [dBm]
    feeder_loss_db : float or array, broadcast
        Loss between the radio and the antenna, positive. [dB]
    antenna_gain_dbi : float or array, broadcast
        Gain over isotropic towards the direction in question; the antenna's peak gain gives the
        EIRP that regulators limit. [dBi]

    Returns
    -------
    float or array, broadcast shape. NaN in any argument gives NaN.

    Notes
    -----
    EIRP = power - feeder loss + gain. Valid for all finite values.

    References
    ----------
    ITU Radio Regulations, edition of 2020, No. 1.161 (definition of e.i.r.p.; number from memory).
    """
    return _eirp_dbm(transmit_power_dbm, feeder_loss_db, antenna_gain_dbi)


def received_signal_dbm(
    *,
    transmit_power_dbm: ArrayLike,
    feeder_loss_db: ArrayLike,
    antenna_gain_dbi: ArrayLike,
    path_loss_db: ArrayLike,
    terminal_gain_dbi: ArrayLike,
    terminal_feeder_loss_db: ArrayLike,
) -> Any:
    """Power at the port of the receiver at the customer's house. [dBm]

    Parameters
    ----------
    transmit_power_dbm, feeder_loss_db : float or array, any shape
        Power at the radio's port [dBm] and loss up to the antenna, positive [dB].
    antenna_gain_dbi : float or array, broadcast
        Gain of the sector antenna towards the receiver (or the radio horizon). [dBi]
    path_loss_db : float or array, broadcast
        Loss between isotropic antennas, positive. [dB]
    terminal_gain_dbi, terminal_feeder_loss_db : float or array, broadcast
        Gain of the customer's antenna towards the mast [dBi] and the loss behind it, positive [dB].

    Returns
    -------
    float or array, broadcast shape. NaN in any argument gives NaN.

    Notes
    -----
    Signal = transmit power - feeder loss + gain - path loss + terminal gain - terminal feeder
    loss. Polarisation mismatch and bandwidth filtering are left out. Valid for all finite values.

    References
    ----------
    The transmission loss terms of ITU-R P.341-7 (2019), put together as a budget in dB; number of
    the edition from memory.
    """
    return _received_signal_dbm(
        _eirp_dbm(transmit_power_dbm, feeder_loss_db, antenna_gain_dbi),
        path_loss_db,
        terminal_gain_dbi,
        terminal_feeder_loss_db,
    )


def thermal_noise_dbm(bandwidth_mhz: ArrayLike, *, noise_figure_db: ArrayLike = 0.0) -> Any:
    r"""Thermal noise of a receiver, referred to its input. [dBm]

    Parameters
    ----------
    bandwidth_mhz : float or array, any shape
        Noise bandwidth, above 0; the channel width where nothing better is known. [MHz]
    noise_figure_db : float or array, broadcast
        The receiver's noise figure, 0 or more. [dB]

    Returns
    -------
    float or array, broadcast shape. NaN gives NaN, and so does a bandwidth of zero or below.

    Notes
    -----
    .. math:: N = 10 \log_{10}(k T_0 B / 1\,\mathrm{mW}) + F

    with T0 = 290 K: -113.975 dBm in 1 MHz. Man-made and sky noise are left out.

    References
    ----------
    ITU-R P.372-16 (2022), section 2; constants in planner/units.py.
    """
    with np.errstate(invalid="ignore"):  # comparing NaN in a compiled loop may raise the flag
        return _thermal_noise_dbm(bandwidth_mhz, noise_figure_db)
