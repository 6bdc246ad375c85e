"""Summaries on the terminal as text: what was used, what was rejected and why."""

from __future__ import annotations

import numpy as np
import xarray as xr
from rich.table import Table
from rich.text import Text

from fieldgen.readers.network import Network, ReadingReport
from fieldgen.report import DayReport, RunReport
from fieldgen.station.screening import STATION_FLAGS
from fieldgen.station.surface_air import PRESSURE_SOURCES
from fieldgen.text_table import new_table, render

DAYS_SHOWN = 10
"""Days before the last ones stand in run.json alone."""

WARNINGS_SHOWN = 8
"""Further warnings are counted; all of them stand in run.json."""


def format_run(run: RunReport) -> str:
    """Summary of a finished run."""
    totals = run.totals()
    parts = [
        _format_reading(run.reading),
        "\n".join(f"warning   {text}" for text in run.warnings()),
        _render(_station_table(run)),
        _render(_day_table(run.days)),
        _format_totals(totals),
        _format_sources(totals["pressure_sources"]),
        f"{totals['files_written']} files written to {run.folder}",
    ]
    return "\n".join(part for part in parts if part)


def format_check(network: Network, stations: xr.Dataset) -> str:
    """What a run would use, for `fieldgen check`."""
    grid, report = network.grid, network.report
    time = stations.time.values
    ny, nx = grid.shape
    heights = stations.orthometric_height.values
    ground = network.terrain.mean
    usable = (stations.flag.values == 0).mean()
    lines = [
        f"network   {network.settings.network.name}",
        f"grid      {nx} x {ny} {grid.description}",
        f"terrain   {ground.min():.0f} to {ground.max():.0f} m in the mean of a cell, "
        f"{network.terrain.is_sea.mean():.0%} sea",
        f"stations  {len(heights)}, {heights.min():.0f} to {heights.max():.0f} m orthometric",
        f"weather   {network.weather.sizes['site']} barometers, "
        f"{'no' if network.weather_grid is None else 'with'} weather grids",
        f"steps     {len(time)}, stamped {_minute(time[0])} to {_minute(time[-1])} UTC",
        f"usable    {usable:.1%} of the stations' values before they are compared with each other",
        _format_sources(
            {
                source: int((stations.pressure_source.values == code).sum())
                for source, code in PRESSURE_SOURCES.items()
            }
        ),
    ]
    contradicted = [
        f"{sensor} {site}: contradicts the others in {count} steps"
        for sensor in ("barometer", "thermometer")
        for site, count in zip(
            stations.site.values, stations[f"{sensor}_rejected"].values.sum(axis=0), strict=True
        )
        if count
    ]
    return "\n".join([*lines, _format_reading(report), *contradicted]).rstrip()


def _format_sources(counts: dict[str, int]) -> str:
    """How many values each source of pressure served."""
    served = [f"{count} {source}" for source, count in counts.items() if count]
    return f"pressure  {', '.join(served)}"


def _minute(time) -> str:
    return np.datetime_as_string(time, unit="m").replace("T", " ")


def _format_reading(report: ReadingReport) -> str:
    lines = [f"read      {len(report.files)} files, {sum(report.files.values())} records"]
    lines += [f"unusable  {reason}" for reason in report.unusable_files.values()]
    lines += [
        f"rejected  {where}: {count} x {reason}"
        for (where, reason), count in report.rejections.counts.items()
    ]
    lines += [f"left out  {name}: {reason}" for name, reason in report.left_out.items()]
    lines += [f"warning   {warning}" for warning in report.warnings[:WARNINGS_SHOWN]]
    more = len(report.warnings) - WARNINGS_SHOWN
    if more > 0:
        lines.append(f"warning   and {more} more; all of them stand in run.json")
    return "\n".join(lines)


def _station_table(run: RunReport) -> Table | None:
    """Stations that lost values, with the reasons; None where every value was used."""
    totals = run.station_totals()
    reasons = [name for name in STATION_FLAGS if any(counts[name] for counts in totals.values())]
    table = new_table("station", "steps used", *(name.replace("_", " ") for name in reasons))
    for station, counts in sorted(totals.items()):
        if any(counts[name] for name in reasons):
            by_reason = (str(counts[name] or "") for name in reasons)
            table.add_row(Text(station), str(counts["used"]), *by_reason)
    return table if table.row_count else None


def _day_table(days: list[DayReport]) -> Table:
    table = new_table(
        "day",
        "steps",
        "scale height [m]",
        "partial sill",
        "range [km]",
        "nugget",
        "LOO RMSE",
        "model",
        left=("model",),
    )
    for day in days[-DAYS_SHOWN:]:
        covariance = day.covariance or {}
        table.add_row(
            day.name,
            f"{day.steps_made}/{day.steps}",
            _span(day.scale_height),
            *(_number(covariance.get(key)) for key in ("partial_sill", "range", "nugget")),
            _number(_rmse(day)),
            _model_note(covariance),
        )
    return table


def _model_note(covariance: dict) -> str:
    if not covariance:
        return "too few stations"
    return ", ".join(text for text in (covariance["model"], covariance["note"]) if text)


def _span(scale_height: dict | None) -> str:
    if scale_height is None:
        return "-"
    return f"{scale_height['mean']} ({scale_height['lowest']}-{scale_height['highest']})"


def _rmse(day: DayReport) -> float | None:
    count = day.leave_one_out["count"]
    return float(np.sqrt(day.leave_one_out["sum_of_squares"] / count)) if count else None


def _number(value: float | None) -> str:
    return "-" if value is None else f"{value:.3g}"


def _format_totals(totals: dict) -> str:
    if totals["leave_one_out_rmse"] is None:
        return f"{totals['steps_made']} of {totals['steps']} steps made"
    return (
        f"{totals['steps_made']} of {totals['steps']} steps made; leaving each station out: "
        f"RMSE {totals['leave_one_out_rmse']:.2f} kg m-2, SD of standardised errors "
        f"{totals['leave_one_out_standardised_sd']:.2f}"
    )


def _render(table: Table | None) -> str:
    return "" if table is None else f"\n{render(table)}"
