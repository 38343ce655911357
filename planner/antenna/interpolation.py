"""Levels between a horizontal and a vertical cut, off both of them.

Two cuts do not settle a pattern: these are the ways known to guess the rest. All levels are in dB
relative to the peak, 0 or negative, and are given at the azimuth and at the elevation of the
wanted direction. docs/models.md tells how far each is from patterns that are known in full.
"""

from typing import Literal

import numpy as np
from numpy.typing import NDArray

Interpolation = Literal["projected", "cross-weighted", "sum"]
INTERPOLATIONS: tuple[Interpolation, ...] = ("projected", "cross-weighted", "sum")

Levels = NDArray[np.float64]

_CROSS_WEIGHT_POWER = 2.0  # k of the source, which finds 2 to be the best
_TINY = 1e-30


def projected_db(
    horizontal_db: Levels,
    vertical_db: Levels,
    behind_db: Levels,
    *,
    rear_share: Levels,
    horizon_share: Levels,
    rear_db: float,
) -> Levels:
    r"""Horizontal projection: both halves of the vertical cut, blended around the antenna. [dB]

    Parameters
    ----------
    horizontal_db, vertical_db : arrays, broadcast
        Levels of the cuts at the azimuth and at the elevation. [dB]
    behind_db : array like ``vertical_db``
        Level of the vertical cut at the same elevation behind the antenna. [dB]
    rear_share : array like ``horizontal_db``
        0 on the boresight's azimuth to 1 behind: (1 - cos phi) / 2.
    horizon_share : array like ``vertical_db``
        1 in the horizontal cut, 0 straight up and down: the cosine of the elevation.
    rear_db : float
        Level of the vertical cut right behind the antenna, where it crosses the horizontal. [dB]

    Notes
    -----
    .. math::

        G = (1 - a) \, G_v(\theta) + a \, G_v(180 - \theta)
        + \cos\theta \, (G_h(\varphi) - a \, G_v(180))

    It agrees with both cuts, and is one value straight up and straight down. Horizontal projection
    interpolation as published has the share linear in the azimuth, a = phi / 180, and no
    :math:`\cos\theta`, so that at the poles each azimuth has its own value; against known patterns
    this form is closer (docs/models.md).

    References
    ----------
    N. R. Leonor, R. F. S. Caldeirinha, M. G. Sanchez, T. R. Fernandes (2014), "A three-dimensional
    directive antenna pattern interpolation method", IEEE Antennas and Wireless Propagation Letters
    13, which describes it among others; recalled from memory.
    """
    across_db = horizontal_db - rear_share * rear_db
    return vertical_db + rear_share * (behind_db - vertical_db) + horizon_share * across_db


def cross_weighted_db(horizontal_db: Levels, vertical_db: Levels) -> Levels:
    r"""Cross-weighted sum: each cut counts by how close the other is to its peak. [dB]

    Notes
    -----
    With h and v the levels as ratios of power:

    .. math::

        G = \frac{G_h w_h + G_v w_v}{(w_h^k + w_v^k)^{1/k}}, \quad
        w_h = v (1 - h), \; w_v = h (1 - v), \; k = 2

    It agrees with both cuts. Straight up and down each azimuth has its own value.

    References
    ----------
    T. G. Vasiliadis, A. G. Dimitriou, G. D. Sergiadis (2005), "A novel technique for the
    approximation of 3-D antenna radiation patterns", IEEE Transactions on Antennas and Propagation
    53(7); recalled from memory.
    """
    horizontal, vertical = 10.0 ** (0.1 * horizontal_db), 10.0 ** (0.1 * vertical_db)
    horizontal_weight = vertical * (1.0 - horizontal)
    vertical_weight = horizontal * (1.0 - vertical)
    power = _CROSS_WEIGHT_POWER
    both = (horizontal_weight**power + vertical_weight**power) ** (1.0 / power)
    level_db = horizontal_db * horizontal_weight + vertical_db * vertical_weight
    # Both weights vanish at the peak alone, and where both cuts are as good as nothing.
    return np.where(both > _TINY, level_db / np.maximum(both, _TINY), horizontal_db + vertical_db)


def summed_db(horizontal_db: Levels, vertical_db: Levels) -> Levels:
    """Sum of both levels, the plain convention. Each azimuth has its own value at the poles. [dB]

    Exact for a pattern that is a product of one in azimuth and one in elevation.
    """
    return horizontal_db + vertical_db
