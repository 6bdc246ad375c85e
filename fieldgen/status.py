"""How an output folder is doing, seen from its files alone: for a person, and for monitoring."""

from __future__ import annotations

import json
from dataclasses import asdict, dataclass
from datetime import timedelta
from pathlib import Path

import numpy as np
import xarray as xr

from fieldgen.errors import InputError
from fieldgen.station.screening import STATION_FLAGS
from fieldgen.text_table import new_table, render
from fieldgen.update import CUT_OFF, OUTCOME
from fieldgen.upkeep.lock import STATE, is_held, read_owner

LATELY = np.timedelta64(24, "h")
"""Time before the newest hour in which rejections are counted."""

SILENCE = np.timedelta64(3, "h")
"""A station without a delay for this long before the newest hour is missing."""

DAYS_BACK = 14
"""Days searched for the last delay of a missing station."""

UNUSABLE_SHOWN = 5
"""Unusable files named in the text; the JSON names all of them."""


@dataclass(frozen=True)
class Status:
    """State of a folder; times are UTC, ISO 8601.

    newest : end of the newest hour with a field, None if there is none
    age_hours : of the newest hour
    stations : number of stations known
    missing : stations that sent no delay lately, with the end of the last hour they did, None if
        it is longer ago than the days searched
    rejected : values not used lately, by station and reason
    unusable_files : of the last run, by file
    rejected_lines : of the last run, as "file: count x reason"
    last_update : how the last update ended; running : the run that holds the folder now
    problems : what a person should look at; empty when all is well
    """

    folder: str
    time: str
    newest: str | None
    age_hours: float | None
    stations: int
    missing: dict[str, str | None]
    rejected: dict[str, dict[str, int]]
    unusable_files: dict[str, str]
    rejected_lines: list[str]
    last_update: dict | None
    running: str | None
    problems: list[str]


def read_status(
    folder: Path,
    time: np.datetime64,
    *,
    most_age: timedelta = timedelta(hours=3),
    most_missing: int | None = None,
) -> Status:
    """Status of an output folder at a time.

    most_age : of the newest hour, beyond which it is a problem
    most_missing : stations that may be missing; by default a quarter of them
    Raises InputError if there are no station files in the folder.
    """
    files = sorted((folder / "stations").glob("stations_*.nc"))[-DAYS_BACK:]
    if not files:
        raise InputError(f"{folder}: holds no station files, expected those of a run. Run update.")
    damaged: list[str] = []
    newest = _newest_field(folder, damaged)
    missing, count = _missing_stations(files, newest, damaged)
    read = _read_json(folder / "run.json").get("read", {})
    age = None if newest is None else float((time - newest) / np.timedelta64(1, "h"))
    last_update = _read_json(folder / STATE / OUTCOME) or None
    status = Status(
        folder=str(folder),
        time=_text(time),
        newest=None if newest is None else _text(newest),
        age_hours=None if age is None else round(age, 2),
        stations=count,
        missing=missing,
        rejected=_rejected_lately(files, newest),
        unusable_files=read.get("unusable_files", {}),
        rejected_lines=[
            f"{one['where']}: {one['count']} x {one['reason']}" for one in read.get("rejected", [])
        ],
        last_update=last_update,
        running=str(read_owner(folder) or "a run") if is_held(folder) else None,
        problems=damaged,
    )
    allowed = count // 4 if most_missing is None else most_missing
    status.problems.extend(_problems(status, most_age, allowed))
    return status


def format_status(status: Status) -> str:
    """Status as text for a terminal."""
    newest = "none" if status.newest is None else f"{status.newest}Z, {status.age_hours:.1f} h old"
    lines = [
        *(f"problem   {problem}" for problem in status.problems),
        f"folder    {status.folder}",
        f"newest    {newest}",
        f"update    {_format_update(status)}",
        f"stations  {status.stations - len(status.missing)} of {status.stations} report",
        *(
            f"missing   {station}, {f'last delay {since}Z' if since else 'for longer than known'}"
            for station, since in status.missing.items()
        ),
        *(
            f"unusable  {reason}"
            for reason in list(status.unusable_files.values())[-UNUSABLE_SHOWN:]
        ),
        *(f"rejected  {line}" for line in status.rejected_lines),
        _rejected_table(status.rejected),
    ]
    return "\n".join(line for line in lines if line)


def as_json(status: Status) -> str:
    """Status as JSON, with `ok` for a program that wants nothing else."""
    return json.dumps({"ok": not status.problems} | asdict(status), indent=1)


def _problems(status: Status, most_age: timedelta, most_missing: int) -> list[str]:
    """What a person should look at."""
    found = []
    limit = most_age.total_seconds() / 3600.0
    if status.newest is None:
        found.append("no hour has a field")
    elif status.age_hours > limit:
        found.append(f"the newest hour is {status.age_hours:.1f} h old, expected at most {limit:g}")
    if len(status.missing) > most_missing:
        found.append(f"{len(status.missing)} stations are missing, expected at most {most_missing}")
    outcome = (status.last_update or {}).get("outcome", "done")
    at_work = status.running and outcome == CUT_OFF
    if outcome != "done" and not at_work:
        found.append(f"the last update {outcome}")
    return found


def _open(path: Path, damaged: list[str] | None = None) -> xr.Dataset | None:
    """Content of a product, None if it cannot be read, which is then told among the `damaged`."""
    try:
        with xr.open_dataset(path) as dataset:
            return dataset.load()
    except (OSError, ValueError, RuntimeError):
        if damaged is not None:
            damaged.append(f"{path.name} is damaged; update makes it anew")
        return None


def _newest_field(folder: Path, damaged: list[str]) -> np.datetime64 | None:
    """End of the newest hour that holds a value in the field files."""
    for path in sorted((folder / "fields").glob("pwv_*.nc"), reverse=True):
        fields = _open(path, damaged)
        if fields is not None and (made := np.isfinite(fields.scale_height.values)).any():
            return fields.time.values[made][-1].astype("datetime64[s]")
    return None


def _missing_stations(
    files: list[Path], newest: np.datetime64 | None, damaged: list[str]
) -> tuple[dict[str, str | None], int]:
    """Stations of the newest file that are silent at the newest hour with a field, with the last
    hour of each, and how many stations there are."""
    last: dict[str, np.datetime64 | None] = {}
    for path in reversed(files):
        stations = _open(path, damaged)
        if stations is None:
            continue
        ids = [str(one) for one in stations.station_id.values]
        time = stations.time.values.astype("datetime64[s]")
        has_delay = (stations.flag.values & STATION_FLAGS["no_delay"]) == 0
        last = last or dict.fromkeys(ids)
        newest = time[-1] if newest is None else newest
        for station, reported in zip(ids, has_delay, strict=True):
            if station in last and last[station] is None and reported.any():
                last[station] = time[reported][-1]
        if all(one is not None for one in last.values()):
            break
    missing = {
        station: None if one is None else _text(one)
        for station, one in last.items()
        if one is None or newest - one >= SILENCE
    }
    return missing, len(last)


def _rejected_lately(files: list[Path], newest: np.datetime64 | None) -> dict[str, dict[str, int]]:
    """Values that were there and not used in the day before the newest hour with a field, by
    station and reason."""
    counts: dict[str, dict[str, int]] = {}
    if newest is None:
        return counts
    for path in files:
        stations = _open(path)
        if stations is None or stations.time.values[-1] <= newest - LATELY:
            continue
        flags = stations.flag.values[:, stations.time.values > newest - LATELY]
        for station, row in zip(stations.station_id.values, flags, strict=True):
            for name, bit in STATION_FLAGS.items():
                if name != "no_delay" and (steps := int(((row & bit) > 0).sum())):
                    reasons = counts.setdefault(str(station), {})
                    reasons[name] = reasons.get(name, 0) + steps
    return dict(sorted(counts.items()))


def _rejected_table(rejected: dict[str, dict[str, int]]) -> str:
    if not rejected:
        return ""
    names = [name for name in STATION_FLAGS if any(name in one for one in rejected.values())]
    table = new_table("not used in 24 h", *(name.replace("_", " ") for name in names))
    for station, reasons in rejected.items():
        table.add_row(station, *(str(reasons.get(name, "")) for name in names))
    return render(table)


def _format_update(status: Status) -> str:
    last = status.last_update
    text = "none yet"
    if last is not None:
        text = f"{last.get('outcome', '?')}, {last.get('ended', '?')}"
    return f"{text}; at work: {status.running}" if status.running else text


def _read_json(path: Path) -> dict:
    """Content of a JSON file, empty if there is none that can be read."""
    try:
        content = json.loads(path.read_text(encoding="utf-8"))
    except (OSError, ValueError):
        return {}
    return content if isinstance(content, dict) else {}


def _text(time) -> str:
    return np.datetime_as_string(time, unit="m")
