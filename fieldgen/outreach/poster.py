"""The map of an hour as a picture that explains itself, in the shapes of screens."""

from __future__ import annotations

from itertools import product

import numpy as np
import xarray as xr
from matplotlib.cm import ScalarMappable
from matplotlib.patches import Rectangle
from matplotlib.ticker import MultipleLocator
from matplotlib.transforms import IdentityTransform
from PIL import Image

from fieldgen.outreach.folder import ProductFolder
from fieldgen.outreach.language import Language
from fieldgen.outreach.letters import draw_fitting, fit_lines
from fieldgen.outreach.shapes import Shape, plan_poster
from fieldgen.plain_text import one_line
from fieldgen.products import look
from fieldgen.products.maps.cells import CellPainter
from fieldgen.products.maps.figure import draw_over, draw_words, drawing_style, make_figure
from fieldgen.products.maps.grid import read_map_grid
from fieldgen.products.maps.legend import PATCH_WIDTH, draw_marker, draw_patch, paint_patch
from fieldgen.products.maps.lines import draw_coast, draw_rivers
from fieldgen.products.maps.painter import read_flag_bits
from fieldgen.products.maps.stations import CROSS_SIZE, CROSS_WIDTH, DOT_SIZE, StationMarks

TITLE_SIZE = 1.3 * look.TITLE_SIZE  # [points]
CLOCK_SIZE = 1.2 * look.TEXT_SIZE
MESSAGE_SIZE = 1.2 * look.TEXT_SIZE
TICK_ROOM = 2.6  # for a number of the colour bar, times the size of its letters
GAP = 10  # between signs and their words [pixels]
HATCHED = "far_from_stations"  # the flag that stands for all of `look.HATCHES`


class Overlay:
    """The few pixels of a picture (row, column, 4) that hide what they are laid on."""

    def __init__(self, picture: np.ndarray):
        self.places = np.nonzero(picture[..., 3])
        self.ink = picture[self.places]
        self.opaque = np.where([True, True, True, False], self.ink, 255)

    def lay_on(self, picture: np.ndarray) -> None:
        """Draw over an opaque picture (row, column, 4), in place."""
        cover = self.ink[:, 3:] / 255
        blend = cover * self.opaque + (1 - cover) * picture[self.places]
        picture[self.places] = (blend + 0.5).astype(np.uint8)


class Poster(CellPainter):
    """A picture whose base is drawn once and whose hours are painted over it.

    stations : longitude and latitude (station) [degrees] of all hours to come
    in_film : whether a bar shows how far the film has come
    """

    def __init__(
        self,
        folder: ProductFolder,
        stations: xr.Dataset,
        shape: Shape,
        language: Language,
        *,
        in_film: bool = False,
    ):
        flag_bits = read_flag_bits(folder.newest["flag"])
        grid = read_map_grid(folder.newest, flag_bits["sea"])
        width, height = grid.size
        self.layout = plan_poster(shape, width / height)
        hatches = {HATCHED: look.PUBLIC_HATCH}
        super().__init__(grid, flag_bits, folder.limits, self.layout.map_shape, hatches)
        self.shape_of_page, self.language = shape, language
        with drawing_style():
            self.figure, self.axes = make_figure(self.layout, grid, shape.letters)
            self._draw_base(folder, in_film)
            self.figure.canvas.draw()
            self.base, self.over_map = self._capture_base()
            self.marks = StationMarks(self.axes, grid, stations, valued=False)
            self.clock = self._draw_clock()
            self.message = self._draw_message()
            self.progress = self._draw_bar(shape.progress, look.SERIES_COLOUR) if in_film else None

    def _capture_base(self) -> tuple[np.ndarray, Overlay]:
        """The base on paper (row, column, 4), and its lines over the map."""
        base = Image.fromarray(np.array(self.figure.canvas.buffer_rgba()))
        page = Image.new("RGBA", self.layout.size, look.PAPER_COLOUR)
        page.alpha_composite(base)
        return np.array(page), Overlay(np.asarray(base)[self._map_window])

    @property
    def _map_window(self) -> tuple[slice, slice]:
        """Rows and columns of the map on the page."""
        column, row = self.layout.map_corner
        rows, columns = self.layout.map_shape
        return slice(row, row + rows), slice(column, column + columns)

    def _draw_base(self, folder: ProductFolder, in_film: bool) -> None:
        """Everything that is the same in all hours, on a clear ground."""
        shape, say = self.shape_of_page, self.language.say
        draw_coast(self.axes, self.grid, folder.lines.get("coast", ()))
        draw_rivers(self.axes, self.grid, folder.lines.get("rivers", ()))
        texts = (
            (shape.name, one_line(folder.network_name), look.TEXT_SIZE, {"weight": "bold"}),
            (shape.title, say("map_title"), TITLE_SIZE, {}),
            (shape.explanation, say("map_explanation"), look.TEXT_SIZE, {}),
        )
        for box, words, size, style in texts:
            if box is not None:
                draw_fitting(self.figure, box, words, size, **style)
        self._draw_colour_bar()
        self._draw_legend()
        small = f"{say('caution')} {say('version', version=folder.version)}"
        style = {"color": look.QUIET_COLOUR}
        draw_fitting(self.figure, shape.small_print, small, look.VALUE_SIZE, **style)
        if in_film:
            self._draw_bar(shape.progress, look.MISSING_COLOUR)

    def _draw_colour_bar(self) -> None:
        """The colour bar, with what its ends mean and the unit over it."""
        left, bottom, width, height = self.shape_of_page.bar
        tick_room = TICK_ROOM * look.SMALL_SIZE * self.figure.dpi / 72
        roomy = (self.norm.vmax - self.norm.vmin) / look.PWV_STEP * tick_room < width
        self.figure.colorbar(
            ScalarMappable(self.norm, self.colours),
            cax=self.figure.add_axes(self.layout.fractions(self.shape_of_page.bar)),
            orientation="horizontal",
            extend="both",
            ticks=MultipleLocator(look.PWV_STEP if roomy else 2 * look.PWV_STEP),
        ).ax.tick_params(labelsize=look.SMALL_SIZE)
        third, top = width // 3, bottom + height + 8
        places = zip(
            ("map_drier", "unit", "map_moister"), (0, 0.5, 1), ("left", "center", "right"),
            strict=True,
        )  # fmt: skip
        for key, share, side in places:
            room = third + (60 if key == "unit" else -30), round(2 * look.SMALL_SIZE * 2)
            words = self.language.say(key)
            lines, size = fit_lines(self.figure, words, room, look.SMALL_SIZE)
            place = (left + share * width, top)
            draw_words(self.figure, place, lines[0], size, ha=side, va="bottom")

    def _draw_legend(self) -> None:
        """What dots, crosses, the pattern and grey mean."""
        left, bottom, width, height = self.shape_of_page.legend
        columns = self.shape_of_page.legend_columns
        rows = 4 // columns
        pitch, column_width = height / rows, width // columns
        keys = ("map_station", "map_station_unused", "map_uncertain", "map_missing")
        cells = product(range(columns), range(rows))
        for key, (column, row) in zip(keys, cells, strict=True):
            edge, middle = left + column * column_width, bottom + height - (row + 0.5) * pitch
            self._draw_sign(key, (edge + PATCH_WIDTH / 2, middle))
            room = column_width - PATCH_WIDTH - 2 * GAP, pitch
            lines, size = fit_lines(self.figure, self.language.say(key), room, look.SMALL_SIZE)
            place = (edge + PATCH_WIDTH + GAP, middle)
            draw_words(self.figure, place, "\n".join(lines), size, va="center_baseline")

    def _draw_sign(self, key: str, place) -> None:
        colour = self.colours(0.5)
        if key == "map_station":
            draw_marker(self.figure, place, "o", markersize=DOT_SIZE, markerfacecolor=colour)
        elif key == "map_station_unused":
            style = {"markersize": CROSS_SIZE, "markeredgewidth": CROSS_WIDTH}
            draw_marker(self.figure, place, "x", **style)
        elif key == "map_uncertain":
            draw_patch(self.figure, place, paint_patch(colour, self.hatches[HATCHED]))
        else:
            draw_patch(self.figure, place, paint_patch(look.MISSING_COLOUR))

    def _draw_bar(self, box, colour: str) -> Rectangle:
        left, bottom, width, height = box
        style = {"facecolor": colour, "linewidth": 0, "transform": IdentityTransform()}
        return self.figure.add_artist(Rectangle((left, bottom), width, height, **style))

    def _draw_clock(self):
        """An empty text whose letters have room for the longest time."""
        left, bottom, width, height = self.shape_of_page.clock
        days = np.arange("2028-01-28", "2029-01-28", dtype="datetime64[M]").astype("datetime64[s]")
        late = days + np.timedelta64(27 * 24 + 22, "h")
        hours = [self.language.hour(one, one + np.timedelta64(1, "h")) for one in late]
        room = (width, height)
        size = min(fit_lines(self.figure, hour, room, CLOCK_SIZE, "bold")[1] for hour in hours)
        return draw_words(
            self.figure, (left, bottom + height / 2), "", size, weight="bold", va="center_baseline"
        )

    def _draw_message(self):
        """Words over the map where an hour has no field."""
        left, bottom, width, height = self.layout.map_box
        words = self.language.say("map_no_field")
        room = (0.8 * width, height)
        lines, size = fit_lines(self.figure, words, room, MESSAGE_SIZE)
        return draw_words(
            self.figure, (left + width / 2, bottom + height / 2), "\n".join(lines), size,
            ha="center", va="center",
            bbox={"facecolor": look.PAPER_COLOUR, "edgecolor": look.QUIET_COLOUR, "pad": 12},
        )  # fmt: skip

    def draw_hour(
        self, field: xr.Dataset | None, observed, words: str, share: float = 0.0
    ) -> Image.Image:
        """The picture of one hour.

        field : pwv [kg m-2] and flag (y, x), None where there is none
        observed : pwv [kg m-2] and flag (station), None for no stations
        words : the time; share : of the film that is over, 0 to 1
        """
        if field is None:
            pwv, flag = np.full(self.grid.sea.shape, np.nan), np.zeros(self.grid.sea.shape, int)
        else:
            pwv, flag = field["pwv"].values, field["flag"].values
        picture = np.array(self.paint_field(pwv, self._merge_flags(flag)).convert("RGBA"))
        self.over_map.lay_on(picture)
        self.base[self._map_window] = picture  # all else stays as it is
        return draw_over(self.base, self.figure, self._hourly_artists(pwv, observed, words, share))

    def _hourly_artists(self, pwv, observed, words: str, share: float) -> list:
        self.clock.set_text(words)
        artists = [self.clock]
        if observed is not None:
            self.marks.show(*observed, self.colours, self.norm)
            artists = [*self.marks.artists, self.clock]
        if not np.isfinite(pwv).any():
            artists.append(self.message)
        if self.progress is not None:
            self.progress.set_width(share * self.shape_of_page.progress[2])
            artists.append(self.progress)
        return artists

    def _merge_flags(self, flag: np.ndarray) -> np.ndarray:
        """One flag for all cells that `look.HATCHES` marks."""
        marked = sum(int(self.flag_bits[meaning]) for meaning in look.HATCHES)
        return np.where(flag & marked, int(self.flag_bits[HATCHED]), 0)
