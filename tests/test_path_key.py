"""The key of a path field: all that decides it and nothing else."""

import re
from dataclasses import replace

import numba
import numpy as np
import pytest
from affine import Affine
from kept_fields import ARRAYS, MAST, SETTINGS, hills, key_of
from places import jacksboro, latitude_longitude, plain
from pyproj import CRS

from planner.errors import TerrainError
from planner.sweep import key, path_field, seen_part, seen_window
from planner.terrain import Grid, Terrain


@pytest.mark.parametrize(
    "change",
    [
        {"latitude": MAST[0] + 1e-6},
        {"longitude": MAST[1] + 1e-6},
        {"antenna_height_m": 30.1},
        {"receiver_height_m": 5.1},
        {"frequency_mhz": 5600.1},
        {"radius_m": 1000.1},
        {"k_factor": 1.0},
        {"polarization": "horizontal"},
        {"obstacle_clearing_m": 1.0},
    ],
    ids=lambda change: next(iter(change)),
)
def test_every_argument_changes_the_key(change):
    """And the same argument gives the same key, as a whole number or not."""
    terrain = hills()
    assert key_of(terrain, **change) != key_of(terrain)
    assert key_of(terrain, **change) == key_of(hills(), **change)
    assert key_of(terrain, antenna_height_m=30) == key_of(terrain)
    assert re.fullmatch(r"[0-9a-f]{64}", key_of(terrain))


def changed_cell(name: str, row: int, col: int) -> Terrain:
    terrain = hills()
    array = getattr(terrain, name).copy()
    array[row, col] = np.nextafter(array[row, col], np.float32(np.inf))
    return replace(terrain, **{name: array})


def moved(terrain: Terrain, **changes) -> Terrain:
    return replace(terrain, grid=replace(terrain.grid, **changes))


TRANSFORM = hills().grid.transform


@pytest.mark.parametrize(
    "terrain",
    [
        replace(hills(), obstacle_height_m=None),
        replace(hills(), kind="surface"),
        replace(hills(), lowering_radius_m=60.0),
        moved(hills(), transform=TRANSFORM @ Affine.translation(0.001, 0.0)),
        moved(hills(), transform=TRANSFORM @ Affine.translation(0.0, 0.001)),
        moved(hills(), transform=TRANSFORM @ Affine.scale(1.0001)),
        moved(hills(), crs=CRS.from_epsg(32709)),
    ],
    ids=["obstacles", "kind", "lowering", "east", "south", "cell", "crs"],
)
def test_the_terrain_changes_the_key(terrain):
    """How its grid lies, what it is and what stands on it."""
    latitude, longitude = latitude_longitude(terrain, 40.3, 35.6)
    assert key_of(terrain, latitude=latitude, longitude=longitude) != key_of(hills())


@pytest.mark.parametrize("name", ["ground_elevation_m", "obstacle_height_m"])
def test_one_cell_within_sight_changes_the_key_and_none_beyond(name):
    """The corners of the window count, the cells next to them outside do not."""
    rows, cols = seen_window(hills(), latitude=MAST[0], longitude=MAST[1], radius_m=1000.0)
    assert 0 < rows.start < rows.stop < 81
    assert 0 < cols.start < cols.stop < 71
    inside = {
        key_of(changed_cell(name, r, c))
        for r in (rows.start, rows.stop - 1)
        for c in (cols.start, cols.stop - 1)
    }
    assert len(inside - {key_of(hills())}) == 4
    for place in (
        (rows.start - 1, 35),
        (rows.stop, 35),
        (40, cols.start - 1),
        (40, cols.stop),
        (0, 0),
    ):
        assert key_of(changed_cell(name, *place)) == key_of(hills())


def test_versions_change_the_key(monkeypatch):
    """Another model or another package computes anew."""
    before = key_of(hills())
    monkeypatch.setattr(key, "MODEL_VERSION", key.MODEL_VERSION + 1)
    raised = key_of(hills())
    monkeypatch.setattr(key, "__version__", "99.0")
    assert len({before, raised, key_of(hills())}) == 3


def test_what_decides_nothing_leaves_the_key():
    """Notes on the terrain, and a grid that reaches further for the sake of other towers."""
    terrain = hills()
    assert key_of(replace(terrain, warnings=("a note",), filled_share=0.1)) == key_of(terrain)
    grid = terrain.grid
    cut = Terrain(
        grid=Grid(
            crs=grid.crs,
            transform=grid.transform @ Affine.translation(4, 7),
            rows=grid.rows - 9,
            cols=grid.cols - 6,
        ),
        ground_elevation_m=terrain.ground_elevation_m[7:-2, 4:-2].copy(),
        obstacle_height_m=terrain.obstacle_height_m[7:-2, 4:-2].copy(),
    )
    assert key_of(cut) == key_of(terrain)


def test_the_key_does_not_depend_on_threads_and_sees_every_block():
    """One thread or all of them; a change in the last of several blocks is not lost."""
    ground = np.zeros((1300, 1200), dtype=np.float32)
    terrain = plain(ground=ground, cell_m=10.0)
    place = dict(zip(("latitude", "longitude"), latitude_longitude(terrain, 650, 600), strict=True))
    threads = numba.get_num_threads()
    with_all = key_of(terrain, **place, radius_m=6000.0)
    try:
        numba.set_num_threads(1)
        assert key_of(terrain, **place, radius_m=6000.0) == with_all
    finally:
        numba.set_num_threads(threads)
    other = ground.copy()
    other[1249, 600] = 1.0
    assert key_of(plain(ground=other, cell_m=10.0), **place, radius_m=6000.0) != with_all


def test_a_mast_off_the_terrain_has_no_key():
    """The same error as from the sweep."""
    with pytest.raises(TerrainError, match="a place outside the terrain"):
        key_of(hills(), latitude=MAST[0] + 1.0)


@pytest.mark.parametrize(
    ("place", "radius_m"),
    [((150.3, 120.7), 6000.0), ((40.0, 60.0), 6000.0), ((200.2, 20.1), 999.0)],
)
def test_the_part_that_is_seen_gives_the_field_of_the_whole(place, radius_m):
    """Every cell in range has the same loss, angle and status; nothing outside it counts."""
    terrain = jacksboro(90.0)
    latitude, longitude = latitude_longitude(terrain, *place)
    settings = {**SETTINGS, "latitude": latitude, "longitude": longitude, "radius_m": radius_m}
    mast = {name: settings[name] for name in ("latitude", "longitude", "radius_m")}
    rows, cols = seen_window(terrain, **mast)
    whole, part = (
        path_field(terrain, **settings),
        path_field(seen_part(terrain, **mast), **settings),
    )
    top, left = rows.start - whole.row_start, cols.start - whole.col_start
    height, width = part.status.shape
    window = slice(top, top + height), slice(left, left + width)
    assert (part.status == 0).sum() == (whole.status == 0).sum() > 100
    for name in ARRAYS:
        np.testing.assert_array_equal(getattr(part, name), getattr(whole, name)[window])


@pytest.mark.parametrize("radius_m", [400.0, 1000.0])
def test_lowering_looks_no_further_than_the_part(radius_m):
    """On a surface the mast stands as low on the part as on the whole, also beyond the radius."""
    ground = hills().ground_elevation_m.copy()
    ground[28, 36] = -7.0  # 615 m north of the mast
    terrain = hills(ground_elevation_m=ground, kind="surface", lowering_radius_m=700.0)
    mast = {"latitude": MAST[0], "longitude": MAST[1]}
    part = seen_part(terrain, **mast, radius_m=radius_m)
    settings = {**SETTINGS, **mast, "radius_m": radius_m}
    assert path_field(terrain, **settings).mast_ground_m == -7.0
    assert path_field(part, **settings).mast_ground_m == -7.0
