"""The record of an antenna as text for a terminal."""

from typing import Any

from planner.report import Record, table, value_text

_KINDS = {
    "measured": "measured pattern",
    "model": "formula of an antenna",
    "envelope": "envelope of side lobes",
}


def antenna_text(record: Record) -> str:
    """One antenna, figure by figure; the same facts as the JSON."""
    frequency = record["frequency_mhz"]
    rows = [
        ("antenna", record["antenna"]),
        ("made from", f"{record['source']}; {_KINDS[record['kind']]}"),
        ("frequency", "not stated" if frequency is None else f"{frequency:g} MHz"),
        ("electrical downtilt", f"{record['electrical_downtilt_deg']:g} deg put in"),
        *_figure_rows(record["figures"]),
        *_port_rows(record["port"]),
        *_density_rows(record["power_density"]),
        *_region_rows(record["field_regions"]),
        *_exposure_rows(record["exposure"]),
        *_ground_rows(record["flat_ground"]),
    ]
    rows += [("warning", warning) for warning in record["warnings"]]
    if record["picture"] is not None:
        rows.append(("picture", record["picture"]))
    return table(rows)


def _figure_rows(figures: dict[str, Any]) -> list[tuple[str, str]]:
    peak = (
        f"{figures['peak_gain_dbi']:.2f} dBi at {figures['peak_azimuth_offset_deg']:.2f} deg "
        f"azimuth, {figures['peak_elevation_deg']:.2f} deg elevation"
    )
    rows = [("highest gain", peak)]
    for name in ("azimuth", "elevation"):
        rows += _cut_rows(name, figures[name])
    return [
        *rows,
        ("front-to-back at 180 deg", _endless(figures["front_to_back_db"])),
        ("  least over 180 +- 30", _endless(figures["front_to_back_region_db"])),
        ("squint", _degrees(figures["squint_deg"])),
        ("electrical tilt found", _degrees(figures["electrical_downtilt_found_deg"])),
        (
            "directivity",
            f"{figures['directivity_dbi']:.2f} dBi by integration, within "
            f"{figures['directivity_error_db']:.4f} dB",
        ),
        ("gain and directivity", _verdict(figures)),
        ("gain from beamwidths", _estimate(figures["gain_from_beamwidths_dbi"])),
    ]


def _cut_rows(name: str, cut: dict[str, Any]) -> list[tuple[str, str]]:
    sides = ("left", "right") if name == "azimuth" else ("lower", "upper")
    edges = cut["half_power_edges_deg"]
    width = "never 3 dB below the peak"
    if edges is not None:
        width = (
            f"{cut['half_power_beamwidth_deg']:.2f} deg, from {edges[0]:.2f} to {edges[1]:.2f} deg"
        )
    lobes = ", ".join(
        f"{side} {'none' if level is None else f'{level:.1f} dB'}"
        for side, level in zip(
            sides, (cut["first_lower_side_lobe_db"], cut["first_upper_side_lobe_db"]), strict=True
        )
    )
    return [
        (f"{name} half-power beamwidth", width),
        ("  first nulls apart", _degrees(cut["first_null_beamwidth_deg"])),
        ("  first side lobes", lobes),
        ("  highest side lobe", _decibels(cut["side_lobe_level_db"])),
    ]


def _verdict(figures: dict[str, Any]) -> str:
    over_db, efficiency = figures["gain_above_directivity_db"], figures["efficiency"]
    if figures["gain_verdict"] == "not judged":
        return f"{over_db:+.2f} dB; not judged: an envelope is not what the antenna radiates"
    share = f"efficiency {100.0 * efficiency:.0f} %"
    if figures["gain_verdict"] == "impossible":
        return f"{over_db:+.2f} dB: impossible, {share}"
    return f"{over_db:+.2f} dB: {share}"


def _estimate(estimate: list[float] | None) -> str:
    if estimate is None:
        return "none: a cut never falls by 3 dB"
    return f"{estimate[0]:.1f} to {estimate[1]:.1f} dBi, estimate"


def _port_rows(port: dict[str, Any] | None) -> list[tuple[str, str]]:
    if port is None:
        return []
    return_loss = port["return_loss_db"]
    return [
        (
            "standing wave ratio",
            f"{port['vswr']:g}: reflection coefficient {port['reflection_coefficient']:.3f}, "
            f"return loss {'endless' if return_loss is None else f'{return_loss:.1f} dB'}, "
            f"mismatch loss {port['mismatch_loss_db']:.2f} dB",
        )
    ]


def _density_rows(density: dict[str, Any] | None) -> list[tuple[str, str]]:
    if density is None:
        return []
    rows = [("EIRP in the main beam", f"{density['eirp_dbm']:.2f} dBm, {density['eirp_w']:g} W")]
    for at in density["in_the_main_beam"]:
        text = f"{at['power_density_w_m2']:g} W/m2"
        if at["far_field"] is False:
            text += ", near field: the formula does not hold"
        rows.append((f"  power density at {at['distance_m']:g} m", text))
    return rows


def _region_rows(regions: dict[str, Any] | None) -> list[tuple[str, str]]:
    if regions is None:
        return [("field regions", "not computed: needs largest_dimension_m and frequency_mhz")]
    return [
        (
            "field regions",
            f"reactive near field to {regions['reactive_near_field_m']:g} m, far field from "
            f"{regions['far_field_m']:g} m; largest dimension "
            f"{regions['largest_dimension_m']:g} m, wavelength {regions['wavelength_m']:g} m",
        )
    ]


def _exposure_rows(exposure: dict[str, Any]) -> list[tuple[str, str]]:
    if exposure["reason"]:
        return [("exposure distances", f"not computed: {exposure['reason']}")]
    antennas = ", ".join(
        f"{label} ({shape})"
        for label, shape in zip(exposure["antennas"], exposure["shapes"], strict=True)
    )
    rows = [
        (
            "exposure distances",
            f"{antennas} together, {exposure['power_w']:g} W, power density times "
            f"{exposure['ground_reflection_power_factor']:g} for the ground",
        )
    ]
    for limit in exposure["limits"]:
        rows.append((f"  {limit['guideline']}", _limit(limit)))
    return [*rows, ("  caution", exposure["caution"])]


def _limit(limit: dict[str, Any]) -> str:
    levels = list(dict.fromkeys(limit["limits_w_m2"]))
    named = ", ".join("none here" if level is None else f"{level:g} W/m2" for level in levels)
    text = f"{limit['people']}, {named} over {limit['averaging_minutes']:g} min: "
    if limit["distance_m"] is None:
        return text + "not computed"
    text += f"{limit['distance_m']:.2f} m"
    if limit["towards_deg"] is not None:
        text += f" towards {limit['towards_deg']:05.1f} deg true"
    return text + (
        f" (far field {limit['far_field_m']:.2f} m, near-field model {limit['near_field_m']:.2f} "
        f"m, reactive near field {limit['reactive_near_field_m']:.2f} m)"
    )


def _ground_rows(ground: dict[str, Any] | None) -> list[tuple[str, str]]:
    if ground is None:
        return []
    distances = [null["distance_m"] for null in ground["nulls"]]
    nulls = ", ".join(f"{d:.0f}" if d >= 10.0 else f"{d:.1f}" for d in distances)
    return [
        (
            "flat ground",
            f"antenna {ground['antenna_height_m']:g} m up, downtilt "
            f"{ground['mechanical_downtilt_deg']:g} deg mechanical, "
            f"{ground['electrical_downtilt_deg']:g} deg electrical; in the azimuth of the highest "
            f"gain, {ground['azimuth_offset_deg']:g} deg from the boresight",
        ),
        ("  main beam lands at", _ring(ground["main_beam"])),
        ("  upper 3 dB edge", _ring(ground["upper_half_power_edge"])),
        ("  lower 3 dB edge", _ring(ground["lower_half_power_edge"])),
        ("  nulls at", f"{nulls} m" if nulls else "none"),
    ]


def _ring(ring: dict[str, Any] | None) -> str:
    if ring is None:
        return "none"
    distance = ring["distance_m"]
    where = "does not meet flat ground" if distance is None else f"{distance:.1f} m"
    return f"{where}, elevation {ring['elevation_deg']:.2f} deg, {ring['gain_dbi']:.1f} dBi"


def _decibels(value: float | None) -> str:
    return "none" if value is None else value_text(value, "dB")


def _endless(value: float | None) -> str:
    return "endless: nothing is radiated there" if value is None else value_text(value, "dB")


def _degrees(value: float | None) -> str:
    return "none" if value is None else value_text(value, "deg", 2)
