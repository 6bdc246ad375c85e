"""Arrays as text for the browser; ``unpack.js`` undoes it.

An array is counted in whole steps, 16 bits each, differenced along every axis (modulo 2^16, so
that nothing is lost), its low bytes put before its high bytes, deflated and written in base64.
Fields are smooth in time and space: most differences are a step or two.
"""

from __future__ import annotations

import base64
import zlib

import numpy as np

from fieldgen.quantities import MISSING

LEVEL = 6  # of zlib; 9 takes many times as long and saves a few hundredths


def pack_array(values, step: float, offset: float = 0.0) -> dict:
    """Packed array: shape, step and offset, and base64 text.

    values : array of numbers; NaN is kept as missing
    step : what one count stands for; each value comes back as offset + count * step, within half
        a step of what it was
    Raises ValueError if a value takes more than 16 bits.
    """
    values = np.asarray(values, dtype=float)
    counts = np.rint((values - offset) / step)
    if np.nanmax(np.abs(counts), initial=0) > -MISSING - 1:
        raise ValueError(f"values do not fit into 16 bits of {step:g}")
    counts = np.where(np.isnan(counts), MISSING, counts).astype("<i2")
    return {
        "shape": list(counts.shape),
        "step": step,
        "offset": offset,
        "data": _as_text(_difference(counts)),
    }


def pack_range(values) -> dict:
    """Packed array whose step follows from its range, a 65 000th of it."""
    values = np.asarray(values, dtype=float)
    low, high = float(np.nanmin(values)), float(np.nanmax(values))
    return pack_array(values, (high - low) / 65000 or 1.0, (low + high) / 2)


def _difference(counts: np.ndarray) -> np.ndarray:
    """Differences along every axis, the first element kept; overflow wraps round."""
    for axis in range(counts.ndim):
        if counts.shape[axis]:
            first = np.take(counts, [0], axis)
            counts = np.concatenate([first, np.diff(counts, axis=axis)], axis)
    return counts


def _as_text(counts: np.ndarray) -> str:
    planes = counts.reshape(-1).view(np.uint8).reshape(-1, 2).T
    return base64.b64encode(zlib.compress(planes.tobytes(), LEVEL)).decode("ascii")
