"""The progress bar: late, on a terminal only, and gone afterwards."""

import io

import pytest

from steelyard.workbooks.progress import picture, progress


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
    assert list(progress("abcd", "plans", stream, clock=lambda: next(times))) == ["a", "b", "c", "d"]
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


def test_work_that_fails_clears_the_bar():
    terminal, times = Terminal(), iter([0.0, 1.5, 1.5])
    steps = progress("ab", "plans", terminal, clock=lambda: next(times))
    next(steps)
    with pytest.raises(RuntimeError):
        steps.throw(RuntimeError)
    assert terminal.getvalue().endswith("\r\x1b[K")


def test_a_file_or_pipe_gets_nothing():
    assert run(io.StringIO(), []) == ""


def test_a_terminal_that_cannot_redraw_gets_nothing(monkeypatch):
    monkeypatch.setenv("TERM", "dumb")
    assert run(Terminal(), []) == ""


def test_colour_only_where_it_is_welcome(monkeypatch):
    assert "\x1b" not in picture(1, 2, "plans")
    monkeypatch.delenv("NO_COLOR")
    assert picture(1, 2, "plans").startswith("\x1b[36m███████████████···")


def test_large_numbers_are_grouped():
    assert picture(500, 2000, "plans").endswith("  500/2,000 plans")


def test_nothing_to_do_is_no_error():
    assert list(progress([], "plans", Terminal())) == []
