"""How air pressure and water vapour change with height.

Heights are orthometric [m] throughout: hydrostatics works along gravity.
"""

from __future__ import annotations

import numpy as np

from fieldgen.constants import GAS_CONSTANT_DRY_AIR, GRAVITY, STANDARD_LAPSE_RATE

_EPSILON = 0.622
"""Ratio of the molar masses of water and dry air."""


def saturation_vapour_pressure(temperature):
    """Saturation vapour pressure over water [hPa]; temperature [K]. WMO-No. 8, Annex 4.B."""
    celsius = np.asarray(temperature) - 273.15
    return 6.112 * np.exp(17.62 * celsius / (243.12 + celsius))


def virtual_temperature(temperature, relative_humidity, pressure):
    """Virtual temperature [K] of moist air: T / (1 - (1 - 0.622) e/P).

    temperature [K], relative_humidity [%], pressure [hPa].
    """
    vapour_pressure = relative_humidity / 100.0 * saturation_vapour_pressure(temperature)
    return temperature / (1.0 - (1.0 - _EPSILON) * vapour_pressure / pressure)


def pressure_at_height(pressure, height, new_height, layer_virtual_temperature):
    """Pressure [hPa] brought from `height` to `new_height` [m].

    Hypsometric equation, P2 = P1 exp(-g dH / (Rd Tv)), with the mean virtual temperature [K] of
    the layer between the two heights.
    """
    scale = GAS_CONSTANT_DRY_AIR.value * layer_virtual_temperature / GRAVITY.value
    return pressure * np.exp(-(new_height - height) / scale)


def layer_mean(temperature, height, new_height, lapse_rate=STANDARD_LAPSE_RATE.value):
    """Mean temperature [K] of the layer between two heights [m], `temperature` at the first."""
    return temperature - lapse_rate * (np.asarray(new_height) - height) / 2.0


def reduction_factor(height, reference_height, scale_height):
    """PWV(height) / PWV(reference_height) = exp(-(height - reference_height) / H); all [m].

    The exponential profile is the usual model, e.g. Tomasi (1984), J. Geophys. Res. 89, 2563.
    """
    return np.exp(-(np.asarray(height) - reference_height) / scale_height)
