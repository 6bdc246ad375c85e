"""The files that a network.toml names -> one `Network`, on one time grid."""

from __future__ import annotations

import glob
from collections.abc import Callable, Iterable
from dataclasses import dataclass
from pathlib import Path

import numpy as np
import xarray as xr

from fieldgen.errors import InputError
from fieldgen.ground.grid import Grid, read_grid
from fieldgen.ground.terrain import Terrain, read_terrain
from fieldgen.readers.formats import read_delays, read_weather
from fieldgen.readers.places import locate_sites, locate_stations
from fieldgen.readers.records import DelayRecords, ReadingReport
from fieldgen.readers.tables import StationRow, read_station_table
from fieldgen.readers.time_grid import TimeGrid, spikes, step_means
from fieldgen.settings import Settings, read_settings


@dataclass
class Network:
    """Everything the chain needs to know about a network.

    stations : Dataset (station): longitude, latitude [degrees], ellipsoidal_height,
        orthometric_height, terrain_height [m], name
    delays : Dataset (time, station): ztd, ztd_sigma [m], pwv, pwv_sigma [kg m-2]
    weather : Dataset (time, site): pressure [hPa], temperature [K], relative_humidity [%], with
        the site's longitude, latitude, orthometric_height
    """

    settings: Settings
    grid: Grid
    terrain: Terrain
    stations: xr.Dataset
    delays: xr.Dataset
    weather: xr.Dataset
    report: ReadingReport


def read_network(path: str | Path, progress: Callable[[str], None] = lambda file: None) -> Network:
    """Network of a settings file: everything is read, checked and brought to one time grid.

    progress : called with the name of each file before it is read
    Raises SettingsError, InputError or GridError with what has to be mended.
    """
    settings = read_settings(path)
    grid = _read_grid(settings)
    terrain = read_terrain(settings.path(settings.terrain.file), grid)
    report = ReadingReport()
    delays = list(_read_files(settings, "delays", read_delays, report, progress))
    weather = list(_read_files(settings, "weather", read_weather, report, progress))
    table = _read_table(settings, report)
    stations = locate_stations(settings, grid, delays, table, report)
    sites = locate_sites(settings, weather, stations, report)
    time = _time_grid(settings, delays)
    return Network(
        settings=settings,
        grid=grid,
        terrain=terrain,
        stations=stations,
        delays=_grid_delays(settings, delays, stations, time, report),
        weather=_grid_weather(weather, sites, time, report),
        report=report,
    )


def _read_grid(settings: Settings) -> Grid:
    table = settings.grid
    if table.like is not None:
        return read_grid(settings.path(table.like))
    return Grid.between(table.crs, table.west, table.south, table.east, table.north, table.spacing)


def find_files(settings: Settings, kind: str) -> list[Path]:
    """Files that the patterns of ``stations.<kind>`` name, sorted, each once.

    Raises InputError for a pattern that names no file.
    """
    found = set()
    for pattern in getattr(settings.stations, kind):
        files = glob.glob(pattern, root_dir=settings.folder, recursive=True)
        if not files:
            raise InputError(f"stations.{kind}: {pattern!r} names no file below {settings.folder}.")
        found.update(files)
    return [settings.path(name) for name in sorted(found)]


def _read_files(settings: Settings, kind: str, read, report: ReadingReport, progress) -> Iterable:
    """Records of all files of a kind; a file without anything usable is reported and passed over.

    Raises InputError if no file at all could be used.
    """
    files = find_files(settings, kind)
    used = 0
    for path in files:
        name = _display_name(settings, path)
        progress(name)
        try:
            records = read(path, name=name)
        except InputError as error:
            report.unusable_files[name] = str(error)
            continue
        used += 1
        report.files[name] = len(records.time)
        report.rejections.merge(records.rejections)
        report.warnings.extend(records.warnings)
        yield records
    if files and not used:
        raise InputError(
            f"stations.{kind}: none of the {len(files)} files can be used. The first: "
            f"{next(iter(report.unusable_files.values()))}"
        )


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


def _time_grid(settings: Settings, delays: list[DelayRecords]) -> TimeGrid:
    step = np.timedelta64(int(settings.network.time_step.total_seconds()), "s")
    return TimeGrid.around(np.concatenate([np.unique(records.time) for records in delays]), step)


def _grid_delays(
    settings: Settings, delays, stations: xr.Dataset, time: TimeGrid, report: ReadingReport
) -> xr.Dataset:
    ids = list(stations.station.values)
    column = _columns(delays, "station_ids", "station", ids)
    epoch = np.concatenate([records.time for records in delays])
    values = {
        name: np.concatenate([getattr(records, name) for records in delays])
        for name in ("ztd", "ztd_sigma", "pwv", "pwv_sigma")
    }
    known = column >= 0
    column, epoch = column[known], epoch[known]
    values = {name: value[known] for name, value in values.items()}
    keep = _drop_duplicates(column, epoch, report)
    column, epoch = column[keep], epoch[keep]
    values = {name: value[keep] for name, value in values.items()}
    spike = spikes(column, epoch, values["ztd"], time.step, settings.screening.spike)
    _count_spikes(column[spike], ids, report)
    for name in ("ztd", "ztd_sigma"):
        values[name][spike] = np.nan
    return xr.Dataset(
        {
            name: (("time", "station"), step_means(column, epoch, value, time, len(ids)))
            for name, value in values.items()
        },
        coords={"time": time.stamps.astype("datetime64[ns]"), "station": stations.station},
        attrs={"time_step_seconds": int(time.step.astype(int))},
    )


def _columns(tables, ids_name: str, index_name: str, ids: list[str]):
    """Column of each record of all tables in the order of `ids`; -1 where it is not among them."""
    position = {name: i for i, name in enumerate(ids)}
    parts = [
        np.array([position.get(name, -1) for name in getattr(table, ids_name)], int)[
            getattr(table, index_name)
        ]
        for table in tables
    ]
    return np.concatenate(parts) if parts else np.zeros(0, int)


def _drop_duplicates(column, epoch, report: ReadingReport):
    """Indices of the records to keep, of each station and epoch the one read last."""
    order = np.lexsort((epoch, column))  # stable: equal keys stay in the order of reading
    last = np.ones(len(order), bool)
    same = (np.diff(column[order]) == 0) & (np.diff(epoch[order]).astype(int) == 0)
    last[:-1] = ~same
    if same.any():
        report.warnings.append(
            f"{same.sum()} delays stand in more than one file; the file read last is used"
        )
    return np.sort(order[last])


def _count_spikes(column, ids: list[str], report: ReadingReport) -> None:
    for index, count in zip(*np.unique(column, return_counts=True), strict=True):
        report.rejections.counts[f"station {ids[index]}", "spike within the hour"] += int(count)


def _grid_weather(weather, sites: xr.Dataset, time: TimeGrid, report) -> xr.Dataset:
    ids = list(sites.site.values)
    column = _columns(weather, "site_ids", "site", ids)
    known = column >= 0
    empty = [np.zeros(0)]
    epoch = np.concatenate([records.time for records in weather] or [np.zeros(0, "M8[s]")])
    variables = {}
    for name in ("pressure", "temperature", "relative_humidity"):
        values = np.concatenate([getattr(records, name) for records in weather] or empty)
        means = step_means(column[known], epoch[known], values[known], time, len(ids))
        variables[name] = (("time", "site"), means)
    return sites.assign(variables).assign_coords(time=time.stamps.astype("datetime64[ns]"))
