"""What really was: water vapour over the grid, and the air above each station."""

import numpy as np

from generator import air
from generator.columns import columns_over
from generator.setting import HOURS, SPACING, TERRAIN_MARGIN, TERRAIN_SPACING, cell_centres
from generator.weather import sea_level_pressure

STEP = 0.25  # between instants [hour]
GRID_LEVELS = np.concatenate(
    [  # vapour above 14 km is below 0.01 kg m-2
        np.arange(0, 3000, 100),
        np.arange(3000, 6000, 200),
        np.arange(6000, 14_001, 500),
    ]
).astype(np.float32)


def instants(hours=HOURS, step=STEP):
    """Hours from the start, both ends of the period included."""
    return np.arange(round(hours / step) + 1) * step


def hourly_mean(values, step=STEP):
    """Mean over each hour from instants that include both its ends, along the first axis."""
    per_hour = round(1 / step)
    between = 0.5 * (values[1:] + values[:-1])
    return between.reshape(-1, per_hour, *values.shape[1:]).mean(axis=1)


def grid_water_vapour(weather, height, hours=HOURS):
    """Hourly precipitable water [kg m-2] (time, y, x), cell means over the finer terrain."""
    easting, northing = np.meshgrid(*cell_centres(SPACING))
    columns = columns_over(height, easting.ravel(), northing.ravel()).astype(np.float32)
    share = _level_shares(_finer_heights(height))
    fields = [_water_vapour(weather, columns, share, hour) for hour in instants(hours)]
    return hourly_mean(np.array(fields)).reshape(-1, *easting.shape)


def _water_vapour(weather, columns, share, hour):
    """Precipitable water of each cell at an instant."""
    level = GRID_LEVELS[:, None]
    temperature, vapour_pressure = weather.state(columns, level, hour)
    density = air.vapour_density(vapour_pressure, temperature)
    return np.einsum("lc,lc->c", share, air.integral_above(density, level))


def _finer_heights(height):
    """Heights of the terrain cells in each grid cell [m], (grid cell, terrain cell)."""
    edge, ratio = TERRAIN_MARGIN // TERRAIN_SPACING, SPACING // TERRAIN_SPACING
    inner = height[edge:-edge, edge:-edge]
    rows, columns = (size // ratio for size in inner.shape)
    blocks = inner.reshape(rows, ratio, columns, ratio).swapaxes(1, 2)
    return blocks.reshape(rows * columns, ratio * ratio)


def _level_shares(finer):
    """Weights (level, grid cell) that interpolate to the finer heights and average over them."""
    upper = np.clip(np.searchsorted(GRID_LEVELS, finer, side="right"), 1, len(GRID_LEVELS) - 1)
    above = (finer - GRID_LEVELS[upper - 1]) / (GRID_LEVELS[upper] - GRID_LEVELS[upper - 1])
    share = np.zeros((len(GRID_LEVELS), len(finer)), np.float32)
    cell = np.broadcast_to(np.arange(len(finer))[:, None], finer.shape)
    np.add.at(share, (upper - 1, cell), (1 - above) / finer.shape[1])
    np.add.at(share, (upper, cell), above / finer.shape[1])
    return share


def station_air(weather, height, sites, moments):
    """Air at and above antennas at moments [hour]: a dict of arrays (moment, site).

    `ztd` [m], `pwv` [kg m-2], `pressure`, `vapour_pressure` [hPa], `temperature`, `tm` [K].
    """
    columns = columns_over(height, sites.easting, sites.northing)
    snapshots = [_air_at(weather, columns, sites.orthometric_height, moment) for moment in moments]
    return {name: np.array([snapshot[name] for snapshot in snapshots]) for name in snapshots[0]}


def _air_at(weather, columns, antenna, hour):
    """One moment of `station_air`."""
    level = air.LEVELS[:, None].astype(float)
    temperature, vapour_pressure = weather.state(columns, level, hour)
    ground = sea_level_pressure(columns, hour)
    pressure = air.hydrostatic_pressure(
        level, temperature, vapour_pressure, columns.latitude, ground
    )
    profiles = {
        "ztd": air.zenith_delay_above(
            level, pressure, temperature, vapour_pressure, columns.latitude
        ),
        "pwv": air.integral_above(air.vapour_density(vapour_pressure, temperature), level),
        "temperature": temperature,
        "vapour_pressure": vapour_pressure,
        "over": air.integral_above(vapour_pressure / temperature, level),
        "under": air.integral_above(vapour_pressure / temperature**2, level),
    }
    found = {name: air.at_height(profile, level, antenna) for name, profile in profiles.items()}
    found["pressure"] = np.exp(air.at_height(np.log(pressure), level, antenna))
    found["tm"] = found.pop("over") / found.pop("under")
    return found
