"""A week of operation in fast motion: files arrive late, twice, wrong and broken, and every few
hours an update runs. As a script, with an update every hour:

    python tests/week.py
"""

from __future__ import annotations

import os
import resource
import shutil
import sys
import tempfile
import time
from dataclasses import dataclass, field
from io import StringIO
from pathlib import Path

import numpy as np

from fieldgen.chain import make
from fieldgen.log import Log
from fieldgen.readers.network import read_network
from fieldgen.update import update
from tests.scene import SETTINGS, START, write_scene

HOURS = 168
LATENESS = (0, 0, 0, 0, 1, 2, 5, 30)
"""Hours that files come late by, in turn."""

SCENE = SETTINGS.replace('"delays.csv"', '"delays/*.csv"') + (
    '[heights]\nreference_height = 600\n[kriging]\ncovariance = "exponential"\n'
)


@dataclass
class Week:
    """What the updates of a week did and needed.

    days_made : by each update; memory [MB] and open_files after each
    """

    days_made: list[int] = field(default_factory=list)
    memory: list[float] = field(default_factory=list)
    open_files: list[int] = field(default_factory=list)


def split_by_step(folder: Path, steps: int) -> None:
    """delays.csv as files of so many hours, delays/000.csv and so on, in order of time."""
    header, *lines = (folder / "delays.csv").read_text().splitlines()
    (folder / "delays.csv").unlink()
    (folder / "delays").mkdir()
    texts: dict[int, list[str]] = {}
    for line in lines:
        hour = (np.datetime64(line.split(",")[1][:-1], "s") - START) // np.timedelta64(3600, "s")
        texts.setdefault(int(hour) // steps, [header]).append(line)
    for number, text in texts.items():
        (folder / "delays" / f"{number:03d}.csv").write_text("\n".join(text) + "\n")


def simulate(folder: Path, every: int) -> Week:
    """A week with an update every so many hours into ``updated``, then one run over the complete
    input into ``whole``."""
    draw = np.random.default_rng(3)
    path = write_scene(
        folder,
        stations=8,
        hours=HOURS,
        settings=SCENE,
        water_vapour=lambda h, hour: (
            (20.0 + 5.0 * np.sin(hour / 9.0) + draw.normal(0.0, 0.5)) * np.exp(-h / 1900.0)
        ),
    )
    split_by_step(folder, 1)
    (folder / "delays").rename(folder / "coming")
    (folder / "delays").mkdir()
    week = Week()
    for hour in range(HOURS + max(LATENESS)):
        _arrive(folder, hour)
        if hour % every == every - 1:
            log = Log(StringIO())
            week.days_made.append(len(update(path, folder / "updated", log=log)))
            week.memory.append(_memory())
            week.open_files.append(len(os.listdir("/proc/self/fd")))
    update(path, folder / "updated", log=Log(StringIO()))
    make(read_network(path), folder / "whole")
    return week


def _arrive(folder: Path, hour: int) -> None:
    """What comes in at an hour."""
    for number in range(HOURS):
        name = f"{number:03d}.csv"
        arrival = number + LATENESS[number % len(LATENESS)]
        source, target = folder / "coming" / name, folder / "delays" / name
        if hour == arrival:
            text = source.read_text()
            if number % 10 == 3:  # a wrong value, corrected six hours later
                text = text.replace(",0.7,", ",0.9,")
            if number % 10 == 5:  # cut short in the middle of a line, completed an hour later
                text = text[: len(text) * 2 // 3]
            target.write_text(text)
            if number % 12 == 7:  # the same once more under another name
                shutil.copy(target, folder / "delays" / f"{number:03d}_again.csv")
            if number % 12 == 9:  # no delays at all
                (folder / "delays" / f"{number:03d}_noise.csv").write_bytes(bytes(range(256)) * 9)
        if (number % 10 == 3 and hour == arrival + 6) or (number % 10 == 5 and hour == arrival + 1):
            shutil.copyfile(source, target)
        if number % 12 == 7 and hour == arrival + 8:
            shutil.copyfile(source, folder / "delays" / f"{number:03d}_again.csv")


def _memory() -> float:
    """Most memory of this process so far [MB]."""
    return resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1024.0


def _main() -> int:
    begun = time.monotonic()
    with tempfile.TemporaryDirectory() as folder:
        week = simulate(Path(folder), every=1)
    seconds = time.monotonic() - begun
    quarter = len(week.memory) // 4
    print(f"{len(week.days_made)} updates, {sum(week.days_made)} days made, {seconds:.0f} s")
    print(f"memory {week.memory[quarter]:.0f} MB at a quarter, {week.memory[-1]:.0f} MB at the end")
    print(f"open files {week.open_files[quarter]} at a quarter, {week.open_files[-1]} at the end")
    return 0


if __name__ == "__main__":
    sys.exit(_main())
