"""Antenna patterns: gain for any direction, published formulas, measured cuts, mounting.

Directions off the boresight: azimuth offset clockwise seen from above, elevation positive upwards.
Downtilt is positive downwards; mechanical tilt turns the antenna, electrical tilt bends the beam.
"""

from planner.antenna.beamwidth import half_power_edges_deg
from planner.antenna.dish import Dish
from planner.antenna.f1336 import estimated_elevation_beamwidth_deg
from planner.antenna.f1336_omni import F1336Omnidirectional
from planner.antenna.f1336_sector import F1336Sector
from planner.antenna.formula import FORMULAS, formula_pattern
from planner.antenna.grid_pattern import GridPattern, grid_pattern
from planner.antenna.lookup import GainTable, gain_table
from planner.antenna.m2101 import M2101Array
from planner.antenna.mounting import antenna_direction_deg, mounted_gain_dbi
from planner.antenna.pattern import Isotropic, Pattern, PatternKind
from planner.antenna.tr36814 import Tr36814Sector
from planner.antenna.tr38901 import Tr38901Element
from planner.antenna.two_cut import TwoCutPattern, two_cut_pattern

__all__ = [
    "FORMULAS",
    "Dish",
    "F1336Omnidirectional",
    "F1336Sector",
    "GainTable",
    "GridPattern",
    "Isotropic",
    "M2101Array",
    "Pattern",
    "PatternKind",
    "Tr36814Sector",
    "Tr38901Element",
    "TwoCutPattern",
    "antenna_direction_deg",
    "estimated_elevation_beamwidth_deg",
    "formula_pattern",
    "gain_table",
    "grid_pattern",
    "half_power_edges_deg",
    "mounted_gain_dbi",
    "two_cut_pattern",
]
