"""The story of a run: read, retrieve, then for every day analyse, make its fields, write them."""

from __future__ import annotations

from collections.abc import Callable, Iterator
from pathlib import Path

import numpy as np
import xarray as xr

from fieldgen.day_maker import DayMaker, DayWriter, Task, colour_limits
from fieldgen.fields import join_fields
from fieldgen.period import Piece, pieces
from fieldgen.processes import map_days
from fieldgen.products.field_file import unpack_fields
from fieldgen.products.lines import copy_lines
from fieldgen.readers.network import Network
from fieldgen.report import DayReport, RunReport
from fieldgen.upkeep.fingerprint import Fingerprints
from fieldgen.upkeep.inputs import forget_inputs
from fieldgen.upkeep.lock import hold


def make_fields(network: Network, start: str | None = None, end: str | None = None) -> xr.Dataset:
    """Fields of a network's hours, the same Dataset as the field files hold.

    start, end : ISO 8601 UTC, by default all hours of the input; an hour comes out the same
        whatever the period. Dimensions time, y, x; see
    `fieldgen.products.field_file.packed_dataset`. Hours with too few stations are NaN and flagged.
    Raises InputError if the period is reversed or holds no step of the input.
    """
    maker = DayMaker(network)
    times, made = [], []
    for piece in pieces_of(network, start, end):
        day, fields = maker.compute(piece)
        times.append(day.stations.time.values[piece.asked])
        made.append(fields.steps(piece.asked))
    return unpack_fields(maker.packed_dataset(np.concatenate(times), join_fields(made)))


def make(
    network: Network,
    folder: Path,
    *,
    start: str | None = None,
    end: str | None = None,
    jobs: int = 1,
    progress: Callable[[str, int], None] = lambda piece, count: None,
) -> RunReport:
    """Field, station and map files of a period, written below `folder`, with run.json.

    Every day that the period touches is made whole; maps are drawn of the period alone.
    jobs : processes that share the days; results do not depend on it
    progress : called with the name of each day when it is done, and the number of days
    Raises InputError if the period is empty, OutputError if the folder cannot be written,
    BusyError if another run is at work in it.
    """
    days = pieces_of(network, start, end)
    maps = network.settings.products.maps
    newest = pieces_of(network, None, None)[-1].name
    tasks = [Task(day, maps_of_day(maps, day.name == newest)) for day in days]
    with hold(folder):
        writer = DayWriter(
            DayMaker(network),
            folder,
            colour_limits(network, days[0].first, days[-1].last),
            Fingerprints.of(network),
        )
        reports = []
        for report in make_days(writer, tasks, jobs):
            reports.append(report)
            progress(report.name, len(days))
        return finish_run(writer, reports)


def make_days(writer: DayWriter, tasks: list[Task], jobs: int) -> Iterator[DayReport]:
    """Reports of days as they are made, in their order, by up to `jobs` processes.

    The folder must be held by the caller.
    """
    forget_inputs(writer.folder)
    yield from map_days(writer, tasks, jobs=jobs)


def finish_run(writer: DayWriter, reports: list[DayReport]) -> RunReport:
    """What stands when all days are made: the newest map, the lines drawn, run.json."""
    network, folder = writer.maker.network, writer.folder
    if network.settings.products.maps == "all":
        from fieldgen.products.maps import copy_newest

        copy_newest(folder / "maps")
    copy_lines(network.settings, folder / "lines")
    run = RunReport.of(network, folder, reports, writer.limits)
    run.write(folder / "run.json")
    return run


def maps_of_day(maps: str, is_last: bool) -> str:
    """Which maps a day draws: the latest one belongs to the last day of the input."""
    return "none" if maps == "latest" and not is_last else maps


def pieces_of(network: Network, start: str | None, end: str | None) -> list[Piece]:
    """The days of a network that a period touches; raises InputError as `pieces` does."""
    step = np.timedelta64(int(network.settings.network.time_step.total_seconds()), "s")
    return pieces(network.delays.time.values, step, network.has_delay, start, end)
