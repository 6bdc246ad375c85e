"""A score on the terminal."""

from __future__ import annotations

import numpy as np
from rich.table import Table
from rich.text import Text

from fieldgen.products.metadata import CAUTION
from fieldgen.scoring.figures import Figures
from fieldgen.scoring.hull import EDGE_DISTANCE
from fieldgen.scoring.report import ScoreReport, StationReport
from fieldgen.scoring.trials import BLOCK_SIZE
from fieldgen.text_table import new_table, render

STATIONS_SHOWN = 3
"""The others stand in score_stations.csv."""

POSITION_WORDS = {
    "inside": "inside the hull of the rest",
    "edge": f"within {EDGE_DISTANCE:g} km of its edge",
    "outside": "outside",
}
"""Positions of `fieldgen.scoring.hull` in words."""

TRIAL_WORDS = {
    "each_station": "each station",
    "blocks": f"with its {BLOCK_SIZE - 1} nearest",
}
"""What a trial leaves out, in words."""

COLUMNS = {
    "count": ("values", "{}"),
    "bias": ("bias", "{:+.2f}"),
    "rmse": ("RMSE", "{:.2f}"),
    "mae": ("MAE", "{:.2f}"),
    "crps": ("CRPS", "{:.2f}"),
    "coverage_68": ("in 68%", "{:.0%}"),
    "coverage_95": ("in 95%", "{:.0%}"),
    "standardised_sd": ("SD err/sigma", "{:.2f}"),
}
"""Figures of a table: heading and format."""


def format_score(report: ScoreReport) -> str:
    """Summary of a score, about thirty lines."""
    stations = sum(one.figures.count > 0 for one in report.stations)
    count = report.trials["each_station"].overall.count
    return "\n".join(
        [
            f"{report.network.name}, {format_period(*report.period)}",
            f"{count} values of {stations} stations, at their own heights; errors in kg m-2 are "
            "the others less the station",
            f"{_format_rejected(report)}\n",
            f"{render(figure_table('left out', _groups(report)))}\n",
            f"{render(_method_table(report))}\n",
            *(_format_station(one) for one in report.worst[:STATIONS_SHOWN]),
            *(_format_condemned(one) for one in report.condemned[:STATIONS_SHOWN]),
            "a lasting difference is a fault (height, barometer, antenna) or the air of the place",
            CAUTION,
        ]
    )


def format_period(start, end) -> str:
    """Period between two datetime64."""
    low, high = (np.datetime_as_string(time, unit="m").replace("T", " ") for time in (start, end))
    return f"{low} to {high} UTC"


def figure_table(first: str, groups: list[tuple[str, Figures]]) -> Table:
    """Figures of named groups, one a row."""
    table = new_table(first, *(heading for heading, _ in COLUMNS.values()))
    for name, one in groups:
        cells = (form.format(getattr(one, key)) for key, (_, form) in COLUMNS.items())
        table.add_row(Text(name), *(cells if one.count else "-" * len(COLUMNS)))
    return table


def _groups(report: ScoreReport) -> list[tuple[str, Figures]]:
    """Both trials with their positions, and the heights of the first."""
    groups = []
    for name, words in TRIAL_WORDS.items():
        trial = report.trials[name]
        groups.append((words, trial.overall))
        if name == "each_station":
            groups += [(f"  {band}", one) for band, one in trial.by_height.items()]
        groups += [(f"  {POSITION_WORDS[key]}", one) for key, one in trial.by_position.items()]
    return groups


def _method_table(report: ScoreReport) -> Table:
    """The field's gain over plainer methods: each station left out, and with its nearest."""
    nearest = f"with {BLOCK_SIZE - 1}"
    table = new_table(
        "plainer methods, gain of the field", "RMSE", "gain", f"RMSE {nearest}", f"gain {nearest}"
    )
    for method in report.trials["each_station"].plain:
        both = [report.trials[name].plain[method] for name in TRIAL_WORDS]
        table.add_row(method, *(cell for one in both for cell in _gain_cells(one)))
    return table


def _gain_cells(one) -> tuple[str, str]:
    return ("-", "-") if np.isnan(one.rmse) else (f"{one.rmse:.2f}", f"{one.gain:.1%}")


def _format_rejected(report: ScoreReport) -> str:
    counts = [f"{count} {name.replace('_', ' ')}" for name, count in report.rejected.items()]
    return f"rejected values, which count nowhere: {', '.join(counts) or 'none'}"


def reads(bias: float) -> str:
    """What a station shows against the others; bias [kg m-2] of the others less the station."""
    return f"reads {abs(bias):.2f} kg m-2 {'less' if bias > 0 else 'more'} than the others say"


def _format_station(one: StationReport) -> str:
    sizes = f"{abs(one.bias_ratio):.1f} error bars"
    if np.isfinite(one.significance):
        sizes += f", {abs(one.significance):.1f} standard errors"
    return f"station {one.id}, {one.height:.0f} m: {reads(one.figures.bias)} ({sizes})"


def _format_condemned(one: StationReport) -> str:
    text = f"station {one.id}, {one.height:.0f} m: all {one.rejected} values rejected"
    return text + (f", {reads(one.rejected_bias)}" if np.isfinite(one.rejected_bias) else "")
