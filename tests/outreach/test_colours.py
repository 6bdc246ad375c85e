import numpy as np
from PIL import Image

from fieldgen.outreach.colours import make_palette, reduce_colours
from fieldgen.products import look
from tests.products.maps.invented import hex_bytes


def test_few_colours_keep_paper_and_the_colours_of_vapour():
    """Round trip: white stays white, and each colour of the bar comes near its own."""
    pixels = np.full((40, 300, 3), 252, np.uint8)  # nearly white, and much of it
    pixels[:30] = 255
    picture = Image.fromarray(pixels)
    palette = make_palette(picture, 96)
    assert reduce_colours(picture, palette).convert("RGB").getpixel((2, 2)) == (255, 255, 255)
    for colour in (*look.PWV_COLOURS, look.MISSING_COLOUR):
        plain = Image.new("RGB", (1, 1), hex_bytes(colour))
        kept = reduce_colours(plain, palette).convert("RGB").getpixel((0, 0))
        assert np.abs(np.subtract(kept, hex_bytes(colour))).max() <= 8
