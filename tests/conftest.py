"""Set-up for all tests."""

import hashlib
import os
import tempfile
from pathlib import Path

# Numba keeps a compiled kernel as long as the file that holds it is unchanged, even where a
# function that it inlines from another file has changed. A cache folder per state of the sources
# keeps tests honest. Must be set before numba is imported.
_SOURCES = sorted((Path(__file__).parents[1] / "planner").rglob("*.py"))
_STATE = hashlib.sha256(b"".join(path.read_bytes() for path in _SOURCES)).hexdigest()[:16]
os.environ.setdefault(
    "NUMBA_CACHE_DIR", str(Path(tempfile.gettempdir()) / f"planner-kernels-{_STATE}")
)
