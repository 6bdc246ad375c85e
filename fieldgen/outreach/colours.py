"""Pictures in few colours, which keep those of the colour bar."""

from __future__ import annotations

import numpy as np
from PIL import Image

from fieldgen.products import look
from fieldgen.products.maps.cells import colour_bytes, make_colour_map

NEARLY_WHITE = 244  # brighter colours become white, as paper is


def make_palette(picture: Image.Image, count: int) -> Image.Image:
    """Colours of a picture and of all fields that may take its place, and white as it is."""
    width, height = picture.size
    shades = (255 * make_colour_map()(np.linspace(0, 1, width))[:, :3]).astype(np.uint8)
    both = Image.new("RGB", (width, 2 * height), tuple(colour_bytes(look.MISSING_COLOUR).tolist()))
    both.paste(picture, (0, 0))
    both.paste(Image.fromarray(np.tile(shades, (height * 3 // 4, 1, 1))), (0, height))
    chosen = both.quantize(count - 1, method=Image.Quantize.MEDIANCUT).getpalette()
    colours = np.reshape(chosen[: 3 * (count - 1)], (-1, 3))
    colours[(colours > NEARLY_WHITE).all(axis=1)] = 255
    palette = Image.new("P", (1, 1))
    palette.putpalette([*colours.ravel().tolist(), *colour_bytes(look.PAPER_COLOUR).tolist()])
    return palette


def reduce_colours(picture: Image.Image, palette: Image.Image) -> Image.Image:
    """A picture in the nearest colours of a palette."""
    return picture.quantize(palette=palette, dither=Image.Dither.NONE)
