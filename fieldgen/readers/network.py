"""The files that a network.toml names -> one `Network`, on one time grid."""

from __future__ import annotations

import glob
from collections.abc import Callable
from dataclasses import dataclass
from functools import partial
from pathlib import Path

import numpy as np
import xarray as xr

from fieldgen.errors import InputError
from fieldgen.ground.cells import CellGrid
from fieldgen.ground.grid import Grid, read_grid
from fieldgen.ground.terrain import Terrain, read_terrain
from fieldgen.readers.formats import read_delays, read_weather
from fieldgen.readers.height_checks import check_barometers
from fieldgen.readers.identities import Identities, tell_apart
from fieldgen.readers.places import locate_sites, locate_stations, report_climbs, rows_of_codes
from fieldgen.readers.pool import Pool, drop_far_epochs, oldest_first
from fieldgen.readers.records import DelayRecords, ReadingReport, Records, WeatherRecords
from fieldgen.readers.tables import StationRow, read_station_table
from fieldgen.readers.time_grid import TimeGrid, spikes, step_means
from fieldgen.readers.weather_grids import read_weather_grid, weather_on_steps
from fieldgen.settings import Settings, read_settings

ODD_PRESSURE = 60.0
"""A median pressure this far [hPa] from the standard atmosphere's is reported: no weather does it
for long, 500 m of height do."""

MOST_VALUES = 40_000_000
"""Steps times stations of a run: ten years of hours of 450 stations, or one of five minutes of 380.
Each takes 32 bytes."""

SPIKE_WINDOW = np.timedelta64(3600, "s")
"""Records are held against the median of their hour, however long a step is."""


@dataclass
class Network:
    """Everything the chain needs to know about a network.

    stations : Dataset (station): longitude, latitude [degrees], ellipsoidal_height,
        orthometric_height, terrain_height [m], name
    delays : Dataset (time, station): ztd, ztd_sigma [m], pwv, pwv_sigma [kg m-2]
    weather : Dataset (time, site): pressure [hPa], temperature [K], relative_humidity [%], with
        the site's longitude, latitude, orthometric_height
    weather_grid : Dataset (time, station) of what weather grids say at the antennas, see
        `fieldgen.readers.weather_grids.weather_on_steps`; None where no grid is named
    """

    settings: Settings
    grid: Grid | CellGrid
    terrain: Terrain
    stations: xr.Dataset
    delays: xr.Dataset
    weather: xr.Dataset
    report: ReadingReport
    weather_grid: xr.Dataset | None = None

    @property
    def has_delay(self) -> np.ndarray:
        """Steps (t,) bool at which any station has a delay or water vapour."""
        found = np.isfinite(self.delays.ztd.values) | np.isfinite(self.delays.pwv.values)
        return found.any(axis=1)


def read_network(path: str | Path, progress: Callable[[str], None] = lambda file: None) -> Network:
    """Network of a settings file: everything is read, checked and brought to one time grid.

    progress : called with the name of each file before it is read
    Raises SettingsError, InputError or GridError with what has to be mended.
    """
    settings = read_settings(path)
    grid = _read_grid(settings)
    land = settings.terrain
    terrain = read_terrain(settings.path(land.file), grid, land.lowest_land)
    report = ReadingReport()
    _check_lines(settings)
    table = _read_table(settings, report)
    delays, named = _read_delays(settings, table, report, progress)
    weather, sites_named = _read_weather(settings, table, report, progress)
    stations = locate_stations(settings, grid, named, report)
    sites = locate_sites(settings, sites_named, stations, report)
    report_climbs(settings, stations, sites, report)
    time = _time_grid(settings, delays, stations.sizes["station"])
    grids = _read_grids(settings, stations, sites, time, report, progress)
    gridded = _grid_weather(weather, sites, time, report)
    _report_odd_pressures(gridded, report)
    if grids is not None:
        count = stations.sizes["station"]
        known = stations.undulation.values[np.isfinite(stations.undulation.values)]
        undulation = float(np.median(known)) if len(known) else np.nan
        check_barometers(gridded, grids.isel(place=slice(count, None)), undulation, report)
        grids = grids.isel(place=slice(count)).rename(place="station")
    elif not sites.sizes["site"]:
        report.warnings.append(
            "no barometer and no weather grid: pressure can only be climatological, which the "
            "fields do not use unless retrieval.climatology_in_fields is set. Name weather files "
            "in stations.weather or stations.grids."
        )
    return Network(
        settings=settings,
        grid=grid,
        terrain=terrain,
        stations=stations,
        delays=_grid_delays(settings, delays, stations, time, report),
        weather=gridded,
        report=report,
        weather_grid=grids,
    )


def _read_grids(settings: Settings, stations, sites, time: TimeGrid, report, progress):
    """What weather grids say at the antennas, then at the barometers, Dataset (time, place); None
    where no grid is named. Antennas that they do not cover are reported."""
    if not settings.stations.grids:
        return None
    longitude, latitude = (
        np.concatenate([stations[name].values, sites[name].values])
        for name in ("longitude", "latitude")
    )
    read = partial(read_weather_grid, longitude=longitude, latitude=latitude)
    records = list(_read_files(settings, "grids", read, report, progress))
    gap = np.timedelta64(int(settings.retrieval.grid_gap.total_seconds()), "s")
    found = weather_on_steps(records, len(longitude), time.stamps, time.step, gap)
    known = np.isfinite(found.pressure.values)[:, : stations.sizes["station"]]
    outside = ~known.any(axis=0)
    if not known.any():
        report.warnings.append(
            "weather grids: give no pressure at any antenna and step. They need surface pressure "
            "with the height of the model's surface, or sea-level pressure, around the stations."
        )
    elif outside.any():
        ids = ", ".join(stations.station.values[outside])
        report.warnings.append(f"weather grids: do not cover {outside.sum()} stations: {ids}")
    if known.any() and (silent := int((~known.any(axis=1)).sum())):
        report.warnings.append(
            f"weather grids: give no pressure in {silent} of {len(known)} steps, which no two "
            "fields within retrieval.grid_gap surround"
        )
    return found.assign_coords(time=time.stamps.astype("datetime64[ns]"))


def _check_lines(settings: Settings) -> None:
    """Raise InputError for lines of the maps that are not there, before the work begins."""
    for name, path in settings.products.lines.items():
        if not settings.path(path).is_file():
            raise InputError(f"products.{name}: {settings.path(path)} is not a file.")


def _read_grid(settings: Settings) -> Grid | CellGrid:
    table = settings.grid
    if table.like is not None:
        return read_grid(settings.path(table.like))
    return Grid.between(table.crs, table.west, table.south, table.east, table.north, table.spacing)


def _read_delays(
    settings: Settings, table: dict[str, StationRow], report: ReadingReport, progress
) -> tuple[Pool, Identities]:
    """All delays, by station, and the stations told apart."""
    tables = _read_files(settings, "delays", read_delays, report, progress)
    drop_far_epochs(tables, report.rejections)
    named = tell_apart(tables, rows_of_codes(tables, table), report)
    return Pool.of(tables, named, DelayRecords.values), named


def _read_weather(
    settings: Settings, table: dict[str, StationRow], report: ReadingReport, progress
) -> tuple[Pool, Identities]:
    """All surface weather, by site, and the sites told apart."""
    read = partial(read_weather, pressure_unit=settings.stations.pressure_unit)
    tables = _read_files(settings, "weather", read, report, progress)
    listed = {name: row for name, row in table.items() if np.isfinite(row.barometer_height)}
    named = tell_apart(tables, rows_of_codes(tables, listed), report, "barometer")
    return Pool.of(tables, named, WeatherRecords.values), named


def find_files(settings: Settings, kind: str, report: ReadingReport) -> list[Path]:
    """Files that the patterns of ``stations.<kind>`` name, sorted, each once.

    A pattern that names no file is reported as a warning, so that a run goes on with the others;
    InputError if none of the patterns of a kind that is needed names any.
    """
    patterns = getattr(settings.stations, kind)
    found = {
        pattern: glob.glob(pattern, root_dir=settings.folder, recursive=True)
        for pattern in patterns
    }
    files = sorted({file for some in found.values() for file in some})
    empty = [
        f"stations.{kind}: {pattern!r} names no file below {settings.folder}"
        for pattern, some in found.items()
        if not some
    ]
    if empty and not files and is_needed(settings, kind):
        raise InputError(f"{empty[0]}.")
    report.warnings.extend(empty)
    return [settings.path(name) for name in files]


def is_needed(settings: Settings, kind: str) -> bool:
    """Whether a run without any file of ``stations.<kind>`` is of no use: without delays, or
    without barometers where no weather grid is named."""
    return kind == "delays" or (kind == "weather" and not settings.stations.grids)


def _read_files(
    settings: Settings, kind: str, read, report: ReadingReport, progress
) -> list[Records]:
    """Records of all files of a kind, oldest file first; a file without anything usable, or one
    that is gone by now, is reported and passed over.

    Raises InputError if no file at all of a kind that is needed could be used.
    """
    files = find_files(settings, kind, report)
    tables = []
    for path in files:
        name = _display_name(settings, path)
        progress(name)
        try:
            records = read(path, name=name)
        except InputError as error:
            report.unusable_files[name] = str(error)
            continue
        report.files[name] = len(records.time)
        report.rejections.merge(records.rejections)
        report.warnings.extend(f"{name}: {warning}" for warning in records.warnings)
        records.compact()
        tables.append(records)
    if files and not tables and is_needed(settings, kind):
        raise InputError(
            f"stations.{kind}: none of the {len(files)} files can be used. The first: "
            f"{next(iter(report.unusable_files.values()))}"
        )
    return oldest_first(tables)


def _display_name(settings: Settings, path: Path) -> str:
    return (
        str(path.relative_to(settings.folder))
        if path.is_relative_to(settings.folder)
        else str(path)
    )


def _read_table(settings: Settings, report: ReadingReport) -> dict[str, StationRow]:
    if settings.stations.table is None:
        return {}
    path = settings.path(settings.stations.table)
    rows, rejections = read_station_table(path, name=_display_name(settings, path))
    report.rejections.merge(rejections)
    return rows


def _time_grid(settings: Settings, delays: Pool, stations: int) -> TimeGrid:
    step = np.timedelta64(int(settings.network.time_step.total_seconds()), "s")
    time = TimeGrid.around(np.unique(delays.time), step)
    if (time.end - time.start) // step * stations > MOST_VALUES:
        raise InputError(
            f"stations.delays: {stations} stations report from {delays.time.min()} to "
            f"{delays.time.max()}, expected at most {MOST_VALUES} values at steps of "
            "network.time_step. Name fewer files, or take out a record of a wrong year."
        )
    return time


def _grid_delays(
    settings: Settings, delays: Pool, stations: xr.Dataset, time: TimeGrid, report: ReadingReport
) -> xr.Dataset:
    """Step means of all delays, without those that stand off the others of their hour."""
    ids = list(stations.station.values)
    names = DelayRecords.values
    gridded = {name: np.full((len(time.stamps), len(ids)), np.nan) for name in names}
    doubled = early = 0
    for column, station in enumerate(ids):
        epoch, values, gave_way = delays.series(station)
        doubled += gave_way
        early += int((epoch <= time.start).sum())
        spike = spikes(epoch, values["ztd"], SPIKE_WINDOW, settings.screening.spike)
        if spike.any():
            report.rejections.counts[f"station {station}", "spike within the hour"] += int(
                spike.sum()
            )
        for name in names:
            used = values[name] if name.startswith("pwv") else np.where(spike, np.nan, values[name])
            gridded[name][:, column] = step_means(epoch, used, time)
    _report_doubled("delays", doubled, report)
    if early:
        report.rejections.counts["delays", "on the edge before the first whole step"] += early
    return xr.Dataset(
        {name: (("time", "station"), values) for name, values in gridded.items()},
        coords={"time": time.stamps.astype("datetime64[ns]"), "station": stations.station},
    )


def _report_doubled(what: str, count: int, report: ReadingReport) -> None:
    if count:
        report.warnings.append(
            f"{count} {what} stand in more than one file; the file created last is used"
        )


def _grid_weather(
    weather: Pool, sites: xr.Dataset, time: TimeGrid, report: ReadingReport
) -> xr.Dataset:
    ids = list(sites.site.values)
    names = WeatherRecords.values
    gridded = {name: np.full((len(time.stamps), len(ids)), np.nan) for name in names}
    doubled = 0
    for column, site in enumerate(ids):
        epoch, values, gave_way = weather.series(site)
        doubled += gave_way
        for name in names:
            gridded[name][:, column] = step_means(epoch, values[name], time)
    _report_doubled("weather records", doubled, report)
    variables = {name: (("time", "site"), values) for name, values in gridded.items()}
    return sites.assign(variables).assign_coords(time=time.stamps.astype("datetime64[ns]"))


def _report_odd_pressures(weather: xr.Dataset, report: ReadingReport) -> None:
    """Report barometers whose pressure cannot be that of their height.

    The standard atmosphere is that of ICAO Doc 7488, below 11 km.
    """
    for site in weather.site.values:
        one = weather.sel(site=site)
        measured, height = one.pressure.values, float(one.orthometric_height)
        measured = measured[np.isfinite(measured)]
        expected = 1013.25 * (1.0 - 2.25577e-5 * height) ** 5.25588
        if len(measured) and abs(np.median(measured) - expected) > ODD_PRESSURE:
            report.warnings.append(
                f"barometer {site}: its pressure is {np.median(measured):.0f} hPa, expected about "
                f"{expected:.0f} hPa at its height of {height:.0f} m. Check the height, and whether"
                " the pressure is reduced to sea level."
            )
