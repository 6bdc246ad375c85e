"""Where things are on a picture; all lengths in pixels unless said otherwise."""

from __future__ import annotations

from dataclasses import dataclass

DOTS_PER_INCH = 100
LARGEST_MAP = (1000, 880)  # width, height
SMALLEST_PICTURE = (920, 690)  # width, height
LEFT, RIGHT, TOP, BOTTOM = 85, 330, 105, 90  # margins round the map
EDGE = 30  # between words and the edge of the picture


class MapPlace:
    """Where the map is on a picture: for layouts with a `size` and a `map_box`."""

    @property
    def map_shape(self) -> tuple[int, int]:
        """Rows and columns of the map."""
        return self.map_box[3], self.map_box[2]

    @property
    def map_corner(self) -> tuple[int, int]:
        """Column and row of the map's upper left pixel, counted from that of the picture."""
        left, bottom, _, height = self.map_box
        return left, self.size[1] - bottom - height

    def fractions(self, box) -> tuple[float, float, float, float]:
        """A box (left, bottom, width, height) as fractions of the picture."""
        width, height = self.size
        return box[0] / width, box[1] / height, box[2] / width, box[3] / height


@dataclass(frozen=True)
class Layout(MapPlace):
    """Size of a picture, and its map and strip in pixels from the lower left corner."""

    size: tuple[int, int]  # width, height of the picture
    map_box: tuple[int, int, int, int]  # left, bottom, width, height of the map
    strip_left: int  # where the strip of colour bar and legend begins
    strip_bottom: int
    strip_top: int


def plan_layout(aspect: float) -> Layout:
    """Layout for a map of a given width by height, which is as large as `LARGEST_MAP` allows."""
    map_width = max(1, min(LARGEST_MAP[0], round(LARGEST_MAP[1] * aspect)))
    map_height = max(1, min(LARGEST_MAP[1], round(LARGEST_MAP[0] / aspect)))
    width = max(SMALLEST_PICTURE[0], LEFT + map_width + RIGHT)
    height = max(SMALLEST_PICTURE[1], TOP + map_height + BOTTOM)
    return Layout(
        size=(width, height),
        map_box=(
            LEFT + (width - LEFT - map_width - RIGHT) // 2,
            BOTTOM + (height - TOP - map_height - BOTTOM) // 2,
            map_width,
            map_height,
        ),
        strip_left=width - RIGHT + 35,
        strip_bottom=BOTTOM,
        strip_top=height - TOP,
    )
