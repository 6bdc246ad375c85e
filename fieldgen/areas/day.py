"""A day of a product folder, with all that the errors of its cells have in common.

The field file alone says how wrong each cell may be, not which cells are wrong together. The
station file holds the rest: the covariance, the error variance of every value used, and each hour's
variance factor. From them the kriging of the day is set up again, exactly.
"""

from __future__ import annotations

from dataclasses import dataclass
from datetime import timedelta
from functools import cached_property
from pathlib import Path

import numpy as np
import xarray as xr

from fieldgen.analysis import HEIGHT_ERROR
from fieldgen.comparing.field_reader import FieldFile, open_fields
from fieldgen.errors import InputError
from fieldgen.kriging.block import block_covariances, block_error_covariance, block_weights
from fieldgen.kriging.covariance import Covariance
from fieldgen.kriging.error_in_time import correlation_in_time
from fieldgen.kriging.places import PlaceMaker, Places
from fieldgen.kriging.solver import Gaps, Kriging

NEEDED = {
    "fields": ("terrain_sd", "common_sigma", "common_relative_sigma", "pwv_at_reference"),
    "stations": ("error_variance", "variance_factor", "kriging", "orthometric_height"),
}
"""Variables that the errors of areas need beyond those of `comparing.field_reader`."""


@dataclass(frozen=True)
class ErrorModel:
    """The kriging of a day, set up again; t hours, those that have a field.

    hours : (t,) indices of them among the day's
    heights : (n,) orthometric [m] of the stations used in the day
    present : (t, n) bool, excess : (t, n) [kg2 m-4], variance_factor : (t,)
    """

    hours: np.ndarray
    kriging: Kriging
    maker: PlaceMaker
    reference_height: float
    heights: np.ndarray
    present: np.ndarray
    excess: np.ndarray
    variance_factor: np.ndarray

    @cached_property
    def gaps(self) -> list[Gaps]:
        """Gaps of the hours."""
        pairs = zip(self.present, self.excess, strict=True)
        return [self.kriging.gaps(~present, excess) for present, excess in pairs]


def read_error_model(stations: xr.Dataset) -> ErrorModel | None:
    """Error model of a day's station file, opened; None if no hour of it has a field."""
    factor = stations.variance_factor.values.astype(float)
    hours = np.flatnonzero(np.isfinite(factor))
    if not len(hours):
        return None
    error = stations.error_variance.transpose("time", "station").values[hours].astype(float)
    used = np.flatnonzero(np.isfinite(error).any(axis=0))
    longitude, latitude = stations.longitude.values, stations.latitude.values
    about = stations.kriging.attrs
    reference, height = float(about["reference_height"]), stations.orthometric_height.values[used]
    maker = PlaceMaker(longitude, latitude, about["drift"])
    places = maker.places(longitude[used], latitude[used], (height - reference) / 1000.0)
    covariance = Covariance(
        about["model"], *(float(about[name]) for name in Covariance._fields[1:])
    )
    usual = np.nanmin(error[:, used], axis=0)
    return ErrorModel(
        hours=hours,
        kriging=Kriging(covariance, places, usual),
        maker=maker,
        reference_height=reference,
        heights=height,
        present=np.isfinite(error[:, used]),
        excess=np.nan_to_num(error[:, used] - usual),
        variance_factor=factor[hours],
    )


@dataclass(frozen=True)
class ProductDay:
    """Field and station file of a day, opened."""

    fields: FieldFile
    stations: xr.Dataset

    @cached_property
    def model(self) -> ErrorModel | None:
        """Error model of the hours that have a field."""
        return read_error_model(self.stations)

    @property
    def step(self) -> timedelta:
        """Step of the fields."""
        start, end = self.fields.steps[:, 0]
        return (end - start).astype(timedelta)

    @property
    def time(self):
        """End (t,) datetime64[s] of each step."""
        return self.fields.steps[1]

    def hourly(self, name: str):
        """A variable (t, ny * nx) or (t,) of the field file, of the hours that have a field."""
        values = self.fields.dataset[name].values[self.model.hours]
        return values.reshape(len(values), -1) if values.ndim > 1 else values.astype(float)

    @cached_property
    def _cells(self) -> dict:
        """Longitude, latitude [degrees], mean height and its SD [m] of all cells (ny * nx,)."""
        dataset = self.fields.dataset
        longitude, latitude = self.fields.longitude_latitude
        values = (longitude, latitude, dataset.terrain.values, dataset.terrain_sd.values)
        names = ("longitude", "latitude", "ground", "sd")
        return {name: one.ravel().astype(float) for name, one in zip(names, values, strict=True)}

    def places(self, cells) -> Places:
        """Places of some cells (m,)."""
        at, model = self._cells, self.model
        lift = (at["ground"][cells] - model.reference_height) / 1000.0
        return model.maker.places(at["longitude"][cells], at["latitude"][cells], lift)

    def factor(self, cells):
        """Water vapour of cells over that at the reference height (t, m).

        The mean of exp(-(h - h0)/H) over a cell, to second order in the terrain within it.
        """
        decay = 1.0 / self.hourly("scale_height")[:, None]
        above = self._cells["ground"][cells] - self.model.reference_height
        within = 0.5 * np.square(self._cells["sd"][cells] * decay)
        return np.exp(-above * decay) * (1.0 + within)

    def error_covariance(self, cells, shares):
        """Covariance (t, t) [kg2 m-4] of the errors of a weighted sum over cells, by hour.

        cells (m,) : indices into the flattened grid; shares (t, m) : what each counts, those of a
        mean sum to 1; a cell that counts must have a value
        """
        model, places = self.model, self.places(cells)
        kriging = block_error_covariance(
            model.kriging, model.gaps, model.excess, places, shares * self.factor(cells)
        )
        time = self.time[model.hours]
        larger = np.sqrt(model.variance_factor)
        pwv = np.nan_to_num(self.hourly("pwv")[:, cells]) * shares
        height = self._height_error(cells, places, pwv)
        constant = self.hourly("common_sigma") * shares.sum(axis=1)
        relative = self.hourly("common_relative_sigma") * pwv.sum(axis=1)
        return (
            kriging * np.outer(larger, larger) * correlation_in_time(time)
            + np.outer(height, height) * correlation_in_time(time, HEIGHT_ERROR)
            + np.outer(constant, constant)
            + np.outer(relative, relative)
        )

    def _height_error(self, cells, places: Places, pwv):
        """Error (t,) [kg m-2] of the sum for a scale height too large by its standard error.

        pwv (t, m) : of the cells, times their shares. The way of each cell is from the stations its
        value comes from, as in the field itself.
        """
        model = self.model
        covariances = block_covariances(model.kriging, places, pwv)
        weights = block_weights(model.kriging, model.gaps, covariances, places, pwv)
        way = pwv @ self._cells["ground"][cells] - model.heights @ weights
        scale = self.hourly("scale_height")
        return way * self.hourly("scale_height_sigma") / np.square(scale)


def open_days(folder: Path, start=None, end=None) -> list[ProductDay]:
    """Days of a product folder in the order of their time, those that a period touches.

    start, end : datetime64, by default all. Raises InputError if there are none, or if a file is
    missing or made without what errors need.
    """
    paths = sorted((folder / "fields").glob("pwv_*.nc"))
    if not paths:
        raise InputError(
            f"{folder}: holds no fields/pwv_*.nc, expected the folder of `fieldgen make`."
        )
    fields = [one for one in open_fields(paths) if _touches(one, start, end)]
    if not fields:
        raise InputError(f"{folder}: no step of its fields lies within the period.")
    return [_with_stations(folder, one) for one in fields]


def _touches(fields: FieldFile, start, end) -> bool:
    first, last = fields.steps[0, 0], fields.steps[1, -1]
    return (start is None or last > start) and (end is None or first < end)


def _with_stations(folder: Path, fields: FieldFile) -> ProductDay:
    path = folder / "stations" / fields.path.name.replace("pwv_", "stations_")
    try:
        stations = xr.load_dataset(path)
    except (OSError, ValueError, RuntimeError) as error:
        reason = getattr(error, "strerror", None) or "it is not NetCDF"
        raise InputError(
            f"{path}: cannot be read: {reason}. It belongs to {fields.path}, and errors of areas "
            "follow from it."
        ) from None
    for where, dataset, names in (
        (fields.path, fields.dataset, NEEDED["fields"]), (path, stations, NEEDED["stations"])
    ):  # fmt: skip
        for name in names:
            if name not in dataset.variables:
                raise InputError(
                    f"{where}: variable {name} is missing, expected a file of this version. Make "
                    "the day again."
                )
    if (stations.time.values != fields.dataset.time.values).any():
        raise InputError(f"{path}: its steps are not those of {fields.path}, expected the same.")
    return ProductDay(fields, stations)
