"""The antenna that is asked about: from a pattern file, a formula, or a sector of a plan."""

import os
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from pathlib import Path
from typing import Annotated, Any

from pydantic import Field, TypeAdapter, ValidationError
from pydantic.fields import FieldInfo

from planner.antenna import FORMULAS, Pattern, formula_pattern
from planner.errors import InputError, PatternError, Problem
from planner.io.pattern_files import read_pattern
from planner.network import Sector
from planner.plan.checks import NOT_OF_THE_PATTERN
from planner.plan.read import Plan, read_plan
from planner.plan.schema import AntennaTable, RadioTable, SectorTable
from planner.plan.shown import nearest, shown

_VSWR = Field(ge=1.0, le=100.0, allow_inf_nan=False, description="1 to 100")
_RADIO_KEYS = ("frequency_mhz", "transmit_power_dbm", "feeder_loss_db")
_OF_THE_ANTENNA = {
    key: field for key, field in AntennaTable.model_fields.items() if key not in ("formula", "file")
}
# Every key that --set takes; all but vswr are named as in the plan file and have its ranges.
SETTABLE: Mapping[str, FieldInfo] = {
    **_OF_THE_ANTENNA,
    **{key: RadioTable.model_fields[key] for key in _RADIO_KEYS},
    "electrical_downtilt_deg": SectorTable.model_fields["electrical_downtilt_deg"],
    "vswr": FieldInfo.from_annotated_attribute(float, _VSWR),
}
_BESIDE_A_PLAN = ("vswr",)  # what a plan does not say


@dataclass(frozen=True, slots=True, kw_only=True)
class MountedAntenna:
    """An antenna of a mast with its power; what is not known is None."""

    label: str
    pattern: Pattern
    azimuth_deg: float | None  # true; None: no direction is given, the boresight counts as 0
    mechanical_downtilt_deg: float = 0.0
    electrical_downtilt_deg: float = 0.0
    frequency_mhz: float | None
    transmit_power_dbm: float | None
    feeder_loss_db: float = 0.0
    largest_dimension_m: float | None

    @property
    def power_dbm(self) -> float | None:
        """Into the antenna. [dBm]"""
        if self.transmit_power_dbm is None:
            return None
        return self.transmit_power_dbm - self.feeder_loss_db


@dataclass(frozen=True, slots=True, kw_only=True)
class StudiedAntenna:
    """One antenna and what is known of its surroundings."""

    source: str  # what it was made from, in words
    antenna: MountedAntenna
    mast: tuple[MountedAntenna, ...]  # all antennas of the mast, this one among them
    antenna_height_m: float | None
    vswr: float | None


def settings_from(pairs: Sequence[str]) -> dict[str, Any]:
    """Values by key from texts KEY=VALUE.

    Raises
    ------
    InputError
        With every key that is unknown or given twice and every value out of its range.
    """
    problems, settings = [], {}
    for pair in pairs:
        key, _, text = pair.partition("=")
        key = key.strip()
        field = SETTABLE.get(key)
        if field is None:
            match = nearest(key, SETTABLE)
            advice = "" if match is None else f"Nearest known key: {match}"
            allowed = ", ".join(SETTABLE)
            problems.append(
                Problem(where="--set", found=shown(key), allowed=allowed, advice=advice)
            )
            continue
        where = f"--set {key}"
        if key in settings:
            problems.append(Problem(where=where, found="two values", allowed="one"))
        kind: Any = Annotated[field.annotation, *field.metadata]
        try:
            settings[key] = TypeAdapter(kind).validate_python(text.strip())
        except ValidationError:
            allowed = field.description or ""
            problems.append(Problem(where=where, found=shown(text), allowed=allowed))
    if problems:
        raise InputError(problems)
    return settings


def studied_antenna(
    source: str,
    settings: Mapping[str, Any],
    *,
    sector_id: str | None = None,
    antenna_height_m: float | None = None,
    mechanical_downtilt_deg: float | None = None,
) -> StudiedAntenna:
    """The antenna of a pattern file, of a formula's name or of a sector of a plan (.toml).

    ``settings`` are those of :func:`settings_from`. Height and tilt given here outrank a plan's.

    Raises
    ------
    InputError
        With every problem found.
    """
    if source.lower().endswith(".toml"):
        study = _from_plan(Path(source), settings, sector_id)
    else:
        if sector_id is not None:
            raise InputError(
                Problem(where="--sector", found=shown(sector_id), allowed="only beside a plan file")
            )
        study = _from_settings(source, settings)
    if antenna_height_m is not None:
        study = replace(study, antenna_height_m=antenna_height_m)
    if mechanical_downtilt_deg is not None:
        tilted = replace(study.antenna, mechanical_downtilt_deg=mechanical_downtilt_deg)
        mast = tuple(tilted if one is study.antenna else one for one in study.mast)
        study = replace(study, antenna=tilted, mast=mast)
    return study


def _from_settings(source: str, settings: Mapping[str, Any]) -> StudiedAntenna:
    formula = {name.lower(): name for name in FORMULAS}.get(source.lower())
    own = {
        key: value
        for key, value in settings.items()
        if key in _OF_THE_ANTENNA and key not in NOT_OF_THE_PATTERN
    }
    frequency_mhz = settings.get("frequency_mhz")
    problems = []
    if formula is not None and "gain_dbi" not in own:
        problems.append(_missing("gain_dbi", "gain_dbi=17"))
    if formula is not None and frequency_mhz is None:
        problems.append(_missing("frequency_mhz", "frequency_mhz=5600"))
    if formula is None and not os.path.exists(source):  # also False for names no file can have
        allowed = "a pattern file, a plan file (.toml) or a formula: " + ", ".join(FORMULAS)
        problems.append(Problem(where=source, found="no such file", allowed=allowed))
    if formula is None:
        problems += [
            Problem(
                where=f"--set {key}",
                found=shown(value),
                allowed=f"no {key} beside a pattern file, which says it itself",
            )
            for key, value in own.items()
            if key != "gain_dbi"
        ]
    if problems:
        raise InputError(problems)
    if formula is not None:
        name = formula
        pattern = _formula_pattern(formula, settings["frequency_mhz"], own)
    else:
        name = Path(source).name
        pattern = read_pattern(
            Path(source), name=name, gain_dbi=own.get("gain_dbi"), frequency_mhz=frequency_mhz
        )
    antenna = MountedAntenna(
        label=name,
        pattern=pattern,
        azimuth_deg=None,
        electrical_downtilt_deg=settings.get(
            "electrical_downtilt_deg", pattern.electrical_downtilt_deg
        ),
        frequency_mhz=frequency_mhz,
        transmit_power_dbm=settings.get("transmit_power_dbm"),
        feeder_loss_db=settings.get("feeder_loss_db", 0.0),
        largest_dimension_m=settings.get("largest_dimension_m"),
    )
    return StudiedAntenna(
        source=f"formula {formula}" if formula is not None else f"file {name}",
        antenna=antenna,
        mast=(antenna,),
        antenna_height_m=None,
        vswr=settings.get("vswr"),
    )


def _formula_pattern(formula: str, frequency_mhz: float, own: Mapping[str, Any]) -> Pattern:
    try:
        return formula_pattern(formula, formula, frequency_mhz=frequency_mhz, **own)
    except PatternError as error:
        raise InputError(
            replace(problem, where=f"--set {problem.where.removeprefix(f'antenna.{formula}.')}")
            for problem in error.problems
        ) from None


def _missing(key: str, example: str) -> Problem:
    allowed = f"{SETTABLE[key].description}: --set {example}"
    return Problem(where=f"--set {key}", found="nothing", allowed=allowed)


def _from_plan(path: Path, settings: Mapping[str, Any], sector_id: str | None) -> StudiedAntenna:
    strange = [key for key in settings if key not in _BESIDE_A_PLAN]
    if strange:
        raise InputError(
            Problem(
                where=f"--set {key}",
                found=shown(settings[key]),
                allowed=f"only {', '.join(_BESIDE_A_PLAN)} beside a plan, which says the rest",
            )
            for key in strange
        )
    plan = read_plan(path)
    known = [sector.id for sector in plan.sectors]
    if sector_id not in known:
        found = "no sector named" if sector_id is None else f"no sector named {shown(sector_id)}"
        raise InputError(
            Problem(where="--sector", found=found, allowed=", ".join(known),
                    advice="Only sectors that are on can be looked at")
        )  # fmt: skip
    for tower in plan.towers:
        for at, sector in enumerate(tower.sectors):
            if sector.id == sector_id:
                mast = tuple(_mounted(plan, one) for one in tower.sectors)
                return StudiedAntenna(
                    source=f"sector {sector.id} of {plan.path.name}, antenna {sector.antenna}",
                    antenna=mast[at],
                    mast=mast,
                    antenna_height_m=sector.antenna_height_m,
                    vswr=settings.get("vswr"),
                )
    raise AssertionError(f"sector {sector_id} is in the plan but on no tower")


def _mounted(plan: Plan, sector: Sector) -> MountedAntenna:
    return MountedAntenna(
        label=sector.id,
        pattern=plan.patterns[sector.id],
        azimuth_deg=sector.azimuth_deg,
        mechanical_downtilt_deg=sector.mechanical_downtilt_deg,
        electrical_downtilt_deg=sector.electrical_downtilt_deg,
        frequency_mhz=sector.radio.frequency_mhz,
        transmit_power_dbm=sector.radio.transmit_power_dbm,
        feeder_loss_db=sector.radio.feeder_loss_db,
        largest_dimension_m=sector.largest_dimension_m,
    )
