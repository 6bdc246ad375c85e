"""Reader of the tables of published numbers in tests/published."""

from __future__ import annotations

import csv
from pathlib import Path
from typing import NamedTuple

import pandas as pd

FOLDER = Path(__file__).parents[1] / "published"


class Figure(NamedTuple):
    """A published number; `tolerance` is None where the test must state its own."""

    value: float
    tolerance: float | None
    source: str


def figure(name: str) -> Figure:
    """The number of that name in figures.csv."""
    with (FOLDER / "figures.csv").open() as file:
        (row,) = (row for row in csv.DictReader(file) if row["figure"] == name)
    tolerance = float(row["tolerance"]) if row["tolerance"] else None
    return Figure(float(row["value"]), tolerance, row["source"])


def table(name: str) -> pd.DataFrame:
    """A whole table."""
    return pd.read_csv(FOLDER / f"{name}.csv")
