"""The products of a folder as values that can be compared, times of creation aside."""

from __future__ import annotations

import json
from pathlib import Path

import xarray as xr

CREATION = ("date_created", "history")
"""Attributes that tell when a file was made."""


def products(folder: Path) -> dict:
    """Content of every product below a folder, by name."""
    found = {}
    for path in sorted(path for path in folder.rglob("*") if path.is_file()):
        if ".fieldgen" in path.parts:
            continue
        name = str(path.relative_to(folder))
        if path.suffix == ".nc":
            dataset = xr.load_dataset(path, decode_cf=False)
            dataset.attrs = {k: v for k, v in dataset.attrs.items() if k not in CREATION}
            found[name] = dataset
        elif name == "run.json":
            content = json.loads(path.read_text())
            found[name] = {k: v for k, v in content.items() if k != "command"}
        else:
            found[name] = path.read_bytes()
    return found


def assert_same_products(folder: Path, other: Path) -> None:
    """All products, values and attributes."""
    one, two = products(folder), products(other)
    assert list(one) == list(two)
    for name, content in one.items():
        if isinstance(content, xr.Dataset):
            xr.testing.assert_identical(content, two[name])
        else:
            assert content == two[name], name
