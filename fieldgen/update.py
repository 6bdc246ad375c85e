"""Bring an output folder up to date with the input: make what is missing, late or changed."""

from __future__ import annotations

import json
import time
from contextlib import suppress
from dataclasses import dataclass, replace
from datetime import UTC, datetime
from pathlib import Path

import numpy as np

from fieldgen.chain import finish_run, make_days, maps_of_day, pieces_of
from fieldgen.day_maker import DayMaker, DayWriter, Task, colour_limits
from fieldgen.errors import FieldgenError, InputError, OutputError
from fieldgen.log import Log
from fieldgen.period import Piece
from fieldgen.products.atomic import whole_file
from fieldgen.readers.network import Network, read_network
from fieldgen.settings import Settings, read_settings
from fieldgen.upkeep.day_record import DayRecord, forget_day, read_day_record, recorded_days
from fieldgen.upkeep.fingerprint import NOTHING, Fingerprints
from fieldgen.upkeep.inputs import Standing, list_inputs, read_standing, write_inputs
from fieldgen.upkeep.lock import STATE, hold

OUTCOME = "last_update.json"
"""File, in the folder's state, that says how the last update ended."""

CUT_OFF = "was cut off"
"""Outcome while an update is at work; it stays where the update is killed."""

PAGE = "page.html"


def update(path: str | Path, folder: Path, *, jobs: int = 1, log: Log) -> list[str]:
    """Names of the days (YYYYMMDD) that were made so that `folder` holds what a run over the whole
    input would make.

    A day is made if it is missing, if a record, a station or a setting that it was made from
    changed, or if one of its files is gone; files of other days are not touched. Days whose input
    is not there any more keep their files.
    path : of the settings file
    jobs : processes that share the days
    Raises BusyError if another run holds the folder, else as `read_network` and `make` do.
    """
    path, begun = Path(path), time.monotonic()
    settings = read_settings(path)
    with hold(folder):
        log.info("update_begun", network=str(path), folder=str(folder))
        _write_outcome(folder, begun, CUT_OFF, 0)
        try:
            made = _update_held(path, settings, folder, jobs, log, begun)
        except FieldgenError as error:
            with suppress(OutputError):  # on a full disk the first error is the one to be told
                _write_outcome(folder, begun, f"failed: {error}", 0)
            raise
        _write_outcome(folder, begun, "done", len(made))
        return made


def _update_held(
    path: Path, settings: Settings, folder: Path, jobs: int, log: Log, begun: float
) -> list[str]:
    inputs = list_inputs(path, settings)
    standing = read_standing(folder, inputs)
    if standing is not None and _stands(folder, standing):
        log.info("nothing_new", days=len(standing.days))
        return []
    network = read_network(path)
    _log_reading(network, log)
    plan = _Plan.of(network, folder)
    for task, reason in plan.tasks:
        log.info("day_begun", day=task.piece.name, reason=reason)
    for day in plan.kept:
        log.warning("day_kept", day=day)
    reports = dict(plan.standing)
    for report in make_days(plan.writer, [task for task, _ in plan.tasks], jobs):
        reports[report.name] = report
        log.info(
            "day_made",
            day=report.name,
            made=report.steps_made,
            steps=report.steps,
            files=len(report.files),
        )
    finish_run(plan.writer, [reports[day] for day in sorted(reports)])
    files = ["run.json"]
    files += ["maps/latest.png"] * (settings.products.maps != "none")
    files += _write_page(settings, folder, log)
    write_inputs(folder, inputs, Standing(sorted(reports), files))
    log.info(
        "update_done",
        seconds=round(time.monotonic() - begun, 1),
        made=len(plan.tasks),
        unchanged=len(plan.standing),
    )
    return [task.piece.name for task, _ in plan.tasks]


def _stands(folder: Path, standing: Standing) -> bool:
    """Whether every file that the last update left is there."""
    records = [read_day_record(folder, day) for day in standing.days]
    return all((folder / name).is_file() for name in standing.files) and all(
        record is not None and record.lost_file(folder) is None for record in records
    )


def _write_page(settings: Settings, folder: Path, log: Log) -> list[str]:
    """Write the forecaster's page anew and return its name; that it cannot be made does not stop
    the run."""
    if settings.products.page == "none":
        return []
    from fieldgen.products.page import write_page

    try:
        write_page(folder, folder / PAGE, settings.products.page)
    except InputError as error:
        log.warning("page_not_made", reason=str(error))
        return []
    return [PAGE]


def _log_reading(network: Network, log: Log) -> None:
    report = network.report
    log.info(
        "input_read",
        files=len(report.files),
        records=sum(report.files.values()),
        rejected=report.rejections.total,
    )
    for file, reason in report.unusable_files.items():
        log.warning("file_unusable", file=file, reason=reason)
    for name, reason in report.left_out.items():
        log.warning("left_out", name=name, reason=reason)
    for text in report.warnings:
        log.warning("oddity", text=text)


@dataclass(frozen=True)
class _Plan:
    """What an update does.

    tasks : the days to be made, each with the reason
    standing : reports of the days whose files stand, by name
    kept : days that cannot be made again, because part of their own input is gone
    """

    writer: DayWriter
    tasks: list[tuple[Task, str]]
    standing: dict
    kept: list[str]

    @classmethod
    def of(cls, network: Network, folder: Path) -> _Plan:
        """Hold every day of the input against its record."""
        days = pieces_of(network, None, None)
        _forget_removed_days(folder, {day.name for day in days})
        limits = colour_limits(network, days[0].first, days[-1].last)
        writer = DayWriter(DayMaker(network), folder, limits, Fingerprints.of(network))
        plan = cls(writer, [], {}, [])
        for day in days:
            plan._add(day, day is days[-1])
        return plan

    def _add(self, day: Piece, is_last: bool) -> None:
        writer, settings = self.writer, self.writer.maker.network.settings
        record = read_day_record(writer.folder, day.name)
        task = Task(day, maps_of_day(settings.products.maps, is_last))
        if record is None:
            self.tasks.append((task, "it is new"))
            return
        prints = writer.fingerprints
        if lost := record.lost_file(writer.folder):
            self.tasks.append((task, f"{lost} is gone or was changed"))
        elif _has_lost_input(record, prints):
            self.kept.append(day.name)
            self.standing[day.name] = record.report
        elif reason := _what_changed(record, prints, writer.maker.rows(day)):
            self.tasks.append((task, reason))
        elif task.maps != "none" and record.maps != writer.maps_fingerprint:
            self.tasks.append((replace(task, only_maps=True), "its maps are not drawn like this"))
        else:
            self.standing[day.name] = record.report


def _forget_removed_days(folder: Path, days: set[str]) -> None:
    """Forget recorded days whose input and files are both gone: somebody has put them away."""
    for day in set(recorded_days(folder)) - days:
        record = read_day_record(folder, day)
        if record is None or record.lost_file(folder):
            forget_day(folder, day)


def _has_lost_input(record: DayRecord, prints: Fingerprints) -> bool:
    """Whether steps of the day that had delays have none any more: made again, it would lose them.

    After a change of the length of a step only the beginning of the input can tell.
    """
    if record.length != prints.length:
        return _begin(record.steps[0], record.length) < _begin(prints.stamps[0], prints.length)
    had = (stamp for stamp in record.steps if record.window[stamp] != NOTHING)
    return any(prints.by_stamp.get(stamp, NOTHING) == NOTHING for stamp in had)


def _begin(stamp: str, length: int) -> np.datetime64:
    """Begin of the step of so many minutes that ends at a stamp."""
    return np.datetime64(stamp, "m") - np.timedelta64(length, "m")


def _what_changed(record: DayRecord, prints: Fingerprints, rows: slice) -> str | None:
    """What a day was made from that is not the same now; steps whose delays were put away do not
    count."""
    if record.shared != prints.shared:
        return "the settings, the stations, the terrain or fieldgen changed"
    now = {stamp: one for stamp, one in prints.of_steps(rows).items() if one != NOTHING}
    changed = sorted(stamp for stamp, one in now.items() if record.window.get(stamp) != one)
    return f"{len(changed)} steps changed, from {changed[0]}" if changed else None


def _write_outcome(folder: Path, begun: float, outcome: str, made: int) -> None:
    content = {
        "ended": datetime.now(UTC).isoformat(timespec="seconds"),
        "seconds": round(time.monotonic() - begun, 1),
        "outcome": outcome,
        "days_made": made,
    }
    with whole_file(folder / STATE / OUTCOME) as temporary:
        temporary.write_text(json.dumps(content), encoding="utf-8")
