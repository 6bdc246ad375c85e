"""The island's terrain: pushed up by invented uplift, carved by rivers, partly drowned."""

import numpy as np
from scipy import ndimage

from generator.drainage import downstream_order, drained_area, fill_hollows, receivers
from generator.noise import ridged_field, spectral_field
from generator.setting import CENTRE, TERRAIN_MARGIN, TERRAIN_SPACING, cell_centres, random_numbers

HIGHEST = 2_740  # height of the highest cell before drowning [m]
DROWNED = 70  # rise of the sea that turns lower valleys into bays [m]
STAGES = [(4, 45), (2, 25), (1, 10)]  # raster coarsening, and steps of carving at it
CARVING = 0.55  # how strongly a river draining 1 km2 cuts in one step
# east and north of the centre, half length, half width [km], bearing of the long axis, strength
MASSIFS = [
    (-38, 26, 46, 24, 62, 1.00),
    (34, -26, 52, 20, 118, 0.85),
    (52, 38, 24, 17, 20, 0.62),
    (-52, -38, 26, 20, 80, 0.45),
]


def terrain():
    """Orthometric height of the land in whole metres, 0 at sea, south row first, no hollows."""
    land, uplift = _shape_and_uplift()
    height = np.zeros((1, 1))
    for coarsening, steps in STAGES:
        height = _carve(height, land, uplift, coarsening, steps)
    height = height * (HIGHEST / height.max()) - DROWNED
    height = ndimage.gaussian_filter(height, 0.6)
    sea = ~_large_islands(height > 0)
    return fill_hollows(np.where(sea, 0, np.maximum(height, 1)).round(), sea).round()


def _offsets():
    """Distance east and north of the island's centre [km] on the terrain raster."""
    easting, northing = cell_centres(TERRAIN_SPACING, TERRAIN_MARGIN)
    return np.meshgrid((easting - CENTRE[0]) / 1000, (northing - CENTRE[1]) / 1000)


def _shape_and_uplift():
    """Where land is, and the uplift there (1 in the strongest massif)."""
    east, north = _offsets()
    random = random_numbers("island")
    shape, cell = east.shape, TERRAIN_SPACING / 1000
    bent_east, bent_north = (
        axis + 9 * spectral_field(shape, cell, 25, 4, random) for axis in (east, north)
    )
    roughness = spectral_field(shape, cell, 30, 3.2, random)
    outline = 1 - np.hypot(bent_east / 96, bent_north / 88) ** 2.2 + 0.20 * roughness
    land = _large_islands((outline > 0) & (np.abs(east) < 100) & (np.abs(north) < 90))
    ridges = ridged_field(shape, cell, 22, 4, random)
    uplift = 0.10 + sum(_massif(bent_east, bent_north, *massif) for massif in MASSIFS)
    uplift *= 0.55 + 0.75 * ridges + 0.12 * spectral_field(shape, cell, 12, 3, random)
    inland = 1 - np.exp(-ndimage.distance_transform_edt(land) * cell / 9)
    return land, np.clip(uplift, 0.03, None) * inland


def _massif(east, north, centre_east, centre_north, half_length, half_width, bearing, strength):
    """Elongated dome."""
    angle = np.radians(bearing)
    along = (east - centre_east) * np.sin(angle) + (north - centre_north) * np.cos(angle)
    across = (east - centre_east) * np.cos(angle) - (north - centre_north) * np.sin(angle)
    return strength * np.exp(-((along / half_length) ** 2) - (across / half_width) ** 2)


def _large_islands(land, smallest=40):
    """Land without specks of fewer than `smallest` cells."""
    label, _ = ndimage.label(land)
    return land & (np.bincount(label.ravel()) >= smallest)[label]


def _carve(height, land, uplift, coarsening, steps):
    """Height after uplift and river incision at one resolution (stream-power law, implicit)."""
    random = random_numbers(f"carving {coarsening}")
    land, uplift = (_resample(field, coarsening) for field in (land.astype(float), uplift))
    sea = land < 0.5
    cell = TERRAIN_SPACING / 1000 * coarsening
    factors = np.array(land.shape) / height.shape
    height = ndimage.zoom(height, factors, order=1, grid_mode=True, mode="nearest")
    height = np.where(sea, 0, np.maximum(height, 0) + random.uniform(0, 2, land.shape))
    for _ in range(steps):
        height = _carve_once(height, sea, uplift * 20, cell, random)
    return height


def _carve_once(height, sea, rise, cell, random):
    """One step: fill, route, lift, cut from the sea upstream, and let slopes creep."""
    height = fill_hollows(height, sea)
    target = receivers(height, sea, random, roughness=0.25)
    cut = CARVING / 20 * np.sqrt(drained_area(target, cell**2)) / cell
    height = (height + np.where(sea, 0, rise)).ravel()
    for group in downstream_order(target)[1:]:
        height[group] = (height[group] + cut[group] * height[target[group]]) / (1 + cut[group])
    height = height.reshape(sea.shape)
    creep = 0.02 / cell**2 * ndimage.laplace(height)
    return np.where(sea, 0, height + creep)


def _resample(field, coarsening):
    """Block means."""
    rows, columns = (size // coarsening for size in field.shape)
    return field.reshape(rows, coarsening, columns, coarsening).mean(axis=(1, 3))
