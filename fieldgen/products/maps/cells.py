"""The cells of a field as pixels: their colours, relief and patterns."""

from __future__ import annotations

import numpy as np
from matplotlib.colors import LightSource, LinearSegmentedColormap, to_rgb
from PIL import Image

from fieldgen.products import look
from fieldgen.products.maps.grid import MapGrid


def make_colour_map() -> LinearSegmentedColormap:
    """The colours of vapour as a matplotlib colour map."""
    return LinearSegmentedColormap.from_list("pwv", look.PWV_COLOURS, N=256)


def colour_bytes(colour) -> np.ndarray:
    """Red, green and blue of a colour, 0 to 255."""
    return np.round(255 * np.array(to_rgb(colour))).astype(np.uint8)


def shade_relief(grid: MapGrid) -> np.ndarray:
    """Factor (y, x) for the brightness of each cell, lit from the north-west.

    1 on the sea and on average over land, nowhere farther from 1 than `look.RELIEF_STRENGTH`.
    """
    factor = np.ones(grid.terrain.shape)
    land = ~grid.sea
    if not land.any():
        return factor
    rows, columns = grid.terrain.shape
    width, height = grid.size
    # LightSource takes the first row for the north one, so our steps in y are negative to it.
    light = LightSource(azdeg=315, altdeg=45).hillshade(
        np.where(grid.sea, 0, grid.terrain), dx=width / columns, dy=-height / rows
    )
    departure = light[land] - light[land].mean()
    largest = np.abs(departure).max()
    if largest > 0:
        factor[land] += look.RELIEF_STRENGTH * departure / largest
    return factor


def enlarge_cells(cells: np.ndarray, shape: tuple[int, int]) -> np.ndarray:
    """Cells (y, x, ...) as pixels (row, column, ...) of a given shape, top row first.

    Each pixel has the value of the cell that its centre lies in.
    """
    row = ((np.arange(shape[0]) + 0.5) / shape[0] * cells.shape[0]).astype(int)
    column = ((np.arange(shape[1]) + 0.5) / shape[1] * cells.shape[1]).astype(int)
    return cells.take(row[::-1], axis=0).take(column, axis=1)


def ink_hatch(hatch: look.Hatch, shape: tuple[int, int]) -> tuple[Image.Image, np.ndarray]:
    """Ink of a hatch on a picture of a given shape, and its cover (row, column) from 0 to 255.

    The ink is dark, with a light edge to be seen on any colour; the cover tells how far it hides
    what is below.
    """
    inked = hatch.inked(*np.indices(shape, sparse=True))
    edged = inked.copy()
    edged[:, 1:] |= inked[:, :-1]
    ink = np.where(inked[..., np.newaxis], colour_bytes(look.INK_COLOUR), 255).astype(np.uint8)
    cover = np.where(edged, round(255 * look.HATCH_STRENGTH), 0).astype(np.uint8)
    return Image.fromarray(ink), cover
