"""A small invented place with sectors over path fields, for the tests of coverage."""

from collections.abc import Sequence

import numpy as np

from planner.antenna import (
    GainTable,
    Isotropic,
    Pattern,
    Tr36814Sector,
    gain_table,
    mounted_gain_dbi,
)
from planner.coverage import (
    Coverage,
    combine,
)
from planner.geodesy import LocalFrame
from planner.network import Radio, Sector, Terminal
from planner.physics.link import (
    received_signal_dbm,
)
from planner.sweep import COMPUTED, PathField

ROWS, COLS, CELL_M = 60, 80, 50.0
TERMINAL = Terminal(antenna_height_m=5.0, antenna_gain_dbi=19.0, feeder_loss_db=0.5)
PANEL = Tr36814Sector(
    name="panel", gain_dbi=17.0, azimuth_beamwidth_deg=90.0, elevation_beamwidth_deg=8.0
)
WHIP = Isotropic(name="whip", gain_dbi=3.0)

LAYERS = {
    "received_signal_dbm": np.float32,
    "best_server": np.int16,
    "server_margin_db": np.float32,
    "fresnel_clearance_ratio": np.float32,
    "status": np.uint8,
}

Item = tuple[PathField, Sector, GainTable]


def radio(*, threshold_dbm: float = -75.0, power_dbm: float = 19.0) -> Radio:
    return Radio(
        id="access",
        frequency_mhz=5600.0,
        channel_width_mhz=20.0,
        transmit_power_dbm=power_dbm,
        feeder_loss_db=1.0,
        noise_figure_db=5.0,
        service_threshold_dbm=threshold_dbm,
    )


def field(
    *,
    row: float = 30.2,
    col: float = 41.7,
    window: tuple[int, int, int, int] = (0, ROWS, 0, COLS),
    loss_db: float | np.ndarray | None = None,
    status: np.ndarray | None = None,
    seed: int = 1,
) -> PathField:
    """A field over a window (row start, row stop, column start, column stop) of the grid."""
    rows, cols = window[1] - window[0], window[3] - window[2]
    rng = np.random.default_rng(seed)
    down, right = np.mgrid[window[0] : window[1], window[2] : window[3]]
    distance_m = CELL_M * np.hypot(down - row, right - col) + 1.0
    if loss_db is None:
        loss_db = 47.4 + 20.0 * np.log10(distance_m) + rng.exponential(6.0, (rows, cols))
    path_loss = np.broadcast_to(np.float32(loss_db), (rows, cols)).copy()
    elevation = np.degrees(np.arctan2(-25.0, distance_m)) + rng.normal(0.0, 0.5, (rows, cols))
    if status is None:
        status = np.zeros((rows, cols), dtype=np.uint8)
    path_loss[status != COMPUTED] = np.nan
    clearance = np.minimum(rng.normal(0.5, 1.0, (rows, cols)), 1.0)
    clearance[status != COMPUTED] = np.nan
    return PathField(
        row_start=window[0],
        col_start=window[2],
        mast_row=row,
        mast_col=col,
        mast_ground_m=100.0,
        frame=LocalFrame(
            latitude=-46.2,
            longitude=-121.4,
            easting_m=500_000.0,
            northing_m=4_880_000.0,
            scale=0.9996,
            scale_gradient_east_per_m=2e-9,
            scale_gradient_north_per_m=0.0,
            convergence_deg=1.5,
        ),
        cell_m=CELL_M,
        frequency_mhz=5600.0,
        antenna_height_m=30.0,
        receiver_height_m=5.0,
        radius_m=3000.0,
        path_loss_db=path_loss,
        departure_elevation_deg=elevation.astype(np.float32),
        fresnel_clearance_ratio=clearance.astype(np.float32),
        status=status,
    )


def item(
    path_field: PathField,
    *,
    azimuth_deg: float = 0.0,
    pattern: Pattern = PANEL,
    mechanical_downtilt_deg: float = 0.0,
    own_radio: Radio | None = None,
) -> Item:
    sector = Sector(
        id=f"s{azimuth_deg:g}",
        antenna=pattern.name,
        radio=own_radio or radio(),
        antenna_height_m=30.0,
        azimuth_deg=azimuth_deg,
        mechanical_downtilt_deg=mechanical_downtilt_deg,
    )
    table = gain_table(
        pattern, azimuth_deg=azimuth_deg, mechanical_downtilt_deg=mechanical_downtilt_deg
    )
    return path_field, sector, table


def covered(*items: Item, terminal: Terminal = TERMINAL) -> Coverage:
    return combine(ROWS, COLS, items, terminal)


def three_sectors(threshold_dbm: float = -75.0) -> list[Item]:
    """Two sectors on one mast, one on another; one window reaches over part of the grid only."""
    own = radio(threshold_dbm=threshold_dbm)
    here, there = field(), field(row=10.0, col=15.0, window=(3, 43, 5, 60), seed=2)
    return [
        item(here, azimuth_deg=20.0, mechanical_downtilt_deg=2.0, own_radio=own),
        item(here, azimuth_deg=200.0, own_radio=own),
        item(there, azimuth_deg=100.0, own_radio=own),
    ]


def assert_same(expected: Coverage, actual: Coverage) -> None:
    for layer in LAYERS:
        one, other = getattr(expected, layer), getattr(actual, layer)
        assert one.tobytes() == other.tobytes(), layer
    assert expected.counts == actual.counts


def assert_same_server(expected: Coverage, actual: Coverage) -> None:
    """The same server wherever neither rounding nor the threshold could decide."""
    decided = ~(expected.server_margin_db < 1e-3)
    decided &= ~(np.abs(expected.received_signal_dbm + 75.0) < 1e-3)
    assert decided.mean() > 0.99
    assert (expected.best_server == actual.best_server)[decided].all()


def by_plain_numpy(items: Sequence[Item]) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Signal, server and margin by the exact patterns and whole arrays, for one threshold."""
    signals = np.full((len(items), ROWS, COLS), -np.inf)
    for index, (path_field, sector, table) in enumerate(items):
        rows, cols = path_field.path_loss_db.shape
        gain_dbi = mounted_gain_dbi(
            PANEL,
            true_azimuth_deg=path_field.departure_azimuth_deg(),
            elevation_deg=path_field.departure_elevation_deg,
            azimuth_deg=sector.azimuth_deg,
            mechanical_downtilt_deg=table.mechanical_downtilt_deg,
            electrical_downtilt_deg=0.0,
        )
        signals[
            index,
            path_field.row_start : path_field.row_start + rows,
            path_field.col_start : path_field.col_start + cols,
        ] = received_signal_dbm(
            transmit_power_dbm=sector.radio.transmit_power_dbm,
            feeder_loss_db=sector.radio.feeder_loss_db,
            antenna_gain_dbi=gain_dbi,
            path_loss_db=path_field.path_loss_db,
            terminal_gain_dbi=TERMINAL.antenna_gain_dbi,
            terminal_feeder_loss_db=TERMINAL.feeder_loss_db,
        )
    signals = np.where(np.isnan(signals), -np.inf, signals)
    ranked = np.sort(signals, axis=0)[::-1]
    with np.errstate(invalid="ignore"):
        margin = ranked[0] - ranked[1]
    return ranked[0], signals.argmax(axis=0) + 1, margin
