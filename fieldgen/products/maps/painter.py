"""The maps of a run: a base drawn once, and the hours painted over it one after another."""

from __future__ import annotations

import numpy as np
import xarray as xr
from PIL import Image

from fieldgen.products import look
from fieldgen.products.maps.cells import CellPainter
from fieldgen.products.maps.figure import draw_over, drawing_style, make_figure
from fieldgen.products.maps.grid import read_map_grid
from fieldgen.products.maps.layout import plan_layout
from fieldgen.products.maps.legend import draw_colour_bar, draw_legend
from fieldgen.products.maps.lines import draw_coast, draw_graticule, draw_rivers
from fieldgen.products.maps.stations import StationMarks
from fieldgen.products.maps.words import (
    draw_hourly_words,
    draw_small_print,
    draw_title,
    format_facts,
    format_hour,
    read_hour_bounds,
)


class MapPainter(CellPainter):
    """A map whose base is drawn once and whose hours are painted over it.

    fields_like : a field dataset (time, y, x) with the grid, terrain and flags of all hours to come
    network_name : printed as it is, without control characters
    limits : colour limits of all hours [kg m-2]; values beyond take the colours of the ends
    coast, rivers : shapely geometries in longitude and latitude [degrees]; without a coast the
        outline of the grid's sea cells is drawn
    """

    def __init__(self, fields_like: xr.Dataset, *, network_name: str, limits, coast=(), rivers=()):
        flag_bits = read_flag_bits(fields_like["flag"])
        grid = read_map_grid(fields_like, flag_bits["sea"])
        width, height = grid.size
        self.layout = plan_layout(width / height)
        super().__init__(grid, flag_bits, limits, self.layout.map_shape)
        with drawing_style():
            self._draw_base(network_name, fields_like.attrs["fieldgen_version"], coast, rivers)
            self.base = self._capture_base()
            self.time_text, self.facts_text = draw_hourly_words(self.figure, self.layout)

    def _draw_base(self, network_name, version, coast, rivers) -> None:
        """Everything that is the same in all hours, on a clear ground."""
        self.figure, self.axes = make_figure(self.layout, self.grid)
        draw_coast(self.axes, self.grid, coast)
        draw_rivers(self.axes, self.grid, rivers)
        draw_graticule(self.axes, self.grid, self.layout)
        draw_colour_bar(self.figure, self.layout, self.colours, self.norm)
        draw_legend(self.figure, self.layout, self.hatches, self.colours)
        draw_title(self.figure, self.layout, network_name)
        draw_small_print(self.figure, self.layout, version)

    def _capture_base(self) -> Image.Image:
        """The base as a picture, clear where the field will show through."""
        self.figure.canvas.draw()
        return Image.fromarray(np.array(self.figure.canvas.buffer_rgba()))

    def place_stations(self, stations: xr.Dataset) -> StationMarks:
        """Marks of a network's stations for `draw_hour`, from longitude, latitude [degrees]."""
        with drawing_style():
            return StationMarks(self.axes, self.grid, stations)

    def draw_hour(
        self, field: xr.Dataset, observed: xr.Dataset, marks: StationMarks
    ) -> Image.Image:
        """The map of one hour.

        field : one hour of a field dataset (y, x)
        observed : one hour of a station dataset (station): pwv [kg m-2] at the stations and flag,
            0 for stations used
        marks : from `place_stations`, for the same stations
        """
        page = Image.new("RGBA", self.layout.size, look.PAPER_COLOUR)
        picture = self.paint_field(field["pwv"].values, field["flag"].values)
        page.paste(picture, self.layout.map_corner)
        page.alpha_composite(self.base)
        marks.show(observed["pwv"].values, observed["flag"].values, self.colours, self.norm)
        self.time_text.set_text(format_hour(*read_hour_bounds(field)))
        self.facts_text.set_text(format_facts(field))
        return draw_over(page, self.figure, [*marks.artists, self.time_text, self.facts_text])


def read_flag_bits(flag: xr.DataArray) -> dict:
    """Flag meaning -> bit, from the CF attributes of a flag variable."""
    return dict(zip(flag.attrs["flag_meanings"].split(), flag.attrs["flag_masks"], strict=True))
