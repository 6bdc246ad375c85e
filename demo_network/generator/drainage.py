"""Water on a raster: hollows, where each cell drains to, how much land drains through it."""

import heapq

import numpy as np

NEIGHBOURS = [(-1, -1), (-1, 0), (-1, 1), (0, -1), (0, 1), (1, -1), (1, 0), (1, 1)]
FLOOR_SLOPE = 0.01  # rise per cell of a filled hollow [m]: enough to drain it


def fill_hollows(height, sea):
    """Height [m] with every hollow filled to just above its outlet; priority flood from the sea."""
    width = height.shape[1] + 2
    surface = np.pad(height.astype(float), 1, constant_values=np.inf).ravel().tolist()
    done = np.pad(sea, 1, constant_values=True).ravel()
    queue = [
        (surface[cell], cell)
        for cell in np.flatnonzero(_shore(np.pad(sea, 1, constant_values=False)).ravel())
    ]
    heapq.heapify(queue)
    done = done.tolist()
    steps = [row * width + column for row, column in NEIGHBOURS]
    while queue:
        level, cell = heapq.heappop(queue)
        for neighbour in (cell + step for step in steps):
            if not done[neighbour]:
                done[neighbour] = True
                surface[neighbour] = max(surface[neighbour], level + FLOOR_SLOPE)
                heapq.heappush(queue, (surface[neighbour], neighbour))
    return np.array(surface).reshape(-1, width)[1:-1, 1:-1]


def _shore(sea):
    """Sea cells with land beside them."""
    beside = np.zeros_like(sea)
    for row, column in NEIGHBOURS:
        beside |= np.roll(~sea, (row, column), (0, 1))
    return sea & beside


def receivers(height, sea, random=None, roughness=0.0):
    """Flat index of the cell each cell drains to, steepest way down; a sea cell drains to itself.

    `roughness` > 0 perturbs the slopes, which keeps valleys from following the raster's eight
    directions.
    """
    padded = np.pad(height, 1, constant_values=np.inf)
    rows, columns = height.shape
    index = np.arange(height.size).reshape(height.shape)
    steepest, target = np.zeros(height.shape), index.copy()
    for row, column in NEIGHBOURS:
        slope = (
            height - padded[1 + row : 1 + row + rows, 1 + column : 1 + column + columns]
        ) / np.hypot(row, column)
        if roughness:
            slope = slope * np.exp(roughness * random.standard_normal(height.shape))
        better = (slope > steepest) & ~sea
        steepest[better] = slope[better]
        target[better] = index[better] + row * columns + column
    return target.ravel()


def downstream_order(target):
    """Cells grouped by their number of steps to the sea, nearest group first."""
    steps = (target != np.arange(target.size)).astype(int)
    jump = target.copy()
    while np.any(steps[jump] > 0):
        steps, jump = steps + steps[jump], jump[jump]
    order = np.argsort(steps, kind="stable")
    return np.split(order, np.flatnonzero(np.diff(steps[order])) + 1)


def drained_area(target, cell_area):
    """Area that drains through each cell, its own included, in the units of `cell_area`."""
    area = np.full(target.size, float(cell_area))
    for group in reversed(downstream_order(target)[1:]):
        np.add.at(area, target[group], area[group])
    return area


def outlets(target):
    """Flat index of the sea cell that each cell ends in."""
    end = target.copy()
    while np.any(end != end[end]):
        end = end[end]
    return end
