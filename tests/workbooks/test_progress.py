"""The progress bar: late, on a terminal only, and gone afterwards."""

import io

import pytest

from steelyard.workbooks.progress import Progress


class Terminal(io.StringIO):
    def isatty(self):
        return True


@pytest.fixture(autouse=True)
def plain(monkeypatch):
    monkeypatch.setenv("NO_COLOR", "1")
    monkeypatch.setenv("TERM", "xterm")


def run(stream, seconds):
    """Work on four things, with the clock at the given times."""
    times = iter(seconds)
    with Progress("plans", stream, clock=lambda: next(times)) as progress:
        for done in range(4):
            progress(done, 4)
    return stream.getvalue()


def test_short_work_shows_nothing():
    assert run(Terminal(), [0.0, 0.2, 0.4, 0.6, 0.8]) == ""


def test_long_work_shows_a_bar_and_clears_it():
    written = run(Terminal(), [0.0, 0.5, 1.5, 1.5, 1.55, 2.0, 2.0])
    assert written.split("\r\x1b[K") == [
        "",
        "███████·······················  1/4 plans",
        "██████████████████████········  3/4 plans",
        "",
    ]


def test_a_file_or_pipe_gets_nothing():
    assert run(io.StringIO(), [0.0, *[9.0] * 9]) == ""


def test_a_terminal_that_cannot_redraw_gets_nothing(monkeypatch):
    monkeypatch.setenv("TERM", "dumb")
    assert run(Terminal(), [0.0, *[9.0] * 9]) == ""


def test_colour_only_where_it_is_welcome(monkeypatch):
    assert "\x1b" not in Progress("plans", Terminal()).picture(1, 2)
    monkeypatch.delenv("NO_COLOR")
    assert Progress("plans", Terminal()).picture(1, 2).startswith("\x1b[36m███████████████···")


def test_nothing_to_do_is_no_error():
    assert Progress("plans", Terminal()).picture(0, 0).endswith("0/0 plans")
