"""Frozen data of a network: radio, sector, tower, subscriber terminal, customer.

Nothing here computes coverage; these objects say what stands where and how it is set.
"""

from dataclasses import dataclass


@dataclass(frozen=True, slots=True, kw_only=True)
class Radio:
    """Radio equipment of a sector, as it stands at the mast."""

    id: str
    frequency_mhz: float
    channel_width_mhz: float
    transmit_power_dbm: float
    feeder_loss_db: float = 0.0
    noise_figure_db: float
    eirp_limit_dbm: float | None = None  # None: the plan states no limit
    service_threshold_dbm: float  # weakest received signal that counts as service


@dataclass(frozen=True, slots=True, kw_only=True)
class Terminal:
    """What stands at a customer's house."""

    antenna_height_m: float  # above ground
    antenna_gain_dbi: float
    feeder_loss_db: float = 0.0


@dataclass(frozen=True, slots=True, kw_only=True)
class Sector:
    """One sector antenna on a tower and its aim."""

    id: str
    antenna: str  # name of the antenna in the plan
    radio: Radio
    antenna_height_m: float  # above ground, centre of radiation
    azimuth_deg: float  # true north, 0 <= a < 360
    mechanical_downtilt_deg: float = 0.0  # positive below the horizon
    electrical_downtilt_deg: float = 0.0  # positive below the horizon
    largest_dimension_m: float | None = None  # of the antenna; None: the plan does not say


@dataclass(frozen=True, slots=True, kw_only=True)
class Tower:
    """A mast with the sectors that are switched on."""

    id: str
    latitude: float  # WGS 84
    longitude: float  # WGS 84
    sectors: tuple[Sector, ...]


@dataclass(frozen=True, slots=True, kw_only=True)
class Customer:
    """One row of the customer list, as far as it could be read."""

    row: int  # line of the file, the header being line 1
    id: str
    address: str
    latitude: float  # WGS 84; NaN where it could not be read
    longitude: float  # WGS 84; NaN where it could not be read
    antenna_height_m: float | None = None  # above ground; None: the plan's terminal height
    trouble: str = ""  # why the row cannot be computed; empty when it can
    extra: tuple[tuple[str, str], ...] = ()  # columns that are carried through untouched
