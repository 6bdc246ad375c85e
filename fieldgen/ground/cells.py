"""A grid of cells of any size and shape, by their corners, as a model may have it."""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property

import numpy as np
import pyproj
import shapely

from fieldgen.errors import GridError

CORNERS = ((0, 0), (0, 1), (1, 1), (1, 0))
"""Row and column steps from a cell's first corner to each of its corners, in turn."""

OVERLAP = 1e-6
"""Share by which cells may cover more than their outline: rounding."""

_NEWTON_STEPS = 30


@dataclass(frozen=True)
class CellGrid:
    """Quadrilateral cells in a CRS, in the order of rows and columns that the model has.

    x, y (ny, nx) : centres, units of the CRS; longitudes are continuous
    corner_x, corner_y (ny, nx, 4) : corners in the order of `CORNERS`
    along_axes : whether x follows from the column and y from the row alone
    """

    crs: pyproj.CRS
    x: np.ndarray
    y: np.ndarray
    corner_x: np.ndarray
    corner_y: np.ndarray
    along_axes: bool

    @property
    def is_even(self) -> bool:
        """Whether all cells are alike, in rows and columns of the CRS."""
        return False

    @property
    def shape(self) -> tuple[int, int]:
        """(ny, nx)."""
        return self.x.shape

    @property
    def is_projected(self) -> bool:
        """Whether x and y are lengths rather than degrees."""
        return self.crs.is_projected

    @property
    def description(self) -> str:
        """Size of the cells and CRS, for people."""
        unit = "" if self.is_projected else " degrees"
        low, high = self.sides.min(), self.sides.max()
        return f"cells of {low:.4g} to {high:.4g}{unit} in {self.crs.name}"

    @property
    def identity(self) -> bytes:
        """What tells the grid from another."""
        parts = (self.x, self.y, self.corner_x, self.corner_y)
        return self.crs.to_wkt().encode() + b"".join(part.tobytes() for part in parts)

    @cached_property
    def sides(self):
        """Square root of each cell's area (ny, nx), units of the CRS."""
        return np.sqrt(np.abs(_areas(self.corner_x, self.corner_y)))

    @property
    def axis_bounds(self) -> tuple[np.ndarray, np.ndarray]:
        """Bounds (nx, 2) of the columns and (ny, 2) of the rows, of a grid along axes."""
        return self.corner_x[0, :, [0, 1]].T, self.corner_y[:, 0, [0, 3]]

    @cached_property
    def longitude_latitude(self):
        """Longitude and latitude (ny, nx) [degrees] of the cell centres."""
        to_degrees = pyproj.Transformer.from_crs(self.crs, "EPSG:4326", always_xy=True)
        return to_degrees.transform(self.x, self.y)

    @cached_property
    def edge(self):
        """Corners (k, 2) around the grid as a whole, in turn."""
        corners = np.stack([self.corner_x, self.corner_y], axis=-1)
        sides = (corners[0, :, 0], corners[:, -1, 1], corners[-1, ::-1, 2], corners[::-1, 0, 3])
        return np.concatenate(sides)

    @cached_property
    def outline(self) -> shapely.Polygon:
        """Polygon around the grid as a whole."""
        return shapely.Polygon(self.edge)

    def locate(self, longitude, latitude):
        """Grid coordinates x, y (n,) of points in degrees; not finite where the CRS fails."""
        to_grid = pyproj.Transformer.from_crs("EPSG:4326", self.crs, always_xy=True)
        x, y = (np.asarray(part) for part in to_grid.transform(longitude, latitude))
        return (x if self.is_projected else near(x, self.x.mean())), y

    def contains(self, longitude, latitude):
        """Whether points (n,) [degrees] lie on the grid."""
        return self.holds(*self.locate(longitude, latitude))

    def holds(self, x, y):
        """The same of points in the grid's coordinates."""
        shapely.prepare(self.outline)
        return shapely.intersects_xy(self.outline, x, y)

    def points(self, rows: slice, side: int):
        """Places x, y (side, side, k, nx) spread evenly over each cell of k rows."""
        share = (np.arange(side) + 0.5) / side
        along = np.stack([1.0 - share, share])
        weights = [np.outer(along[row], along[column]) for row, column in CORNERS]
        return tuple(
            np.einsum("jic,cvu->vuji", corner[rows], weights, optimize=True)
            for corner in (self.corner_x, self.corner_y)
        )

    def fraction(self, x, y):
        """Row and column (n,) of places in the grid's coordinates, counted in cells from the first
        centre; linear between four centres, and beyond the outermost.

        By Newton's method from the nearest centre, which alone counts where that fails.
        """
        from scipy.spatial import cKDTree

        target = np.stack([np.asarray(x, float), np.asarray(y, float)])
        target = np.where(np.isfinite(target), target, [[self.x.mean()], [self.y.mean()]])
        centres = np.stack([self.x.ravel(), self.y.ravel()])
        _, nearest = cKDTree(centres.T).query(target.T)
        start = np.stack(np.unravel_index(nearest, self.shape)).astype(float)
        place, most = start.copy(), np.array(self.shape)[:, None]
        for _ in range(_NEWTON_STEPS):
            miss, by_row, by_column = self._between_centres(place, target)
            determinant = by_row[0] * by_column[1] - by_row[1] * by_column[0]
            with np.errstate(divide="ignore", invalid="ignore"):
                step = np.stack([
                    miss[0] * by_column[1] - miss[1] * by_column[0],
                    miss[1] * by_row[0] - miss[0] * by_row[1],
                ]) / determinant  # fmt: skip
            place = np.clip(place + np.clip(np.nan_to_num(step), -1.0, 1.0), -1.0, most)
        miss, by_row, by_column = self._between_centres(place, target)
        found = np.hypot(*miss) < 1e-6 * (np.hypot(*by_row) + np.hypot(*by_column))
        return tuple(np.where(found, place, start))

    def _between_centres(self, place, target):
        """Way (2, n) from places (2, n), as of `fraction`, to targets, and how places change by row
        and by column."""
        low = np.clip(np.floor(place).astype(int), 0, np.array(self.shape)[:, None] - 2)
        up, right = place - low
        lower_left, lower_right, upper_right, upper_left = (
            np.stack([part[low[0] + row, low[1] + column] for part in (self.x, self.y)])
            for row, column in CORNERS
        )
        lower = (1.0 - right) * lower_left + right * lower_right
        upper = (1.0 - right) * upper_left + right * upper_right
        by_column = (1.0 - up) * (lower_right - lower_left) + up * (upper_right - upper_left)
        return target - ((1.0 - up) * lower + up * upper), upper - lower, by_column


def near(longitude, middle: float):
    """Longitudes [degrees] counted so that they lie within 180 of the middle."""
    return longitude - 360.0 * np.rint((longitude - middle) / 360.0)


def corners_of_nodes(nodes):
    """Corners (ny, nx, 4) of cells between the nodes (ny + 1, nx + 1) of a net."""
    ny, nx = nodes.shape[0] - 1, nodes.shape[1] - 1
    return np.stack([nodes[row : row + ny, column : column + nx] for row, column in CORNERS], -1)


def nodes_between(centres):
    """Nodes (ny + 1, nx + 1) halfway between centres (ny, nx); the outermost as far outside."""
    for axis in (0, 1):
        first, second, last, before = (np.take(centres, [k], axis) for k in (0, 1, -1, -2))
        padded = np.concatenate([2 * first - second, centres, 2 * last - before], axis)
        count = padded.shape[axis]
        low, high = (np.take(padded, range(k, count - 1 + k), axis) for k in (0, 1))
        centres = 0.5 * (low + high)
    return centres


def check_cells(grid: CellGrid, where) -> CellGrid:
    """The grid; raises GridError for cells that are folded, of no size, or overlap."""
    turns = np.stack([_turn(grid, corner) for corner in range(4)])
    direction = np.sign(np.median(turns))
    bad = ~(turns * direction > 0.0).all(axis=0)
    if bad.any():
        row, column = (int(part[0]) for part in np.nonzero(bad))
        raise GridError(
            f"{where}: the cell of row {row}, column {column} (counted from 0) is folded, turned "
            f"over or of no size, as are {int(bad.sum()) - 1} others, expected corners that go "
            "around each cell in the same direction. Check the coordinates and their bounds."
        )
    whole = np.abs(_areas(grid.corner_x, grid.corner_y)).sum()
    if not grid.outline.is_valid or whole > grid.outline.area * (1.0 + OVERLAP):
        raise GridError(
            f"{where}: cells overlap: they cover {whole:.6g}, and their outline holds "
            f"{grid.outline.area:.6g} (units of the coordinates), expected cells side by side. "
            "Check the coordinates and their bounds."
        )
    return grid


def _turn(grid: CellGrid, corner: int):
    """Cross product (ny, nx) of the sides that meet at a corner; its sign tells the direction."""
    x, y = grid.corner_x, grid.corner_y
    before, after = (corner - 1) % 4, (corner + 1) % 4
    come = x[..., corner] - x[..., before], y[..., corner] - y[..., before]
    go = x[..., after] - x[..., corner], y[..., after] - y[..., corner]
    return come[0] * go[1] - come[1] * go[0]


def _areas(x, y):
    """Signed area (ny, nx) of quadrilaterals (ny, nx, 4)."""
    first = x[..., 2] - x[..., 0], y[..., 2] - y[..., 0]
    second = x[..., 3] - x[..., 1], y[..., 3] - y[..., 1]
    return 0.5 * (first[0] * second[1] - first[1] * second[0])
