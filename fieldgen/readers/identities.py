"""Which station a record belongs to: stations move, and files use one code for different places.

Files say where their stations are. Places of one code that differ are a move if one ends when the
other begins; else the code stands for two stations, or two files disagree on one.
"""

from __future__ import annotations

from dataclasses import dataclass, field, replace
from itertools import pairwise

import numpy as np

from fieldgen.readers.positions import distance_km
from fieldgen.readers.records import ReadingReport, Records, Site, Stay
from fieldgen.readers.tables import StationRow

MOVED_KM, MOVED_HEIGHT_M = 0.1, 2.0
"""A smaller change of place is none: 2 m of height are 0.09 kg m-2 by the hydrostatic delay, half
the error that all stations share, and water vapour differs by less over 100 m."""

ONE_STATION_KM = 1.0
"""Files that disagree by less mean one station; by more, two with the same code."""

LONGEST_OVERLAP_S = 86_400
"""Files of a moved station may overlap by so much, if that is less than half of either stay."""


@dataclass
class Identities:
    """Stations or sites told apart.

    sites : place by identifier, in sorted order; what no file says is NaN
    codes : what the files call it, by identifier
    rows : row of the station table by identifier, of those that are in it
    numbers : for each table (n,), each record's index among the identifiers, -1 where it could
        belong to several
    """

    sites: dict[str, Site] = field(default_factory=dict)
    codes: dict[str, str] = field(default_factory=dict)
    rows: dict[str, StationRow] = field(default_factory=dict)
    numbers: list[np.ndarray] = field(default_factory=list)


@dataclass
class _Place:
    """A place of a code, from the statements that agree on it; the oldest one counts, so that a new
    file, whose coordinates differ by millimetres, does not change what was made before."""

    site: Site
    first: float
    last: float
    newest: int
    """Number of the newest of its statements."""
    name: str = ""

    def agree(self, stay: Stay, number: int) -> None:
        """Take in a statement of this number that agrees."""
        self.site, self.newest = _filled(self.site, stay.site), max(number, self.newest)
        self._extend(stay)

    def dispute(self, other: _Place) -> None:
        """Take in a place that disagrees; the newer of the two is used."""
        if other.newest > self.newest:
            self.site, self.newest = _filled(other.site, self.site), other.newest
        self._extend(other)

    def _extend(self, other: Stay | _Place) -> None:
        self.first, self.last = min(self.first, other.first), max(self.last, other.last)


def tell_apart(
    tables: list[Records], rows: dict[str, StationRow], report: ReadingReport, kind: str = "station"
) -> Identities:
    """Identities of the stations of `tables`, oldest file first.

    rows : row of the station table by code. A station that is in it does not move.
    A station that moved is CODE until then, and CODE_YYYYMMDD, of the day of the move, from then
    on. Stations that share a code are called by their places, such as CODE_N47739W027811. Moves,
    shared codes and disagreement are reported as warnings.
    """
    stays = [_stays_of(records) for records in tables]
    said: dict[str, list[Stay]] = {}
    silent: dict[str, Site] = {}
    for records, table in zip(tables, stays, strict=True):
        for code, some in table.items():
            said.setdefault(code, []).extend(some)
            if not some and code in records.sites:
                silent[code] = records.sites[code]
    places = {}
    for code in sorted(said):
        one = _Code(code, kind, rows.get(code), report)
        places[code] = one.resolve(said[code], silent.get(code, Site()))
    names = sorted({place.name for some in places.values() for place in some})
    result = Identities()
    for code, some in places.items():
        for place in some:
            result.codes[place.name] = code
            if code in rows and place.name == code:
                result.rows[code] = rows[code]
    by_name = {place.name: place.site for some in places.values() for place in some}
    result.sites = {name: by_name[name] for name in names}
    index = {name: number for number, name in enumerate(names)}
    result.numbers = [
        _numbers(records, table, places, index, report)
        for records, table in zip(tables, stays, strict=True)
    ]
    return result


def _stays_of(records: Records) -> dict[str, list[Stay]]:
    """Where each station of a file has been, and from which to which record; [] if it is silent."""
    stays: dict[str, list[Stay]] = {code: [] for code in records.identifiers}
    if not any(_is_placed(site) for site in records.sites.values()):
        return stays
    for index, (first, last) in _spans(records).items():
        code = records.identifiers[index]
        site = records.sites.get(code)
        if site is not None and _is_placed(site):
            stays[code] = [
                stay._replace(first=max(stay.first, first), last=min(stay.last, last))
                for stay in records.stays.get(code, [])
                if stay.first <= last and stay.last >= first
            ] or [Stay(site, first, last)]
    return stays


def _spans(records: Records) -> dict[int, tuple[int, int]]:
    """First and last epoch [s] of each station that has records, by its index."""
    order = np.argsort(records.place, kind="stable")
    place, seconds = records.place[order], records.time[order].astype(np.int64)
    start = np.flatnonzero(np.diff(place, prepend=-1))
    first, last = np.minimum.reduceat(seconds, start), np.maximum.reduceat(seconds, start)
    spans = zip(first.tolist(), last.tolist(), strict=True)
    return dict(zip(place[start].tolist(), spans, strict=True))


@dataclass
class _Code:
    """One code of the files, whose places are to be told apart."""

    code: str
    kind: str
    row: StationRow | None
    report: ReadingReport

    def resolve(self, said: list[Stay], silent: Site) -> list[_Place]:
        """Its places, with distinct names, oldest first; `silent` if no record is at any."""
        places = _grouped(said)
        if len(places) < 2:
            site = places[0].site if places else silent
            return [_Place(site, -np.inf, np.inf, 0, self.code)]
        if all(_is_move(*pair) for pair in pairwise(places)):
            return self._moved(places)
        return self._shared(places)

    def _moved(self, places: list[_Place]) -> list[_Place]:
        """One station after the other; one of the station table stays where it is."""
        if self.row is not None:
            return [replace(places[-1], first=-np.inf, last=np.inf, name=self.code)]
        places[0].name = self.code
        for before, after in pairwise(places):
            moved = np.datetime64(int(after.first), "s")
            after.name = f"{self.code}_{str(moved)[:10].replace('-', '')}"
            if after.name == before.name:
                after.name += str(moved)[10:16].replace(":", "")
            self._warn(
                f"moved by {_difference(before.site, after.site)} at {moved}; it is"
                f" {before.name} before and {after.name} from then on"
            )
        return places

    def _shared(self, places: list[_Place]) -> list[_Place]:
        """Places at the same time: files that disagree, or stations with the same code."""
        apart = _clusters(places)
        if len(apart) < len(places):
            spread = _difference(places[0].site, places[-1].site)
            used = "the newest" if self.row is None else "stations.table"
            self._warn(f"files place it {spread} apart at the same time; {used} is used")
        if len(apart) == 1:
            return [replace(apart[0], first=-np.inf, last=np.inf, name=self.code)]
        own = [place for place in apart if self.row is not None and _near(place.site, self.row)]
        for place in apart:
            is_own = len(own) == 1 and place is own[0]
            place.name = self.code if is_own else f"{self.code}_{_name_of_place(place.site)}"
        self._warn(
            f"files use the code for {len(apart)} places, expected one; they are kept apart as "
            + " and ".join(place.name for place in apart)
        )
        return apart

    def _warn(self, text: str) -> None:
        self.report.warnings.append(f"{self.kind} {self.code}: {text}")


def _grouped(said: list[Stay]) -> list[_Place]:
    """Places that differ, by their first epoch; `said` has the oldest file first."""
    places: list[_Place] = []
    known: dict[tuple, _Place] = {}
    for number, stay in enumerate(said):
        key = tuple(value if value == value else None for value in _numbers_of(stay.site))
        place = known.get(key)
        if place is None:
            place = next((one for one in places if _is_same(one.site, stay.site)), None)
            if place is None:
                place = _Place(*stay, number)
                places.append(place)
            known[key] = place
        place.agree(stay, number)
    return sorted(places, key=lambda place: (place.first, place.last))


def _clusters(places: list[_Place]) -> list[_Place]:
    """Places further than ONE_STATION_KM from each other; of the others the newest stays."""
    apart: list[_Place] = []
    for place in places:
        same = next((one for one in apart if not _is_far(one.site, place.site)), None)
        if same is None:
            apart.append(place)
        else:
            same.dispute(place)
    return apart


def _is_move(before: _Place, after: _Place) -> bool:
    """Whether one place takes the other's place in time."""
    overlap = before.last - after.first
    shortest = min(before.last - before.first, after.last - after.first)
    in_turn = after.first > before.first and after.last > before.last
    return overlap < 0.0 or (in_turn and overlap <= min(LONGEST_OVERLAP_S, shortest / 2.0))


def _numbers(records: Records, stays, places, index, report: ReadingReport) -> np.ndarray:
    """Each record's index (n,) among the identifiers, -1 where it could belong to several."""
    first = [index[places[code][0].name] for code in records.identifiers]
    number = np.array(first, np.int32)[records.place]
    for place, code in enumerate(records.identifiers):
        if len(places[code]) > 1:
            mine = np.flatnonzero(records.place == place)
            seconds = records.time[mine].astype(np.int64)
            number[mine] = _number_by_time(seconds, stays[code], places[code], index)
    unknown = number < 0
    if unknown.any():
        reason = "code shared by several places, and the file does not say which"
        report.rejections.counts[records.file, reason] += int(unknown.sum())
    return number


def _number_by_time(seconds, stays: list[Stay], places: list[_Place], index) -> np.ndarray:
    """Index (n,) of the station at each time: as the file's own places say, or by the others."""
    if stays:
        where = [_place_of(stay.site, places) for stay in stays]
        begin = [stay.first for stay in stays]
    elif all(_is_move(*pair) for pair in pairwise(places)):
        where, begin = places, [place.first for place in places]
    else:
        return np.full(len(seconds), -1, np.int32)
    latest = np.maximum(np.searchsorted(begin, seconds, side="right") - 1, 0)
    return np.array([index[place.name] for place in where], np.int32)[latest]


def _place_of(site: Site, places: list[_Place]) -> _Place:
    """The place that a file's statement belongs to: the same, or else the nearest."""

    def distance(place: _Place) -> tuple[bool, float]:
        apart = distance_km(
            site.longitude, site.latitude, place.site.longitude, place.site.latitude
        )
        return not _is_same(site, place.site), np.nan_to_num(apart)

    return min(places, key=distance)


def _numbers_of(site: Site) -> tuple[float, float, float, float]:
    return site.longitude, site.latitude, site.ellipsoidal_height, site.msl_height


def _is_placed(site: Site) -> bool:
    """Whether a file says anything of a place."""
    return any(value == value for value in _numbers_of(site))  # NaN is not equal to itself


def _filled(site: Site, other: Site) -> Site:
    """A place, with what it does not say taken from another statement of the same place."""
    kept = {
        name: getattr(other, name)
        for name in ("longitude", "latitude", "ellipsoidal_height", "msl_height")
        if np.isnan(getattr(site, name))
    }
    return replace(site, **kept, name=site.name or other.name) if kept or not site.name else site


def _apart(one: Site, other: Site) -> tuple[float, float]:
    """Distance [km] and difference in height [m]; NaN where one does not say."""
    higher = other.ellipsoidal_height - one.ellipsoidal_height
    if np.isnan(higher):
        higher = other.msl_height - one.msl_height
    return distance_km(one.longitude, one.latitude, other.longitude, other.latitude), higher


def _is_same(one: Site, other: Site) -> bool:
    """Whether two statements mean one place; what one does not say does not part them."""
    apart, higher = _apart(one, other)
    return not apart > MOVED_KM and not abs(higher) > MOVED_HEIGHT_M


def _is_far(one: Site, other: Site) -> bool:
    return _apart(one, other)[0] > ONE_STATION_KM


def _near(site: Site, row: StationRow) -> bool:
    """Whether a place is that of a row of the station table."""
    return distance_km(site.longitude, site.latitude, row.longitude, row.latitude) <= ONE_STATION_KM


def _difference(one: Site, other: Site) -> str:
    """`75.1 km and +20.0 m in height`."""
    apart, higher = _apart(one, other)
    height = "" if np.isnan(higher) else f" and {higher:+.1f} m in height"
    return ("an unknown distance" if np.isnan(apart) else f"{apart:.3g} km") + height


def _name_of_place(site: Site) -> str:
    """`N47739W027811`: thousandths of a degree, so that the name does not depend on other files."""
    return (
        f"{'N' if site.latitude >= 0 else 'S'}{abs(site.latitude) * 1000:05.0f}"
        f"{'E' if site.longitude >= 0 else 'W'}{abs(site.longitude) * 1000:06.0f}"
    )
