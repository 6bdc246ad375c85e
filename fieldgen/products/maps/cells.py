"""The cells of a field as pixels: their colours, relief and patterns."""

from __future__ import annotations

import numpy as np
from matplotlib.colors import LightSource, LinearSegmentedColormap, Normalize, to_rgb
from PIL import Image

from fieldgen.products import look
from fieldgen.products.maps.grid import MapGrid


class CellPainter:
    """The cells of a field as pixels, in the same colours in all hours.

    grid : of all hours to come; flag_bits : flag meaning -> bit
    limits : colour limits [kg m-2]; values beyond take the colours of the ends
    shape : rows and columns of the pixels
    hatches : flag meaning -> `look.Hatch`
    """

    def __init__(self, grid: MapGrid, flag_bits: dict, limits, shape, hatches=look.HATCHES):
        self.grid = grid
        self.flag_bits = flag_bits
        self.shape = shape
        self.colours = make_colour_map()
        self.norm = Normalize(*limits, clip=True)
        self.relief = shade_relief(grid)
        self.hatches = {meaning: ink_hatch(hatch, shape) for meaning, hatch in hatches.items()}

    def paint_field(self, pwv: np.ndarray, flag: np.ndarray) -> Image.Image:
        """The field of one hour as pixels.

        pwv : precipitable water vapour (y, x) [kg m-2]; NaN is painted in `look.MISSING_COLOUR`
        flag : bit mask (y, x); cells with a flag of the hatches are hatched unless missing
        """
        missing = np.isnan(pwv)
        cells = self.colours(self.norm(pwv))[..., :3] * self.relief[..., np.newaxis]
        cells[missing] = to_rgb(look.MISSING_COLOUR)
        cells = (255 * np.clip(cells, 0, 1) + 0.5).astype(np.uint8)
        picture = Image.fromarray(enlarge_cells(cells, self.shape))
        for meaning, (ink, cover) in self.hatches.items():
            flagged = (flag & self.flag_bits[meaning] != 0) & ~missing
            if flagged.any():
                mask = cover * enlarge_cells(flagged, self.shape)
                picture.paste(ink, mask=Image.fromarray(mask))
        return picture


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
    return cells.take(column, axis=1).take(row[::-1], axis=0)  # the costly one copies whole rows


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
