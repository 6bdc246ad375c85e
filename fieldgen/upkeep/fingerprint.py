"""Fingerprints of what goes into a day: its hours' records, and what all days share.

A day comes out the same as long as they stay the same.
"""

from __future__ import annotations

from dataclasses import dataclass, fields
from functools import cached_property
from hashlib import blake2b

import numpy as np
import xarray as xr

from fieldgen.products.metadata import fieldgen_version
from fieldgen.readers.network import Network
from fieldgen.settings import Settings

_LENGTH = 8
"""Bytes of a fingerprint: two of a million hours agree by chance once in ten million."""

NOTHING = ""
"""Fingerprint of a step without delays."""


@dataclass(frozen=True)
class Fingerprints:
    """Fingerprints of a network's input.

    shared : of the settings, the stations' places, the grid, the terrain and fieldgen's version
    length : of a step [min]
    stamps : (t,) ends of the steps, UTC, such as 2026-09-08T05:00
    steps : (t,) of the records of each step, NOTHING where no station has a delay
    """

    shared: str
    length: int
    stamps: list[str]
    steps: list[str]

    @classmethod
    def of(cls, network: Network) -> Fingerprints:
        """Fingerprints of all that a network's days are made from."""
        shared, by_step = _sort_content(network)
        stamps = np.datetime_as_string(network.delays.time.values, unit="m").tolist()
        steps = [
            _digest(step) if has_delay else NOTHING
            for step, has_delay in zip(by_step, network.has_delay, strict=True)
        ]
        length = int(network.settings.network.time_step.total_seconds() // 60)
        return cls(_digest(shared), length, stamps, steps)

    @cached_property
    def by_stamp(self) -> dict[str, str]:
        """Fingerprints of all steps by their stamp."""
        return dict(zip(self.stamps, self.steps, strict=True))

    def of_steps(self, rows: slice) -> dict[str, str]:
        """Fingerprints of some steps by their stamp."""
        return dict(zip(self.stamps[rows], self.steps[rows], strict=True))


def fingerprint_maps(settings: Settings, limits: tuple[float, float]) -> str:
    """Fingerprint of what the maps need beside the fields: colour limits and lines."""
    products = settings.products
    lines = [settings.path(path).read_bytes() for path in (products.coast, products.rivers) if path]
    return _digest([f"{products.maps} {limits}".encode(), *lines])


def _sort_content(network: Network) -> tuple[list[bytes], list[list[bytes]]]:
    """Content that all days share, and that of each step; every variable along time is of steps."""
    settings = network.settings.model_dump_json(exclude={"folder", "stations", "products"})
    shared = [
        fieldgen_version().encode(),
        settings.encode(),
        network.grid.identity,
        network.terrain.points.tobytes(),
        network.terrain.is_sea.tobytes(),
    ]
    by_step: list[list[bytes]] = [[] for _ in range(network.delays.sizes["time"])]
    datasets = (getattr(network, field.name) for field in fields(network))
    for dataset in (one for one in datasets if isinstance(one, xr.Dataset)):
        for name in sorted(map(str, dataset.variables)):
            variable = dataset[name].variable
            if "time" not in variable.dims:
                shared += [name.encode(), _bytes(variable.values)]
            elif name != "time":
                values = variable.transpose("time", ...).values
                for content, row in zip(by_step, values, strict=True):
                    content.append(row.tobytes())
    return shared, by_step


def _bytes(values) -> bytes:
    """Content of an array; text in arrays of objects as text."""
    values = np.asarray(values)
    return repr(values.tolist()).encode() if values.dtype == object else values.tobytes()


def _digest(parts: list[bytes]) -> str:
    digest = blake2b(digest_size=_LENGTH)
    for part in parts:
        digest.update(len(part).to_bytes(8, "big"))
        digest.update(part)
    return digest.hexdigest()
