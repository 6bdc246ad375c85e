"""Places of stations in files that tell them with the records: when was which station where."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, field
from itertools import pairwise

import numpy as np

from fieldgen.readers.assembly import Columns
from fieldgen.readers.positions import distance_km
from fieldgen.readers.records import LineError, Rejections, Site, Stay

SAME_PLACE_KM = 1.0

MOST_PLACES = 100
"""Places of one station in one file; a ship is no station."""


@dataclass
class _Stated:
    """A place as a file gives it; one index for each identifier and place."""

    index: int
    stay: Stay


@dataclass
class StatedPlaces:
    """Stations or sites of one file, with all the places that it gives them."""

    stated: dict[str, dict[tuple, _Stated]] = field(default_factory=dict)
    count: int = 0

    def number(self, identifier: str, key: tuple, time: int, parse: Callable[[], Site]) -> int:
        """Index of an identifier at the place that the file writes as `key`.

        A new place is parsed; LineError, also of `parse`, if it cannot be used.
        """
        mine = self.stated.get(identifier, {})
        stated = mine.get(key)
        if stated is None:
            if len(mine) == MOST_PLACES:
                raise LineError("too many places", f"{identifier} has more than {MOST_PLACES}")
            stated = _Stated(self.count, Stay(parse(), time, time))
            self.stated.setdefault(identifier, mine)[key] = stated
            self.count += 1
        first, last = stated.stay.first, stated.stay.last
        if time < first or time > last:
            stated.stay = Stay(stated.stay.site, min(first, time), max(last, time))
        return stated.index

    def tell(
        self, columns: Columns, file: str, rejections: Rejections
    ) -> tuple[list[str], Columns, dict]:
        """Identifiers, records that refer to them, and `sites` and `stays` as records hold them.

        Places at the same time cannot be a move: records further than SAME_PLACE_KM from the first
        are rejected.
        """
        number, strays = np.empty(self.count, int), np.zeros(self.count, bool)
        sites, moves = {}, {}
        for index, (identifier, mine) in enumerate(self.stated.items()):
            number[[stated.index for stated in mine.values()]] = index
            placed = [stated for stated in mine.values() if _is_placed(stated.stay.site)]
            in_turn = sorted((stated.stay for stated in placed), key=lambda stay: stay.first)
            if placed:
                sites[identifier] = placed[0].stay.site
            if any(a.last >= b.first for a, b in pairwise(in_turn)):
                far = [one.index for one in placed if _is_far(one.stay.site, sites[identifier])]
                strays[far] = True
            elif len(placed) > 1:
                moves[identifier] = in_turn
        bad = strays[columns.place]
        ids, places = list(self.stated), number[columns.place]
        rejections.add_each(
            file,
            columns.line[bad],
            "several places at the same time",
            lambda index: f"{ids[places[bad][index]]}; its first place is used",
        )
        columns.place = places
        return ids, columns.keep(~bad), {"sites": sites, "stays": moves}


def _is_placed(site: Site) -> bool:
    return not np.isnan([site.longitude, site.ellipsoidal_height, site.msl_height]).all()


def _is_far(site: Site, first: Site) -> bool:
    apart = distance_km(site.longitude, site.latitude, first.longitude, first.latitude)
    return apart > SAME_PLACE_KM
