"""The page as a file, without a browser."""

import re
from datetime import timedelta

import pytest

from fieldgen.cli import main
from fieldgen.errors import InputError
from fieldgen.products.metadata import CAUTION
from fieldgen.products.page import file, write_page
from tests.products.page.folders import NETWORK, write_invented


def test_two_days_of_a_fair_grid_stay_below_8_megabytes(tmp_path):
    """Limit that the page promises: 48 hours of 150 x 150 cells, three fields and flags."""
    write_invented(tmp_path, hours=48, rows=150, columns=150)
    path = write_page(tmp_path, tmp_path / "page.html", timedelta(hours=48))
    assert 2e6 < path.stat().st_size < 8e6


def test_names_stand_in_the_file_as_data_only(page_file):
    """Negative control: no name opens or closes an element."""
    html = page_file.read_text()
    assert "<img src=x" not in html
    assert "<script>alert" not in html
    assert re.search(r"<title>&lt;img src=x onerror=alert\(1\)&gt; &amp; ", html)


def test_page_carries_caution_and_asks_for_nothing(page_file):
    """Limit: no element that loads anything, and a policy that forbids it."""
    html = page_file.read_text()
    assert CAUTION in html
    markup = re.sub(r"<script.*?</script>", "", html, flags=re.DOTALL)
    assert not re.search(r"<(script|img|iframe|object)[^>]*\ssrc=", markup)
    assert re.findall(r'<link[^>]*href="([^"]*)"', markup) == ["data:,"]
    assert "default-src 'none'" in html


def test_more_values_than_a_browser_holds_are_an_error(tmp_path, monkeypatch):
    """Negative control."""
    monkeypatch.setattr(file, "MOST_VALUES", 100)
    write_invented(tmp_path, hours=3, rows=6, columns=8)
    with pytest.raises(InputError, match="cells times hours are 144, expected at most 100"):
        write_page(tmp_path, tmp_path / "page.html", None)
    write_page(tmp_path, tmp_path / "page.html", timedelta(hours=2))


def test_command_writes_where_it_says(tmp_path, capsys):
    """The whole output, in process."""
    write_invented(tmp_path / "out", hours=3, rows=6, columns=8)
    assert main(["page", str(tmp_path / "out"), "--last", "2h"]) == 0
    assert capsys.readouterr().out.startswith(f"{tmp_path / 'out' / 'page.html'} written, ")
    assert main(["page", str(tmp_path / "out"), "--out", str(tmp_path / "other.html")]) == 0
    assert (tmp_path / "other.html").stat().st_size > 1e6
    assert not list(tmp_path.glob(".*"))


def test_name_of_the_network_is_the_folders(page_file):
    """Round trip through JSON."""
    import json

    content = re.search(r'id="content">(.*?)</script>', page_file.read_text(), re.DOTALL)[1]
    assert json.loads(content)["network"] == NETWORK
