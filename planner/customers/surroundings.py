"""How far the towers are from each customer, also with latitude and longitude swapped."""

import math
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from planner.geodesy import true_bearing_and_distance
from planner.network import Customer, Tower


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Surroundings:
    """Distances and bearings from every customer to every tower, and the other way round."""

    distance_m: NDArray[np.float64]  # [customers, towers]; NaN for rows that cannot be computed
    bearing_to_tower_deg: NDArray[np.float64]
    swapped_distance_m: NDArray[np.float64]  # with latitude and longitude swapped


def surroundings(towers: Sequence[Tower], customers: Sequence[Customer]) -> Surroundings:
    """All distances and bearings at once; rows with trouble get NaN."""
    usable = np.array([not customer.trouble for customer in customers], dtype=bool)
    latitude = np.array([customer.latitude for customer in customers], dtype=float)
    longitude = np.array([customer.longitude for customer in customers], dtype=float)
    latitude, longitude = latitude[usable, np.newaxis], longitude[usable, np.newaxis]
    tower_latitude = np.array([tower.latitude for tower in towers], dtype=float)
    tower_longitude = np.array([tower.longitude for tower in towers], dtype=float)
    shape = (len(customers), len(towers))
    distance_m, bearing_deg, swapped_m = (np.full(shape, math.nan) for _ in range(3))
    if usable.any() and towers:
        bearing_deg[usable], _, distance_m[usable] = true_bearing_and_distance(
            latitude, longitude, tower_latitude, tower_longitude
        )
        possible = np.abs(longitude) <= 90.0  # else it cannot be a latitude
        _, _, swapped_m[usable] = true_bearing_and_distance(
            np.where(possible, longitude, math.nan), latitude, tower_latitude, tower_longitude
        )
    return Surroundings(
        distance_m=distance_m, bearing_to_tower_deg=bearing_deg, swapped_distance_m=swapped_m
    )


def seems_swapped(around: Surroundings, number: int, radius_m: float) -> bool:
    """Out of range of every tower as given, in range of one the other way round."""
    return bool(
        np.all(around.distance_m[number] > radius_m)
        and np.any(around.swapped_distance_m[number] <= radius_m)
    )
