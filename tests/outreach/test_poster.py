from itertools import combinations
from pathlib import Path

import numpy as np
import pytest

from fieldgen.outreach.folder import ProductFolder, observed_at
from fieldgen.outreach.language import read_language
from fieldgen.outreach.poster import Poster
from fieldgen.outreach.shapes import PAGE, SHAPES
from fieldgen.products import look
from tests.outreach.invented import EMPTY_HOUR, SCRIPT, write_folder
from tests.products.maps.invented import hex_bytes

GERMAN = read_language(Path("german"))
ALL = {**SHAPES, "page": PAGE}
LONG = f"{SCRIPT} $x_1^2$ Observatory of the Very Long Names of the Whole Archipelago {'w' * 90}"


@pytest.fixture(scope="module", params=["square map", "wide map", "tall map, long name"])
def one(request, tmp_path_factory):
    """A folder with a map of another shape."""
    path = tmp_path_factory.mktemp("products")
    sizes = {"wide map": {"columns": 80}, "tall map, long name": {"rows": 70, "network": LONG}}
    write_folder(path, **sizes.get(request.param, {}))
    return ProductFolder(path)


def draw(poster, folder, hour, share=0.5):
    step = list(folder.read_steps(folder.end - 6 * folder.step, folder.end))[hour]
    words = poster.language.hour(step.start, step.end)
    stations = folder.read_stations()
    return poster.draw_hour(step.field, observed_at(stations, step.end), words, share)


def boxes_of(poster):
    """Extents of all words of a picture but the message, and of its map."""
    texts = [text for text in poster.figure.texts if text is not poster.message]
    for axes in poster.figure.axes[1:]:
        low, high = axes.get_xlim()
        ticks = zip(axes.get_xticks(), axes.get_xticklabels(), strict=True)
        texts += [label for place, label in ticks if low <= place <= high]
    found = {
        f"{index} {text.get_text()!r}": text.get_window_extent()
        for index, text in enumerate(texts)
        if text.get_text()
    }
    return found | {"map": poster.axes.bbox}


@pytest.mark.parametrize("language", [read_language(), GERMAN], ids=["english", "german"])
@pytest.mark.parametrize("shape", ALL)
def test_nothing_is_cut_off_or_overlaps(one, shape, language):
    """Common practice, no source: extents of the artists, at every shape of picture and map."""
    poster = Poster(one, one.read_stations(), ALL[shape], language, in_film=shape != "page")
    draw(poster, one, 0)
    width, height = poster.layout.size
    boxes = boxes_of(poster)
    assert len(boxes) > 12
    for name, box in boxes.items():
        inside = box.x0 >= 0 and box.x1 <= width and box.y0 >= 0 and box.y1 <= height
        assert inside, (name, box)
    for (name, box), (other, second) in combinations(boxes.items(), 2):
        across = min(box.x1, second.x1) - max(box.x0, second.x0)
        up = min(box.y1, second.y1) - max(box.y0, second.y0)
        assert across <= 1 or up <= 3, (name, other)  # descenders may touch the line below


def test_letters_stay_large_enough_for_a_phone(folder):
    """Common practice, no source: 18 of 1080 pixels are 6.5 points on a screen 390 points wide."""
    for shape in SHAPES.values():
        poster = Poster(folder, folder.read_stations(), shape, GERMAN)
        sizes = [text.get_size() * shape.letters / 72 for text in poster.figure.texts]
        assert min(sizes) > 18


def test_picture_does_not_depend_on_the_hour_before(folder):
    """Round trip: an hour, an empty one, and the first again."""
    poster = Poster(folder, folder.read_stations(), SHAPES["square"], GERMAN, in_film=True)
    first = np.asarray(draw(poster, folder, 0))
    empty = np.asarray(draw(poster, folder, EMPTY_HOUR))
    assert not np.array_equal(first, empty)
    assert np.array_equal(first, np.asarray(draw(poster, folder, 0)))


def test_hour_without_field_is_grey_and_says_so(folder):
    """Negative control: an hour with a field has neither."""
    poster = Poster(folder, folder.read_stations(), SHAPES["square"], read_language())
    left, bottom, width, _ = poster.layout.map_box
    corner = (left + width - 5, poster.layout.size[1] - bottom - 5)
    assert draw(poster, folder, EMPTY_HOUR).getpixel(corner) == hex_bytes(look.MISSING_COLOUR)
    assert poster.message.get_text() == "No map for this hour"
    middle = tuple(int(pixel) for pixel in poster.message.get_position())
    middle = (middle[0], poster.layout.size[1] - middle[1] - 30)
    assert draw(poster, folder, EMPTY_HOUR).getpixel(middle) == hex_bytes(look.PAPER_COLOUR)
    for pixel in (corner, middle):
        colour = draw(poster, folder, 0).getpixel(pixel)
        assert colour not in (hex_bytes(look.MISSING_COLOUR), hex_bytes(look.PAPER_COLOUR))


def test_progress_grows_with_the_film(folder):
    """An analytic answer: half of the film, half of the bar."""
    poster = Poster(folder, folder.read_stations(), SHAPES["portrait"], GERMAN, in_film=True)
    draw(poster, folder, 0, share=0.5)
    assert poster.progress.get_width() == 0.5 * SHAPES["portrait"].progress[2]


def test_letters_beyond_the_font_do_not_stop_a_picture(tmp_path, folder):
    """A limit: CJK and right-to-left letters, which the font has not."""
    path = tmp_path / "far.toml"
    template = Path(__file__).parents[2] / "fieldgen/outreach/languages/english.toml"
    path.write_text(
        template.read_text(encoding="utf-8").replace(
            "How much water the air holds", "空气中的水 مياه"
        ),
        encoding="utf-8",
    )
    with pytest.warns(UserWarning, match="missing from font"):
        poster = Poster(folder, folder.read_stations(), SHAPES["square"], read_language(path))
        assert draw(poster, folder, 0).size == (1080, 1080)
