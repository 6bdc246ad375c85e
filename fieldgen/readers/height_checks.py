"""Mistakes of the geoid: its sign, or the whole of it, told from what must agree with the heights.

Orthometric = ellipsoidal - undulation. A network whose undulation has the wrong sign, or none, is
off by the same amount at every station, and its barometers agree with each other. What gives it
away are heights listed elsewhere, the terrain, and the pressure of a weather model. A mistake is
said once, with its figures and what to change; an undulation below `SMALL_UNDULATION` does no harm
that these could see.
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np
import xarray as xr

from fieldgen.constants import GAS_CONSTANT_DRY_AIR, GRAVITY
from fieldgen.readers.records import ReadingReport
from fieldgen.station.surface_air import GridWeather, Sites, Weather, surface_air

SMALL_UNDULATION = 5.0
"""Undulations smaller than this [m] are not looked into: 0.6 hPa, or 0.2 kg m-2."""

SAME_HEIGHT = 5.0
"""A listed orthometric height this far [m] from ellipsoidal - undulation is reported."""

FEWEST = 5
"""Stations needed before their common error is told from their own ones."""

MOST = 2.0 / 3.0
"""Share of the stations that another height must suit better."""

COMMON_CLIMB = 20.0
"""Median height above the terrain [m] that is reported where no undulation explains it."""

COMMON_PRESSURE = 2.5
"""Median difference of barometers from a weather model [hPa] that is reported: three times what
models are off by over a region, see `fieldgen.station.surface_air.GRID_SIGMA`."""


class Heights(NamedTuple):
    """Of n stations [m], NaN where not known: what is used, and what it was made of."""

    used: np.ndarray
    ellipsoidal: np.ndarray
    undulation: np.ndarray

    @property
    def matters(self) -> bool:
        """Whether the undulation is known, and large enough to be looked into."""
        known = np.abs(self.undulation[np.isfinite(self.undulation)])
        return len(known) > 0 and float(np.median(known)) >= SMALL_UNDULATION


def check_listed(heights: Heights, lists: dict[str, np.ndarray], report: ReadingReport):
    """Hold heights above sea level (n,) [m], by the name of who lists them, against the geoid.

    Reports a sign or a geoid that is wrong at most stations of a list; returns the stations (n,)
    bool whose listed heights this explains.
    """
    all_explained = np.zeros(len(heights.used), bool)
    others = {
        "plus undulation, so one of the two has the geoid's sign wrong. Turn that of "
        "terrain.geoid, or of the undulations in stations.table, if the list is right":
            heights.ellipsoidal + heights.undulation,
        "as it is, so the geoid has been forgotten in the list. Leave the listed heights out, "
        "or give the ellipsoidal ones": heights.ellipsoidal,
    }  # fmt: skip
    if not heights.matters:
        return all_explained
    for words, other in others.items():
        figures = []
        for source, listed in lists.items():
            apart = np.abs(listed - (heights.ellipsoidal - heights.undulation))
            compared = np.isfinite(apart).sum()
            explained = (apart > SAME_HEIGHT) & (np.abs(listed - other) <= SAME_HEIGHT)
            if compared >= FEWEST and explained.sum() > MOST * compared:
                all_explained |= explained
                figures.append(
                    f"{source} ({explained.sum()} of {compared} stations, median difference "
                    f"{np.median(np.abs(listed - other)[explained]):.1f} m, against "
                    f"{np.median(apart[explained]):.1f} m from ellipsoidal height less undulation)"
                )
        if figures:
            report.warnings.append(
                f"geoid: the heights above sea level in {' and '.join(figures)} agree with "
                f"ellipsoidal height {words}"
            )
    return all_explained


def check_terrain(heights: Heights, terrain, report: ReadingReport) -> None:
    """Report that another height than the one used suits the terrain (n,) [m] better."""
    climb = heights.used - terrain
    climb = climb[np.isfinite(climb)]
    if len(climb) < FEWEST:
        return
    if heights.matters:
        _check_other_heights(heights, terrain, report)
    elif _is_common(climb):
        side, count = ("above", (climb > 0).sum()) if np.median(climb) > 0 else (
            "below", (climb < 0).sum()
        )  # fmt: skip
        report.warnings.append(
            f"geoid: {count} of {len(climb)} stations lie {side} the terrain, by a median of "
            f"{np.median(np.abs(climb)):.0f} m, as if heights above the ellipsoid had been taken "
            "for heights above sea level. Set terrain.geoid, or check the terrain's heights"
        )


def _check_other_heights(heights: Heights, terrain, report: ReadingReport) -> None:
    others = {
        "ellipsoidal height plus undulation, so the undulation's sign is wrong. Turn it in "
        "terrain.geoid or in stations.table": heights.ellipsoidal + heights.undulation,
        "the ellipsoidal heights as they are listed, so they are above sea level already. Give "
        "them as orthometric_height": heights.ellipsoidal,
        "ellipsoidal height less undulation, so the geoid has been forgotten in the listed "
        "orthometric heights. Leave them out of stations.table":
            heights.ellipsoidal - heights.undulation,
    }  # fmt: skip
    used = np.abs(heights.used - terrain)
    misfits = {words: np.abs(other - terrain) for words, other in others.items()}
    words, best = min(misfits.items(), key=lambda item: np.nanmedian(item[1]))
    compared = np.isfinite(used + best)
    better = (best < used)[compared].sum()
    before, after = np.median(used[compared]), np.median(best[compared])
    if better >= MOST * compared.sum() and after < before / 2 and before - after > SAME_HEIGHT:
        report.warnings.append(
            f"geoid: at {better} of {compared.sum()} stations the terrain (median difference "
            f"{after:.0f} m, against {before:.0f} m of the heights in use) agrees with {words}"
        )


def _is_common(climb) -> bool:
    """Whether climbs (n,) [m] share one that is far larger than what they scatter by."""
    median = np.median(climb)
    spread = 1.4826 * np.median(np.abs(climb - median))
    one_side = (np.sign(climb) == np.sign(median)).mean()
    return bool(
        abs(median) > max(COMMON_CLIMB, 3.0 * 1.2533 * spread / np.sqrt(len(climb)))
        and one_side > 0.8
    )


def check_barometers(weather: xr.Dataset, grid: xr.Dataset, undulation: float, report) -> None:
    """Report that most barometers are off a weather model by the same pressure.

    weather : Dataset (time, site); grid : Dataset (time, place) at the same sites; undulation [m]
    : of the region, NaN where not known
    """
    difference = pressure_against_grid(weather, grid)
    judged = np.isfinite(difference).any(axis=0)
    if judged.sum() < FEWEST:
        return
    by_site = np.nanmedian(difference[:, judged], axis=0)
    common = float(np.median(by_site))
    alike = np.sign(by_site) == np.sign(common)
    alike &= np.abs(by_site) > COMMON_PRESSURE / 2.0
    if abs(common) < COMMON_PRESSURE or alike.mean() < MOST:
        return
    pressure = float(np.nanmedian(weather.pressure.values))
    kelvin = float(np.nanmedian(np.where(np.isfinite(difference), grid.temperature.values, np.nan)))
    kelvin = kelvin if np.isfinite(kelvin) else 288.15
    metres = common * GAS_CONSTANT_DRY_AIR.value * kelvin / (pressure * GRAVITY.value)
    report.warnings.append(
        f"geoid: {alike.sum()} of {judged.sum()} barometers read a median of {common:+.1f} hPa "
        f"against the weather grids, as if their heights were {abs(metres):.0f} m too "
        f"{'high' if metres > 0 else 'low'}{_cause(metres, undulation)}. Check terrain.geoid and "
        "the heights in the weather files"
    )


def _cause(metres: float, undulation: float) -> str:
    """What an error of the heights [m] looks like beside the undulation [m] that is in use."""
    if not abs(undulation) >= SMALL_UNDULATION:
        return ", as heights above the ellipsoid are"
    times = metres / undulation
    if abs(times + 2.0) < 0.4:
        return f": twice the undulation of {undulation:.0f} m, as if its sign were wrong"
    if abs(abs(times) - 1.0) < 0.3:
        return f": the undulation of {undulation:.0f} m, left out or applied once too often"
    return ""


def pressure_against_grid(weather: xr.Dataset, grid: xr.Dataset):
    """Pressure (t, s) [hPa] of barometers less that of a weather model at their heights."""
    names = ("longitude", "latitude", "orthometric_height")
    sites = Sites(*(weather[name].values for name in names))
    at_sites = GridWeather(*(grid[name].values for name in GridWeather._fields))
    measured = Weather(*(weather[name].values for name in Weather._fields))
    air = surface_air(
        measured, sites, sites, np.full(len(sites.height), -1),
        barometer_sigma=1.0, sources=["grid"], grid=at_sites,
    )  # fmt: skip
    return measured.pressure - air.pressure
