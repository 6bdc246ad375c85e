"""Where the lines and words of a chunk of text stand, found for all lines at once."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from fieldgen.readers.text import Chunk, decode

NEWLINE = ord("\n")
LAST_BLANK = ord(" ")
"""Bytes up to this one (blank, tab, CR, LF) separate words."""


@dataclass(frozen=True)
class WordIndex:
    """Lines of a chunk and the words in them; offsets count bytes from the chunk's start.

    line_start, line_end : (lines,) a line without its LF
    first_word, word_count : (lines,) its words are first_word ... first_word + word_count - 1
    word_start, word_end : (words,)
    first_line : number of the chunk's first line in the file
    """

    data: bytes
    letters: np.ndarray
    line_start: np.ndarray
    line_end: np.ndarray
    first_word: np.ndarray
    word_count: np.ndarray
    word_start: np.ndarray
    word_end: np.ndarray
    first_line: int

    @classmethod
    def of(cls, chunk: Chunk) -> WordIndex:
        """The index of a chunk."""
        data = chunk.data if chunk.data.endswith(b"\n") else chunk.data + b"\n"
        letters = np.frombuffer(data, np.uint8)
        line_end = np.flatnonzero(letters == NEWLINE)
        line_start = np.concatenate([[0], line_end[:-1] + 1])
        edges = np.diff((letters > LAST_BLANK).view(np.int8), prepend=np.int8(0))
        word_start, word_end = np.flatnonzero(edges == 1), np.flatnonzero(edges == -1)
        first_word = np.searchsorted(word_start, line_start)
        word_count = np.diff(first_word, append=len(word_start))
        return cls(
            data, letters, line_start, line_end, first_word, word_count,
            word_start, word_end, chunk.first_line,
        )  # fmt: skip

    @property
    def line_length(self):
        """Lengths (lines,) in bytes."""
        return self.line_end - self.line_start

    def first_letter(self):
        """First byte (lines,) of each line that is not blank, 0 for an empty line."""
        filled = self.word_count > 0
        first = np.zeros(len(self.line_start), np.uint8)
        first[filled] = self.letters[self.word_start[self.first_word[filled]]]
        return first

    def line(self, index: int) -> str:
        """Text of a line, without its line ending."""
        return decode(self.data[self.line_start[index] : self.line_end[index]]).rstrip("\r")

    def line_number(self, index):
        """Number in the file, from 1, of lines of the chunk."""
        return self.first_line + index

    def words(self, lines, position: int, longest: int):
        """The words (n,) bytes at `position` in `lines` (n,), '' where one is over `longest`."""
        word = self.first_word[lines] + position
        start = self.word_start[word]
        length = self.word_end[word] - start
        column = np.arange(min(longest, length.max(initial=1)))
        place = np.minimum(start[:, None] + column, len(self.letters) - 1)
        letters = self.letters[place]
        letters[(column >= length[:, None]) | (length > longest)[:, None]] = 0
        return letters.view(f"S{len(column)}").ravel()
