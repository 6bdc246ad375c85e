"""The same kriging by PyKrige, hour by hour: the selectable second engine and the cross-check.

PyKrige knows one nugget for all observations, so each hour's mean error variance joins the field's
nugget; with equal error variances both engines agree.
"""

from __future__ import annotations

import numpy as np

from fieldgen.kriging.places import Places
from fieldgen.kriging.solver import Kriging


def krige_with_pykrige(kriging: Kriging, targets: Places, values, dtype=np.float32):
    """Field and kriging variance (t, m) of values (t, n), NaN where missing."""
    solved = [_krige_hour(kriging, targets, row) for row in values]
    field, variance = (np.stack(part).astype(dtype) for part in zip(*solved, strict=True))
    return field, variance


def _krige_hour(kriging: Kriging, targets: Places, values):
    """Field and variance (m,) of one hour from three-dimensional positions, so chords again."""
    from pykrige.ok3d import OrdinaryKriging3D
    from pykrige.uk3d import UniversalKriging3D

    covariance, stations = kriging.covariance, kriging.stations
    present = np.isfinite(values)
    error_variance = kriging.error_variance[present].mean()
    parameters = {
        "psill": covariance.partial_sill,
        "range": covariance.range,
        "nugget": covariance.nugget + error_variance,
    }
    options = {
        "variogram_model": covariance.model,
        "variogram_parameters": parameters,
        "exact_values": False,  # a target at a station's place is not the station's value
    }
    position = (*stations.positions[present].T, values[present])
    drift = stations.drift[present, 1:].T
    if len(drift):
        solver = UniversalKriging3D(
            *position, drift_terms=["specified"], specified_drift=list(drift), **options
        )
        more = {"specified_drift_arrays": list(targets.drift[:, 1:].T)}
    else:
        solver, more = OrdinaryKriging3D(*position, **options), {}
    field, variance = solver.execute("points", *targets.positions.T, **more)
    return np.asarray(field), np.maximum(np.asarray(variance) - error_variance, 0.0)
