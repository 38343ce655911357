"""Sectors over path fields: the layers of a small invented place, and laws that must hold."""

import math
from dataclasses import replace

import numba
import numpy as np
import pytest
from coverage_cases import (
    COLS,
    LAYERS,
    ROWS,
    WHIP,
    assert_same,
    assert_same_server,
    by_plain_numpy,
    covered,
    field,
    item,
    radio,
    three_sectors,
)
from numba.core.dispatcher import Dispatcher

from planner.antenna import (
    Tr36814Sector,
)
from planner.coverage import (
    CellCounts,
    kernels,
    layers,
)
from planner.network import Terminal
from planner.sweep import COMPUTED, CROSSES_HOLE, NO_DATA, OUT_OF_RANGE


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
