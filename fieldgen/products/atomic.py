"""Files appear whole under their final name, or not at all."""

from __future__ import annotations

import os
from collections.abc import Iterator
from contextlib import contextmanager, suppress
from pathlib import Path

from fieldgen.errors import OutputError


@contextmanager
def whole_file(path: Path) -> Iterator[Path]:
    """Temporary path beside `path` to write to; it takes the final name when the block ends well.

    Raises OutputError that names `path` if the folder or the disk does not allow it.
    """
    temporary = path.with_name(f".{path.name}.{os.getpid()}.part")
    try:
        path.parent.mkdir(parents=True, exist_ok=True)
        yield temporary
        with temporary.open("rb") as file:
            os.fsync(file.fileno())
        os.replace(temporary, path)
        _sync_folder(path.parent)
    except OSError as error:
        reason = error.strerror or str(error)
        raise OutputError(f"{path}: cannot be written: {reason}.") from None
    except RuntimeError as error:  # how the NetCDF library tells of a full disk
        if "NetCDF" not in str(error):
            raise
        raise OutputError(f"{path}: cannot be written: {error}.") from None
    finally:
        with suppress(OSError):
            temporary.unlink(missing_ok=True)


def _sync_folder(folder: Path) -> None:
    """Make the new name outlast a power cut, where the system can do so."""
    if not hasattr(os, "O_DIRECTORY"):
        return
    number = os.open(folder, os.O_RDONLY | os.O_DIRECTORY)
    try:
        os.fsync(number)
    finally:
        os.close(number)
