"""What the check of one customer found."""

import math
from dataclasses import dataclass
from typing import Literal

from planner.network import Customer

Verdict = Literal["served", "not served", "not computed"]


@dataclass(frozen=True, slots=True, kw_only=True)
class CustomerAnswer:
    """One row of the checked list. What was not computed is NaN or empty, never 0."""

    customer: Customer
    verdict: Verdict
    reason: str = ""  # why not served or not computed; empty when served
    note: str = ""  # what else the reader should know; does not change the verdict
    antenna_height_m: float = math.nan  # at the customer, above ground, as it was computed with
    tower_id: str = ""  # of the best sector; the nearest tower where nothing was computed
    sector_id: str = ""  # the best sector
    distance_m: float = math.nan  # to that tower, on the ellipsoid
    bearing_to_tower_deg: float = math.nan  # true, at the customer
    elevation_angle_deg: float = math.nan  # at the customer, to the mast or the radio horizon
    received_signal_dbm: float = math.nan
    fade_margin_db: float = math.nan  # received signal less the radio's service threshold
    second_sector_id: str = ""  # the strongest of the other sectors
    server_margin_db: float = math.nan  # best sector less that one
    sector_gain_dbi: float = math.nan  # of the best sector's antenna towards the customer
    line_of_sight: bool | None = None  # None: not computed
    blocking_distance_m: float = math.nan  # from the customer; NaN where nothing blocks
    blocking_latitude: float = math.nan
    blocking_longitude: float = math.nan
    blocking_excess_m: float = math.nan  # how far it rises above the direct ray
    blocking_ground_m: float = math.nan  # the ground there, above the datum
    blocking_obstacle_m: float = math.nan  # trees or roofs on it, above the ground
    path_loss_db: float = math.nan
    free_space_loss_db: float = math.nan
    diffraction_loss_db: float = math.nan
