"""The records of the open standard: six characters, what they mean, what may stand in them.

Recalled from memory and public summaries of NSMA WG16.99.050 (1999), issued also as TIA/EIA-804-B;
docs/pattern-files.md has the same table in words.
"""

import re
from dataclasses import dataclass
from typing import Literal

REVISION = "NSMA WG16.99.050"
REVISION_DATE = "19990520"
REVISION_NAMES = ("WG16.99.050", "TIA/EIA-804-B")  # either may stand in the first record


@dataclass(frozen=True, slots=True, kw_only=True)
class Tag:
    """One record of the header."""

    attribute: str  # of PatternHeader
    content: Literal["text", "date", "number"] = "text"
    lowest: float = 0.0
    highest: float = 0.0
    unit: str = ""


def _number(attribute: str, lowest: float, highest: float, unit: str = "") -> Tag:
    return Tag(attribute=attribute, content="number", lowest=lowest, highest=highest, unit=unit)


# In the order in which they are written. Numbered ones are in NUMBERED, units in the reader.
HEADER_TAGS: dict[str, Tag] = {
    "REVNUM": Tag(attribute="standard"),
    "REVDAT": Tag(attribute="standard_date", content="date"),
    "ANTMAN": Tag(attribute="manufacturer"),
    "MODNUM": Tag(attribute="model"),
    "PATNUM": Tag(attribute="pattern_id"),
    "FILNUM": Tag(attribute="file_number"),
    "FEDORN": Tag(attribute="origin"),
    "DTDATA": Tag(attribute="data_date", content="date"),
    "LOWFRQ": _number("lowest_frequency_mhz", 1.0, 1_000_000.0, "MHz"),
    "HGHFRQ": _number("highest_frequency_mhz", 1.0, 1_000_000.0, "MHz"),
    "LWGAIN": _number("low_band_gain", -60.0, 1_000_000.0),
    "MDGAIN": _number("mid_band_gain", -60.0, 1_000_000.0),
    "HGGAIN": _number("high_band_gain", -60.0, 1_000_000.0),
    "AZWIDT": _number("azimuth_beamwidth_deg", 0.01, 360.0, "deg"),
    "ELWIDT": _number("elevation_beamwidth_deg", 0.01, 360.0, "deg"),
    "CONTYP": Tag(attribute="connector"),
    "ATVSWR": _number("vswr", 1.0, 100.0),
    "FRTOBA": _number("front_to_back_db", 0.0, 200.0, "dB"),
    "ELTILT": _number("electrical_downtilt_deg", -45.0, 45.0, "deg, positive downwards"),
    "MAXPOW": _number("highest_power_w", 0.0, 1e9, "W"),
    "POTOPO": _number("port_isolation_db", 0.0, 200.0, "dB"),
    "ANTLEN": _number("length_m", 0.0, 1000.0, "m"),
    "ANTWID": _number("width_m", 0.0, 1000.0, "m"),
    "ANTDEP": _number("depth_m", 0.0, 1000.0, "m"),
    "ANTWGT": _number("weight_kg", 0.0, 1e6, "kg"),
}
# May stand several times, mostly with a number at the end: COMNT1, COMNT2
NUMBERED = {"COMNT": "comments", "DESCR": "descriptions", "FIELD": "user_fields"}
BLOCK_TAGS = ("NOFREQ", "PATFRE", "NUMCUT", "PATCUT", "POLARI", "NUPOIN", "FSTLST")
GAIN_UNITS = ("DBI", "DBD", "LPI")
LEVEL_UNITS = ("DBR", "DBI", "DBD", "LPR", "LPI")
# Gain and levels over different references, or one in dB and one not, are told as mixed units.
UNIT_PAIRS = (
    ("DBI", "DBR"), ("DBD", "DBR"), ("DBI", "DBI"), ("DBD", "DBD"), ("LPI", "LPR"), ("LPI", "LPI"),
)  # fmt: skip
UNIT_WORDS = {"DBI": "DBI", "DBD": "DBD", "DB": ""}  # behind a number

_NUMBERED = re.compile(r"(COMNT|DESCR|FIELD)\d{0,2}")


def numbered_attribute(tag: str) -> str | None:
    """The header's attribute for COMNT1 and the like; None for other tags."""
    match = _NUMBERED.fullmatch(tag)
    return None if match is None else NUMBERED[match.group(1)]
