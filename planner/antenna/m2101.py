"""A beamforming array after ITU-R M.2101: rows and columns of equal elements."""

import math
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import ArrayLike, NDArray

from planner.antenna.beamwidth import half_power_beamwidth_deg
from planner.antenna.pattern import (
    Pattern,
    checked_angles,
    gain_notes,
    gain_problems,
    raise_problems,
    range_problems,
    with_notes,
)
from planner.antenna.tr36814 import relative_gain_db
from planner.errors import Problem
from planner.physics._jit import over_arrays, scalar

MOST_ELEMENTS = 64  # in a row or a column
SPACINGS_WAVELENGTHS = 0.1, 2.0
WIDEST_STEERING_DEG = 60.0
_CUT_STEP_DEG = 0.01


@scalar
def line_relative_gain_db_scalar(phase_rad: float, elements: float) -> float:
    """Gain of a line of elements relative to its peak, for the phase from one to the next."""
    half_sine = math.sin(0.5 * phase_rad)
    if abs(half_sine) < 1e-9:  # the beam itself, or a grating lobe as strong
        return 0.0
    power = (math.sin(0.5 * elements * phase_rad) / (elements * half_sine)) ** 2
    if power < 1e-20:
        power = 1e-20
    return 10.0 * math.log10(power)


_line_relative_gain_db = over_arrays(line_relative_gain_db_scalar)


@dataclass(frozen=True, slots=True, kw_only=True)
class M2101Array(Pattern):
    r"""Array whose beam is steered by the phases of its elements.

    ``gain_dbi`` is the gain of the whole array, unsteered: the element's plus
    10 log(rows * columns). Steered away, the beam loses what the element has less there.

    Notes
    -----
    .. math::

        A = A_E(\varphi, \theta) + 10 \log_{10} \Bigl| \sum_{m=1}^{N_H} \sum_{n=1}^{N_V}
        w_{n,m} v_{n,m} \Bigr|^2 \\
        v_{n,m} = \exp 2 \pi j ((n-1) d_V/\lambda \cos\theta
        + (m-1) d_H/\lambda \sin\theta \sin\varphi) \\
        w_{n,m} = (N_H N_V)^{-1/2} \exp 2 \pi j ((n-1) d_V/\lambda \sin\theta_{etilt}
        - (m-1) d_H/\lambda \cos\theta_{etilt} \sin\varphi_{escan})

    theta is the zenith angle, theta_etilt the electrical downtilt and phi_escan the beam's azimuth
    offset; A_E is the element of :class:`Tr38901Element`. Both sums are geometric series and are
    evaluated in closed form. The correlation of the elements is 1, so nulls are perfect (here
    -200 dB). The formula names no frequency range. Its element is not scaled for the power that
    the array radiates, so the gain can exceed the directivity by a few dB.

    References
    ----------
    ITU-R M.2101-0 (2017), Annex 1, section 5, Tables 3 and 4, recalled from memory.
    """

    azimuth_beamwidth_deg: float = field(init=False, default=math.nan)
    elevation_beamwidth_deg: float = field(init=False, default=math.nan)
    rows: int  # N_V, one above the other
    columns: int  # N_H, side by side
    row_spacing_wavelengths: float = 0.5
    column_spacing_wavelengths: float = 0.5
    beam_azimuth_offset_deg: float = 0.0  # of the beam from the boresight, clockwise
    element_azimuth_beamwidth_deg: float = 65.0
    element_elevation_beamwidth_deg: float = 65.0
    front_to_back_db: float = 30.0  # A_m of the element
    side_lobe_db: float = 30.0  # SLA_V of the element

    def __post_init__(self) -> None:
        raise_problems(self._problems())
        element_dbi = self.gain_dbi - 10.0 * math.log10(self.rows * self.columns)
        beams = self.element_azimuth_beamwidth_deg, self.element_elevation_beamwidth_deg
        notes = tuple(f"Element: {note}" for note in gain_notes(element_dbi, *beams))
        object.__setattr__(self, "notes", with_notes(self.notes, notes))
        around = np.linspace(-180.0, 180.0, round(360.0 / _CUT_STEP_DEG) + 1)
        upright = np.linspace(-90.0, 90.0, round(180.0 / _CUT_STEP_DEG) + 1)
        across, along = self.gain(around, 0.0), self.gain(self.beam_azimuth_offset_deg, upright)
        for key, width_deg in (
            ("azimuth_beamwidth_deg", half_power_beamwidth_deg(around, across, around=True)),
            ("elevation_beamwidth_deg", half_power_beamwidth_deg(upright, along, around=False)),
        ):
            object.__setattr__(self, key, width_deg)

    def _problems(self) -> list[Problem]:
        problems = gain_problems(self.name, self.gain_dbi)
        for key in ("rows", "columns"):
            number = getattr(self, key)
            if not (isinstance(number, int) and 1 <= number <= MOST_ELEMENTS):
                where = f"antenna.{self.name}.{key}"
                allowed = f"a whole number, 1 to {MOST_ELEMENTS}"
                problems.append(Problem(where=where, found=f"{number!r}", allowed=allowed))
        for key, lowest, highest, unit, below in (
            ("row_spacing_wavelengths", *SPACINGS_WAVELENGTHS, "", False),
            ("column_spacing_wavelengths", *SPACINGS_WAVELENGTHS, "", False),
            ("beam_azimuth_offset_deg", -WIDEST_STEERING_DEG, WIDEST_STEERING_DEG, "deg", False),
            ("element_azimuth_beamwidth_deg", 1.0, 360.0, "deg", True),
            ("element_elevation_beamwidth_deg", 0.5, 180.0, "deg", True),
            ("front_to_back_db", 3.0, 100.0, "dB", False),
            ("side_lobe_db", 3.0, 100.0, "dB", False),
        ):
            problems += range_problems(
                self.name, key, getattr(self, key), lowest, highest, unit=unit, below=below
            )
        return problems

    def gain(
        self,
        azimuth_offset_deg: ArrayLike,
        elevation_deg: ArrayLike,
        *,
        electrical_downtilt_deg: float | None = None,
    ) -> NDArray[np.float64]:
        """Gain towards a direction: see :meth:`Pattern.gain`."""
        tilt_rad = math.radians(self.steering_deg(electrical_downtilt_deg))
        azimuth_deg, elevation = checked_angles(azimuth_offset_deg, elevation_deg)
        turn = 2.0 * math.pi
        elevation_rad = np.radians(elevation)
        beam_sine = math.cos(tilt_rad) * math.sin(math.radians(self.beam_azimuth_offset_deg))
        sideways = np.cos(elevation_rad) * np.sin(np.radians(azimuth_deg)) - beam_sine
        upwards = np.sin(elevation_rad) + math.sin(tilt_rad)
        element_db = relative_gain_db(
            azimuth_deg,
            elevation,
            self.element_azimuth_beamwidth_deg,
            self.element_elevation_beamwidth_deg,
            self.front_to_back_db,
            self.side_lobe_db,
        )
        rows_db = _line_relative_gain_db(turn * self.row_spacing_wavelengths * upwards, self.rows)
        columns_db = _line_relative_gain_db(
            turn * self.column_spacing_wavelengths * sideways, self.columns
        )
        return np.asarray(self.gain_dbi + element_db + rows_db + columns_db)
