"""Dots, crosses and values of stations."""

from __future__ import annotations

from functools import cache

import numpy as np
import xarray as xr
from matplotlib.collections import PathCollection
from matplotlib.font_manager import FontProperties
from matplotlib.path import Path
from matplotlib.textpath import TextPath
from matplotlib.transforms import Affine2D, IdentityTransform

from fieldgen.products import look
from fieldgen.products.maps.grid import MapGrid
from fieldgen.products.maps.layout import DOTS_PER_INCH

DOT_SIZE, CROSS_SIZE = 10.0, 8.0  # diameters [points]
DOT_WIDTH, CROSS_WIDTH = 1.1, 1.6  # of dark lines [points]
MARK_HALO, VALUE_HALO = 3.6, 2.6  # width of light lines below the dark ones [points]
DOT_RADIUS = 8.0  # room for a station [pixels]
VALUE_BOX = np.array([22, 15])  # room for a station's value, width and height [pixels]
VALUE_PLACES = np.array([(20, 0), (-20, 0), (0, 17), (0, -17)])  # from the dot [pixels]


class StationMarks:
    """Dots, crosses and values of one network's stations.

    stations : longitude and latitude (station) [degrees]
    valued : whether values are written beside the dots, where there is room
    """

    def __init__(self, axes, grid: MapGrid, stations: xr.Dataset, *, valued: bool = True):
        self.positions = grid.project(stations["longitude"].values, stations["latitude"].values)
        pixels = axes.transData.transform(self.positions)
        self.places = place_values(pixels, axes.bbox.extents) if valued else {}
        self.cross_halos = add_markers(axes, "x", CROSS_SIZE, look.PAPER_COLOUR, MARK_HALO)
        self.crosses = add_markers(axes, "x", CROSS_SIZE, look.INK_COLOUR, CROSS_WIDTH)
        self.rings = add_markers(axes, "o", DOT_SIZE, look.PAPER_COLOUR, MARK_HALO)
        self.dots = add_markers(axes, "o", DOT_SIZE, look.INK_COLOUR, DOT_WIDTH)
        self.halos = add_letters(axes.figure, look.PAPER_COLOUR, VALUE_HALO)
        self.values = add_letters(axes.figure, look.INK_COLOUR, 0)

    @property
    def artists(self) -> list:
        """All artists in drawing order."""
        marks = [self.cross_halos, self.crosses, self.rings, self.dots]
        return [*marks, self.halos, self.values]

    def show(self, pwv: np.ndarray, flag: np.ndarray, colours, norm) -> None:
        """Take on the values of one hour.

        pwv : precipitable water vapour (station) [kg m-2]
        flag : 0 for stations used (station); all others become crosses, as do used ones whose
            value is NaN
        colours, norm : matplotlib colour map and Normalize of the field
        """
        used = (flag == 0) & np.isfinite(pwv)
        for crosses in (self.cross_halos, self.crosses):
            crosses.set_offsets(self.positions[~used])
        for dots in (self.rings, self.dots):
            dots.set_offsets(self.positions[used])
        self.dots.set_facecolors(colours(norm(pwv[used])))
        valued = [station for station in self.places if used[station]]
        for letters in (self.halos, self.values):
            letters.set_paths([outline_value(f"{pwv[station]:.0f}") for station in valued])
            letters.set_offsets(np.reshape([self.places[station] for station in valued], (-1, 2)))


def add_markers(axes, marker: str, size: float, colour: str, width: float) -> PathCollection:
    """No markers yet, of a size and line width [points]."""
    return axes.scatter([], [], s=size**2, marker=marker, color=colour, linewidths=width)


def add_letters(figure, colour: str, width: float) -> PathCollection:
    """No letters yet, to be drawn at pixels of the picture with a line width [points]."""
    in_pixels = {"transform": IdentityTransform(), "offset_transform": IdentityTransform()}
    return figure.add_artist(PathCollection([], color=colour, linewidths=width, **in_pixels))


@cache
def outline_value(value: str) -> Path:
    """The letters of a station's value as a path centred on the origin [pixels]."""
    size = look.VALUE_SIZE * DOTS_PER_INCH / 72
    letters = TextPath((0, 0), value, size=size, prop=FontProperties(family=look.FONT_FAMILY))
    box = letters.get_extents()
    return letters.transformed(Affine2D().translate(-(box.x0 + box.x1) / 2, -(box.y0 + box.y1) / 2))


def place_values(stations: np.ndarray, map_box) -> dict[int, np.ndarray]:
    """Places for the values of stations such that no value covers another or a dot.

    stations : positions (station, 2) on the picture [pixels]
    map_box : left, bottom, right, top of the map [pixels]
    Returns station -> centre of its value [pixels]; stations without room, or outside the map,
    are left out. The same stations always get the same places, so that hours compare.
    """
    half_value = VALUE_BOX / 2
    lower, upper = np.reshape(map_box, (2, 2))
    centres, halves = list(stations), [np.full(2, DOT_RADIUS)] * len(stations)
    places = {}
    for station, position in enumerate(stations):
        if (position < lower).any() or (position > upper).any():
            continue
        for place in position + VALUE_PLACES:
            inside = (place - half_value >= lower).all() and (place + half_value <= upper).all()
            apart = np.abs(place - centres) >= half_value + halves
            if inside and apart.any(axis=1).all():
                places[station] = place
                centres.append(place)
                halves.append(half_value)
                break
    return places
