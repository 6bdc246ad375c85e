"""The course of each station over time, beside the network's."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from datetime import timedelta
from pathlib import Path
from urllib.parse import quote

import matplotlib.dates as mdates
import matplotlib.style
import numpy as np
import pandas as pd
import xarray as xr
from matplotlib.axes import Axes
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.figure import Figure
from matplotlib.ticker import FuncFormatter
from PIL import Image

from fieldgen.errors import InputError
from fieldgen.outreach.animation import write_described
from fieldgen.outreach.folder import ProductFolder
from fieldgen.outreach.language import Language
from fieldgen.outreach.letters import draw_fitting
from fieldgen.plain_text import one_line
from fieldgen.products import look

SIZE = (1400, 1000)  # pixels
SEASONS_HEIGHT = 380  # more, where a year is shown [pixels]
LETTERS = 110  # dots per inch
LEFT, RIGHT = 85, 85  # margins [pixels]
NETWORK_MARGIN = 0.06  # room below the lowest value for reasons without a value
LEGEND_COLUMNS = 3
NAME_LENGTH = 150  # of a file, in letters


@dataclass(frozen=True)
class Series:
    """What is drawn of one station; series are (time,).

    pwv [kg m-2], sigma, ztd [m]: NaN where there is none; reason: key of a language file, ""
    where the value is used; network: median of all used values [kg m-2]
    months : of the whole folder, quantiles 0.1, 0.5, 0.9 (12, 3), None without a full year
    """

    name: str
    height: float
    network_name: str
    time: np.ndarray
    step: np.timedelta64
    pwv: np.ndarray
    sigma: np.ndarray
    ztd: np.ndarray
    reason: np.ndarray
    network: np.ndarray
    months: np.ndarray | None

    @property
    def used(self) -> np.ndarray:
        """Water vapour where it is used, NaN elsewhere."""
        return np.where(self.reason == "", self.pwv, np.nan)

    @property
    def counts(self) -> dict[str, int]:
        """Steps by reason why they are not used, those without a delay left out."""
        keys, counts = np.unique(self.reason, return_counts=True)
        found = dict(zip(keys.tolist(), counts.tolist(), strict=True))
        return {key: found[key] for key in found if key not in ("", "reason_no_delay")}


def write_plots(
    folder: ProductFolder,
    out: Path,
    language: Language,
    *,
    station: str | None = None,
    last: timedelta,
) -> list[Path]:
    """Plots of all stations, or of one, each with its description beside it.

    last : before the newest hour. Raises InputError for an unknown station, OutputError.
    """
    paths = []
    for id_, series in read_series(folder, language, station=station, last=last):
        path = out / f"{quote(id_, safe=' ')[:NAME_LENGTH]}.png"
        write_described(draw_series(series, language), path, describe_series(series, language))
        paths += [path, path.with_suffix(".txt")]
    return paths


def read_series(
    folder: ProductFolder, language: Language, *, station: str | None, last: timedelta
) -> Iterator[tuple[str, Series]]:
    """Identifier and series of each station; arguments as of `write_plots`."""
    everything = folder.read_stations()
    ids = [str(one) for one in everything["station"].values]
    if station is not None and station not in ids:
        raise InputError(
            f"{folder.path}: has no station {station}, expected one of {', '.join(ids)}."
        )
    time = everything["time"].values.astype("datetime64[s]")
    length = np.timedelta64(int(last.total_seconds()), "s")
    recent = everything.isel(time=time > time[-1] - length)
    network = network_median(recent)
    for index, id_ in enumerate(ids):
        if station in (None, id_):
            one = recent.isel(station=index)
            yield id_, _series_of(one, folder, language, network, everything.isel(station=index))


def _series_of(one: xr.Dataset, folder, language, network, whole: xr.Dataset) -> Series:
    id_, name = str(one["station"].values), one_line(str(one["station_name"].values))
    return Series(
        name=one_line(f"{name} ({id_})" if name and name != id_ else id_),
        height=float(one["orthometric_height"]),
        network_name=one_line(folder.network_name),
        time=one["time"].values,
        step=folder.step,
        pwv=one["pwv"].values.astype(float),
        sigma=one["pwv_sigma"].values.astype(float),
        ztd=one["ztd"].values,
        reason=read_reasons(one["flag"], language),
        network=network,
        months=read_months(whole),
    )


def read_reasons(flag: xr.DataArray, language: Language) -> np.ndarray:
    """Key of the first reason of each flag, in the order of the bits; "" where there is none."""
    reasons = np.full(flag.shape, "", dtype=object)
    bits = zip(flag.attrs["flag_meanings"].split(), flag.attrs["flag_masks"], strict=True)
    for meaning, bit in bits:
        key = f"reason_{meaning}"
        key = key if language.knows(key) else "reason_other"
        reasons[(reasons == "") & (flag.values & bit != 0)] = key
    return reasons


def network_median(stations: xr.Dataset) -> np.ndarray:
    """Median (time,) of the used values of all stations [kg m-2], NaN without any."""
    used = stations["pwv"].where(stations["flag"] == 0).transpose("time", "station")
    return pd.DataFrame(used.values).median(axis=1).to_numpy()


def read_months(station: xr.Dataset) -> np.ndarray | None:
    """Quantiles 0.1, 0.5 and 0.9 (12, 3) of used values [kg m-2] by calendar month.

    None unless each month of the year has a value.
    """
    used = station["pwv"].where(station["flag"] == 0).dropna("time")
    months = used["time"].dt.month.values
    if len(np.unique(months)) < 12:
        return None
    return np.array(
        [np.quantile(used.values[months == month], [0.1, 0.5, 0.9]) for month in range(1, 13)]
    )


def describe_series(series: Series, language: Language) -> str:
    """Alternative text of the plot of a station."""
    used = series.used
    about = {
        "name": series.name,
        "height": language.number(series.height),
        "start": language.date(series.time[0] - series.step),
        "end": language.date(series.time[-1] - series.step),
    }
    if np.isfinite(used).any():
        words = [
            language.say(
                "station_alt", **about, used=int(np.isfinite(used).sum()), all=len(used),
                lowest=language.number(np.nanmin(used), 1),
                highest=language.number(np.nanmax(used), 1),
                median=language.number(np.nanmedian(used), 1),
                network_median=language.number(np.nanmedian(series.network), 1),
            )
        ]  # fmt: skip
    else:
        words = [language.say("station_alt_none", **about)]
    if series.counts:
        reasons = "; ".join(f"{language.say(key)} {n}" for key, n in series.counts.items())
        words.append(language.say("station_alt_unused", reasons=reasons))
    if series.months is not None:
        words.append(_describe_months(series.months[:, 1], language))
    return " ".join([*words, language.say("caution")])


def _describe_months(medians: np.ndarray, language: Language) -> str:
    low, high = int(medians.argmin()), int(medians.argmax())
    return language.say(
        "station_alt_seasons",
        driest_month=language.month(low + 1), lowest=language.number(medians[low], 1),
        moistest_month=language.month(high + 1), highest=language.number(medians[high], 1),
    )  # fmt: skip


def draw_series(series: Series, language: Language) -> Image.Image:
    """Plot of a station."""
    return capture(draw_figure(series, language))


def draw_figure(series: Series, language: Language) -> Figure:
    """Figure of a station: water vapour, delay, and the year's course where there is one."""
    extra = 0 if series.months is None else SEASONS_HEIGHT
    with matplotlib.style.context(["default", look.PLOT_STYLE]):
        figure = new_figure((SIZE[0], SIZE[1] + extra))
        _draw_words(figure, series, language)
        vapour = add_axes(figure, 415 + extra, 340)
        _draw_vapour(vapour, series, language)
        delay = add_axes(figure, 105 + extra, 205)
        _draw_delay(delay, series, language)
        for axes in (vapour, delay):
            axes.set_xlim(series.time[0] - series.step, series.time[-1])
            write_dates(axes, language)
        if series.months is not None:
            _draw_months(add_axes(figure, 105, 240), series.months, language)
        figure.canvas.draw()
    return figure


def new_figure(size: tuple[int, int], letters: int = LETTERS) -> Figure:
    """A clear figure of a size [pixels]."""
    figure = Figure((size[0] / letters, size[1] / letters), letters, facecolor=look.PAPER_COLOUR)
    FigureCanvasAgg(figure)
    return figure


def add_axes(figure: Figure, bottom: int, height: int) -> Axes:
    """Axes over the width of a figure [pixels]."""
    whole_width, whole_height = figure.get_size_inches() * figure.dpi
    width = whole_width - LEFT - RIGHT
    return figure.add_axes(
        (LEFT / whole_width, bottom / whole_height, width / whole_width, height / whole_height)
    )


def capture(figure: Figure) -> Image.Image:
    """A drawn figure as a picture."""
    return Image.fromarray(np.array(figure.canvas.buffer_rgba())).convert("RGB")


def _draw_words(figure: Figure, series: Series, language: Language) -> None:
    width, height = (int(pixels) for pixels in figure.get_size_inches() * figure.dpi)
    room = width - LEFT - RIGHT
    title = language.say("station_title", name=series.name)
    draw_fitting(figure, (LEFT, height - 64, room, 44), title, look.TITLE_SIZE)
    place = language.say(
        "station_place",
        start=language.date(series.time[0] - series.step),
        end=language.date(series.time[-1] - series.step),
        height=language.number(series.height),
        network=series.network_name,
    )
    style = {"color": look.QUIET_COLOUR}
    draw_fitting(figure, (LEFT, height - 98, room, 30), place, look.TEXT_SIZE, **style)
    draw_small_print(figure, language)


def draw_small_print(figure: Figure, language: Language) -> None:
    """Caution and version along the lower edge of a figure."""
    from fieldgen.products.metadata import fieldgen_version

    width, _ = figure.get_size_inches() * figure.dpi
    small = f"{language.say('caution')} {language.say('version', version=fieldgen_version())}"
    box = (LEFT, 14, int(width) - LEFT - RIGHT, 26)
    draw_fitting(figure, box, small, look.VALUE_SIZE, color=look.QUIET_COLOUR)


def _draw_vapour(axes: Axes, series: Series, language: Language) -> None:
    """Used values with their band, the network's median, and values not used by reason."""
    used, say = series.used, language.say
    style = {"color": look.NETWORK_COLOUR, "linewidth": 1.4, "linestyle": "--"}
    axes.plot(series.time, series.network, label=say("station_median"), **style)
    band = (used - series.sigma, used + series.sigma)
    style = {"color": look.BAND_COLOUR, "linewidth": 0, "alpha": 0.8}
    axes.fill_between(series.time, *band, label=say("station_band"), **style)
    # the dots show values between two gaps
    style = {"color": look.SERIES_COLOUR, "linewidth": 1.8, "marker": ".", "markersize": 5}
    axes.plot(series.time, used, label=say("station_value"), **style)
    _draw_reasons(axes, series, language)
    legend = axes.legend(
        loc="lower left", bbox_to_anchor=(-0.01, 1.0), ncols=LEGEND_COLUMNS,
        fontsize=look.VALUE_SIZE, borderaxespad=0.2, columnspacing=1.4, handlelength=1.8,
    )  # fmt: skip
    rows = -(-len(legend.get_texts()) // LEGEND_COLUMNS)
    words = language.say("station_vapour_explained")
    axes.set_title(words, size=look.TEXT_SIZE, pad=10 + 1.75 * look.VALUE_SIZE * rows)
    axes.yaxis.set_major_formatter(FuncFormatter(lambda value, _: language.number(value)))


def _draw_reasons(axes: Axes, series: Series, language: Language) -> None:
    """A marker for each value not used, at the lower edge where it has none itself."""
    axes.margins(y=NETWORK_MARGIN)
    without = np.full(len(series.time), axes.get_ylim()[0])
    values = np.where(np.isfinite(series.pwv), series.pwv, without)
    for (key, count), marker in zip(series.counts.items(), look.REASON_MARKERS, strict=False):
        label = language.say("station_unused", reason=language.say(key), count=count)
        chosen = series.reason == key
        axes.plot(
            series.time[chosen], values[chosen], marker, color=look.REASON_COLOUR, markersize=7,
            fillstyle="none", markeredgewidth=1.5, label=label, clip_on=False,
        )  # fmt: skip
    silent = int((series.reason == "reason_no_delay").sum())
    if silent:
        label = language.say("station_no_delay", count=silent)
        axes.plot([], [], " ", label=label)


def _draw_delay(axes: Axes, series: Series, language: Language) -> None:
    axes.set_title(language.say("station_delay_explained"), size=look.TEXT_SIZE, pad=10)
    axes.plot(series.time, series.ztd, color=look.SERIES_COLOUR, linewidth=1.6, marker=".",
              markersize=5)  # fmt: skip
    axes.yaxis.set_major_formatter(FuncFormatter(lambda value, _: language.number(value, 3)))


def write_dates(axes: Axes, language: Language) -> None:
    """Ticks at the ends of days, or hours of a short period, in the language's words."""
    locator = mdates.AutoDateLocator(minticks=2, maxticks=6)
    locator.intervald[mdates.HOURLY] = [3, 6, 12]
    axes.xaxis.set_major_locator(locator)

    def label(value: float, _) -> str:
        time = np.datetime64(mdates.num2date(value).replace(tzinfo=None), "s")
        clock = np.datetime_as_string(time, "m")[11:]
        return language.day(time) if clock == "00:00" else f"{clock} UTC"

    axes.xaxis.set_major_formatter(FuncFormatter(label))
    axes.tick_params(labelsize=look.SMALL_SIZE)


def _draw_months(axes: Axes, months: np.ndarray, language: Language) -> None:
    """The course of the year: medians, and what lies between the first and the last tenth."""
    axes.set_title(language.say("station_seasons"), size=look.TEXT_SIZE, pad=34)
    place = np.arange(1, 13)
    low, middle, high = months.T
    axes.bar(
        place, high - low, bottom=low, width=0.7, color=look.BAND_COLOUR,
        label=language.say("station_monthly_range"),
    )  # fmt: skip
    axes.plot(
        place, middle, "_", markersize=34, markeredgewidth=3, color=look.SERIES_COLOUR,
        label=language.say("station_monthly_median"),
    )  # fmt: skip
    names = [language.month(month)[:3] for month in place]
    axes.set_xticks(place, names, size=look.SMALL_SIZE)
    axes.tick_params(axis="y", labelsize=look.SMALL_SIZE)
    axes.yaxis.set_major_formatter(FuncFormatter(lambda value, _: language.number(value)))
    axes.legend(
        loc="lower left", bbox_to_anchor=(-0.01, 1.0), ncols=2, fontsize=look.VALUE_SIZE,
        borderaxespad=0.2, markerscale=0.5,
    )  # fmt: skip
