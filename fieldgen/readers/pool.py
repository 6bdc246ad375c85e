"""Records of all files of a kind, in one place: of records that overlap the newest file's stay."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from fieldgen.readers.identities import Identities
from fieldgen.readers.records import Records, Rejections

FARTHEST_EPOCH = 15 * 366
"""Records this many days from the median day are wrong: a receiver that counts GPS weeks with ten
bits is off by 7168 days, and a time grid up to them would be huge."""

FAR_EPOCH = "epoch far from all others"


def oldest_first(tables: list[Records]) -> list[Records]:
    """Tables by their time of creation, those without one first, then by the file's name."""
    never = np.datetime64(0, "s")

    def age(records: Records):
        known = not np.isnat(records.created)
        return known, records.created if known else never, records.file

    return sorted(tables, key=age)


def drop_far_epochs(tables: list[Records], rejections: Rejections) -> None:
    """Take out, and count by file, records further than 15 years from the median epoch of all."""
    if not tables:
        return
    days = [records.time.astype("M8[D]").astype(np.int32) for records in tables]
    middle = np.median(np.concatenate(days))
    for records, day in zip(tables, days, strict=True):
        far = np.abs(day - middle) > FARTHEST_EPOCH
        if far.any():
            rejections.counts[records.file, FAR_EPOCH] += int(far.sum())
            records.keep(~far)


@dataclass
class Pool:
    """Records of many files, grouped by station or site.

    identifiers : of stations or sites; those of station i are order[start[i]:start[i + 1]]
    time : (n,) datetime64[s]; values : (n,) by name; both oldest file first
    """

    identifiers: list[str]
    start: np.ndarray
    order: np.ndarray
    time: np.ndarray
    values: dict[str, np.ndarray]

    @classmethod
    def of(cls, tables: list[Records], identities: Identities, names: tuple[str, ...]) -> Pool:
        """All records of `tables`, which `oldest_first` has put in order; the tables give them up,
        so that memory holds them once."""
        identifiers = list(identities.sites)
        number = _joined(identities.numbers, np.int32)
        order = np.argsort(number, kind="stable")
        start = np.searchsorted(number[order], np.arange(len(identifiers) + 1))
        time = _joined([vars(table).pop("time") for table in tables], "M8[s]")
        values = {name: _joined([vars(table).pop(name) for table in tables]) for name in names}
        return cls(identifiers, start, order, time, values)

    def series(self, identifier: str):
        """Epochs (n,), ascending, values by name (n,), and how many records gave way.

        Of records with the same epoch the one of the newest file stays.
        """
        index = self.identifiers.index(identifier)
        mine = self.order[self.start[index] : self.start[index + 1]]
        mine = mine[_last_of_each(self.time[mine])]
        gave_way = int(self.start[index + 1] - self.start[index]) - len(mine)
        values = {name: column[mine] for name, column in self.values.items()}
        return self.time[mine], values, gave_way


def _joined(parts: list[np.ndarray], kind=np.float32) -> np.ndarray:
    """Arrays one after the other; a column that no file has takes no memory."""
    if parts and all(part.strides == (0,) and np.isnan(part[:1]).all() for part in parts):
        return np.broadcast_to(parts[0].dtype.type(np.nan), sum(len(part) for part in parts))
    return np.concatenate([np.empty(0, kind), *parts])


def _last_of_each(epoch):
    """Indices, by epoch, of the records to keep: of each epoch the last one."""
    order = np.argsort(epoch, kind="stable")
    last = np.ones(len(order), bool)
    last[:-1] = np.diff(epoch[order]).astype(int) > 0
    return order[last]
