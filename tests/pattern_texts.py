"""Texts of pattern files for tests, and the levels that they hold."""

import math
from pathlib import Path

import pytest

from planner.errors import PatternError
from planner.io.pattern_files import read_pattern_file

ANGLES = tuple(range(-180, 180, 10))
ELEVATIONS = tuple(range(-90, 91, 5))


def across_db(angle: float) -> float:
    """A 90 degree sector that is 25 dB down behind."""
    return round(-min(12.0 * (angle / 90.0) ** 2, 25.0), 3) + 0.0


def up_db(elevation: float, tilt: float = 0.0) -> float:
    """A beam 30 degrees high at ``tilt`` below the horizon."""
    return round(-min(12.0 * ((elevation + tilt) / 30.0) ** 2, 30.0), 3) + 0.0


HEADER = (
    "REVNUM:,NSMA WG16.99.050",
    "REVDAT:,19990520",
    "COMNT1:,an invented antenna",
    "ANTMAN:,Nobody",
    "MODNUM:,SEC-90",
    "PATNUM:,7",
    "DTDATA:,20240229",
    "LOWFRQ:,5150",
    "HGHFRQ:,5850",
    "GUNITS:,DBI/DBR",
    "MDGAIN:,11.5",
    "AZWIDT:,90",
    "ELWIDT:,30",
    "ATVSWR:,1.5",
    "FRTOBA:,25",
    "ELTILT:,0",
    "ANTLEN:,0.6",
    "PATTYP:,typical",
    "NOFREQ:,1",
)


def cut(name: str, levels: dict[float, float], polarization: str = "V/V") -> list[str]:
    """Records and points of one cut."""
    angles = list(levels)
    return [
        f"PATCUT:,{name}",
        f"POLARI:,{polarization}",
        f"NUPOIN:,{len(angles)}",
        f"FSTLST:,{angles[0]:g},{angles[-1]:g}",
        *(f"{angle:g},{level:g}" for angle, level in levels.items()),
    ]


def block(frequency: float = 5500, tilt: float = 0.0, names: str = "AZ EL") -> list[str]:
    """A frequency with two cuts."""
    horizontal, vertical = names.split()
    return [
        f"PATFRE:,{frequency:g}",
        "NUMCUT:,2",
        *cut(horizontal, {angle: across_db(angle) for angle in ANGLES}),
        *cut(vertical, {elevation: up_db(elevation, tilt) for elevation in ELEVATIONS}),
    ]


def standard(*blocks: list[str], **changed: str) -> list[str]:
    """A whole file; ``changed`` are header values by tag, "" leaves one out."""
    blocks = blocks or (block(),)
    header = []
    for record in HEADER:
        tag = record.split(":")[0]
        value = changed.pop(tag, record.split(",", 1)[1])
        if tag == "NOFREQ" and value == "1":
            value = str(len(blocks))
        if value:
            header.append(f"{tag}:,{value}")
    header += [f"{tag}:,{value}" for tag, value in changed.items()]
    return [*header, *(line for one in blocks for line in one), "ENDFIL:,EOF"]


def beam_db(azimuth: float, elevation: float) -> float:
    """A beam to the boresight, 20 dB down behind, that falls faster upwards than downwards."""
    cosine = math.cos(math.radians(azimuth)) * math.cos(math.radians(elevation))
    lopsided = 1.0 + 0.3 * math.sin(math.radians(elevation))
    return round(10.0 * (cosine - 1.0) * lopsided, 3) + 0.0


def fixed(**changed: list[str]) -> list[str]:
    """The older form; ``changed`` replaces the header or the cuts."""
    header = changed.get(
        "header",
        [
            "Nobody", "SEC-90", "an invented antenna", "NONE", "NONE", "02/29/2024", "7",
            "5150-5850", "11.5", "90",
        ],
    )  # fmt: skip
    cuts = changed.get("cuts") or [
        f"VV {len(ANGLES)}",
        *(f"{angle:>7g}{across_db(angle):>7g}" for angle in ANGLES),
        f"ELVV {len(ELEVATIONS)}",
        *(f"{elevation:>7g}{up_db(elevation):>7g}" for elevation in ELEVATIONS),
    ]
    return [*header, *cuts]


def written(folder: Path, lines: list[str], name: str = "panel.txt", end: str = "\r\n") -> Path:
    """The file of these lines."""
    path = folder / name
    path.write_bytes((end.join(lines) + end).encode())
    return path


def problems(path: Path) -> list[str]:
    """What reading a file tells."""
    with pytest.raises(PatternError) as caught:
        read_pattern_file(path)
    return [str(problem) for problem in caught.value.problems]


def line_of(lines: list[str], start: str, after: int = 0) -> int:
    """Line number of the first line that begins so."""
    return next(n for n, line in enumerate(lines, 1) if n > after and line.startswith(start))
