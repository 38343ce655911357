"""Terrain, settings and keys for the tests of path fields that are kept."""

from dataclasses import fields, replace

import numpy as np
from places import latitude_longitude, plain

from planner.sweep import PathField, path_field_key
from planner.terrain import Terrain

KEY, OTHER_KEY = "ab" * 32, "cd" * 32
ARRAYS = [item.name for item in fields(PathField) if "ndarray" in str(item.type)]
SETTINGS = {
    "antenna_height_m": 30.0,
    "receiver_height_m": 5.0,
    "frequency_mhz": 5600.0,
    "radius_m": 1000.0,
    "k_factor": 4.0 / 3.0,
    "polarization": "vertical",
    "obstacle_clearing_m": 0.0,
}


def hills(rows: int = 81, cols: int = 71, seed: int = 5, **changes) -> Terrain:
    """Invented rough ground with obstacles on cells of 50 m."""
    random = np.random.default_rng(seed)
    ground = random.uniform(0.0, 60.0, (rows, cols)).astype(np.float32)
    obstacle = random.uniform(0.0, 9.0, (rows, cols)).astype(np.float32)
    return replace(plain(ground=ground, obstacle=obstacle), **changes)


MAST = latitude_longitude(hills(), 40.3, 35.6)


def key_of(terrain: Terrain, **changes) -> str:
    settings = {"latitude": MAST[0], "longitude": MAST[1], **SETTINGS, **changes}
    return path_field_key(terrain, **settings)
