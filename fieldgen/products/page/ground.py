"""What lies under and over the colours: relief, coast, rivers, catchments and the graticule.

Positions on the map are metres from the middle of the grid, to the east and north, so that both
axes have one scale, be the grid projected or not.
"""

from __future__ import annotations

from pathlib import Path

import numpy as np
import shapely
from contourpy import contour_generator

from fieldgen.products.lines import NAMES
from fieldgen.products.maps.cells import shade_relief
from fieldgen.products.maps.geometries import clip_outlines, read_geometries
from fieldgen.products.maps.grid import MapGrid
from fieldgen.products.maps.lines import choose_ticks

MOST_LABELS = 5  # meridians and parallels, each
LABELLED = 0.85  # share of an edge, about its middle, that has labels
POINTS = 60  # along a meridian or parallel


def to_metres(grid: MapGrid, projected: np.ndarray) -> np.ndarray:
    """Positions (point, 2) on the map [m] from positions in the grid's projection."""
    west, east, south, north = grid.extent
    return (projected - [(west + east) / 2, (south + north) / 2]) * grid.unit


def paint_relief(grid: MapGrid) -> np.ndarray:
    """Relief (y, x) as 0xAABBGGRR pixels, white or black, as clear as the relief is weak.

    Laid over a colour it changes the brightness by at most `look.RELIEF_STRENGTH`.
    """
    departure = shade_relief(grid) - 1
    alpha = np.rint(255 * np.abs(departure)).astype(np.uint32)
    return (alpha << 24) | np.where(departure > 0, 0xFFFFFF, 0).astype(np.uint32)


def read_outlines(folder: Path, grid: MapGrid) -> dict[str, list[np.ndarray]]:
    """Coast, rivers and catchments as lines (point, 2) on the map [m]; those that are absent have
    none, but the coast is then the outline of the grid's sea. Raises InputError."""
    outlines = {}
    for name in NAMES:
        path = folder / "lines" / f"{name}.geojson"
        geometries = read_geometries(path) if path.is_file() else []
        outlines[name] = [
            to_metres(grid, grid.project(*shapely.get_coordinates(line).T))
            for line in clip_outlines(geometries, grid.region)
        ]
    outlines["coast"] = outlines["coast"] or _outline_sea(grid)
    return outlines


def _outline_sea(grid: MapGrid) -> list[np.ndarray]:
    """Lines between the cells of sea and of land."""
    rows, columns = grid.sea.shape
    width, height = grid.size
    x = ((np.arange(columns) + 0.5) / columns - 0.5) * width
    y = ((np.arange(rows) + 0.5) / rows - 0.5) * height
    return contour_generator(x, y, grid.sea.astype(float)).lines(0.5)


def draw_graticule(grid: MapGrid) -> tuple[list[np.ndarray], list[tuple[float, float, str]]]:
    """Meridians and parallels as lines on the map [m], and labels (x, y, text) where they enter it:
    meridians at the lower edge, parallels at the left one."""
    west, east, south, north = grid.region
    lines, labels = [], []
    for longitude in choose_ticks(west, east, MOST_LABELS):
        lines.append(_project(grid, np.full(POINTS, longitude), np.linspace(south, north, POINTS)))
        _label(grid, lines[-1], 1, _degrees(longitude, "EW"), labels)
    for latitude in choose_ticks(south, north, MOST_LABELS):
        lines.append(_project(grid, np.linspace(west, east, POINTS), np.full(POINTS, latitude)))
        _label(grid, lines[-1], 0, _degrees(latitude, "NS"), labels)
    return lines, labels


def _project(grid: MapGrid, longitude, latitude) -> np.ndarray:
    return to_metres(grid, grid.project(longitude, latitude))


def _label(grid: MapGrid, line: np.ndarray, across: int, text: str, labels: list) -> None:
    """Add a label where a line crosses the lower (across 1) or left (0) edge, not in a corner."""
    half = np.array(grid.size) / 2
    line = line[np.argsort(line[:, across])]
    along = np.interp(-half[across], line[:, across], line[:, 1 - across])
    if np.abs(along) < LABELLED * half[1 - across]:
        place = (along, -half[1]) if across else (-half[0], along)
        labels.append((*map(float, place), text))


def _degrees(value: float, letters: str) -> str:
    if letters == "EW":
        value = (value + 180) % 360 - 180
    side = letters[int(value < 0)] if value else ""
    return f"{abs(round(value, 4)):g}°{side}"
