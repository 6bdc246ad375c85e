"""What a command shows while it works: a bar on a terminal, plain lines otherwise. On stderr."""

from __future__ import annotations

from rich.console import Console
from rich.progress import BarColumn, MofNCompleteColumn, TextColumn, TimeElapsedColumn
from rich.progress import Progress as Bars


class Progress:
    """Context that shows the files being read and the days being made."""

    def __init__(self):
        self._console = Console(stderr=True)
        self._bars = Bars(
            TextColumn("{task.description}"),
            BarColumn(),
            MofNCompleteColumn(),
            TimeElapsedColumn(),
            console=self._console,
            transient=True,
            disable=not self._console.is_terminal,
        )
        self._reading = self._bars.add_task("reading", total=None)
        self._making = None

    def __enter__(self) -> Progress:
        self._bars.start()
        return self

    def __exit__(self, *_) -> None:
        self._bars.stop()

    def reading(self, file: str) -> None:
        """A file is about to be read."""
        self._bars.update(self._reading, advance=1)

    def made(self, day: str, count: int) -> None:
        """A day of `count` is done."""
        if not self._console.is_terminal:
            print(f"{day} done", file=self._console.file, flush=True)
            return
        if self._making is None:
            self._bars.remove_task(self._reading)
            self._making = self._bars.add_task("days", total=count)
        self._bars.update(self._making, advance=1)
