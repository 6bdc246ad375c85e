"""`fieldgen make` beside PyKrige looped hour by hour, in one run: ratios, stages and memory.

    python tests/benchmarks/bench_make.py [--hours 744] [--cells 300] [--stations 150]

`make` is timed as a whole process, from reading the input to the written files. PyKrige's time is
that of the kriging alone, of a few of the same hours, with its vectorised backend.
"""

from __future__ import annotations

import argparse
import os
import subprocess
import sys
import tempfile
import time
from pathlib import Path

import numpy as np

sys.path.insert(0, str(Path(__file__).parents[2]))

from tests.benchmarks.network_of_size import write_network

PYKRIGE_HOURS = 4


def main() -> None:
    """Run the benchmark and print its table."""
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    parser.add_argument("--hours", type=int, default=744)
    parser.add_argument("--stations", type=int, default=150)
    parser.add_argument("--cells", type=int, default=300)
    parser.add_argument("--gaps", type=float, default=0.08)
    options = parser.parse_args()
    with tempfile.TemporaryDirectory() as folder:
        run(Path(folder), options)


def run(folder: Path, options) -> None:
    """Both runs of `make` come first: a process inherits the peak of the one that starts it."""
    size = {"stations": options.stations, "cells": options.cells, "gap_share": options.gaps}
    network = write_network(folder, hours=options.hours, **size)
    short = folder / "short"
    short.mkdir()
    few = max(options.hours // 10, 24)
    _, less = time_make(write_network(short, hours=few, **size), short / "out")
    seconds, peak = time_make(network, folder / "out")
    print(f"make      {options.hours} hours in {seconds:.2f} s")
    print(f"memory    {peak:.0f} MB a process, {peak / less:.2f} times that for {few} hours")
    each = time_pykrige(network)
    print(f"PyKrige   {each:.3f} s an hour, kriging alone, {os.cpu_count()} BLAS threads")
    print(f"ratio     {each * options.hours / seconds:.1f} times the speed of PyKrige")
    write = time_writing(folder / "out")
    print(
        f"writing   {write:.2f} s for the same arrays; make takes {seconds / write:.2f} times that"
    )
    stages = time_stages(short / "network.toml", short / "out")
    total = sum(stages.values())
    print("stages    " + ", ".join(f"{name} {part / total:.0%}" for name, part in stages.items()))


def time_stages(path: Path, out: Path) -> dict[str, float]:
    """Seconds by stage of the days of a network in one process, without reading and start."""
    from threadpoolctl import threadpool_limits

    from fieldgen.day_maker import DayMaker
    from fieldgen.fields import make_fields_of_day
    from fieldgen.memory import keep_freed_memory
    from fieldgen.period import pieces
    from fieldgen.products.field_file import write_fields
    from fieldgen.readers.network import read_network

    network = read_network(path)
    maker = DayMaker(network)
    time_ = network.delays.time.values
    spent = dict.fromkeys(("retrieve and fit", "krige and lift", "pack and write"), 0.0)
    keep_freed_memory()
    with threadpool_limits(1):
        for piece in pieces(time_, time_[1] - time_[0], np.ones(len(time_), bool), None, None):
            clock = [time.perf_counter()]
            day = maker.analyse(piece)
            clock.append(time.perf_counter())
            fields = make_fields_of_day(network.settings, maker.cells, day)
            clock.append(time.perf_counter())
            write_fields(maker.packed_dataset(day.stations.time.values, fields), out / "again.nc")
            clock.append(time.perf_counter())
            for name, seconds in zip(spent, np.diff(clock), strict=True):
                spent[name] += float(seconds)
    return spent


def time_make(network: Path, out: Path):
    """Wall time [s] and peak memory [MB] of the largest process of a run."""
    code = (
        "import resource, sys\n"
        "from fieldgen.cli import main\n"
        "status = main(sys.argv[1:])\n"
        "kinds = resource.RUSAGE_SELF, resource.RUSAGE_CHILDREN\n"
        "print('PEAK', max(resource.getrusage(kind).ru_maxrss for kind in kinds))\n"
        "sys.exit(status)\n"
    )
    command = [sys.executable, "-c", code, "make", str(network), "--out", str(out)]
    start = time.perf_counter()
    done = subprocess.run(command, stdout=subprocess.PIPE, text=True, check=True)
    seconds = time.perf_counter() - start
    return seconds, int(done.stdout.split("PEAK")[1]) / 1024.0


def time_pykrige(path: Path) -> float:
    """Seconds an hour of PyKrige's kriging, `PYKRIGE_HOURS` hours with different stations."""
    from pykrige.ok import OrdinaryKriging

    from fieldgen.readers.network import read_network

    network = read_network(path)
    x, y = network.grid.locate(network.stations.longitude, network.stations.latitude)
    values = network.delays.ztd.values
    patterns = np.unique(np.isfinite(values), axis=0, return_index=True)[1]
    assert len(patterns) > len(values) // 2, "the gaps do not vary"
    parameters = {"psill": 6.0, "range": 150e3, "nugget": 0.5}
    start = time.perf_counter()
    for hour in patterns[:PYKRIGE_HOURS]:
        use = np.isfinite(values[hour])
        kriging = OrdinaryKriging(
            x[use], y[use], values[hour][use], "exponential", variogram_parameters=parameters
        )
        kriging.execute("grid", network.grid.x, network.grid.y, backend="vectorized")
    return (time.perf_counter() - start) / PYKRIGE_HOURS


def time_writing(out: Path) -> float:
    """Seconds that writing the arrays of a run alone takes, with the same number of processes."""
    from concurrent.futures import ProcessPoolExecutor

    files = sorted((out / "fields").glob("*.nc"))
    with ProcessPoolExecutor(os.cpu_count()) as pool:
        return sum(pool.map(rewrite, files)) / os.cpu_count()


def rewrite(path: Path) -> float:
    """Seconds to write a field file's packed arrays again, compressed as they are."""
    import netCDF4

    with netCDF4.Dataset(path) as dataset:
        dataset.set_auto_maskandscale(False)
        arrays = {
            name: dataset[name][:] for name in ("pwv", "pwv_sigma", "pwv_at_reference", "flag")
        }
        chunks = {name: dataset[name].chunking() for name in arrays}
    start = time.perf_counter()
    with netCDF4.Dataset(path.with_suffix(".copy"), "w") as copy:
        for name, size in zip("tyx", arrays["pwv"].shape, strict=True):
            copy.createDimension(name, size)
        for name, array in arrays.items():
            variable = copy.createVariable(
                name, array.dtype, ("t", "y", "x"), compression="zlib", complevel=1, shuffle=True,
                chunksizes=chunks[name],
            )  # fmt: skip
            variable.set_auto_maskandscale(False)
            variable[:] = array
    return time.perf_counter() - start


if __name__ == "__main__":
    main()
