"""Make everything in this folder but network.toml: an island, its weather, its instruments.

    python demo_network/make_demo.py [folder]

All is invented, and the same files come out each time. Nothing is taken from fieldgen, so that the
product cannot be right by agreeing with itself.
"""

import sys
from pathlib import Path

import numpy as np
from generator import formats, model, observations, radiometer, truth, truth_files
from generator.island import terrain
from generator.map_lines import catchments, coast, rivers
from generator.setting import HOURS, START
from generator.stations import receivers_on, sensors_on
from generator.weather import Weather

SENSOR_STEP = 1 / 6  # [hour]


def make_demo(folder):
    """Write all files of the demo below a folder."""
    for name in ("delays", "weather", "truth"):
        (folder / name).mkdir(parents=True, exist_ok=True)
    height = terrain()
    make_maps(folder, height)
    weather = Weather()
    receivers = receivers_on(height)
    sensors = sensors_on(height, receivers)
    gross = make_delays(folder, weather, height, receivers)
    pressure_bias = make_weather(folder, weather, height, sensors)
    states, moments = model.model_weather(weather, height)
    truth_files.write_model_weather(
        folder / "weather_grid.nc", states, moments, model.LONGITUDE, model.LATITUDE
    )
    formats.write_lines(folder / "observations.csv", radiometer.radiometer_table(weather, height))
    faults = observations.planted_faults(receivers, gross, pressure_bias, sensors)
    formats.write_json(folder / "truth" / "faults.json", faults)
    truth_files.write_water_vapour(
        folder / "truth" / "pwv_truth.nc", truth.grid_water_vapour(weather, height)
    )


def make_maps(folder, height):
    """Terrain, coast, rivers and catchments."""
    truth_files.write_terrain(folder / "terrain.tif", height)
    for name, features in (("coast", coast), ("rivers", rivers), ("catchments", catchments)):
        formats.write_features(folder / f"{name}.geojson", features(height))


def make_delays(folder, weather, height, receivers):
    """Delays, station table and the truth at the stations; returns the epochs of gross errors."""
    air = truth.station_air(weather, height, receivers, truth.instants())
    hourly = {name: truth.hourly_mean(values) for name, values in air.items()}
    truth_files.write_station_air(folder / "truth" / "stations_truth.nc", receivers, hourly)
    ztd, formal, gross = observations.delays(receivers, air["ztd"])
    listed_error = observations.listed_height_error(receivers)
    listed = receivers.ellipsoidal_height + listed_error
    formats.write_delays(
        folder / "delays", receivers, listed, ztd, formal, observations.MARKED_MISSING[0]
    )
    formats.write_station_table(folder / "stations.csv", receivers, listed_error)
    return gross


def make_weather(folder, weather, height, sensors):
    """Weather files; returns the pressure bias of each sensor."""
    hours = truth.instants(HOURS, SENSOR_STEP)
    air = truth.station_air(weather, height, sensors, hours)
    reports, bias = observations.weather_reports(sensors, air)
    moments = START + np.round(hours * 3600).astype("timedelta64[s]")
    formats.write_weather(folder / "weather", sensors, reports, moments)
    return bias


if __name__ == "__main__":
    make_demo(Path(sys.argv[1]) if len(sys.argv) > 1 else Path(__file__).parent)
