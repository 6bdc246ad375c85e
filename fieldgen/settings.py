"""network.toml -> checked settings.

All tables but ``[grid]``, ``[stations]`` and ``[terrain]`` are optional; unknown keys are errors;
every problem is listed at once, with the key's path and the rule it breaks. Paths in the file are
relative to the file.
"""

from __future__ import annotations

import re
import tomllib
from datetime import timedelta
from pathlib import Path
from typing import Annotated, Literal

from pydantic import (
    AfterValidator,
    BaseModel,
    BeforeValidator,
    ConfigDict,
    Field,
    ValidationError,
    model_validator,
)

from fieldgen.constants import MEAN_TEMPERATURE, REFRACTIVITY, MeanTemperature
from fieldgen.errors import SettingsError
from fieldgen.kriging.covariance import MODELS
from fieldgen.kriging.fitting import AUTO

_KEY = re.compile(r"[a-z_]+")
"""A key of the settings, unlike the library's names for the branches of a choice."""

_DURATION_UNITS = {"min": "minutes", "h": "hours", "d": "days"}


def parse_duration(text: str) -> timedelta:
    """Duration from text such as ``15min``, ``1h`` or ``2d``; raises ValueError."""
    for suffix, unit in _DURATION_UNITS.items():
        number = str(text).removesuffix(suffix)
        if number != text and number.isdigit() and int(number) > 0:
            return timedelta(**{unit: int(number)})
    raise ValueError('expected a whole number and a unit, such as "15min", "1h" or "2d"')


def _check_divides_day(step: timedelta) -> timedelta:
    if timedelta(days=1) % step or step < timedelta(minutes=5):
        raise ValueError("expected a step of 5 minutes or more that divides a day evenly")
    return step


def _check_ascending(limits: tuple[float, float]) -> tuple[float, float]:
    if limits[0] >= limits[1]:
        raise ValueError("expected [low, high] with low < high")
    return limits


def _name_of(family):
    """Validator for the name of one of a family of published methods."""

    def check(name: str) -> str:
        if name not in family:
            raise ValueError(f"expected one of {', '.join(family)}")
        return name

    return AfterValidator(check)


Duration = Annotated[timedelta, BeforeValidator(parse_duration)]
TimeStep = Annotated[Duration, AfterValidator(_check_divides_day)]
Positive = Annotated[float, Field(gt=0)]
NotNegative = Annotated[float, Field(ge=0)]


class _Table(BaseModel):
    model_config = ConfigDict(extra="forbid", frozen=True, allow_inf_nan=False)


class NetworkTable(_Table):
    """``[network]``: its name, the step of its products, and who stands behind them."""

    name: str = Field("network", min_length=1, max_length=120)
    time_step: TimeStep = timedelta(hours=1)
    institution: str = ""
    url: str = ""
    email: str = ""
    license: str = "not stated; ask the network's operator"


class GridTable(_Table):
    """``[grid]``: the outer cell edges in units of the CRS, or a file whose grid is taken over."""

    crs: str | None = None
    west: float | None = None
    south: float | None = None
    east: float | None = None
    north: float | None = None
    spacing: Positive | None = None
    like: Path | None = None

    @model_validator(mode="after")
    def _check_complete(self):
        edges = ("crs", "west", "south", "east", "north", "spacing")
        given = [key for key in edges if getattr(self, key) is not None]
        if self.like is not None:
            if given:
                raise ValueError(f"expected like alone, without {', '.join(given)}")
            return self
        missing = [key for key in edges if key not in given]
        if missing:
            raise ValueError(f"expected like, or crs and all edges; missing {', '.join(missing)}")
        if self.west >= self.east or self.south >= self.north:
            raise ValueError("expected west < east and south < north")
        for low, high in (("west", "east"), ("south", "north")):
            cells = (getattr(self, high) - getattr(self, low)) / self.spacing
            if abs(cells - round(cells)) > 1e-6 or round(cells) < 2:
                raise ValueError(
                    f"expected {high} - {low} to be two or more whole spacings; it is {cells:g}"
                )
        return self


class StationsTable(_Table):
    """``[stations]``: the input files, as glob patterns."""

    delays: list[str] = Field(min_length=1)
    weather: list[str] = []
    grids: list[str] = []
    table: Path | None = None


class TerrainTable(_Table):
    """``[terrain]``: orthometric heights finer than the grid, and the geoid."""

    file: Path
    geoid: float | Path | None = None
    lowest_land: float = 0.0


class RetrievalTable(_Table):
    """``[retrieval]``: how a delay becomes water vapour."""

    refractivity: Annotated[str, _name_of(REFRACTIVITY)] = "bevis1994"
    mean_temperature: Annotated[str, _name_of(MEAN_TEMPERATURE)] | MeanTemperatureTable = (
        "bevis1992"
    )
    conversion_factor: Annotated[float, Field(ge=100, le=200)] | None = None
    ztd_sigma_scale: Positive = 1.5
    ztd_sigma_floor: NotNegative = 0.004
    common_sigma: NotNegative = 0.2
    barometer_sigma: Positive = 0.3
    barometer_distance: Positive = 1.0
    pressure: list[Literal["own", "neighbours", "grid", "climatology"]] = Field(
        ["own", "neighbours", "grid", "climatology"], min_length=1
    )
    pressure_sigma_limit: Positive = 2.0
    grid_sigma: Positive = 1.2
    grid_gap: Duration = timedelta(hours=6)
    climatology_in_fields: bool = False

    @property
    def mean_temperature_model(self) -> MeanTemperature:
        """The coefficients that `mean_temperature` names or lists."""
        if isinstance(self.mean_temperature, str):
            return MEAN_TEMPERATURE[self.mean_temperature]
        table = self.mean_temperature
        return MeanTemperature(table.intercept, table.slope, table.rms, "settings")


class MeanTemperatureTable(_Table):
    """``retrieval.mean_temperature`` as coefficients: Tm = intercept + slope Ts."""

    intercept: float
    slope: float
    rms: Positive


class ScreeningTable(_Table):
    """``[screening]``: limits beyond which a value is not used."""

    formal_error: Positive = 0.010
    formal_error_ratio: Positive = 2.5
    spike: Positive = 0.030
    jump: Positive = 8.0
    neighbour_ratio: Positive = 4.0
    neighbour_difference: Positive = 2.5
    bias_ratio: Positive = 2.0
    condemn_share: Annotated[float, Field(gt=0, le=1)] = 0.5
    pressure_difference: Positive = 4.0
    terrain_difference: Positive = 150.0


class HeightsTable(_Table):
    """``[heights]``: the reference height and the scale height of water vapour, in metres."""

    reference_height: float | Literal["auto"] = "auto"
    scale_height: Annotated[float, Field(ge=500, le=10000)] | Literal["estimated"] = "estimated"
    prior: Annotated[float, Field(ge=500, le=10000)] = 2000.0
    prior_sigma: Positive = 400.0


class KrigingTable(_Table):
    """``[kriging]``: what the field looks like between the stations."""

    engine: Literal["fieldgen", "pykrige"] = "fieldgen"
    covariance: Annotated[str, _name_of([*MODELS, AUTO])] = AUTO
    drift: Literal["constant", "linear"] = "constant"
    window: Duration = timedelta(hours=48)
    partial_sill: Positive | None = None
    range: Positive | None = None
    nugget: NotNegative | None = None
    slope_sill: NotNegative = 0.0
    curvature_sill: NotNegative = 0.0
    far_distance: Positive = 50.0

    @model_validator(mode="after")
    def _check_together(self):
        fixed = (self.partial_sill, self.range, self.nugget)
        if any(value is None for value in fixed) != all(value is None for value in fixed):
            raise ValueError("expected partial_sill, range and nugget together, or none of them")
        if self.partial_sill is None and (self.slope_sill or self.curvature_sill):
            raise ValueError("expected slope_sill and curvature_sill only with partial_sill")
        if self.covariance == AUTO and self.partial_sill is not None:
            raise ValueError("expected the name of a covariance with fixed parameters")
        if self.engine == "pykrige" and self.covariance in (AUTO, "matern32"):
            raise ValueError("expected a covariance that PyKrige knows, such as exponential")
        return self


class ProductsTable(_Table):
    """``[products]``: what is drawn, and the lines drawn on it."""

    maps: Literal["all", "latest", "none"] = "all"
    limits: Annotated[tuple[float, float], AfterValidator(_check_ascending)] | Literal["auto"] = (
        "auto"
    )
    coast: Path | None = None
    rivers: Path | None = None


class Settings(_Table):
    """The checked content of a network.toml; `folder` is where it lies."""

    folder: Path
    network: NetworkTable = NetworkTable()
    grid: GridTable
    stations: StationsTable
    terrain: TerrainTable
    retrieval: RetrievalTable = RetrievalTable()
    screening: ScreeningTable = ScreeningTable()
    heights: HeightsTable = HeightsTable()
    kriging: KrigingTable = KrigingTable()
    products: ProductsTable = ProductsTable()

    def path(self, relative: str | Path) -> Path:
        """A path of the settings file, made absolute."""
        return self.folder / relative


def read_settings(path: str | Path) -> Settings:
    """Settings of a network.toml.

    Raises SettingsError that lists every problem, one a line.
    """
    path = Path(path)
    content = _read_toml(path)
    if "folder" in content:
        raise SettingsError(f"{path}: folder: unknown key")
    try:
        return Settings(folder=path.resolve().parent, **content)
    except ValidationError as error:
        problems = "\n".join(f"  {_format_problem(item)}" for item in error.errors())
        raise SettingsError(f"{path}: the settings cannot be used:\n{problems}") from None


def _read_toml(path: Path) -> dict:
    try:
        with path.open("rb") as file:
            return tomllib.load(file)
    except OSError as error:
        raise SettingsError(f"{path}: cannot be read: {error.strerror}.") from None
    except (tomllib.TOMLDecodeError, UnicodeDecodeError, RecursionError) as error:
        raise SettingsError(f"{path}: is not valid TOML: {error or 'nested too deeply'}.") from None


def _format_problem(problem: dict) -> str:
    """One line for one problem: the key's path, its value and the rule."""
    parts = [str(part) for part in problem["loc"]]
    key = ".".join(part for part in parts if part.isdigit() or _KEY.fullmatch(part))
    if problem["type"] == "extra_forbidden":
        return f"{key}: unknown key"
    if problem["type"] == "missing":
        return f"{key}: is missing"
    rule = problem["msg"].removeprefix("Value error, ")
    value = problem["input"]
    shown = f"is {value!r}, " if isinstance(value, str | int | float | bool) else ""
    return f"{key}: {shown}{rule[0].lower()}{rule[1:]}"
