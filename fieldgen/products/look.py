"""The one look of all pictures: colours, patterns and letters, as plain data.

Nothing here loads a drawing library, so that any product can share it with the maps.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

# Sand (dry) to deep blue (moist) in even steps of CIELAB distance, lightness always falling from
# L* = 94 to 24. The order survives a grey print and all common kinds of colour blindness.
PWV_COLOURS = (
    "#feeccb", "#e2dcb1", "#c2cd9f", "#a1be94", "#82af8f", "#65a08c", "#4d918a",
    "#3c8289", "#307387", "#286584", "#24567f", "#224779", "#21366e",
)  # fmt: skip
PWV_TITLE = "Precipitable water vapour"
PWV_LABEL = "kg m⁻² (= mm)"
PWV_STEP = 5.0  # between labels of the colour bar, twice that where they crowd [kg m-2]

MISSING_COLOUR = "#dedede"  # apart from all of PWV_COLOURS, also to the colour-blind
MISSING_LABEL = "no field: too few stations"
INK_COLOUR = "#1a1a1a"
QUIET_COLOUR = "#5a5a5a"
PAPER_COLOUR = "#ffffff"
COAST_COLOUR = "#1a1a1a"
RIVER_COLOUR = "#d6eaf5"

# The relief may move the brightness of a colour by this share either way, less than one step of
# PWV_COLOURS: enough to see valleys, too little to be read as vapour.
RELIEF_STRENGTH = 0.07
HATCH_STRENGTH = 0.5  # how far the ink of a pattern covers the colour below

FONT_FAMILY = "DejaVu Sans"
# Letters [points at 100 dots per inch]; the smallest ones are the values of stations.
TITLE_SIZE, TEXT_SIZE, SMALL_SIZE, VALUE_SIZE = 19.0, 13.0, 10.5, 9.0


@dataclass(frozen=True)
class Hatch:
    """A pattern laid over cells that carry a flag, and its words in the legend."""

    label: str
    inked: Callable  # whether pixels are inked, from their row and column with the top row first


# Flag meaning, as in the attribute flag_meanings of a field -> how such cells are marked.
HATCHES = {
    "extrapolated_in_height": Hatch(
        "beyond the stations' heights", lambda row, column: (row + column) % 9 == 0
    ),
    "far_from_stations": Hatch(
        "far from stations",
        lambda row, column: (row % 8 < 2) & ((column + row // 8 % 2 * 4) % 8 < 2),
    ),
    "sigma_above_5_kg_m2": Hatch(
        "uncertainty above 5 kg m⁻²", lambda row, column: (row - column) % 9 == 0
    ),
}
"""Lines rising to the right, dots in staggered rows, lines falling to the right."""

PUBLIC_HATCH = Hatch(
    "", lambda row, column: ((row + 6) % 12 < 3) & ((column + (row + 6) // 12 % 2 * 6) % 12 < 3)
)
"""Dots for all cells that carry a flag of `HATCHES`, large enough for a small screen."""

SERIES_COLOUR, BAND_COLOUR, NETWORK_COLOUR = "#224779", "#a9c3da", "#8a6d3b"
"""Of plots over time: a station, its error band, and all stations together."""

REASON_MARKERS = ("x", "^", "v", "s", "D", "P", "*")
REASON_COLOUR = "#b5471b"
"""Of values not used, apart from the colours of plots to the colour-blind and in a grey print."""

PLOT_STYLE = {
    "font.family": FONT_FAMILY,
    "font.size": TEXT_SIZE,
    "axes.titlelocation": "left",
    "axes.spines.top": False,
    "axes.spines.right": False,
    "axes.edgecolor": QUIET_COLOUR,
    "axes.axisbelow": True,
    "axes.grid": True,
    "grid.color": MISSING_COLOUR,
    "text.parse_math": False,
    "legend.frameon": False,
}
"""Settings of matplotlib for plots over time."""
