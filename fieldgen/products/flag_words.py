"""The flags of stations in plain words, as plain data that any product can share."""

REASONS = {
    "no_delay": "no delay received",
    "formal_error": "formal error of the delay too large",
    "no_pressure": "no pressure known",
    "out_of_range": "value not possible",
    "jump": "jump against the hours around",
    "disagrees_with_neighbours": "disagrees with its neighbours",
    "climatological_pressure": "no pressure but the season's average",
    "frozen": "delay has stopped changing",
    "above_saturation": "more than saturated air holds",
    "level_shift": "level has shifted against its neighbours",
    "condemned": "not trusted as a whole: off its neighbours for long",
}
"""Flag meaning, as in the attribute flag_meanings of a station file -> why a value is not used."""


def reason(meaning: str) -> str:
    """Words of a flag; one without words of its own gives its name."""
    return REASONS.get(meaning, meaning.replace("_", " "))
