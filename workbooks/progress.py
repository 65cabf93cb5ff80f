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
    """Yield the items, and show how far the work on them has come.

    Parameters
    ----------
    items : sequence
        What is worked on.
    label : str
        What is being done, e.g. ``"plans"``.
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
                stream.write(_CLEAR + picture(done, len(items), label))
                stream.flush()
                due, shown = clock() + _PAUSE, True
            yield item
    finally:
        if shown:
            stream.write(_CLEAR)
            stream.flush()


def picture(done: int, total: int, label: str) -> str:
    """Return the bar as text; with NO_COLOR set it has no colour."""
    full = _WIDTH * done // total
    bar = "█" * full + "·" * (_WIDTH - full)
    if not os.environ.get("NO_COLOR"):
        bar = f"\x1b[36m{bar}\x1b[0m"
    return f"{bar}  {done:,}/{total:,} {label}"
