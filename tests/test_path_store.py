"""Path fields on disk: what is kept comes back whole or not at all, where it still holds."""

import json
import os
import re
import subprocess
import sys
import tempfile
import zlib
from dataclasses import asdict, dataclass, fields, replace
from pathlib import Path

import numpy as np
import pytest
from kept_fields import ARRAYS, KEY, MAST, OTHER_KEY, SETTINGS, hills
from numpy.typing import NDArray
from plans import changed, write_plan

from planner.errors import InputError, OutputError
from planner.io import path_store
from planner.io.path_store import PathStore, release_pages
from planner.plan import read_plan
from planner.plan.path_tasks import PathFieldTask, computed_field, tower_tasks
from planner.sweep import PathField, path_field


@pytest.fixture(scope="module")
def field() -> PathField:
    return path_field(hills(), latitude=MAST[0], longitude=MAST[1], **SETTINGS)


@pytest.fixture
def store(tmp_path: Path) -> PathStore:
    return PathStore(tmp_path / "fields")


def same(one: PathField, other: PathField) -> bool:
    """Whether two fields are the same to the last bit, types included."""
    for item in fields(one):
        a, b = getattr(one, item.name), getattr(other, item.name)
        if isinstance(a, np.ndarray):
            if (a.dtype, a.shape, a.tobytes()) != (b.dtype, b.shape, b.tobytes()):
                return False
        elif a != b or type(a) is not type(b):
            return False
    return True


def saved(store: PathStore, field: PathField, name: str = KEY) -> Path:
    store.save(name, field)
    return store.path(name)


# The file.


def test_a_field_comes_back_to_the_last_bit(store, field):
    """Plain values and arrays are the same; arrays are read-only maps of the file."""
    assert store.load(KEY) is None
    path = saved(store, field)
    loaded = PathStore(store.folder).load(KEY)
    assert same(field, loaded)
    assert np.isnan(loaded.path_loss_db).any()  # also NaN, which no comparison of numbers sees
    assert np.isfinite(loaded.path_loss_db).any()
    assert len(ARRAYS) >= 3
    for name in ARRAYS:
        array = getattr(loaded, name)
        assert not array.flags.writeable
        assert not array.flags.owndata
        assert array.ctypes.data % 64 == 0
    assert [file.name for file in store.folder.iterdir()] == [path.name]
    assert store.warnings == []


def test_the_file_is_what_the_module_says(store, field):
    """Its first line, its JSON and its arrays can be read with nothing but numpy."""
    content = saved(store, field).read_bytes()
    line, text, _ = content.split(b"\n", 2)
    header = re.fullmatch(rb".*header of (\d+) bytes.*", line)
    assert int(header[1]) == len(text) + 1
    start = len(line) + 1 + len(text) + 1
    facts = json.loads(text)
    assert facts["key"] == KEY
    assert facts["values"]["frame"] == asdict(field.frame)
    for name in ARRAYS:
        about = facts["arrays"][name]
        count = int(np.prod(about["shape"]))
        array = np.frombuffer(content, about["dtype"], count, start + about["start"])
        assert array.tobytes() == getattr(field, name).tobytes()


def test_the_same_field_gives_the_same_bytes(store, field):
    """No clock and nothing of chance is in the file."""
    first = saved(store, field).read_bytes()
    os.utime(store.path(KEY), (1.0, 1.0))
    assert saved(store, field).read_bytes() == first


def test_arrays_that_a_field_gains_are_kept_too(store, field, monkeypatch):
    """The store goes by the fields of the class, and does not take files that lack one."""

    @dataclass(frozen=True, slots=True, kw_only=True, eq=False)
    class Longer(PathField):
        ratio: NDArray[np.float32]

    old = {item.name: getattr(field, item.name) for item in fields(field)}
    longer = Longer(**old, ratio=field.path_loss_db * np.float32(0.5))
    saved(store, field, OTHER_KEY)
    monkeypatch.setattr(path_store, "PathField", Longer)
    saved(store, longer)
    assert same(longer, store.load(KEY))
    assert store.load(OTHER_KEY) is None
    assert "holds other quantities" in store.warnings[0]


def with_header(content: bytes, old: bytes, new: bytes) -> bytes:
    """The file with another header of the same length and its right checksum."""
    line, text, data = content.split(b"\n", 2)
    assert old in text
    text = text.rstrip().replace(old, new).ljust(len(text)) + b"\n"
    line = line[:-8] + f"{zlib.crc32(text):08x}".encode()
    return line + b"\n" + text + data


def flipped(content: bytes, place: int) -> bytes:
    return content[:place] + bytes([content[place] ^ 1]) + content[place + 1 :]


@pytest.mark.parametrize(
    ("spoil", "reason"),
    [
        (lambda content: b"", "no path field"),
        (lambda content: b"II*\0" * 100, "no path field"),
        (lambda content: content.replace(b"format 1", b"format 2", 1), "no path field"),
        (lambda content: content[:40], "no path field"),
        (lambda content: content[:400], "header is damaged"),
        (lambda content: flipped(content, 100), "header is damaged"),
        (lambda content: content[:-1], "bytes instead of"),
        (lambda content: content[: len(content) // 2], "bytes instead of"),
        (lambda content: content + b"\0", "bytes instead of"),
        (lambda content: flipped(content, len(content) // 5), "path_loss_db is damaged"),
        (lambda content: flipped(content, len(content) - 1000), "status is damaged"),
        (lambda content: with_header(content, b"abab", b"cdcd"), "another field"),
        (lambda content: with_header(content, b'"data_bytes"', b'"bytes"'), "header lacks"),
        (lambda content: with_header(content, b'"<f4"', b'"<q9"'), "header lacks"),
        (lambda content: with_header(content, b'"latitude"', b'"attitude"'), "header lacks"),
        (lambda content: with_header(content, b'"radius_m"', b'"radius_n"'), "other quantities"),
    ],
)
def test_a_file_that_is_not_whole_counts_as_absent(store, field, spoil, reason):
    """It is not used, a warning names it and says why, and the next field takes its place."""
    path = saved(store, field)
    path.write_bytes(spoil(path.read_bytes()))
    assert store.load(KEY) is None
    [warning] = store.warnings
    assert str(path) in warning
    assert reason in warning
    saved(store, field)
    assert same(field, store.load(KEY))


def test_padding_is_all_that_no_checksum_covers(store, field):
    """Wherever one bit is turned, the file is refused or the field is the same."""
    content = saved(store, field).read_bytes()
    refused = 0
    for place in np.random.default_rng(3).integers(0, len(content), 200):
        store.path(KEY).write_bytes(flipped(content, int(place)))
        loaded = store.load(KEY)
        refused += loaded is None
        assert loaded is None or same(field, loaded)
    assert refused > 190


def resident_bytes(path: Path) -> int:
    """How much of a mapped file counts as this process's memory."""
    blocks = re.split(r"\n(?=[0-9a-f]+-[0-9a-f]+ )", Path("/proc/self/smaps").read_text())
    sizes = [re.search(r"^Rss: +(\d+) kB", block, re.M) for block in blocks if str(path) in block]
    assert sizes
    return sum(int(size[1]) * 1024 for size in sizes)


@pytest.mark.skipif(not Path("/proc/self/smaps").exists(), reason="no /proc/self/smaps here")
def test_a_loaded_field_takes_memory_only_for_what_is_looked_at(store, field):
    """Nothing after loading, though all of it was checked; pages can be given back."""
    rows = np.full((3000, 3000), 100.0, dtype=np.float32)
    large = replace(field, path_loss_db=rows)
    path = saved(store, large)
    loaded = store.load(KEY)
    assert resident_bytes(path) < 1e6
    assert loaded.path_loss_db[:300].sum() == 300 * 3000 * 100.0
    assert 3e6 < resident_bytes(path) < 18e6
    loaded.path_loss_db.max()
    assert resident_bytes(path) > 36e6
    release_pages(loaded)
    assert resident_bytes(path) < 1e6
    assert loaded.path_loss_db.max() == 100.0
    release_pages(field)  # a field that was never kept: nothing to give back


# The folder.


def test_what_a_killed_process_left_is_removed_once_it_is_old(store, field):
    """A temporary file that may still be written stays; files of others always do."""
    store.folder.mkdir()
    old = store.folder / f".{KEY}.0123abcd.part.pathfield"
    young = store.folder / f".{KEY}.4567abcd.part.pathfield"
    others = [store.folder / name for name in (f".{KEY}.part", "notes.txt", ".0123abcd.part.tif")]
    for path in (old, young, *others):
        path.write_bytes(b"x")
    for path in (old, *others):
        os.utime(path, (1e9, 1e9))
    store.make_ready()
    assert sorted(store.folder.iterdir()) == sorted([young, *others])
    assert store.load(KEY) is None


def test_beyond_the_bound_the_longest_unused_go_first(tmp_path, field):
    """What this run loaded or saved stays, even when that alone is beyond the bound."""
    names = [f"{number:064x}" for number in range(5)]
    earlier = PathStore(tmp_path)
    for number, name in enumerate(names):
        size = saved(earlier, field, name).stat().st_size
        os.utime(earlier.path(name), (1e9 + number, 1e9 + number))
    (tmp_path / "notes.txt").write_bytes(bytes(10 * size))
    store = PathStore(tmp_path)
    assert store.load(names[0]) is not None  # the oldest, but used now

    def left() -> set[int]:
        return {number for number, name in enumerate(names) if store.path(name).exists()}

    store.prune(5 * size)
    assert left() == {0, 1, 2, 3, 4}
    store.prune(5 * size - 1)
    assert left() == {0, 2, 3, 4}
    store.prune(2 * size)
    assert left() == {0, 4}
    store.prune(0)
    assert left() == {0}
    assert (tmp_path / "notes.txt").exists()
    later = PathStore(tmp_path)
    saved(later, field, names[1])
    later.prune(size)
    assert left() == {1}


def test_a_field_in_use_is_the_youngest(store, field):
    """Loading counts as use, so that what is used in turn with others is not computed again."""
    path = saved(store, field)
    os.utime(path, (1e9, 1e9))
    store.load(KEY)
    assert path.stat().st_mtime > 1.5e9


@pytest.mark.parametrize("hindrance", ["a file", "read-only"])
def test_a_folder_that_cannot_be_written_is_named(hindrance, field):
    """Before anything is computed: OutputError with the folder and what to do."""
    with tempfile.TemporaryDirectory() as base:
        folder = Path(base) / "path_fields"
        if hindrance == "a file":
            folder.write_bytes(b"")
        else:
            folder.mkdir()
            folder.chmod(0o555)
        Path(base).chmod(0o755)
        store = PathStore(folder)
        was_root = os.geteuid() == 0
        if was_root:  # root may write anywhere
            os.seteuid(65534)
        try:
            with pytest.raises(OutputError) as caught:
                store.make_ready()
            with pytest.raises(OutputError):
                store.save(KEY, field)
        finally:
            if was_root:
                os.seteuid(0)
        assert str(caught.value).startswith(f"{folder}: path fields cannot be kept")
        assert "choose another output folder" in str(caught.value)


SAVING = """
import sys
from pathlib import Path
from planner.io.path_store import PathStore
folder, key = Path(sys.argv[1]), sys.argv[2]
field = PathStore(folder).load(key)
print("ready", flush=True)
for _ in range(150):
    PathStore(folder).save(key, field)
"""


def test_a_reader_never_meets_half_a_field(store, field):
    """One process replaces a field again and again while this one loads it."""
    saved(store, field)
    writer = subprocess.Popen(
        [sys.executable, "-c", SAVING, str(store.folder), KEY], stdout=subprocess.PIPE, text=True
    )
    assert writer.stdout.readline() == "ready\n"
    loads = 0
    while writer.poll() is None:
        loaded = store.load(KEY)
        assert loaded is not None, store.warnings
        assert same(field, loaded)
        loads += 1
    writer.stdout.close()
    assert writer.returncode == 0
    assert loads > 10
    assert [file.name for file in store.folder.iterdir()] == [store.path(KEY).name]


# The unit of work.


def tasks_of(folder: Path, *edits: tuple[str, str]) -> list[PathFieldTask]:
    plan = read_plan(write_plan(folder, changed(*edits)))
    return [task for tower in plan.towers for task in tower_tasks(plan, tower).values()]


@pytest.mark.parametrize(
    "edit",
    [
        ("azimuth_deg = 140", "azimuth_deg = 141"),
        ("mechanical_downtilt_deg = 2", "mechanical_downtilt_deg = 4"),
        ("azimuth_deg = 140", "azimuth_deg = 140\nelectrical_downtilt_deg = 3"),
        ("transmit_power_dbm = 19", "transmit_power_dbm = 10"),
        ("feeder_loss_db = 1", "feeder_loss_db = 2"),
        ("gain_dbi = 17", "gain_dbi = 16"),
        ("azimuth_beamwidth_deg = 90", "azimuth_beamwidth_deg = 65"),
        ("antenna_gain_dbi = 19", "antenna_gain_dbi = 23"),
        ("service_threshold_dbm = -75", "service_threshold_dbm = -80"),
        ('id = "west-1"', 'id = "other"'),
        ('id = "west"', 'id = "other"'),
        ('name = "West mast at the mill pond"', 'name = "other"'),
    ],
)
def test_aim_power_antenna_and_names_leave_the_task(tmp_path, edit):
    """So a run after such a change computes no path."""
    assert tasks_of(tmp_path, edit) == tasks_of(tmp_path)


@pytest.mark.parametrize(
    "edit",
    [
        ("antenna_height_m = 5", "antenna_height_m = 6"),
        ("radius_km = 10", "radius_km = 9"),
        ("radius_km = 10", "radius_km = 10\nk_factor = 1"),
        ("radius_km = 10", 'radius_km = 10\npolarization = "horizontal"'),
        ("radius_km = 10", "radius_km = 10\nobstacle_clearing_m = 20"),
        ("frequency_mhz = 5600", "frequency_mhz = 5700"),
        ("latitude = -46.2041", "latitude = -46.2042"),
        ("longitude = -121.4122", "longitude = -121.4123"),
    ],
)
def test_what_decides_the_paths_is_in_the_task(tmp_path, edit):
    """Each of these keys of the plan reaches the sweep."""
    [before], [after] = tasks_of(tmp_path), tasks_of(tmp_path, edit)
    assert before._settings() != after._settings()


def test_a_task_is_the_same_after_json(tmp_path):
    """Every number to the last bit, every path."""
    [task] = tasks_of(tmp_path, ("latitude = -46.2041", "latitude = -46.20410000000001"))
    assert PathFieldTask.from_json(task.to_json()) == task
    assert task.terrain.rasters == (tmp_path / "terrain.tif",)


def test_a_wrong_task_is_refused_with_all_that_is_wrong(tmp_path):
    """Unknown names, missing ones, wrong kinds."""
    [task] = tasks_of(tmp_path)
    text = task.to_json().replace('"radius_m":10000.0', '"radius":10000.0')
    text = text.replace('"frequency_mhz":5600.0', '"frequency_mhz":"5600"')
    with pytest.raises(InputError) as caught:
        PathFieldTask.from_json(text)
    assert sorted(problem.where for problem in caught.value.problems) == [
        "path field task.frequency_mhz",
        "path field task.radius",
        "path field task.radius_m",
    ]


def test_a_field_computed_for_the_store_is_in_the_terrain_of_the_plan(tmp_path, store):
    """Kept in rows and columns of its own part, it comes back in those of the whole terrain."""
    terrain = hills()
    [task] = tasks_of(tmp_path)
    task = replace(task, latitude=MAST[0], longitude=MAST[1], radius_m=1000.0)
    progress = []
    kept = computed_field(
        task, task.key(terrain), terrain, store, lambda *share: progress.append(share)
    )
    direct = path_field(terrain, **task._settings())
    down, right = kept.row_start - direct.row_start, kept.col_start - direct.col_start
    rows, cols = kept.status.shape
    np.testing.assert_array_equal(
        kept.path_loss_db, direct.path_loss_db[down : down + rows, right : right + cols]
    )
    assert kept.mast_row == pytest.approx(direct.mast_row, abs=1e-9)
    assert kept.mast_col == pytest.approx(direct.mast_col, abs=1e-9)
    assert not kept.path_loss_db.flags.owndata
    assert progress[-1][0] == progress[-1][1] > 0
