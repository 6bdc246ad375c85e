"""Every trial of a period: each station predicted from the others, and from farther ones alone.

A day is scored by itself, as it is made, so that days can share the processors.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from threadpoolctl import threadpool_limits

from fieldgen.analysis import Day
from fieldgen.chain import pieces_of
from fieldgen.day_maker import DayMaker
from fieldgen.errors import InputError
from fieldgen.period import Piece
from fieldgen.processes import map_days
from fieldgen.readers.network import Network
from fieldgen.scoring.hull import POSITIONS, local_plane, positions
from fieldgen.scoring.leave_out import nearest_blocks, predict
from fieldgen.scoring.plain_methods import METHODS

BLOCK_SIZE = 5
"""Stations of a block: one, and its four nearest."""

TRIALS = {"each_station": 1, "blocks": BLOCK_SIZE}
"""Stations left out together, by the trial's name. The first of them is predicted."""

NOWHERE = -1
"""Code of a position that is not known."""


@dataclass(frozen=True)
class Trial:
    """Errors of a trial; t steps, n stations of the network, NaN where nothing is predicted.

    error (t, n) [kg m-2]: prediction less the station's value; sigma (t, n) [kg m-2] of it
    position (t, n) : index into POSITIONS, `NOWHERE` where the station is not there
    plain : errors (t, n) of the methods of METHODS
    """

    error: np.ndarray
    sigma: np.ndarray
    position: np.ndarray
    plain: dict[str, np.ndarray]


@dataclass(frozen=True)
class Score:
    """All trials of a period, or of one day of it.

    time (t,) : ends of the steps; scale_height (t,) [m], NaN where no field is made
    flag (t, n), residual (t, n) [kg m-2] : of the station files, where a station has a value
    """

    time: np.ndarray
    scale_height: np.ndarray
    flag: np.ndarray
    residual: np.ndarray
    trials: dict[str, Trial]


def score_network(
    network: Network,
    start: str | None = None,
    end: str | None = None,
    *,
    jobs: int = 1,
    progress: Callable[[str, int], None] = lambda piece, count: None,
) -> Score:
    """Trials of a network over a period; start, end, jobs, progress: as for `chain.make`.

    Raises InputError if the period is empty, or no step has enough stations to leave one out.
    """
    days = pieces_of(network, start, end)
    scored = map_days(DayScorer(DayMaker(network)), days, jobs=jobs)
    scores = []
    for piece, score in zip(days, scored, strict=True):
        scores.append(score)
        progress(piece.name, len(days))
    score = _combine(scores, np.concatenate)
    if not np.isfinite(score.trials["each_station"].error).any():
        raise InputError(
            f"{network.settings.network.name}: no step has six stations that are used, expected "
            "at least one. See `fieldgen check` for what was rejected."
        )
    return score


@dataclass(frozen=True)
class DayScorer:
    """Scores the days of a network."""

    maker: DayMaker

    def __call__(self, piece: Piece) -> Score:
        """Score of the part of a day that is asked for."""
        with threadpool_limits(1):  # results must not depend on how BLAS splits its sums
            day = self.maker.analyse(piece)
            methods = {name: make(day) for name, make in METHODS.items()} if day.model else {}
            trials = {name: _trial(day, methods, size) for name, size in TRIALS.items()}
        scale_height = np.full(len(day.makable), np.nan)
        if day.model:
            scale_height[day.makable] = day.model.scale_height[day.makable]
        has_value = np.isfinite(day.stations.pwv.values)
        whole = Score(
            time=day.stations.time.values,
            scale_height=scale_height,
            flag=np.where(has_value, day.stations.flag.values, 0),
            residual=np.where(has_value, day.stations.residual.values, np.nan),
            trials=trials,
        )
        return _combine([whole], lambda parts: parts[0][piece.asked])


def _trial(day: Day, methods: dict, size: int) -> Trial:
    """One trial of a day, spread to all stations of the network."""
    shape = day.stations.flag.shape
    if day.model is None:
        nothing = np.full(shape, np.nan)
        plain = dict.fromkeys(METHODS, nothing)
        return Trial(nothing, nothing, np.full(shape, NOWHERE, np.int8), plain)
    window = day.window
    blocks = nearest_blocks(window.places.positions, size)
    found = predict(day, blocks)
    known = np.isfinite(found.error)

    def spread(values, nothing=np.nan):
        everywhere = np.full(shape, nothing, np.asarray(values).dtype)
        everywhere[:, window.index] = values
        return everywhere

    return Trial(
        spread(found.error),
        spread(found.sigma),
        spread(_positions(day, blocks), NOWHERE),
        {name: spread(np.where(known, method(blocks), np.nan)) for name, method in methods.items()},
    )


def _positions(day: Day, blocks):
    """Position (n,) of each station of the window as an index into POSITIONS."""
    places = day.stations.isel(station=day.window.index)
    plane = local_plane(places.longitude.values, places.latitude.values)
    reports = np.isfinite(day.model.values).any(axis=0)
    words = positions(plane, reports, blocks)
    return np.array([POSITIONS.index(word) for word in words], np.int8)


def _combine(scores: list[Score], combine: Callable[[list], np.ndarray]) -> Score:
    """A score whose arrays are `combine` of the arrays of scores."""

    def of(parts, name: str):
        return combine([getattr(part, name) for part in parts])

    trials = {}
    for name in TRIALS:
        parts = [score.trials[name] for score in scores]
        plain = {method: combine([part.plain[method] for part in parts]) for method in METHODS}
        trials[name] = Trial(*(of(parts, one) for one in ("error", "sigma", "position")), plain)
    series = ("time", "scale_height", "flag", "residual")
    return Score(**{name: of(scores, name) for name in series}, trials=trials)
