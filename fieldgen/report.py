"""What a run read, used, rejected, fitted and wrote: run.json and the summary on the terminal."""

from __future__ import annotations

import json
import platform
import sys
from collections import Counter
from dataclasses import dataclass
from importlib.metadata import version
from pathlib import Path

import numpy as np

from fieldgen.analysis import Day
from fieldgen.fields import Fields
from fieldgen.products.atomic import whole_file
from fieldgen.products.metadata import fieldgen_version
from fieldgen.readers.network import Network, ReadingReport
from fieldgen.station.screening import STATION_FLAGS
from fieldgen.station.surface_air import PRESSURE_SOURCES

HECTOPASCAL_PER_METRE = 0.12
"""Fall of pressure with height near sea level."""

LIBRARIES = ("numpy", "scipy", "xarray", "netCDF4", "rasterio", "pyproj")


@dataclass(frozen=True)
class DayReport:
    """One day of a run, plain values that go into JSON as they are."""

    name: str
    steps: int
    steps_made: int
    covariance: dict | None
    scale_height: dict | None
    leave_one_out: dict
    values_clipped: int
    pressure_sources: dict[str, int]
    barometers_rejected: dict[str, dict]
    steps_used: list[int]
    """Of each station of the run, in its order."""
    rejected: dict[str, dict[str, int]]
    files: list[str]


def report_day(name: str, day: Day, fields: Fields, files: list[str]) -> DayReport:
    """Report of a day from its model and its fields."""
    return DayReport(
        name=name,
        steps=len(day.makable),
        steps_made=int(day.makable.sum()),
        covariance=_covariance(day),
        scale_height=_scale_height(fields),
        leave_one_out=_leave_one_out(day),
        values_clipped=fields.clipped,
        pressure_sources={
            source: int((day.stations.pressure_source.values == code).sum())
            for source, code in PRESSURE_SOURCES.items()
        },
        barometers_rejected=_barometers(day),
        steps_used=(day.stations.flag.values == 0).sum(axis=0).tolist(),
        rejected=_rejected(day),
        files=files,
    )


def _covariance(day: Day) -> dict | None:
    if day.model is None:
        return None
    fit = day.model.fit
    rounded = {
        key: float(f"{value:.5g}") if isinstance(value, float) else value
        for key, value in fit.covariance._asdict().items()
    }
    return rounded | {"fitted": fit.fitted, "note": fit.note}


def _scale_height(fields: Fields) -> dict | None:
    known = fields.scale_height[np.isfinite(fields.scale_height)]
    if not len(known):
        return None
    return {"mean": round(float(known.mean())), "lowest": round(float(known.min())),
            "highest": round(float(known.max()))}  # fmt: skip


def _leave_one_out(day: Day) -> dict:
    """Squares and counts, so that days can be pooled."""
    used = (day.stations.flag.values == 0) & np.isfinite(day.stations.residual.values)
    residual = day.stations.residual.values[used]
    standardised = residual / day.stations.residual_sigma.values[used]
    return {
        "count": int(used.sum()),
        "sum_of_squares": float(np.sum(residual**2)),
        "sum_of_standardised_squares": float(np.sum(standardised**2)),
    }


def _barometers(day: Day) -> dict[str, dict]:
    """Steps and median difference [hPa] of the barometers that the others contradict."""
    rejected = day.stations.barometer_rejected.values
    residual = day.stations.barometer_residual.values
    return {
        str(day.stations.site.values[index]): {
            "steps": int(rejected[:, index].sum()),
            "difference": round(float(np.median(residual[rejected[:, index], index])), 1),
        }
        for index in np.flatnonzero(rejected.any(axis=0))
    }


def _rejected(day: Day) -> dict[str, dict[str, int]]:
    """Steps rejected by reason, of the stations that lost any; a value may have several reasons."""
    flags = day.stations.flag.values
    return {
        str(station): {
            name: count
            for name, bit in STATION_FLAGS.items()
            if (count := int(((column & bit) > 0).sum()))
        }
        for station, column in zip(day.stations.station.values, flags.T, strict=True)
        if column.any()
    }


@dataclass(frozen=True)
class RunReport:
    """A run: what it read and the reports of its days."""

    settings: dict
    stations: list[str]
    reading: ReadingReport
    days: list[DayReport]
    folder: Path

    @classmethod
    def of(cls, network: Network, folder: Path, days: list[DayReport]) -> RunReport:
        """Report of a finished run."""
        settings = network.settings.model_dump(mode="json", exclude={"folder"})
        stations = [str(station) for station in network.stations.station.values]
        return cls(settings, stations, network.report, days, folder)

    def as_dict(self) -> dict:
        """The content of run.json."""
        return {
            "fieldgen_version": fieldgen_version(),
            "python": platform.python_version(),
            "libraries": {name: version(name) for name in LIBRARIES},
            "command": sys.argv[1:],
            "settings": self.settings,
            "read": reading_as_dict(self.reading),
            "stations": self.stations,
            "days": [vars(day) for day in self.days],
            "warnings": self.barometer_warnings(),
            "summary": self.totals(),
        }

    def totals(self) -> dict:
        """Figures of the whole run."""
        count = sum(day.leave_one_out["count"] for day in self.days)
        rms = {
            name: float(np.sqrt(sum(day.leave_one_out[key] for day in self.days) / count))
            if count else None
            for name, key in (("leave_one_out_rmse", "sum_of_squares"),
                              ("leave_one_out_standardised_sd", "sum_of_standardised_squares"))
        }  # fmt: skip
        return {
            "steps": sum(day.steps for day in self.days),
            "steps_made": sum(day.steps_made for day in self.days),
            **rms,
            "values_clipped": sum(day.values_clipped for day in self.days),
            "pressure_sources": {
                source: sum(day.pressure_sources[source] for day in self.days)
                for source in PRESSURE_SOURCES
            },
            "files_written": sum(len(day.files) for day in self.days) + 1,
        }

    def station_totals(self) -> dict[str, Counter]:
        """Steps used and rejected by reason over the run, by station."""
        used = np.sum([day.steps_used for day in self.days], axis=0)
        totals = {
            station: Counter(used=int(steps))
            for station, steps in zip(self.stations, used, strict=True)
        }
        for day in self.days:
            for station, counts in day.rejected.items():
                totals[station].update(counts)
        return totals

    def barometer_warnings(self) -> list[str]:
        """One line for each barometer that the others contradicted."""
        found: dict[str, list[dict]] = {}
        for day in self.days:
            for site, counts in day.barometers_rejected.items():
                found.setdefault(site, []).append(counts)
        return [
            f"barometer {site}: not used in {sum(one['steps'] for one in counts)} steps, where it "
            f"reads {(worst := max((one['difference'] for one in counts), key=abs)):+.1f} hPa "
            f"against the others, as if its listed height were wrong by "
            f"{abs(worst) / HECTOPASCAL_PER_METRE:.0f} m"
            for site, counts in found.items()
        ]

    def write(self, path: Path) -> None:
        """Write run.json, whole or not at all."""
        with whole_file(path) as temporary:
            temporary.write_text(json.dumps(self.as_dict(), indent=1) + "\n", encoding="utf-8")


def reading_as_dict(reading: ReadingReport) -> dict:
    """What was read, as plain values."""
    return {
        "files": reading.files,
        "unusable_files": reading.unusable_files,
        "rejected": [
            {"where": where, "reason": reason, "count": count}
            for (where, reason), count in sorted(reading.rejections.counts.items())
        ],
        "rejected_examples": [str(example) for example in reading.rejections.examples],
        "left_out": reading.left_out,
        "warnings": reading.warnings,
    }
