"""Reading a year of SINEX_TRO: seconds per million lines and peak memory, daily or hourly files.

    python tests/benchmarks/bench_reading.py [--days 365] [--stations 50] [--files-a-day 1]

`read_network` is timed as a whole, in a process of its own, less the time that it takes for a day;
seconds are those of the processor, so that other work on the machine does not count.
"""

from __future__ import annotations

import argparse
import subprocess
import sys
import tempfile
from pathlib import Path

import numpy as np

sys.path.insert(0, str(Path(__file__).parents[2]))

from tests.benchmarks.network_of_size import HEADER, SETTINGS, write_stations, write_terrain

CELLS = 60
START = np.datetime64("2026-01-01T00:00:00", "s")
STEP_S = 300

READ = """
import resource, sys, time
from fieldgen.readers.network import read_network
start = time.process_time()
network = read_network(sys.argv[1])
seconds = time.process_time() - start
peak = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1024
lines = sum(network.report.files.values())
assert not network.report.rejections.total, network.report.rejections.examples
print(lines, len(network.report.files), seconds, peak)
"""


def main() -> None:
    """Run the benchmark and print its figures."""
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    parser.add_argument("--days", type=int, default=365)
    parser.add_argument("--stations", type=int, default=50)
    parser.add_argument("--files-a-day", type=int, default=1)
    options = parser.parse_args()
    with tempfile.TemporaryDirectory() as folder:
        few, many = Path(folder, "day"), Path(folder, "all")
        small = time_reading(write_files(few, 1, options.stations, options.files_a_day))
        whole = time_reading(write_files(many, options.days, options.stations, options.files_a_day))
    lines, seconds = whole[0] - small[0], whole[2] - small[2]
    print(f"files     {whole[1]:.0f}, {whole[0] / 1e6:.2f} million lines")
    print(f"reading   {whole[2]:.1f} s, {seconds / lines * 1e6:.2f} s for a million lines")
    print(f"memory    {whole[3]:.0f} MB, {whole[3] - small[3]:.0f} MB more than for a day")


def time_reading(network: Path) -> list[float]:
    """Lines, files, seconds and peak memory [MB] of reading a network."""
    command = [sys.executable, "-c", READ, str(network)]
    done = subprocess.run(command, stdout=subprocess.PIPE, text=True, check=True)
    return [float(word) for word in done.stdout.split()]


def write_files(folder: Path, days: int, stations: int, files_a_day: int) -> Path:
    """Files of a network without weather; returns the path of its network.toml."""
    folder.mkdir()
    draw = np.random.default_rng(1)
    side = CELLS * 1000
    settings = SETTINGS.format(east=300000 + side, north=5100000 + side)
    path = folder / "network.toml"
    path.write_text(settings.replace('weather = ["weather.csv"]', ""))
    write_terrain(folder, CELLS, draw)
    x, y = draw.uniform(0.02, 0.98, (2, stations)) * side
    write_stations(folder, x, y, np.full(stations, 50.0))
    count = 86_400 // STEP_S // files_a_day
    for index in range(days * files_a_day):
        first = START + np.timedelta64(index * count * STEP_S, "s")
        (folder / f"part{index:05d}.tro").write_text(_file(first, count, stations, draw))
    return path


def _file(first, count: int, stations: int, draw) -> str:
    """A file of `count` epochs."""
    epochs = [_epoch(first + np.timedelta64(step * STEP_S, "s")) for step in range(1, count + 1)]
    drift = 2400.0 + np.cumsum(draw.normal(0.0, 0.3, (stations, count)), axis=1)
    lines = [
        f" S{station:03d}      {epoch} {value:6.1f}   2.5"
        for station in range(stations)
        for epoch, value in zip(epochs, drift[station], strict=True)
    ]
    head = HEADER.format(day=_epoch(first)[:8])
    return head + "\n".join(lines) + "\n-TROP/SOLUTION\n%=ENDTRO\n"


def _epoch(time) -> str:
    """YYYY:DDD:SSSSS."""
    year, day = time.astype("M8[Y]"), time.astype("M8[D]")
    number = (day - year.astype("M8[D]")).astype(int) + 1
    return f"{year}:{number:03d}:{(time - day).astype(int):05d}"


if __name__ == "__main__":
    main()
