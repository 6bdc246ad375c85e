"""The page as one file."""

from __future__ import annotations

import json
from datetime import timedelta
from importlib.resources import files
from pathlib import Path

from bokeh.document import Document
from bokeh.embed import file_html
from bokeh.events import DocumentReady
from bokeh.models import CustomJS
from bokeh.resources import INLINE
from jinja2 import Environment

from fieldgen.errors import InputError
from fieldgen.products.atomic import whole_file
from fieldgen.products.maps.grid import read_map_grid
from fieldgen.products.metadata import CAUTION
from fieldgen.products.page.content import describe_page, network_name
from fieldgen.products.page.figures import Figures, draw_figures
from fieldgen.products.page.ground import read_outlines
from fieldgen.products.page.reading import flag_bits, read_hours

SCRIPTS = ("unpack", "values", "words", "state", "map", "series", "page")
"""The files ``*.js``, in the order in which they need one another."""

MOST_VALUES = 12_000_000
"""Cells times hours that a page may hold: a browser keeps each four times, two bytes a piece."""


def write_page(folder: Path, path: Path, last: timedelta | None) -> Path:
    """Write the page of an output folder, whole or not at all, and return its path.

    last : how far back from the newest hour the page goes; all hours if it is None
    Raises InputError if there are no fields, or more than a browser can hold; OutputError.
    """
    hours = read_hours(folder, last)
    _check_size(folder, hours.fields["pwv"].size)
    grid = read_map_grid(hours.fields, flag_bits(hours.fields["flag"])["sea"])
    figures = draw_figures(grid, read_outlines(folder, grid))
    content = describe_page(hours, grid)
    html = _fill_template(figures, content, network_name(hours.fields), grid.size)
    with whole_file(path) as temporary:
        temporary.write_text(html, encoding="utf-8")
    return path


def _check_size(folder: Path, values: int) -> None:
    if values > MOST_VALUES:
        raise InputError(
            f"{folder}: cells times hours are {values}, expected at most {MOST_VALUES} on a page. "
            "Ask for fewer hours with --last."
        )


def _fill_template(figures: Figures, content: dict, title: str, size) -> str:
    document = Document()
    for root in figures.roots:
        document.add_root(root)
    start = f"fieldgenPage.start({{{', '.join(figures.models)}}})"
    document.js_on_event(DocumentReady, CustomJS(args=figures.models, code=start))
    return file_html(
        document,
        INLINE,
        title,
        template=Environment(autoescape=True).from_string(_read("page.html")),
        template_variables={
            "style": _read("page.css"),
            "script": "\n".join(_read(f"{name}.js") for name in SCRIPTS),
            "content": _as_json(content),
            "caution": CAUTION,
            "version": content["version"],
            "width": size[0] / size[1],
        },
    )


def _read(name: str) -> str:
    return files(__package__).joinpath(name).read_text(encoding="utf-8")


def _as_json(content: dict) -> str:
    """JSON that may stand within a script element: nothing in it can close the element."""
    text = json.dumps(content, separators=(",", ":"), allow_nan=False)
    return text.replace("&", "\\u0026").replace("<", "\\u003c").replace(">", "\\u003e")
