"""The sentences of public pictures and pages, from a file that anyone can translate."""

from __future__ import annotations

import tomllib
from importlib.resources import files
from pathlib import Path
from string import Formatter

import numpy as np

from fieldgen.errors import InputError

_TEMPLATE = "english.toml"


class Language:
    """Sentences by key, and numbers and times as the language writes them."""

    def __init__(self, sentences: dict[str, str]):
        self._sentences = sentences

    def say(self, key: str, **filled) -> str:
        """A sentence with its places filled in."""
        return self._sentences[key].format(**filled)

    def knows(self, key: str) -> bool:
        """Whether there is such a sentence."""
        return key in self._sentences

    def number(self, value: float, digits: int = 0, *, signed: bool = False) -> str:
        """A number with the decimal mark and a true minus sign; a dash where it is NaN."""
        if not np.isfinite(value):
            return "–"
        text = f"{round(float(value), digits) + 0.0:{'+' if signed else ''}.{digits}f}"
        return text.replace(".", self.say("decimal_mark")).replace("-", "−")

    def month(self, number: int) -> str:
        """Name of a month, 1 to 12."""
        return self.say(f"month_{number}")

    def month_of_year(self, month: np.datetime64) -> str:
        """A month with its year."""
        year, number = str(month.astype("datetime64[M]")).split("-")
        return self.say("month_of_year", month=self.month(int(number)), year=year)

    def date(self, time: np.datetime64) -> str:
        """The day of a time."""
        year, month, day = str(time.astype("datetime64[D]")).split("-")
        return self.say("date", day=int(day), month=self.month(int(month)), year=year)

    def day(self, time: np.datetime64) -> str:
        """The day of a time without its year."""
        _, month, day = str(time.astype("datetime64[D]")).split("-")
        return self.say("day_of_month", day=int(day), month=self.month(int(month)))

    def hour(self, start: np.datetime64, end: np.datetime64) -> str:
        """An interval that begins and ends on one day, which ends at 24:00."""
        finish = _clock(end).replace("00:00", "24:00")
        return self.say("hour", date=self.date(start), start=_clock(start), end=finish)


def _clock(time: np.datetime64) -> str:
    return np.datetime_as_string(time, unit="m")[11:]


def read_language(path: Path | None = None) -> Language:
    """The sentences of a file, or of one that comes with fieldgen, by its bare name.

    Without a path, the sentences of the English template. Raises InputError that lists keys that
    are missing, unknown, not text, or fill in what
    there is not.
    """
    shipped = files("fieldgen.outreach").joinpath("languages")
    expected = tomllib.loads(shipped.joinpath(_TEMPLATE).read_text("utf-8"))
    if path is None:
        return Language(expected)
    if not path.suffix and path.name == str(path):
        path = Path(str(shipped), f"{path}.toml")
    try:
        found = tomllib.loads(path.read_text(encoding="utf-8"))
    except OSError as error:
        raise InputError(f"{path}: cannot be read: {error.strerror}. Check the path.") from None
    except ValueError as error:
        raise InputError(f"{path}: is not TOML in UTF-8: {error}.") from None
    _check(path, expected, found)
    return Language(found)


def _check(path: Path, expected: dict, found: dict) -> None:
    """Raise InputError with all that is wrong in a language file."""
    problems = [f"missing: {key}" for key in expected if key not in found]
    problems += [f"unknown: {key}" for key in found if key not in expected]
    for key in expected.keys() & found.keys():
        problem = _problem(expected[key], found[key])
        problems += [f"{key}: {problem}"] if problem else []
    if problems:
        raise InputError(
            f"{path}: {len(problems)} problems, expected the keys of {_TEMPLATE}:\n  "
            + "\n  ".join(problems)
        )


def _problem(template: str, sentence) -> str | None:
    """What is wrong with a sentence, None if nothing is."""
    if not isinstance(sentence, str):
        return "is not text in quotes"
    allowed = {place for _, place, _, _ in Formatter().parse(template) if place is not None}
    try:
        parts = list(Formatter().parse(sentence))
    except ValueError as error:
        return f"{error}; write {{{{ and }}}} for braces that stay"
    for _, place, form, conversion in parts:
        if place is not None and (place not in allowed or form or conversion):
            known = ", ".join(f"{{{one}}}" for one in sorted(allowed)) or "nothing"
            return f"fills in {{{place}}}, expected {known}"
    return None
