"""A running LibreOffice for the tests: `Office` starts it without a window and gives it commands.

Commands are those of `driver.py`, called as methods: ``office.put(doc, "A1:B1", [[1, "=A1"]])``.
"""

from __future__ import annotations

import json
import os
import shutil
import signal
import subprocess
import sys
import uuid
from contextlib import ExitStack
from pathlib import Path
from typing import Any, Self

import pytest

from steelyard.addin.calc import soffice

DRIVER = Path(__file__).with_name("driver.py")


def python_with_uno() -> str | None:
    """Return a Python that can talk to LibreOffice: LibreOffice's own, the system's, or none."""
    program = soffice.find_tool("soffice")
    beside = [] if program is None else [str(program.resolve().with_name("python"))]
    for candidate in [*beside, "/usr/bin/python3", shutil.which("python3"), sys.executable]:
        if candidate and shutil.which(candidate):
            found = subprocess.run([candidate, "-c", "import uno"], capture_output=True, check=False)
            if found.returncode == 0:
                return candidate
    return None


class Office:
    """LibreOffice with the add-in lent to it, in a profile of its own; use it in a ``with`` statement.

    Parameters
    ----------
    interpreter : str or path-like, optional
        What the add-in starts as its worker.
    timeout : float
        Seconds until the add-in gives a call up.
    """

    def __init__(self, interpreter: str | Path | None = None, timeout: float = 30) -> None:
        self._options = (None if interpreter is None else str(interpreter), timeout)

    def __enter__(self) -> Self:
        python = python_with_uno()
        assert python is not None, "no Python with LibreOffice's uno module"
        with ExitStack() as stack:
            command = stack.enter_context(soffice.session(True, *self._options))
            pipe = f"steelyard{uuid.uuid4().hex}"
            command += [f"--accept=pipe,name={pipe};urp;"]
            self._office = stack.enter_context(
                subprocess.Popen(command, stderr=subprocess.DEVNULL, start_new_session=True)
            )
            self._driver = stack.enter_context(
                subprocess.Popen(
                    [python, str(DRIVER), pipe], stdin=subprocess.PIPE, stdout=subprocess.PIPE, text=True
                )
            )
            stack.callback(self.kill)
            self._reply()
            self._stack = stack.pop_all()
        return self

    def __exit__(self, *problem: object) -> None:
        try:
            if self._driver.poll() is None:
                self._send("quit")
                self._office.wait(30)
        finally:
            self._stack.close()

    @property
    def pid(self) -> int:
        """Process number of LibreOffice, or of the program that watches over it."""
        return self._office.pid

    def __getattr__(self, command: str) -> Any:
        def run(*arguments: Any) -> Any:
            self._send(command, *arguments)
            return self._reply()

        return run

    def kill(self) -> None:
        """End LibreOffice as a crash would, with the program that watches over it."""
        if self._office.poll() is None:
            os.killpg(self._office.pid, signal.SIGKILL)
        self._driver.kill()

    def value(self, document: int, cell: str) -> Any:
        """Return one cell's number or text."""
        return self.get(document, cell)[0][0]

    def compute(self, document: int, formula: str, cell: str = "Z1") -> Any:
        """Type a formula into a cell and return what the cell shows."""
        self.put(document, cell, [[formula]])
        return self.value(document, cell)

    def _send(self, *request: Any) -> None:
        assert self._driver.stdin is not None
        self._driver.stdin.write(json.dumps(request) + "\n")
        self._driver.stdin.flush()

    def _reply(self) -> Any:
        assert self._driver.stdout is not None
        line = self._driver.stdout.readline()
        assert line, "LibreOffice or its driver ended"
        good, result = json.loads(line)
        if not good:
            pytest.fail(result)
        return result
