"""A score as files: score.json, and tables of its stations and steps."""

from __future__ import annotations

import csv
import io
import json
import math
from collections.abc import Iterable
from dataclasses import asdict
from pathlib import Path

from fieldgen.plain_text import cell, one_line
from fieldgen.products.atomic import whole_file
from fieldgen.products.metadata import CAUTION, fieldgen_version, format_time
from fieldgen.scoring.figures import Figures
from fieldgen.scoring.hull import EDGE_DISTANCE
from fieldgen.scoring.report import ScoreReport, StationReport, TrialReport
from fieldgen.scoring.trials import BLOCK_SIZE

DIGITS = 4
"""Decimals of figures in the files."""

UNITS = (
    "bias, rmse, mae, crps, mean_sigma, bias_sigma, rejected_bias in kg m-2; height, scale_height "
    "in m; longitude, latitude in degrees; coverage, gain as shares; others without unit"
)

SIGN = "Errors are what the other stations say less the station: positive where they say more."

METHOD = {
    "each_station": "Every station in turn is predicted from all others.",
    "blocks": f"Every station in turn is predicted without its {BLOCK_SIZE - 1} nearest neighbours "
    "either, as if the network were sparser there.",
    "truth": "Values of the stations themselves at their own heights that passed all tests. The "
    "tests have seen these values, and the covariance and scale heights come from all stations.",
    "sigma": "Kriging times the hour's variance factor, the scale height's error over the height "
    "between a station and those it is predicted from, and the station's own error. Errors that "
    "all stations share cancel and are not counted.",
    "position": f"Against the hull of the stations predicted from; edge: within "
    f"{EDGE_DISTANCE:g} km of its boundary on either side.",
    "plain": "Plainer methods on the same values: kriging with its own covariance of the same form "
    "fitted to the values as they are, or reduced with 2 km; the nearest station and the inverse "
    "square of distance, reduced with 2 km. gain: share by which the field's RMSE is lower.",
    "bias_sigma": "Standard error of the bias, the memory from step to step counted.",
}


def about(title: str, network: str, start, end) -> dict:
    """What every file of figures begins with; start, end: datetime64."""
    return {
        "title": title,
        "network": network,
        "period_start": format_time(start),
        "period_end": format_time(end),
        "fieldgen_version": fieldgen_version(),
        "caution": CAUTION,
    }


def write_score(report: ScoreReport, folder: Path) -> list[Path]:
    """Write score.json, score_stations.csv and score_hours.csv; returns their paths.

    Raises OutputError if the folder cannot be written.
    """
    head = about("leave-one-out score", report.network.name, *report.period)
    paths = [folder / name for name in ("score.json", "score_stations.csv", "score_hours.csv")]
    write_json(head | _content(report), paths[0])
    lines = {**head, "units": UNITS, "sign": SIGN}
    write_table(lines, [_station_row(one) for one in report.stations], paths[1])
    write_table(lines, list(_step_rows(report)), paths[2])
    return paths


def write_json(content: dict, path: Path) -> None:
    """Write plain values, figures rounded, NaN as null; whole or not at all."""
    with whole_file(path) as temporary:
        text = json.dumps(rounded(content), indent=1, ensure_ascii=False, allow_nan=False)
        temporary.write_text(text + "\n", encoding="utf-8")


def write_table(comments: dict, rows: list[dict], path: Path) -> None:
    """Write rows of the same keys as CSV below comment lines that begin with #; NaN is blank."""
    buffer = io.StringIO()
    for key, text in comments.items():
        buffer.write(f"# {key}: {one_line(str(text))}\n")
    table = csv.DictWriter(buffer, rows[0].keys(), lineterminator="\n")
    table.writeheader()
    table.writerows(_cells(row) for row in rounded(rows))
    with whole_file(path) as temporary:
        temporary.write_text(buffer.getvalue(), encoding="utf-8")


def _cells(row: dict) -> dict:
    """A row whose texts no spreadsheet takes for a formula."""
    return {key: cell(one_line(one)) if isinstance(one, str) else one for key, one in row.items()}


def rounded(value):
    """Plain values with figures rounded and None for NaN, whatever they are nested in."""
    if isinstance(value, float):
        return None if math.isnan(value) else round(float(value), DIGITS)
    if isinstance(value, dict):
        return {key: rounded(one) for key, one in value.items()}
    if isinstance(value, Figures):
        return rounded(value._asdict())
    if isinstance(value, list | tuple):
        return [rounded(one) for one in value]
    return value


def _content(report: ScoreReport) -> dict:
    return {
        "units": UNITS,
        "sign": SIGN,
        "method": METHOD,
        "steps": len(report.time),
        "rejected": report.rejected,
        "trials": {name: _trial(trial) for name, trial in report.trials.items()},
        "stations": [_station_row(one) for one in report.stations],
    }


def _trial(trial: TrialReport) -> dict:
    """A trial's figures by group, dataclasses made plain."""
    pairs = [{"nominal": nominal, "observed": share} for nominal, share in trial.reliability]
    plain = {name: asdict(one) for name, one in trial.plain.items()}
    return {**vars(trial), "reliability": pairs, "plain": plain}


def _station_row(one: StationReport) -> dict:
    return {
        "station": one.id,
        "name": one.name,
        "longitude": one.longitude,
        "latitude": one.latitude,
        "height": one.height,
        "position": one.position,
        **one.figures._asdict(),
        "bias_sigma": one.bias_sigma,
        "significance": one.significance,
        "bias_ratio": one.bias_ratio,
        "stands_off": one.stands_off,
        "rejected": one.rejected,
        "rejected_bias": one.rejected_bias,
    }


def _step_rows(report: ScoreReport) -> Iterable[dict]:
    for name, steps in report.steps.items():
        for time, scale_height, one in zip(report.time, report.scale_height, steps, strict=True):
            yield {
                "trial": name,
                "time": format_time(time),
                "scale_height": float(scale_height),
                **one._asdict(),
            }
