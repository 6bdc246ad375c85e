"""Output folders to make pages of: one that the program made, one of any size that is invented."""

import json

import numpy as np
import xarray as xr

from fieldgen.cli import main
from fieldgen.quantities import MISSING, PACKED_STEP
from tests.products.maps.invented import make_island
from tests.scene import SETTINGS, station_places, write_scene

HOURS, STATIONS = 10, 12
ODD = 5
"""Number of the station that is far off the others from hour ODD_FROM on."""
ODD_FROM = 7
SILENT_HOUR = 2
"""Hour for which no station has a value, so that there is no field."""

NETWORK = '<img src=x onerror=alert(1)> & "isle"'
HOSTILE = "<script>alert(1)</script>\x07'\""
"""Name of the first station."""


def write_outputs(folder):
    """Run the program over a scene with a hostile name, an odd station and an hour without field;
    returns the output folder."""
    _, _, heights = station_places(STATIONS)

    def water_vapour(height, hour):
        value = (20.0 + hour) * np.exp(-height / 2000.0)
        return value + 25.0 * (hour >= ODD_FROM and abs(height - heights[ODD]) < 1e-6)

    settings = SETTINGS.replace('"Test isle"', json.dumps(NETWORK))
    write_scene(
        folder, stations=STATIONS, hours=HOURS, water_vapour=water_vapour, settings=settings
    )
    lines = (folder / "delays.csv").read_text().splitlines(keepends=True)
    silent = f"T{SILENT_HOUR:02d}:30"
    (folder / "delays.csv").write_text("".join(line for line in lines if silent not in line))
    out = folder / "out"
    assert main(["make", str(folder / "network.toml"), "--out", str(out), "--jobs", "1"]) == 0
    for path in (out / "stations").glob("*.nc"):
        with xr.open_dataset(path) as dataset:
            dataset.load()
        names = dataset["station_name"].values.astype(object)
        names[0] = HOSTILE
        dataset["station_name"] = ("station", names)
        path.unlink()
        dataset.to_netcdf(path)
    return out


def read_fields(out):
    """The field file of an output folder."""
    (path,) = (out / "fields").glob("*.nc")
    with xr.open_dataset(path) as dataset:
        return dataset.load()


def read_stations(out):
    """The station file of an output folder."""
    (path,) = (out / "stations").glob("*.nc")
    with xr.open_dataset(path) as dataset:
        return dataset.load()


def write_invented(folder, *, hours, rows, columns, start="2026-09-14T01:00"):
    """Fields over an invented island as files of a day each, with weather that drifts and a little
    noise in every cell and hour, and no stations."""
    fields = make_island(rows=rows, columns=columns, hours=hours)
    time = np.datetime64(start, "ns") + np.arange(hours) * np.timedelta64(1, "h")
    fields = fields.assign_coords(time=("time", time, {"bounds": "time_bnds"}))
    fields["time_bnds"] = (("time", "bounds"), np.stack([time - np.timedelta64(1, "h"), time], 1))
    draw = np.random.default_rng(4)
    space = ("time", "y", "x")
    pwv = fields["pwv"].values + draw.normal(0, 0.03, fields["pwv"].shape)
    fields["pwv"] = (space, pwv)
    fields["pwv_at_reference"] = (
        space, pwv * np.exp(fields["terrain"].values / 2200),
        {"reference_height": 350.0},
    )  # fmt: skip
    fields["pwv_sigma"] = (space, 0.6 + 0.02 * pwv + draw.normal(0, 0.01, pwv.shape))
    fields.attrs["project"] = "Ostrana"
    packed = {
        "dtype": "int16", "scale_factor": PACKED_STEP, "_FillValue": MISSING, "zlib": True,
        "complevel": 1,
    }  # fmt: skip
    encoding = {name: packed for name in ("pwv", "pwv_sigma", "pwv_at_reference")}
    encoding |= {name: {"units": "seconds since 1970-01-01"} for name in ("time", "time_bnds")}
    (folder / "fields").mkdir(parents=True)
    for day, part in fields.groupby("time.date"):
        name = f"pwv_{day:%Y%m%d}.nc"
        part.to_netcdf(folder / "fields" / name, encoding=encoding)
    (folder / "run.json").write_text(json.dumps({"colour_limits": [5, 40]}))
    return fields
