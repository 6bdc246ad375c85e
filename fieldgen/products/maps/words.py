"""Title, small print and the words of an hour."""

from __future__ import annotations

import numpy as np
import xarray as xr
from matplotlib.figure import Figure
from matplotlib.text import Text

from fieldgen.plain_text import one_line
from fieldgen.products import look
from fieldgen.products.maps.figure import draw_words
from fieldgen.products.maps.layout import EDGE, Layout
from fieldgen.products.metadata import CAUTION

TITLE_GAP = 19  # between the network's name and the quantity [pixels]


def draw_title(figure: Figure, layout: Layout, network_name: str) -> None:
    """The network's name and the quantity, shortened to the width of the picture."""
    width, height = layout.size
    place, size = (EDGE, height - 40), look.TITLE_SIZE
    name = draw_words(figure, place, one_line(network_name), size, weight="bold")
    quantity = draw_words(figure, place, look.PWV_TITLE, size)
    room = width - 2 * EDGE - TITLE_GAP - quantity.get_window_extent().width
    shorten_to_width(name, room)
    quantity.set_x(name.get_window_extent().x1 + TITLE_GAP)


def shorten_to_width(text: Text, width: float) -> None:
    """Cut a text from its end until it is no wider than a width [pixels]."""
    words = text.get_text()
    while words and text.get_window_extent().width > width:
        words = words[:-1].rstrip()
        text.set_text(words + "…")


def draw_small_print(figure: Figure, layout: Layout, version: str) -> None:
    """Caution and version along the lower edge."""
    width, _ = layout.size
    style = {"size": look.SMALL_SIZE, "color": look.QUIET_COLOUR}
    draw_words(figure, (EDGE, 20), CAUTION, **style)
    draw_words(figure, (width - EDGE, 20), f"fieldgen {version}", ha="right", **style)


def draw_hourly_words(figure: Figure, layout: Layout) -> tuple[Text, Text]:
    """Two empty texts under the title, for the time and the facts of an hour."""
    width, height = layout.size
    time_text = draw_words(figure, (EDGE, height - 76), "")
    facts_text = draw_words(figure, (width - EDGE, height - 76), "", ha="right")
    return time_text, facts_text


def read_hour_bounds(field: xr.Dataset) -> tuple:
    """Start and end of one hour, from the CF bounds of its time."""
    return tuple(field[field["time"].attrs["bounds"]].values)


def format_hour(start: np.datetime64, end: np.datetime64) -> str:
    """The interval of an hour, such as 13:00–14:00 UTC of a day; a day ends at 24:00."""
    day, begin = np.datetime_as_string(start, "m").split("T")
    finish = np.datetime_as_string(end, "m").split("T")[1].replace("00:00", "24:00")
    return f"mean over {begin}–{finish} UTC, {day}"


def format_facts(field: xr.Dataset) -> str:
    """Station count and scale height of one hour; a missing scale height is left out."""
    count, scale_height = int(field["station_count"]), float(field["scale_height"])
    facts = f"{count} station{'' if count == 1 else 's'} used"
    if np.isfinite(scale_height):
        facts += f" · scale height {scale_height / 1000:.1f} km"
    return facts
