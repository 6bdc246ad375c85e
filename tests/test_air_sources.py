"""Each source of pressure on the demo: what it says, how sure it is, and which one serves."""

from pathlib import Path

import numpy as np
import pytest
import xarray as xr

import fieldgen
from fieldgen.chain import make
from fieldgen.readers.places import sites_of
from fieldgen.retrieval import _split_common, retrieve_water_vapour
from fieldgen.station.screening import STATION_FLAGS
from fieldgen.station.surface_air import (
    PRESSURE_SOURCES,
    GridWeather,
    Sites,
    Weather,
    own_barometer,
    surface_air,
)

DEMO = Path(__file__).parents[1] / "demo_network"

WRONG_HEIGHT = "RUSQ00XQV"
"""Station of the demo whose listed height is 82 m too high."""

SETTINGS = f"""
[network]
name = "sources"
[grid]
crs = "EPSG:32626"
west = 306000
south = 5206000
east = 514000
north = 5394000
spacing = 4000
[stations]
delays = ["{DEMO}/delays/*.tro"]
table = "{DEMO}/stations.csv"
STATIONS
[terrain]
file = "{DEMO}/terrain.tif"
geoid = 57.3
[products]
maps = "none"
[retrieval]
RETRIEVAL
"""

BAROMETERS = f'weather = ["{DEMO}/weather/*.rnx"]'
GRID = f'grids = ["{DEMO}/weather_grid.nc"]'


def read(folder, *stations, retrieval=""):
    """The demo with some of its sources of pressure."""
    text = SETTINGS.replace("STATIONS", "\n".join(stations)).replace("RETRIEVAL", retrieval)
    (folder / "network.toml").write_text(text)
    return fieldgen.read_network(folder / "network.toml")


@pytest.fixture(scope="module")
def network(tmp_path_factory):
    """The demo with barometers and grid."""
    return read(tmp_path_factory.mktemp("both"), BAROMETERS, GRID)


@pytest.fixture(scope="module")
def truth(network):
    """True air at the network's stations (time, station)."""
    with xr.open_dataset(DEMO / "truth" / "stations_truth.nc") as opened:
        return opened.load().sel(station=network.stations.station.values.astype(str))


def weather_of(network) -> Weather:
    return Weather(*(network.weather[name].values for name in Weather._fields))


def air_of(network, source, weather=None, barometers=None, antennas=None, grid=True):
    """Air of one source alone, at the antennas unless said otherwise."""
    antennas = sites_of(network.stations) if antennas is None else antennas
    barometers = sites_of(network.weather) if barometers is None else barometers
    says = network.weather_grid
    return surface_air(
        weather_of(network) if weather is None else weather,
        barometers,
        antennas,
        own_barometer(antennas, barometers, 1.0) if source == "own" else np.full(
            len(antennas.height), -1
        ),
        barometer_sigma=0.3,
        sources=[source],
        time=network.weather.time.values,
        grid=GridWeather(*(says[name].values for name in GridWeather._fields)) if grid else None,
    )  # fmt: skip


def figures(name, error, sigma):
    """RMS error [hPa], SD of the standardised errors; printed."""
    rms, deviation = np.sqrt(np.nanmean(error**2)), np.sqrt(np.nanmean((error / sigma) ** 2))
    print(f"{name}: {np.isfinite(error).sum()} values, RMS {rms:.2f} hPa, SD {deviation:.2f}")
    return rms, deviation


BOUNDS = {"own": (0.4, 0.5, 1.2), "grid": (1.5, 0.5, 1.2), "climatology": (9.0, 0.3, 1.3)}
"""RMS not to be reached [hPa]; lowest and highest SD of the standardised errors."""


@pytest.mark.parametrize("source", BOUNDS)
def test_a_source_is_as_good_as_it_says(network, truth, source):
    """Analytic atmosphere: pressure at the antennas against the demo's integrated truth."""
    air = air_of(network, source)
    right = network.stations.station.values != WRONG_HEIGHT
    error = (air.pressure - truth.pressure.values)[:, right]
    rms, deviation = figures(source, error, air.pressure_sigma[:, right])
    limit, low, high = BOUNDS[source]
    assert rms < limit
    assert low < deviation < high


def test_neighbours_are_as_good_as_they_say(network):
    """Second derivation: each of the 15 barometers predicted from the others."""
    barometers, weather = sites_of(network.weather), weather_of(network)
    errors, sigmas = [], []
    for index in range(len(barometers.height)):
        others = np.arange(len(barometers.height)) != index
        air = air_of(
            network, "neighbours",
            Weather(*(values[:, others] for values in weather)),
            Sites(*(values[others] for values in barometers)),
            Sites(*(values[[index]] for values in barometers)),
        )  # fmt: skip
        errors.append(air.pressure[:, 0] - weather.pressure[:, index])
        sigmas.append(np.hypot(air.pressure_sigma[:, 0], 0.3))
    rms, deviation = figures("neighbours", np.array(errors), np.array(sigmas))
    assert rms < 0.8
    assert 0.4 < deviation < 1.2


def test_grid_errors_have_the_common_part_they_claim(network, truth):
    """Analytic atmosphere: the mean error of an hour and what is left of it, each by its sigma."""
    air = air_of(network, "grid")
    right = network.stations.station.values != WRONG_HEIGHT
    error = (air.pressure - truth.pressure.values)[:, right]
    common = error.mean(axis=1)
    figures("grid, common", common, air.pressure_common_sigma[:, 0])
    figures("grid, own", error - common[:, None], air.pressure_own_sigma[:, right])
    assert 0.4 < np.std(common) / air.pressure_common_sigma[0, 0] < 1.3
    assert (
        0.3 < np.sqrt(np.mean(((error.T - common).T / air.pressure_own_sigma[:, right]) ** 2)) < 1.2
    )


def sources(dataset):
    """Values by the source of their pressure."""
    return {
        name: count
        for name, code in PRESSURE_SOURCES.items()
        if (count := int((dataset.pressure_source == code).sum()))
    }


def test_the_first_source_that_is_sure_serves(network):
    """A limit: with barometers within reach the grid is not asked; without them it is."""
    found = retrieve_water_vapour(network)
    assert set(sources(found)) == {"own", "neighbours"}
    bare = network.weather.isel(site=slice(0))
    network = fieldgen.readers.network.Network(**(vars(network) | {"weather": bare}))
    assert set(sources(retrieve_water_vapour(network))) == {"grid"}


def test_mean_temperature_of_a_grid_serves(network, truth):
    """Analytic atmosphere: Tm of the model is good to 1.6 K, Tm from the surface is not."""
    right = network.stations.station.values != WRONG_HEIGHT
    errors = {}
    for name, order in (
        ("grid", ["own", "neighbours", "grid"]),
        ("surface", ["own", "neighbours"]),
    ):
        table = network.settings.retrieval.model_copy(update={"pressure": order})
        settings = network.settings.model_copy(update={"retrieval": table})
        one = fieldgen.readers.network.Network(**(vars(network) | {"settings": settings}))
        tm = retrieve_water_vapour(one).mean_temperature.values
        errors[name] = np.sqrt(np.mean((tm - truth.tm.values)[:, right] ** 2))
    print({name: round(float(error), 2) for name, error in errors.items()})
    assert errors["grid"] < 1.6
    assert errors["surface"] > errors["grid"]


@pytest.fixture(scope="module")
def climatological(tmp_path_factory):
    """The demo without barometers and grids."""
    return read(tmp_path_factory.mktemp("none"))


def test_climatology_is_flagged_and_in_no_field(climatological, truth):
    """A limit: values with a large error bar in the station file, and no field from them."""
    assert any(
        "no barometer and no weather grid" in text for text in climatological.report.warnings
    )
    found = retrieve_water_vapour(climatological)
    bit = STATION_FLAGS["climatological_pressure"]
    has_delay = np.isfinite(found.ztd.values)
    assert (((found.flag.values & bit) > 0) == has_delay).all()
    assert (found.pwv_sigma.values[has_delay] > 2.0).all()
    error = (found.pwv.values - truth.pwv.values)[has_delay]
    figures("climatology, water vapour [kg m-2]", error, found.pwv_sigma.values[has_delay])
    fields = fieldgen.make_fields(climatological, "2026-09-08T06:00", "2026-09-08T08:00")
    assert np.isnan(fields.pwv).all()


def test_climatology_in_fields_is_a_common_error(tmp_path):
    """Analytic atmosphere: let in, it gives a field whose error all cells share, and which holds
    what its error bar promises; the stations' own errors stay small, so the shape is right."""
    network = read(tmp_path, retrieval="climatology_in_fields = true")
    fields = fieldgen.make_fields(network, "2026-09-08T06:00", "2026-09-08T08:00")
    assert np.isfinite(fields.pwv).any()
    assert (fields.common_sigma > 2.0).all()
    found = retrieve_water_vapour(network)
    assert float(found.pwv_independent_sigma.max()) < 1.8
    with xr.open_dataset(DEMO / "truth" / "pwv_truth.nc") as opened:
        true = opened.pwv.sortby("y").interp(y=fields.y, x=fields.x).sel(time=fields.time).load()
    error = (fields.pwv - true).where(fields.flag == 0)
    assert float(np.abs(error).mean()) < 3.0 * float(fields.common_sigma.mean())


def test_fields_of_a_network_without_barometers_hold_their_error_bars(tmp_path):
    """Analytic atmosphere: a day with pressure from the model alone, over land."""
    network = read(tmp_path, GRID)
    fields = fieldgen.make_fields(network, "2026-09-09T01:00", "2026-09-10T00:00")
    with xr.open_dataset(DEMO / "truth" / "pwv_truth.nc") as opened:
        true = opened.pwv.sortby("y").coarsen(y=2, x=2).mean().sel(time=fields.time).load()
    np.testing.assert_allclose(true.x, fields.x)
    error = (fields.pwv - true).where(fields.flag == 0)
    rmse = float(np.sqrt((error**2).mean()))
    deviation = float(np.sqrt(((error / fields.pwv_sigma) ** 2).mean()))
    print(f"fields without barometers: RMSE {rmse:.2f} kg m-2, SD {deviation:.2f}")
    assert rmse < 1.1
    assert 0.5 < deviation < 1.2


def test_stations_with_a_barometer_weigh_more_than_those_with_a_model(network):
    """Second derivation: the common part of a source that only some draw on. With a share f of the
    stations on the grid, f of its common error moves the field, and 1 - f tells them apart."""
    order = network.settings.retrieval.model_copy(update={"pressure": ["own", "grid"]})
    settings = network.settings.model_copy(update={"retrieval": order})
    changed = {"settings": settings}
    found = retrieve_water_vapour(fieldgen.readers.network.Network(**(vars(network) | changed)))
    hour = 5
    has_value = np.isfinite(found.pwv.values[hour])
    by_grid = (found.pressure_source.values[hour] == PRESSURE_SOURCES["grid"])[has_value]
    assert by_grid.sum() > 20 and (~by_grid).sum() > 8
    by_pressure = 0.85 * 2.2768e-3 * 155.0 * by_grid.mean()  # [kg m-2]
    expected = np.hypot(0.2, by_pressure)
    assert float(found.common_sigma[hour]) == pytest.approx(expected, rel=0.05)
    own = found.pwv_independent_sigma.values[hour][has_value]
    assert own[by_grid].min() > own[~by_grid].max()


def test_what_tells_climatological_stations_from_the_others_counts_as_their_own(network):
    """Second derivation: 8.4 hPa at 48 degrees, 3 kg m-2, of which stations with climatology alone
    have the share that others with a barometer do not; beside it their own 1.5 hPa and 4 mm."""
    update = {"pressure": ["own", "climatology"], "climatology_in_fields": True}
    table = network.settings.retrieval.model_copy(update=update)
    settings = network.settings.model_copy(update={"retrieval": table})
    changed = vars(network) | {"settings": settings}
    found = retrieve_water_vapour(fieldgen.readers.network.Network(**changed)).isel(time=5)
    present = np.isfinite(found.pwv.values)
    average = (found.pressure_source.values == PRESSURE_SOURCES["climatology"])[present]
    apart = 8.4 * 2.2768e-3 * 155.0 * (1.0 - average.mean())
    least = np.sqrt((0.004 * 155.0) ** 2 + (1.5 * 2.2768e-3 * 155.0) ** 2 + apart**2)
    own = found.pwv_independent_sigma.values[present][average]
    assert own.min() == pytest.approx(least, rel=0.1)


def test_split_common_tells_what_moves_the_field_from_what_bends_it():
    """Second derivation: c d = mean(c) d + (c - mean(c)) d for an error d that some draw on."""
    sigma = np.array([[1.0, 1.0, 0.0, 0.0], [1.0, 1.0, 1.0, np.nan], [1.0, 1.0, 0.0, 0.0]])
    present = np.array([[True] * 4, [True, True, True, False], [True, False, False, True]])
    shared, rest = _split_common(sigma, present)
    np.testing.assert_allclose(shared[:, 0], [0.5, 1.0, 0.5])
    np.testing.assert_allclose(rest, [[0.5, 0.5, 0, 0], [0, 0, 0, 0], [0.5, 0.5, 0, 0]])


def test_run_json_counts_values_by_source(tmp_path, network):
    """Round trip: the report of a day names how many values each source served."""
    made = make(network, tmp_path, start="2026-09-08T06:00", end="2026-09-08T07:00")
    (day,) = made.days
    assert set(day.pressure_sources) == set(PRESSURE_SOURCES)
    assert day.pressure_sources["own"] > 0
    (path,) = (tmp_path / "stations").iterdir()
    with xr.open_dataset(path) as stations:
        assert stations.pressure_source.attrs["flag_meanings"].split() == list(PRESSURE_SOURCES)
        for name, code in PRESSURE_SOURCES.items():
            assert int((stations.pressure_source == code).sum()) == day.pressure_sources[name]
