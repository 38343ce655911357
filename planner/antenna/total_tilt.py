"""A pattern whose electrical tilt is the antenna's whole tilt, not one on top of its file's."""

from dataclasses import dataclass, fields, replace

import numpy as np
from numpy.typing import ArrayLike, NDArray

from planner.antenna.pattern import Pattern, with_notes


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class TotalTiltPattern(Pattern):
    """Made by :func:`with_total_tilt`: ``electrical_downtilt_deg`` counts from no tilt at all.

    At the tilt that the levels carry they are used as they are; at another the beam is bent by the
    difference.
    """

    carrying: Pattern

    def gain(
        self,
        azimuth_offset_deg: ArrayLike,
        elevation_deg: ArrayLike,
        *,
        electrical_downtilt_deg: float = 0.0,
    ) -> NDArray[np.float64]:
        """Gain towards a direction: see :meth:`Pattern.gain`."""
        return self.carrying.gain(
            azimuth_offset_deg,
            elevation_deg,
            electrical_downtilt_deg=electrical_downtilt_deg - self.carrying.carried_downtilt_deg,
        )


def with_total_tilt(pattern: Pattern) -> Pattern:
    """The pattern such that its carried tilt is not applied twice; itself where it carries none."""
    if pattern.carried_downtilt_deg == 0.0 or isinstance(pattern, TotalTiltPattern):
        return pattern
    note = (
        f"Levels measured at {pattern.carried_downtilt_deg:g} degrees of electrical downtilt: they "
        "are used as they are at that tilt, and bent by the difference at another."
    )
    pattern = replace(pattern, notes=with_notes(pattern.notes, (note,)))
    common = {field.name: getattr(pattern, field.name) for field in fields(Pattern)}
    return TotalTiltPattern(carrying=pattern, **common)
