"""Zenith delay to precipitable water vapour, and what each input adds to its error.

References
----------
Saastamoinen, J. (1972), Geophys. Monogr. 15, 247; Davis, J. L. et al. (1985), Radio Sci. 20,
1593: hydrostatic delay. Askne, J. and H. Nordius (1987), Radio Sci. 22, 379; Bevis, M. et al.
(1992), J. Geophys. Res. 97, 15787: conversion of the wet delay. Ning, T. et al. (2016), Atmos.
Meas. Tech. 9, 79: error budget.
"""

from __future__ import annotations

import numpy as np

from fieldgen.constants import (
    GAS_CONSTANT_VAPOUR,
    WATER_DENSITY,
    ZHD_PER_HECTOPASCAL,
    MeanTemperature,
    Refractivity,
)

_KELVIN_PER_PASCAL = 0.01
"""1 K hPa-1 in K Pa-1."""


def hydrostatic_delay(pressure, latitude, orthometric_height):
    """Zenith hydrostatic delay [m].

    pressure [hPa] at the antenna, latitude [degrees], orthometric_height [m]; any shapes that
    broadcast. Davis et al. (1985), Appendix A; the height enters only through gravity.
    """
    gravity_factor = (
        1.0 - 0.00266 * np.cos(2.0 * np.radians(latitude)) - 2.8e-7 * np.asarray(orthometric_height)
    )
    return ZHD_PER_HECTOPASCAL.value * pressure / gravity_factor


def mean_temperature(surface_temperature, model: MeanTemperature):
    """Weighted mean temperature Tm [K] from the surface temperature [K]."""
    return model.intercept + model.slope * surface_temperature


def conversion_factor(mean_temperature, refractivity: Refractivity):
    """Factor Pi from wet delay to water vapour [kg m-2 per m], about 150.

    mean_temperature [K]. Askne and Nordius (1987): 1e6 / (Rv (k2' + k3/Tm)).
    """
    refractivity_sum = refractivity.k2_reduced + refractivity.k3 / mean_temperature  # [K hPa-1]
    dimensionless = 1e6 / (
        WATER_DENSITY.value * GAS_CONSTANT_VAPOUR.value * refractivity_sum * _KELVIN_PER_PASCAL
    )
    return WATER_DENSITY.value * dimensionless


def independent_sigma(factor, ztd_sigma, pressure_sigma):
    """Standard error of a station's water vapour [kg m-2] that its neighbours do not share.

    factor [kg m-2 per m], ztd_sigma [m], pressure_sigma [hPa]. Ning et al. (2016), eq. 6, without
    the constants and Tm, see `common_sigma`.
    """
    return factor * np.hypot(ztd_sigma, ZHD_PER_HECTOPASCAL.value * pressure_sigma)


def common_sigma(water_vapour, constant, relative):
    """Standard error of water vapour [kg m-2] that all stations share, so it does not average out.

    constant [kg m-2]: of the constants and the satellites' orbits; relative: of Tm, as a fraction,
    which is the same fraction of Pi to better than 6 %. Tm follows the air mass, not the station.
    """
    return np.hypot(constant, relative * np.asarray(water_vapour))
