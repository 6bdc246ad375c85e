"""The picture of areas over time, by what is drawn."""

import numpy as np
import pyproj
import pytest
import shapely
from PIL import Image

from fieldgen.areas.picture import MOST_PANELS, draw_series, write_picture
from fieldgen.areas.series import AreaSeries
from fieldgen.readers.areas import Areas


def make_series(names, hours=12):
    """Areas whose mean rises by 1 kg m-2 an hour, 0.5 either way."""
    count = len(names)
    start = np.datetime64("2026-03-01T00:00", "s") + np.timedelta64(3600, "s") * np.arange(hours)
    areas = Areas(names, np.array([shapely.box(0, 0, 1, 1)] * count), pyproj.CRS("EPSG:4326"), [])
    pwv = 10.0 + np.arange(hours) + np.arange(count)[:, None]
    return AreaSeries(
        areas,
        np.stack([start, start + np.timedelta64(3600, "s")], axis=1),
        np.full(count, 2e8),
        pwv,
        np.full(pwv.shape, 0.5),
        np.ones(pwv.shape),
        np.ones(pwv.shape, int),
    )


def test_each_area_has_its_line_and_its_band():
    """Round trip: the artists hold the series; names stay text, on one line."""
    series = make_series(["Vorle", "$x^2$\nEsk"])
    figure = draw_series(series, "Test isle")
    assert [axes.get_title("left") for axes in figure.axes] == [
        "Vorle, 200 km²",
        "$x^2$ Esk, 200 km²",
    ]
    for row, axes in enumerate(figure.axes):
        np.testing.assert_array_equal(axes.lines[0].get_ydata(), series.pwv[row])
        heights = axes.collections[0].get_paths()[0].vertices[:, 1]
        assert heights.min() == series.pwv[row, 0] - 0.5
        assert heights.max() == series.pwv[row, -1] + 0.5
    assert any("Not a warning product" in text.get_text() for text in figure.texts)


@pytest.mark.parametrize("count", [1, 5, 20])
def test_nothing_of_the_picture_overlaps(count, tmp_path):
    """Negative control: titles, panels and words keep apart, however many areas there are."""
    series = make_series([f"Area {n}" for n in range(count)])
    figure = draw_series(series, "Test isle")
    assert len(figure.axes) == min(count, MOST_PANELS)
    figure.canvas.draw()
    renderer = figure.canvas.get_renderer()
    texts = [*figure.texts, *(axes._left_title for axes in figure.axes)]
    boxes = [text.get_window_extent(renderer) for text in texts]
    for number, box in enumerate(boxes):
        assert box.x0 >= 0 and box.x1 <= figure.bbox.width, texts[number]
        assert not any(box.overlaps(other) for other in boxes[number + 1 :]), texts[number]
    path = write_picture(series, "Test isle", tmp_path / "areas.png")
    with Image.open(path) as picture:
        assert picture.size[0] == 1100
