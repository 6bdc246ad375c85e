"""Arrays packed for the browser."""

import base64
import zlib

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from hypothesis.extra import numpy as arrays

from fieldgen.products.page.packing import pack_array, pack_range

SHAPES = arrays.array_shapes(min_dims=1, max_dims=3, min_side=0, max_side=7)


def unpack(packed):
    """A second derivation of what unpack.js does: running sums modulo 2^16."""
    planes = np.frombuffer(zlib.decompress(base64.b64decode(packed["data"])), np.uint8)
    low, high = planes.reshape(2, -1).astype(np.uint16)
    counts = (low | high << 8).reshape(packed["shape"])
    for axis in range(counts.ndim):
        counts = np.cumsum(counts, axis, dtype=np.uint16)
    counts = counts.view(np.int16)
    return np.where(counts == -32768, np.nan, packed["offset"] + packed["step"] * counts)


@given(arrays.arrays(np.int16, SHAPES, elements=st.integers(-32767, 32767)))
def test_pack_array_keeps_every_count(counts):
    """Round trip, over all 16-bit values, so that differences overflow too."""
    packed = pack_array(counts * 0.01, 0.01)
    np.testing.assert_array_equal(unpack(packed), 0.01 * counts)


def test_pack_array_keeps_missing_values_missing():
    """Round trip."""
    values = np.array([[[1.0, np.nan, 3.0], [np.nan, np.nan, 0.25]]])
    np.testing.assert_array_equal(unpack(pack_array(values, 0.25)), values)


def test_pack_array_stays_within_half_a_step():
    """Limit: what rounding can cost."""
    values = np.random.default_rng(1).uniform(-300, 300, (5, 6, 7))
    assert np.abs(unpack(pack_array(values, 0.01)) - values).max() <= 0.005 + 1e-9


def test_pack_array_refuses_values_beyond_16_bits():
    """Negative control: nothing is cut off unseen."""
    with pytest.raises(ValueError, match="do not fit"):
        pack_array([327.68], 0.01)


@pytest.mark.parametrize("low, high", [(-179.9, 12.0), (47.0, 47.0)])
def test_pack_range_spreads_the_bits_over_the_range(low, high):
    """Limit: a 65 000th of the range, half of it by rounding."""
    values = np.linspace(low, high, 1001).reshape(7, 11, 13)
    error = np.abs(unpack(pack_range(values)) - values).max()
    assert error <= (high - low) / 130000 + 1e-9
