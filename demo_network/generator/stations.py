"""Where the invented receivers and weather sensors stand."""

from dataclasses import dataclass

import numpy as np
from scipy.ndimage import gaussian_filter

from generator.columns import terrain_at
from generator.setting import (
    TERRAIN_MARGIN,
    TERRAIN_SPACING,
    cell_centres,
    geographic,
    random_numbers,
    undulation,
)

COUNTRY = "XQV"  # from the codes that ISO 3166 leaves to its users
# kind of place, number of stations, lowest and highest ground [m], ending of the name
KINDS = [
    ("coast", 13, 2, 90, "Haven"),
    ("valley", 12, 60, 520, ""),
    ("upland", 7, 480, 1000, "Moor"),
    ("pass", 5, 1000, 1500, "Pass"),
    ("summit", 3, 1550, 2300, "Peak"),
]
NAMES = [
    "Abvorne",
    "Belquith",
    "Cravunde",
    "Dolmezza",
    "Elnovar",
    "Farzule",
    "Gwemdral",
    "Harvosk",
    "Ildrune",
    "Jaspelk",
    "Korvadine",
    "Lumbreth",
    "Mezzorn",
    "Nivaldur",
    "Oskreve",
    "Pelvonny",
    "Quarnel",
    "Rusquil",
    "Skelvane",
    "Tambrosk",
    "Ulvenne",
    "Vorquist",
    "Wembruk",
    "Xandrove",
    "Yelmarch",
    "Zurvane",
    "Arzuvel",
    "Brovinde",
    "Cuspavar",
    "Drelmuz",
    "Estrovane",
    "Fulgaresk",
    "Grinzole",
    "Hovelquar",
    "Istrumel",
    "Jozvanne",
    "Kelbrunz",
    "Lozhmere",
    "Mirquade",
    "Nolvesk",
]
APART = 9_000  # least distance between stations [m]
APART_IN_TOWN = 3_000
TOWNS = {
    3: 0,
    4: 0,
    5: 0,
    9: 8,
    10: 8,
    15: 13,
}  # stations placed within TOWN_RADIUS of an earlier one
TOWN_RADIUS = 9_000
EMPTY = (446_000, 5_322_000, 24_000)  # easting, northing, radius of a region nobody equipped [m]
TWIN_OF = 0  # a second receiver stands 10 m from this one

# weather sensors: at these stations (number in the list), or alone
SENSORS_AT = [0, 2, 6, 11, 14, 17, 22, 25, 28, 33, 38]
SENSORS_ALONE = [
    ("Olbrazun", 3),
    ("Pluvenesk", 160),
    ("Trauvorn", 620),
    ("Zhelquane", 1240),
]  # near this height [m]


@dataclass
class Sites:
    """One entry a site in each array; heights are those the instrument really has."""

    identifier: list
    name: list
    kind: list
    easting: np.ndarray
    northing: np.ndarray
    orthometric_height: np.ndarray

    @property
    def ellipsoidal_height(self):
        """Height above the ellipsoid [m]."""
        return self.orthometric_height + undulation(self.easting, self.northing)

    @property
    def position(self):
        """Longitude and latitude [degree]."""
        return geographic(self.easting, self.northing)


def receivers_on(height):
    """The receivers: crowded near towns, absent from one region, two of them side by side."""
    random = random_numbers("stations")
    kinds = [kind for kind in KINDS for _ in range(kind[1])]
    places = []
    for number, kind in enumerate(kinds):
        places.append(_choose_place(height, kind, places, number, random))
    easting, northing = np.array(places).T
    mast = random.uniform(3, 12, len(places))
    ground = terrain_at(height, easting, northing)
    relief = random.normal(0, 1, len(places)) * np.minimum(
        20, 0.03 * ground
    )  # what 500 m cells do not resolve
    names = [f"{name} {kind[4]}".strip() for name, kind in zip(NAMES, kinds, strict=True)]
    sites = Sites(
        [f"{name[:4].upper()}00{COUNTRY}" for name in names],
        names,
        [kind[0] for kind in kinds],
        easting,
        northing,
        np.maximum(ground + relief, 1) + mast,
    )
    return _with_twin(sites)


def sensors_on(height, receivers):
    """The weather sensors, most of them beside a receiver, metres above or below its antenna."""
    random = random_numbers("sensors")
    beside = np.array(SENSORS_AT)
    alone = [_lone_place(height, level, random) for _, level in SENSORS_ALONE]
    lone_easting, lone_northing = np.array(alone).T
    return Sites(
        [receivers.identifier[number] for number in SENSORS_AT]
        + [name[:4].upper() for name, _ in SENSORS_ALONE],
        [receivers.name[number] for number in SENSORS_AT] + [name for name, _ in SENSORS_ALONE],
        ["beside"] * len(beside) + ["alone"] * len(alone),
        np.concatenate([receivers.easting[beside] + 12, lone_easting]),
        np.concatenate([receivers.northing[beside] - 9, lone_northing]),
        np.concatenate(
            [
                np.maximum(
                    receivers.orthometric_height[beside] + random.uniform(-7, 3, len(beside)), 1.5
                ),
                terrain_at(height, lone_easting, lone_northing) + 1.5,
            ]
        ),
    )


def _choose_place(height, kind, places, number, random):
    """Easting and northing of a place of a kind, away from those already chosen."""
    ground, lowest, highest = height, kind[2], kind[3]
    suited = (ground >= lowest) & (ground <= highest)
    if kind[0] == "valley":
        suited &= ground < gaussian_filter(ground, 8) - 40
    candidates = _centres(suited)
    candidates = random.permutation(candidates)
    if number in TOWNS:
        town = np.array(places[TOWNS[number]])
        candidates = candidates[np.hypot(*(candidates - town).T) < TOWN_RADIUS]
    least = APART_IN_TOWN if number in TOWNS else APART
    away = np.hypot(*(candidates - EMPTY[:2]).T) > EMPTY[2]
    for place in places:
        away &= np.hypot(*(candidates - place).T) > least
    return candidates[away][0] + random.uniform(-200, 200, 2)


def _lone_place(height, level, random):
    """Easting and northing of a cell near a height."""
    candidates = _centres((height > 0) & (np.abs(height - level) < 0.05 * level + 2))
    return candidates[random.integers(len(candidates))]


def _centres(chosen):
    """Easting and northing of chosen terrain cells."""
    easting, northing = cell_centres(TERRAIN_SPACING, TERRAIN_MARGIN)
    rows, columns = np.nonzero(chosen)
    return np.column_stack([easting[columns], northing[rows]])


def _with_twin(sites):
    """The sites with a second receiver 10 m from one of them, sharing its four-character code."""
    first = TWIN_OF
    return Sites(
        [*sites.identifier, sites.identifier[first].replace("00" + COUNTRY, "01" + COUNTRY)],
        [*sites.name, sites.name[first] + " Annexe"],
        [*sites.kind, sites.kind[first]],
        np.append(sites.easting, sites.easting[first] + 8),
        np.append(sites.northing, sites.northing[first] + 6),
        np.append(sites.orthometric_height, sites.orthometric_height[first] + 0.4),
    )
