"""One path of a plan: from a tower to a place or to another tower, as a record and a picture."""

import math
from pathlib import Path as FilePath
from typing import Any

from planner.antenna import mounted_gain_dbi
from planner.errors import PlanError, Problem
from planner.handout.profile_picture import write_profile_picture
from planner.io.terrain_files import read_terrain
from planner.network import Sector, Tower
from planner.physics.link import received_signal_dbm
from planner.plan.read import Plan
from planner.sweep import Path, path_between


def path_report(
    plan: Plan,
    *,
    tower_id: str,
    to_place: tuple[float, float] | None = None,
    to_tower_id: str | None = None,
    height_m: float | None = None,
    picture: FilePath | None = None,
) -> dict[str, Any]:
    """Everything about one path, ready for JSON; what could not be computed is None.

    Exactly one of ``to_place`` (latitude, longitude) and ``to_tower_id`` is given. To a place the
    best sector's signal at the plan's terminal is reported. To a tower no signal is: the antennas
    of such a feed are not in the plan.
    """
    tower = _tower(plan, tower_id)
    if not tower.sectors:
        raise PlanError(
            Problem(
                where=f"{plan.path.name}: tower {tower_id}",
                found="no sector that is on",
                allowed="a tower with a sector that is on",
            )
        )
    far_height_m: float
    if to_tower_id is not None:
        far = _tower(plan, to_tower_id)
        far_name, place = f"tower {far.id}", (far.latitude, far.longitude)
        heights = [sector.antenna_height_m for sector in far.sectors]
        if height_m is None and not heights:
            raise PlanError(
                Problem(
                    where=f"{plan.path.name}: tower {to_tower_id}",
                    found="no sector that is on, so no antenna height",
                    advice="Give the height with --height-m",
                )
            )
        far_height_m = max(heights) if height_m is None else height_m
        choices = [max(tower.sectors, key=lambda sector: sector.antenna_height_m)]
    elif to_place is not None:
        far_name, place = f"{to_place[0]:.5f}, {to_place[1]:.5f}", to_place
        far_height_m = plan.terminal.antenna_height_m if height_m is None else height_m
        choices = list(tower.sectors)
    else:
        raise ValueError("one of to_place and to_tower_id is needed")

    terrain = read_terrain(
        plan.terrain,
        [(tower.latitude, tower.longitude), place],
        2000.0,
        cell_m=plan.cell_m,
        crs=plan.grid_crs,
        names=[tower.id, far_name],
    )
    paths: dict[tuple[float, float], Path] = {}
    signals: list[tuple[float, Sector]] = []
    for sector in choices:
        key = (sector.antenna_height_m, sector.radio.frequency_mhz)
        if key not in paths:
            paths[key] = path_between(
                terrain,
                a_latitude=tower.latitude,
                a_longitude=tower.longitude,
                a_height_m=sector.antenna_height_m,
                b_latitude=place[0],
                b_longitude=place[1],
                b_height_m=far_height_m,
                frequency_mhz=sector.radio.frequency_mhz,
                k_factor=plan.k_factor,
                polarization=plan.polarization,
                obstacle_clearing_m=plan.obstacle_clearing_m,
            )
        signals.append((_signal_dbm(plan, sector, paths[key]), sector))
    meets = [s for s in signals if s[0] >= s[1].radio.service_threshold_dbm]
    signal_dbm, sector = max(
        meets or signals, key=lambda pair: -math.inf if math.isnan(pair[0]) else pair[0]
    )
    path = paths[sector.antenna_height_m, sector.radio.frequency_mhz]
    to_terminal = to_tower_id is None
    threshold_dbm = sector.radio.service_threshold_dbm if to_terminal else None
    if picture is not None and not path.reason:
        write_profile_picture(
            picture,
            path,
            a_name=f"tower {tower.id}",
            b_name=far_name,
            received_signal_dbm=signal_dbm if to_terminal else None,
            threshold_dbm=threshold_dbm,
        )
    return {
        "from": f"tower {tower.id}",
        "to": far_name,
        "reason": path.reason,
        "sector": sector.id if to_terminal else None,
        "frequency_mhz": path.frequency_mhz,
        "from_antenna_height_m": sector.antenna_height_m,
        "to_antenna_height_m": far_height_m,
        "distance_m": _number(path.distance_m, 1),
        "bearing_deg": _number(path.azimuth_deg, 3),
        "back_bearing_deg": _number(path.back_azimuth_deg, 3),
        "elevation_angle_deg": _number(path.elevation_angle_deg, 3),
        "back_elevation_angle_deg": _number(path.back_elevation_angle_deg, 3),
        "line_of_sight": None if path.reason else path.line_of_sight,
        "worst_clearance_m": _number(path.worst_clearance_m, 2),
        "worst_clearance_ratio": _number(path.worst_clearance_ratio, 3),
        "worst_clearance_distance_m": _number(path.worst_clearance_distance_m, 1),
        "free_space_loss_db": _number(path.free_space_loss_db, 3),
        "diffraction_loss_db": _number(path.diffraction.loss_db, 3),
        "actual_bullington_db": _number(path.diffraction.actual_bullington_db, 3),
        "smooth_bullington_db": _number(path.diffraction.smooth_bullington_db, 3),
        "spherical_earth_db": _number(path.diffraction.spherical_earth_db, 3),
        "path_loss_db": _number(path.path_loss_db, 3),
        "received_signal_dbm": _number(signal_dbm, 2) if to_terminal else None,
        "service_threshold_dbm": threshold_dbm,
        "fade_margin_db": (
            None if threshold_dbm is None else _number(signal_dbm - threshold_dbm, 2)
        ),
        "picture": None if picture is None or path.reason else str(picture),
        "warnings": list(terrain.warnings),
    }


def _tower(plan: Plan, tower_id: str) -> Tower:
    for tower in plan.towers:
        if tower.id == tower_id:
            return tower
    raise PlanError(
        Problem(
            where=f"{plan.path.name}: tower",
            found=f"no tower named {tower_id!r}",
            allowed=", ".join(tower.id for tower in plan.towers),
        )
    )


def _signal_dbm(plan: Plan, sector: Sector, path: Path) -> float:
    gain_dbi = mounted_gain_dbi(
        plan.patterns[sector.id],
        true_azimuth_deg=path.azimuth_deg,
        elevation_deg=path.elevation_angle_deg,
        azimuth_deg=sector.azimuth_deg,
        mechanical_downtilt_deg=sector.mechanical_downtilt_deg,
        electrical_downtilt_deg=sector.electrical_downtilt_deg,
    )
    return float(
        received_signal_dbm(
            transmit_power_dbm=sector.radio.transmit_power_dbm,
            feeder_loss_db=sector.radio.feeder_loss_db,
            antenna_gain_dbi=gain_dbi,
            path_loss_db=path.path_loss_db,
            terminal_gain_dbi=plan.terminal.antenna_gain_dbi,
            terminal_feeder_loss_db=plan.terminal.feeder_loss_db,
        )
    )


def _number(value: float, digits: int) -> float | None:
    return None if math.isnan(value) else round(value, digits)
