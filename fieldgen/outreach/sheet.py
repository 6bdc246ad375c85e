"""The sheet of a month: one page of HTML that holds all it needs."""

from __future__ import annotations

import base64
import io
import re
from dataclasses import dataclass
from pathlib import Path

import jinja2
import matplotlib.style
import numpy as np
import xarray as xr
from markupsafe import Markup
from matplotlib.figure import Figure
from matplotlib.ticker import FuncFormatter
from PIL import Image

from fieldgen.errors import InputError
from fieldgen.outreach.colours import make_palette, reduce_colours
from fieldgen.outreach.facts import describe_map, read_facts
from fieldgen.outreach.folder import ProductFolder, Step, observed_at
from fieldgen.outreach.language import Language
from fieldgen.outreach.month import Month, read_month
from fieldgen.outreach.poster import Poster
from fieldgen.outreach.shapes import PAGE
from fieldgen.outreach.station_plots import add_axes, capture, new_figure, write_dates
from fieldgen.plain_text import one_line
from fieldgen.products import look
from fieldgen.products.atomic import whole_file

COURSE_SIZE = (1400, 430)  # pixels
PICTURE_COLOURS = 256  # of a picture in the page


@dataclass(frozen=True)
class Embedded:
    """A picture within the page: a data URI, its alternative text, and words below it."""

    source: str
    size: tuple[int, int]
    alt: str
    caption: str = ""


def parse_month(text: str) -> np.datetime64:
    """A month such as 2026-09; raises InputError for anything else."""
    if not re.fullmatch(r"\d{4}-(0[1-9]|1[0-2])", text, re.ASCII):
        raise InputError(f"month {text!r}: expected a year and a month, such as 2026-09.")
    return np.datetime64(text, "M")


def write_sheet(
    folder: ProductFolder, month: np.datetime64, path: Path, language: Language
) -> None:
    """Write the sheet of a month; raises InputError if it has no files, OutputError."""
    page = format_sheet(folder, month, language)
    with whole_file(path) as part:
        part.write_text(page, encoding="utf-8")


def format_sheet(folder: ProductFolder, month: np.datetime64, language: Language) -> str:
    """The page as text."""
    done, stations = read_month(folder, month)
    network = one_line(folder.network_name)
    when = language.month_of_year(month)
    pictures = {"mean_map": None, "extremes": []}
    if done.mean_field is not None:
        drawer = _MapDrawer(folder, stations, language)
        pictures = {
            "mean_map": drawer.mean(done, when),
            "extremes": [
                drawer.hour(*done.moistest, "sheet_moistest"),
                drawer.hour(*done.driest, "sheet_driest"),
            ],
        }
    return _environment().get_template("sheet.html").render(
        say=language.say,
        number=language.number,
        look=look,
        picture=_format_picture,
        title=language.say("sheet_title", network=network, month=when),
        network=network,
        version=folder.version,
        summary=_format_summary(done, language),
        course=embed(capture(draw_course(done, language)), describe_course(done, language, when)),
        stations=done.stations,
        **pictures,
    )  # fmt: skip


def _environment() -> jinja2.Environment:
    return jinja2.Environment(
        loader=jinja2.PackageLoader("fieldgen.outreach", ""),
        autoescape=True,
        undefined=jinja2.StrictUndefined,
        trim_blocks=True,
    )


def _format_picture(one: Embedded) -> Markup:
    form = Markup('<img src="{}" width="{}" height="{}" alt="{}">')
    return form.format(one.source, *one.size, one.alt)


def embed(picture: Image.Image, alt: str, caption: str = "") -> Embedded:
    """A picture as a data URI, in few colours to be small."""
    buffer = io.BytesIO()
    few = reduce_colours(picture, make_palette(picture, PICTURE_COLOURS))
    few.save(buffer, format="PNG", optimize=True)
    content = base64.b64encode(buffer.getvalue()).decode()
    return Embedded(f"data:image/png;base64,{content}", picture.size, alt, caption)


def _format_summary(done: Month, language: Language) -> str:
    coverage = language.say(
        "sheet_coverage", made=done.made, possible=done.possible, stations=len(done.stations),
        share=language.number(100 * done.made / done.possible),
    )  # fmt: skip
    if not done.made:
        return f"{language.say('sheet_no_field')} {coverage}"
    return f"{language.say('sheet_summary', mean=language.number(done.mean, 1))} {coverage}"


class _MapDrawer:
    """The maps of a sheet, from one painter."""

    def __init__(self, folder: ProductFolder, stations: xr.Dataset, language: Language):
        self.stations, self.language = stations, language
        self.network = one_line(folder.network_name)
        self.poster = Poster(folder, stations, PAGE, language)

    def mean(self, done: Month, when: str) -> Embedded:
        """The month's mean, with the stations' means."""
        words = self.language.say("sheet_mean_time", count=done.made, month=when)
        pwv = np.array([one.mean for one in done.stations])
        observed = pwv, np.where(np.isfinite(pwv), 0, 1)
        return self._map(done.mean_field, observed, words)

    def hour(self, step: Step, mean: float, key: str) -> Embedded:
        """One hour, with its mean over the region below it."""
        words = self.language.hour(step.start, step.end)
        caption = self.language.say(key, hour=words, mean=self.language.number(mean, 1))
        return self._map(step.field, observed_at(self.stations, step.end), words, caption)

    def _map(self, field: xr.Dataset, observed, words: str, caption: str = "") -> Embedded:
        pwv, flag = observed
        alt = describe_map(
            self.language,
            read_facts(field["pwv"].values),
            network=self.network,
            hour=words,
            used=int(((flag == 0) & np.isfinite(pwv)).sum()),
            stations=len(flag),
        )
        return embed(self.poster.draw_hour(field, observed, words), alt, caption)


def describe_course(done: Month, language: Language, when: str) -> str:
    """Alternative text of the course of a month."""
    if not np.isfinite(done.median).any():
        return language.say("sheet_course_alt_none", month=when)
    low, high = int(np.nanargmin(done.median)), int(np.nanargmax(done.median))
    step = done.time[1] - done.time[0] if len(done.time) > 1 else np.timedelta64(1, "h")
    return language.say(
        "sheet_course_alt",
        month=when,
        lowest=language.number(done.median[low], 1),
        driest_hour=language.hour(done.time[low] - step, done.time[low]),
        highest=language.number(done.median[high], 1),
        moistest_hour=language.hour(done.time[high] - step, done.time[high]),
    )


def draw_course(done: Month, language: Language) -> Figure:
    """Median and spread of the stations over a month, grey where there is no map."""
    say = language.say
    with matplotlib.style.context(["default", look.PLOT_STYLE]):
        figure = new_figure(COURSE_SIZE)
        axes = add_axes(figure, 50, 320)
        style = {"color": look.BAND_COLOUR, "linewidth": 0}
        axes.fill_between(done.time, *done.spread, label=say("sheet_course_range"), **style)
        style = {"color": look.SERIES_COLOUR, "linewidth": 1.8}
        axes.plot(done.time, done.median, label=say("sheet_course_median"), **style)
        axes.fill_between(
            done.time, 0, 1, where=~done.has_field, transform=axes.get_xaxis_transform(),
            color=look.MISSING_COLOUR, linewidth=0, zorder=0, step="pre",
            label=say("sheet_course_missing"),
        )  # fmt: skip
        axes.set_xlim(done.time[0], done.time[-1])
        axes.set_title(say("unit"), size=look.SMALL_SIZE, pad=10)
        axes.legend(
            loc="lower right", bbox_to_anchor=(1.0, 1.0), ncols=3, fontsize=look.SMALL_SIZE,
            borderaxespad=0.2,
        )  # fmt: skip
        axes.yaxis.set_major_formatter(FuncFormatter(lambda value, _: language.number(value)))
        write_dates(axes, language)
        figure.canvas.draw()
    return figure
