"""Physical constants and published coefficient sets, each with its unit and its source."""

from __future__ import annotations

from typing import NamedTuple


class Constant(NamedTuple):
    """A number with its unit and where it comes from."""

    value: float
    unit: str
    source: str


GRAVITY = Constant(9.80665, "m s-2", "standard gravity, 3rd CGPM (1901)")
GAS_CONSTANT_DRY_AIR = Constant(287.05, "J kg-1 K-1", "ICAO standard atmosphere, Doc 7488")
GAS_CONSTANT_VAPOUR = Constant(461.5, "J kg-1 K-1", "Bevis et al. 1992, JGR 97, 15787")
WATER_DENSITY = Constant(1000.0, "kg m-3", "convention: 1 kg m-2 of water vapour is 1 mm")
STANDARD_LAPSE_RATE = Constant(0.0065, "K m-1", "ICAO standard atmosphere, Doc 7488")
ZHD_PER_HECTOPASCAL = Constant(0.0022768, "m hPa-1", "Davis et al. 1985, Radio Sci. 20, 1593")


class Refractivity(NamedTuple):
    """Refractivity of moist air, N = k1 Pd/T + k2 e/T + k3 e/T^2.

    k1, k2 [K hPa-1], k3 [K2 hPa-1].
    """

    k1: float
    k2: float
    k3: float
    source: str

    @property
    def k2_reduced(self) -> float:
        """k2' = k2 - k1 Mw/Md [K hPa-1], what the wet delay needs (Davis et al. 1985)."""
        return self.k2 - self.k1 * GAS_CONSTANT_DRY_AIR.value / GAS_CONSTANT_VAPOUR.value


REFRACTIVITY = {
    "thayer1974": Refractivity(77.604, 64.79, 3.776e5, "Thayer 1974, Radio Sci. 9, 803"),
    "bevis1994": Refractivity(77.60, 70.4, 3.739e5, "Bevis et al. 1994, J. Appl. Meteor. 33, 379"),
    "rueger2002": Refractivity(77.6890, 71.2952, 3.75463e5, "Rueger 2002, FIG, best average"),
}


class MeanTemperature(NamedTuple):
    """Weighted mean temperature Tm = intercept + slope Ts [K], with its RMS error [K]."""

    intercept: float
    slope: float
    rms: float
    source: str


MEAN_TEMPERATURE = {
    "bevis1992": MeanTemperature(70.2, 0.72, 4.74, "Bevis et al. 1992, JGR 97, 15787"),
}
