"""Constants with their sources, decibel arithmetic and exact angles."""

import numpy as np
from numpy.typing import ArrayLike, NDArray

SPEED_OF_LIGHT_M_S = 299_792_458.0  # exact; BIPM, SI Brochure, 9th edition (2019), table 1
BOLTZMANN_J_K = 1.380649e-23  # exact; BIPM, SI Brochure, 9th edition (2019), table 1
REFERENCE_TEMPERATURE_K = 290.0  # noise reference temperature, ITU-R P.372-16, section 2
EARTH_RADIUS_KM = 6371.0  # mean earth radius, ITU-R P.526-15 and P.452-18 (symbol a)
STANDARD_K_FACTOR = 4.0 / 3.0  # median effective earth radius factor, ITU-R P.530-18, section 2.2
US_SURVEY_FOOT_M = 1200.0 / 3937.0  # exact; NIST Special Publication 811 (2008), appendix B.6
FOOT_M = 0.3048  # exact, international foot; NIST Special Publication 811 (2008), appendix B.6


def to_milliwatt(power_dbm: ArrayLike) -> NDArray[np.float64]:
    """Power in mW of a power in dBm (10log). Any shape; NaN gives NaN."""
    return np.asarray(10.0 ** (np.asarray(power_dbm, dtype=float) / 10.0))


def to_dbm(power_mw: ArrayLike) -> NDArray[np.float64]:
    """Power in dBm of a power in mW (10log). Any shape; 0 mW gives -inf, NaN gives NaN."""
    with np.errstate(divide="ignore"):
        return np.asarray(10.0 * np.log10(np.asarray(power_mw, dtype=float)))


def wrap_azimuth_deg(angle_deg: ArrayLike) -> NDArray[np.float64]:
    """The same direction with 0 <= angle < 360. Any shape; NaN gives NaN."""
    wrapped = np.mod(np.asarray(angle_deg, dtype=float), 360.0)
    return np.asarray(np.where(wrapped >= 360.0, 0.0, wrapped))


def angle_difference_deg(angle_deg: ArrayLike, reference_deg: ArrayLike) -> NDArray[np.float64]:
    """``angle - reference`` on the circle, -180 <= difference < 180. Any shape; NaN gives NaN."""
    difference = np.asarray(angle_deg, dtype=float) - np.asarray(reference_deg, dtype=float)
    return np.asarray(np.mod(difference + 180.0, 360.0) - 180.0)
