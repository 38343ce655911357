"""Antenna patterns in files: the open standard WG16.99.050, its older fixed form, and CSV.

What is read and written, and by which rule, is in docs/pattern-files.md.
"""

from planner.io.pattern_files.build import pattern_of
from planner.io.pattern_files.model import (
    FrequencyBlock,
    PatternCut,
    PatternFile,
    PatternHeader,
)
from planner.io.pattern_files.read import read_pattern, read_pattern_file
from planner.io.pattern_files.write import write_csv, write_fixed_form, write_standard

__all__ = [
    "FrequencyBlock",
    "PatternCut",
    "PatternFile",
    "PatternHeader",
    "pattern_of",
    "read_pattern",
    "read_pattern_file",
    "write_csv",
    "write_fixed_form",
    "write_standard",
]
