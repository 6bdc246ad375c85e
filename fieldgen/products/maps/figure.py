"""A clear figure with the axes of a map, and words at places on it."""

from __future__ import annotations

import matplotlib.style
import numpy as np
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.figure import Figure
from matplotlib.text import Text
from matplotlib.transforms import IdentityTransform
from PIL import Image

from fieldgen.products import look
from fieldgen.products.maps.grid import MapGrid
from fieldgen.products.maps.layout import DOTS_PER_INCH, Layout


def drawing_style():
    """Context with matplotlib's own defaults and our letters, whatever the user's settings."""
    return matplotlib.style.context(["default", {"font.family": look.FONT_FAMILY}])


def make_figure(layout: Layout, grid: MapGrid, dots_per_inch: int = DOTS_PER_INCH):
    """A clear figure and the axes of its map, which fill the map box to the pixel."""
    width, height = layout.size
    inches = width / dots_per_inch, height / dots_per_inch
    figure = Figure(inches, dots_per_inch, facecolor="none")
    FigureCanvasAgg(figure)
    axes = figure.add_axes(layout.fractions(layout.map_box), projection=grid.projection)
    axes.patch.set_visible(False)
    axes.set_extent(grid.extent, crs=grid.projection)
    axes.set_aspect("auto")
    return figure, axes


def draw_words(figure: Figure, place, words: str, size: float = look.TEXT_SIZE, **style) -> Text:
    """Words at a place [pixels] of the picture, every character as it is."""
    return figure.text(
        *place, words, size=size, transform=IdentityTransform(), parse_math=False, **style
    )


def draw_over(page, figure: Figure, artists) -> Image.Image:
    """A page with artists of a figure drawn over it, in place of all that the canvas held.

    page : picture, or array (row, column, 4)
    """
    pixels = np.asarray(figure.canvas.buffer_rgba())
    pixels[...] = page
    for artist in artists:
        artist.draw(figure.canvas.get_renderer())
    return Image.fromarray(pixels).convert("RGB")
