"""Random fields with a chosen spectrum."""

import numpy as np
from scipy.ndimage import map_coordinates


def spectral_field(shape, spacing, length, slope, random):
    """Gaussian random field on a torus, mean 0 and variance 1.

    The power falls as (k^2 + length^-2)^(-slope / 2), `length` in the units of `spacing`. In two
    dimensions slope 3 has the covariance exp(-distance / length), slope 8/3 the 2/3-power structure
    function of turbulence.
    """
    wavenumber_squared = (
        np.fft.fftfreq(shape[0], spacing)[:, None] ** 2
        + np.fft.rfftfreq(shape[1], spacing)[None, :] ** 2
    ) * (2 * np.pi) ** 2
    amplitude = (wavenumber_squared + length**-2.0) ** (-slope / 4)
    amplitude[0, 0] = 0
    field = np.fft.irfft2(np.fft.rfft2(random.standard_normal(shape)) * amplitude, s=shape)
    return (field / field.std()).astype(np.float32)


def ridged_field(shape, spacing, length, slope, random):
    """Field between 0 and 1, 1 along crest lines: where a smooth random field changes sign."""
    return np.exp(-1.5 * np.abs(spectral_field(shape, spacing, length, slope, random)))


class DriftingField:
    """Two random fields carried by a wind, one handing over to the other: a pattern that ages."""

    def __init__(self, length, slope, subject, lifetime, spacing=2.0, cells=512):
        self.fields = [
            spectral_field((cells, cells), spacing, length, slope, random)
            for random in subject.spawn(2)
        ]
        self.lifetime, self.spacing = lifetime, spacing

    def at(self, east, north, hour, drift):
        """Values at points [km], the pattern having drifted by `drift` (east, north) [km]."""
        places = np.stack([(north - drift[1]) / self.spacing, (east - drift[0]) / self.spacing])
        first, second = (
            map_coordinates(field, places, order=1, mode="grid-wrap") for field in self.fields
        )
        age = 0.5 * np.pi * hour / self.lifetime
        return np.cos(age) * first + np.sin(age) * second
