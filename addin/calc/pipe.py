"""One worker process, and a limit on how long Calc ever waits for it.

This module runs inside LibreOffice's own Python: standard library only, syntax of Python 3.8.

Calc stands still while a function runs, so every wait has an end. Writing to a stopped process blocks just
as reading does, and ``select`` does not work on the pipes of Windows: so the caller simply writes and reads,
and a watching thread kills a worker that is late, which ends both. That costs a call nothing; handing it
to a helper thread and back would double its time.

A worker that died is started again and asked once more (functions are pure); one that was late is not.
After such a failure the other cells of the same recalculation are answered at once, for 10,000 cells with
a time-out each would take days.
"""

from __future__ import annotations

import contextlib
import json
import math
import os
import signal
import subprocess
import threading
import time
from typing import Any, NoReturn

PROTOCOL = 1
"""Changes when the lines on the pipe change their form."""

MAX_CELLS = 100_000
"""Most cells that one call may hand over, or get back."""

TIMEOUT = 30.0
"""Seconds until a call is given up, the start of the worker included."""

PAUSE = 1.0
"""Seconds without any call after which the next one counts as a new recalculation."""

BOOT = "import os; out = os.dup(1); os.dup2(2, 1); from steelyard.addin.calc.worker import main; main(out)"
"""The worker's first words: nothing that is imported later can print into the answers."""

_AGAIN = "Press Ctrl+Shift+F9 to calculate again."
_RECONNECT = "Run: steelyard connect calc. Then restart LibreOffice."
_LONGEST_LINE = 1 << 26
_FOREIGN = ("PYTHONHOME", "PYTHONPATH", "PYTHONSTARTUP", "LD_LIBRARY_PATH", "LD_PRELOAD", "DYLD_LIBRARY_PATH")
_THREADS = ("OMP_NUM_THREADS", "OPENBLAS_NUM_THREADS", "MKL_NUM_THREADS", "VECLIB_MAXIMUM_THREADS")


class NoAnswerError(Exception):
    """A call that got no answer; the text is what the cell shows."""


class DiedError(Exception):
    """The worker ended before it answered."""


class LateError(Exception):
    """The worker was killed because it did not answer in time."""


def _refuse(text: str) -> NoReturn:
    """Refuse ``NaN`` and ``Infinity``: Python's reader would take them, a cell must not."""
    raise ValueError(text)


_decode = json.JSONDecoder(parse_constant=_refuse).decode
_encode = json.JSONEncoder(allow_nan=False, separators=(",", ":")).encode


class Process:
    """A running worker, and the thread that watches how long it takes.

    Parameters
    ----------
    interpreter : str
        The Python that Steelyard is installed for.
    tick : float
        Seconds between two looks of the watching thread.
    """

    def __init__(self, interpreter: str, tick: float) -> None:
        environment = {name: value for name, value in os.environ.items() if name not in _FOREIGN}
        environment.update(dict.fromkeys(_THREADS, "1"))
        self._process = subprocess.Popen(
            # -E and -P: neither the environment nor the working folder can slip in other code.
            [interpreter, "-E", "-P", "-c", BOOT],
            stdin=subprocess.PIPE,
            stdout=subprocess.PIPE,
            stderr=subprocess.DEVNULL,
            env=environment,
            creationflags=getattr(subprocess, "CREATE_NO_WINDOW", 0),
            start_new_session=os.name == "posix",
        )
        self._deadline = math.inf
        self._late = False
        self._ended = threading.Event()
        threading.Thread(target=self._watch, args=(tick,), daemon=True).start()

    def ask(self, request: bytes, deadline: float) -> bytes:
        """Send a request, if it is not empty, and return the next line; raise `DiedError` or `LateError`."""
        stdin, stdout = self._process.stdin, self._process.stdout
        assert stdin is not None and stdout is not None
        line = b""
        self._late = False
        self._deadline = deadline
        with contextlib.suppress(OSError):
            stdin.write(request)
            stdin.flush()
            line = stdout.readline(_LONGEST_LINE)
        self._deadline = math.inf
        if not line:
            raise LateError if self._late else DiedError
        return line

    def end(self) -> None:
        """Kill the process and forget it."""
        self._kill()
        self._ended.set()

    def _watch(self, tick: float) -> None:
        while not self._ended.wait(tick):
            if time.monotonic() > self._deadline:
                self._late = True
                self._kill()
        # Only now may its number be given to another process: nobody kills it any more.
        self._process.wait()
        for stream in (self._process.stdin, self._process.stdout):
            with contextlib.suppress(OSError):
                stream.close()  # type: ignore[union-attr]

    def _kill(self) -> None:
        with contextlib.suppress(OSError):
            if os.name == "posix":
                os.killpg(self._process.pid, signal.SIGKILL)  # with any process it started itself
            else:
                self._process.kill()


class Worker:
    """The worker as the component sees it: a call always comes back, with a result or with a refusal.

    Parameters
    ----------
    interpreter : str
        The Python that Steelyard is installed for.
    version : str
        The version of Steelyard that the add-in file was built from; a worker of another one is refused.
    timeout : float
        Seconds until a call is given up.
    """

    def __init__(self, interpreter: str, version: str, timeout: float = TIMEOUT) -> None:
        self._interpreter = interpreter
        self._version = version
        self._timeout = timeout
        self._lock = threading.Lock()
        self._process: Process | None = None
        self._count = 0
        self._failed_at: float | None = None
        self._failure = ""
        self._last_call = 0.0

    def call(self, name: str, args: list[Any]) -> Any:
        """Answer one cell function.

        Returns
        -------
        float, int, str, None or list of lists
            The result as the worker gave it; a refusal is a text that begins with ``SY: ``.
        """
        with self._lock:
            try:
                if self._resting():
                    return self._failure
                return self._answer(name, args)
            except NoAnswerError as error:
                self._stop()
                self._failure = f"SY: {error}"
                self._failed_at = time.monotonic()
                return self._failure
            finally:
                self._last_call = time.monotonic()

    def _resting(self) -> bool:
        """Whether this recalculation has already waited long enough for the worker."""
        if self._failed_at is None:
            return False
        now = time.monotonic()
        if now - self._last_call < PAUSE and now - self._failed_at < max(PAUSE, self._timeout):
            return True
        self._failed_at = None
        return False

    def _answer(self, name: str, args: list[Any]) -> Any:
        deadline = time.monotonic() + self._timeout
        self._count += 1
        request = (_encode([self._count, name, args]) + "\n").encode("ascii")
        try:
            try:
                return self._result(self._running(deadline).ask(request, deadline))
            except DiedError:
                self._stop()
                return self._result(self._running(deadline).ask(request, deadline))
        except DiedError:
            message = "the helper process ended twice while it computed this cell (out of memory?)"
        except LateError:
            message = f"no answer within {self._timeout:g} s, so the helper process was ended"
        message += f". {_AGAIN}"
        raise NoAnswerError(message)

    def _running(self, deadline: float) -> Process:
        """Return the running worker; start one if there is none."""
        if self._process is None:
            try:
                self._process = Process(self._interpreter, self._timeout / 20)
            except (OSError, ValueError):
                message = f"Python was not found at {_end_of(self._interpreter)}. {_RECONNECT}"
                raise NoAnswerError(message) from None
            self._greet(self._process, deadline)
        return self._process

    def _greet(self, process: Process, deadline: float) -> None:
        """Read the worker's first line and compare versions."""
        try:
            line = process.ask(b"", deadline)
        except DiedError:
            message = (
                f"{_end_of(self._interpreter)} could not start Steelyard. To see why, run: steelyard doctor."
            )
            raise NoAnswerError(message) from None
        hello = self._read(line)
        if not isinstance(hello, dict) or "steelyard" not in hello:
            raise self._rubbish()
        found = (hello["steelyard"], hello.get("protocol"))
        if found != (self._version, PROTOCOL):
            other = _end_of(str(found[0]), 20)
            message = f"this add-in belongs to Steelyard {self._version}, but Python runs Steelyard {other}."
            message += f" {_RECONNECT}"
            raise NoAnswerError(message)

    def _result(self, line: bytes) -> Any:
        answer = self._read(line)
        if not (isinstance(answer, list) and len(answer) == 2 and answer[0] == self._count):
            raise self._rubbish()
        if not _is_cells(answer[1]):
            raise self._rubbish()
        return answer[1]

    def _read(self, line: bytes) -> Any:
        try:
            return _decode(line.decode("ascii"))
        except (ValueError, RecursionError):
            raise self._rubbish() from None

    @staticmethod
    def _rubbish() -> NoAnswerError:
        return NoAnswerError(
            "the helper process sent something that is no answer, so it was ended. " + _AGAIN
        )

    def _stop(self) -> None:
        if self._process is not None:
            self._process.end()
            self._process = None


def _is_cells(value: Any) -> bool:
    """Whether a value is one cell or a full rectangle of cells."""
    if not isinstance(value, list):
        return not isinstance(value, dict)
    if not value or not isinstance(value[0], list) or not value[0]:
        return False
    return all(isinstance(row, list) and len(row) == len(value[0]) for row in value) and not any(
        isinstance(cell, (list, dict)) for row in value for cell in row
    )


def _end_of(text: str, length: int = 100) -> str:
    """Keep the end of a text that is too long for a cell."""
    return text if len(text) <= length else "…" + text[1 - length :]
