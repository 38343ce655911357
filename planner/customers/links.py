"""What the sectors give each customer: the numbers of its paths, signals, and which is best."""

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from planner.antenna import Pattern, mounted_gain_dbi
from planner.network import Sector, Terminal
from planner.physics.link import received_signal_dbm
from planner.sweep import Path

PathKey = tuple[int, float, float]  # tower's number, antenna height, frequency


@dataclass(frozen=True, slots=True, kw_only=True)
class Link:
    """What is kept of a path: the numbers, not the profile."""

    distance_m: float
    azimuth_deg: float  # true, at the tower
    elevation_angle_deg: float  # at the tower
    back_azimuth_deg: float  # true, at the customer
    back_elevation_angle_deg: float
    line_of_sight: bool
    blocking_distance_m: float  # from the customer; NaN where nothing blocks
    blocking_excess_m: float
    blocking_ground_m: float  # above the datum
    blocking_obstacle_m: float  # of trees or roofs, above that ground
    path_loss_db: float
    free_space_loss_db: float
    diffraction_loss_db: float


def path_key(tower_index: int, sector: Sector) -> PathKey:
    """What a path to one customer depends on: sectors with the same key share it."""
    return tower_index, sector.antenna_height_m, sector.radio.frequency_mhz


def link_of(path: Path) -> Link:
    """The numbers of a computed path from the tower to the customer."""
    from_tower_m, excess_m = path.blocking_distance_m, path.blocking_excess_m
    ground_m, obstacle_m = path.blocking_ground_m, path.blocking_obstacle_m
    return Link(
        distance_m=path.distance_m,
        azimuth_deg=path.azimuth_deg,
        elevation_angle_deg=path.elevation_angle_deg,
        back_azimuth_deg=path.back_azimuth_deg,
        back_elevation_angle_deg=path.back_elevation_angle_deg,
        line_of_sight=path.line_of_sight,
        blocking_distance_m=math.nan if from_tower_m is None else path.distance_m - from_tower_m,
        blocking_excess_m=math.nan if excess_m is None else excess_m,
        blocking_ground_m=math.nan if ground_m is None else ground_m,
        blocking_obstacle_m=math.nan if obstacle_m is None else obstacle_m,
        path_loss_db=path.path_loss_db,
        free_space_loss_db=path.free_space_loss_db,
        diffraction_loss_db=path.diffraction.loss_db,
    )


def gains_and_signals(
    sectors: Sequence[tuple[int, Sector]],
    patterns: Mapping[str, Pattern],
    terminal: Terminal,
    links: Sequence[Mapping[PathKey, Link]],
) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Gain [dBi] and received signal [dBm] of every sector at every customer.

    ``sectors`` are pairs of the tower's number and the sector, ``links`` the computed paths of each
    customer. Two arrays [customers, sectors]; NaN where there is no path.
    """
    shape = (len(links), len(sectors))
    gain_dbi, signal_dbm = np.full(shape, math.nan), np.full(shape, math.nan)
    for column, (index, sector) in enumerate(sectors):
        key = path_key(index, sector)
        rows = [number for number, own in enumerate(links) if key in own]
        if not rows:
            continue
        gain_dbi[rows, column] = mounted_gain_dbi(
            patterns[sector.id],
            true_azimuth_deg=np.array([links[row][key].azimuth_deg for row in rows]),
            elevation_deg=np.array([links[row][key].elevation_angle_deg for row in rows]),
            azimuth_deg=sector.azimuth_deg,
            mechanical_downtilt_deg=sector.mechanical_downtilt_deg,
            electrical_downtilt_deg=sector.electrical_downtilt_deg,
        )
        signal_dbm[rows, column] = received_signal_dbm(
            transmit_power_dbm=sector.radio.transmit_power_dbm,
            feeder_loss_db=sector.radio.feeder_loss_db,
            antenna_gain_dbi=gain_dbi[rows, column],
            path_loss_db=np.array([links[row][key].path_loss_db for row in rows]),
            terminal_gain_dbi=terminal.antenna_gain_dbi,
            terminal_feeder_loss_db=terminal.feeder_loss_db,
        )
    return gain_dbi, signal_dbm


def best_and_second(
    sectors: Sequence[tuple[int, Sector]], signal_dbm: NDArray[np.float64]
) -> tuple[int, int | None]:
    """Numbers of the best sector and of the strongest other; ties go to the earlier one.

    ``signal_dbm`` holds one customer's signal from each sector, NaN without a path. The best is the
    strongest among those that reach their own threshold; where none does, the strongest of all.
    """
    known = np.where(np.isnan(signal_dbm), -math.inf, signal_dbm)
    thresholds_dbm = np.array([sector.radio.service_threshold_dbm for _, sector in sectors])
    serving = np.where(known >= thresholds_dbm, known, -math.inf)
    best = int(np.argmax(serving if np.any(serving > -math.inf) else known))
    others = known.copy()
    others[best] = -math.inf
    second = int(np.argmax(others))
    return best, second if others[second] > -math.inf else None
