"""A progress bar for people who wait: on a terminal only, and only once the wait is worth a bar."""

from __future__ import annotations

import os
import sys
from collections.abc import Callable
from time import monotonic
from types import TracebackType
from typing import Self, TextIO

_PATIENCE = 1.0  # seconds before the bar appears
_PAUSE = 0.1  # seconds between two pictures of it
_WIDTH = 30
_CLEAR = "\r\x1b[K"


class Progress:
    """Shows how far a piece of work has come, and leaves no trace.

    For instance::

        with Progress("justification sheets") as progress:
            for done, plan in enumerate(plans):
                progress(done, len(plans))

    Parameters
    ----------
    label : str
        What is being done.
    stream : text stream, optional
        Standard error if left out. Nothing is written unless it is a terminal that can redraw a line.
    clock : callable
        Seconds.
    """

    def __init__(
        self, label: str, stream: TextIO | None = None, clock: Callable[[], float] = monotonic
    ) -> None:
        self.label, self._stream, self._clock = label, stream or sys.stderr, clock
        self._on = self._stream.isatty() and os.environ.get("TERM") != "dumb"
        self._due, self._shown = clock() + _PATIENCE, False

    def __enter__(self) -> Self:
        return self

    def __exit__(
        self, kind: type[BaseException] | None, error: BaseException | None, trace: TracebackType | None
    ) -> None:
        if self._shown:
            self._write(_CLEAR)

    def __call__(self, done: int, total: int) -> None:
        """Say that `done` of `total` are done; cheap enough to be said for each."""
        if self._on and self._clock() >= self._due:
            self._write(_CLEAR + self.picture(done, total))
            self._due, self._shown = self._clock() + _PAUSE, True

    def picture(self, done: int, total: int) -> str:
        """Return the bar as text; with NO_COLOR set it has no colour."""
        full = _WIDTH * done // max(total, 1)
        bar = "█" * full + "·" * (_WIDTH - full)
        if not os.environ.get("NO_COLOR"):
            bar = f"\x1b[36m{bar}\x1b[0m"
        return f"{bar}  {done:,}/{total:,} {self.label}"

    def _write(self, text: str) -> None:
        self._stream.write(text)
        self._stream.flush()
