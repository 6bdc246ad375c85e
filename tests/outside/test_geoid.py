"""Geoid undulation against the EGM96 grid read by other means, and against published heights."""

import struct

import numpy as np
import pyproj
import pytest

from fieldgen.ground.geoid import undulation
from tests.open_data import require

PLACES = {
    "atlantic": (-25.0, 48.1), "india": (80.1, 3.1), "iceland": (-20.03, 65.02),
    "new_guinea": (147.3, -6.6), "oslo": (10.7817, 59.6603), "greenwich": (0.1, 51.4),
    "cape_horn": (-67.3, -55.9), "dateline": (-179.9, 16.3),
}  # fmt: skip
"""Longitude, latitude [degrees]; none on a node of the grid."""


@pytest.fixture(scope="module")
def grid():
    """EGM96 in the GTX format."""
    return require("geoid") / "egm96_15.gtx"


@pytest.mark.parametrize("place", PLACES.values(), ids=PLACES)
def test_undulation_agrees_with_the_file_read_by_hand(grid, place):
    """Second derivation: the GTX header and big-endian rows from the south, bilinear by hand."""
    content = grid.read_bytes()
    south, west, step, _, rows, columns = struct.unpack(">4d2i", content[:40])
    values = np.frombuffer(content, ">f4", offset=40).reshape(rows, columns)
    row, column = (place[1] - south) / step, (place[0] - west) / step
    i, j = int(row), int(column)
    v, u = row - i, column - j
    corners = values[i : i + 2, j : j + 2].astype(float)
    expected = np.array([1 - v, v]) @ corners @ np.array([1 - u, u])
    ours = undulation(grid, np.array([place[0]]), np.array([place[1]]))[0]
    assert ours == pytest.approx(expected, abs=1e-4)


@pytest.mark.parametrize("place", PLACES.values(), ids=PLACES)
def test_undulation_agrees_with_proj(grid, place):
    """Another library: PROJ's vgridshift, multiplier 1, adds the undulation of the same grid.

    1 mm: PROJ interpolates the same four nodes in single precision.
    """
    shift = pyproj.Transformer.from_pipeline(
        "+proj=pipeline +step +proj=unitconvert +xy_in=deg +xy_out=rad "
        f"+step +proj=vgridshift +grids={grid} +multiplier=1 "
        "+step +proj=unitconvert +xy_in=rad +xy_out=deg"
    )
    theirs = shift.transform(*place, 0.0)[2]
    ours = undulation(grid, np.array([place[0]]), np.array([place[1]]))[0]
    assert ours == pytest.approx(theirs, abs=1e-3)


def test_undulation_has_the_right_sign(grid):
    """Published number: +45 to +67 m in the north-east Atlantic, -100 m south of India.

    Common practice, no source; a sign the other way would be 2 times 60 m, or 14 hPa.
    """
    names = ("atlantic", "iceland", "india")
    longitude, latitude = np.array([PLACES[name] for name in names]).T
    atlantic, iceland, india = undulation(grid, longitude, latitude)
    assert 45 < atlantic < 70
    assert 60 < iceland < 70
    assert -107 < india < -95


def test_undulation_agrees_with_published_station_heights(grid):
    """Published number: both heights of four Nordic sites in a real COST-716 file.

    They agree to 0.05 m, so the producer's geoid must be much the same; 0.1 m is 0.01 hPa.
    """
    lines = (require("geodetic") / "cost").read_text().splitlines()
    places = [lines[i + 3] for i, line in enumerate(lines) if line.startswith("COST-716")]
    sites = np.array([place.split()[:4] for place in places], float)
    assert len(sites) == 4
    latitude, longitude, ellipsoidal, orthometric = sites.T
    ours = undulation(grid, longitude, latitude)
    print("differences [m]", np.round(ours - (ellipsoidal - orthometric), 3))
    np.testing.assert_allclose(ours, ellipsoidal - orthometric, atol=0.1)
