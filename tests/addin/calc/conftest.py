"""What the Calc tests share: programs that stand in for the worker."""

from __future__ import annotations

import os
import sys
from collections.abc import Callable
from pathlib import Path

import pytest

PRELUDE = """\
import json, os, signal, sys, time
from steelyard.core import VERSION

def say(value):
    sys.stdout.write(json.dumps(value) + "\\n")
    sys.stdout.flush()

HELLO = {"steelyard": VERSION, "protocol": 1}
with open(__file__ + ".starts", "a") as file:
    print(os.getpid(), file=file)
"""


class StandIn:
    """A program that is started in place of the worker's interpreter and writes down each of its starts."""

    def __init__(self, path: Path, body: str) -> None:
        self.path = str(path)
        path.write_text(f"#!{sys.executable}\n{PRELUDE}{body}")
        path.chmod(0o755)

    @property
    def starts(self) -> list[int]:
        """Process numbers of the workers started so far."""
        log = Path(self.path + ".starts")
        return [int(line) for line in log.read_text().split()] if log.exists() else []


@pytest.fixture
def stand_in(tmp_path: Path) -> Callable[[str], StandIn]:
    """Return a maker of stand-ins for the worker, from the Python text they run."""
    if os.name == "nt":
        pytest.skip("a script cannot stand in for an interpreter on Windows")
    return lambda body: StandIn(tmp_path / "stand-in", body)
