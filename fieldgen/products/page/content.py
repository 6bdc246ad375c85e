"""Everything that the browser is told besides the figures, as plain values."""

from __future__ import annotations

import numpy as np
import xarray as xr

from fieldgen.plain_text import one_line
from fieldgen.products import look
from fieldgen.products.flag_words import reason
from fieldgen.products.maps.grid import MapGrid
from fieldgen.products.page.ground import to_metres
from fieldgen.products.page.layers import list_layers, threshold_limits
from fieldgen.products.page.packing import pack_array, pack_range
from fieldgen.products.page.reading import SERIES, Hours, flag_bits
from fieldgen.quantities import PACKED_STEP

OLD_AFTER = 3.0
"""Age [h] of the newest hour from which the page warns."""

NAME_LENGTH = 60  # letters of a station's name that are shown


def describe_page(hours: Hours, grid: MapGrid) -> dict:
    """Content of the page: names, times, layers, stations, and packed arrays."""
    fields = hours.fields
    return {
        "network": network_name(fields),
        "version": str(fields.attrs["fieldgen_version"]),
        "old_after": OLD_AFTER,
        "end": _seconds(fields["time"].values),
        "start": _seconds(fields[fields["time"].attrs["bounds"]].values[:, 0]),
        "station_count": fields["station_count"].values.astype(int).tolist(),
        "bounds": _bounds(grid),
        "layers": [layer.as_dict() for layer in list_layers(hours)],
        "threshold": threshold_limits(hours.limits),
        "cell_flags": _cell_flags(fields),
        "missing": {"colour": look.MISSING_COLOUR, "words": look.MISSING_LABEL},
        "stations": _describe_stations(hours.stations, grid),
        "reasons": {
            str(bit): reason(meaning)
            for meaning, bit in flag_bits(hours.stations["flag"]).items()
        } if hours.stations.sizes["station"] else {},
        "arrays": _pack_fields(fields) | _pack_stations(hours.stations),
    }  # fmt: skip


def network_name(fields: xr.Dataset) -> str:
    """Name of the network on one line, without control characters."""
    return one_line(str(fields.attrs["project"]))


def _seconds(time: np.ndarray) -> list[int]:
    return time.astype("datetime64[s]").astype(int).tolist()


def _bounds(grid: MapGrid) -> list[float]:
    """West, east, south and north edge on the map [m]."""
    width, height = grid.size
    return [-width / 2, width / 2, -height / 2, height / 2]


def _cell_flags(fields: xr.Dataset) -> list[dict]:
    """The flags of cells that the map marks."""
    return [
        {"meaning": meaning, "bit": bit, "words": look.HATCHES[meaning].label}
        for meaning, bit in flag_bits(fields["flag"]).items()
        if meaning in look.HATCHES
    ]


def _describe_stations(stations: xr.Dataset, grid: MapGrid) -> list[dict]:
    if not stations.sizes["station"]:
        return []
    longitude, latitude = stations["longitude"].values, stations["latitude"].values
    x, y = to_metres(grid, grid.project(longitude, latitude)).T
    return [
        {
            "id": one_line(str(stations["station"].values[number])),
            "name": one_line(str(stations["name"].values[number]))[:NAME_LENGTH],
            "x": _known(x[number]),
            "y": _known(y[number]),
            "longitude": _known(longitude[number]),
            "latitude": _known(latitude[number]),
            "height": _known(stations["orthometric_height"].values[number]),
        }
        for number in range(stations.sizes["station"])
    ]


def _known(value: float) -> float | None:
    """A number, None where it is not finite: JSON knows no other."""
    return float(value) if np.isfinite(value) else None


def _pack_fields(fields: xr.Dataset) -> dict:
    """Fields to the step that the file itself has; heights to a metre; places to some metres."""
    longitude, latitude = _places(fields)
    return {
        **{
            name: pack_array(fields[name].values, PACKED_STEP)
            for name in ("pwv", "pwv_sigma", "pwv_at_reference")
        },
        "flag": pack_array(fields["flag"].values, 1),
        "terrain": pack_array(fields["terrain"].values, 1),
        "longitude": pack_range(longitude),
        "latitude": pack_range(latitude),
    }


def _places(fields: xr.Dataset) -> tuple[np.ndarray, np.ndarray]:
    """Longitude and latitude (y, x) [degrees] of the cells."""
    if "longitude" in fields:
        return fields["longitude"].values, fields["latitude"].values
    return tuple(np.meshgrid(fields["x"].values, fields["y"].values))


def _pack_stations(stations: xr.Dataset) -> dict:
    """Series of the stations to a hundredth; what no sound value can be is left out."""
    most = 300.0
    packed = {
        f"station_{name}": pack_array(
            stations[name].where(np.abs(stations[name]) < most).values, PACKED_STEP
        )
        for name in SERIES
    }
    return packed | {"station_flag": pack_array(stations["flag"].values, 1)}
