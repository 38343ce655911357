"""From true directions at the mast to directions as the antenna sees them, and the gain there.

Mechanical downtilt turns the antenna as a rigid body about the horizontal axis across its
boresight. At the boresight's azimuth it lowers the beam by the tilt; 90 degrees to the side a
direction on the horizon stays on the horizon of the antenna; behind the antenna it is uptilt.
"""

import math

import numpy as np
from numba import prange
from numpy.typing import ArrayLike, NDArray

from planner.antenna.pattern import HIGHEST_TILT_DEG, Pattern
from planner.errors import PatternError, Problem
from planner.physics._jit import parallel, scalar
from planner.units import angle_difference_deg


@scalar
def tilted_direction_deg(
    azimuth_offset_deg: float, elevation_deg: float, mechanical_downtilt_deg: float
) -> tuple[float, float]:
    """Azimuth offset and elevation in the antenna's frame, of a direction given at the mast."""
    if mechanical_downtilt_deg == 0.0:
        return azimuth_offset_deg, elevation_deg
    azimuth_rad = math.radians(azimuth_offset_deg)
    elevation_rad = math.radians(elevation_deg)
    tilt_rad = math.radians(mechanical_downtilt_deg)
    ahead = math.cos(elevation_rad) * math.cos(azimuth_rad)
    right = math.cos(elevation_rad) * math.sin(azimuth_rad)
    up = math.sin(elevation_rad)
    along_boresight = ahead * math.cos(tilt_rad) - up * math.sin(tilt_rad)
    above_boresight = ahead * math.sin(tilt_rad) + up * math.cos(tilt_rad)
    # atan2 keeps its digits at the zenith, where arcsin loses half of them
    return (
        math.degrees(math.atan2(right, along_boresight)),
        math.degrees(math.atan2(above_boresight, math.hypot(along_boresight, right))),
    )


@parallel
def _tilt_directions(
    azimuth_deg: NDArray[np.float64],
    elevation_deg: NDArray[np.float64],
    mechanical_downtilt_deg: float,
) -> None:
    """Replace flat arrays of directions at the mast by those in the antenna's frame."""
    for index in prange(azimuth_deg.size):
        azimuth_deg[index], elevation_deg[index] = tilted_direction_deg(
            azimuth_deg[index], elevation_deg[index], mechanical_downtilt_deg
        )


def antenna_direction_deg(
    azimuth_offset_deg: ArrayLike, elevation_deg: ArrayLike, *, mechanical_downtilt_deg: float
) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Direction in the frame of a tilted antenna, of a direction given at the mast.

    Parameters
    ----------
    azimuth_offset_deg : float or array, any shape
        Clockwise from the boresight, in the horizontal plane. [deg]
    elevation_deg : float or array, broadcast
        Above the horizontal, -90 to 90. [deg]
    mechanical_downtilt_deg : float
        Positive downwards, -45 to 45. [deg]

    Returns
    -------
    (azimuth offset, elevation) in the antenna's frame, each of the broadcast shape. NaN in either
    angle gives NaN in both, as soon as the tilt is not 0.

    Notes
    -----
    A rotation by the tilt about the horizontal axis across the boresight; ITU-R F.1336-5 gives the
    same relation for mechanical tilt (from memory).
    """
    checked_tilt(mechanical_downtilt_deg)
    azimuth_deg = np.asarray(azimuth_offset_deg, dtype=float)
    elevation = np.asarray(elevation_deg, dtype=float)
    if mechanical_downtilt_deg == 0.0:  # not broadcast: a grid of angles keeps its two axes
        return azimuth_deg, elevation
    shape = np.broadcast_shapes(azimuth_deg.shape, elevation.shape)
    azimuths = np.broadcast_to(azimuth_deg, shape).ravel().copy()
    elevations = np.broadcast_to(elevation, shape).ravel().copy()
    _tilt_directions(azimuths, elevations, float(mechanical_downtilt_deg))
    return azimuths.reshape(shape), elevations.reshape(shape)


def checked_tilt(mechanical_downtilt_deg: float) -> None:
    """Raise ``PatternError`` where the mechanical downtilt is none."""
    if not -HIGHEST_TILT_DEG <= mechanical_downtilt_deg <= HIGHEST_TILT_DEG:
        found = f"{mechanical_downtilt_deg:g}"
        allowed = f"{-HIGHEST_TILT_DEG:g} to {HIGHEST_TILT_DEG:g} deg, positive downwards"
        raise PatternError(Problem(where="mechanical_downtilt_deg", found=found, allowed=allowed))


def mounted_gain_dbi(
    pattern: Pattern,
    *,
    true_azimuth_deg: ArrayLike,
    elevation_deg: ArrayLike,
    azimuth_deg: float,
    mechanical_downtilt_deg: float,
    electrical_downtilt_deg: float | None,
) -> NDArray[np.float64]:
    """Gain of a mounted and aimed antenna towards a true direction at the mast. [dBi]

    Parameters
    ----------
    pattern : Pattern
    true_azimuth_deg : float or array, any shape
        Direction, clockwise from true north. [deg]
    elevation_deg : float or array, broadcast
        Direction above the horizontal, -90 to 90. [deg]
    azimuth_deg : float
        Where the boresight points, clockwise from true north. [deg]
    mechanical_downtilt_deg : float
        Positive downwards, -45 to 45. [deg]
    electrical_downtilt_deg : float or None
        The same; None: what the pattern carries. [deg]

    Returns
    -------
    array, broadcast shape. NaN where an angle is NaN.

    Notes
    -----
    First the rotation of the mechanical tilt, then the pattern with its electrical tilt.
    """
    offset_deg, antenna_elevation_deg = antenna_direction_deg(
        angle_difference_deg(true_azimuth_deg, azimuth_deg),
        elevation_deg,
        mechanical_downtilt_deg=mechanical_downtilt_deg,
    )
    return pattern.gain(
        offset_deg, antenna_elevation_deg, electrical_downtilt_deg=electrical_downtilt_deg
    )
