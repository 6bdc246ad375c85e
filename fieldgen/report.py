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

WATER_VAPOUR_PER_METRE = 155.0 * 0.0022768 * HECTOPASCAL_PER_METRE
"""What a metre too much in a station's height adds to its water vapour [kg m-2], because the
pressure is brought too high."""

USUAL_SCALE_HEIGHT = 2000.0  # [m]

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
    thermometers_rejected: dict[str, dict]
    barometers_doubtful: dict[str, dict]
    stations_condemned: dict[str, dict]
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
        thermometers_rejected=_thermometers(day),
        barometers_doubtful=_doubtful_barometers(day),
        stations_condemned=_condemned(day),
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
    """Steps and median difference [hPa] of the barometers that are not used; None of a difference
    where a barometer was only silent or frozen."""
    rejected = day.stations.barometer_rejected.values
    found = {}
    for index in np.flatnonzero(rejected.any(axis=0)):
        residual = day.stations.barometer_residual.values[rejected[:, index], index]
        known = residual[np.isfinite(residual)]
        found[str(day.stations.site.values[index])] = {
            "steps": int(rejected[:, index].sum()),
            "frozen": int(day.stations.barometer_frozen.values[:, index].sum()),
            "difference": round(float(np.median(known)), 1) if len(known) else None,
        }
    return found


def _thermometers(day: Day) -> dict[str, dict]:
    """Steps in which a site's temperature is not used, because the others contradict it."""
    steps = day.stations.thermometer_rejected.values.sum(axis=0)
    sites = day.stations.site.values
    return {str(sites[index]): {"steps": int(steps[index])} for index in np.flatnonzero(steps)}


def _doubtful_barometers(day: Day) -> dict[str, dict]:
    """Lasting difference and its standard error [hPa] of barometers that are still used."""
    bias, sigma = day.stations.barometer_bias.values, day.stations.barometer_bias_sigma.values
    return {
        str(day.stations.site.values[index]): {
            "difference": round(float(bias[index]), 2), "sigma": round(float(sigma[index]), 2)
        }
        for index in np.flatnonzero(day.stations.barometer_doubtful.values)
    }  # fmt: skip


def _condemned(day: Day) -> dict[str, dict]:
    """Median residual [kg m-2] of condemned stations, and the error of their listed height [m]
    that would explain it: pressure brought too high, and others' values brought to that height."""
    found = {}
    condemned = (day.stations.flag.values & STATION_FLAGS["condemned"]) > 0
    for index in np.flatnonzero(condemned.any(axis=0)):
        residual = day.stations.residual.values[:, index]
        others = day.stations.pwv.values[:, index] - residual
        if not np.isfinite(residual).any():
            continue
        median = float(np.nanmedian(residual))
        per_metre = WATER_VAPOUR_PER_METRE + float(np.nanmedian(others)) / USUAL_SCALE_HEIGHT
        found[str(day.stations.station.values[index])] = {
            "residual": round(median, 2),
            "height_error": round(median / per_metre),
        }
    return found


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
    """A run: what it read and the reports of its days; limits of the maps' colours [kg m-2]."""

    settings: dict
    stations: list[str]
    reading: ReadingReport
    days: list[DayReport]
    folder: Path
    limits: tuple[float, float]

    @classmethod
    def of(
        cls, network: Network, folder: Path, days: list[DayReport], limits: tuple[float, float]
    ) -> RunReport:
        """Report of a finished run."""
        settings = network.settings.model_dump(mode="json", exclude={"folder"})
        stations = [str(station) for station in network.stations.station.values]
        return cls(settings, stations, network.report, days, folder, limits)

    def as_dict(self) -> dict:
        """The content of run.json."""
        return {
            "fieldgen_version": fieldgen_version(),
            "python": platform.python_version(),
            "libraries": {name: version(name) for name in LIBRARIES},
            "command": sys.argv[1:],
            "settings": self.settings,
            "read": reading_as_dict(self.reading),
            "colour_limits": [float(limit) for limit in self.limits],
            "stations": self.stations,
            "days": [vars(day) for day in self.days],
            "warnings": self.warnings(),
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

    def warnings(self) -> list[str]:
        """One line for each barometer or station that the others contradict."""
        return [
            *(_barometer_warning(*one) for one in self._by_name("barometers_rejected")),
            *(_thermometer_warning(*one) for one in self._by_name("thermometers_rejected")),
            *(_doubt_warning(*one) for one in self._by_name("barometers_doubtful")),
            *(_station_warning(*one) for one in self._by_name("stations_condemned")),
        ]

    def _by_name(self, part: str) -> list[tuple[str, list[dict]]]:
        """What a part of the days' reports says of each barometer or station."""
        found: dict[str, list[dict]] = {}
        for day in self.days:
            for name, counts in getattr(day, part).items():
                found.setdefault(name, []).append(counts)
        return list(found.items())

    def write(self, path: Path) -> None:
        """Write run.json, whole or not at all."""
        with whole_file(path) as temporary:
            temporary.write_text(json.dumps(self.as_dict(), indent=1) + "\n", encoding="utf-8")


def _barometer_warning(site: str, days: list[dict]) -> str:
    steps = f"barometer {site}: not used in {sum(one['steps'] for one in days)} steps"
    frozen = sum(one["frozen"] for one in days)
    repeats = f", {frozen} of them because it repeats one value" if frozen else ""
    differences = [one["difference"] for one in days if one["difference"] is not None]
    if not differences:
        return steps + repeats
    worst = max(differences, key=abs)
    return (
        f"{steps}{repeats}, where it reads {worst:+.1f} hPa against the others, as if its listed "
        f"height were wrong by {abs(worst) / HECTOPASCAL_PER_METRE:.0f} m"
    )


def _thermometer_warning(site: str, days: list[dict]) -> str:
    steps = sum(one["steps"] for one in days)
    return f"thermometer {site}: not used in {steps} steps, where the others contradict it"


def _doubt_warning(site: str, days: list[dict]) -> str:
    last = days[-1]
    return (
        f"barometer {site}: used, but reads {last['difference']:+.1f} hPa (standard error "
        f"{last['sigma']:.1f}) against the others for days: it drifts, or its listed height is "
        f"wrong by {abs(last['difference']) / HECTOPASCAL_PER_METRE:.0f} m"
    )


def _station_warning(station: str, days: list[dict]) -> str:
    last = days[-1]
    return (
        f"station {station}: condemned, it reads {last['residual']:+.1f} kg m-2 against the "
        f"others, as if its listed height were {abs(last['height_error'])} m too "
        f"{'high' if last['height_error'] > 0 else 'low'}; its antenna may also be wrong"
    )


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
