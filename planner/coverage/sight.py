"""Classes of line of sight, from the clearance of a path in radii of the first Fresnel zone."""

import numpy as np
from numpy.typing import ArrayLike, NDArray

SIGHT_UNKNOWN = 0  # no path is known
SIGHT_BLOCKED = 1  # something reaches the straight line between the antennas
SIGHT_CLEAR = 2  # the line is free, 60 % of the first Fresnel zone is not
SIGHT_MOSTLY_FREE = 3  # 60 % is free: diffraction is negligible, ITU-R P.526
SIGHT_FULLY_FREE = 4

MOSTLY_FREE_RATIO = 0.6
FULLY_FREE_RATIO = 1.0


def line_of_sight_class(fresnel_clearance_ratio: ArrayLike) -> NDArray[np.uint8]:
    """What the worst clearance of a path means, one of the five ``SIGHT_`` codes.

    Parameters
    ----------
    fresnel_clearance_ratio : float or array, any shape
        Worst clearance over the path in radii of the first Fresnel zone, 0 or negative where
        blocked. NaN gives ``SIGHT_UNKNOWN``. [unitless]

    Returns
    -------
    array of uint8, same shape. A ratio of exactly 0.6 or 1 belongs to the better class.
    """
    ratio = np.asarray(fresnel_clearance_ratio)
    sight = np.zeros(ratio.shape, dtype=np.uint8)
    sight[ratio <= 0.0] = SIGHT_BLOCKED
    sight[ratio > 0.0] = SIGHT_CLEAR
    sight[ratio >= MOSTLY_FREE_RATIO] = SIGHT_MOSTLY_FREE
    sight[ratio >= FULLY_FREE_RATIO] = SIGHT_FULLY_FREE
    return sight
