"""Path fields kept on disk, one file each, so that no path is computed twice.

A file ``<key>.pathfield`` holds, one after the other:

- a line of text: what this is, the version of this layout, how long the header is and its CRC-32;
- the header, JSON: the key, the field's plain values, and for each array its data type, its shape,
  its CRC-32 and where it starts, counted from the end of the header; padded with spaces;
- the arrays, little-endian, rows from the north, each starting at a multiple of 64 bytes.

A file is written beside its target, brought to the disk and renamed, so that a process that is
killed leaves the whole field or none, and several processes may use one folder. A loaded field is a
read-only map of its file: only what is looked at is in memory, and that can be given back.
"""

import json
import mmap
import os
import re
import time
import zlib
from contextlib import suppress
from dataclasses import fields, is_dataclass
from math import prod
from pathlib import Path
from typing import Any, BinaryIO, get_type_hints

import numpy as np
from numpy.typing import NDArray

from planner.errors import OutputError
from planner.io.atomic import beside, replaced
from planner.sweep import PathField

ENDING = ".pathfield"
BOUND_BYTES = 5_000_000_000  # beyond it, fields that a run has not used are removed after it
_FORMAT = 1
_LINE = "ptmp-planner path field, format {:d}, header of {:08d} bytes, crc32 {:08x}\n"
_LINE_BYTES = len(_LINE.format(_FORMAT, 0, 0))
_LINE_PATTERN = re.compile(
    rb"ptmp-planner path field, format (\d+), header of (\d{8}) bytes, crc32 ([0-9a-f]{8})\n"
)
_ALIGNMENT = 64
_NAME_PATTERN = re.compile(rf"[0-9a-f]{{32,}}{re.escape(ENDING)}")
_LEFTOVER_PATTERN = re.compile(rf"\.[0-9a-f]{{32,}}\.[0-9a-f]{{8}}\.part{re.escape(ENDING)}")
_LEFTOVER_AGE_S = 3600.0  # no field takes this long to write: who began it is dead


class PathStore:
    """A folder of path fields by key. ``warnings`` collects what the run should tell."""

    def __init__(self, folder: Path) -> None:
        self.folder = Path(folder)
        self.warnings: list[str] = []
        self._used: set[str] = set()

    def path(self, key: str) -> Path:
        """The file of a key, whether it is there or not."""
        return self.folder / f"{key}{ENDING}"

    def load(self, key: str) -> PathField | None:
        """The field of a key with its arrays mapped read-only; None if there is none to be trusted.

        A file that is cut short, damaged, or not what its name says counts as absent, with a
        warning. Every array is checked against its checksum.
        """
        path = self.path(key)
        try:
            with path.open("rb") as file:
                field = _mapped_field(file, key)
        except FileNotFoundError:
            return None
        except (OSError, _UnusableError) as error:
            reason = error.strerror if isinstance(error, OSError) else error
            self.warnings.append(f"the kept path field {path} is not used: {reason}")
            return None
        except (KeyError, TypeError, ValueError):
            self.warnings.append(
                f"the kept path field {path} is not used: its header lacks what belongs there"
            )
            return None
        with suppress(OSError):  # the fields longest unused go first; a folder may be read-only
            os.utime(path)
        self._used.add(path.name)
        return field

    def make_ready(self) -> None:
        """Make the folder and see that it can be written, before anything is computed for it.

        Raises OutputError that names the folder.
        """
        probe = beside(self.path("0" * 64))
        try:
            self.folder.mkdir(parents=True, exist_ok=True)
            probe.touch()
            probe.unlink()
        except OSError as error:
            raise OutputError(
                f"{self.folder}: path fields cannot be kept in this folder: "
                f"{error.strerror or error}. Let it be written, or choose another output folder"
            ) from error
        self._remove_leftovers()

    def save(self, key: str, field: PathField) -> None:
        """Keep a field; what stood under its key is replaced. Raises OutputError."""
        plain, arrays = _parts(field)
        described, position = {}, 0
        for name, array in arrays.items():
            described[name] = {
                "dtype": array.dtype.str,
                "shape": list(array.shape),
                "start": position,
                "crc32": zlib.crc32(array.data.cast("B")),
            }
            position += _aligned(array.nbytes)
        header = {"key": key, "data_bytes": position, "values": plain, "arrays": described}
        text = json.dumps(header).encode()
        text = text.ljust(_aligned(_LINE_BYTES + len(text) + 1) - _LINE_BYTES - 1) + b"\n"
        with replaced(self.path(key)) as target, target.open("xb") as file:
            file.write(_LINE.format(_FORMAT, len(text), zlib.crc32(text)).encode())
            file.write(text)
            for array in arrays.values():
                file.write(array.data.cast("B"))
                file.write(bytes(_aligned(array.nbytes) - array.nbytes))
            file.flush()
            os.fsync(file.fileno())
        self._used.add(self.path(key).name)

    def prune(self, bound_bytes: int = BOUND_BYTES) -> None:
        """Remove the fields that were longest unused until all take no more than the bound.

        Those that this object has loaded or saved stay. Only files of the store are touched.
        """
        self._remove_leftovers()
        total, unused = 0, []
        for path, status in self._files(_NAME_PATTERN):
            total += status.st_size
            if path.name not in self._used:
                unused.append((status.st_mtime_ns, path, status.st_size))
        for _, path, size in sorted(unused):
            if total <= bound_bytes:
                return
            with suppress(OSError):  # another process may have removed it
                path.unlink()
            total -= size

    def _remove_leftovers(self) -> None:
        """Remove what a killed process had begun to write."""
        for path, status in self._files(_LEFTOVER_PATTERN):
            if time.time() - status.st_mtime > _LEFTOVER_AGE_S:
                with suppress(OSError):
                    path.unlink()

    def _files(self, pattern: re.Pattern[str]) -> list[tuple[Path, os.stat_result]]:
        found = []
        with suppress(OSError):
            for path in self.folder.iterdir():
                if pattern.fullmatch(path.name):
                    with suppress(OSError):  # gone since it was listed
                        found.append((path, path.stat()))
        return found


def release_pages(field: PathField) -> None:
    """Give back the memory that a loaded field takes; what is looked at again is read again.

    Does nothing to a field that was not loaded, and nothing where the system offers no way.
    """
    for array in _parts(field)[1].values():
        base: Any = array
        while isinstance(base, np.ndarray):
            base = base.base
        if isinstance(base, memoryview):
            base = base.obj
        if isinstance(base, mmap.mmap):
            _release(base)
            return


class _UnusableError(Exception):
    """Why a file is not taken for a path field."""


def _aligned(count: int) -> int:
    return -(-count // _ALIGNMENT) * _ALIGNMENT


def _parts(field: PathField) -> tuple[dict[str, Any], dict[str, NDArray[Any]]]:
    """The plain values of a field, ready for JSON, and its arrays, contiguous and little-endian."""
    plain: dict[str, Any] = {}
    arrays: dict[str, NDArray[Any]] = {}
    for item in fields(field):
        value = getattr(field, item.name)
        if isinstance(value, np.ndarray):
            arrays[item.name] = np.ascontiguousarray(value, value.dtype.newbyteorder("<"))
        elif is_dataclass(value):
            plain[item.name] = {part.name: getattr(value, part.name) for part in fields(value)}
        else:
            plain[item.name] = value
    return plain, arrays


def _mapped_field(file: BinaryIO, key: str) -> PathField:
    """The field in an open file; _UnusableError if it is not whole or is another's."""
    line = _LINE_PATTERN.fullmatch(file.read(_LINE_BYTES))
    if line is None or int(line[1]) != _FORMAT:
        raise _UnusableError("it is no path field in the format of this version")
    text = file.read(int(line[2]))
    if len(text) != int(line[2]) or zlib.crc32(text) != int(line[3], 16):
        raise _UnusableError("its header is damaged")
    header = json.loads(text)
    if header["key"] != key:
        raise _UnusableError("it holds another field than its name says")
    data_start = _LINE_BYTES + len(text)
    expected, found = data_start + header["data_bytes"], os.fstat(file.fileno()).st_size
    if expected != found:
        raise _UnusableError(f"it has {found} bytes instead of {expected}")
    names = {item.name for item in fields(PathField)}
    if names != header["values"].keys() | header["arrays"].keys():
        raise _UnusableError("it holds other quantities than those of this version")
    values = dict(header["values"])
    for name, kind in get_type_hints(PathField).items():
        if is_dataclass(kind) and isinstance(kind, type):
            values[name] = kind(**values[name])
    mapped = mmap.mmap(file.fileno(), 0, access=mmap.ACCESS_READ)
    for name, described in header["arrays"].items():
        dtype, shape = np.dtype(described["dtype"]), tuple(described["shape"])
        array = np.frombuffer(mapped, dtype, prod(shape), data_start + described["start"])
        if zlib.crc32(array.data.cast("B")) != described["crc32"]:
            raise _UnusableError(f"its {name} is damaged")
        values[name] = array.reshape(shape)
    _release(mapped)  # the check has looked at all of it
    return PathField(**values)


def _release(mapped: mmap.mmap) -> None:
    if hasattr(mapped, "madvise") and hasattr(mmap, "MADV_DONTNEED"):
        mapped.madvise(mmap.MADV_DONTNEED)
