"""What `fieldgen catchments` prints."""

from __future__ import annotations

import numpy as np

from fieldgen.areas.series import AreaSeries
from fieldgen.text_table import new_table, render


def format_series(series: AreaSeries) -> str:
    """A row for each area: mean over the period, and the least coverage."""
    table = new_table("area", "km2", "pwv kg m-2", "sigma", "million m3", "least coverage")
    for row, name in enumerate(series.areas.names):
        there = np.isfinite(series.pwv[row])
        if not there.any():
            table.add_row(name, f"{series.size[row] / 1e6:.0f}", "", "", "", "0 %")
            continue
        pwv, sigma = series.pwv[row, there], series.sigma[row, there]
        table.add_row(
            name,
            f"{series.size[row] / 1e6:.0f}",
            f"{pwv.min():.1f} to {pwv.max():.1f}",
            f"{sigma.mean():.2f}",
            f"{series.volume[row, there].mean():.1f}",
            f"{series.coverage[row].min():.0%}".replace("%", " %"),
        )
    return render(table)
