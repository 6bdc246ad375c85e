"""Few, odd and empty networks: a result with honest error bars or a flagged gap, never a crash."""

import numpy as np
import pandas as pd
import pytest

import fieldgen
from fieldgen.fields import FIELD_FLAGS
from tests.scene import SETTINGS, write_scene


def spoil(folder, change):
    """Rewrite the scene's delays by a function of their table."""
    table = pd.read_csv(folder / "delays.csv")
    change(table).to_csv(folder / "delays.csv", index=False)


def make(path, **settings):
    return fieldgen.make_fields(fieldgen.read_network(path), **settings)


def at_one_height(table):
    return table.assign(orthometric_height=50.0, ellipsoidal_height=107.0, pwv=20.0)


def on_a_line(table):
    return table.assign(
        longitude=-29.0 + 0.01 * (table.longitude.rank(method="dense")), latitude=47.4
    )


def all_but_one_on_a_line(table):
    line = on_a_line(table)
    last = line.station == "ST11"
    return line.assign(latitude=np.where(last, 47.6, line.latitude))


def at_one_place(table):
    first = table[table.station == "ST00"].iloc[0]
    second = table.station == "ST01"
    moved = {
        name: np.where(second, first[name], table[name])
        for name in ("longitude", "latitude", "orthometric_height", "ellipsoidal_height")
    }
    return table.assign(**moved)


def constant(table):
    return table.assign(pwv=20.0)


def an_hour_with_none(table):
    return table[~table.time.str.contains("T02:")]


def days_with_none(table):
    last = table.assign(time=table.time.str.replace("2026-03-01", "2026-03-05"))
    return pd.concat([table, last])


def nearly_dry(table):
    noise = np.random.default_rng(1).normal(0.0, 0.5, len(table))
    return table.assign(pwv=0.3 + noise)


CASES = [
    at_one_height, on_a_line, all_but_one_on_a_line, at_one_place, constant, an_hour_with_none,
    days_with_none, nearly_dry,
]  # fmt: skip


@pytest.mark.parametrize("drift", ["constant", "linear"])
@pytest.mark.parametrize("case", CASES, ids=lambda case: case.__name__)
def test_odd_networks_give_a_field_or_a_flagged_gap(tmp_path, case, drift):
    """A limit: finite values with finite, positive error bars, or a missing hour that says why."""
    path = write_scene(tmp_path, settings=SETTINGS + f'[kriging]\ndrift = "{drift}"\n')
    spoil(tmp_path, case)
    fields = make(path)
    gap = (fields.flag.values & FIELD_FLAGS["too_few_stations"]) > 0
    assert (np.isnan(fields.pwv.values) == gap).all()
    assert (fields.pwv.values[~gap] >= 0.0).all()
    assert (fields.pwv_sigma.values[~gap] > 0.0).all()
    hours_made = (~gap).any(axis=(1, 2)).sum()
    expected = {"an_hour_with_none": 5, "days_with_none": 12}.get(case.__name__, 6)
    assert hours_made == expected


@pytest.mark.parametrize("stations", [1, 2, 4])
def test_very_few_stations_are_a_flagged_gap(tmp_path, stations):
    """A limit: below five stations nothing is made up."""
    fields = make(write_scene(tmp_path, stations=stations))
    assert np.isnan(fields.pwv).all()
    assert ((fields.flag & FIELD_FLAGS["too_few_stations"]) > 0).all()


def test_five_stations_have_wider_bars_than_fifty(tmp_path):
    """A limit: the error bar grows as the network thins out."""
    sigma = []
    for stations in (5, 50):
        folder = tmp_path / str(stations)
        folder.mkdir()
        sigma.append(float(make(write_scene(folder, stations=stations)).pwv_sigma.mean()))
    assert sigma[0] > 1.5 * sigma[1]


def test_clipped_values_are_counted(tmp_path):
    """A limit: water vapour below zero is written as zero, and the report says how often."""
    import json

    from fieldgen.chain import make as make_files

    path = write_scene(tmp_path)
    spoil(tmp_path, lambda table: table.assign(pwv=np.where(table.station < "ST06", -1.5, 0.5)))
    make_files(fieldgen.read_network(path), tmp_path / "out")
    report = json.loads((tmp_path / "out/run.json").read_text())
    assert report["summary"]["values_clipped"] > 0
