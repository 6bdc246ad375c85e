"""The log of an unattended run: one line an event, for a person or, as JSON, for a machine."""

from __future__ import annotations

import json
from contextlib import suppress
from datetime import UTC, datetime
from typing import TextIO

from fieldgen.plain_text import printable

EVENTS = {
    "update_begun": "update of {folder} from {network}",
    "nothing_new": "nothing new: all {days} days stand",
    "input_read": "read {files} files, {records} records; {rejected} lines rejected",
    "file_unusable": "{reason}",
    "left_out": "{name} is left out: {reason}",
    "oddity": "{text}",
    "day_begun": "day {day} is to be made: {reason}",
    "day_made": "day {day} made: {made} of {steps} steps, {files} files",
    "day_kept": "day {day} is kept as it is: the input of some of its hours is gone",
    "page_not_made": "the page is not made: {reason}",
    "update_done": "done in {seconds:.1f} s: {made} days made, {unchanged} unchanged",
    "failed": "{reason}",
}
"""Text of each event for a person; a machine gets its fields."""


class Log:
    """Writes events to a stream, each at once."""

    def __init__(self, stream: TextIO, as_json: bool = False):
        self._stream, self._as_json = stream, as_json

    def info(self, event: str, **fields) -> None:
        """Something went as it should; `event` is one of EVENTS."""
        self._write("info", event, fields)

    def warning(self, event: str, **fields) -> None:
        """Something that a person should look at, which does not stop the run."""
        self._write("warning", event, fields)

    def error(self, event: str, **fields) -> None:
        """Why the run ends."""
        self._write("error", event, fields)

    def _write(self, level: str, event: str, fields: dict) -> None:
        time = datetime.now(UTC).strftime("%Y-%m-%dT%H:%M:%SZ")
        message = EVENTS[event].format(**fields)
        if self._as_json:
            about = {"time": time, "level": level, "event": event, "message": message}
            line = json.dumps(about | fields)
        else:
            line = f"{time} {level:7} {printable(message)}"
        with suppress(OSError):  # a log that cannot be written must not stop the run
            print(line, file=self._stream, flush=True)
