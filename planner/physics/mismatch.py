"""What a voltage standing wave ratio means: reflection coefficient, return loss, mismatch loss."""

import math
from typing import Any

from numpy.typing import ArrayLike

from planner.physics._jit import over_arrays, scalar


@scalar
def reflection_coefficient_scalar(vswr: float) -> float:
    if not vswr >= 1.0:
        return math.nan
    return 1.0 - 2.0 / (vswr + 1.0)  # (S - 1) / (S + 1), which an endless S would make 0 of


@scalar
def return_loss_db_scalar(vswr: float) -> float:
    reflected = reflection_coefficient_scalar(vswr)
    return math.inf if reflected == 0.0 else -20.0 * math.log10(reflected)


@scalar
def mismatch_loss_db_scalar(vswr: float) -> float:
    reflected = reflection_coefficient_scalar(vswr)
    return math.inf if reflected == 1.0 else -10.0 * math.log10(1.0 - reflected * reflected)


_reflection_coefficient = over_arrays(reflection_coefficient_scalar)
_return_loss_db = over_arrays(return_loss_db_scalar)
_mismatch_loss_db = over_arrays(mismatch_loss_db_scalar)


def reflection_coefficient(vswr: ArrayLike) -> Any:
    r"""Magnitude of the voltage reflection coefficient at the antenna's port. [unitless]

    Parameters
    ----------
    vswr : float or array, any shape
        Voltage standing wave ratio, 1 (matched) or more.

    Returns
    -------
    float or array, same shape, 0 to 1. NaN where the ratio is NaN or below 1.

    Notes
    -----
    .. math:: |\Gamma| = (S - 1) / (S + 1)

    References
    ----------
    Textbook relation of a line and its load; D. M. Pozar, *Microwave Engineering*, 4th edition
    (2012), section 2.3; number from memory.
    """
    return _reflection_coefficient(vswr)


def return_loss_db(vswr: ArrayLike) -> Any:
    r"""How far the reflected power lies below the one that arrives, positive. [dB]

    Parameters
    ----------
    vswr : float or array, any shape
        Voltage standing wave ratio, 1 or more.

    Returns
    -------
    float or array, same shape; infinite for 1. NaN where the ratio is NaN or below 1.

    Notes
    -----
    .. math:: RL = -20 \log_{10} |\Gamma|

    References
    ----------
    As :func:`reflection_coefficient`.
    """
    return _return_loss_db(vswr)


def mismatch_loss_db(vswr: ArrayLike) -> Any:
    r"""How much of the power does not go into the antenna for being reflected, positive. [dB]

    Parameters
    ----------
    vswr : float or array, any shape
        Voltage standing wave ratio, 1 or more.

    Returns
    -------
    float or array, same shape; 0 for 1. NaN where the ratio is NaN or below 1.

    Notes
    -----
    .. math:: L = -10 \log_{10}(1 - |\Gamma|^2)

    A data sheet's gain mostly leaves this loss out.

    References
    ----------
    As :func:`reflection_coefficient`.
    """
    return _mismatch_loss_db(vswr)
