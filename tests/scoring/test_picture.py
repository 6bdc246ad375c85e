"""The picture of a score, by its artists."""

from itertools import combinations

import matplotlib.image
import numpy as np
import pytest
from matplotlib.text import Text

from fieldgen.products.metadata import CAUTION
from fieldgen.readers.network import read_network
from fieldgen.scoring.picture import SIZE, _name_place, draw_score, write_picture
from fieldgen.scoring.report import report_score
from fieldgen.scoring.trials import score_network
from tests.scoring.days import noisy_scene


@pytest.fixture(scope="module", params=[6, 45], ids=["few stations", "many stations"])
def report(request, tmp_path_factory):
    """Report of a small and of a large network."""
    folder = tmp_path_factory.mktemp("scene")
    hours = 2 if request.param == 6 else 26
    network = read_network(noisy_scene(folder, stations=request.param, hours=hours, gaps=0.0))
    return report_score(network, score_network(network))


def words_and_boxes(figure):
    """Every visible text of a figure with its box [pixels]."""
    renderer = figure.canvas.get_renderer()
    texts = [text for text in figure.findobj(Text) if text.get_text() and text.get_visible()]
    return [(text.get_text(), text.get_window_extent(renderer)) for text in texts]


def test_words_lie_on_the_paper_and_not_on_each_other(report):
    """A limit: tick labels beyond an axis are not drawn, so they do not count."""
    figure = draw_score(report)
    width, height = figure.bbox.size
    drawn = [(text, box) for text, box in words_and_boxes(figure) if _is_shown(figure, text, box)]
    assert len(drawn) > 40
    for text, box in drawn:
        assert box.x0 >= 0 and box.x1 <= width and box.y0 >= 0 and box.y1 <= height, text
    for (one, box), (other, other_box) in combinations(drawn, 2):
        assert not box.padded(-1.5).overlaps(other_box.padded(-1.5)), (one, other)


def _is_shown(figure, text, box) -> bool:
    """Whether a text is no tick label beyond its axis."""
    for axes in figure.axes:
        for axis, low, high in ((axes.xaxis, *sorted(axes.get_xlim())),
                                (axes.yaxis, *sorted(axes.get_ylim()))):  # fmt: skip
            for tick in axis.get_major_ticks():
                for label in (tick.label1, tick.label2):
                    same = label.get_text() == text and label.get_window_extent().p0[0] == box.x0
                    if same and not low - 1e-9 <= tick.get_loc() <= high + 1e-9:
                        return False
    return True


def test_picture_names_network_period_unit_version_and_caution(report):
    """Round trip."""
    words = " ".join(text for text, _ in words_and_boxes(draw_score(report)))
    for expected in ("Test isle", "2026-03-01 00:00", "kg m⁻²", "fieldgen 0.", CAUTION):
        assert expected in words


def test_write_picture_is_png_of_the_figures_size(report, tmp_path):
    """Round trip: the file reopened."""
    write_picture(report, tmp_path / "score.png")
    pixels = matplotlib.image.imread(tmp_path / "score.png")
    assert pixels.shape[:2] == (round(SIZE[1] * 100), round(SIZE[0] * 100))
    assert np.ptp(pixels[..., :3]) > 0.5


def test_names_keep_off_other_stations_and_edges():
    """A second derivation: to the right, else to the left if a station stands there or the picture
    ends, else above."""
    own, at_right, at_left = np.zeros((1, 2)), [[40.0, -3.0]], [[-40.0, -3.0]]
    far = (-500.0, 500.0)
    assert _name_place(own, far, 70.0) == (45.0, 0.0)
    assert _name_place(np.vstack([own, at_right]), far, 70.0) == (-45.0, 0.0)
    assert _name_place(own, (-500.0, 60.0), 70.0) == (-45.0, 0.0)
    assert _name_place(np.vstack([own, at_right, at_left]), far, 70.0) == (45.0, 15.0)
