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
from fieldgen.input_files import check_is_file
from fieldgen.kriging.covariance import MODELS
from fieldgen.kriging.fitting import AUTO
from fieldgen.plain_text import one_line

LONGEST_TEXT = 4000
"""Longest text [characters] of a setting; a CRS in WKT may need it."""

LARGEST_FILE, LONGEST_LINE = 100_000, 8000
"""Largest settings file [bytes] and its longest line [characters]; a hand-written file has a few
thousand. Keys with thousands of dots take TOML readers hours."""

PROBLEMS_SHOWN = 30
"""Further problems are counted."""

LONGEST_SHOWN = 80
"""Characters of a value or key that a message repeats."""

MOST_CELLS = 25_000_000
"""Cells of a grid; a process that makes a day of 24 steps needs about 300 bytes for each, 8 GB."""

_KEY = re.compile(r"[a-z_]+")
"""A key of the settings, unlike the library's names for the branches of a choice."""

_COUNT = re.compile(r"0{0,9}[1-9][0-9]{0,5}")
"""A number of units of time, up to six digits."""

_DURATION_UNITS = {"min": "minutes", "h": "hours", "d": "days"}


def parse_duration(text: str) -> timedelta:
    """Duration from text such as ``15min``, ``1h`` or ``2d``; raises ValueError."""
    for suffix, unit in _DURATION_UNITS.items():
        number = str(text).removesuffix(suffix)
        if number != text and _COUNT.fullmatch(number):
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


def _check_name(text: str) -> str:
    if not one_line(text):
        raise ValueError("expected letters that can be seen")
    return text


def _check_path(path: Path) -> Path:
    _check_path_text(str(path))
    return path


def _check_path_text(text: str) -> str:
    if not text or any(ord(letter) < 32 for letter in text):
        raise ValueError("expected the name of a file, without control characters")
    if len(text) > LONGEST_TEXT:
        raise ValueError(f"expected at most {LONGEST_TEXT} characters")
    return text


Text = Annotated[str, Field(max_length=LONGEST_TEXT), AfterValidator(one_line)]
"""Words for the metadata; line feeds and control characters become blanks."""

FilePath = Annotated[Path, AfterValidator(_check_path)]
Pattern = Annotated[str, AfterValidator(_check_path_text)]
Duration = Annotated[timedelta, BeforeValidator(parse_duration)]
TimeStep = Annotated[Duration, AfterValidator(_check_divides_day)]
Positive = Annotated[float, Field(ge=1e-6, le=1e6)]
"""Sizes of any unit here: beyond them sums overflow or vanish, and nothing real lies there."""

NotNegative = Annotated[float, Field(ge=0, le=1e6)]
Limit = Annotated[float, Field(ge=-100, le=1000)]


class _Table(BaseModel):
    model_config = ConfigDict(extra="forbid", frozen=True, allow_inf_nan=False)


class NetworkTable(_Table):
    """``[network]``: its name, the step of its products, and who stands behind them."""

    name: Annotated[Text, AfterValidator(_check_name)] = Field("network", max_length=120)
    time_step: TimeStep = timedelta(hours=1)
    institution: Text = ""
    url: Text = ""
    email: Text = ""
    license: Text = "not stated; ask the network's operator"


class GridTable(_Table):
    """``[grid]``: the outer cell edges in units of the CRS, or a file whose grid is taken over."""

    crs: Annotated[str, Field(max_length=LONGEST_TEXT)] | None = None
    west: float | None = None
    south: float | None = None
    east: float | None = None
    north: float | None = None
    spacing: Annotated[float, Field(gt=0)] | None = None
    like: FilePath | None = None

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
            if not cells <= MOST_CELLS:
                raise ValueError(
                    f"expected at most {MOST_CELLS} cells; {high} - {low} alone is {cells:.3g} "
                    "spacings"
                )
            if abs(cells - round(cells)) > 1e-6 or round(cells) < 2:
                raise ValueError(
                    f"expected {high} - {low} to be two or more whole spacings; it is {cells:g}"
                )
        cells = (self.east - self.west) / self.spacing * (self.north - self.south) / self.spacing
        if cells > MOST_CELLS:
            raise ValueError(f"expected at most {MOST_CELLS} cells; they are {cells:.3g}")
        return self


class StationsTable(_Table):
    """``[stations]``: the input files, as glob patterns."""

    delays: list[Pattern] = Field(min_length=1)
    weather: list[Pattern] = []
    grids: list[Pattern] = []
    table: FilePath | None = None
    pressure_unit: Literal["hPa", "0.1 hPa", "Pa"] = "hPa"


class TerrainTable(_Table):
    """``[terrain]``: orthometric heights finer than the grid, and the geoid."""

    file: FilePath
    geoid: Annotated[float, Field(ge=-110, le=90)] | FilePath | None = None
    lowest_land: Annotated[float, Field(ge=-12000, le=9000)] = 0.0


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

    intercept: Annotated[float, Field(ge=-300, le=300)]
    slope: Annotated[float, Field(ge=-3, le=3)]
    rms: Positive


class ScreeningTable(_Table):
    """``[screening]``: limits beyond which a value is not used."""

    formal_error: Positive = 0.010
    formal_error_ratio: Positive = 2.5
    spike: Positive = 0.030
    jump: Positive = 8.0
    frozen: Duration = timedelta(hours=6)
    neighbour_ratio: Positive = 3.2
    neighbour_difference: Positive = 2.2
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
    limits: Annotated[tuple[Limit, Limit], AfterValidator(_check_ascending)] | Literal["auto"] = (
        "auto"
    )
    page: Duration | Literal["none"] = timedelta(hours=48)
    coast: FilePath | None = None
    rivers: FilePath | None = None
    catchments: FilePath | None = None

    @property
    def lines(self) -> dict[str, Path]:
        """The files of lines that are set, by name."""
        files = {"coast": self.coast, "rivers": self.rivers, "catchments": self.catchments}
        return {name: path for name, path in files.items() if path is not None}


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
        found = error.errors(include_url=False, include_context=False)
        problems = [_format_problem(item) for item in found[:PROBLEMS_SHOWN]]
        if len(found) > PROBLEMS_SHOWN:
            problems.append(f"and {len(found) - PROBLEMS_SHOWN} more")
        lines = "\n".join(f"  {problem}" for problem in problems)
        raise SettingsError(f"{path}: the settings cannot be used:\n{lines}") from None


def _read_toml(path: Path) -> dict:
    try:
        return tomllib.loads(_read_small_file(path))
    except OSError as error:
        raise SettingsError(f"{path}: cannot be read: {error.strerror or error}.") from None
    except RecursionError:
        raise SettingsError(f"{path}: is not valid TOML: nested too deeply.") from None
    except ValueError as error:  # of the syntax, the encoding, or a number of thousands of digits
        raise SettingsError(f"{path}: is not valid TOML: {_shortened(str(error))}.") from None


def _read_small_file(path: Path) -> str:
    check_is_file(path)
    if path.stat().st_size > LARGEST_FILE:
        raise OSError(f"it has more than {LARGEST_FILE} bytes")
    text = path.read_bytes().decode()
    if max(map(len, text.splitlines()), default=0) > LONGEST_LINE:
        raise OSError(f"it has a line of more than {LONGEST_LINE} characters")
    return text


def _shortened(text: str, length: int = LONGEST_SHOWN) -> str:
    return text if len(text) <= length else f"{text[:length]}..."


def _format_problem(problem: dict) -> str:
    """One line for one problem: the key's path, its value and the rule."""
    parts = [str(part) for part in problem["loc"]]
    if problem["type"] == "extra_forbidden":
        key = ".".join(_shortened(part) if _KEY.fullmatch(part) else _shown(part) for part in parts)
        return f"{key}: unknown key"
    key = ".".join(part for part in parts if part.isdigit() or _KEY.fullmatch(part))
    if problem["type"] == "missing":
        return f"{key}: is missing"
    rule = problem["msg"].removeprefix("Value error, ")
    value = problem["input"]
    shown = f"is {_shown(value)}, " if isinstance(value, str | int | float | bool) else ""
    return f"{key}: {shown}{rule[0].lower()}{rule[1:]}"


def _shown(value) -> str:
    """A value as a message shows it, shortened."""
    if isinstance(value, str):
        return repr(_shortened(value))
    if isinstance(value, int) and abs(value) > 10**LONGEST_SHOWN:
        return "a number of many digits"
    return repr(value)
