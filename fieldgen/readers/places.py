"""Where stations and barometers are, and how high above the geoid."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import xarray as xr

from fieldgen.errors import GridError, InputError
from fieldgen.ground.cells import CellGrid
from fieldgen.ground.geoid import undulation
from fieldgen.ground.grid import Grid
from fieldgen.ground.terrain import read_raster_at
from fieldgen.kriging.covariance import chord_positions, distances
from fieldgen.readers.height_checks import SAME_HEIGHT, Heights, check_listed, check_terrain
from fieldgen.readers.identities import Identities
from fieldgen.readers.records import ReadingReport, Records, Site
from fieldgen.readers.tables import StationRow
from fieldgen.settings import Settings
from fieldgen.station.surface_air import Sites, own_barometer

SAME_PLACE = 1.0
"""Two positions of one station further apart than this [km] are reported."""

SUSPICIOUS_CLIMB = 50.0
"""An antenna this much [m] above or below its own barometer is reported."""

BAROMETER_HEIGHT = 10.0
"""A barometer's height in its files this far [m] from the station table's is reported."""

STATION_MARGIN = 2.0
"""Stations further outside the grid than this many times `kriging.far_distance` are left out."""


def locate_stations(
    settings: Settings,
    grid: Grid | CellGrid,
    named: Identities,
    report: ReadingReport,
) -> xr.Dataset:
    """Stations that report delays and whose place is known, with all their heights.

    Dataset (station): longitude, latitude [degrees], ellipsoidal_height, orthometric_height,
    terrain_height [m], name. Raises InputError if no place or a height is not known, GridError if
    no station is near the grid.
    """
    rows = {
        station: row
        for station, site in named.sites.items()
        if (row := _station_row(station, site, named.rows.get(station), report)) is not None
    }
    _leave_out_doubtful(rows, report)
    if not rows:
        raise InputError("stations: no station has coordinates. Give stations.table.")
    column = _columns(rows)
    by_table = np.array([station in named.rows for station in rows])
    heights = _heights(
        settings, list(rows), column, by_table, report,
        {"stations.table": np.where(by_table, column["orthometric_height"], np.nan),
         "the delay files": np.array([named.sites[station].msl_height for station in rows])},
    )  # fmt: skip
    stations = xr.Dataset(
        {
            "longitude": ("station", column["longitude"]),
            "latitude": ("station", column["latitude"]),
            "ellipsoidal_height": ("station", heights.ellipsoidal),
            "orthometric_height": ("station", heights.used),
            "undulation": ("station", heights.undulation),
            "name": ("station", np.array([r.name or r.id for r in rows.values()], dtype=object)),
        },
        coords={"station": np.array(list(rows), dtype=object)},
    )
    near = _near_grid(settings, grid, stations, report)
    _check_reference_height(settings, near)
    near = _with_terrain(settings, near, report)
    used = Heights(
        near.orthometric_height.values, near.ellipsoidal_height.values, near.undulation.values
    )
    check_terrain(used, near.terrain_height.values, report)
    return near


def rows_of_codes(tables: list[Records], table: dict[str, StationRow]) -> dict[str, StationRow]:
    """Row of the station table by code, of the codes of the files that are in it."""
    codes = {code for records in tables for code in records.identifiers}
    found = {code: table.get(code) or _row_of_short_name(code, table) for code in codes}
    return {code: row for code, row in found.items() if row is not None}


def _station_row(
    station: str, site: Site, row: StationRow | None, report: ReadingReport
) -> StationRow | None:
    """Place of a station: from its row of the table, else from the delay files."""
    if row is not None:
        _compare_places(station, row, site, report)
        return row
    has_height = np.isfinite(site.ellipsoidal_height) or np.isfinite(site.msl_height)
    if np.isfinite([site.longitude, site.latitude]).all() and has_height:
        return StationRow(
            id=station,
            longitude=site.longitude,
            latitude=site.latitude,
            ellipsoidal_height=site.ellipsoidal_height,
            orthometric_height=site.msl_height,
            name=site.name,
        )
    report.left_out[station] = "no coordinates in stations.table or in the delay files"
    return None


def _leave_out_doubtful(rows: dict[str, StationRow], report: ReadingReport) -> None:
    """Leave out stations that share one row of the table by their first four characters."""
    users: dict[int, list[str]] = {}
    for station, row in rows.items():
        users.setdefault(id(row), []).append(station)
    for stations in users.values():
        if len(stations) > 1:
            for station in stations:
                row = rows.pop(station)
                report.left_out[station] = (
                    f"{row.id} of stations.table may be {' or '.join(stations)}; give full names"
                )


def _row_of_short_name(station: str, table: dict[str, StationRow]) -> StationRow | None:
    """Row whose identifier shares the first four characters, if there is just one."""
    alike = [row for name, row in table.items() if name[:4] == station[:4]]
    short = len(station) == 4 or any(len(row.id) == 4 for row in alike)
    return alike[0] if len(alike) == 1 and short else None


def _compare_places(station: str, row: StationRow, site: Site, report: ReadingReport) -> None:
    apart = distances(
        chord_positions([row.longitude], [row.latitude]),
        chord_positions([site.longitude], [site.latitude]),
    )[0, 0]
    if apart > SAME_PLACE:
        report.warnings.append(
            f"station {station}: stations.table and the delay files place it {apart:.1f} km apart; "
            "the table is used"
        )


def _columns(rows: dict[str, StationRow]) -> dict[str, np.ndarray]:
    names = ("longitude", "latitude", "ellipsoidal_height", "undulation", "orthometric_height")
    return {
        name: np.array([getattr(row, name) for row in rows.values()], dtype=float) for name in names
    }


def _heights(
    settings: Settings, ids: list[str], column, trusted, report: ReadingReport, lists
) -> Heights:
    """Heights (n,) [m], ellipsoidal and orthometric each made from the other where it is missing.

    A listed orthometric height counts where `trusted` (n,) or where nothing else is known: in
    delay files its geoid is often wrong, in sign or altogether. Both are compared, first all of the
    heights (n,) of each of the `lists`, by the name of who lists them.
    """
    geoid_height = _undulation(settings, column)
    listed = column["orthometric_height"]
    ellipsoidal = column["ellipsoidal_height"]
    computed = ellipsoidal - geoid_height
    explained = check_listed(Heights(computed, ellipsoidal, geoid_height), lists, report)
    for index in np.flatnonzero((np.abs(listed - computed) > SAME_HEIGHT) & ~explained):
        report.warnings.append(
            f"{ids[index]}: its listed height above sea level is {listed[index]:.1f} m, but "
            f"ellipsoidal height less undulation is {computed[index]:.1f} m; the "
            f"{'first' if trusted[index] else 'second'} is used"
        )
    orthometric = np.where(np.isfinite(listed) & (trusted | np.isnan(computed)), listed, computed)
    if np.isnan(orthometric).any():
        first = ids[int(np.argmax(np.isnan(orthometric)))]
        raise InputError(
            f"{first}: its orthometric height is unknown, as is that of "
            f"{np.isnan(orthometric).sum() - 1} more. Set terrain.geoid, or give "
            "orthometric_height or undulation in stations.table."
        )
    filled = np.where(np.isfinite(ellipsoidal), ellipsoidal, orthometric + geoid_height)
    return Heights(orthometric, filled, geoid_height)


def _undulation(settings: Settings, column):
    """Undulation (n,) [m]: the table's own, else that of terrain.geoid, else NaN."""
    geoid = settings.terrain.geoid
    if geoid is None:
        return column["undulation"]
    geoid = settings.path(geoid) if isinstance(geoid, Path) else geoid
    everywhere = undulation(geoid, column["longitude"], column["latitude"])
    return np.where(np.isfinite(column["undulation"]), column["undulation"], everywhere)


def _near_grid(settings: Settings, grid, stations: xr.Dataset, report: ReadingReport):
    """Stations within reach of the grid; raises GridError if there is none."""
    reach = STATION_MARGIN * settings.kriging.far_distance
    away = _distance_to_grid(grid, stations.longitude.values, stations.latitude.values)
    near = away <= reach
    ids = stations.station.values
    for station, distance in zip(ids[~near], away[~near], strict=True):
        report.left_out[station] = f"lies {distance:.0f} km from the grid"
    if not near.any():
        raise GridError(
            f"grid: all {len(ids)} stations lie more than {reach:.0f} km away from it, the nearest "
            f"{away.min():.0f} km. Check grid.crs, the edges, and whether longitude and latitude "
            "are swapped in stations.table."
        )
    return stations.isel(station=near)


def _distance_to_grid(grid: Grid | CellGrid, longitude, latitude):
    """Distance (n,) [km] of each place to the nearest of the grid's cells, zero inside it."""
    cells = tuple(part.ravel() for part in grid.longitude_latitude)
    position, cell_position = chord_positions(longitude, latitude), chord_positions(*cells)
    nearest = [np.linalg.norm(cell_position - place, axis=1).min() for place in position]
    return np.where(grid.contains(longitude, latitude), 0.0, nearest)


def _check_reference_height(settings: Settings, stations: xr.Dataset) -> None:
    """The reference height must lie inside the stations' range: beyond it nothing is measured."""
    height, heights = settings.heights.reference_height, stations.orthometric_height.values
    if height != "auto" and not heights.min() <= height <= heights.max():
        raise InputError(
            f"heights.reference_height: is {height:g} m, expected between the stations' lowest "
            f"{heights.min():.0f} m and highest {heights.max():.0f} m."
        )


def _with_terrain(settings: Settings, stations: xr.Dataset, report: ReadingReport) -> xr.Dataset:
    """Stations with the terrain's height; a listed height far from it is reported."""
    ground = read_raster_at(
        settings.path(settings.terrain.file),
        stations.longitude.values,
        stations.latitude.values,
        "terrain",
    )
    for name, listed, height in zip(
        stations.station.values, stations.orthometric_height.values, ground, strict=True
    ):
        if abs(listed - height) > settings.screening.terrain_difference:
            report.warnings.append(
                f"station {name}: its listed orthometric height {listed:.0f} m and the terrain "
                f"{height:.0f} m differ by more than screening.terrain_difference"
            )
    return stations.assign(terrain_height=("station", ground))


def locate_sites(
    settings: Settings,
    named: Identities,
    stations: xr.Dataset,
    report: ReadingReport,
) -> xr.Dataset:
    """Barometers whose place is known; one named like a station may take its coordinates.

    A `barometer_height` of the station table wins over the heights in the files.
    Dataset (site): longitude, latitude [degrees], orthometric_height [m].
    """
    rows = {}
    for name, site in named.sites.items():
        if name in named.rows:
            rows[name] = _listed_barometer(name, site, named.rows[name], report)
            continue
        row = _site_row(name, named.codes[name], site, stations)
        if row is None:
            report.left_out[name] = (
                "no position in its weather files, and not just one station of its name"
            )
        else:
            rows[name] = row
    column = _columns(rows)
    heights = _heights(
        settings, list(rows), column, np.ones(len(rows), bool), report,
        {"the weather files": column["orthometric_height"]},
    )  # fmt: skip
    return xr.Dataset(
        {
            "longitude": ("site", column["longitude"]),
            "latitude": ("site", column["latitude"]),
            "orthometric_height": ("site", heights.used),
        },
        coords={"site": np.array(list(rows), dtype=object)},
    )


def sites_of(dataset: xr.Dataset) -> Sites:
    """Places of the stations or barometers of a dataset."""
    names = ("longitude", "latitude", "orthometric_height")
    return Sites(*(dataset[name].values for name in names))


def report_climbs(
    settings: Settings, stations: xr.Dataset, sites: xr.Dataset, report: ReadingReport
) -> None:
    """Report antennas that are listed far above or below their own barometer."""
    antennas, barometers = sites_of(stations), sites_of(sites)
    own = own_barometer(antennas, barometers, settings.retrieval.barometer_distance)
    for index in np.flatnonzero(own >= 0):
        climb = antennas.height[index] - barometers.height[own[index]]
        if abs(climb) > SUSPICIOUS_CLIMB:
            report.warnings.append(
                f"station {stations.station.values[index]}: its antenna is listed {climb:+.0f} m "
                f"from its own barometer {sites.site.values[own[index]]}; one of the two heights "
                "is wrong"
            )


def _listed_barometer(name: str, site: Site, row: StationRow, report: ReadingReport) -> StationRow:
    """Place of a barometer whose height stands in the station table."""
    if abs(site.msl_height - row.barometer_height) > BAROMETER_HEIGHT:
        report.warnings.append(
            f"barometer {name}: its files say {site.msl_height:.1f} m above sea level, but "
            f"barometer_height of stations.table is {row.barometer_height:.1f} m; the table is used"
        )
    return StationRow(
        id=name,
        longitude=row.longitude,
        latitude=row.latitude,
        ellipsoidal_height=site.ellipsoidal_height,
        undulation=row.undulation,
        orthometric_height=row.barometer_height,
    )


def _site_row(name: str, code: str, site: Site, stations: xr.Dataset) -> StationRow | None:
    """Place of a barometer; what its file does not say is that of the one station of its code."""
    ids = list(stations.station.values)
    exact = [index for index, station in enumerate(ids) if station in (name, code)][:1]
    same = exact or [index for index, station in enumerate(ids) if station[:4] == code]
    station = stations.isel(station=same[0]) if len(same) == 1 else None
    placed = np.isfinite([site.longitude, site.latitude]).all()
    has_height = np.isfinite(site.ellipsoidal_height) or np.isfinite(site.msl_height)
    if station is None and not (placed and has_height):
        return None
    return StationRow(
        id=name,
        longitude=site.longitude if placed else float(station.longitude),
        latitude=site.latitude if placed else float(station.latitude),
        ellipsoidal_height=site.ellipsoidal_height,
        orthometric_height=site.msl_height if has_height else float(station.orthometric_height),
    )
