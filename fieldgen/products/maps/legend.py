"""The strip beside a map: colour bar above, legend below."""

from __future__ import annotations

import numpy as np
from matplotlib.cm import ScalarMappable
from matplotlib.figure import Figure
from matplotlib.lines import Line2D
from matplotlib.patches import Rectangle
from matplotlib.ticker import MultipleLocator
from matplotlib.transforms import IdentityTransform
from PIL import Image

from fieldgen.products import look
from fieldgen.products.maps.cells import colour_bytes
from fieldgen.products.maps.figure import draw_words
from fieldgen.products.maps.layout import Layout
from fieldgen.products.maps.stations import CROSS_SIZE, CROSS_WIDTH, DOT_SIZE

TICK_ROOM = 27  # for a label of the colour bar [pixels]
LEGEND_ROOM = 240  # for all of the legend and a gap over it [pixels]
ROW_PITCH = 34  # between rows of the legend [pixels]
PATCH_WIDTH, PATCH_HEIGHT = 34, 22  # in the legend [pixels]


def draw_colour_bar(figure: Figure, layout: Layout, colours, norm) -> None:
    """The colour bar in the strip over the legend; pointed ends take all values beyond."""
    height = layout.strip_top - layout.strip_bottom - LEGEND_ROOM - 40
    box = (layout.strip_left, layout.strip_top - 40 - height, 28, height)
    roomy = (norm.vmax - norm.vmin) / look.PWV_STEP * TICK_ROOM < height
    figure.colorbar(
        ScalarMappable(norm, colours),
        cax=figure.add_axes(layout.fractions(box)),
        extend="both",
        ticks=MultipleLocator(look.PWV_STEP if roomy else 2 * look.PWV_STEP),
    ).ax.tick_params(labelsize=look.TEXT_SIZE)
    draw_words(figure, (layout.strip_left, layout.strip_top), look.PWV_LABEL, va="top")


def draw_legend(figure: Figure, layout: Layout, hatches: dict, colours) -> None:
    """What grey, patterns, crosses and dots mean, from the foot of the strip upwards.

    hatches : flag meaning -> ink and cover, as from `ink_hatch`
    """
    patches = {look.MISSING_LABEL: paint_patch(look.MISSING_COLOUR)} | {
        look.HATCHES[meaning].label: paint_patch(colours(0.35), hatches[meaning])
        for meaning in reversed(hatches)
    }
    labels = [*patches, "station not used this hour", "station used, with its value"]
    places = [draw_label(figure, layout, row, label) for row, label in enumerate(labels)]
    for place, patch in zip(places[:-2], patches.values(), strict=True):
        draw_patch(figure, place, patch)
    draw_marker(figure, places[-2], "x", markersize=CROSS_SIZE, markeredgewidth=CROSS_WIDTH)
    draw_marker(figure, places[-1], "o", markersize=DOT_SIZE, markerfacecolor=colours(0.6))


def draw_label(figure: Figure, layout: Layout, row: int, label: str) -> tuple[float, float]:
    """The label of a row counted from the foot; returns the middle of the row's sample."""
    middle = layout.strip_bottom + ROW_PITCH * (row + 0.5)
    place = (layout.strip_left + PATCH_WIDTH + 12, middle)
    draw_words(figure, place, label, size=look.SMALL_SIZE, va="center")
    return layout.strip_left + PATCH_WIDTH / 2, middle


def draw_marker(figure: Figure, place, marker: str, **style) -> None:
    """A dark-edged marker at a place [pixels] of the picture."""
    x, y = place
    style = {"marker": marker, "markeredgecolor": look.INK_COLOUR, **style}
    figure.add_artist(Line2D([x], [y], transform=IdentityTransform(), **style))


def paint_patch(colour, hatch=None) -> np.ndarray:
    """Pixels of a patch in the legend, inked where there is a hatch (ink and cover)."""
    size = (PATCH_WIDTH, PATCH_HEIGHT)
    patch = Image.new("RGB", size, tuple(colour_bytes(colour).tolist()))
    if hatch is not None:
        ink, cover = hatch
        mask = Image.fromarray(cover[:PATCH_HEIGHT, :PATCH_WIDTH])
        patch.paste(ink.crop((0, 0, *size)), mask=mask)
    return np.asarray(patch)


def draw_patch(figure: Figure, place, pixels: np.ndarray) -> None:
    """A patch with a thin frame about a place [pixels] of the picture."""
    left, bottom = round(place[0] - PATCH_WIDTH / 2), round(place[1] - PATCH_HEIGHT / 2)
    figure.figimage(pixels, left, bottom, origin="upper")
    style = {"fill": False, "linewidth": 0.6, "edgecolor": look.INK_COLOUR}
    figure.add_artist(
        Rectangle((left, bottom), PATCH_WIDTH, PATCH_HEIGHT, transform=IdentityTransform(), **style)
    )
