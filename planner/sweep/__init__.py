"""Paths over terrain: one exact path between two places, and the field of all paths of a mast."""

from planner.sweep.field import PathField, load_kernels, path_field
from planner.sweep.key import MODEL_VERSION, path_field_key, seen_part, seen_window
from planner.sweep.path import Path, path_between
from planner.sweep.state import COMPUTED, CROSSES_HOLE, NO_DATA, OUT_OF_RANGE

__all__ = [
    "COMPUTED",
    "CROSSES_HOLE",
    "MODEL_VERSION",
    "NO_DATA",
    "OUT_OF_RANGE",
    "Path",
    "PathField",
    "load_kernels",
    "path_between",
    "path_field",
    "path_field_key",
    "seen_part",
    "seen_window",
]
