"""Reference patterns of sectoral antennas, ITU-R F.1336-5 recommends 3.

| symbol | name here | meaning |
|---|---|---|
| G0 | gain_dbi | peak gain |
| phi_3, theta_3 | azimuth_beamwidth_deg, elevation_beamwidth_deg | 3 dB widths |
| x_h, x_v | azimuth_ratio, elevation_ratio | angle over 3 dB width |
| k_p, k_a | k_floor | sets the relative minimum gain, peak and average form |
| k_h, k_v | k_h, k_v | leaked power in azimuth and elevation |
| G_180 | floor_db | relative minimum gain |
| R | compression | shrinks the vertical cut as the azimuth leaves the boresight |

The text of the Recommendation was not at hand: the formulas are recalled from memory and their
equation numbers are left out. Tests compare them with an independent implementation.
"""

import math

from planner.physics._jit import scalar


@scalar
def floor_db_scalar(elevation_beamwidth_deg: float, k_floor: float, average: bool) -> float:
    """G_180: relative minimum gain, recommends 3.1.1 (peak) and 3.1.2 (average)."""
    knee_db = 15.0 if average else 12.0
    return (
        -knee_db
        + 10.0 * math.log10(1.0 + 8.0 * k_floor)
        - 15.0 * math.log10(180.0 / elevation_beamwidth_deg)
    )


@scalar
def azimuth_relative_gain_db_scalar(
    azimuth_offset_deg: float, azimuth_beamwidth_deg: float, k_h: float, floor_db: float
) -> float:
    """G_hr(x_h): relative gain in the horizontal cut, recommends 3.1."""
    azimuth_ratio = abs(azimuth_offset_deg) / azimuth_beamwidth_deg
    if azimuth_ratio <= 0.5:
        relative_db = -12.0 * azimuth_ratio * azimuth_ratio
    else:
        joined_db = 3.0 * (1.0 - 0.5**-k_h)
        relative_db = -12.0 * azimuth_ratio ** (2.0 - k_h) - joined_db
    if relative_db < floor_db:
        relative_db = floor_db
    return relative_db


@scalar
def elevation_relative_gain_db_scalar(
    elevation_deg: float,
    elevation_beamwidth_deg: float,
    k_floor: float,
    k_v: float,
    average: bool,
) -> float:
    """G_vr(x_v): relative gain in the vertical cut, recommends 3.1.1 (peak) or 3.1.2 (average)."""
    elevation_ratio = abs(elevation_deg) / elevation_beamwidth_deg
    if average:
        knee_db = 15.0
        knee_ratio = math.sqrt(1.33 - 0.33 * k_v)
    else:
        knee_db = 12.0
        knee_ratio = math.sqrt(1.0 - 0.36 * k_v)
    if elevation_ratio < knee_ratio:
        return -12.0 * elevation_ratio * elevation_ratio
    if elevation_ratio < 4.0:
        return -knee_db + 10.0 * math.log10(elevation_ratio**-1.5 + k_v)
    lobe = 4.0**-1.5 + k_v  # continuous at four beamwidths and at 90 degrees
    if elevation_ratio < 90.0 / elevation_beamwidth_deg:
        incline = 10.0 * math.log10(
            (180.0 / elevation_beamwidth_deg) ** 1.5 * lobe / (1.0 + 8.0 * k_floor)
        )
        incline /= math.log10(22.5 / elevation_beamwidth_deg)
        return -knee_db + 10.0 * math.log10(lobe) - incline * (math.log10(elevation_ratio / 4.0))
    return floor_db_scalar(elevation_beamwidth_deg, k_floor, average) + 0.0 * elevation_ratio


@scalar
def compression_scalar(
    azimuth_relative_gain_db: float, azimuth_relative_gain_behind_db: float
) -> float:
    """R: horizontal gain compression ratio, recommends 3.1."""
    return 1.0 - azimuth_relative_gain_db / azimuth_relative_gain_behind_db


@scalar
def equivalent_azimuth_beamwidth_deg_scalar(
    azimuth_offset_deg: float, azimuth_beamwidth_deg: float, elevation_beamwidth_deg: float
) -> float:
    """phi_3m: width that narrows to the elevation's behind the antenna, recommends 3.2.

    The boundary azimuth phi_th is the azimuth beamwidth, as the Recommendation has it.
    """
    azimuth_deg = abs(azimuth_offset_deg)
    if azimuth_deg <= azimuth_beamwidth_deg:
        return azimuth_beamwidth_deg
    turned_rad = (
        (azimuth_deg - azimuth_beamwidth_deg) / (180.0 - azimuth_beamwidth_deg) * 0.5 * math.pi
    )
    return 1.0 / math.sqrt(
        (math.cos(turned_rad) / azimuth_beamwidth_deg) ** 2
        + (math.sin(turned_rad) / elevation_beamwidth_deg) ** 2
    )


@scalar
def above_6_ghz_relative_gain_db_scalar(
    azimuth_offset_deg: float,
    elevation_deg: float,
    azimuth_beamwidth_deg: float,
    elevation_beamwidth_deg: float,
    average: bool,
) -> float:
    """Relative gain, recommends 3.2.1 (peak) or 3.2.2 (average), for -180 <= azimuth <= 180."""
    azimuth_rad = math.radians(azimuth_offset_deg)
    elevation_rad = math.radians(elevation_deg)
    forward = math.cos(azimuth_rad) * math.cos(elevation_rad)
    right = abs(math.sin(azimuth_rad)) * math.cos(elevation_rad)
    up = abs(math.sin(elevation_rad))
    # psi = arccos(cos phi cos theta), written so that it keeps its digits near the boresight
    off_boresight_deg = math.degrees(math.atan2(math.hypot(right, up), forward))
    plane_rad = elevation_rad
    if off_boresight_deg <= 90.0:
        plane_rad = math.atan2(up, right)  # alpha = arctan(tan theta / sin phi)
    width_deg = equivalent_azimuth_beamwidth_deg_scalar(
        azimuth_offset_deg, azimuth_beamwidth_deg, elevation_beamwidth_deg
    )
    inverse_width = math.hypot(
        math.cos(plane_rad) / width_deg, math.sin(plane_rad) / elevation_beamwidth_deg
    )
    ratio = off_boresight_deg * inverse_width
    if average:
        if ratio < 1.152:
            return -12.0 * ratio * ratio
        return -15.0 - 15.0 * math.log10(ratio)
    if ratio < 1.0:
        return -12.0 * ratio * ratio
    return -12.0 - 15.0 * math.log10(ratio)


@scalar
def electrical_elevation_deg_scalar(elevation_deg: float, downtilt_deg: float) -> float:
    """theta_e: elevation to use in the formulas when the beam is tilted electrically.

    The beam, at -downtilt, becomes 0; straight up and straight down stay where they are.
    """
    from_beam_deg = elevation_deg + downtilt_deg
    if from_beam_deg >= 0.0:
        return 90.0 * from_beam_deg / (90.0 + downtilt_deg)
    return 90.0 * from_beam_deg / (90.0 - downtilt_deg)


def estimated_elevation_beamwidth_deg(gain_dbi: float, azimuth_beamwidth_deg: float) -> float:
    r"""Elevation beamwidth of a sectoral antenna of known gain and azimuth beamwidth. [deg]

    Parameters
    ----------
    gain_dbi : float
        Peak gain. [dBi]
    azimuth_beamwidth_deg : float
        3 dB width in azimuth, up to about 120. [deg]

    Notes
    -----
    .. math:: \theta_3 = 31000 \cdot 10^{-0.1 G_0} / \varphi_3

    NaN gives NaN.

    References
    ----------
    ITU-R F.1336-5 (2019), recommends 3 (from memory).
    """
    return float(31000.0 * 10.0 ** (-0.1 * gain_dbi) / azimuth_beamwidth_deg)
