"""A film of a period and stills of its newest hour, each with its description."""

from __future__ import annotations

from collections.abc import Iterator
from pathlib import Path

import numpy as np
import xarray as xr
from PIL import Image
from PIL.PngImagePlugin import PngInfo

from fieldgen.errors import InputError
from fieldgen.outreach.facts import describe_film, describe_map, read_facts
from fieldgen.outreach.film import check_encoder, write_gif, write_mp4
from fieldgen.outreach.folder import ProductFolder, Step, observed_at
from fieldgen.outreach.language import Language
from fieldgen.outreach.poster import Poster
from fieldgen.outreach.shapes import SHAPES
from fieldgen.period import parse_time
from fieldgen.plain_text import one_line
from fieldgen.products.atomic import whole_file

DEFAULT_LENGTH = np.timedelta64(72, "h")

FORMATS = ("mp4", "gif")


def animate(
    folder: ProductFolder,
    out: Path,
    language: Language,
    *,
    start: str | None = None,
    end: str | None = None,
    form: str = "mp4",
    shape: str = "landscape",
) -> list[Path]:
    """Write a film of a period in one shape, and stills of its last hour in all shapes.

    start, end : ISO 8601 in UTC; by default the newest three days; cut to what the folder holds
    Returns all files, each picture followed by its description. Raises InputError, OutputError.
    """
    if form == "mp4":
        check_encoder()
    first, last = read_period(folder, start, end)
    stations = folder.read_stations(first, last)
    teller = Teller(folder, stations, language)
    film = _write_film(teller, (first, last), out / f"film_{shape}.{form}", shape)
    return [*film, *_write_stills(teller, teller.newest, out)]


class Teller:
    """What every picture of a period needs, and the facts of the hours drawn so far."""

    def __init__(self, folder: ProductFolder, stations: xr.Dataset, language: Language):
        self.folder, self.stations, self.language = folder, stations, language
        self.network = one_line(folder.network_name)
        self.hours: list[str] = []
        self.means: list[float] = []
        self.newest: Step | None = None

    def draw(self, poster: Poster, step: Step, share: float = 0.0) -> Image.Image:
        """Picture of a step."""
        observed = observed_at(self.stations, step.end)
        hour = self.language.hour(step.start, step.end)
        return poster.draw_hour(step.field, observed, hour, share)

    def film(self, poster: Poster, first, last) -> Iterator[Image.Image]:
        """Pictures of all steps of a period; takes down their facts."""
        count = len(self.folder.steps_between(first, last))
        for number, step in enumerate(self.folder.read_steps(first, last), start=1):
            pwv = None if step.field is None else step.field["pwv"].values
            self.hours.append(self.language.hour(step.start, step.end))
            self.means.append(read_facts(pwv).mean)
            self.newest = step
            yield self.draw(poster, step, number / count)

    def describe(self, step: Step) -> str:
        """Alternative text of the map of a step."""
        pwv, flag = observed_at(self.stations, step.end)
        return describe_map(
            self.language,
            read_facts(None if step.field is None else step.field["pwv"].values),
            network=self.network,
            hour=self.language.hour(step.start, step.end),
            used=int(((flag == 0) & np.isfinite(pwv)).sum()),
            stations=len(flag),
        )


def read_period(folder: ProductFolder, start: str | None, end: str | None):
    """First and last instant of a period; raises InputError if it holds no step with a file."""
    last = parse_time(end) if end else folder.end
    first = parse_time(start) if start else last - DEFAULT_LENGTH
    if first >= last:
        raise InputError(f"period: start {first} is not before end {last}.")
    first, last = max(first, folder.start), min(last, folder.end)
    if not any(step.field is not None for step in folder.read_steps(first, last)):
        raise InputError(
            f"{folder.path}: no field between {first} and {last}; the newest ends {folder.end}."
        )
    return first, last


def _write_film(teller: Teller, period, path: Path, shape: str) -> list[Path]:
    poster = Poster(
        teller.folder, teller.stations, SHAPES[shape], teller.language, in_film=True
    )  # fmt: skip
    pictures = teller.film(poster, *period)
    caution = teller.language.say("caution")
    if path.suffix == ".gif":
        write_gif(pictures, path, comment=caution)
    else:
        title = f"{teller.network}: {teller.language.say('map_title')}"
        write_mp4(pictures, path, title=title, comment=caution)
    words = describe_film(teller.language, teller.hours, teller.means, teller.network)
    return [path, write_description(path, words)]


def _write_stills(teller: Teller, step: Step, out: Path) -> list[Path]:
    paths = []
    words = teller.describe(step)
    for name, shape in SHAPES.items():
        poster = Poster(teller.folder, teller.stations, shape, teller.language)
        path = out / f"still_{name}.png"
        write_described(teller.draw(poster, step), path, words)
        paths += [path, path.with_suffix(".txt")]
    return paths


def write_described(picture: Image.Image, path: Path, words: str) -> None:
    """A picture as PNG with its description within, and beside it as text."""
    inside = PngInfo()
    inside.add_itxt("Description", words)
    with whole_file(path) as part:
        picture.save(part, format="PNG", pnginfo=inside)
    write_description(path, words)


def write_description(path: Path, words: str) -> Path:
    """The description of a picture as a text file beside it; returns its path."""
    text = path.with_suffix(".txt")
    with whole_file(text) as part:
        part.write_text(words + "\n", encoding="utf-8")
    return text
