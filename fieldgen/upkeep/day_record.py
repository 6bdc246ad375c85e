"""What a run leaves beside a day's files, so that the next one knows whether they still hold."""

from __future__ import annotations

import json
from dataclasses import asdict, dataclass
from pathlib import Path

from fieldgen.products.atomic import whole_file
from fieldgen.report import DayReport
from fieldgen.upkeep.lock import STATE


@dataclass(frozen=True)
class DayRecord:
    """A day as it was made.

    shared : fingerprint of what all days share
    length : of a step [min]
    window : fingerprints by stamp of the steps that the day was made from
    steps : stamps of the day's own steps
    maps : fingerprint of the maps' colours and lines; empty where not all maps were drawn
    files : sizes [bytes] by path below the folder
    """

    shared: str
    length: int
    window: dict[str, str]
    steps: list[str]
    maps: str
    files: dict[str, int]
    report: DayReport

    def write(self, folder: Path) -> None:
        """Write the record beside the day's files, which must be there already."""
        with whole_file(_path(folder, self.report.name)) as temporary:
            temporary.write_text(json.dumps(asdict(self)), encoding="utf-8")

    def lost_file(self, folder: Path) -> str | None:
        """The first of the day's files that is gone or was changed by someone else."""
        for name, size in self.files.items():
            path = folder / name
            if not path.is_file() or path.stat().st_size != size:
                return name
        return None


def read_day_record(folder: Path, day: str) -> DayRecord | None:
    """Record of a day (YYYYMMDD), None if there is none that can be read."""
    try:
        content = json.loads(_path(folder, day).read_text(encoding="utf-8"))
        return DayRecord(**content | {"report": DayReport(**content["report"])})
    except (OSError, ValueError, TypeError, KeyError):
        return None


def recorded_days(folder: Path) -> list[str]:
    """Days (YYYYMMDD) with a record, in order."""
    return sorted(path.stem for path in (folder / STATE / "days").glob("[0-9]*.json"))


def forget_day(folder: Path, day: str) -> None:
    """Remove the record of a day."""
    _path(folder, day).unlink(missing_ok=True)


def sizes_of(folder: Path, files: list[str]) -> dict[str, int]:
    """Sizes [bytes] of files by their path below the folder."""
    return {name: (folder / name).stat().st_size for name in files}


def _path(folder: Path, day: str) -> Path:
    return folder / STATE / "days" / f"{day}.json"
