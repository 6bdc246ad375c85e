"""What the map can show: the table of layers, each with limits that hold for the whole page."""

from __future__ import annotations

from dataclasses import asdict, dataclass

import numpy as np
from bokeh.palettes import BrBG, Oranges, Purples, interp_palette

from fieldgen.products import look
from fieldgen.products.page.reading import Hours

COLOURS = 256
CHANGES = (1, 3, 6)  # [h]
UNIT = "kg m⁻²"

PWV_PALETTE = tuple(interp_palette(look.PWV_COLOURS, COLOURS))
CHANGE_PALETTE = tuple(interp_palette(BrBG[11][-2:0:-1], COLOURS))
SIGMA_PALETTE = tuple(interp_palette(Purples[9][::-1], COLOURS))
PROBABILITY_PALETTE = tuple(interp_palette(Oranges[9][::-1], COLOURS))
"""Dry to moist as on the maps; brown and green, light in the middle
(without the darkest of either); light to dark: all keep their
order for the colour-blind (the last three are Brewer's, 2003)."""


@dataclass(frozen=True)
class Layer:
    """One layer.

    kind : how the browser gets it: "field" (as packed), "change" or "probability"
    array : the packed array it comes from
    hours : a change's
    short : on its button; title, unit : at the colour bar
    low, high : fixed colour limits; values beyond take the colours of the ends
    digits : decimals of a value in words
    """

    kind: str
    array: str
    short: str
    title: str
    unit: str
    low: float
    high: float
    palette: tuple[str, ...]
    digits: int = 1
    hours: int = 0

    def as_dict(self) -> dict:
        """Plain values for the browser."""
        return asdict(self)


def list_layers(hours: Hours) -> list[Layer]:
    """The layers of a page. A change over hours of which the page has no pair is left out."""
    fields = hours.fields
    reference = fields["pwv_at_reference"].attrs.get("reference_height", np.nan)
    at_reference = f"PWV above {reference:.0f} m" if np.isfinite(reference) else "PWV at reference"
    return [
        Layer("field", "pwv", "PWV", look.PWV_TITLE, look.PWV_LABEL, *hours.limits, PWV_PALETTE),
        Layer(
            "field", "pwv_at_reference", at_reference,
            f"{look.PWV_TITLE} {at_reference.removeprefix('PWV ')}", look.PWV_LABEL,
            *_round_limits(fields["pwv_at_reference"].values, look.PWV_STEP), PWV_PALETTE,
        ),
        *_changes(fields["pwv"].values, fields["time"].values),
        Layer(
            "field", "pwv_sigma", "Uncertainty", "Standard error of PWV", UNIT,
            *_round_limits(fields["pwv_sigma"].values, 0.5), SIGMA_PALETTE, digits=2,
        ),
        Layer(
            "probability", "pwv", "Probability", "Probability that PWV exceeds", "%", 0.0, 100.0,
            PROBABILITY_PALETTE, digits=0,
        ),
    ]  # fmt: skip


def _changes(pwv: np.ndarray, time: np.ndarray) -> list[Layer]:
    layers = []
    for hours in CHANGES:
        _, later, earlier = np.intersect1d(
            time, time + np.timedelta64(hours, "h"), return_indices=True
        )
        if later.size:
            size = _usual_size(pwv[later] - pwv[earlier])
            title = f"Change of PWV over {hours} h"
            layers.append(
                Layer(
                    "change", "pwv", f"Change {hours} h", title, UNIT, -size, size, CHANGE_PALETTE,
                    hours=hours,
                )
            )  # fmt: skip
    return layers


def _usual_size(change: np.ndarray) -> float:
    """A round size [kg m-2] that all but one of a hundred changes keep within; at least 1."""
    known = np.abs(change[np.isfinite(change)])
    return max(float(np.ceil(np.quantile(known, 0.99))), 1.0) if known.size else 1.0


def _round_limits(values: np.ndarray, step: float) -> tuple[float, float]:
    """Multiples of a step around all values, at least one step apart."""
    known = values[np.isfinite(values)]
    if not known.size:
        return 0.0, step
    low = float(np.floor(known.min() / step) * step)
    return low, max(float(np.ceil(known.max() / step) * step), low + step)


def threshold_limits(limits: tuple[float, float]) -> dict:
    """Ends and first place of the threshold's slider [kg m-2]: whole numbers."""
    low, high = (int(np.floor(limits[0])), int(np.ceil(limits[1])))
    return {"low": low, "high": high, "first": round(low + 0.7 * (high - low))}
