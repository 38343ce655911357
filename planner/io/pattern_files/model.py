"""What a pattern file holds, whichever form it has: header, frequencies, cuts.

Numbers stay in the units of the file, so that a file which is written again reads back the same;
``build`` turns them into dBi.
"""

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Literal

import numpy as np
from numpy.typing import NDArray

FileForm = Literal["WG16.99.050", "WG16.89.003", "CSV"]
# H, V: the horizontal and the vertical plane. AZ: the cone about the vertical axis through the
# peak. EL: the vertical plane through the peak. SPHERE: one of many vertical half planes.
CutName = Literal["H", "V", "AZ", "EL", "SPHERE"]
GainUnit = Literal["DBI", "DBD", "LPI"]
LevelUnit = Literal["DBR", "DBI", "DBD", "LPR", "LPI"]
FileKind = Literal["typical", "envelope"]

# A half-wave dipole over isotropic, rounded as the trade has it; 10 log 1.641 = 2.151.
DIPOLE_GAIN_DBI = 2.15


@dataclass(frozen=True, slots=True, kw_only=True)
class PatternHeader:
    """Everything that a file says beside its points; "" or None where it says nothing.

    Gains are in ``gain_unit``.
    """

    standard: str = ""  # as the file names it
    standard_date: str = ""
    comments: tuple[str, ...] = ()
    descriptions: tuple[str, ...] = ()
    user_fields: tuple[str, ...] = ()
    manufacturer: str = ""
    model: str = ""
    pattern_id: str = ""
    reverse_pattern_id: str = ""  # older form only
    file_number: str = ""
    origin: str = ""
    registration_id: str = ""  # older form only: given by the authority
    data_date: str = ""
    lowest_frequency_mhz: float | None = None
    highest_frequency_mhz: float | None = None
    gain_unit: GainUnit | None = None  # None: the file does not say
    level_unit: LevelUnit = "DBR"
    low_band_gain: float | None = None
    mid_band_gain: float | None = None
    high_band_gain: float | None = None
    azimuth_beamwidth_deg: float | None = None  # stated, not measured
    elevation_beamwidth_deg: float | None = None
    connector: str = ""
    vswr: float | None = None
    front_to_back_db: float | None = None
    highest_power_w: float | None = None
    port_isolation_db: float | None = None
    electrical_downtilt_deg: float | None = None  # positive downwards; the points hold it
    electrical_downtilt_tolerance_deg: float | None = None
    length_m: float | None = None
    width_m: float | None = None
    depth_m: float | None = None
    weight_kg: float | None = None
    kind: FileKind | None = None


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class PatternCut:
    """Points of one cut, as the file has them; arrays of n, not to be written to."""

    name: CutName
    azimuth_deg: float | None = None  # of a SPHERE cut
    polarization: str = ""  # antenna's and illumination's: "V/V"; "" where the file does not say
    angle_deg: NDArray[np.float64]  # H, AZ: clockwise from above. Else elevation, positive up
    level: NDArray[np.float64]  # in the header's level_unit
    phase_deg: NDArray[np.float64] | None = None  # kept for writing, never used
    lines: NDArray[np.int64]  # of the file
    first_line: int  # where the cut begins

    def __post_init__(self) -> None:
        for array in (self.angle_deg, self.level, self.phase_deg, self.lines):
            if array is not None:
                array.setflags(write=False)

    @property
    def is_copolar(self) -> bool:
        """Whether antenna and illumination share their polarization, or nothing is said."""
        first, _, second = self.polarization.partition("/")
        return first == second or not second


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class FrequencyBlock:
    """The cuts at one frequency."""

    frequency_mhz: float | None  # None: the file does not say
    cuts: tuple[PatternCut, ...]
    first_line: int


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class PatternFile:
    """A pattern file that has been read and in which nothing is wrong."""

    file_name: str
    form: FileForm
    header: PatternHeader
    blocks: tuple[FrequencyBlock, ...]  # at least one
    header_lines: Mapping[str, int]  # by attribute, where the file has a line for it
    warnings: tuple[str, ...]  # what was read although it is not as it should be, with its line
