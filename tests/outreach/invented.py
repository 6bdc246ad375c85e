"""An invented output folder, small, with an hour without a field and values not used."""

import json

import numpy as np

from fieldgen.products.metadata import TIME_ENCODING, flag_attributes
from fieldgen.station.screening import STATION_FLAGS
from tests.products.maps.invented import make_island, make_stations

CELLS = [(6, 8), (12, 13), (17, 9), (9, 19), (14, 5), (18, 17)]
HOURS = 6
EMPTY_HOUR = 2
SCRIPT = "<script>alert('x')</script>"


def write_folder(path, *, network="Ostrana", hours=HOURS, rows=24, columns=26, names=None):
    """Fields from 2026-09-14 on, one of them empty; returns fields and stations."""
    fields = make_island(rows=rows, columns=columns, cell=4000.0, hours=hours)
    fields.attrs["project"] = network
    for name in ("time", "time_bnds"):
        fields[name].encoding = dict(TIME_ENCODING)
    stations = add_series(make_stations(fields, CELLS), names)
    fields["pwv"][EMPTY_HOUR] = np.nan
    (path / "fields").mkdir(parents=True)
    (path / "stations").mkdir()
    days = (fields.time.values - np.timedelta64(1, "h")).astype("datetime64[D]")
    for day in np.unique(days):
        name = str(day).replace("-", "")
        fields.isel(time=days == day).to_netcdf(path / "fields" / f"pwv_{name}.nc")
        stations.isel(time=days == day).to_netcdf(path / "stations" / f"stations_{name}.nc")
    (path / "run.json").write_text(json.dumps({"colour_limits": [5, 40]}))
    return fields, stations


def add_series(stations, names=None):
    """Delay, error, residual and flags beside water vapour, some values not used."""
    count, hours = stations.sizes["station"], stations.sizes["time"]
    shape = ("station", "time")
    pwv = stations["pwv"].values
    flag = np.zeros((count, hours), np.int16)
    flag[1, 3] = STATION_FLAGS["jump"]
    flag[2, :2] = STATION_FLAGS["no_delay"]
    flag[3, 1] = STATION_FLAGS["no_pressure"]
    pwv[flag & 5 != 0] = np.nan
    stations["pwv"] = (shape, pwv)
    stations["flag"] = (shape, flag, flag_attributes(STATION_FLAGS, np.int16))
    stations["pwv_sigma"] = (shape, np.full_like(pwv, 0.8))
    stations["residual"] = (shape, np.tile(0.1 * np.arange(count)[:, None] - 0.2, hours))
    stations["ztd"] = (shape, 2.2 + pwv / 155)
    time = stations.time.values
    bounds = np.stack([time - np.timedelta64(1, "h"), time], axis=1)
    stations["time_bnds"] = (("time", "bounds"), bounds, {}, dict(TIME_ENCODING))
    ids = names or [f"ST{index:02d}" for index in range(count)]
    return stations.assign_coords(
        station_id=("station", np.array(ids, object)),
        station_name=("station", np.array([f"Place {one}" for one in ids], object)),
        orthometric_height=("station", 100.0 * np.arange(count)),
    )
