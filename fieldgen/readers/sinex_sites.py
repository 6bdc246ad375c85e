"""SITE/ID, SITE/COORDINATES and TROP/STA_COORDINATES of SINEX_TRO -> where each station is.

X, Y, Z are preferred to longitude and latitude, whose sign some files lose.
"""

from __future__ import annotations

from dataclasses import dataclass, field, replace
from itertools import pairwise

import numpy as np

from fieldgen.plain_text import one_line
from fieldgen.readers.epochs import SINEX_EPOCH, sinex_epoch
from fieldgen.readers.positions import (
    UNDULATIONS,
    check_height,
    check_position,
    distance_km,
    geodetic_position,
    is_on_the_ground,
)
from fieldgen.readers.records import LineError, Site, Stay

SAME_PLACE_KM = 1.0
"""Positions of one station that differ by more are worth a warning."""

SAME_HEIGHT_M = 10.0
"""Heights of one station that differ by more are worth a warning."""

OPEN = (-np.inf, np.inf)
"""An interval without ends."""

ID, XYZ = "SITE/ID", "SITE/COORDINATES"


@dataclass(frozen=True)
class Entry:
    """A station as one line of one block gives it."""

    station: str
    point: str
    site: Site
    first: float = -np.inf
    last: float = np.inf
    """Seconds since 1970 between which the place holds."""


def parse_site_id(text: str) -> Entry:
    """A line of SITE/ID: longitude and latitude in degrees, or in degrees, minutes and seconds.

    Raises LineError if it ends in too few numbers or in no position on Earth.
    """
    head, numbers = _split_trailing_numbers(text)
    if not head or len(numbers) < 3:
        raise LineError("no position", f"line begins {text.strip()[:40]!r}")
    if len(numbers) == 7:
        numbers = [_degrees(numbers[:3]), _degrees(numbers[3:6]), numbers[6]]
    longitude, latitude, height, *msl = (float(number) for number in numbers)
    try:
        longitude, latitude = check_position(longitude, latitude)
        height, *msl = (check_height(one) for one in (height, *msl))
    except ValueError as error:
        raise LineError("no position", f"station {head[0]}: {error}") from None
    description = one_line(" ".join(head[4:]))
    site = Site(longitude, latitude, height, msl[0] if msl else np.nan, description)
    return Entry(head[0].upper(), _point(head), site)


def parse_coordinates(text: str) -> Entry:
    """A line of SITE/COORDINATES or TROP/STA_COORDINATES, which holds X, Y, Z in metres.

    Raises LineError if no three numbers in a row lie near the Earth's surface.
    """
    words = text.split()
    for start in range(1, len(words) - 2):
        xyz = [_float(word) for word in words[start : start + 3]]
        if is_on_the_ground(*xyz):
            site = Site(*geodetic_position(*xyz))
            return Entry(words[0].upper(), _point(words), site, *_interval(words[1:start]))
    raise LineError("no position", f"line begins {text.strip()[:40]!r}")


def _interval(words: list[str]) -> tuple[float, float]:
    """The epochs between which a position holds; one that is absent, or zero, leaves it open."""
    epochs = [word for word in words if SINEX_EPOCH.fullmatch(word)]
    if len(epochs) != 2:
        return -np.inf, np.inf
    first, last = (_epoch_or(text, open_) for text, open_ in zip(epochs, OPEN, strict=True))
    return (first, last) if first < last else OPEN


def _epoch_or(text: str, otherwise: float) -> float:
    """Seconds of an epoch; `otherwise` for none, such as 00:000:00000."""
    try:
        return float(sinex_epoch(text))
    except ValueError:
        return otherwise


def _split_trailing_numbers(text: str) -> tuple[list[str], list[str]]:
    """The words of a SITE/ID line in front of its position, and the 7, 4 or 3 numbers of it."""
    words = text.split()
    count = 0
    while count < min(8, len(words)) and not np.isnan(_float(words[-1 - count])):
        count += 1
    if count >= 7 and all(word.lstrip("+-").isdecimal() for word in (words[-7], words[-4])):
        count = 7
    else:
        count = min(count, 4)
        if count == 4 and "." not in words[-4]:  # a number that ends the description
            count = 3
    return words[: len(words) - count], words[len(words) - count :]


def _degrees(parts: list[str]) -> float:
    """Degrees, minutes and seconds as degrees; a sign stands before the degrees."""
    degrees, minutes, seconds = (abs(float(part)) for part in parts)
    sign = -1.0 if parts[0].startswith("-") else 1.0
    return sign * (degrees + minutes / 60.0 + seconds / 3600.0)


def _point(words: list[str]) -> str:
    """The PT code, '' if there is none."""
    return words[1].upper() if len(words) > 1 and len(words[1]) <= 2 else ""


def _float(word: str) -> float:
    """A number, NaN if it is none."""
    try:
        return float(word)
    except ValueError:
        return np.nan


@dataclass
class SiteBlocks:
    """The entries of one file's site blocks, by station, point and block."""

    entries: dict[str, dict[str, dict[str, list[Entry]]]] = field(default_factory=dict)
    stays: dict[str, list[Stay]] = field(default_factory=dict)
    """Places by identifier, in order of time, of the stations that move; `sites` fills it."""
    warnings: list[str] = field(default_factory=list)

    def add(self, block: str, entry: Entry) -> None:
        """Take in one line of `block` (ID or XYZ)."""
        blocks = self.entries.setdefault(entry.station, {ID: {}, XYZ: {}})
        blocks[block].setdefault(entry.point, []).append(entry)

    def sites(self) -> tuple[dict[str, Site], set[str]]:
        """Sites by identifier, and the station codes that several places share.

        Where points (PT) of one code lie more than 1 km apart, the identifier is CODE_PT.
        """
        sites: dict[str, Site] = {}
        shared: set[str] = set()
        for station, blocks in self.entries.items():
            places = self._places(station, blocks)
            if len(places) > 1 and _spread_km(places.values()) > SAME_PLACE_KM:
                shared.add(station)
                sites |= {f"{station}_{point}": site for point, site in places.items()}
                self.stays.pop(station, None)
                self.warnings.append(
                    f"station {station}: points {', '.join(places)} are"
                    f" {_spread_km(places.values()):.0f} km apart, expected one place a code."
                )
            else:
                sites[station] = next(iter(places.values()))
        return sites, shared

    def _places(self, station: str, blocks) -> dict[str, Site]:
        """The place of each point of a station."""
        several = [points for points in blocks.values() if len(points) > 1]
        if not several:  # blocks may disagree on the code of the only point
            blocks = {
                block: dict(zip([""], points.values(), strict=False))
                for block, points in blocks.items()
            }
        points = {point: None for points in blocks.values() for point in points}
        return {
            point: self._place(station, blocks[ID].get(point, []), blocks[XYZ].get(point, []))
            for point in points
        }

    def _place(self, station: str, from_id: list[Entry], from_xyz: list[Entry]) -> Site:
        """One place from what the blocks say of it, with warnings where they disagree."""
        in_turn = sorted(from_xyz, key=lambda entry: entry.first)
        moves = len(in_turn) > 1 and all(a.last <= b.first for a, b in pairwise(in_turn))
        for block, found in ((ID, from_id), (XYZ, [] if moves else from_xyz)):
            spread = _spread_km([entry.site for entry in found]) if found else 0.0
            if spread > SAME_PLACE_KM:
                self.warnings.append(
                    f"station {station}: positions in {block} are {spread:.0f} km"
                    " apart, expected one place. The first is used."
                )
        by_id = from_id[0].site if from_id else None
        if not from_xyz:
            site = by_id
        elif by_id is None:
            site = (in_turn[-1] if moves else from_xyz[0]).site
        else:
            site = self._preferred(station, by_id, in_turn[-1].site if moves else from_xyz[0].site)
        if moves:
            self.stays[station] = [
                Stay(_with_undulation_of(entry.site, site), entry.first, entry.last)
                for entry in in_turn
            ]
        self._check_undulation(station, site)
        return site

    def _preferred(self, station: str, by_id: Site, by_xyz: Site) -> Site:
        """The place by X, Y, Z with the name and mean-sea-level height of SITE/ID."""
        apart = _spread_km([by_id, by_xyz])
        higher = by_id.ellipsoidal_height - by_xyz.ellipsoidal_height
        if apart > SAME_PLACE_KM or abs(higher) > SAME_HEIGHT_M:
            self.warnings.append(
                f"station {station}: {ID} is {apart:.1f} km and {higher:.1f} m in height away from"
                f" {XYZ}, expected {SAME_PLACE_KM:g} km and {SAME_HEIGHT_M:g} m at most."
                " X, Y, Z are used."
            )
        return Site(
            by_xyz.longitude,
            by_xyz.latitude,
            by_xyz.ellipsoidal_height,
            by_id.msl_height,
            by_id.name,
        )

    def _check_undulation(self, station: str, site: Site) -> None:
        """Warn if the two heights cannot both be right."""
        undulation = site.ellipsoidal_height - site.msl_height
        if not np.isnan(undulation) and not UNDULATIONS[0] <= undulation <= UNDULATIONS[1]:
            self.warnings.append(
                f"station {station}: ellipsoidal minus mean-sea-level height is {undulation:.1f} m,"
                f" expected {UNDULATIONS[0]:g} to {UNDULATIONS[1]:g} m."
            )


def _with_undulation_of(site: Site, other: Site) -> Site:
    """A place with the name and the geoid height of another one of the same station."""
    undulation = other.ellipsoidal_height - other.msl_height
    return replace(site, msl_height=site.ellipsoidal_height - undulation, name=other.name)


def _spread_km(sites) -> float:
    """Largest distance [km] of any site from the first."""
    first, *others = sites
    return max(
        (
            distance_km(first.longitude, first.latitude, other.longitude, other.latitude)
            for other in others
        ),
        default=0.0,
    )
