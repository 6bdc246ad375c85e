"""The map and the series as Bokeh figures, still without values: the browser fills them in.

Glyphs get numbers and numerals only; no name from a file is ever handed to them.
"""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np
from bokeh.core.properties import value
from bokeh.events import MouseMove, Tap
from bokeh.models import (
    BasicTicker,
    ColorBar,
    ColumnDataSource,
    CustomJS,
    DatetimeTickFormatter,
    LinearColorMapper,
    NoOverlap,
    Range1d,
    Span,
)
from bokeh.plotting import figure

from fieldgen.products import look
from fieldgen.products.maps.grid import MapGrid
from fieldgen.products.page.ground import draw_graticule, paint_relief
from fieldgen.products.page.layers import PWV_PALETTE

BAR_ROOM = 66  # below the map, for the colour bar [px]; page.css knows it too
FONT = "system-ui, 'DejaVu Sans', sans-serif"
GLYPH_FONT = value(FONT)  # or Bokeh takes it for the name of a column
BAND_COLOUR, LINE_COLOUR = "#c3d3e0", "#22577a"
NOW_COLOUR = "#c2410c"
SMALL_TOOLBAR = ":host { height: 140px !important; opacity: 1 !important; }"
NO_OUTLINE = ".bk-Canvas { --outline-width: 0px; }"
"""Styles: the tools cover their corner only, and no dots frame a figure that was clicked."""
RIVER_EDGE = "#5f93b3"  # shows rivers on light layers

HATCH_PATTERNS = {
    "extrapolated_in_height": "right_diagonal_line",
    "far_from_stations": "dot",
    "sigma_above_5_kg_m2": "left_diagonal_line",
}
"""Patterns of flagged cells; as on the maps: lines rising to the right, dots, lines falling."""


@dataclass
class Figures:
    """The roots of the page, and all models that the browser works with, by name."""

    roots: list = field(default_factory=list)
    models: dict = field(default_factory=dict)

    def source(self, name: str, *columns: str) -> ColumnDataSource:
        """An empty source that the browser knows by its name."""
        source = ColumnDataSource({column: [] for column in columns}, name=name)
        self.models[name] = source
        return source


def draw_figures(grid: MapGrid, outlines: dict[str, list[np.ndarray]]) -> Figures:
    """Both figures.

    outlines : as of `ground.read_outlines`
    """
    figures = Figures()
    _draw_map(figures, grid, outlines)
    _draw_series(figures)
    return figures


def _draw_map(figures: Figures, grid: MapGrid, outlines) -> None:
    width, height = (size / 2 for size in grid.size)
    plot = figure(
        name="map",
        x_range=Range1d(-width, width, bounds="auto"),
        y_range=Range1d(-height, height, bounds="auto"),
        sizing_mode="stretch_both",
        min_border=1,
        min_border_bottom=BAR_ROOM,
        tools="pan,wheel_zoom,box_zoom,reset",
        active_drag=None,
        active_scroll=None,
        toolbar_location="right",
        toolbar_inner=True,
        outline_line_color=look.INK_COLOUR,
        output_backend="canvas",
    )
    plot.toolbar.logo = None
    plot.toolbar.autohide = True
    plot.toolbar.stylesheets = [SMALL_TOOLBAR]
    plot.stylesheets = [NO_OUTLINE]
    plot.axis.visible = False
    plot.grid.visible = False
    _draw_cells(figures, plot, grid)
    _draw_lines(figures, plot, grid, outlines)
    _draw_stations(figures, plot)
    plot.js_on_event(Tap, CustomJS(code="fieldgenPage.pick(cb_obj.x, cb_obj.y)"))
    plot.js_on_event(MouseMove, CustomJS(code="fieldgenPage.point(cb_obj.x, cb_obj.y)"))
    moved = CustomJS(code="fieldgenPage.moved()")
    plot.js_on_change("inner_width", moved)
    plot.x_range.js_on_change("start", moved)
    plot.x_range.js_on_change("end", moved)
    figures.models["map"] = plot
    figures.roots.append(plot)


def _draw_cells(figures: Figures, plot, grid: MapGrid) -> None:
    """The colours, the relief over them, and the patterns of flagged cells."""
    width, height = grid.size
    box = {"x": [-width / 2], "y": [-height / 2], "dw": [width], "dh": [height]}
    mapper = LinearColorMapper(
        palette=list(PWV_PALETTE), low=0, high=1, nan_color=look.MISSING_COLOUR
    )
    image = ColumnDataSource(
        {"image": [np.full(grid.sea.shape, np.nan, np.float32)], **box}, name="image"
    )
    plot.image("image", "x", "y", "dw", "dh", source=image, color_mapper=mapper)
    relief = ColumnDataSource({"image": [paint_relief(grid)], **box})
    plot.image_rgba("image", "x", "y", "dw", "dh", source=relief)
    for meaning, pattern in HATCH_PATTERNS.items():
        plot.quad(
            "left", "right", "bottom", "top",
            source=figures.source(f"cells_{meaning}", "left", "right", "bottom", "top"),
            fill_alpha=0, line_alpha=0, hatch_pattern=pattern, hatch_color=look.INK_COLOUR,
            hatch_alpha=look.HATCH_STRENGTH, hatch_scale=9 if pattern != "dot" else 6,
            hatch_weight=1,
        )  # fmt: skip
    bar = ColorBar(
        color_mapper=mapper, orientation="horizontal", height=16,
        location=(0, 0), padding=4, title=" ", title_text_font=FONT, title_text_font_size="15px",
        title_text_font_style="normal", title_text_color=look.INK_COLOUR,
        major_label_text_font=FONT, major_label_text_font_size="14px",
        major_label_text_color=look.INK_COLOUR, ticker=BasicTicker(desired_num_ticks=6),
        major_tick_line_color=look.INK_COLOUR,
    )  # fmt: skip
    plot.add_layout(bar, "below")
    figures.models |= {"image": image, "mapper": mapper, "bar": bar}


def _draw_lines(figures: Figures, plot, grid: MapGrid, outlines) -> None:
    graticule, labels = draw_graticule(grid)
    _draw_paths(plot, graticule, look.INK_COLOUR, 0.5, alpha=0.25)
    catchments = _draw_paths(
        plot, outlines["catchments"], look.INK_COLOUR, 1.0, alpha=0.7, dash="4 3"
    )
    _draw_paths(plot, outlines["rivers"], RIVER_EDGE, 2.2)
    _draw_paths(plot, outlines["rivers"], look.RIVER_COLOUR, 1.1)
    _draw_paths(plot, outlines["coast"], look.COAST_COLOUR, 1.5)
    places = {"x": [], "y": [], "text": []}
    for place in labels:
        for column, part in zip(places.values(), place, strict=True):
            column.append(part)
    _draw_text(plot, ColumnDataSource(places), x_offset=4, y_offset=-3, text_font_size="12px")
    figures.models["catchments"] = catchments


def _draw_paths(plot, paths, colour: str, width: float, *, alpha=1.0, dash="solid"):
    source = ColumnDataSource(
        {
            "xs": [path[:, 0].round(1).tolist() for path in paths],
            "ys": [path[:, 1].round(1).tolist() for path in paths],
        }
    )
    return plot.multi_line(
        "xs", "ys", source=source, line_color=colour, line_width=width, line_alpha=alpha,
        line_dash=dash, line_join="round",
    )  # fmt: skip


def _draw_text(plot, source: ColumnDataSource, **style) -> None:
    """Dark letters over a light halo."""
    style |= {"source": source, "text_font": GLYPH_FONT}
    paper = look.PAPER_COLOUR
    plot.text(
        "x", "y", "text", text_color=paper, text_outline_color=paper, text_outline_width=4, **style
    )
    plot.text("x", "y", "text", text_color=look.INK_COLOUR, **style)


def _draw_stations(figures: Figures, plot) -> None:
    """Crosses, dots and values, dark with a light edge to be seen on any colour."""
    crosses = figures.source("crosses", "x", "y")
    dots = figures.source("dots", "x", "y", "fill")
    values = figures.source("values", "x", "y", "text", "dx", "dy")
    chosen = figures.source("chosen", "x", "y")
    ink, paper = look.INK_COLOUR, look.PAPER_COLOUR
    plot.scatter("x", "y", source=crosses, marker="x", size=13, line_color=paper, line_width=6)
    plot.scatter("x", "y", source=crosses, marker="x", size=12, line_color=ink, line_width=2.8)
    plot.scatter("x", "y", source=dots, size=16, fill_color=paper, line_color=None)
    plot.scatter("x", "y", source=dots, size=13, fill_color="fill", line_color=ink, line_width=1.6)
    _draw_text(
        plot, values, x_offset="dx", y_offset="dy", text_align="center", text_baseline="middle",
        text_font_size="13px", text_font_style="bold",
    )  # fmt: skip
    for colour, width in ((paper, 6), (NOW_COLOUR, 3)):
        plot.scatter(
            "x", "y", source=chosen, size=24, fill_color=None, line_color=colour, line_width=width
        )


def _draw_series(figures: Figures) -> None:
    plot = figure(
        name="series",
        x_axis_type="datetime",
        x_range=Range1d(0, 1),
        y_range=Range1d(0, 1),
        sizing_mode="stretch_both",
        min_border_top=8,
        min_border_right=26,
        tools="",
        toolbar_location=None,
        outline_line_color=None,
        y_axis_label=look.PWV_LABEL,
        output_backend="canvas",
    )
    plot.stylesheets = [NO_OUTLINE]
    _style_axes(plot)
    band = figures.source("band", "start", "end", "low", "high")
    line = figures.source("line", "time", "pwv")
    others = figures.source("others", "time", "pwv")
    bars = figures.source("bars", "time", "low", "high")
    used = figures.source("used", "time", "pwv")
    rejected = figures.source("rejected", "time", "pwv")
    plot.quad("start", "end", "high", "low", source=band, color=BAND_COLOUR, line_width=0.5)
    plot.line("time", "pwv", source=others, color=look.QUIET_COLOUR, line_width=2, line_dash="6 4")
    plot.line("time", "pwv", source=line, color=LINE_COLOUR, line_width=2.5)
    plot.segment("time", "low", "time", "high", source=bars, color=LINE_COLOUR, line_width=1.2)
    plot.scatter("time", "pwv", source=used, size=7, color=LINE_COLOUR)
    plot.scatter(
        "time", "pwv", source=rejected, marker="x", size=10, color=NOW_COLOUR, line_width=2.2
    )
    now = Span(dimension="height", location=0, line_color=NOW_COLOUR, line_width=2)
    threshold = Span(
        dimension="width", location=0, line_color=look.INK_COLOUR, line_dash="2 4", visible=False
    )
    plot.add_layout(now)
    plot.add_layout(threshold)
    plot.js_on_event(Tap, CustomJS(code="fieldgenPage.goTo(cb_obj.x / 1000)"))
    figures.models |= {"series": plot, "now": now, "threshold": threshold}
    figures.roots.append(plot)


def _style_axes(plot) -> None:
    plot.axis.axis_label_text_font = plot.axis.major_label_text_font = FONT
    plot.axis.axis_label_text_font_size = "14px"
    plot.axis.axis_label_text_font_style = "normal"
    plot.axis.major_label_text_font_size = "13px"
    plot.axis.major_label_text_color = plot.axis.axis_label_text_color = look.INK_COLOUR
    plot.axis.minor_tick_line_color = None
    plot.grid.grid_line_color = "#e3e3e3"
    plot.xaxis.formatter = DatetimeTickFormatter(
        hours="%H:%M", hourmin="%H:%M", minutes="%H:%M", days="%d %b"
    )  # fmt: skip
    plot.xaxis.major_label_policy = NoOverlap()
    plot.xaxis.ticker.desired_num_ticks = 5
    plot.yaxis.ticker.desired_num_ticks = 5
    plot.xaxis.axis_label = "UTC"
