"""Where things are on the pictures for the public, one table a shape."""

from __future__ import annotations

from dataclasses import dataclass

from fieldgen.products.maps.layout import MapPlace

Box = tuple[int, int, int, int]
"""Left, bottom, width, height [pixels]."""


@dataclass(frozen=True)
class Shape:
    """Size and boxes of a picture; what has no box is not drawn.

    map_room : the map is as large as fits into it, in its middle
    bar : the colour bar, with room for its words above and its numbers below
    legend_columns : the four signs stand in one column or two
    letters : dots per inch, which make the letters of `look` large or small [pixels]
    """

    size: tuple[int, int]
    letters: int
    map_room: Box
    bar: Box
    legend: Box
    legend_columns: int
    small_print: Box
    clock: Box
    progress: Box | None = None
    name: Box | None = None
    title: Box | None = None
    explanation: Box | None = None


SHAPES = {
    "landscape": Shape(
        size=(1920, 1080),
        letters=160,
        map_room=(44, 44, 1116, 992),
        name=(1204, 976, 672, 52),
        title=(1204, 896, 672, 72),
        explanation=(1204, 668, 672, 206),
        clock=(1204, 534, 672, 60),
        progress=(1204, 514, 672, 12),
        bar=(1204, 392, 672, 34),
        legend=(1204, 156, 672, 164),
        legend_columns=2,
        small_print=(1204, 40, 672, 90),
    ),
    "square": Shape(
        size=(1080, 1080),
        letters=150,
        map_room=(36, 240, 664, 590),
        name=(36, 1002, 1008, 44),
        title=(36, 926, 1008, 74),
        clock=(36, 866, 1008, 50),
        progress=(36, 848, 1008, 10),
        explanation=(724, 496, 320, 336),
        legend=(724, 240, 320, 236),
        legend_columns=1,
        bar=(36, 156, 1008, 28),
        small_print=(36, 22, 1008, 72),
    ),
    "portrait": Shape(
        size=(1080, 1920),
        letters=170,
        map_room=(44, 560, 992, 880),
        name=(44, 1808, 992, 54),
        title=(44, 1718, 992, 84),
        explanation=(44, 1556, 992, 150),
        clock=(44, 1480, 992, 58),
        progress=(44, 1458, 992, 12),
        bar=(44, 452, 992, 36),
        legend=(44, 226, 992, 140),
        legend_columns=2,
        small_print=(44, 70, 992, 110),
    ),
}
"""16:9, 1:1 and 9:16, for films and stills."""

PAGE = Shape(
    size=(1000, 1130),
    letters=140,
    map_room=(10, 290, 980, 780),
    clock=(10, 1080, 980, 46),
    bar=(10, 206, 980, 28),
    legend=(10, 44, 980, 96),
    legend_columns=2,
    small_print=(10, 6, 980, 32),
)
"""For a page, which says the rest."""


@dataclass(frozen=True)
class PosterLayout(MapPlace):
    """A shape with the map of a grid in it."""

    shape: Shape
    map_box: Box

    @property
    def size(self) -> tuple[int, int]:
        """Width and height."""
        return self.shape.size


def plan_poster(shape: Shape, aspect: float) -> PosterLayout:
    """Layout of a shape for a map of a given width by height."""
    left, bottom, width, height = shape.map_room
    map_width = max(2, min(width, round(height * aspect)))
    map_height = max(2, min(height, round(width / aspect)))
    corner = left + (width - map_width) // 2, bottom + (height - map_height) // 2
    return PosterLayout(shape, (*corner, map_width, map_height))
