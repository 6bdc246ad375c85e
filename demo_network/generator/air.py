"""Air in a column: pressure, refractivity, zenith delay and water vapour by integration.

The demo's physics stands apart from the product's on purpose: the delay is the integral of the
refractivity of the air, not a formula of surface values.
"""

import numpy as np

DRY_GAS = 287.04  # [J kg-1 K-1], universal constant over 28.9655 g/mol
VAPOUR_GAS = 461.52  # [J kg-1 K-1], universal constant over 18.0153 g/mol
LIGHT_VAPOUR = 1 - DRY_GAS / VAPOUR_GAS
K1, K2, K3 = 77.604, 64.79, 3.776e5  # [K/hPa, K/hPa, K2/hPa], Thayer 1974, Radio Sci. 9, 803
EARTH_RADIUS = 6.371e6  # [m]

LEVELS = np.concatenate(
    [  # heights of integration [m]
        np.arange(0, 4000, 50),
        np.arange(4000, 12_000, 100),
        np.arange(12_000, 30_000, 300),
        np.arange(30_000, 80_001, 1000),
    ]
)


def gravity(latitude, height):
    """Normal gravity [m s-2] at a latitude [degree] and height [m]: GRS80, by distance squared."""
    sine = np.sin(np.radians(latitude)) ** 2
    at_sea_level = 9.7803267715 * (1 + 0.001931851353 * sine) / np.sqrt(1 - 0.0066943800229 * sine)
    return at_sea_level * (EARTH_RADIUS / (EARTH_RADIUS + height)) ** 2


def saturation_vapour_pressure(temperature):
    """Saturation vapour pressure over water [hPa] at a temperature [K]; Buck 1996."""
    celsius = (
        np.maximum(temperature, 170) - 273.15
    )  # colder air does not exist below 80 km; the formula turns there
    return 6.1121 * np.exp((18.678 - celsius / 234.5) * celsius / (257.14 + celsius))


def vapour_density(vapour_pressure, temperature):
    """Absolute humidity [kg m-3] of a vapour pressure [hPa]."""
    return 100 * vapour_pressure / (VAPOUR_GAS * temperature)


def refractivity(pressure, temperature, vapour_pressure):
    """Refractivity of moist air, compressibility neglected."""
    return (
        K1 * (pressure - vapour_pressure) / temperature
        + K2 * vapour_pressure / temperature
        + K3 * vapour_pressure / temperature**2
    )


def hydrostatic_pressure(level, temperature, vapour_pressure, latitude, sea_level_pressure):
    """Pressure [hPa] that carries the air above each height [m] (first axis, starting at 0)."""
    gravity_at = gravity(latitude, level)
    pressure = sea_level_pressure * np.exp(
        -_running_integral(gravity_at / (DRY_GAS * temperature), level)
    )
    for _ in range(
        3
    ):  # virtual temperature needs the pressure sought; three rounds settle it to 1e-6 hPa
        virtual_temperature = temperature / (
            1 - LIGHT_VAPOUR * np.minimum(vapour_pressure / pressure, 0.2)
        )
        pressure = sea_level_pressure * np.exp(
            -_running_integral(gravity_at / (DRY_GAS * virtual_temperature), level)
        )
    return pressure


def integral_above(integrand, level):
    """Integral from each height [m] (first axis) to the top one."""
    running = _running_integral(integrand, level)
    return running[-1] - running


def zenith_delay_above(level, pressure, temperature, vapour_pressure, latitude):
    """Zenith total delay [m] at each height [m] (first axis), air above the top one included."""
    beyond_top = K1 * DRY_GAS * pressure[-1] / gravity(latitude, level[-1])
    return 1e-6 * (
        integral_above(refractivity(pressure, temperature, vapour_pressure), level) + beyond_top
    )


def at_height(profile, level, height):
    """Values of profiles (level, column) at one height [m] for each column, linear in height."""
    upper = np.clip(np.searchsorted(level[:, 0], height, side="right"), 1, len(level) - 1)
    column = np.arange(profile.shape[1])
    below, above = level[upper - 1, 0], level[upper, 0]
    share = (height - below) / (above - below)
    return profile[upper - 1, column] * (1 - share) + profile[upper, column] * share


def _running_integral(integrand, level):
    """Trapezoidal integral from the first height up to each."""
    steps = 0.5 * (integrand[1:] + integrand[:-1]) * np.diff(level, axis=0)
    return np.concatenate([np.zeros_like(integrand[:1]), np.cumsum(steps, axis=0)])
