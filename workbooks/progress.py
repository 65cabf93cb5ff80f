"""A progress bar for people who wait: on a terminal only, and only once the wait is worth a bar."""

from __future__ import annotations

import os
import sys
from collections.abc import Callable, Iterator, Sequence
from time import monotonic
from typing import TextIO, TypeVar

Item = TypeVar("Item")

_PATIENCE = 1.0  # seconds before the bar appears
_PAUSE = 0.1  # seconds between two pictures of it
_WIDTH = 30
_CLEAR = "\r\x1b[K"


def progress(
    items: Sequence[Item],
    label: str,
    stream: TextIO | None = None,
    clock: Callable[[], float] = monotonic,
) -> Iterator[Item]:
    """Yield the items, show how far the work on them has come, and leave no trace of it.

    Parameters
    ----------
    items : sequence
        What is worked on.
    label : str
        What they are, e.g. ``"justifications"``.
    stream : text stream, optional
        Standard error if left out. Nothing is written unless it is a terminal that can redraw a line.
    clock : callable
        Seconds.
    """
    stream = stream or sys.stderr
    if not stream.isatty() or os.environ.get("TERM") == "dumb":
        yield from items
        return
    due = clock() + _PATIENCE
    shown = False
    try:
        for done, item in enumerate(items):
            if clock() >= due:
                _write(stream, _CLEAR + picture(done, len(items), label))
                due, shown = clock() + _PAUSE, True
            yield item
    finally:
        if shown:
            _write(stream, _CLEAR)


def picture(done: int, total: int, label: str) -> str:
    """Return the bar as text; with NO_COLOR set it has no colour."""
    full = _WIDTH * done // total
    bar = "█" * full + "·" * (_WIDTH - full)
    if not os.environ.get("NO_COLOR"):
        bar = f"\x1b[36m{bar}\x1b[0m"
    return f"{bar}  {done:,}/{total:,} {label}"


def _write(stream: TextIO, text: str) -> None:
    stream.write(text)
    stream.flush()
