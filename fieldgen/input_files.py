"""What is a file that can be read to its end."""

from __future__ import annotations

import errno
import os


def check_is_file(path) -> None:
    """Raise OSError where there is no file, or where reading would wait or never end."""
    if os.path.isfile(path):
        return
    if not os.path.exists(path):
        raise FileNotFoundError(errno.ENOENT, os.strerror(errno.ENOENT))
    raise OSError(errno.EINVAL, "it is a folder, a pipe or a device, expected a file")
