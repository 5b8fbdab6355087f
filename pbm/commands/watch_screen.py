"""What `pbm watch` writes where: alarms on standard output, all else on standard error, on a terminal with a counter between."""

import sys
import time

import typer

_TICK = 0.25  # seconds between two looks of the counter on a terminal


class Screen:
    """Standard output and standard error of one run."""

    def __init__(self) -> None:
        self._next_tick, self._ticked = 0.0, 0

    def alarm(self, text: str) -> None:
        """An alarm."""
        self._clear()
        typer.echo(text)

    def say(self, *texts: str) -> None:
        """Tell a person."""
        for text in texts:
            self._clear()
            typer.echo(text, err=True)

    def tick(self, counts: str) -> None:
        """On a terminal, show that results come in."""
        if sys.stderr.isatty() and time.monotonic() >= self._next_tick:
            self._next_tick = time.monotonic() + _TICK
            self._clear()
            self._ticked = len(counts)
            typer.echo(f"\r{counts}", err=True, nl=False)

    def _clear(self) -> None:
        if self._ticked:
            # Written over with blanks: not every terminal knows how to erase a line.
            typer.echo(f"\r{' ' * self._ticked}\r", err=True, nl=False)
            self._ticked = 0
