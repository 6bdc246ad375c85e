"""Positions against the hull."""

import numpy as np
import pytest

from fieldgen.scoring.hull import local_plane, position, positions

SQUARE = np.array([[0.0, 0.0], [100.0, 0.0], [100.0, 100.0], [0.0, 100.0]])


@pytest.mark.parametrize(
    ("place", "expected"),
    [((50, 50), "inside"), ((50, 9), "edge"), ((50, 11), "inside"), ((50, -9), "edge"),
     ((50, -11), "outside"), ((108, 108), "outside"), ((106, 106), "edge"), ((0, 0), "edge")],
)  # fmt: skip
def test_position_in_a_square(place, expected):
    """A second derivation: distances on paper, at the corner along the diagonal."""
    assert position(SQUARE, np.array(place, float)) == expected


@pytest.mark.parametrize("others", [SQUARE[:2], SQUARE[:0], np.outer([0, 1, 2, 3], [1.0, 1.0])])
def test_position_without_a_hull_is_outside(others):
    """A limit: two places, none, and four on a line."""
    assert position(others, np.array([0.5, 0.5])) == "outside"


def test_positions_leave_the_block_and_the_silent_out():
    """A second derivation: a corner far out is outside the hull of the rest; the middle falls
    outside when the corners it leans on are left out with it or are silent."""
    plane = np.vstack([SQUARE, [[60.0, 60.0], [-50.0, -50.0]]])
    alone = np.arange(6)[:, None]
    everyone = np.ones(6, bool)
    assert positions(plane, everyone, alone)[[4, 5]].tolist() == ["inside", "outside"]
    blocks = np.array([[4, 2]])
    assert positions(plane, everyone, blocks).tolist() == ["outside"]
    silent = np.array([True, True, False, True, True, True])
    assert positions(plane, silent, alone)[4] == "outside"


def test_local_plane_keeps_distances():
    """Another library's answer: geodesic distances of pyproj, to 0.1 % within a region."""
    import pyproj

    longitude, latitude = np.array([-28.0, -27.0, -28.5]), np.array([47.5, 48.2, 48.0])
    plane = local_plane(longitude, latitude)
    geod = pyproj.Geod(ellps="WGS84")
    for one, other in ((0, 1), (1, 2), (0, 2)):
        _, _, metres = geod.inv(longitude[one], latitude[one], longitude[other], latitude[other])
        assert np.linalg.norm(plane[one] - plane[other]) == pytest.approx(metres / 1e3, rel=1e-3)
