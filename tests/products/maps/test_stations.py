"""Dots, crosses and values of stations."""

import itertools

import numpy as np
import pytest

from fieldgen.products.maps.stations import place_values
from tests.products.maps.invented import make_painter, make_stations


def test_station_dot_lies_on_the_cell_of_its_position(small):
    """Second derivation: longitude and latitude through the projection, cells by counting."""
    painter = make_painter(small)
    marks = painter.place_stations(make_stations(small, [(11, 15), (2, 3)]))
    left, bottom, width, height = painter.layout.map_box
    on_page = painter.axes.transData.transform(marks.positions)
    for (row, column), (across, up) in zip([(11, 15), (2, 3)], on_page, strict=True):
        assert across == pytest.approx(left + (column + 0.5) / 16 * width, abs=0.5)
        assert up == pytest.approx(bottom + (row + 0.5) / 12 * height, abs=0.5)


def test_show_fills_used_stations_and_crosses_out_the_others(island, painter):
    stations = make_stations(island, [(20, 30), (50, 50), (70, 60), (40, 70)])
    marks = painter.place_stations(stations)
    pwv, flag = np.array([10.0, 20.0, np.nan, 30.0]), np.array([0, 0, 0, 4])
    marks.show(pwv, flag, painter.colours, painter.norm)
    np.testing.assert_allclose(marks.dots.get_offsets(), marks.positions[:2])
    np.testing.assert_allclose(marks.crosses.get_offsets(), marks.positions[2:])
    expected = painter.colours(painter.norm([10.0, 20.0]))
    np.testing.assert_allclose(marks.dots.get_facecolors(), expected)
    assert len(marks.values.get_paths()) == len(marks.halos.get_paths()) == 2
    np.testing.assert_allclose(marks.values.get_offsets()[1], marks.places[1])


def test_place_values_keeps_values_off_dots_and_one_another():
    """Second derivation: all boxes compared in pairs, for a crowd with too little room."""
    crowd = np.random.default_rng(5).uniform(0, 300, (60, 2))
    places = place_values(crowd, (0, 0, 300, 300))
    assert 10 < len(places) < 60
    half = np.array([11, 7.5])
    boxes = [np.concatenate([place - half, place + half]) for place in places.values()]
    assert all(box.min() >= 0 and box.max() <= 300 for box in boxes)
    boxes += [np.r_[dot - 8, dot + 8] for dot in crowd]
    for one, other in itertools.product(boxes[: len(places)], boxes):
        overlap = np.minimum(one[2:], other[2:]) - np.maximum(one[:2], other[:2])
        assert one is other or overlap.min() <= 1e-9


def test_place_values_leaves_out_stations_beyond_the_map():
    assert list(place_values(np.array([[50.0, 50], [-20, 50], [50, 120]]), (0, 0, 100, 100))) == [0]
