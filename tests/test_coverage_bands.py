"""Bands of rows, accuracy of the signal, clearance and classes of line of sight."""

from dataclasses import replace
from itertools import pairwise
from pathlib import Path

import numpy as np
import pytest
from coverage_cases import (
    COLS,
    LAYERS,
    PANEL,
    ROWS,
    TERMINAL,
    WHIP,
    covered,
    field,
    item,
    three_sectors,
)

from planner.antenna import (
    GainTable,
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
    combine,
    kernels,
    layers,
    line_of_sight_class,
)
from planner.physics.link import (
    eirp_dbm_scalar,
    received_signal_dbm_scalar,
)
from planner.sweep import PathField


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
