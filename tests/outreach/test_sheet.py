import base64
import io
import re
from html.parser import HTMLParser

import numpy as np
import pytest
from PIL import Image

from fieldgen.cli import main
from fieldgen.outreach.folder import ProductFolder
from fieldgen.outreach.language import read_language
from fieldgen.outreach.month import read_month
from fieldgen.outreach.sheet import format_sheet, parse_month
from tests.outreach.invented import EMPTY_HOUR, HOURS, SCRIPT, write_folder

SEPTEMBER = np.datetime64("2026-09", "M")


class Page(HTMLParser):
    """Tags, attributes and rows of a page, as Python's own parser reads it."""

    def __init__(self, text):
        super().__init__()
        self.tags, self.rows, self.words, self.inside = [], [], [], None
        self.feed(text)

    def handle_starttag(self, tag, attributes):
        self.tags.append((tag, dict(attributes)))
        self.inside = tag
        if tag == "tr":
            self.rows.append([])

    def handle_data(self, data):
        if self.inside != "style" and data.strip():
            self.words.append(data.strip())
            if self.inside in ("td", "th"):
                self.rows[-1].append(data.strip())

    def handle_endtag(self, _):
        self.inside = None

    def images(self):
        return [attributes for tag, attributes in self.tags if tag == "img"]


@pytest.fixture(scope="module")
def page(folder):
    return Page(format_sheet(folder, SEPTEMBER, read_language()))


def test_sheet_holds_all_it_needs(page):
    """W3C, WCAG 2.2, 1.1.1 and 3.1.1 (from memory): alternative texts, and the page's language."""
    assert ("html", {"lang": "en"}) in page.tags
    images = page.images()
    assert len(images) == 4
    for image in images:
        assert len(image["alt"]) > 60
        content = base64.b64decode(image["src"].removeprefix("data:image/png;base64,"))
        with Image.open(io.BytesIO(content)) as picture:
            assert picture.size == (int(image["width"]), int(image["height"]))
    addresses = [value for _, attributes in page.tags for key, value in attributes.items()
                 if key in ("src", "href", "action")]  # fmt: skip
    assert all(address.startswith("data:image/png;base64,") for address in addresses)
    words = " ".join(page.words)
    assert "Not a warning product." in words
    assert "Made with fieldgen 0.1.0." in words


def test_sheet_tells_the_figures_of_the_files(page, written):
    """A second derivation: by numpy from what the files were made of."""
    _, fields, stations = written
    pwv = np.delete(fields["pwv"].values, EMPTY_HOUR, axis=0)
    words = " ".join(page.words)
    assert f"the air held {pwv.mean():.1f} kg" in words
    assert f"{HOURS - 1} of the 720 time steps of the month (1 %), from 6 stations" in words
    assert f"mean over the region {pwv.mean(axis=(1, 2)).max():.1f} kg" in words
    assert f"mean over the region {pwv.mean(axis=(1, 2)).min():.1f} kg" in words
    assert len(page.rows) == 7
    used = stations["flag"].values == 0
    for row, ok, values, height in zip(
        page.rows[1:], used, stations["pwv"].values, stations["orthometric_height"], strict=True
    ):
        assert row[2:5] == [
            f"{float(height):.0f}",
            f"{100 * ok.mean():.0f} %",
            f"{values[ok].mean():.1f}",
        ]
    assert [row[5] for row in page.rows[1:]] == ["−0.2", "−0.1", "+0.0", "+0.1", "+0.2", "+0.3"]


def test_alternative_text_of_the_mean_map_is_that_of_the_mean(page, written):
    """A second derivation."""
    mean = np.nanmean(written[1]["pwv"].values, axis=0)
    numbers = re.findall(
        r"from (\d+) to (\d+) kg per square metre, (\d+) on", page.images()[0]["alt"]
    )
    assert numbers == [tuple(f"{value:.0f}" for value in (mean.min(), mean.max(), mean.mean()))]


def test_month_flags_a_cell_where_most_hours_do(folder, written):
    """An analytic answer: flags that are the same in all hours stay."""
    flag = written[1]["flag"].values[0] & 11
    month, _ = read_month(folder, SEPTEMBER)
    assert (month.mean_field["flag"].values == flag).all()
    assert month.has_field.sum() == HOURS - 1


def test_names_are_harmless_in_a_page(tmp_path):
    """Negative control: names that are markup."""
    names = [SCRIPT, "<img src=x onerror=y>", '"quoted"', "{{ 7*7 }}", "&amp;", "A"]
    write_folder(tmp_path, names=names, network=f"{SCRIPT} & sons")
    text = format_sheet(ProductFolder(tmp_path), SEPTEMBER, read_language())
    page = Page(text)
    assert "<script" not in text
    assert len(page.images()) == 4
    assert [row[0] for row in page.rows[1:]] == names
    assert "49" not in [row[0] for row in page.rows]


def test_month_without_a_field_is_said(tmp_path, capsys):
    """A limit: stations, and no field at all."""
    fields, _ = write_folder(tmp_path / "in")
    path = tmp_path / "in/fields/pwv_20260914.nc"
    path.unlink()
    fields["pwv"] = fields["pwv"] * np.nan
    fields.to_netcdf(path)
    out = tmp_path / "page.html"
    assert main(["sheet", str(tmp_path / "in"), "--month", "2026-09", "--out", str(out)]) == 0
    assert capsys.readouterr().out == f"{out} written\n"
    assert "No map was made in this month." in out.read_text()
    assert len(Page(out.read_text()).images()) == 1


@pytest.mark.parametrize(
    "text", ["2026", "2026-13", "2026-9", "2026-09-01", "September", "٢٠٢٦-٠٩"]
)
def test_month_is_a_year_and_a_month(written, capsys, text):
    """Negative control."""
    assert main(["sheet", str(written[0]), "--month", text]) == 1
    assert "expected a year and a month, such as 2026-09." in capsys.readouterr().err
    assert parse_month("2026-09") == SEPTEMBER


def test_month_without_files_is_told(written, capsys):
    """Negative control."""
    assert main(["sheet", str(written[0]), "--month", "2025-01"]) == 1
    assert "holds no station files of the period" in capsys.readouterr().err
