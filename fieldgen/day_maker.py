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
    def _places(self) -> tuple[PlaceMaker, Places]:
        return locate(self.network.settings, self.network.stations)

    @cached_property
    def _cells(self) -> CellMaker:
        network = self.network
        reference = reference_height(network.settings, network.stations)
        return CellMaker(network.grid, network.terrain, *self._places, reference)

    def analyse(self, piece: Piece) -> Day:
        """Model of a day."""
        settings = self.network.settings
        window = int(settings.kriging.window / settings.network.time_step)
        start = min(max(piece.last - window, 0), piece.first)
        stations = retrieve_water_vapour(self.network, slice(start, piece.last + STEPS_AFTER))
        places = self._places[1]
        return analyse_day(settings, stations, places, piece.first - start, piece.last - start)

    def compute(self, piece: Piece) -> tuple[Day, Fields]:
        """Model and fields of a day."""
        keep_freed_memory()
        with threadpool_limits(1):  # results must not depend on how BLAS splits its sums
            day = self.analyse(piece)
            return day, make_fields_of_day(self.network.settings, self._cells, day)

    def packed_dataset(self, time, fields: Fields) -> xr.Dataset:
        """Fields (t, ny, nx) of one or several days with all their metadata, packed."""
        network = self.network
        return packed_dataset(
            grid=network.grid,
            terrain_height=network.terrain.mean,
            time=time,
            fields=fields,
            flag_bits=FIELD_FLAGS,
            network=network.settings.network,
            reference_height=reference_height(network.settings, network.stations),
            processing=describe_processing(network.settings),
        )

    def station_dataset(self, day: Day) -> xr.Dataset:
        """Stations of a day with all their metadata."""
        return station_dataset(
            day.stations,
            network=self.network.settings.network,
            flag_bits=STATION_FLAGS,
            pressure_sources=PRESSURE_SOURCES,
        )


@dataclass
class DayWriter:
    """Makes days and writes their files below a folder.

    limits : of the maps' colours [kg m-2]
    painter : of this process, its base drawn for the first day and kept
    """

    maker: DayMaker
    folder: Path
    limits: tuple[float, float]
    painter: MapPainter | None = None

    def __call__(self, piece: Piece, maps: str) -> DayReport:
        """Make, write and draw one day; maps: which of its hours are drawn."""
        day, fields = self.maker.compute(piece)
        dataset = self.maker.packed_dataset(day.stations.time.values, fields)
        stations = self.maker.station_dataset(day)
        paths = [
            self.folder / "fields" / f"pwv_{piece.name}.nc",
            self.folder / "stations" / f"stations_{piece.name}.nc",
        ]
        write_fields(dataset, paths[0])
        write_stations(stations, paths[1])
        if maps != "none":
            paths += self._draw(piece, dataset, stations, maps)
        files = [str(path.relative_to(self.folder)) for path in paths]
        return report_day(piece.name, day, fields, files)

    def _draw(
        self, piece: Piece, dataset: xr.Dataset, stations: xr.Dataset, maps: str
    ) -> list[Path]:
        from fieldgen.products.maps import write_maps

        steps = [piece.asked.stop - 1] if maps == "latest" else piece.asked
        dataset, stations = dataset.isel(time=steps), stations.isel(time=steps)
        dataset = unpack_fields(dataset)
        if self.painter is None:
            self.painter = self._make_painter(dataset)
        return write_maps(dataset, stations, self.folder / "maps", self.painter)

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
