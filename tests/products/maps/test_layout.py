"""Everything on a picture has its place."""

import itertools

import pytest

from tests.products.maps.invented import make_island, make_painter, make_stations

SHAPES = {"square": (60, 60), "wide": (10, 90), "tall": (90, 10), "two cells": (2, 2)}


@pytest.mark.parametrize("shape", SHAPES.values(), ids=SHAPES.keys())
def test_nothing_overlaps_or_leaves_the_picture(shape):
    fields = make_island(rows=shape[0], columns=shape[1])
    painter = make_painter(fields, limits=(0, 60))
    painter.draw_hour(fields.isel(time=0), *hour_of_stations(painter, fields))
    width, height = painter.layout.size
    left, bottom, across, up = painter.layout.map_box
    boxes = [text.get_window_extent().extents for text in painter.figure.texts]
    bar = painter.figure.axes[1]
    renderer = painter.figure.canvas.get_renderer()
    boxes += [bar.get_tightbbox(renderer).extents, (left, bottom, left + across, bottom + up)]
    for box in boxes:
        assert box[0] >= 0 and box[1] >= 0 and box[2] <= width and box[3] <= height
    for one, other in itertools.combinations(boxes, 2):
        assert min(one[2], other[2]) <= max(one[0], other[0]) or min(one[3], other[3]) <= max(
            one[1], other[1]
        )


def hour_of_stations(painter, fields):
    stations = make_stations(fields, [(0, 0), (1, 1)])
    return stations.isel(time=0), painter.place_stations(stations)


def test_colour_bar_shows_the_limits_of_the_run(painter):
    assert painter.figure.axes[1].get_ylim() == (5, 40)
