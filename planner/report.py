"""The records of runs, checks and paths as text for a terminal."""

from typing import Any

Record = dict[str, Any]


def table(rows: list[tuple[str, str]]) -> str:
    """Names and values as two columns."""
    width = max(len(name) for name, _ in rows)
    return "\n".join(f"{name:<{width}}  {value}".rstrip() for name, value in rows)


def value_text(value: float | None, unit: str, digits: int = 1, sign: bool = False) -> str:
    """A number with its unit."""
    if value is None:
        return "not computed"
    return f"{value:{'+' if sign else ''}.{digits}f} {unit}"


def _bearing(value: float | None) -> str:
    """A true bearing as crews write it: 042.3° T."""
    if value is None:
        return "not computed"
    rounded = round(value, 1) % 360.0
    return f"{rounded:05.1f}° T"


def run_text(record: Record) -> str:
    """The short summary after a run."""
    counts, model = record["counts"], record["model"]
    share = counts["area_served_share"]
    rows = [
        ("plan", record["plan"]["name"]),
        ("towers, sectors", f"{counts['towers']}, {counts['sectors']}"),
        (
            "cells computed",
            f"{counts['cells_computed']:,} of {model['cell_m']:g} m within "
            f"{model['radius_m'] / 1000.0:g} km",
        ),
        (
            "area above threshold",
            "none computed" if share is None else f"{100.0 * share:.1f} % of the cells computed",
        ),
    ]
    if counts["cells_without_data"]:
        rows.append(("cells without data", f"{counts['cells_without_data']:,}"))
    if counts["customers"]:
        rows.append(
            (
                "customers",
                f"{counts['customers_served']} served, {counts['customers_not_served']} not "
                f"served, {counts['customers_not_computed']} not computed, of "
                f"{counts['customers']}",
            )
        )
    seconds = sum(stage["seconds"] for stage in record["stages"])
    rows.append(("time", f"{seconds:.1f} s"))
    rows.append(("results in", record["folder"]))
    rows.append(("files", ", ".join(record["files"])))
    return table(rows)


def check_record(plan: Any, estimate: Any) -> Record:
    """What `planner check` found, for JSON and text alike."""
    from dataclasses import asdict

    from planner.io.terrain_files import describe_terrain
    from planner.plan.read import eirp_excesses

    return {
        "plan": plan.name,
        "file": str(plan.path),
        "towers": len(plan.towers),
        "sectors": len(plan.sectors),
        "terrain": [str(raster) for raster in describe_terrain(plan.terrain)],
        "estimate": asdict(estimate),
        "eirp_above_limit": [excess.sector_id for excess in eirp_excesses(plan)],
    }


def check_text(record: Record) -> str:
    """What a plan would compute, and that nothing in it is wrong."""
    estimate = record["estimate"]
    rows = [
        ("plan", record["plan"]),
        ("towers, sectors", f"{record['towers']}, {record['sectors']} on"),
    ]
    rows += [("raster", raster) for raster in record["terrain"]]
    use = "the raster's own" if estimate["unresampled"] else "resampled"
    rows += [
        (
            "grid",
            f"{estimate['grid']}, {estimate['cols']:,} x {estimate['rows']:,} cells of "
            f"{estimate['cell_m']:.4g} m, {use}",
        ),
        ("radius", f"{estimate['radius_m'] / 1000.0:g} km"),
    ]
    rows += [
        (
            "path field",
            f"tower {field['tower_id']}, antenna {field['antenna_height_m']:g} m, "
            f"{field['frequency_mhz']:g} MHz: {field['cells']:,} cells",
        )
        for field in estimate["fields"]
    ]
    rows += [
        ("cells in all", f"{estimate['cells']:,}"),
        ("time, about", f"{estimate['seconds']:.0f} s on two processor cores"),
        ("memory, about", f"{estimate['memory_bytes'] / 1e9:.1f} GB"),
    ]
    rows += [("EIRP above limit", f"sector {sector}") for sector in record["eirp_above_limit"]]
    rows.append(("result", "the plan can be run"))
    return table(rows)


def profile_text(record: Record) -> str:
    """One path, quantity by quantity."""
    distance = record["distance_m"]
    rows = [
        ("from", f"{record['from']}, antenna {record['from_antenna_height_m']:g} m above ground"),
        ("to", f"{record['to']}, antenna {record['to_antenna_height_m']:g} m above ground"),
        ("frequency", f"{record['frequency_mhz']:g} MHz"),
        ("distance", value_text(None if distance is None else distance / 1000.0, "km", 3)),
        (
            "bearing there, back",
            f"{_bearing(record['bearing_deg'])}, {_bearing(record['back_bearing_deg'])}",
        ),
        (
            "elevation there, back",
            f"{value_text(record['elevation_angle_deg'], 'deg', 2, sign=True)}, "
            f"{value_text(record['back_elevation_angle_deg'], 'deg', 2, sign=True)}",
        ),
        (
            "line of sight",
            {True: "yes", False: "no", None: "not computed"}[record["line_of_sight"]],
        ),
        ("worst clearance", _clearance(record)),
        ("free-space loss", value_text(record["free_space_loss_db"], "dB")),
        ("diffraction loss", value_text(record["diffraction_loss_db"], "dB")),
        ("  actual profile", value_text(record["actual_bullington_db"], "dB")),
        ("  smooth profile", value_text(record["smooth_bullington_db"], "dB")),
        ("  spherical earth", value_text(record["spherical_earth_db"], "dB")),
        ("path loss", value_text(record["path_loss_db"], "dB")),
    ]
    if record["sector"] is not None:
        rows += [
            ("best sector", record["sector"]),
            ("received signal", value_text(record["received_signal_dbm"], "dBm")),
            (
                "margin",
                f"{value_text(record['fade_margin_db'], 'dB', sign=True)} over the threshold of "
                f"{record['service_threshold_dbm']:g} dBm",
            ),
        ]
    else:
        rows.append(("received signal", "not stated: the antennas of a feed are not in the plan"))
    if record["picture"] is not None:
        rows.append(("picture", record["picture"]))
    return table(rows)


def _clearance(record: Record) -> str:
    if record["worst_clearance_m"] is None:
        return "nothing in between" if not record["reason"] else "not computed"
    return (
        f"{record['worst_clearance_m']:+.1f} m, {100.0 * record['worst_clearance_ratio']:.0f} % of "
        f"the first Fresnel zone's radius, {record['worst_clearance_distance_m'] / 1000.0:.3f} km "
        "from the tower"
    )
