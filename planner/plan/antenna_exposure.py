"""Exposure distances of a mast as a record: all its antennas, direction by direction."""

from collections.abc import Sequence
from typing import Any

import numpy as np
from numpy.typing import NDArray

from planner.antenna import mounted_gain_dbi
from planner.antenna.key_figures import BeamFigures, beam_figures
from planner.physics.exposure import (
    GROUND_REFLECTION_POWER_FACTOR,
    LimitDistance,
    Radiator,
    limit_distance,
)
from planner.physics.exposure_limits import EXPOSURE_LIMITS, ExposureLimit
from planner.plan.antenna_source import MountedAntenna
from planner.units import to_milliwatt

CAUTION = (
    "for planning work near the antennas, no compliance certificate: other antennas, metal nearby "
    "and limits of parts of the body are left out, and the limits are from memory"
)
# A beam at most this much wider than high, and no wider than that, is taken for a dish's.
_DISH_RATIO, _WIDEST_DISH_DEG = 2.0, 40.0
_AZIMUTH_STEP_DEG, _ELEVATION_STEP_DEG = 1.0, 0.25


def exposure_record(mast: Sequence[MountedAntenna]) -> dict[str, Any]:
    """Distances to every published limit, ready for JSON.

    ``reason`` says what is missing where nothing could be computed, and nothing else stands there.
    """
    for key in ("transmit_power_dbm", "frequency_mhz", "largest_dimension_m"):
        lacking = [antenna.label for antenna in mast if getattr(antenna, key) is None]
        if lacking:
            return {"reason": f"no {key} of {', '.join(lacking)}"}
    radiators = [_radiator(antenna) for antenna in mast]
    azimuths = _azimuths(mast)
    share = np.array([_share(antenna, azimuths) for antenna in mast])
    aimed = mast[0].azimuth_deg is not None
    return {
        "reason": "",
        "antennas": [antenna.label for antenna in mast],
        "power_w": round(float(sum(radiator.power_w for radiator in radiators)), 6),
        "shapes": [radiator.shape for radiator in radiators],
        "ground_reflection_power_factor": GROUND_REFLECTION_POWER_FACTOR,
        "limits": [
            _limit_record(
                limit, radiators, limit_distance(radiators, share, limit), azimuths, aimed
            )
            for limit in EXPOSURE_LIMITS
        ],
        "caution": CAUTION,
    }


def _limit_record(
    limit: ExposureLimit,
    radiators: Sequence[Radiator],
    found: LimitDistance,
    azimuths: NDArray[np.float64],
    aimed: bool,
) -> dict[str, Any]:
    limits_w_m2 = [limit.power_density_w_m2(radiator.frequency_mhz) for radiator in radiators]
    record: dict[str, Any] = {
        "guideline": limit.guideline,
        "people": limit.people,
        "averaging_minutes": limit.averaging_minutes,
        "limits_w_m2": [None if np.isnan(w_m2) else round(w_m2, 4) for w_m2 in limits_w_m2],
        "distance_m": None,
        "far_field_m": None,
        "near_field_m": None,
        "reactive_near_field_m": None,
        "towards_deg": None,
    }
    if np.isnan(limits_w_m2).any():
        return record
    worst = int(np.argmax(found.distance_m))
    return record | {
        "distance_m": round(float(found.distance_m[worst]), 3),
        "far_field_m": round(float(found.far_field_m.max()), 3),
        "near_field_m": round(float(found.near_field_m.max()), 3),
        "reactive_near_field_m": round(found.reactive_near_field_m, 3),
        "towards_deg": round(float(azimuths[worst]), 1) if aimed else None,
    }


def _radiator(antenna: MountedAntenna) -> Radiator:
    size_m, frequency_mhz = antenna.largest_dimension_m, antenna.frequency_mhz
    if antenna.power_dbm is None or size_m is None or frequency_mhz is None:
        raise AssertionError(
            f"{antenna.label} has passed the checks without power, size, frequency"
        )
    figures = beam_figures(antenna.pattern, electrical_downtilt_deg=antenna.electrical_downtilt_deg)
    width_deg = figures.azimuth.half_power_beamwidth_deg
    return Radiator(
        frequency_mhz=frequency_mhz,
        power_w=float(to_milliwatt(antenna.power_dbm)) / 1000.0,
        gain_dbi=figures.peak_gain_dbi,
        azimuth_beamwidth_deg=360.0 if width_deg is None else width_deg,
        largest_dimension_m=size_m,
        shape="dish" if _is_dish(figures) else "column",
    )


def _is_dish(figures: BeamFigures) -> bool:
    """Whether the beam is that of a round aperture: narrow, and about as wide as it is high."""
    width_deg = figures.azimuth.half_power_beamwidth_deg
    height_deg = figures.elevation.half_power_beamwidth_deg
    if width_deg is None or height_deg is None:
        return False
    wider, narrower = max(width_deg, height_deg), min(width_deg, height_deg)
    return wider <= _DISH_RATIO * narrower and wider <= _WIDEST_DISH_DEG


def _azimuths(mast: Sequence[MountedAntenna]) -> NDArray[np.float64]:
    """Directions to look into: all around, and where each antenna points."""
    pointed = [antenna.azimuth_deg or 0.0 for antenna in mast]
    return np.concatenate((pointed, np.arange(0.0, 360.0, _AZIMUTH_STEP_DEG)))


def _share(antenna: MountedAntenna, azimuths: NDArray[np.float64]) -> NDArray[np.float64]:
    """Most that an antenna radiates at any elevation towards each azimuth, over its peak."""
    elevations = np.arange(-90.0, 90.0 + _ELEVATION_STEP_DEG, _ELEVATION_STEP_DEG)
    gain_dbi = mounted_gain_dbi(
        antenna.pattern,
        true_azimuth_deg=azimuths[:, np.newaxis],
        elevation_deg=elevations[np.newaxis, :],
        azimuth_deg=antenna.azimuth_deg or 0.0,
        mechanical_downtilt_deg=antenna.mechanical_downtilt_deg,
        electrical_downtilt_deg=antenna.electrical_downtilt_deg,
    ).max(axis=1)
    return np.asarray(10.0 ** ((gain_dbi - gain_dbi.max()) / 10.0))
