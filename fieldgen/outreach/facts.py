"""What a map shows, as numbers and words: the facts that descriptions are made from."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from fieldgen.outreach.language import Language

PARTS = (
    ("south_west", "south", "south_east"),
    ("west", "centre", "east"),
    ("north_west", "north", "north_east"),
)
"""Parts of a map, south row first, by their keys in a language file."""

EVEN = 1.0
"""Where the means of all parts lie within this, none is called moist or dry [kg m-2]."""


@dataclass(frozen=True)
class MapFacts:
    """Lowest, highest and mean of all cells [kg m-2], and the moistest and driest part.

    The parts are None where they hardly differ; all numbers are NaN without a field.
    """

    lowest: float
    highest: float
    mean: float
    moistest: str | None
    driest: str | None

    @property
    def has_field(self) -> bool:
        """Whether there is any value."""
        return bool(np.isfinite(self.mean))


def read_facts(pwv: np.ndarray | None) -> MapFacts:
    """Facts of a field (y, x) [kg m-2], south row first; NaN cells are left out."""
    if pwv is None or not np.isfinite(pwv).any():
        return MapFacts(np.nan, np.nan, np.nan, None, None)
    parts = _part_means(pwv)
    apart = len(parts) > 1 and max(parts.values()) - min(parts.values()) > EVEN
    return MapFacts(
        lowest=float(np.nanmin(pwv)),
        highest=float(np.nanmax(pwv)),
        mean=float(np.nanmean(pwv, dtype=float)),
        moistest=max(parts, key=parts.get) if apart else None,
        driest=min(parts, key=parts.get) if apart else None,
    )


def _part_means(pwv: np.ndarray) -> dict[str, float]:
    """Mean of each ninth of a map that has a value."""
    means = {}
    for names, rows in zip(PARTS, np.array_split(pwv, 3, axis=0), strict=True):
        for name, part in zip(names, np.array_split(rows, 3, axis=1), strict=True):
            if np.isfinite(part).any():
                means[name] = float(np.nanmean(part, dtype=float))
    return means


def describe_map(
    language: Language, facts: MapFacts, *, network: str, hour: str, used: int, stations: int
) -> str:
    """Alternative text of a map.

    hour : the time in words; used, stations : stations with a value, and all
    """
    count = language.say("map_alt_stations", used=used, all=stations)
    if not facts.has_field:
        words = [language.say("map_alt_missing", network=network, hour=hour)]
    else:
        numbers = {
            name: language.number(getattr(facts, name)) for name in ("lowest", "highest", "mean")
        }
        words = [
            language.say("map_alt", network=network, hour=hour, **numbers),
            _describe_parts(language, facts),
        ]
    return " ".join([*words, count, language.say("caution")])


def _describe_parts(language: Language, facts: MapFacts) -> str:
    if facts.moistest is None:
        return language.say("map_alt_even")
    parts = {"moistest": language.say(facts.moistest), "driest": language.say(facts.driest)}
    return language.say("map_alt_where", **parts)


def describe_film(language: Language, hours: list[str], means: list[float], network: str) -> str:
    """Alternative text of a film.

    hours : the times in words; means : over the region, of each map, NaN without a field [kg m-2]
    """
    words = [
        language.say(
            "film_alt", network=network, count=len(hours), start=hours[0], end=hours[-1]
        )
    ]  # fmt: skip
    if np.isfinite(means).any():
        low, high = int(np.nanargmin(means)), int(np.nanargmax(means))
        words.append(
            language.say(
                "film_alt_course",
                lowest=language.number(means[low]), driest_hour=hours[low],
                highest=language.number(means[high]), moistest_hour=hours[high],
            )
        )  # fmt: skip
    missing = int(np.isnan(means).sum())
    if missing:
        words.append(language.say("film_alt_missing", missing=missing))
    return " ".join([*words, language.say("caution")])
