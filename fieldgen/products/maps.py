"""Hourly maps: one picture an hour, all of a run with the same base and the same colours.

A map shows the cells of the field as they are, in the projection of the grid. The relief changes
the brightness of a land cell by at most `look.RELIEF_STRENGTH` either way, and over all land not
at all; cells of the sea have exactly the colours of the colour bar. Nothing is read or fetched
beyond the geometries that the caller passes.

Pictures are arrays (row, column, channel) with the top row first; fields have the south row first.
Positions in a picture are counted in pixels from its lower left corner.
"""

import json
import shutil
import unicodedata
from contextlib import contextmanager
from dataclasses import dataclass
from functools import cache
from pathlib import Path

import cartopy.crs as ccrs
import matplotlib.style
import numpy as np
import pyproj
import shapely
import xarray as xr
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.cm import ScalarMappable
from matplotlib.collections import LineCollection, PathCollection
from matplotlib.colors import LightSource, LinearSegmentedColormap, Normalize, to_rgb
from matplotlib.figure import Figure
from matplotlib.font_manager import FontProperties
from matplotlib.lines import Line2D
from matplotlib.patches import Rectangle
from matplotlib.textpath import TextPath
from matplotlib.ticker import MaxNLocator, MultipleLocator
from matplotlib.transforms import Affine2D, IdentityTransform
from PIL import Image
from shapely.geometry import shape as build_geometry

from fieldgen.errors import InputError
from fieldgen.products import look
from fieldgen.products.atomic import whole_file
from fieldgen.products.metadata import CAUTION

DOTS_PER_INCH = 100
LARGEST_MAP = (1000, 880)  # width, height [pixels]
SMALLEST_FIGURE = (920, 690)  # width, height [pixels]
LEFT, RIGHT, TOP, BOTTOM = 85, 330, 105, 90  # margins round the map [pixels]
EDGE = 30  # between words and the edge of the picture [pixels]
LABEL_ROOM = (150, 130)  # for a meridian, a parallel and its label [pixels]
TICK_ROOM = 27  # for a label of the colour bar [pixels]
LEGEND_ROOM = 240  # for all of the legend and a gap over it [pixels]
LEGEND_PITCH = 34  # between rows of the legend [pixels]
SWATCH = (22, 34)  # height, width of a patch in the legend [pixels]
DOT_SIZE, CROSS_SIZE = 10.0, 8.0  # diameters of a station [points]
DOT_RADIUS = 8.0  # room for a station [pixels]
VALUE_BOX = (22, 15)  # room for a station's value, width and height [pixels]
VALUE_PLACES = np.array([(20, 0), (-20, 0), (0, 17), (0, -17)])  # from the dot [pixels]
EARTH_DEGREE = 111_195.0  # length of a degree on a sphere of 6371 km [m]
PNG_COMPRESSION = 2
LINE_STEP = 0.05  # longest straight piece of a coast or river [degrees]


class MapPainter:
    """A map whose base is drawn once and whose hours are painted over it one after another.

    Parameters
    ----------
    fields_like : xarray.Dataset
        A field dataset (time, y, x) with the grid, terrain and flags of all hours to come.
    network_name : str
        Printed as it is, without control characters.
    limits : (float, float)
        Colour limits of all hours [kg m-2]; values beyond take the colours of the ends.
    coast, rivers : sequences of shapely geometries
        In longitude and latitude [degrees]. Without a coast the outline of the grid's sea cells
        is drawn.
    """

    def __init__(self, fields_like, *, network_name, limits, coast=(), rivers=()):
        self.flag_bits = read_flag_bits(fields_like["flag"])
        self.grid = read_map_grid(fields_like, self.flag_bits)
        self.layout = plan_layout(self.grid.aspect)
        self.colours = make_colour_map()
        self.norm = Normalize(*limits, clip=True)
        self.relief = shade_relief(self.grid)
        self.hatches = {
            meaning: ink_pattern(look.hatch_pattern(hatch, self.layout.map_shape))
            for meaning, hatch in look.HATCHES.items()
            if meaning in self.flag_bits
        }
        with drawing_style():
            self._draw_base(network_name, fields_like.attrs.get("fieldgen_version"), coast, rivers)
            self.base = self._capture_base()
            self.time_text, self.facts_text = draw_hourly_words(self.figure, self.layout)

    def _draw_base(self, network_name, version, coast, rivers):
        """Everything that is the same in all hours, on a clear ground."""
        self.figure, self.axes = make_figure(self.layout, self.grid)
        draw_coast(self.axes, self.grid, coast)
        draw_lines(self.axes, self.grid, rivers, color=look.RIVER_COLOUR, linewidth=1.0)
        draw_graticule(self.axes, self.grid, self.layout)
        draw_colour_bar(self.figure, self.layout, self.colours, self.norm)
        draw_legend(self.figure, self.layout, self.hatches, self.colours)
        draw_title(self.figure, self.layout, network_name)
        draw_small_print(self.figure, self.layout, version)

    def _capture_base(self):
        """The base as a picture, clear where the field will show through."""
        self.figure.canvas.draw()
        return Image.fromarray(np.array(self.figure.canvas.buffer_rgba()))

    def paint_field(self, pwv, flag):
        """The field of one hour as the pixels of the map.

        Parameters
        ----------
        pwv : array (y, x)
            Precipitable water vapour [kg m-2]; NaN is painted in `look.MISSING_COLOUR`.
        flag : integer array (y, x)
            Bit mask; cells with a flag of `look.HATCHES` are hatched unless missing.

        Returns
        -------
        PIL.Image.Image
            Red, green and blue.
        """
        missing = np.isnan(pwv)
        cells = self.colours(self.norm(np.ma.masked_array(pwv, missing)))[..., :3]
        cells = np.clip(cells * self.relief[..., np.newaxis], 0, 1)
        cells[missing] = to_rgb(look.MISSING_COLOUR)
        pixels = enlarge_cells((255 * cells + 0.5).astype(np.uint8), self.layout.map_shape)
        picture = Image.fromarray(pixels)
        for meaning, (ink, cover) in self.hatches.items():
            flagged = (flag & self.flag_bits[meaning] != 0) & ~missing
            if flagged.any():
                mask = cover * enlarge_cells(flagged, self.layout.map_shape)
                picture.paste(ink, mask=Image.fromarray(mask))
        return picture

    def place_stations(self, stations):
        """The artists of a network's stations, to be handed to `draw_hour`.

        Parameters
        ----------
        stations : xarray.Dataset
            With longitude and latitude (station) [degrees].
        """
        with drawing_style():
            return StationMarks(self.axes, self.grid, stations)

    def draw_hour(self, field, observed, marks):
        """The map of one hour.

        Parameters
        ----------
        field : xarray.Dataset
            One hour of a field dataset (y, x).
        observed : xarray.Dataset
            One hour of a station dataset (station): pwv [kg m-2] at the stations and flag, 0 for
            stations used.
        marks : StationMarks
            From `place_stations`, for the same stations.

        Returns
        -------
        PIL.Image.Image
            Red, green and blue.
        """
        page = Image.new("RGBA", self.layout.size, look.PAPER_COLOUR)
        picture = self.paint_field(field["pwv"].values, field["flag"].values)
        page.paste(picture, self.layout.map_corner)
        page.alpha_composite(self.base)
        marks.show(observed["pwv"].values, observed["flag"].values, self.colours, self.norm)
        self.time_text.set_text(format_hour(*read_hour_bounds(field)))
        self.facts_text.set_text(format_facts(field))
        return self._draw_over(page, [*marks.artists, self.time_text, self.facts_text])

    def _draw_over(self, page, artists):
        """The page with artists drawn over it, in place of all that the canvas held."""
        canvas = self.figure.canvas
        pixels = np.asarray(canvas.buffer_rgba())
        pixels[...] = page
        for artist in artists:
            artist.draw(canvas.get_renderer())
        return Image.fromarray(pixels).convert("RGB")


class StationMarks:
    """Dots, crosses and values of one network's stations.

    Parameters
    ----------
    axes : cartopy GeoAxes
    grid : MapGrid
    stations : xarray.Dataset
        With longitude and latitude (station) [degrees].
    """

    def __init__(self, axes, grid, stations):
        self.positions = grid.project(stations["longitude"].values, stations["latitude"].values)
        self.rings, self.dots = scatter_twice(axes, "o", DOT_SIZE, 3.6, 1.1)
        self.cross_halos, self.crosses = scatter_twice(axes, "x", CROSS_SIZE, 3.6, 1.6)
        self.places = place_values(axes.transData.transform(self.positions), axes.bbox.extents)
        self.halos, self.values = (
            PathCollection([], offset_transform=IdentityTransform(), **style)
            for style in (
                {"color": look.PAPER_COLOUR, "linewidths": 2.6},
                {"color": look.INK_COLOUR, "linewidths": 0},
            )
        )
        for letters in (self.halos, self.values):
            axes.figure.add_artist(letters).set_transform(IdentityTransform())

    @property
    def artists(self):
        """All artists in drawing order."""
        marks = [self.cross_halos, self.crosses, self.rings, self.dots]
        return [*marks, self.halos, self.values]

    def show(self, pwv, flag, colours, norm):
        """Take on the values of one hour.

        Parameters
        ----------
        pwv : array (station)
            Precipitable water vapour at the stations [kg m-2].
        flag : integer array (station)
            0 for stations used; all others become crosses, as do used ones without a value.
        colours, norm : matplotlib Colormap and Normalize
            Those of the field.
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


def scatter_twice(axes, marker, size, wide, narrow):
    """No marks yet of a size [points]: light with wide edges, and dark with narrow ones above."""
    return [
        axes.scatter([], [], s=size**2, marker=marker, color=colour, linewidths=width)
        for colour, width in ((look.PAPER_COLOUR, wide), (look.INK_COLOUR, narrow))
    ]


def write_maps(fields, stations, folder, painter):
    """One map an hour and a copy of the newest, each complete as soon as it can be seen.

    Parameters
    ----------
    fields : xarray.Dataset
        Fields (time, y, x) on the grid that the painter was made for.
    stations : xarray.Dataset
        Stations (station, time); hours that it lacks have all stations crossed out.
    folder : path
        Made if need be. Maps are named ``pwv_YYYYMMDDTHHMMZ.png`` after the time coordinate;
        ``latest.png`` copies the newest map in the folder, be it from this run or an earlier one.
    painter : MapPainter

    Returns
    -------
    list of pathlib.Path
        The hourly maps in order of time.

    Raises
    ------
    OutputError
        The folder or a map cannot be written.
    """
    folder = Path(folder)
    marks = painter.place_stations(stations)
    observed = select_hours(stations, fields["time"].values)
    paths = []
    for hour in range(fields.sizes["time"]):
        field = fields.isel(time=hour)
        picture = painter.draw_hour(field, observed.isel(time=hour), marks)
        paths.append(folder / f"pwv_{format_stamp(field['time'].values)}.png")
        write_picture(picture, paths[-1])
    if paths:
        copy_newest(folder)
    return paths


def select_hours(stations, time):
    """Values and flags of stations at given times; where they lack one, all are flagged 1."""
    series = {
        name: (("station", "time"), stations[name].transpose("station", "time").values)
        for name in ("pwv", "flag")
    }
    hours = xr.Dataset(series, coords={"time": stations["time"].values})
    return hours.reindex(time=time, fill_value={"flag": 1})


def write_picture(picture, path):
    """A picture as a PNG file; makes the folder, raises OutputError."""
    with whole_file(path) as part:
        picture.save(part, format="PNG", compress_level=PNG_COMPRESSION)


def copy_newest(folder):
    """The newest hourly map of a folder as ``latest.png``; raises OutputError."""
    newest = max(folder.glob("pwv_*Z.png"))
    with whole_file(folder / "latest.png") as part:
        shutil.copyfile(newest, part)


def read_geometries(path):
    """Geometries of a GeoJSON file, such as a coast or rivers.

    Parameters
    ----------
    path : path
        A FeatureCollection, a Feature or a bare geometry in longitude and latitude [degrees].

    Returns
    -------
    list of shapely geometries
        Without features that have no geometry.

    Raises
    ------
    InputError
        The file is missing or is not GeoJSON.
    """
    try:
        document = json.loads(Path(path).read_text(encoding="utf-8"))
        geometries = [build_geometry(part) for part in list_geometries(document)]
    except OSError as error:
        raise InputError(
            f"{path}: the file cannot be read ({error.strerror}). Check the path."
        ) from error
    except (
        ValueError,
        TypeError,
        LookupError,
        AttributeError,
        shapely.errors.ShapelyError,
    ) as error:
        raise InputError(
            f"{path}: the content is not GeoJSON, expected a FeatureCollection, a Feature or "
            "a geometry in longitude and latitude. Convert the file to GeoJSON first."
        ) from error
    return geometries


def list_geometries(document):
    """The geometry members of a GeoJSON document that are not null."""
    features = document.get("features", [document])
    found = [part["geometry"] if part["type"] == "Feature" else part for part in features]
    return [geometry for geometry in found if geometry]


@dataclass(frozen=True)
class MapGrid:
    """What a map needs to know of the grid.

    Projected positions are in metres, or for a geographic grid in degrees east of its middle.
    """

    projection: ccrs.Projection
    extent: tuple  # west, east, south, north edge in the projection
    region: tuple  # west, east, south, north [degrees]
    aspect: float  # width by height on the map
    cell: tuple  # width and height of a cell in the middle [m]
    terrain: np.ndarray  # (y, x) [m]
    sea: np.ndarray  # (y, x) bool

    def project(self, longitude, latitude):
        """Positions (point, 2) in the projection from arrays (point) [degrees]."""
        return self.projection.transform_points(ccrs.PlateCarree(), longitude, latitude)[:, :2]


def read_map_grid(fields, flag_bits):
    """The grid of a field dataset as a `MapGrid`."""
    crs = pyproj.CRS.from_wkt(fields["crs"].attrs["crs_wkt"])
    if crs.is_geographic:
        projection, extent, region, unit = read_geographic_frame(fields)
    else:
        projection, extent, region, unit = read_projected_frame(fields, crs)
    terrain = fields["terrain"].values
    sea = fields["flag"].isel(time=0).values & flag_bits.get("sea", 0) != 0
    width, height = (extent[1] - extent[0]) * unit[0], (extent[3] - extent[2]) * unit[1]
    return MapGrid(
        projection=projection,
        extent=extent,
        region=region,
        aspect=width / height,
        cell=(width / terrain.shape[1], height / terrain.shape[0]),
        terrain=terrain,
        sea=sea | np.isnan(terrain),
    )


def read_geographic_frame(fields):
    """Projection, extent, region and metres in a unit (x, y) of a grid of longitude, latitude."""
    west, east, south, north = region = read_edges(fields)
    middle = (west + east) / 2
    projection = ccrs.PlateCarree(central_longitude=middle)
    unit = EARTH_DEGREE * np.cos(np.radians((south + north) / 2)), EARTH_DEGREE
    return projection, (west - middle, east - middle, south, north), region, unit


def read_projected_frame(fields, crs):
    """Projection, extent, region and metres in a unit (x, y) of a grid in a projection.

    The projection is bounded a little outside the grid, wherever else its own area of use lies.
    """
    west, east, south, north = extent = read_edges(fields)
    margin = 0.02 * max(east - west, north - south)
    projection = ccrs.Projection(crs)
    projection.bounds = (west - margin, east + margin, south - margin, north + margin)
    projection.threshold = margin / 20
    longitude, latitude = fields["longitude"].values, fields["latitude"].values
    middle = longitude[longitude.shape[0] // 2, longitude.shape[1] // 2]
    longitude = middle + (longitude - middle + 180) % 360 - 180
    region = longitude.min(), longitude.max(), latitude.min(), latitude.max()
    unit = crs.axis_info[0].unit_conversion_factor
    return projection, extent, region, (unit, unit)


def read_edges(fields):
    """Outer edges of the cells: west, east, south, north, in the units of x and y."""
    x, y = fields["x"].values, fields["y"].values
    half_x, half_y = (x[1] - x[0]) / 2, (y[1] - y[0]) / 2
    edges = x[0] - half_x, x[-1] + half_x, y[0] - half_y, y[-1] + half_y
    return tuple(float(edge) for edge in edges)


def read_flag_bits(flag):
    """Flag meaning -> bit, from the CF attributes of a flag variable."""
    masks = np.atleast_1d(flag.attrs["flag_masks"])
    return dict(zip(flag.attrs["flag_meanings"].split(), masks, strict=True))


def read_hour_bounds(field):
    """Start and end of one hour, from the CF bounds of its time."""
    return tuple(field[field["time"].attrs["bounds"]].values)


def shade_relief(grid):
    """Factor for the brightness of each cell, lit from the north-west.

    Returns
    -------
    array (y, x)
        1 on the sea and on average over land, nowhere farther from 1 than
        `look.RELIEF_STRENGTH`.
    """
    factor = np.ones(grid.terrain.shape)
    land = ~grid.sea
    # LightSource takes the first row for the north one, so our steps in y are negative to it.
    light = LightSource(azdeg=315, altdeg=45).hillshade(
        np.where(grid.sea, 0, grid.terrain), dx=grid.cell[0], dy=-grid.cell[1]
    )
    if land.any():
        departure = light[land] - light[land].mean()
        largest = np.abs(departure).max()
        factor[land] += look.RELIEF_STRENGTH * departure / (largest if largest > 0 else 1)
    return factor


def enlarge_cells(cells, shape):
    """Cells (y, x, ...) as pixels (row, column, ...) of a given shape, top row first.

    Each pixel has the value of the cell that its centre lies in.
    """
    row = ((np.arange(shape[0]) + 0.5) / shape[0] * cells.shape[0]).astype(int)
    column = ((np.arange(shape[1]) + 0.5) / shape[1] * cells.shape[1]).astype(int)
    return cells.take(row[::-1], axis=0).take(column, axis=1)


def ink_pattern(inked):
    """Ink for the pixels of a pattern: dark, with a light edge to be seen on any colour.

    Parameters
    ----------
    inked : bool array (row, column)

    Returns
    -------
    ink : PIL.Image.Image
        Red, green and blue.
    cover : uint8 array (row, column)
        How far the ink covers what is below, 0 to 255.
    """
    edged = inked.copy()
    edged[:, 1:] |= inked[:, :-1]
    ink = np.where(inked[..., np.newaxis], colour_bytes(look.INK_COLOUR), 255).astype(np.uint8)
    cover = np.where(edged, round(255 * look.HATCH_STRENGTH), 0).astype(np.uint8)
    return Image.fromarray(ink), cover


def colour_bytes(colour):
    """Red, green and blue of a colour, 0 to 255."""
    return np.round(255 * np.array(to_rgb(colour))).astype(np.uint8)


def make_colour_map():
    """The colours of vapour as a matplotlib colour map."""
    return LinearSegmentedColormap.from_list("pwv", look.PWV_COLOURS, N=256)


@dataclass(frozen=True)
class Layout:
    """Where things are on a picture [pixels from its lower left corner]."""

    size: tuple  # width, height of the picture
    map_box: tuple  # left, bottom, width, height of the map
    strip_left: int  # where the strip of colour bar and legend begins
    strip_bottom: int
    strip_top: int

    @property
    def map_shape(self):
        """Rows and columns of the map."""
        return self.map_box[3], self.map_box[2]

    @property
    def map_corner(self):
        """Column and row of the map's upper left pixel, counted from that of the picture."""
        left, bottom, _, height = self.map_box
        return left, self.size[1] - bottom - height


def plan_layout(aspect):
    """Layout for a map of a given width by height, which is as large as `LARGEST_MAP` allows."""
    width = min(LARGEST_MAP[0], round(LARGEST_MAP[1] * aspect))
    height = min(LARGEST_MAP[1], round(LARGEST_MAP[0] / aspect))
    figure_width = max(SMALLEST_FIGURE[0], LEFT + width + RIGHT)
    figure_height = max(SMALLEST_FIGURE[1], TOP + height + BOTTOM)
    return Layout(
        size=(figure_width, figure_height),
        map_box=(
            LEFT + (figure_width - LEFT - width - RIGHT) // 2,
            BOTTOM + (figure_height - TOP - height - BOTTOM) // 2,
            max(width, 1),
            max(height, 1),
        ),
        strip_left=figure_width - RIGHT + 35,
        strip_bottom=BOTTOM,
        strip_top=figure_height - TOP,
    )


def make_figure(layout, grid):
    """A clear figure and the axes of its map, which fill the map box to the pixel."""
    width, height = layout.size
    figure = Figure(
        (width / DOTS_PER_INCH, height / DOTS_PER_INCH), DOTS_PER_INCH, facecolor="none"
    )
    FigureCanvasAgg(figure)
    axes = figure.add_axes(fraction_of(layout, layout.map_box), projection=grid.projection)
    axes.patch.set_visible(False)
    axes.set_extent(grid.extent, crs=grid.projection)
    axes.set_aspect("auto")
    return figure, axes


def fraction_of(layout, box):
    """A box (left, bottom, width, height) [pixels] as fractions of the picture."""
    width, height = layout.size
    return box[0] / width, box[1] / height, box[2] / width, box[3] / height


def draw_coast(axes, grid, coast):
    """The coast on a map; without one, the outline of the grid's sea cells."""
    if coast:
        draw_lines(axes, grid, coast, color=look.COAST_COLOUR, linewidth=1.3)
    elif grid.sea.any() and not grid.sea.all():
        west, east, south, north = grid.extent
        rows, columns = grid.sea.shape
        x = west + (np.arange(columns) + 0.5) * (east - west) / columns
        y = south + (np.arange(rows) + 0.5) * (north - south) / rows
        axes.contour(x, y, grid.sea, levels=[0.5], colors=look.COAST_COLOUR, linewidths=1.3)


def draw_lines(axes, grid, geometries, *, color, linewidth):
    """Lines, and the outlines of areas, of geometries in longitude and latitude [degrees]."""
    lines = [
        grid.project(*shapely.get_coordinates(line).T)
        for line in clip_outlines(geometries, grid.region)
    ]
    axes.add_collection(LineCollection(lines, colors=color, linewidths=linewidth), autolim=False)


def clip_outlines(geometries, region):
    """Lines, and the outlines of areas, in and a little around a region.

    Parameters
    ----------
    geometries : sequence of shapely geometries
        In longitude and latitude [degrees], longitudes counted from any meridian.
    region : (float, float, float, float)
        West, east, south, north [degrees].

    Returns
    -------
    list of shapely geometries
        Lines; areas are outlined before they are cut, so that the cut leaves no line.
    """
    parts = shapely.force_2d(shapely.get_parts(np.array(list(geometries), dtype=object)))
    areas = shapely.get_dimensions(parts) == 2
    parts[areas] = shapely.boundary(parts[areas])
    west, east, south, north = region
    margin = 0.1 * max(east - west, north - south)
    window = shapely.MultiPolygon(
        [
            shapely.box(west - margin + turn, south - margin, east + margin + turn, north + margin)
            for turn in (-360, 0, 360)
        ]
    )
    parts = shapely.force_2d(shapely.get_parts(np.array(list(geometries), dtype=object)))
    areas = shapely.get_dimensions(parts) == 2
    parts[areas] = shapely.boundary(parts[areas])
    lines = shapely.get_parts(shapely.intersection(parts, window))
    lines = lines[(shapely.get_dimensions(lines) == 1) & ~shapely.is_empty(lines)]
    return list(shapely.segmentize(lines, LINE_STEP))


def draw_graticule(axes, grid, layout):
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


def choose_ticks(low, high, most):
    """Round numbers from low to high, at most about as many as given, but room for one."""
    ticks = MaxNLocator(max(int(most), 1), steps=[1, 2, 2.5, 5, 10]).tick_values(low, high)
    return ticks[(ticks >= low) & (ticks <= high)]


def draw_colour_bar(figure, layout, colours, norm):
    """The colour bar in the strip over the legend; pointed ends take all values beyond."""
    height = layout.strip_top - layout.strip_bottom - LEGEND_ROOM - 40
    box = (layout.strip_left, layout.strip_top - 40 - height, 28, height)
    narrow = (norm.vmax - norm.vmin) / look.PWV_STEP * TICK_ROOM < height
    figure.colorbar(
        ScalarMappable(norm, colours),
        cax=figure.add_axes(fraction_of(layout, box)),
        extend="both",
        ticks=MultipleLocator(look.PWV_STEP if narrow else 2 * look.PWV_STEP),
    ).ax.tick_params(labelsize=look.TEXT_SIZE)
    draw_words(figure, (layout.strip_left, layout.strip_top), look.PWV_LABEL, va="top")


def draw_legend(figure, layout, hatches, colours):
    """What dots, crosses, patterns and grey mean, at the foot of the strip."""
    rows = [
        (draw_dot, colours(0.6), "station used, with its value"),
        (draw_cross, look.INK_COLOUR, "station not used this hour"),
        *(
            (draw_patch, make_patch(colours(0.35), hatch), look.HATCHES[meaning].label)
            for meaning, hatch in hatches.items()
        ),
        (draw_patch, make_patch(look.MISSING_COLOUR), look.MISSING_LABEL),
    ]
    for row, (draw_sample, sample, label) in enumerate(reversed(rows)):
        middle = layout.strip_bottom + LEGEND_PITCH * (row + 0.5)
        draw_sample(figure, (layout.strip_left + SWATCH[1] / 2, middle), sample)
        place = (layout.strip_left + SWATCH[1] + 12, middle)
        draw_words(figure, place, label, size=look.SMALL_SIZE, va="center")


def draw_dot(figure, place, colour):
    """The dot of a station used, in the legend."""
    draw_marker(figure, place, "o", markerfacecolor=colour, markersize=DOT_SIZE)


def draw_cross(figure, place, colour):
    """The cross of a station not used, in the legend."""
    draw_marker(figure, place, "x", markeredgecolor=colour, markersize=CROSS_SIZE, mew=1.6)


def draw_marker(figure, place, marker, **style):
    """A marker at a place [pixels] of the picture."""
    style = {"markeredgecolor": look.INK_COLOUR, **style}
    figure.add_artist(
        Line2D([place[0]], [place[1]], marker=marker, transform=IdentityTransform(), **style)
    )


def make_patch(colour, hatch=None):
    """Pixels (row, column, 3) of a patch in the legend, inked where there is a hatch."""
    height, width = SWATCH
    patch = Image.new("RGB", (width, height), tuple(colour_bytes(colour).tolist()))
    if hatch is not None:
        ink, cover = hatch
        box = (0, 0, width, height)
        patch.paste(ink.crop(box), mask=Image.fromarray(cover[:height, :width]))
    return np.asarray(patch)


def draw_patch(figure, place, pixels):
    """A patch with a thin frame about a place [pixels] of the picture."""
    height, width = pixels.shape[:2]
    left, bottom = round(place[0] - width / 2), round(place[1] - height / 2)
    figure.figimage(pixels, left, bottom, origin="upper")
    frame = {"fill": False, "linewidth": 0.6, "edgecolor": look.INK_COLOUR}
    figure.add_artist(
        Rectangle((left, bottom), width, height, transform=IdentityTransform(), **frame)
    )


def draw_title(figure, layout, network_name):
    """The network's name and the quantity, shortened to the width of the picture."""
    width, height = layout.size
    quantity = draw_words(figure, (EDGE, height - 40), look.PWV_TITLE, size=look.TITLE_SIZE)
    name = draw_words(
        figure, (EDGE, height - 40), clean_name(network_name), size=look.TITLE_SIZE, weight="bold"
    )
    gap = look.TITLE_SIZE
    shorten_to_width(name, width - 2 * EDGE - gap - quantity.get_window_extent().width)
    quantity.set_x(name.get_window_extent().x1 + gap)


def shorten_to_width(text, width):
    """Cut a text from its end until it is no wider than a width [pixels]."""
    words = text.get_text()
    while words and text.get_window_extent().width > width:
        words = words[:-1].rstrip()
        text.set_text(words + "…")


def draw_small_print(figure, layout, version):
    """Caution and version along the lower edge."""
    style = {"size": look.SMALL_SIZE, "color": look.QUIET_COLOUR}
    draw_words(figure, (EDGE, 20), CAUTION, **style)
    name = f"fieldgen {version}" if version else "fieldgen"
    draw_words(figure, (layout.size[0] - EDGE, 20), name, ha="right", **style)


def draw_hourly_words(figure, layout):
    """Two empty texts under the title, for the time and the facts of an hour."""
    width, height = layout.size
    time_text = draw_words(figure, (EDGE, height - 76), "")
    facts_text = draw_words(figure, (width - EDGE, height - 76), "", ha="right")
    return time_text, facts_text


def draw_words(figure, place, words, size=look.TEXT_SIZE, **style):
    """Words at a place [pixels] of the picture, every character as it is."""
    style = {"transform": IdentityTransform(), "parse_math": False, **style}
    return figure.text(*place, words, size=size, **style)


@cache
def outline_value(value):
    """The letters of a station's value as a path centred on the origin [pixels]."""
    size = look.VALUE_SIZE * DOTS_PER_INCH / 72
    letters = TextPath((0, 0), value, size=size, prop=FontProperties(family=look.FONT_FAMILY))
    box = letters.get_extents()
    return letters.transformed(Affine2D().translate(-(box.x0 + box.x1) / 2, -(box.y0 + box.y1) / 2))


def place_values(stations, map_box):
    """Places for the values of stations such that no value covers another or a dot.

    Parameters
    ----------
    stations : array (station, 2)
        Positions on the picture [pixels].
    map_box : (float, float, float, float)
        Left, bottom, right, top of the map [pixels].

    Returns
    -------
    dict of int to array (2)
        Station -> centre of its value [pixels]; stations without room, or outside the map, are
        left out. The same stations always get the same places, so that hours compare.
    """
    half_value = np.array(VALUE_BOX) / 2
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


def clean_name(name):
    """A name on one line without control characters."""
    kept = (" " if unicodedata.category(letter)[0] in "CZ" else letter for letter in name)
    return " ".join("".join(kept).split())


def format_stamp(time):
    """A time as in the names of files, such as 20260914T1300Z."""
    return np.datetime_as_string(time, "m").replace("-", "").replace(":", "") + "Z"


def format_hour(start, end):
    """The interval of an hour, such as 13:00–14:00 UTC of a day; a day ends at 24:00."""
    day, begin = np.datetime_as_string(start, "m").split("T")
    finish = np.datetime_as_string(end, "m").split("T")[1].replace("00:00", "24:00")
    return f"mean over {begin}–{finish} UTC, {day}"


def format_facts(field):
    """Station count and scale height of one hour."""
    count, scale_height = int(field["station_count"]), float(field["scale_height"])
    facts = f"{count} station{'' if count == 1 else 's'} used"
    if np.isfinite(scale_height):
        facts += f" · scale height {scale_height / 1000:.1f} km"
    return facts


@contextmanager
def drawing_style():
    """Matplotlib's own defaults with our letters, whatever the user's settings."""
    with matplotlib.style.context(["default", {"font.family": look.FONT_FAMILY}]):
        yield
