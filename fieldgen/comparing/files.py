"""A comparison as files: compare.json, and compare.csv with a row for each observation."""

from __future__ import annotations

from pathlib import Path

import numpy as np

from fieldgen.comparing.comparison import Comparison
from fieldgen.comparing.observations import SOUNDING_SIGMA
from fieldgen.products.metadata import format_time
from fieldgen.scoring.figures import reliability
from fieldgen.scoring.files import about, write_json, write_table

UNITS = (
    "observed, observed_sigma, field, field_sigma, error, sigma, bias, rmse, mae, crps, mean_sigma "
    "in kg m-2; height, terrain in m; longitude, latitude in degrees; others without unit"
)

SIGN = "Errors are the field less the observation: positive where the field is too moist."

METHOD = {
    "field": "Each of the four cells around an observation is brought from its mean terrain to the "
    "observation's height with the scale height of the step; their logarithms are interpolated.",
    "field_sigma": "The cells' standard error, and the scale height's own over the height between "
    "the terrain and the observation. What varies within the step counts as error.",
    "time": "A step holds the observations after its start up to its end.",
}

SOUNDINGS = (
    "Integral of specific humidity over pressure, from the terrain or the lowest level if that is "
    f"higher; standard error {SOUNDING_SIGMA:.0%} of it."
)


def write_comparison(comparison: Comparison, folder: Path) -> list[Path]:
    """Write compare.json and compare.csv; returns their paths.

    Raises OutputError if the folder cannot be written.
    """
    head = about("fields beside independent water vapour", comparison.network, *comparison.period)
    head |= {"observations": comparison.truth_file, "units": UNITS, "sign": SIGN}
    paths = [folder / "compare.json", folder / "compare.csv"]
    write_json(head | _content(comparison), paths[0])
    write_table(head, _rows(comparison), paths[1])
    return paths


def _content(comparison: Comparison) -> dict:
    method = METHOD | ({"soundings": SOUNDINGS} if comparison.is_soundings else {})
    rejections = comparison.rejections
    pairs = reliability(comparison.error, comparison.sigma)
    return {
        "method": method,
        "outcomes": comparison.counts,
        "rejected": {reason: count for (_, reason), count in rejections.counts.items()},
        "rejected_examples": [str(example) for example in rejections.examples],
        "figures": dict(comparison.groups()),
        "reliability": [{"nominal": nominal, "observed": share} for nominal, share in pairs],
    }


def _rows(comparison: Comparison) -> list[dict]:
    error, sigma = comparison.error, comparison.sigma
    return [
        {
            "line": one.line,
            "station": one.station,
            "time": format_time(np.datetime64(one.time, "s")),
            "longitude": one.longitude,
            "latitude": one.latitude,
            "height": one.height,
            "terrain": float(comparison.terrain[row]),
            "observed": one.value,
            "observed_sigma": one.sigma,
            "field": float(comparison.field[row]),
            "field_sigma": float(comparison.field_sigma[row]),
            "error": float(error[row]),
            "sigma": float(sigma[row]),
            "flag": int(comparison.flag[row]),
            "outcome": str(comparison.outcome[row]),
        }
        for row, one in enumerate(comparison.observations)
    ]
