"""Everything about one antenna as a record and a picture: key figures, port, fields, exposure."""

import math
from pathlib import Path
from typing import Any

from planner.antenna.cuts import Lobe
from planner.antenna.flat_ground import FlatGroundRings, Ring, flat_ground_rings
from planner.antenna.key_figures import CutFigures, KeyFigures, key_figures
from planner.handout.antenna_picture import write_antenna_picture
from planner.handout.ground_picture import write_ground_picture
from planner.physics.free_space import wavelength_m_scalar
from planner.physics.mismatch import mismatch_loss_db, reflection_coefficient, return_loss_db
from planner.physics.near_field import far_field_m, power_density_w_m2, reactive_near_field_m
from planner.plan.antenna_exposure import exposure_record
from planner.plan.antenna_source import MountedAntenna, StudiedAntenna
from planner.units import to_milliwatt

_DENSITY_DISTANCES_M = 1.0, 10.0, 100.0, 1000.0
LOW_EFFICIENCY = 0.25  # of a measured pattern; less is rather a slip. Common practice, no source


def antenna_report(study: StudiedAntenna, *, picture: Path | None = None) -> dict[str, Any]:
    """Everything about an antenna, ready for JSON; what is not known or not there is None.

    With an antenna height the record holds the rings on flat ground, and the picture shows them;
    without, the picture shows the pattern.
    """
    antenna = study.antenna
    figures = key_figures(antenna.pattern, electrical_downtilt_deg=antenna.electrical_downtilt_deg)
    regions = _field_regions(antenna)
    rings = None
    if study.antenna_height_m is not None:
        rings = flat_ground_rings(
            antenna.pattern,
            antenna_height_m=study.antenna_height_m,
            mechanical_downtilt_deg=antenna.mechanical_downtilt_deg,
            electrical_downtilt_deg=antenna.electrical_downtilt_deg,
        )
    record = {
        "antenna": antenna.pattern.name,
        "source": study.source,
        "kind": figures.kind,
        "frequency_mhz": antenna.frequency_mhz,
        "electrical_downtilt_deg": antenna.electrical_downtilt_deg,
        "figures": _figures(figures),
        "port": None if study.vswr is None else _port(study.vswr),
        "power_density": _power_density(antenna, figures, regions),
        "field_regions": regions,
        "exposure": exposure_record(study.mast),
        "flat_ground": None if rings is None else _flat_ground(study, rings),
        "warnings": _warnings(study, figures, regions),
        "picture": None if picture is None else str(picture),
    }
    if picture is not None and rings is not None and study.antenna_height_m is not None:
        write_ground_picture(
            picture,
            antenna.pattern,
            rings,
            antenna_height_m=study.antenna_height_m,
            mechanical_downtilt_deg=antenna.mechanical_downtilt_deg,
            electrical_downtilt_deg=antenna.electrical_downtilt_deg,
            power_dbm=antenna.power_dbm,
        )
    elif picture is not None:
        write_antenna_picture(
            picture,
            antenna.pattern,
            figures,
            electrical_downtilt_deg=antenna.electrical_downtilt_deg,
        )
    return record


def _figures(figures: KeyFigures) -> dict[str, Any]:
    estimate = figures.gain_from_beamwidths_dbi
    return {
        "peak_gain_dbi": _number(figures.peak_gain_dbi, 2),
        "peak_azimuth_offset_deg": _number(figures.peak_azimuth_offset_deg, 2),
        "peak_elevation_deg": _number(figures.peak_elevation_deg, 2),
        "azimuth": _cut(figures.azimuth),
        "elevation": _cut(figures.elevation),
        "front_to_back_db": _number(figures.front_to_back_db, 1),
        "front_to_back_region_db": _number(figures.front_to_back_region_db, 1),
        "squint_deg": _number(figures.squint_deg, 2),
        "electrical_downtilt_found_deg": _number(figures.electrical_downtilt_found_deg, 2),
        "directivity_dbi": _number(figures.directivity_dbi, 2),
        "directivity_error_db": _number(figures.directivity_error_db, 4),
        "gain_above_directivity_db": _number(figures.gain_above_directivity_db, 2),
        "efficiency": _number(figures.efficiency, 3),
        "gain_verdict": figures.gain_verdict,
        "gain_from_beamwidths_dbi": None if estimate is None else [round(e, 1) for e in estimate],
    }


def _cut(cut: CutFigures) -> dict[str, Any]:
    edges = cut.half_power_edges_deg
    return {
        "half_power_beamwidth_deg": _number(cut.half_power_beamwidth_deg, 2),
        "half_power_edges_deg": None if edges is None else [round(edge, 2) for edge in edges],
        "first_null_beamwidth_deg": _number(cut.first_null_beamwidth_deg, 2),
        "first_lower_side_lobe_db": _first_lobe_db(cut.lower),
        "first_upper_side_lobe_db": _first_lobe_db(cut.upper),
        "side_lobe_level_db": _number(cut.side_lobe_level_db, 1),
    }


def _first_lobe_db(lobes: tuple[Lobe, ...]) -> float | None:
    return _number(lobes[0].peak_db, 1) if lobes else None


def _port(vswr: float) -> dict[str, Any]:
    return {
        "vswr": vswr,
        "reflection_coefficient": _number(float(reflection_coefficient(vswr)), 3),
        "return_loss_db": _number(float(return_loss_db(vswr)), 1),
        "mismatch_loss_db": _number(float(mismatch_loss_db(vswr)), 2),
    }


def _field_regions(antenna: MountedAntenna) -> dict[str, Any] | None:
    if antenna.largest_dimension_m is None or antenna.frequency_mhz is None:
        return None
    wavelength_m = wavelength_m_scalar(antenna.frequency_mhz)
    size_m = antenna.largest_dimension_m
    return {
        "largest_dimension_m": size_m,
        "wavelength_m": _number(wavelength_m, 4),
        "reactive_near_field_m": _number(float(reactive_near_field_m(size_m, wavelength_m)), 2),
        "far_field_m": _number(float(far_field_m(size_m, wavelength_m)), 2),
    }


def _power_density(
    antenna: MountedAntenna, figures: KeyFigures, regions: dict[str, Any] | None
) -> dict[str, Any] | None:
    """In the main beam, in free space, without reflection."""
    if antenna.power_dbm is None:
        return None
    eirp_dbm = antenna.power_dbm + figures.peak_gain_dbi
    eirp_w = float(to_milliwatt(eirp_dbm)) / 1000.0
    return {
        "eirp_dbm": _number(eirp_dbm, 2),
        "eirp_w": float(f"{eirp_w:.5g}"),
        "in_the_main_beam": [
            {
                "distance_m": distance_m,
                "power_density_w_m2": float(f"{float(power_density_w_m2(eirp_w, distance_m)):.4g}"),
                "far_field": None if regions is None else distance_m >= regions["far_field_m"],
            }
            for distance_m in _DENSITY_DISTANCES_M
        ],
    }


def _flat_ground(study: StudiedAntenna, rings: FlatGroundRings) -> dict[str, Any]:
    return {
        "antenna_height_m": study.antenna_height_m,
        "mechanical_downtilt_deg": study.antenna.mechanical_downtilt_deg,
        "electrical_downtilt_deg": study.antenna.electrical_downtilt_deg,
        "azimuth_offset_deg": _number(rings.azimuth_offset_deg, 1),
        "main_beam": _ring(rings.main_beam),
        "upper_half_power_edge": _ring(rings.upper_edge),
        "lower_half_power_edge": _ring(rings.lower_edge),
        "nulls": [_ring(null) for null in rings.nulls],
    }


def _ring(ring: Ring | None) -> dict[str, Any] | None:
    if ring is None:
        return None
    return {
        "elevation_deg": _number(ring.elevation_deg, 2),
        "distance_m": _number(ring.distance_m, 1),
        "gain_dbi": _number(ring.gain_dbi, 1),
    }


def _warnings(
    study: StudiedAntenna, figures: KeyFigures, regions: dict[str, Any] | None
) -> list[str]:
    pattern = study.antenna.pattern
    warnings = list(pattern.notes)
    over_db = figures.gain_above_directivity_db
    gain, directivity = f"{figures.peak_gain_dbi:.1f} dBi", f"{figures.directivity_dbi:.1f} dBi"
    if figures.gain_verdict == "impossible":
        warnings.append(
            f"The gain of {gain} is {over_db:.1f} dB above the directivity of this pattern, "
            f"{directivity}: it would radiate more power than is put in. Gain or pattern is wrong."
        )
    elif pattern.kind == "measured" and (figures.efficiency or 1.0) < LOW_EFFICIENCY:
        warnings.append(
            f"The gain of {gain} is {-over_db:.1f} dB below the directivity of this pattern, "
            f"{directivity}: few antennas lose so much. Check the gain, its unit and that the "
            "pattern belongs to it."
        )
    if abs(figures.peak_gain_dbi - pattern.gain_dbi) > 0.1:
        warnings.append(
            f"The highest gain of the pattern is {gain}, not the stated {pattern.gain_dbi:g} dBi."
        )
    if regions is not None:
        reach_m = regions["far_field_m"]
        text = f"Within {reach_m:.3g} m of the antenna its pattern does not hold; "
        if study.antenna_height_m is not None and reach_m > study.antenna_height_m:
            text += "that includes the mast below it, the ground at its foot and customers so near."
            warnings.append(text)
        else:
            warnings.append(text + "metal of the mast within it changes the pattern itself.")
    return warnings


def _number(value: float | None, digits: int) -> float | None:
    """Rounded for the record; None where there is no number or it is endless."""
    if value is None or not math.isfinite(value):
        return None
    return round(value, digits) + 0.0
