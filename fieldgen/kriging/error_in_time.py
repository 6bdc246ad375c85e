"""How errors of one hour resemble those of another.

What the stations and the kriging between them get wrong in one hour they get partly wrong in the
next, so the mean of a day is not as good as that of 24 independent hours. Errors are stationary
processes whose correlation falls as exp(-difference of time / lasts):

- kriging errors are the sum of two: a slow one, such as errors of delays, which are correlated over
  one to two days (Stoew and Elgered 2005), and air that keeps to a mountain; and a fast one, what
  the wind renews within hours. Their shares are measured: errors of cells of the demo network
  against its truth, less their mean over the island, are correlated by 0.70, 0.58, 0.50 and 0.48
  after 1, 3, 6 and 12 hours; this sum gives 0.73, 0.58, 0.53 and 0.47.
- the error of the scale height has the memory of its own estimate;
- what all stations share, constants and Tm, does not change within a day.
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np


class Part(NamedTuple):
    """A part of an error: its share of the variance, and how long it lasts."""

    share: float
    lasts: np.timedelta64


KRIGING_ERROR = (Part(0.6, np.timedelta64(48, "h")), Part(0.4, np.timedelta64(1, "h")))


def correlation_in_time(time, parts: tuple[Part, ...] = KRIGING_ERROR):
    """Correlation (t, t) of errors at times (t,) datetime64."""
    apart = np.abs(np.subtract.outer(time, time))
    return sum(part.share * np.exp(-(apart / part.lasts)) for part in parts)
