"""The field at any place, height and time, from files made here by hand."""

import numpy as np
import pyproj
import pytest
import xarray as xr

from fieldgen.comparing.field_reader import (
    Corners,
    matching_steps,
    open_fields,
)
from fieldgen.errors import InputError

TO_DEGREES = pyproj.Transformer.from_crs("EPSG:32626", "EPSG:4326", always_xy=True)
X, Y = 350_000.0 + 2000.0 * np.arange(4), 5_250_000.0 + 2000.0 * np.arange(3)
TERRAIN = np.array([[0.0, 200, 400, 600], [100, 300, 500, 700], [200, 400, 600, 800]])


def write_fields(path, start="2026-03-01T00:00", steps=2, scale=2000.0, **changes):
    """A file of fields: 20 kg m-2 at sea level with one scale height, another 1 kg each step."""
    time = np.datetime64(start, "s") + np.timedelta64(3600, "s") * np.arange(1, steps + 1)
    pwv = (20.0 + np.arange(steps))[:, None, None] * np.exp(-TERRAIN / scale)
    space = ("time", "y", "x")
    variables = {
        "pwv": (space, pwv),
        "pwv_sigma": (space, np.full(pwv.shape, 0.5)),
        "flag": (space, np.zeros(pwv.shape, np.int8),
                 {"flag_masks": np.array([1, 16], np.int8), "flag_meanings": "high sea"}),
        "terrain": (("y", "x"), TERRAIN),
        "scale_height": ("time", np.full(steps, scale)),
        "scale_height_sigma": ("time", np.full(steps, 300.0)),
        "time_bnds": (("time", "bounds"),
                      np.stack([time - np.timedelta64(3600, "s"), time], axis=1)),
        "crs": ((), 0, {"crs_wkt": pyproj.CRS("EPSG:32626").to_wkt()}),
    }  # fmt: skip
    coords = {"time": time, "y": Y, "x": X} | changes.pop("coords", {})
    dataset = xr.Dataset(variables | changes, coords)
    dataset.to_netcdf(path)
    return path


@pytest.fixture
def file(tmp_path):
    return open_fields([write_fields(tmp_path / "one.nc")])[0]


def test_sample_of_an_exponential_atmosphere_is_exact_everywhere(file):
    """Analytic atmosphere: any place between the cells and any height, to rounding; the terrain's
    own value, the negative control for a height not handled, is off by kilograms."""
    draw = np.random.default_rng(1)
    x, y = draw.uniform(X[0], X[-1], 50), draw.uniform(Y[0], Y[-1], 50)
    height = draw.uniform(0.0, 1500.0, 50)
    corners, inside = file.corners(*TO_DEGREES.transform(x, y))
    assert inside.all()
    found = file.sample(1, corners, height)
    np.testing.assert_allclose(found.pwv, 21.0 * np.exp(-height / 2000.0), rtol=1e-6)
    unlifted = file.sample(1, corners, file.terrain_at(corners)).pwv
    assert np.abs(unlifted - found.pwv).max() > 3.0


def test_terrain_between_cells_is_bilinear(file):
    """A second derivation: the terrain is a plane, so that any place has its plane's height."""
    x, y = np.array([351_000.0, 353_500.0]), np.array([5_250_500.0, 5_253_000.0])
    corners, _ = file.corners(*TO_DEGREES.transform(x, y))
    expected = (x - X[0]) * 0.1 + (y - Y[0]) * 0.05
    np.testing.assert_allclose(file.terrain_at(corners), expected, atol=0.1)


def test_sigma_counts_the_scale_height_over_the_way(file):
    """A second derivation: at the terrain the cell's own, above it also the scale height's."""
    corners, _ = file.corners(*TO_DEGREES.transform(X[1:2], Y[1:2]))
    own = file.sample(0, corners, np.array([300.0]))
    assert own.sigma[0] == pytest.approx(0.5, rel=1e-3)
    above = file.sample(0, corners, np.array([1300.0]))
    lifted = 20.0 * np.exp(-1300.0 / 2000.0)
    by_height = lifted * 1000.0 * 300.0 / 2000.0**2
    expected = np.hypot(0.5 * np.exp(-0.5), by_height)
    assert above.sigma[0] == pytest.approx(expected, rel=1e-3)


def test_places_at_the_edge_count_and_beyond_it_do_not(file):
    """A limit: half a cell beyond the outermost centres is the grid's edge."""
    x = np.array([X[0] - 990.0, X[0] - 1010.0, X[-1] + 990.0, X[-1] + 1010.0, X[1], X[1]])
    y = np.array([Y[0], Y[0], Y[0], Y[0], Y[-1] + 990.0, Y[-1] + 1010.0])
    _, inside = file.corners(*TO_DEGREES.transform(x, y))
    assert inside.tolist() == [True, False, True, False, True, False]


def test_a_missing_cell_hides_only_the_places_that_lean_on_it(tmp_path):
    """A limit: between cells of which one is missing there is no field, on the other there is."""
    path = write_fields(tmp_path / "one.nc", steps=1)
    with xr.open_dataset(path) as dataset:
        holed = dataset.load()
    holed["pwv"][0, 1, 2] = np.nan
    holed["flag"][0, 1, 1] = 1
    holed.to_netcdf(tmp_path / "two.nc")
    file = open_fields([tmp_path / "two.nc"])[0]
    corners = Corners(
        row=np.array([[1, 1], [1, 1], [2, 2], [2, 2]]),
        column=np.array([[1, 1], [2, 2], [1, 1], [2, 2]]),
        weight=np.array([[1.0, 0.75], [0.0, 0.25], [0.0, 0.0], [0.0, 0.0]]),
    )
    found = file.sample(0, corners, np.zeros(2))
    assert np.isfinite(found.pwv).tolist() == [True, False]
    assert found.flag.tolist() == [1, 1]
    assert file.flag_meanings == {"high": 1, "sea": 16}


def test_a_step_holds_its_end_and_not_its_start(file):
    """A limit."""
    time = np.array(
        ["2026-03-01T00:00", "2026-03-01T00:01", "2026-03-01T01:00", "2026-03-01T01:01",
         "2026-03-01T02:00", "2026-03-01T02:01"], "datetime64[s]",
    )  # fmt: skip
    found = {step: rows.tolist() for _, step, rows in matching_steps([file], time)}
    assert found == {0: [1, 2], 1: [3, 4]}


def test_degree_grids_take_longitudes_of_both_kinds(tmp_path):
    """A limit: a grid of 331 to 334 degrees east and a place at 28 degrees west."""
    coords = {"x": 331.0 + np.arange(4), "y": 47.0 + np.arange(3)}
    path = write_fields(tmp_path / "one.nc", coords=coords,
                        crs=((), 0, {"crs_wkt": pyproj.CRS("EPSG:4326").to_wkt()}))  # fmt: skip
    file = open_fields([path])[0]
    corners, inside = file.corners(np.array([-28.0, 20.0]), np.array([48.0, 48.0]))
    assert inside.tolist() == [True, False]
    assert file.terrain_at(corners)[0] == pytest.approx(TERRAIN[1, 1])


def test_files_that_do_not_belong_together_are_errors(tmp_path):
    """Negative control: the same step twice, another grid, no field file, no NetCDF, no file."""
    one = write_fields(tmp_path / "one.nc")
    later = write_fields(tmp_path / "later.nc", start="2026-03-01T02:00")
    assert [file.path for file in open_fields([later, one])] == [one, later]
    with pytest.raises(InputError, match="Name each file once"):
        open_fields([one, one])
    other = write_fields(tmp_path / "other.nc", start="2026-03-02", coords={"x": X + 500.0})
    with pytest.raises(InputError, match="grid differs"):
        open_fields([one, other])
    xr.Dataset({"pwv": 1.0}).to_netcdf(tmp_path / "bare.nc")
    with pytest.raises(InputError, match="variable pwv_sigma is missing"):
        open_fields([tmp_path / "bare.nc"])
    nameless = write_fields(tmp_path / "nameless.nc", crs=((), 0))
    with pytest.raises(InputError, match="attribute crs_wkt of crs is missing"):
        open_fields([nameless])
    with pytest.raises(InputError, match="steps are 0"):
        open_fields([write_fields(tmp_path / "empty.nc", steps=0)])
    (tmp_path / "text.nc").write_text("not this")
    with pytest.raises(InputError, match=r"text\.nc: cannot be read"):
        open_fields([tmp_path / "text.nc"])
    with pytest.raises(InputError, match=r"none\.nc: cannot be read"):
        open_fields([tmp_path / "none.nc"])
