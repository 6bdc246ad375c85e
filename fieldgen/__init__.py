"""Hourly fields of water vapour from the zenith delays of a regional GNSS network."""

from __future__ import annotations

__all__ = ["FieldgenError", "make_fields", "read_network"]

from fieldgen.errors import FieldgenError


def __getattr__(name: str):
    """Load the chain when it is first asked for: `fieldgen --help` must not wait for it."""
    if name == "make_fields":
        from fieldgen.chain import make_fields

        return make_fields
    if name == "read_network":
        from fieldgen.readers.network import read_network

        return read_network
    raise AttributeError(f"module 'fieldgen' has no attribute {name!r}")
