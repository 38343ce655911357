"""Sectors over path fields: the layers of a small invented place, and laws that must hold."""

import math
from collections.abc import Sequence
from dataclasses import replace
from itertools import pairwise
from pathlib import Path

import numba
import numpy as np
import pytest
from numba.core.dispatcher import Dispatcher

from planner.antenna import (
    GainTable,
    Isotropic,
    Pattern,
    Tr36814Sector,
    gain_table,
    mounted_gain_dbi,
)
from planner.coverage import (
    SIGHT_BLOCKED,
    SIGHT_CLEAR,
    SIGHT_FULLY_FREE,
    SIGHT_MOSTLY_FREE,
    SIGHT_UNKNOWN,
    CellCounts,
    Coverage,
    combine,
    kernels,
    layers,
    line_of_sight_class,
)
from planner.geodesy import LocalFrame
from planner.network import Radio, Sector, Terminal
from planner.physics.link import (
    eirp_dbm_scalar,
    received_signal_dbm,
    received_signal_dbm_scalar,
)
from planner.sweep import COMPUTED, CROSSES_HOLE, NO_DATA, OUT_OF_RANGE, PathField

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


def test_layers_against_plain_numpy() -> None:
    """The kernel agrees with the exact patterns and whole-array arithmetic."""
    items = three_sectors()
    actual = covered(*items)
    signal, server, margin = by_plain_numpy(items)
    np.testing.assert_allclose(signal, actual.received_signal_dbm, rtol=0, atol=0.06)
    served = actual.best_server > 0
    assert (served == (actual.received_signal_dbm >= -75.0)).all()
    assert 0.1 < served.mean() < 0.95
    clear = served & (margin > 0.12)
    assert clear.sum() > 1000
    assert (server == actual.best_server)[clear].all()
    np.testing.assert_allclose(margin, actual.server_margin_db, rtol=0, atol=0.12)


def test_one_cell_by_hand() -> None:
    """19 dBm - 1 dB + 3 dBi - 120 dB + 19 dBi - 0.5 dB are -80.5 dBm."""
    actual = covered(item(field(loss_db=120.0), pattern=WHIP))
    assert (actual.received_signal_dbm == np.float32(-80.5)).all()
    assert (actual.best_server == 0).all()
    assert np.isnan(actual.server_margin_db).all()


def test_azimuth_is_true_not_grid() -> None:
    """The boresight lies along true north: grid azimuth plus the frame's convergence."""
    pencil = Tr36814Sector(
        name="pencil", gain_dbi=30.0, azimuth_beamwidth_deg=1.0, elevation_beamwidth_deg=90.0
    )
    mast = field(row=59.0, col=40.0, loss_db=100.0)
    for grid_azimuth_deg, col in ((0.0, 40), (math.degrees(math.atan2(10.0, 50.0)), 50)):
        actual = covered(
            item(mast, azimuth_deg=grid_azimuth_deg + 1.5, pattern=pencil)
        ).received_signal_dbm[9]
        assert col == int(np.nanargmax(actual))


def test_sectors_count_in_plan_order() -> None:
    """best_server is 1 where only the first serves, 2 where only the second does."""
    actual = covered(
        item(field(window=(0, 20, 0, COLS), loss_db=100.0), pattern=WHIP),
        item(field(window=(30, 60, 0, COLS), loss_db=100.0), pattern=WHIP),
    )
    assert (actual.best_server[:20] == 1).all()
    assert (actual.best_server[20:30] == -1).all()
    assert (actual.best_server[30:] == 2).all()


def test_margin_needs_two_sectors() -> None:
    """The margin is there where two windows overlap and NaN elsewhere."""
    actual = covered(
        item(field(window=(0, 40, 0, COLS), loss_db=100.0), pattern=WHIP),
        item(field(window=(20, 60, 0, COLS), loss_db=104.0), pattern=WHIP),
    )
    assert np.isnan(actual.server_margin_db[:20]).all()
    assert (actual.server_margin_db[20:40] == 4.0).all()
    assert np.isnan(actual.server_margin_db[40:]).all()


def test_margin_to_the_strongest_of_the_others() -> None:
    """With many sectors the margin is to the second strongest, in whatever order they come."""
    losses = (103.0, 110.0, 101.0, 107.0)
    for order in ((0, 1, 2, 3), (3, 2, 1, 0), (2, 0, 3, 1)):
        items = [item(field(loss_db=losses[index]), pattern=WHIP) for index in order]
        actual = covered(*items)
        assert (actual.server_margin_db == 2.0).all()
        assert (actual.best_server == order.index(2) + 1).all()


def test_a_sector_above_its_own_threshold_beats_a_stronger_one_below() -> None:
    """Each sector is held to its own radio's threshold; the margin may then be negative."""
    weak = item(field(loss_db=100.0), pattern=WHIP, own_radio=radio(threshold_dbm=-70.0))
    strong = item(field(loss_db=95.0), pattern=WHIP, own_radio=radio(threshold_dbm=-50.0))
    stronger = item(field(loss_db=93.0), pattern=WHIP, own_radio=radio(threshold_dbm=-50.0))
    for items in ((weak, strong, stronger), (stronger, strong, weak), (strong, weak, stronger)):
        actual = covered(*items)
        assert (actual.best_server == items.index(weak) + 1).all()
        assert (actual.received_signal_dbm == np.float32(-60.5)).all()
        assert (actual.server_margin_db == -7.0).all()


def test_where_nothing_serves_the_strongest_is_shown() -> None:
    """Below every threshold best_server is 0 and the signal that of the strongest sector."""
    high = radio(threshold_dbm=-20.0)
    items = [
        item(field(loss_db=loss), pattern=WHIP, own_radio=high) for loss in (100.0, 96.0, 99.0)
    ]
    actual = covered(*items)
    assert (actual.best_server == 0).all()
    assert (actual.received_signal_dbm == np.float32(-56.5)).all()
    assert (actual.server_margin_db == 3.0).all()
    assert actual.counts.served == 0


def test_exactly_at_the_threshold_is_served() -> None:
    """A signal equal to the threshold counts as service."""
    at = item(field(loss_db=100.0), pattern=WHIP, own_radio=radio(threshold_dbm=-60.5))
    below = item(field(loss_db=100.0), pattern=WHIP, own_radio=radio(threshold_dbm=-60.4))
    assert (covered(at).best_server == 1).all()
    assert (covered(below).best_server == 0).all()


def test_first_wins_an_exact_tie() -> None:
    """Of two sectors with the same signal the first in the plan is the best server."""
    twin = field(loss_db=100.0)
    actual = covered(item(twin, pattern=WHIP), item(twin, pattern=WHIP))
    assert (actual.best_server == 1).all()
    assert (actual.server_margin_db == 0.0).all()


@pytest.mark.parametrize("threshold_dbm", [-75.0, -68.0])
def test_order_of_sectors_does_not_matter_without_ties(threshold_dbm: float) -> None:
    """Signal and margin are the same in any order of sectors; the server is the same sector."""
    items = three_sectors(threshold_dbm)
    first = covered(*items)
    for order in ((2, 1, 0), (1, 2, 0)):
        other = covered(*(items[index] for index in order))
        np.testing.assert_array_equal(first.received_signal_dbm, other.received_signal_dbm)
        np.testing.assert_array_equal(first.server_margin_db, other.server_margin_db)
        back = np.array([0, *(index + 1 for index in order), -1])
        apart = ~(first.server_margin_db == 0.0)
        assert apart.mean() > 0.99
        assert (first.best_server == back[other.best_server])[apart].all()


def test_best_signal_is_never_below_any_layer() -> None:
    """With one threshold no sector alone is stronger anywhere than the best server."""
    items = three_sectors()
    best = covered(*items).received_signal_dbm
    for single in items:
        alone = covered(single).received_signal_dbm
        known = ~np.isnan(alone)
        assert (best[known] >= alone[known]).all()


def test_turning_by_360_changes_nothing() -> None:
    """Azimuths that differ by a whole turn give the same layers."""
    once = covered(*three_sectors())
    for turn_deg in (-360.0, 360.0):
        turned = [
            (path_field, sector, replace(table, azimuth_deg=table.azimuth_deg + turn_deg))
            for path_field, sector, table in three_sectors()
        ]
        actual = covered(*turned)
        np.testing.assert_allclose(
            once.received_signal_dbm, actual.received_signal_dbm, rtol=0, atol=1e-4
        )
        assert_same_server(once, actual)


def test_three_db_more_power_is_three_db_more_signal() -> None:
    """3 dB more transmit power raise the signal by 3 dB everywhere and leave the margin alone."""
    items = three_sectors()
    louder = [
        (path_field, replace(sector, radio=radio(power_dbm=22.0)), table)
        for path_field, sector, table in items
    ]
    base, more = covered(*items), covered(*louder)
    np.testing.assert_allclose(
        base.received_signal_dbm + 3.0, more.received_signal_dbm, rtol=0, atol=2e-5
    )
    np.testing.assert_allclose(base.server_margin_db, more.server_margin_db, rtol=0, atol=2e-5)
    assert more.counts.served > base.counts.served


def test_terminal_counts() -> None:
    """Gain and feeder loss of the customer's antenna are in the signal."""
    plain = Terminal(antenna_height_m=5.0, antenna_gain_dbi=0.0)
    single = item(field(loss_db=100.0), pattern=WHIP)
    assert (covered(single, terminal=plain).received_signal_dbm == -79.0).all()


def test_a_sector_without_a_path_does_not_take_part() -> None:
    """NaN in one mast's path leaves the cell to the other sectors."""
    status = np.zeros((ROWS, COLS), dtype=np.uint8)
    status[10:20, 10:20] = CROSSES_HOLE
    blocked = item(field(loss_db=90.0, status=status), pattern=WHIP)
    actual = covered(blocked, item(field(loss_db=100.0), pattern=WHIP))
    hidden = np.zeros((ROWS, COLS), dtype=bool)
    hidden[10:20, 10:20] = True
    assert (actual.best_server[hidden] == 2).all()
    assert np.isnan(actual.server_margin_db[hidden]).all()
    assert (actual.best_server[~hidden] == 1).all()
    assert (actual.server_margin_db[~hidden] == 10.0).all()
    assert (actual.status == COMPUTED).all()


def test_counts_tell_the_reasons_apart() -> None:
    """Every cell is counted once: out of range, a hole, behind a hole, or computed."""
    window = (0, 40, 0, COLS)
    status = np.zeros((40, COLS), dtype=np.uint8)
    status[0:4] = OUT_OF_RANGE
    status[4:7] = NO_DATA
    status[7:9] = CROSSES_HOLE
    one = item(field(window=window, status=status, loss_db=100.0), pattern=WHIP)
    alone = covered(one)
    assert (alone.status[:4] == OUT_OF_RANGE).all()
    assert (alone.status[4:7] == NO_DATA).all()
    assert (alone.status[7:9] == CROSSES_HOLE).all()
    assert (alone.status[9:40] == COMPUTED).all()
    assert (alone.status[40:] == OUT_OF_RANGE).all()
    assert (alone.best_server[:9] == -1).all()
    assert np.isnan(alone.received_signal_dbm[:9]).all()
    assert alone.counts == CellCounts(
        cells=ROWS * COLS,
        out_of_range=24 * COLS,
        in_range=36 * COLS,
        computed=31 * COLS,
        no_data=3 * COLS,
        crosses_hole=2 * COLS,
        served=31 * COLS,
        served_by_sector=(31 * COLS,),
    )
    # A second mast reaches the first rows, but the hole stays a hole. Where one calls a cell a
    # hole and the other knows only that its path crosses one, the cell itself has data.
    status = np.zeros((9, COLS), dtype=np.uint8)
    status[4:7] = NO_DATA
    status[7] = OUT_OF_RANGE
    status[8] = NO_DATA
    two = item(field(window=(0, 9, 0, COLS), status=status, loss_db=90.0), pattern=WHIP)
    for items in ((one, two), (two, one)):
        both = covered(*items)
        assert (both.status[:4] == COMPUTED).all()
        assert (both.status[4:7] == NO_DATA).all()
        assert (both.status[7:9] == CROSSES_HOLE).all()
        assert both.counts.out_of_range == 20 * COLS
        assert both.counts.served_by_sector == tuple(
            4 * COLS if single is two else 31 * COLS for single in items
        )


def test_no_sectors_cover_nothing() -> None:
    """Without sectors every cell is out of range."""
    actual = covered()
    assert (actual.best_server == -1).all()
    assert np.isnan(actual.received_signal_dbm).all()
    assert actual.counts.out_of_range == ROWS * COLS
    assert actual.counts.served_by_sector == ()


def test_types_shapes_and_read_only() -> None:
    """The layers have the grid's shape and the agreed types, and cannot be changed."""
    actual = covered(*three_sectors())
    for layer, dtype in LAYERS.items():
        array = getattr(actual, layer)
        assert array.shape == (ROWS, COLS)
        assert array.dtype == dtype
        with pytest.raises(ValueError, match="read-only"):
            array[0, 0] = 0


@pytest.mark.parametrize("window", [(-1, 20, 0, COLS), (0, 20, 5, COLS + 1), (50, ROWS + 1, 0, 9)])
def test_a_window_outside_the_grid_is_refused(window: tuple[int, int, int, int]) -> None:
    """Kernels do not check their indices; a window that does not fit never reaches them."""
    with pytest.raises(ValueError, match="does not fit a grid of 60 by 80 cells"):
        covered(item(field(window=window)))


def test_path_field_is_left_alone() -> None:
    """Combining changes nothing in the path field: it can be used again."""
    items = three_sectors()
    before = [path_field.path_loss_db.tobytes() for path_field, _, _ in items]
    assert_same(covered(*items), covered(*items))
    assert before == [path_field.path_loss_db.tobytes() for path_field, _, _ in items]


def test_one_thread_and_two_give_the_same_bytes() -> None:
    """The result does not depend on the number of threads."""
    threads = numba.get_num_threads()
    if numba.config.NUMBA_NUM_THREADS < 2:
        pytest.skip("only one thread available")
    try:
        numba.set_num_threads(1)
        one = covered(*three_sectors())
        numba.set_num_threads(2)
        two = covered(*three_sectors())
    finally:
        numba.set_num_threads(threads)
    assert_same(one, two)


def test_plain_and_compiled_agree(monkeypatch: pytest.MonkeyPatch) -> None:
    """The kernels run as plain Python give the same layers."""
    compiled = covered(*three_sectors())
    for name, kernel in vars(kernels).items():
        if isinstance(kernel, Dispatcher):
            monkeypatch.setattr(kernels, name, kernel.py_func)
    monkeypatch.setattr(kernels, "prange", range)
    for name in ("add_mast", "clear", "finish"):
        monkeypatch.setattr(layers, name, getattr(kernels, name))
    plain = covered(*three_sectors())
    np.testing.assert_allclose(
        compiled.received_signal_dbm, plain.received_signal_dbm, rtol=0, atol=1e-4
    )
    np.testing.assert_allclose(compiled.server_margin_db, plain.server_margin_db, rtol=0, atol=1e-4)
    assert compiled.status.tobytes() == plain.status.tobytes()
    assert_same_server(compiled, plain)


@pytest.mark.parametrize("edges", [(0, 60), (0, 1, 2, 37, 60), (0, 0, 17, 43, 50, 60, 60)])
def test_bands_together_are_the_whole(edges: tuple[int, ...], tmp_path: Path) -> None:
    """Bands of rows, from read-only memory maps, are the whole grid byte for byte; counts add."""
    whole = covered(*three_sectors())
    mapped = [(on_disk(path_field, tmp_path), *rest) for path_field, *rest in three_sectors()]
    mapped[1] = (mapped[0][0], *mapped[1][1:])
    bands = [combine(ROWS, COLS, mapped, TERMINAL, rows=band) for band in pairwise(edges)]
    for layer in LAYERS:
        together = np.concatenate([getattr(band, layer) for band in bands])
        assert getattr(whole, layer).tobytes() == together.tobytes(), layer
    counts = [band.counts for band in bands]
    assert whole.counts == sum(counts[1:], counts[0])


def on_disk(path_field: PathField, folder: Path) -> PathField:
    """The same path field with its arrays in files."""
    mapped = {}
    for layer in ("path_loss_db", "departure_elevation_deg", "fresnel_clearance_ratio", "status"):
        file = folder / f"{path_field.mast_row:g} {layer}.npy"
        np.save(file, getattr(path_field, layer))
        mapped[layer] = np.load(file, mmap_mode="r")
    return replace(path_field, **mapped)


def test_a_band_leaves_other_path_fields_alone(monkeypatch: pytest.MonkeyPatch) -> None:
    """Rows of a path field are taken only as far as they lie in the band."""
    taken: list[tuple[float, int, int]] = []
    original = layers._mast_arrays

    def noted(path_field: PathField, first: int, last: int, start: int) -> kernels.MastArrays:
        taken.append((path_field.mast_row, first, last))
        return original(path_field, first, last, start)

    monkeypatch.setattr(layers, "_mast_arrays", noted)
    combine(ROWS, COLS, three_sectors(), TERMINAL, rows=(40, 50))
    combine(ROWS, COLS, three_sectors(), TERMINAL, rows=(43, 60))
    assert taken == [(30.2, 40, 50), (10.0, 40, 43), (30.2, 43, 60)]


@pytest.mark.parametrize("rows", [(-1, 5), (7, 6), (0, ROWS + 1)])
def test_rows_outside_the_grid_are_refused(rows: tuple[int, int]) -> None:
    """A band that is none of the grid is an error."""
    with pytest.raises(ValueError, match=f"rows {rows[0]} to {rows[1]} are none of a grid of 60"):
        combine(ROWS, COLS, three_sectors(), TERMINAL, rows=rows)


def test_counts_of_different_plans_do_not_add_up() -> None:
    """Counts of bands add up only where they count the same number of sectors."""
    items = three_sectors()
    with pytest.raises(ValueError, match="counts of 3 and of 2 sectors do not add up"):
        covered(*items).counts + covered(*items[:2]).counts


def exact_signal_dbm(pattern: Pattern, path_field: PathField, table: GainTable) -> np.ndarray:
    """The plain formulas in float64, with the exact gain of the mounted antenna."""
    gain_dbi = mounted_gain_dbi(
        pattern,
        true_azimuth_deg=true_azimuth_deg(path_field),
        elevation_deg=path_field.departure_elevation_deg.astype(float),
        azimuth_deg=table.azimuth_deg,
        mechanical_downtilt_deg=table.mechanical_downtilt_deg,
        electrical_downtilt_deg=table.electrical_downtilt_deg,
    )
    signals = np.empty(gain_dbi.shape)
    for index, toward_dbi in np.ndenumerate(gain_dbi):
        signals[index] = received_signal_dbm_scalar(
            eirp_dbm_scalar(19.0, 1.0, toward_dbi), path_field.path_loss_db[index], 19.0, 0.5
        )
    return signals


def true_azimuth_deg(path_field: PathField) -> np.ndarray:
    rows, cols = path_field.path_loss_db.shape
    north_m = (path_field.mast_row - path_field.row_start - np.arange(rows)) * path_field.cell_m
    east_m = (np.arange(cols) + path_field.col_start - path_field.mast_col) * path_field.cell_m
    return path_field.frame.true_azimuth_deg(east_m[np.newaxis, :], north_m[:, np.newaxis])


@pytest.mark.parametrize("tilts_deg", [(2.0, 3.0), (-4.0, 6.0), (0.0, 2.0)])
def test_signal_is_within_a_fiftieth_of_a_db_of_the_formulas(
    tilts_deg: tuple[float, float],
) -> None:
    """float32, the table and its packing together cost less than 0.02 dB."""
    mechanical, electrical = tilts_deg
    wide = field(row=201.3, col=188.9, window=(0, 400, 0, 400), seed=5)
    sector = item(wide, azimuth_deg=77.0)[1]
    table = gain_table(
        PANEL,
        azimuth_deg=77.0,
        mechanical_downtilt_deg=mechanical,
        electrical_downtilt_deg=electrical,
    )
    actual = combine(400, 400, [(wide, sector, table)], TERMINAL).received_signal_dbm
    error = np.abs(actual - exact_signal_dbm(PANEL, wide, table))
    assert error.max() < 0.02
    assert error.mean() < 0.005


def test_geodesics_bend_away_from_the_straight_line() -> None:
    """The arc-to-chord turn of the frame is in the gain: here some tenths of a degree."""
    pencil = Tr36814Sector(
        name="pencil", gain_dbi=30.0, azimuth_beamwidth_deg=4.0, elevation_beamwidth_deg=90.0
    )
    mast = field()
    bent = replace(
        mast,
        frame=replace(mast.frame, scale_gradient_east_per_m=8e-6, scale_gradient_north_per_m=-5e-6),
    )
    for azimuth_deg in (0.0, 60.0, 200.0):
        single = item(bent, azimuth_deg=azimuth_deg, pattern=pencil)
        actual = covered(single).received_signal_dbm
        exact = exact_signal_dbm(pencil, bent, single[2])
        near = np.abs(exact_signal_dbm(pencil, mast, single[2]) - exact) > 0.5
        assert near.sum() > 20
        np.testing.assert_allclose(exact[near], actual[near], rtol=0, atol=0.05)


def test_straight_up_and_down() -> None:
    """A mast on a cell's centre; at its foot the azimuth is that of grid north."""
    mast = field(row=30.0, col=40.0, loss_db=100.0)
    elevation = mast.departure_elevation_deg.copy()
    elevation[30, 40], elevation[29, 40], elevation[31, 40] = -90.0, 90.0, 89.5
    mast = replace(mast, departure_elevation_deg=elevation)
    for azimuth_deg in (0.0, 120.0):
        single = item(mast, azimuth_deg=azimuth_deg)
        exact = exact_signal_dbm(PANEL, mast, single[2])[29:32, 40]
        actual = covered(single).received_signal_dbm[29:32, 40]
        np.testing.assert_allclose(exact, actual, rtol=0, atol=0.02)


def test_a_direction_that_does_not_exist_gives_no_signal() -> None:
    """Where an elevation is NaN or beyond the zenith the sector takes no part."""
    mast = field(loss_db=90.0)
    elevation = mast.departure_elevation_deg.copy()
    elevation[3, 4:7] = np.nan, 90.001, -np.inf
    broken = replace(mast, departure_elevation_deg=elevation)
    actual = covered(item(broken, pattern=WHIP), item(field(loss_db=99.0), pattern=WHIP))
    assert (actual.best_server[3, 3:8] == [1, 2, 2, 2, 1]).all()
    assert np.isnan(actual.server_margin_db[3, 4:7]).all()
    alone = covered(item(broken, pattern=WHIP))
    assert (alone.best_server[3, 3:8] == [1, -1, -1, -1, 1]).all()
    assert np.isnan(alone.received_signal_dbm[3, 4:7]).all()


def test_clearance_is_the_largest_over_the_masts() -> None:
    """The better path counts, whatever the aims; NaN only where no mast knows a path."""
    one, two = field(window=(0, 40, 0, COLS), seed=3), field(window=(20, 50, 9, 70), seed=4)
    ratios = np.full((2, ROWS, COLS), -np.inf, dtype=np.float32)
    ratios[0, :40] = one.fresnel_clearance_ratio
    ratios[1, 20:50, 9:70] = two.fresnel_clearance_ratio
    expected = ratios.max(axis=0)
    expected[np.isinf(expected)] = np.nan
    for azimuths_deg in ((0.0, 90.0), (200.0, 10.0)):
        items = [item(own, azimuth_deg=azimuths_deg[own is two]) for own in (one, two)]
        for ordered in (items, items[::-1]):
            actual = covered(*ordered).fresnel_clearance_ratio
            np.testing.assert_array_equal(expected, actual)


def test_line_of_sight_classes() -> None:
    """Each class begins where its name says; NaN is unknown."""
    ratios = [np.nan, -3.0, 0.0, 1e-6, 0.5999, 0.6, 0.9999, 1.0]
    expected = [
        SIGHT_UNKNOWN,
        SIGHT_BLOCKED,
        SIGHT_BLOCKED,
        SIGHT_CLEAR,
        SIGHT_CLEAR,
        SIGHT_MOSTLY_FREE,
        SIGHT_MOSTLY_FREE,
        SIGHT_FULLY_FREE,
    ]
    actual = line_of_sight_class(np.array([ratios], dtype=np.float32))
    assert actual.dtype == np.uint8
    assert [expected] == actual.tolist()
    assert sorted(set(expected)) == [0, 1, 2, 3, 4]


def test_unit_vectors_at_every_elevation() -> None:
    """From nadir to zenith the kernel's vectors are exact to a millionth."""
    elevation_deg = np.linspace(-90.0, 90.0, 2001, dtype=np.float32)
    size, north_m = elevation_deg.size, np.float32(-750.0)
    east_m = np.linspace(-2000.0, 30_000.0, size, dtype=np.float32)
    loss_db, north, east, up = np.empty((4, size), dtype=np.float32)
    kernels._directions(
        east_m, elevation_deg, east_m, north_m, np.float32(0.0), np.float32(0.0),
        loss_db, north, east, up,
    )  # fmt: skip
    elevation_rad = np.radians(elevation_deg.astype(float))
    azimuth_rad = np.arctan2(east_m.astype(float), float(north_m))
    np.testing.assert_allclose(np.sin(elevation_rad), up, rtol=0, atol=1e-6)
    np.testing.assert_allclose(
        np.cos(elevation_rad) * np.cos(azimuth_rad), north, rtol=0, atol=1e-6
    )
    np.testing.assert_allclose(np.cos(elevation_rad) * np.sin(azimuth_rad), east, rtol=0, atol=1e-6)
    assert loss_db.tobytes() == east_m.tobytes()
