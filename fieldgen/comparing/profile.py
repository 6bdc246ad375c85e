"""Water vapour of a sounding."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from fieldgen.constants import GAS_CONSTANT_DRY_AIR, GAS_CONSTANT_VAPOUR, GRAVITY

_EPSILON = GAS_CONSTANT_DRY_AIR.value / GAS_CONSTANT_VAPOUR.value
_PASCAL_PER_HECTOPASCAL = 100.0


def specific_humidity(vapour_pressure, pressure):
    """Specific humidity [kg kg-1]: eps e / (p - (1 - eps) e); vapour_pressure, pressure [hPa]."""
    return _EPSILON * vapour_pressure / (pressure - (1.0 - _EPSILON) * vapour_pressure)


@dataclass(frozen=True)
class Profile:
    """Levels of a sounding, the lowest first.

    pressure (k,) [hPa], falling; height (k,) [m] above sea level, rising; humidity (k,) specific
    [kg kg-1]
    """

    pressure: np.ndarray
    height: np.ndarray
    humidity: np.ndarray

    def water_vapour_above(self, height: float) -> float:
        """Water vapour [kg m-2] above a height [m] that is not below the lowest level.

        The integral of q dp / g, trapezoids between levels; at `height` the logarithm of pressure
        and the humidity are interpolated. Layers of 150 hPa and more come out a few per cent moist.
        """
        above = self.height > height
        logarithm = np.interp(height, self.height, np.log(self.pressure))
        pressure = np.append(np.exp(logarithm), self.pressure[above])
        humidity = np.append(np.interp(height, self.height, self.humidity), self.humidity[above])
        layers = 0.5 * (humidity[1:] + humidity[:-1]) * -np.diff(pressure)
        return float(layers.sum() * _PASCAL_PER_HECTOPASCAL / GRAVITY.value)
