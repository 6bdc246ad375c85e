"""Faults planted in networks, and what the screening makes of them.

    python tests/benchmarks/bench_screening.py [--kind NAME] [--seeds N]

Prints one row for every kind and size of fault: values it spoilt grossly (by 3 kg m-2 and more),
and the share of them that is not used as it is; values it spoilt less (by 0.5 to 3 kg m-2), and the
same; and the share of the good values that is lost. A value of a bad barometer also counts as
found when another pressure brings it within 1.5 kg m-2 of what it would have been.
"""

from __future__ import annotations

import argparse
import sys
import time
from datetime import timedelta
from pathlib import Path
from typing import NamedTuple
from unittest.mock import patch

import numpy as np
from threadpoolctl import threadpool_limits

ROOT = Path(__file__).parents[2]
sys.path.insert(0, str(ROOT))

from fieldgen import read_network  # noqa: E402
from fieldgen.day_maker import DayMaker  # noqa: E402
from fieldgen.period import Piece  # noqa: E402
from fieldgen.readers.network import Network  # noqa: E402
from fieldgen.retrieval import retrieve_water_vapour  # noqa: E402
from fieldgen.station.heights import reduction_factor  # noqa: E402
from tests.benchmarks import faults  # noqa: E402
from tests.benchmarks.planted_network import Recipe, make_network  # noqa: E402

GROSS = 3.0
"""An error [kg m-2] that is called gross; a station's value promises about 0.7."""

SMALL = 0.5
"""An error [kg m-2] that is not worth speaking of."""

MENDED = 1.5
"""What may be left [kg m-2] of an error that another barometer has mended."""

RECIPES = {
    "15": Recipe(15, 100.0),
    "40": Recipe(40, 180.0),
    "120": Recipe(120, 300.0),
}
COLD = {"cold": Recipe(40, 180.0, 2.0, 0.3, 258.0)}

KINDS = {
    "none": ("", faults.spikes, (0.0,)),
    "spike of an hour": ("kg m-2", faults.spikes, (3.0, 4.0, 6.0, 10.0)),
    "jump of four hours": ("kg m-2", faults.lasting_jumps, (3.0, 4.0, 6.0, 10.0)),
    "level shift": ("kg m-2", faults.level_shift, (1.5, 3.0, 4.0, 8.0)),
    "delay times": ("", faults.wrong_value, (0.3048, 0.95, 1.05, 10.0)),
    "noisy station, SD": ("kg m-2", faults.noisy_station, (3.0, 5.0, 8.0)),
    "formal errors times": ("", faults.formal_errors, (3.0, 5.0)),
    "station listed too high": ("m", faults.station_height, (-100.0, -30.0, 30.0, 100.0)),
    "barometer listed too high": ("m", faults.barometer_height, (-100.0, -30.0, 30.0, 100.0)),
    "barometer's offset": ("hPa", faults.barometer_offset, (1.5, 3.0, 9.0, 20.0)),
    "frozen barometer": ("h", faults.frozen_barometer, (16.0, 40.0)),
    "frozen delay": ("h", faults.frozen_delay, (8.0, 20.0)),
    "places mixed up": ("m apart", faults.swapped_rows, (50.0, 300.0)),
    "two neighbours": ("kg m-2", faults.two_neighbours, (4.0, 6.0, 10.0)),
    "supersaturated": ("kg m-2", faults.supersaturated, (5.0, 10.0)),
}
"""Kinds of faults: the unit of their size, what plants them, the sizes."""

PIECE = Piece("day", faults.DAY.start, faults.DAY.stop, slice(0, 24))

SCREENING_OFF = {
    "pressure_difference": 1e6, "formal_error": 1e6, "formal_error_ratio": 1e6, "jump": 1e6,
    "frozen": timedelta(days=100),
}  # fmt: skip


class Counts(NamedTuple):
    """Gross, small and good values, and of each those found or lost."""

    gross: int = 0
    gross_found: int = 0
    small: int = 0
    small_found: int = 0
    good: int = 0
    good_lost: int = 0

    def plus(self, other: Counts) -> Counts:
        """The sum."""
        return Counts(*(a + b for a, b in zip(self, other, strict=True)))


def at_sea_level(stations):
    """Water vapour (t, n) [kg m-2] reduced with the scale height of 2 km."""
    factor = reduction_factor(stations.orthometric_height.values, 0.0, 2000.0)
    return stations.pwv.values / factor


def unscreened(network: Network):
    """Water vapour of the day at sea level with every barometer believed."""
    table = network.settings.screening.model_copy(update=SCREENING_OFF)
    settings = network.settings.model_copy(update={"screening": table})
    believing = faults.copy_of(network)
    believing.settings = settings
    with patch("fieldgen.station.barometers.COSTLY", 1e9):
        return at_sea_level(retrieve_water_vapour(believing))[faults.DAY]


def examine(network: Network, truth, plant, size: float, draw) -> Counts:
    """What the screening makes of one planted network."""
    spoilt, touched = plant(faults.copy_of(network), size, draw)
    touched = touched[faults.DAY]
    cost = np.abs(unscreened(spoilt) - truth)
    with threadpool_limits(1):
        found = DayMaker(spoilt).analyse(PIECE).stations
    left = np.abs(at_sea_level(found) - truth)
    flagged = found.flag.values != 0
    measured = np.isfinite(truth)
    dealt_with = flagged | (left < np.minimum(MENDED, cost / 2.0))
    gross = measured & (cost >= GROSS)
    small = measured & (cost >= SMALL) & ~gross
    good = measured & (cost < SMALL) & ~touched
    return Counts(
        gross.sum(), (gross & dealt_with).sum(), small.sum(), (small & dealt_with).sum(),
        good.sum(), (good & flagged).sum(),
    )  # fmt: skip


def demo() -> Network:
    """The demo network without the station whose height is wrong."""
    network = read_network(ROOT / "demo_network" / "network.toml")
    network.stations = network.stations.drop_sel(station="RUSQ00XQV")
    network.delays = network.delays.drop_sel(station="RUSQ00XQV")
    return network


def networks(kind: str, seeds: int):
    """Name, network and a generator of numbers of every network a kind is planted in."""
    recipes = COLD if kind == "supersaturated" else RECIPES
    for name, recipe in recipes.items():
        for seed in range(seeds):
            yield name, make_network(recipe, seed), np.random.default_rng([seed, recipe.stations])
    if kind != "supersaturated":
        network = demo()
        for seed in range(seeds):
            yield "demo", network, np.random.default_rng(seed)


def share(part: int, whole: int) -> str:
    """Per cent, or a dash."""
    return f"{100.0 * part / whole:.1f} %" if whole else "-"


def row(label: str, counts: Counts) -> str:
    """A row of the table."""
    return (
        f"| {label} | {counts.gross} | {share(counts.gross_found, counts.gross)} | {counts.small} "
        f"| {share(counts.small_found, counts.small)} "
        f"| {100.0 * counts.good_lost / counts.good:.2f} % |"
    )


def main() -> None:
    """Print the table."""
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    parser.add_argument("--kind", action="append", choices=list(KINDS))
    parser.add_argument("--seeds", type=int, default=4)
    arguments = parser.parse_args()
    started = time.time()
    print("| fault | gross values | found | smaller | found | good lost |")
    print("|---|---|---|---|---|---|")
    total, by_network = Counts(), {}
    for kind in arguments.kind or KINDS:
        unit, plant, sizes = KINDS[kind]
        by_size = dict.fromkeys(sizes, Counts())
        for name, network, draw in networks(kind, arguments.seeds):
            truth = unscreened(network)
            for size in sizes:
                counts = examine(network, truth, plant, size, draw)
                by_size[size] = by_size[size].plus(counts)
                by_network[name] = by_network.get(name, Counts()).plus(counts)
        for size, counts in by_size.items():
            print(row(f"{kind} {size:g} {unit}".strip(), counts), flush=True)
            total = total.plus(counts)
    for name, counts in by_network.items():
        print(row(f"all, {name}", counts))
    print(row("all", total))
    print(f"{time.time() - started:.0f} s", file=sys.stderr)


if __name__ == "__main__":
    main()
