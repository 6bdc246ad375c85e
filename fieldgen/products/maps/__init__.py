"""Hourly maps: one picture an hour, all of a run with the same base and the same colours.

A map shows the cells of the field as they are, in the projection of the grid. The relief changes
the brightness of a land cell by at most `look.RELIEF_STRENGTH` either way, and over all land not
at all; cells of the sea have exactly the colours of the colour bar. Nothing is read or fetched
beyond the geometries that the caller passes.

In all modules here, pictures are arrays (row, column, channel) with the top row first; fields
have the south row first. Positions on a picture are counted in pixels from its lower left corner.
"""

from fieldgen.products.maps.files import copy_newest, write_latest, write_maps
from fieldgen.products.maps.geometries import read_geometries
from fieldgen.products.maps.painter import MapPainter

__all__ = ["MapPainter", "copy_newest", "read_geometries", "write_latest", "write_maps"]
