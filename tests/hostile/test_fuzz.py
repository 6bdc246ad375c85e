"""Spoilt files: what is read holds what the docstrings promise, or the error is a clear one.

``tests/hostile/fuzz.py`` does the same for as long as one likes.
"""

import pytest
from hypothesis import HealthCheck, given, settings

from tests.hostile.mutations import mutations
from tests.hostile.targets import TARGETS, try_file


@pytest.mark.parametrize("target", TARGETS, ids=[target.name for target in TARGETS])
def test_valid_files_are_read(tmp_path, target):
    """Negative control: what is spoilt can be used before it is."""
    path = tmp_path / "file"
    path.write_bytes(target.seed)
    assert try_file(target, path)


@pytest.mark.parametrize("target", TARGETS, ids=[target.name for target in TARGETS])
def test_spoilt_files_are_read_or_refused(tmp_path, target):
    """A limit: any file at all gives plausible values or a FieldgenError, in bounded time."""
    path = tmp_path / "file"

    @settings(
        max_examples=30 if target.cost == 1 else 6,
        deadline=None,
        derandomize=True,
        database=None,
        suppress_health_check=[HealthCheck.too_slow],
    )
    @given(mutations)
    def run(steps):
        path.write_bytes(target.spoil(target.seed, steps))
        try_file(target, path)

    run()
