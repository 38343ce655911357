"""What can be wrong, as one tree.

::

    PlannerError                  root of everything this package raises on purpose
    ├── InputError (ValueError)   an input is wrong; carries every problem found, exit code 1
    │   ├── PlanError             the plan file
    │   ├── TerrainError          a raster, or a place that the rasters do not cover
    │   ├── PatternError          an antenna pattern
    │   └── CustomersError        the customer list as a whole
    └── OutputError (OSError)     a result could not be written, exit code 1

Errors do not print. A message says where, what was found, what is allowed and what to do.
"""

from collections.abc import Iterable
from dataclasses import dataclass


@dataclass(frozen=True, slots=True, kw_only=True)
class Problem:
    """One thing that is wrong with an input."""

    where: str  # file, then row, key or place: "plan.toml: tower.0.latitude"
    found: str  # what stands there: "512.4", "no such file"
    allowed: str = ""  # what may stand there: "-90 to 90"
    advice: str = ""  # what to do about it

    def __str__(self) -> str:
        text = f"{self.where}: found {self.found}"
        if self.allowed:
            text += f"; allowed: {self.allowed}"
        if self.advice:
            text += f". {self.advice}"
        return text


class PlannerError(Exception):
    """Root of all errors that this package raises on purpose."""


class InputError(PlannerError, ValueError):
    """One or more inputs are wrong. ``problems`` holds every one of them."""

    def __init__(self, problems: Problem | Iterable[Problem]) -> None:
        found = (problems,) if isinstance(problems, Problem) else tuple(problems)
        self.problems: tuple[Problem, ...] = found
        super().__init__("\n".join(str(problem) for problem in found))


class PlanError(InputError):
    """The plan file is wrong."""


class TerrainError(InputError):
    """A raster is wrong or does not cover what is asked of it."""


class PatternError(InputError):
    """An antenna pattern is wrong."""


class CustomersError(InputError):
    """The customer list as a whole cannot be used."""


class OutputError(PlannerError, OSError):
    """A result could not be written."""
