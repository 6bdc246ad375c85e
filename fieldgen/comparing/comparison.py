"""Fields beside independent water vapour, value by value."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from fieldgen.comparing.field_reader import FieldFile, matching_steps, open_fields
from fieldgen.comparing.observations import Observation, Truth, read_truth
from fieldgen.errors import InputError
from fieldgen.readers.records import Rejections
from fieldgen.scoring.figures import Figures, figures

COMPARED = "compared"
OUTSIDE_GRID = "outside the grid"
OUTSIDE_PERIOD = "outside the period"
NO_FIELD = "no field there"

NEAR_TERRAIN = 100.0
"""Height [m] up to which an observation counts as at the cell's terrain."""

NOT_A_FAULT = ("sea",)
"""Meanings of the flag that say nothing of the quality."""


@dataclass(frozen=True)
class Comparison:
    """Observations (n,) and the field there.

    outcome (n,) : `COMPARED`, or why not; terrain (n,) [m] between the cells
    field, field_sigma (n,) [kg m-2] at the observation's height, NaN where not compared
    flag (n,) : bits of the cells used; flag_meanings : bits by name
    network, period : of the field files
    """

    network: str
    period: tuple[np.datetime64, np.datetime64]
    truth_file: str
    is_soundings: bool
    rejections: Rejections
    observations: list[Observation]
    outcome: np.ndarray
    terrain: np.ndarray
    field: np.ndarray
    field_sigma: np.ndarray
    flag: np.ndarray
    flag_meanings: dict[str, int]

    @property
    def compared(self):
        """Which observations (n,) are compared."""
        return self.outcome == COMPARED

    @property
    def error(self):
        """Field less observation (n,) [kg m-2]."""
        return self.field - np.array([one.value for one in self.observations])

    @property
    def sigma(self):
        """Standard deviation (n,) [kg m-2] of the error: field's and observation's."""
        return np.hypot(self.field_sigma, [one.sigma for one in self.observations])

    @property
    def counts(self) -> dict[str, int]:
        """Observations by outcome, without the empty ones."""
        outcomes = (COMPARED, OUTSIDE_GRID, OUTSIDE_PERIOD, NO_FIELD)
        return {name: count for name in outcomes if (count := int((self.outcome == name).sum()))}

    def groups(self) -> list[tuple[str, Figures]]:
        """Figures of all, of those near the terrain and not, and by flag; empty ones left out."""
        way = np.abs(self.terrain - [one.height for one in self.observations])
        faults = {key: bit for key, bit in self.flag_meanings.items() if key not in NOT_A_FAULT}
        of = {
            "all": self.compared,
            f"within {NEAR_TERRAIN:g} m of the cell's terrain": way <= NEAR_TERRAIN,
            "farther above or below": way > NEAR_TERRAIN,
            "not flagged": (self.flag & sum(faults.values())) == 0,
            **{f"flagged {key.replace('_', ' ')}": (self.flag & bit) > 0
               for key, bit in faults.items()},
        }  # fmt: skip
        error, sigma = self.error, self.sigma
        found = [(name, figures(error[rows], sigma[rows])) for name, rows in of.items()]
        return [(name, one) for name, one in found if one.count]


def compare(fields, table) -> Comparison:
    """Fields of files compared with the observations of a table.

    Raises InputError if the files or the table cannot be used, or nothing can be compared.
    """
    files = open_fields(fields)
    truth = read_truth(table)
    observations = truth.observations(_TerrainHeight(files[0]))
    comparison = _compare(files, truth, observations)
    if not comparison.compared.any():
        counts = ", ".join(f"{count} {name}" for name, count in comparison.counts.items())
        raise InputError(f"{table}: observations to compare are 0, expected at least 1 ({counts}).")
    return comparison


@dataclass(frozen=True)
class _TerrainHeight:
    """The terrain [m] of a file's grid at places (n,) [degrees], NaN outside the grid."""

    file: FieldFile

    def __call__(self, longitude, latitude):
        corners, inside = self.file.corners(longitude, latitude)
        return np.where(inside, self.file.terrain_at(corners), np.nan)


def _compare(files: list[FieldFile], truth: Truth, observations: list[Observation]) -> Comparison:
    first = files[0]
    time = np.array([one.time for one in observations]).astype("datetime64[s]")
    longitude, latitude, height = np.array([one[3:6] for one in observations]).T
    corners, inside = first.corners(longitude, latitude)
    field, sigma = np.full((2, len(time)), np.nan)
    flag = np.zeros(len(time), int)
    outcome = np.where(inside, OUTSIDE_PERIOD, OUTSIDE_GRID).astype(object)
    for file, step, rows in matching_steps(files, time):
        rows = rows[inside[rows]]
        found = file.sample(step, corners.of(rows), height[rows])
        field[rows], sigma[rows], flag[rows] = found
        outcome[rows] = np.where(np.isfinite(found.pwv), COMPARED, NO_FIELD)
    return Comparison(
        network=str(first.dataset.attrs.get("project", "")),
        period=(first.steps[0, 0], files[-1].steps[1, -1]),
        truth_file=truth.file,
        is_soundings=truth.is_soundings,
        rejections=truth.rejections,
        observations=observations,
        outcome=outcome,
        terrain=np.where(inside, first.terrain_at(corners), np.nan),
        field=field,
        field_sigma=sigma,
        flag=flag,
        flag_meanings=first.flag_meanings,
    )
