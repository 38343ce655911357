"""The record of a run: what it was made from, by which model, what it found, how long it took."""

import hashlib
from pathlib import Path
from typing import Any

from planner import __version__
from planner.coverage import CellCounts
from planner.customers import CustomerAnswer
from planner.physics.free_space import wavelength_m
from planner.physics.near_field import far_field_m
from planner.plan.outputs import MODEL
from planner.plan.read import Plan, eirp_excesses
from planner.terrain import Terrain


def file_sha256(path: Path) -> str:
    """SHA-256 of a file's bytes, in hexadecimal."""
    with path.open("rb") as file:
        return hashlib.file_digest(file, "sha256").hexdigest()


def input_files(plan: Plan) -> list[Path]:
    """Every file that a run of the plan reads."""
    files = [plan.path, *plan.terrain.rasters, plan.terrain.obstacles, plan.customers_file]
    files += plan.pattern_files
    return [path for path in files if path is not None]


def near_field_warnings(plan: Plan, answers: tuple[CustomerAnswer, ...]) -> list[str]:
    """Customers that stand where the pattern of their sector's antenna does not hold yet."""
    warnings = []
    for sector in plan.sectors:
        if sector.largest_dimension_m is None:
            continue
        reach_m = float(
            far_field_m(sector.largest_dimension_m, wavelength_m(sector.radio.frequency_mhz))
        )
        near = [
            answer.customer.id
            for answer in answers
            if answer.sector_id == sector.id and answer.distance_m < reach_m
        ]
        if near:
            warnings.append(
                f"sector {sector.id}: the far field of its antenna begins at {reach_m:.3g} m; "
                f"within it stands {', '.join(near)}, whose signal is not to be trusted"
            )
    return warnings


def run_record(
    plan: Plan,
    terrain: Terrain,
    counts: CellCounts,
    answers: tuple[CustomerAnswer, ...],
    stages: list[dict[str, Any]],
    files: list[str],
    path_fields: list[dict[str, Any]],
    notes: tuple[str, ...] = (),
) -> dict[str, Any]:
    """Everything that run.json holds.

    Only ``stages`` holds the clock, and only ``path_fields`` tells what an earlier run had left.
    """
    excesses = eirp_excesses(plan)
    verdicts = [answer.verdict for answer in answers]
    warnings = [*terrain.warnings, *notes]
    warnings += [note for pattern in plan.patterns.values() for note in pattern.notes]
    warnings += [
        f"sector {excess.sector_id}: EIRP {excess.eirp_dbm:.1f} dBm is above the plan's limit of "
        f"{excess.limit_dbm:.1f} dBm"
        for excess in excesses
    ]
    warnings += near_field_warnings(plan, answers)
    grid = terrain.grid
    return {
        "software": f"ptmp-planner {__version__}",
        "plan": {"name": plan.name, "file": plan.path.name, "sha256": plan.hash},
        "inputs": [{"file": path.name, "sha256": file_sha256(path)} for path in input_files(plan)],
        "model": {
            "method": MODEL,
            "radius_m": plan.radius_m,
            "cell_m": grid.cell_m,
            "grid": grid.crs.to_string(),
            "rows": grid.rows,
            "cols": grid.cols,
            "k_factor": plan.k_factor,
            "polarization": plan.polarization,
            "obstacle_clearing_m": plan.obstacle_clearing_m,
            "receiver_height_m": plan.terminal.antenna_height_m,
        },
        "counts": {
            "towers": len([tower for tower in plan.towers if tower.sectors]),
            "sectors": len(plan.sectors),
            "cells_computed": counts.computed,
            "cells_without_data": counts.no_data,
            "cells_behind_missing_data": counts.crosses_hole,
            "cells_out_of_range": counts.out_of_range,
            "cells_served": counts.served,
            "area_served_share": (
                round(counts.served / counts.computed, 4) if counts.computed else None
            ),
            "customers": len(answers),
            "customers_served": verdicts.count("served"),
            "customers_not_served": verdicts.count("not served"),
            "customers_not_computed": verdicts.count("not computed"),
        },
        "sectors": [
            {
                "number": number,
                "id": sector.id,
                "azimuth_deg": sector.azimuth_deg,
                "mechanical_downtilt_deg": sector.mechanical_downtilt_deg,
                "electrical_downtilt_deg": sector.electrical_downtilt_deg,
                "cells_served": counts.served_by_sector[number - 1],
            }
            for number, sector in enumerate(plan.sectors, start=1)
        ],
        "path_fields": path_fields,
        "eirp_above_limit": [excess.sector_id for excess in excesses],
        "warnings": list(dict.fromkeys(warnings)),
        "stages": stages,
        "files": files,
    }
