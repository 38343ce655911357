"""Write a file beside its target and rename it into place, so that nobody meets half a file."""

import os
import secrets
from collections.abc import Iterator
from contextlib import contextmanager, suppress
from pathlib import Path

from planner.errors import OutputError, PlannerError


def beside(path: Path) -> Path:
    """A new hidden name in the folder of ``path`` with the same ending; nothing is created."""
    return path.with_name(f".{path.stem}.{secrets.token_hex(4)}.part{path.suffix}")


@contextmanager
def replaced(path: Path) -> Iterator[Path]:
    """Yield a temporary path in the target's folder; write there, and it becomes ``path``.

    The folder is made if it is missing. When the body raises, the temporary file is removed and
    what stood at ``path`` before is untouched. An OSError (no room, no permission) becomes an
    OutputError that names ``path``.
    """
    path = Path(path)
    temporary = beside(path)
    try:
        path.parent.mkdir(parents=True, exist_ok=True)
        yield temporary
        os.replace(temporary, path)
    except PlannerError:
        raise
    except OSError as error:
        raise OutputError(f"{path}: could not be written: {error.strerror or error}") from error
    finally:
        with suppress(OSError):
            temporary.unlink()
