"""One day: its fields, and its files."""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property
from pathlib import Path
from typing import TYPE_CHECKING

import numpy as np
import xarray as xr
from threadpoolctl import threadpool_limits

from fieldgen.analysis import Day, analyse_day, locate, reference_height
from fieldgen.constants import REFRACTIVITY
from fieldgen.fields import FIELD_FLAGS, CellMaker, Fields, make_fields_of_day
from fieldgen.kriging.places import PlaceMaker, Places
from fieldgen.memory import keep_freed_memory
from fieldgen.period import Piece
from fieldgen.products.even_picture import on_even_grid
from fieldgen.products.field_file import packed_dataset, unpack_fields, write_fields
from fieldgen.products.station_file import station_dataset, write_stations
from fieldgen.readers.network import Network
from fieldgen.report import DayReport, report_day
from fieldgen.retrieval import retrieve_water_vapour
from fieldgen.settings import Settings
from fieldgen.station.heights import reduction_factor
from fieldgen.station.screening import STATION_FLAGS
from fieldgen.station.series import MEDIAN_STEPS
from fieldgen.station.surface_air import PRESSURE_SOURCES
from fieldgen.upkeep.day_record import DayRecord, read_day_record, sizes_of
from fieldgen.upkeep.fingerprint import Fingerprints, fingerprint_maps

if TYPE_CHECKING:
    from fieldgen.products.maps import MapPainter

STEPS_AFTER = MEDIAN_STEPS // 2
"""Steps after a day that the test for jumps looks at."""

STEPS_FOR_LIMITS = 48
"""Steps, spread over the period, that the limits of the maps' colours are taken from."""

LIMITS_WITHOUT_DATA = (0.0, 50.0)
"""Colour limits where no station has a value [kg m-2]."""


@dataclass(frozen=True)
class DayMaker:
    """Makes the days of a network, each from the steps around it alone."""

    network: Network

    @cached_property
    def places(self) -> tuple[PlaceMaker, Places]:
        return locate(self.network.settings, self.network.stations)

    @cached_property
    def cells(self) -> CellMaker:
        network = self.network
        reference = reference_height(network.settings, network.stations)
        return CellMaker(network.grid, network.terrain, *self.places, reference)

    def rows(self, piece: Piece) -> slice:
        """The steps of the input that a day is made from."""
        settings = self.network.settings
        window = int(settings.kriging.window / settings.network.time_step)
        return slice(min(max(piece.last - window, 0), piece.first), piece.last + STEPS_AFTER)

    def analyse(self, piece: Piece) -> Day:
        """Model of a day."""
        rows = self.rows(piece)
        stations = retrieve_water_vapour(self.network, rows)
        first, last = piece.first - rows.start, piece.last - rows.start
        return analyse_day(self.network.settings, stations, self.places[1], first, last)

    def compute(self, piece: Piece) -> tuple[Day, Fields]:
        """Model and fields of a day."""
        keep_freed_memory()
        with threadpool_limits(1):  # results must not depend on how BLAS splits its sums
            day = self.analyse(piece)
            return day, make_fields_of_day(self.network.settings, self.cells, day)

    def packed_dataset(self, time, fields: Fields) -> xr.Dataset:
        """Fields (t, ny, nx) of one or several days with all their metadata, packed."""
        network = self.network
        return packed_dataset(
            grid=network.grid,
            terrain_height=network.terrain.mean,
            terrain_sd=network.terrain.sd,
            time=time,
            fields=fields,
            flag_bits=FIELD_FLAGS,
            network=network.settings.network,
            reference_height=reference_height(network.settings, network.stations),
            processing=describe_processing(network.settings),
        )

    def station_dataset(self, day: Day) -> xr.Dataset:
        """Stations of a day with all their metadata."""
        settings = self.network.settings
        kriging = {} if day.model is None else day.model.fit.covariance._asdict()
        kriging["drift"] = settings.kriging.drift
        kriging["reference_height"] = reference_height(settings, self.network.stations)
        return station_dataset(
            day.stations,
            network=settings.network,
            flag_bits=STATION_FLAGS,
            pressure_sources=PRESSURE_SOURCES,
            kriging=kriging,
        )


@dataclass(frozen=True)
class Task:
    """What is to be done with a day.

    maps : "all" of the hours asked for, the "latest" of them, or "none"
    only_maps : the day's other files are there already, and stay as they are
    """

    piece: Piece
    maps: str
    only_maps: bool = False


@dataclass
class DayWriter:
    """Makes days and writes their files below a folder.

    limits : of the maps' colours [kg m-2]
    painter : of this process, its base drawn for the first day and kept
    """

    maker: DayMaker
    folder: Path
    limits: tuple[float, float]
    fingerprints: Fingerprints
    painter: MapPainter | None = None

    def __call__(self, task: Task) -> DayReport:
        """Make, write and draw one day. Its record is written last: without it, the day is made
        anew by the next update."""
        piece = task.piece
        day, fields = self.maker.compute(piece)
        dataset = self.maker.packed_dataset(day.stations.time.values, fields)
        stations = self.maker.station_dataset(day)
        paths = [
            self.folder / "fields" / f"pwv_{piece.name}.nc",
            self.folder / "stations" / f"stations_{piece.name}.nc",
        ]
        if not task.only_maps:
            write_fields(dataset, paths[0])
            write_stations(stations, paths[1])
        paths += self._draw(task, dataset, stations)
        files = [str(path.relative_to(self.folder)) for path in paths]
        report = report_day(piece.name, day, fields, files)
        self._record(task, report)
        return report

    @cached_property
    def maps_fingerprint(self) -> str:
        """Fingerprint of the maps' colours and lines."""
        return fingerprint_maps(self.maker.network.settings, self.limits)

    def _record(self, task: Task, report: DayReport) -> None:
        """Leave the day's record; maps that the day no longer has are removed."""
        piece = task.piece
        whole = task.maps == "latest" or piece.asked == slice(0, piece.last - piece.first)
        before = read_day_record(self.folder, piece.name)
        record = DayRecord(
            shared=self.fingerprints.shared,
            length=self.fingerprints.length,
            window=self.fingerprints.of_steps(self.maker.rows(piece)),
            steps=self.fingerprints.stamps[piece.first : piece.last],
            maps=self.maps_fingerprint if whole else "",
            files=sizes_of(self.folder, report.files),
            report=report,
        )
        if before is not None and whole:
            for name in before.files.keys() - record.files.keys():
                (self.folder / name).unlink(missing_ok=True)
        record.write(self.folder)

    def _draw(self, task: Task, dataset: xr.Dataset, stations: xr.Dataset) -> list[Path]:
        """Draw what the task says; returns the maps of hours."""
        if task.maps == "none":
            return []
        from fieldgen.products.maps import write_latest, write_maps

        steps = task.piece.asked
        dataset, stations = dataset.isel(time=steps), stations.isel(time=steps)
        dataset = on_even_grid(unpack_fields(dataset), "fields")
        if self.painter is None:
            self.painter = self._make_painter(dataset)
        drawn = (dataset, stations, self.folder / "maps", self.painter)
        if task.maps == "latest":
            write_latest(*drawn)
            return []
        return write_maps(*drawn)

    def _make_painter(self, dataset: xr.Dataset):
        from fieldgen.products.maps import MapPainter, read_geometries

        settings = self.maker.network.settings
        lines = {
            name: read_geometries(settings.path(path))
            for name in ("coast", "rivers")
            if (path := getattr(settings.products, name)) is not None
        }
        return MapPainter(dataset, network_name=settings.network.name, limits=self.limits, **lines)


def colour_limits(network: Network, first: int, last: int) -> tuple[float, float]:
    """Limits of the maps' colours [kg m-2]: a setting, or whole fives around the stations' values.

    first, last : the steps of the period that is drawn
    """
    settings = network.settings
    if settings.products.limits != "auto":
        return settings.products.limits
    rows = np.unique(np.linspace(first, last - 1, STEPS_FOR_LIMITS).round().astype(int))
    stations = retrieve_water_vapour(network, rows)
    used = stations.pwv.values[stations.flag.values == 0]
    if not len(used):
        return LIMITS_WITHOUT_DATA
    factor = reduction_factor(stations.orthometric_height.values, 0.0, settings.heights.prior)
    at_sea_level = (stations.pwv.values / factor)[stations.flag.values == 0]
    low, high = np.quantile(used, 0.01), np.quantile(at_sea_level, 0.99)
    return 5.0 * np.floor(low / 5.0), 5.0 * np.ceil(high / 5.0 + 0.2)


def describe_processing(settings: Settings) -> str:
    """How the fields were made, for their metadata."""
    retrieval, kriging = settings.retrieval, settings.kriging
    conversion = (
        f"mean temperature {retrieval.mean_temperature_model.source}"
        if retrieval.conversion_factor is None
        else f"conversion factor {retrieval.conversion_factor:g} kg m-2 per m"
    )
    return (
        f"refractivity {REFRACTIVITY[retrieval.refractivity].source}; {conversion}; "
        f"scale height {settings.heights.scale_height}; {kriging.covariance} covariance, "
        f"{kriging.drift} drift, engine {kriging.engine}"
    )
