"""The course of areas over time as a picture, with their error bands."""

from __future__ import annotations

from pathlib import Path

import matplotlib.dates as mdates
import matplotlib.style
import numpy as np
from matplotlib.axes import Axes
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.figure import Figure

from fieldgen.areas.series import AreaSeries
from fieldgen.plain_text import one_line
from fieldgen.products import look
from fieldgen.products.atomic import whole_file
from fieldgen.products.metadata import CAUTION, fieldgen_version

WIDTH, PANEL_HEIGHT, MARGIN = 11.0, 1.9, 1.9  # [inch]
DOTS_PER_INCH = 100
MOST_PANELS = 12
"""Further areas stand in the table alone."""


def write_picture(series: AreaSeries, network_name: str, path: Path) -> Path:
    """Draw up to twelve areas, one above the other on the same scale; raises OutputError."""
    with matplotlib.style.context(look.PLOT_STYLE):
        figure = draw_series(series, network_name)
        with whole_file(path) as temporary:
            figure.savefig(temporary, format="png", dpi=DOTS_PER_INCH)
    return path


def draw_series(series: AreaSeries, network_name: str) -> Figure:
    """A panel for each area: mean over the area and its 68 % band [kg m-2]."""
    count = min(len(series.pwv), MOST_PANELS)
    height = MARGIN + PANEL_HEIGHT * count
    figure = Figure((WIDTH, height))
    FigureCanvasAgg(figure)
    panels = figure.subplots(count, 1, sharex=True, sharey=True, squeeze=False)[:, 0]
    figure.subplots_adjust(
        left=0.075, right=0.98, top=1.0 - 1.05 / height, bottom=0.85 / height, hspace=0.28
    )
    for index, axes in enumerate(panels):
        _draw_area(axes, series, index)
    _mark_time(panels[-1])
    figure.supylabel(look.PWV_LABEL, x=0.008, fontsize=look.SMALL_SIZE)
    name = one_line(network_name)
    for text, y, size in (
        (f"{look.PWV_TITLE} over catchments", 1.0 - 0.32 / height, look.TITLE_SIZE),
        (f"{name}; mean and 68 % band", 1.0 - 0.58 / height, look.TEXT_SIZE),
    ):
        figure.text(0.075, y, text, fontsize=size, color=look.INK_COLOUR, va="center")
    figure.text(
        0.075, 0.16 / height, f"{CAUTION} fieldgen {fieldgen_version()}",
        fontsize=look.VALUE_SIZE, color=look.QUIET_COLOUR, va="center",
    )  # fmt: skip
    return figure


def _draw_area(axes: Axes, series: AreaSeries, index: int) -> None:
    middle = series.bounds[:, 0] + (series.bounds[:, 1] - series.bounds[:, 0]) / 2
    mean, sigma = series.pwv[index], series.sigma[index]
    axes.fill_between(middle, mean - sigma, mean + sigma, color=look.BAND_COLOUR, linewidth=0)
    axes.plot(middle, mean, color=look.SERIES_COLOUR, marker="o", markersize=2.5, linewidth=1.3)
    title = f"{one_line(series.areas.names[index])}, {series.size[index] / 1e6:.0f} km²"
    axes.set_title(title, fontsize=look.TEXT_SIZE, pad=3, loc="left")
    axes.tick_params(labelsize=look.SMALL_SIZE)
    if not np.isfinite(mean).any():
        axes.text(0.5, 0.5, look.MISSING_LABEL, transform=axes.transAxes, ha="center")


def _mark_time(axes: Axes) -> None:
    locator = mdates.AutoDateLocator(minticks=3, maxticks=9)
    axes.xaxis.set_major_locator(locator)
    axes.xaxis.set_major_formatter(mdates.ConciseDateFormatter(locator))
    axes.set_xlabel("UTC", fontsize=look.SMALL_SIZE)
