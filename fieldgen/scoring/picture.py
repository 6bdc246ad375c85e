"""A score as one picture: where, how honest, against what, and which station."""

from __future__ import annotations

from pathlib import Path
from textwrap import fill

import matplotlib.style
import numpy as np
from matplotlib.axes import Axes
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.colors import LinearSegmentedColormap, Normalize
from matplotlib.figure import Figure
from matplotlib.patches import Patch
from matplotlib.patheffects import withStroke
from scipy.spatial import ConvexHull, QhullError

from fieldgen.products import look
from fieldgen.products.atomic import whole_file
from fieldgen.products.metadata import CAUTION, fieldgen_version
from fieldgen.scoring.figures import Figures
from fieldgen.scoring.hull import local_plane
from fieldgen.scoring.report import ScoreReport, StationReport
from fieldgen.scoring.summary import POSITION_WORDS, TRIAL_WORDS, format_period

DOTS_PER_INCH = 100
SIZE = (16.0, 11.4)  # inches
UNIT = "kg m⁻²"

TRIAL_COLOURS = {"each_station": "#224779", "blocks": "#d1781f"}
"""Deep blue and orange: apart to all common kinds of colour blindness, and in a grey print."""

DRY_COLOUR, EVEN_COLOUR, MOIST_COLOUR = "#a35a12", "#f4f1ea", "#1f5f8b"
"""Stations that read less than the others, the same, and more."""

STATIONS_SHOWN = 20
NAMES_SHOWN = 6  # on the map
LETTER_WIDTH = 9.2  # of a name on the map [pixels]
NAME_SIDES = ((1, 0), (-1, 0), (1, 1), (1, -1), (-1, 1), (-1, -1), (0, 1), (0, -1))

_STYLE = {
    "font.family": look.FONT_FAMILY,
    "font.size": look.SMALL_SIZE,
    "axes.titlesize": look.TEXT_SIZE,
    "axes.titlelocation": "left",
    "axes.titlepad": 9.0,
    "axes.spines.top": False,
    "axes.spines.right": False,
    "axes.edgecolor": look.QUIET_COLOUR,
    "axes.axisbelow": True,
    "grid.color": look.MISSING_COLOUR,
    "text.parse_math": False,
    "legend.frameon": False,
}


def draw_score(report: ScoreReport) -> Figure:
    """Figure of a score."""
    with matplotlib.style.context(["default", _STYLE]):
        figure = Figure(SIZE, DOTS_PER_INCH, facecolor=look.PAPER_COLOUR)
        FigureCanvasAgg(figure)
        panels = figure.subplots(
            2, 3, gridspec_kw={"left": 0.105, "right": 0.985, "top": 0.84, "bottom": 0.085,
                               "wspace": 0.42, "hspace": 0.3},
        )  # fmt: skip
        _draw_words(figure, report)
        _draw_map(panels[0, 0], report)
        _draw_reliability(panels[0, 1], report)
        _draw_methods(panels[0, 2], report)
        _draw_stations(panels[1, 0], report)
        _draw_groups(panels[1, 1], report)
        _draw_hours(panels[1, 2], report)
        figure.canvas.draw()
    return figure


def write_picture(report: ScoreReport, path: Path) -> None:
    """Draw a score and write it as PNG, whole or not at all."""
    with matplotlib.style.context(["default", _STYLE]):
        figure = draw_score(report)
        with whole_file(path) as temporary:
            figure.savefig(
                temporary, format="png", dpi=DOTS_PER_INCH,
                metadata={"Title": f"{report.network.name}: score", "Description": CAUTION,
                          "Software": f"fieldgen {fieldgen_version()}"},
            )  # fmt: skip


def _draw_words(figure: Figure, report: ScoreReport) -> None:
    """Title, key figures and small print."""
    one = report.trials["each_station"].overall
    left = 0.02
    figure.text(left, 0.967, f"{report.network.name}: how well the stations predict each other",
                size=look.TITLE_SIZE, va="center")  # fmt: skip
    figure.text(
        left, 0.934,
        f"{format_period(*report.period)}.  Each station left out: RMSE {one.rmse:.2f}, "
        f"bias {one.bias:+.2f}, CRPS {one.crps:.2f} {UNIT};  {one.coverage_68:.0%} within the 68 % "
        f"error bars, {one.coverage_95:.0%} within 95 %;  {one.count} values.",
        size=look.TEXT_SIZE - 1, color=look.QUIET_COLOUR, va="center",
    )  # fmt: skip
    colours = [
        Patch(color=colour, label=f"{TRIAL_WORDS[name]} left out")
        for name, colour in TRIAL_COLOURS.items()
    ]
    figure.legend(handles=colours, loc="center left", bbox_to_anchor=(left - 0.007, 0.9), ncols=2,
                  fontsize=look.TEXT_SIZE - 1)  # fmt: skip
    figure.text(
        left, 0.018,
        f"{CAUTION}  Precipitable water vapour in {UNIT} at the stations' own heights; truth are "
        f"the values that passed all tests.  fieldgen {fieldgen_version()}",
        size=look.VALUE_SIZE, color=look.QUIET_COLOUR, va="center",
    )  # fmt: skip


def _draw_map(axes: Axes, report: ScoreReport) -> None:
    """Where stations read more or less than the others."""
    axes.set_title("What stations read against the others")
    plane = local_plane(*np.array([(s.longitude, s.latitude) for s in report.stations]).T)
    scored = np.array([one.figures.count > 0 for one in report.stations])
    reads = np.array([-one.figures.bias for one in report.stations])
    _draw_hull(axes, plane[scored])
    limit = max(np.ceil(2.0 * np.quantile(np.abs(reads[scored]), 0.98)) / 2.0, 0.5)
    colours = LinearSegmentedColormap.from_list("", [DRY_COLOUR, EVEN_COLOUR, MOIST_COLOUR])
    dots = axes.scatter(
        *plane[scored].T, c=reads[scored], s=70, cmap=colours, norm=Normalize(-limit, limit),
        edgecolor=look.INK_COLOUR, linewidth=0.8, zorder=3,
    )  # fmt: skip
    lost = np.array([one in report.condemned for one in report.stations])
    axes.scatter(*plane[lost].T, marker="x", s=55, color=look.INK_COLOUR, linewidth=1.8, zorder=3)
    axes.set_aspect("equal", adjustable="datalim")
    axes.margins(0.08)
    axes.set_xlabel("km to the east")
    axes.set_ylabel("km to the north")
    bar = axes.figure.colorbar(dots, ax=axes, shrink=0.85, pad=0.02, aspect=28, extend="both")
    bar.set_label(f"reads less          {UNIT}          reads more")
    bar.outline.set_visible(False)
    named = report.condemned + [one for one in report.worst if one.stands_off]
    _draw_names(axes, plane, report, named[:NAMES_SHOWN])
    words = "line: hull of the stations;  cross: all values rejected"
    axes.text(0.0, -0.16, words, transform=axes.transAxes, size=look.VALUE_SIZE,
              color=look.QUIET_COLOUR)  # fmt: skip


def _draw_hull(axes: Axes, plane) -> None:
    try:
        ring = ConvexHull(plane).vertices
    except (QhullError, ValueError):
        return
    axes.plot(*plane[np.append(ring, ring[0])].T, color=look.QUIET_COLOUR, linewidth=0.8, zorder=1)


def _draw_names(axes: Axes, plane, report: ScoreReport, named: list[StationReport]) -> None:
    """Identifiers beside stations, legible where they must lie on others."""
    axes.apply_aspect()
    pixels = axes.transData.transform(plane)
    for one in named:
        index = report.stations.index(one)
        edges = axes.bbox.extents[[0, 2]] - pixels[index, 0]
        place = _name_place(pixels - pixels[index], edges, LETTER_WIDTH * len(one.id))
        axes.annotate(
            one.id, plane[index], place, textcoords="offset pixels", ha="center", va="center",
            size=look.VALUE_SIZE, zorder=4,
            path_effects=[withStroke(linewidth=2.5, foreground=look.PAPER_COLOUR)],
        )  # fmt: skip


def _name_place(stations, edges, width: float) -> tuple[float, float]:
    """Middle of a name where it lies on the fewest stations (n, 2) and between the edges (2,).

    All in pixels from the name's own station, which keeps the first side that is as good as any.
    """
    places = [(across * (width / 2.0 + 10.0), up * 15.0) for across, up in NAME_SIDES]
    inside = [
        place for place in places
        if place[0] - width / 2.0 >= edges[0] and place[0] + width / 2.0 <= edges[1]
    ]  # fmt: skip
    reach = width / 2.0 + 7.0, 13.0
    return min(
        inside or places, key=lambda place: (np.abs(stations - place) < reach).all(axis=1).sum()
    )


def _draw_reliability(axes: Axes, report: ScoreReport) -> None:
    """Observed against nominal coverage."""
    axes.set_title("Are the error bars honest?")
    axes.plot([0, 100], [0, 100], color=look.QUIET_COLOUR, linewidth=1.0)
    for name, marker in (("blocks", "s"), ("each_station", "o")):
        pairs = 100.0 * np.array(report.trials[name].reliability or [(np.nan, np.nan)])
        axes.plot(*pairs.T, marker=marker, markersize=5, color=TRIAL_COLOURS[name])
    axes.set_xlim(0, 100)
    axes.set_ylim(0, 100)
    axes.grid()
    axes.set_xlabel("error bars that should hold this many per cent of the values")
    axes.set_ylabel("hold per cent")
    quiet = {"color": look.QUIET_COLOUR, "size": look.VALUE_SIZE}
    axes.text(72, 25, "error bars too small", ha="center", **quiet)
    axes.text(28, 75, "error bars too large", ha="center", **quiet)


def _draw_methods(axes: Axes, report: ScoreReport) -> None:
    """RMSE of the field and of plainer methods."""
    axes.set_title("RMSE beside plainer methods")
    methods = list(report.trials["each_station"].plain)
    for offset, (name, colour) in zip((-0.2, 0.2), TRIAL_COLOURS.items(), strict=True):
        trial = report.trials[name]
        widths = np.array([trial.overall.rmse, *(trial.plain[m].rmse for m in methods)])
        places = np.arange(len(widths)) + offset
        bars = axes.barh(places, np.nan_to_num(widths), 0.36, color=colour)
        for bar in bars[1:]:
            bar.set_alpha(0.5)
        words = [f"{width:.2f}" if np.isfinite(width) else "" for width in widths]
        axes.bar_label(bars, words, padding=3, size=look.VALUE_SIZE)
    labels = ["this field", *(fill(method, 16) for method in methods)]
    axes.set_yticks(range(len(labels)), labels)
    axes.get_yticklabels()[0].set_fontweight("bold")
    axes.invert_yaxis()
    axes.margins(x=0.12)
    axes.set_xlabel(UNIT)


def _draw_stations(axes: Axes, report: ScoreReport) -> None:
    """The stations with the largest bias, with two standard errors."""
    shown = report.worst[:STATIONS_SHOWN]
    axes.set_title(f"Stations, the {len(shown)} farthest off" if len(shown) > 1 else "Stations")
    for row, one in enumerate(shown):
        colour = look.INK_COLOUR if not one.stands_off else _side_colour(one)
        bar = 2.0 * one.bias_sigma
        axes.errorbar(-one.figures.bias, row, xerr=bar if np.isfinite(bar) else None, fmt="o",
                      color=colour, markersize=6, linewidth=1.6 + one.stands_off)  # fmt: skip
    axes.axvline(0.0, color=look.QUIET_COLOUR, linewidth=1.0)
    axes.set_yticks(range(len(shown)), [f"{one.id}  {one.height:.0f} m" for one in shown],
                    size=look.VALUE_SIZE)  # fmt: skip
    for tick, one in zip(axes.get_yticklabels(), shown, strict=True):
        tick.set_fontweight("bold" if one.stands_off else "normal")
    axes.invert_yaxis()
    axes.grid(axis="x")
    axes.set_xlabel(f"reads less    mean and 2 standard errors, {UNIT}    reads more")


def _side_colour(one: StationReport) -> str:
    return DRY_COLOUR if one.figures.bias > 0 else MOIST_COLOUR


def _draw_groups(axes: Axes, report: ScoreReport) -> None:
    """Errors beside the error bars, by height and position."""
    axes.set_title("Errors (dots) and error bars (ticks)")
    by_trial = {name: _groups(report, name) for name in TRIAL_COLOURS}
    rows = list(dict.fromkeys(key for groups in by_trial.values() for key in groups))
    for offset, (name, groups) in zip((-0.16, 0.16), by_trial.items(), strict=True):
        places = np.array([rows.index(key) for key in groups]) + offset
        colour = TRIAL_COLOURS[name]
        sigma = [one.mean_sigma for one in groups.values()]
        axes.plot([one.rmse for one in groups.values()], places, "o", color=colour, markersize=7)
        axes.plot(sigma, places, "|", color=colour, markersize=13, markeredgewidth=2.2)
    counts = by_trial["each_station"]
    labels = [f"{key}\n({counts[key].count})" if key in counts else key for key in rows]
    axes.set_yticks(range(len(rows)), labels, size=look.VALUE_SIZE)
    axes.invert_yaxis()
    axes.set_xlim(left=0.0)
    axes.margins(x=0.1)
    axes.grid(axis="x")
    axes.set_xlabel(f"RMSE and mean standard error, {UNIT} (number of values)")


def _groups(report: ScoreReport, name: str) -> dict[str, Figures]:
    """Figures of a trial by group in words."""
    trial = report.trials[name]
    by_position = {POSITION_WORDS[key]: one for key, one in trial.by_position.items()}
    return {"all": trial.overall, **trial.by_height, **by_position}


def _draw_hours(axes: Axes, report: ScoreReport) -> None:
    """Errors by the hour of the day."""
    axes.set_title("By hour of the day")
    for name, colour in TRIAL_COLOURS.items():
        by_hour = report.trials[name].by_hour
        hours = [int(hour) for hour in by_hour]
        for key, style in (("rmse", "-"), ("mean_sigma", ":"), ("bias", "--")):
            axes.plot(hours, [getattr(one, key) for one in by_hour.values()], style, color=colour,
                      marker="o" if len(hours) == 1 else None)  # fmt: skip
    axes.axhline(0.0, color=look.QUIET_COLOUR, linewidth=1.0)
    for style, words in (("-", "RMSE"), (":", "mean standard error"), ("--", "bias")):
        axes.plot([], [], style, color=look.INK_COLOUR, label=words)
    axes.set_xlim(0, 25)
    axes.set_xticks(range(3, 25, 3))
    low, high = axes.get_ylim()
    axes.set_ylim(low, high + 0.25 * (high - low))
    axes.grid()
    axes.set_xlabel("hour that the step ends in, UTC")
    axes.set_ylabel(UNIT)
    axes.legend(loc="upper left", ncols=3, handlelength=1.5, columnspacing=1.0,
                fontsize=look.VALUE_SIZE)  # fmt: skip
