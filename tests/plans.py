"""A plan that is right, for tests to read and to spoil."""

from pathlib import Path

import pytest

from planner.errors import PlanError
from planner.plan import read_plan

PLAN = """\
name = "West mast at the mill pond"

[terrain]
rasters = ["terrain.tif"]

[model]
radius_km = 10

[antenna.panel-90]
formula = "F.1336-5"
gain_dbi = 17
azimuth_beamwidth_deg = 90
elevation_beamwidth_deg = 7

[radio.access]
frequency_mhz = 5600
channel_width_mhz = 20
transmit_power_dbm = 19
feeder_loss_db = 1
noise_figure_db = 5
eirp_limit_dbm = 36

[terminal]
antenna_height_m = 5
antenna_gain_dbi = 19
service_threshold_dbm = -75

[[tower]]
id = "west"
latitude = -46.2041
longitude = -121.4122

[[tower.sector]]
id = "west-1"
antenna = "panel-90"
radio = "access"
antenna_height_m = 30
azimuth_deg = 20
mechanical_downtilt_deg = 2

[[tower.sector]]
id = "west-2"
antenna = "panel-90"
radio = "access"
antenna_height_m = 30
azimuth_deg = 140

[customers]
file = "customers.csv"
"""


def changed(*edits: tuple[str, str]) -> str:
    """The plan with each (text, other text) replaced; every text must occur."""
    text = PLAN
    for old, new in edits:
        assert old in text, old
        text = text.replace(old, new)
    return text


def write_plan(folder: Path, text: str = PLAN) -> Path:
    """The plan file in a folder that has the files it names; those are empty."""
    for name in ("terrain.tif", "customers.csv"):
        (folder / name).touch()
    path = folder / "plan.toml"
    path.write_text(text, encoding="utf-8")
    return path


def problems_of(path: Path) -> list[str]:
    """What reading a plan refuses it for, line by line."""
    with pytest.raises(PlanError) as caught:
        read_plan(path)
    return [str(problem) for problem in caught.value.problems]
