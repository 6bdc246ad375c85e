"""Coast, rivers, meridians and parallels on the axes of a map."""

from __future__ import annotations

import numpy as np
import shapely
from matplotlib.collections import LineCollection
from matplotlib.ticker import MaxNLocator

from fieldgen.products import look
from fieldgen.products.maps.geometries import clip_outlines
from fieldgen.products.maps.grid import MapGrid
from fieldgen.products.maps.layout import Layout

COAST_WIDTH, RIVER_WIDTH = 1.3, 1.0  # [points]
LABEL_ROOM = (150, 130)  # for a meridian, a parallel and its label [pixels]


def draw_coast(axes, grid: MapGrid, coast) -> None:
    """The coast on a map; without one, the outline of the grid's sea cells."""
    if coast:
        draw_outlines(axes, grid, coast, look.COAST_COLOUR, COAST_WIDTH)
    elif grid.sea.any() and not grid.sea.all():
        west, east, south, north = grid.extent
        rows, columns = grid.sea.shape
        x = west + (np.arange(columns) + 0.5) * (east - west) / columns
        y = south + (np.arange(rows) + 0.5) * (north - south) / rows
        axes.contour(x, y, grid.sea, levels=[0.5], colors=look.COAST_COLOUR, linewidths=COAST_WIDTH)


def draw_rivers(axes, grid: MapGrid, rivers) -> None:
    """Rivers, and the shores of lakes, on a map."""
    draw_outlines(axes, grid, rivers, look.RIVER_COLOUR, RIVER_WIDTH)


def draw_outlines(axes, grid: MapGrid, geometries, colour, width) -> None:
    """Lines, and the outlines of areas, of geometries in longitude and latitude [degrees]."""
    lines = [
        grid.project(*shapely.get_coordinates(line).T)
        for line in clip_outlines(geometries, grid.region)
    ]
    axes.add_collection(LineCollection(lines, colors=colour, linewidths=width), autolim=False)


def draw_graticule(axes, grid: MapGrid, layout: Layout) -> None:
    """Meridians and parallels, labelled below and on the left."""
    west, east, south, north = grid.region
    rows, columns = layout.map_shape
    meridians = choose_ticks(west, east, columns / LABEL_ROOM[0])
    parallels = choose_ticks(south, north, rows / LABEL_ROOM[1])
    axes.gridlines(
        draw_labels=["left", "bottom"],
        rotate_labels=False,
        color=look.INK_COLOUR,
        linewidth=0.5,
        alpha=0.25,
        xlocs=180 - (180 - meridians) % 360,
        ylocs=parallels,
        xlabel_style={"size": look.SMALL_SIZE},
        ylabel_style={"size": look.SMALL_SIZE},
    )


def choose_ticks(low: float, high: float, most: float) -> np.ndarray:
    """Round numbers from low to high, at most about as many as given, but room for one."""
    ticks = MaxNLocator(max(int(most), 1), steps=[1, 2, 2.5, 5, 10]).tick_values(low, high)
    return ticks[(ticks >= low) & (ticks <= high)]
