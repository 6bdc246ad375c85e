"""Words that stay within their box, whatever the language and the network's name."""

from __future__ import annotations

import re

from matplotlib.figure import Figure
from matplotlib.font_manager import FontProperties
from matplotlib.text import Text

from fieldgen.products import look
from fieldgen.products.maps.figure import draw_words

LINE_PITCH = 1.3  # times the size of the letters
SMALLEST = 0.55  # times the size asked for; words that need less are cut


def draw_fitting(figure: Figure, box, words: str, size: float, **style) -> list[Text]:
    """Words from the upper left corner of a box, in lines, and smaller where they need to be.

    box : left, bottom, width, height [pixels]; size : at most [points]
    Words without room even at `SMALLEST` end with an ellipsis.
    """
    left, bottom, width, height = box
    lines, size = fit_lines(figure, words, (width, height), size, style.get("weight", "normal"))
    pitch = LINE_PITCH * size * figure.dpi / 72
    top = bottom + height - 0.8 * pitch  # the first baseline
    return [
        draw_words(figure, (left, top - row * pitch), line, size, **style)
        for row, line in enumerate(lines)
    ]


def fit_lines(figure: Figure, words: str, room, size: float, weight: str = "normal"):
    """Lines of some words and the size of the letters [points] that fit a width and height."""
    smallest = SMALLEST * size
    while True:
        width_of = _Ruler(figure, size, weight)
        lines = break_lines(words, room[0], width_of)
        pitch = LINE_PITCH * size * figure.dpi / 72
        most = max(1, int(room[1] / pitch))
        if len(lines) <= most and all(width_of(line) <= room[0] for line in lines):
            return lines, size
        if size <= smallest:
            cut = [*lines[: most - 1], " ".join(lines[most - 1 :])]
            return [_shorten(line, room[0], width_of) for line in cut], size
        size = max(0.94 * size, smallest)


def break_lines(words: str, width: float, width_of) -> list[str]:
    """Lines no wider than a width, except for single words that are; numbers keep their units."""
    lines: list[str] = []
    for word in re.split(r"(?<!\d)\s+", words.strip()):
        longer = f"{lines[-1]} {word}" if lines else word
        if lines and width_of(longer) <= width:
            lines[-1] = longer
        else:
            lines.append(word)
    return lines


def _shorten(line: str, width: float, width_of) -> str:
    if width_of(line) <= width:
        return line
    while line and width_of(line + "…") > width:
        line = line[:-1].rstrip()
    return line + "…"


class _Ruler:
    """Width of a line [pixels] in letters of a size [points] and weight."""

    def __init__(self, figure: Figure, size: float, weight: str):
        self._renderer = figure.canvas.get_renderer()
        self._font = FontProperties(family=look.FONT_FAMILY, size=size, weight=weight)

    def __call__(self, line: str) -> float:
        width, _, _ = self._renderer.get_text_width_height_descent(line, self._font, ismath=False)
        return width
