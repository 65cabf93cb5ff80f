"""The worker answers lines with lines, keeps its output clean, and ends when its parent is gone."""

from __future__ import annotations

import io
import json
import os
import subprocess
import sys
from typing import Any

import pytest

from steelyard.addin.calc import pipe, worker
from steelyard.core import VERSION

HELLO = {"steelyard": VERSION, "protocol": 1}


def talk(answer: worker.Answer, *requests: list[Any]) -> list[Any]:
    """Return what the worker sends for these requests."""
    output = io.BytesIO()
    lines = (json.dumps(request).encode() for request in requests)
    worker.serve(lines, output, answer, VERSION)
    assert output.getvalue().isascii()
    return [json.loads(line) for line in output.getvalue().splitlines()]


def test_it_greets_and_numbers_its_answers() -> None:
    answers = talk(lambda name, args: f"{name} {args}", [7, "power", ["≥", None]], [8, "beta", [[[1.5]]]])
    assert answers == [HELLO, [7, "power ['≥', None]"], [8, "beta [[[1.5]]]"]]


def test_a_lack_of_memory_becomes_a_text() -> None:
    def greedy(name: str, args: list[Any]) -> Any:
        return [bytearray(1 << 60)]

    assert talk(greedy, [1, "power", []]) == [
        HELLO,
        [1, "SY: the memory does not suffice for this call: use smaller ranges"],
    ]


@pytest.mark.parametrize("value", [float("nan"), float("inf"), [[1.0, float("nan")]], {1, 2}, 1j])
def test_a_value_that_no_cell_holds_becomes_a_text(value: Any) -> None:
    (_, (number, text)) = talk(lambda name, args: value, [1, "power", []])
    assert (number, text[:35]) == (1, "SY: power gave no value that a cell")


def test_a_result_too_large_for_a_call_becomes_a_text() -> None:
    row = [0.5] * 1000
    assert talk(lambda name, args: [row] * 100, [1, "power", []])[1][1] == [row] * 100
    refused = talk(lambda name, args: [row] * 101, [1, "power", []])[1][1]
    assert refused == "SY: the result has 101000 cells, but a call returns at most 100000"


def test_a_stray_print_does_not_spoil_the_answers(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(pipe, "BOOT", pipe.BOOT.replace("main(out)", "print('stray', flush=True); main(out)"))
    assert pipe.Worker(sys.executable, VERSION).call("VERSION", []) == VERSION


@pytest.mark.skipif(os.name == "nt", reason="on Windows it ends after its computation")
def test_it_stops_in_the_middle_of_a_computation_when_its_parent_is_gone() -> None:
    program = (
        "from steelyard.addin.calc import worker; import threading\n"
        "threading.Thread(target=worker.leave_with_parent, daemon=True).start()\n"
        "print('busy', flush=True); threading.Event().wait()"
    )
    command = [sys.executable, "-c", program]
    with subprocess.Popen(command, stdin=subprocess.PIPE, stdout=subprocess.PIPE) as process:
        assert process.stdin is not None
        assert process.stdout is not None
        assert process.stdout.read(4) == b"busy"
        process.stdin.close()
        assert process.wait(30) == 0
