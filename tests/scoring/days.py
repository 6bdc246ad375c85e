"""An analysed day of a small invented network, with gaps and its analysis."""

from __future__ import annotations

import numpy as np

from fieldgen.analysis import Day
from fieldgen.chain import pieces_of
from fieldgen.day_maker import DayMaker
from fieldgen.readers.network import read_network
from tests.scene import write_scene


def noisy_scene(folder, *, stations: int = 14, hours: int = 8, gaps: float = 0.1, **scene):
    """A scene whose values vary by station and hour, some of them missing; its network.toml."""
    draw = np.random.default_rng(5)
    path = write_scene(folder, stations=stations, hours=hours, **scene)
    lines = (folder / "delays.csv").read_text().splitlines()
    kept = [lines[0]]
    for line in lines[1:]:
        cells = line.split(",")
        cells[2] = f"{float(cells[2]) + draw.normal(0.0, 0.6):.4f}"
        cells[3] = f"{draw.uniform(0.4, 0.9):.3f}"
        if draw.random() >= gaps:
            kept.append(",".join(cells))
    (folder / "delays.csv").write_text("\n".join(kept) + "\n")
    return path


def analysed_day(path) -> Day:
    """The first day of a network."""
    network = read_network(path)
    return DayMaker(network).analyse(pieces_of(network, None, None)[0])
