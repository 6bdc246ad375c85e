"""What commands print."""

from __future__ import annotations

import sys
from typing import TextIO

from fieldgen.plain_text import printable


def show(text: str, file: TextIO | None = None) -> None:
    """Print a text that may hold names from outside, escaped so that none commands the terminal."""
    file = file or sys.stdout
    encoding = file.encoding or "utf-8"
    text = printable(text).encode(encoding, "backslashreplace").decode(encoding)
    print(text, file=file)
