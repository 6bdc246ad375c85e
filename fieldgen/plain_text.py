"""Text from outside -> text that is safe to name, to draw, to file and to print."""

from __future__ import annotations

import unicodedata

LONGEST_FILE_NAME = 120
"""Longest name of a file or folder [bytes]; file systems allow 255, and suffixes need room."""


def one_line(text: str) -> str:
    """A text on one line without control characters, and without marks that turn its direction."""
    kept = (" " if unicodedata.category(letter)[0] in "CZ" else letter for letter in text)
    return " ".join("".join(kept).split())


def printable(text: str) -> str:
    """A text for the terminal: all but line feeds and what can be printed is escaped."""
    return "".join(
        letter if letter == "\n" or letter.isprintable() else ascii(letter)[1:-1] for letter in text
    )


def file_name(text: str, default: str) -> str:
    """Name of one file or folder: nothing in it can leave the folder that it is put into."""
    kept = "".join(letter if letter.isalnum() or letter in "-_ ." else "_" for letter in text)
    short = kept.strip(" .").encode()[:LONGEST_FILE_NAME].decode(errors="ignore")
    return short.strip(" .") or default


def cell(text: str) -> str:
    """A text for a cell of a table; an apostrophe keeps spreadsheets from reading a formula."""
    return f"'{text}" if text.startswith(("=", "+", "-", "@")) else text
