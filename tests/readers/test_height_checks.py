"""Mistakes of the geoid, each made on purpose, and networks that make none."""

import csv
from pathlib import Path

import numpy as np
import pytest
import xarray as xr

import fieldgen
from fieldgen.readers.height_checks import (
    Heights,
    check_barometers,
    check_listed,
    check_terrain,
)
from fieldgen.readers.records import ReadingReport
from tests.station.test_surface_air import pressure, temperature

DEMO = Path(__file__).parents[2] / "demo_network"

COUNT = 20


def network(undulation: float, seed: int = 1):
    """True orthometric heights, and the terrain under them, as a coarse raster knows it."""
    draw = np.random.default_rng(seed)
    orthometric = draw.uniform(5.0, 1500.0, COUNT)
    terrain = orthometric - draw.uniform(3.0, 12.0, COUNT) + draw.normal(0, 12.0, COUNT)
    return orthometric, orthometric + undulation, terrain


def said(check, *arguments) -> list[str]:
    """Warnings of a check."""
    report = ReadingReport()
    check(*arguments, report)
    return report.warnings


def of(used, ellipsoidal, undulation) -> Heights:
    return Heights(used, ellipsoidal, np.full(COUNT, float(undulation)))


@pytest.mark.parametrize("undulation", [57.0, -30.0, 12.0, 3.0, 0.0])
def test_heights_that_are_right_are_not_talked_about(undulation):
    """Negative control: the right sign, whatever it is."""
    orthometric, ellipsoidal, terrain = network(undulation)
    heights = of(orthometric, ellipsoidal, undulation)
    assert said(check_terrain, heights, terrain) == []
    assert said(check_listed, heights, {"the delay files": orthometric}) == []


@pytest.mark.parametrize("undulation", [57.0, -30.0])
def test_a_wrong_sign_is_seen_in_the_terrain(undulation):
    """Negative control: the undulation given with its sign turned."""
    _, ellipsoidal, terrain = network(undulation)
    wrong = -undulation
    (text,) = said(check_terrain, of(ellipsoidal - wrong, ellipsoidal, wrong), terrain)
    assert "ellipsoidal height plus undulation, so the undulation's sign is wrong" in text
    assert "Turn it in terrain.geoid" in text
    assert f"of {COUNT} stations" in text


@pytest.mark.parametrize("undulation", [57.0, -30.0])
def test_a_forgotten_geoid_is_seen_in_the_terrain(undulation):
    """Negative control: orthometric heights listed that are ellipsoidal, and the geoid known."""
    _, ellipsoidal, terrain = network(undulation)
    (text,) = said(check_terrain, of(ellipsoidal, ellipsoidal, undulation), terrain)
    assert "the geoid has been forgotten in the listed orthometric heights" in text


def test_a_geoid_too_many_is_seen_in_the_terrain():
    """Negative control: heights listed as ellipsoidal that are above sea level already."""
    orthometric, _, terrain = network(57.0)
    (text,) = said(check_terrain, of(orthometric - 57.0, orthometric, 57.0), terrain)
    assert "above sea level already" in text


@pytest.mark.parametrize("known", [np.nan, 0.0])
def test_a_geoid_that_nobody_gave_is_seen_in_the_terrain(known):
    """Negative control: no undulation, or zero, and every station 57 m above the ground."""
    _, ellipsoidal, terrain = network(57.0)
    (text,) = said(check_terrain, of(ellipsoidal, ellipsoidal, known), terrain)
    assert "stations lie above the terrain" in text
    assert "Set terrain.geoid" in text


@pytest.mark.parametrize("used", ["ellipsoidal", "wrong sign"])
def test_an_undulation_of_four_metres_does_not_matter(used):
    """A limit: what is smaller than the terrain knows is not talked about."""
    _, ellipsoidal, terrain = network(4.0)
    heights = of(ellipsoidal if used == "ellipsoidal" else ellipsoidal + 4.0, ellipsoidal, -4.0)
    assert said(check_terrain, heights, terrain) == []
    assert said(check_listed, heights, {"the delay files": ellipsoidal - 8.0}) == []


@pytest.mark.parametrize(
    ("listed", "words"),
    [(lambda h: h + 57.0, "plus undulation, so one of the two has the geoid's sign wrong"),
     (lambda h: h, "as it is, so the geoid has been forgotten")],
    ids=["sign", "forgotten"],
)  # fmt: skip
def test_listed_heights_say_which_mistake_they_make(listed, words):
    """Negative control: delay files whose geoid is wrong, in sign or altogether; said once."""
    orthometric, ellipsoidal, _ = network(57.0)
    heights = of(orthometric, ellipsoidal, 57.0)
    report = ReadingReport()
    explained = check_listed(heights, {"the delay files": listed(ellipsoidal)}, report)
    assert explained.all()
    (text,) = report.warnings
    assert words in text
    assert f"{COUNT} of {COUNT} stations" in text


def test_listed_heights_of_one_station_are_its_own_mistake():
    """Negative control: three stations in twenty do not make a geoid."""
    orthometric, ellipsoidal, _ = network(57.0)
    listed = orthometric.copy()
    listed[:3] = ellipsoidal[:3]
    assert said(check_listed, of(orthometric, ellipsoidal, 57.0), {"the files": listed}) == []


def barometers(height_error: float, model_error: float = 0.0, count: int = 8):
    """Barometers whose heights are wrong alike, and a model's grid at their places."""
    height = np.linspace(10.0, 900.0, count)
    shape = (4, count)
    weather = xr.Dataset(
        {
            "pressure": (("time", "site"), np.broadcast_to(pressure(height), shape)),
            "temperature": (("time", "site"), np.broadcast_to(temperature(height), shape)),
            "relative_humidity": (("time", "site"), np.full(shape, 70.0)),
            "longitude": ("site", np.linspace(-29, -27, count)),
            "latitude": ("site", np.linspace(47, 48.5, count)),
            "orthometric_height": ("site", height + height_error),
        }
    )
    ground = height + 100.0
    grid = {
        "pressure": pressure(ground) + model_error, "pressure_height": ground,
        "temperature": temperature(ground), "surface_height": ground,
    }  # fmt: skip
    grid = {name: (("time", "place"), np.broadcast_to(row, shape)) for name, row in grid.items()}
    return weather, xr.Dataset(grid)


@pytest.mark.parametrize("model_error", [-1.5, 0.0, 1.5])
def test_barometers_at_their_heights_are_not_talked_about(model_error):
    """Negative control: a model that is off by 1.5 hPa everywhere, as models may be."""
    assert said(check_barometers, *barometers(0.0, model_error), 57.0) == []


@pytest.mark.parametrize(
    ("error", "undulation", "words"),
    [
        (57.0, 57.0, "57 m too high: the undulation of 57 m, left out"),
        (114.0, -57.0, "too high: twice the undulation of -57 m, as if its sign were wrong"),
        (57.0, np.nan, "too high, as heights above the ellipsoid are"),
        (-57.0, 57.0, "too low: the undulation of 57 m, left out or applied once too often"),
        (114.0, 57.0, "too high. Check terrain.geoid"),
    ],
    ids=["forgotten", "sign", "unknown", "twice", "something else"],
)
def test_a_common_error_of_all_barometers_is_seen_against_a_model(error, undulation, words):
    """Analytic atmosphere: the barometers agree with each other, and only a model tells."""
    (text,) = said(check_barometers, *barometers(error), undulation)
    assert "8 of 8 barometers read a median of" in text
    stated = float(text.split("were ")[1].split(" m")[0])
    assert stated == pytest.approx(abs(error), abs=4.0)
    assert words.removeprefix("57 m ") in text


def test_one_wrong_barometer_is_not_the_geoid():
    """Negative control: a single sensor 100 m off is for the screening."""
    weather, grid = barometers(0.0)
    weather["orthometric_height"][3] += 100.0
    assert said(check_barometers, weather, grid, 57.0) == []


def test_five_wrong_barometers_of_eight_are_not_the_geoid():
    """Negative control: less than two thirds of them, however far off."""
    weather, grid = barometers(0.0)
    weather["orthometric_height"][:5] += 100.0
    assert said(check_barometers, weather, grid, 57.0) == []


def demo(folder, geoid, *, blank=True, grids=False):
    """Warnings about the geoid of the demo with another geoid; orthometric heights left out."""
    with open(DEMO / "stations.csv", newline="") as file:
        rows = list(csv.DictReader(file))
    with open(folder / "stations.csv", "w", newline="") as file:
        writer = csv.DictWriter(file, rows[0])
        writer.writeheader()
        for row in rows:
            writer.writerow(row | ({"orthometric_height": ""} if blank else {}))
    text = (DEMO / "network.toml").read_text().replace("geoid = 57.3", f"geoid = {geoid}")
    for name in (
        "delays",
        "weather",
        "terrain.tif",
        "coast.geojson",
        "rivers.geojson",
        "catchments.geojson",
    ):
        text = text.replace(f'"{name}', f'"{DEMO}/{name}')
    if grids:
        text = text.replace("[stations]", f'[stations]\ngrids = ["{DEMO}/weather_grid.nc"]')
    (folder / "network.toml").write_text(text)
    report = fieldgen.read_network(folder / "network.toml").report
    return [warning for warning in report.warnings if warning.startswith("geoid: ")]


def test_the_demo_is_right(tmp_path):
    """Negative control: the demo as it is, held against terrain, lists and model."""
    assert demo(tmp_path, 57.3, blank=False, grids=True) == []


@pytest.mark.parametrize(("geoid", "words"), [
    (-57.3, "twice the undulation of -57 m, as if its sign were wrong"),
    (0.0, "as heights above the ellipsoid are"),
])  # fmt: skip
def test_the_demo_with_a_wrong_geoid_is_seen_in_terrain_and_pressure(tmp_path, geoid, words):
    """Negative control, end to end: the terrain and the barometers each tell, once."""
    warnings = demo(tmp_path, geoid, grids=True)
    assert (
        len([text for text in warnings if "terrain (median" in text or "above the terrain" in text])
        == 1
    )
    (text,) = [text for text in warnings if "barometers read" in text]
    assert words in text


def test_the_demo_with_a_wrong_sign_is_seen_in_its_table(tmp_path):
    """Negative control, end to end: heights listed in the table against a turned geoid."""
    warnings = demo(tmp_path, -57.3, blank=False)
    assert len(warnings) == 1
    assert "in stations.table (27 of 27 stations" in warnings[0]
    assert "the delay files (41 of 41 stations" in warnings[0]
    assert "agree with ellipsoidal height plus undulation" in warnings[0]
