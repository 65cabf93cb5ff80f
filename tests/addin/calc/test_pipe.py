"""The pipe to the worker keeps its promises whatever the worker does; programs of a few lines play it."""

from __future__ import annotations

import ast
import inspect
import signal
import sys
import time
from collections.abc import Callable
from pathlib import Path

import pytest
from conftest import StandIn

from steelyard.addin import calc
from steelyard.addin.calc import pipe
from steelyard.addin.calc.pipe import Worker
from steelyard.core import VERSION

Maker = Callable[[str], StandIn]

ECHO = """
say(HELLO)
for line in sys.stdin:
    number, name, args = json.loads(line)
    say([number, args])
"""
DIES = "say(HELLO)\nsys.stdin.readline()\n"
STOPS = "say(HELLO)\nsys.stdin.readline()\nos.kill(os.getpid(), signal.SIGSTOP)\n"
AGAIN = "Press Ctrl+Shift+F9 to calculate again."
RUBBISH = f"SY: the helper process sent something that is no answer, so it was ended. {AGAIN}"


def worker(program: StandIn, timeout: float = 10) -> Worker:
    return Worker(program.path, VERSION, timeout)


def test_values_pass_unchanged(stand_in: Maker) -> None:
    given = [[1.5, 0.1, -1e300], ["é | ≥ \n", None, 10**12]]
    assert worker(stand_in(ECHO)).call("power", given) == given


def test_one_process_serves_all_calls(stand_in: Maker) -> None:
    program = stand_in(ECHO)
    calls = worker(program)
    assert [calls.call("power", [[n]]) for n in range(100)] == [[[n]] for n in range(100)]
    assert len(program.starts) == 1


def test_a_worker_that_died_is_started_again_and_asked_once_more(stand_in: Maker) -> None:
    program = stand_in(ECHO)
    calls = worker(program)
    calls.call("power", [[1]])
    calls._process._kill()
    assert calls.call("power", [[2]]) == [[2]]
    assert len(program.starts) == 2


def test_a_worker_that_always_dies_is_tried_twice_for_a_whole_recalculation(stand_in: Maker) -> None:
    program = stand_in(DIES)
    calls = worker(program)
    answers = {calls.call("power", [n]) for n in range(10_000)}
    assert len(answers) == 1
    assert "ended twice" in (text := answers.pop()) and text.endswith(AGAIN)
    assert len(program.starts) == 2


def test_a_stopped_worker_costs_a_recalculation_one_time_out(stand_in: Maker) -> None:
    program = stand_in(STOPS)
    calls = worker(program, timeout=1.5)
    start = time.monotonic()
    answers = {calls.call("power", [n]) for n in range(10_000)}
    assert time.monotonic() - start < 2 * 1.5  # the promise itself
    assert answers == {f"SY: no answer within 1.5 s, so the helper process was ended. {AGAIN}"}
    assert len(program.starts) == 1


def test_a_request_too_long_for_a_stopped_pipe_does_not_block(stand_in: Maker) -> None:
    program = stand_in("say(HELLO)\nos.kill(os.getpid(), signal.SIGSTOP)\n")
    answer = worker(program, timeout=1).call("power", ["x" * 1_000_000])
    assert answer.startswith("SY: no answer within 1 s")


def test_the_next_recalculation_asks_again(stand_in: Maker, monkeypatch: pytest.MonkeyPatch) -> None:
    program = stand_in("if len(open(__file__ + '.starts').readlines()) == 1: sys.exit()\n" + ECHO)
    calls = worker(program)
    assert calls.call("power", [[1]]).startswith("SY: ")
    assert calls.call("power", [[1]]).startswith("SY: ")
    monkeypatch.setattr(pipe, "PAUSE", 0)  # as if a second had passed without a call
    assert calls.call("power", [[1]]) == [[1]]


@pytest.mark.parametrize(
    "answer",
    [
        "print('rubbish')",
        "print('[1, NaN]')",
        "print('[1, [[1, Infinity]]]')",
        "say([99, 0.5])",
        "say([1])",
        "say({'1': 0.5})",
        "say([1, {}])",
        "say([1, [1, 2]])",
        "say([1, []])",
        "say([1, [[1, 2], [3]]])",
        "say([1, [[1, [2]]]])",
        "sys.stdout.buffer.write(bytes([200, 10]))",
        "print('[' * 100_000)",
    ],
)
def test_rubbish_never_becomes_a_number(stand_in: Maker, answer: str) -> None:
    program = stand_in(f"{DIES}{answer}\nsys.stdout.flush()\nsys.stdin.readline()\n")
    assert worker(program).call("power", [1]) == RUBBISH


@pytest.mark.parametrize(
    "hello", ["print('hello', flush=True)", "say([1])", "say({})", "print('{', flush=True)"]
)
def test_a_program_that_is_no_worker_is_refused(stand_in: Maker, hello: str) -> None:
    assert worker(stand_in(f"{hello}\nsys.stdin.readline()\n")).call("power", [1]) == RUBBISH


@pytest.mark.parametrize(("version", "protocol"), [("9.9.9", 1), (VERSION, 2)])
def test_a_worker_of_another_version_is_refused(stand_in: Maker, version: str, protocol: int) -> None:
    program = stand_in(f"say({{'steelyard': {version!r}, 'protocol': {protocol}}})\n{ECHO}")
    assert worker(program).call("power", [1]) == (
        f"SY: this add-in belongs to Steelyard {VERSION}, but Python runs Steelyard {version}. "
        "Run: steelyard connect calc. Then restart LibreOffice."
    )


def test_a_python_that_moved_is_named(tmp_path: Path) -> None:
    result = Worker(str(tmp_path / "gone" / "python"), VERSION).call("power", [1])
    assert result.startswith("SY: Python was not found at ")
    assert "gone/python. Run: steelyard connect calc." in result


def test_a_python_without_steelyard_is_named(stand_in: Maker) -> None:
    result = worker(stand_in("sys.exit(1)")).call("power", [1])
    assert "stand-in could not start Steelyard. To see why, run: steelyard doctor." in result


def test_every_refusal_fits_a_cell(tmp_path: Path) -> None:
    long = "/" + "/".join(["folder"] * 100) + "/python"
    assert len(Worker(long, VERSION).call("power", [1])) < 255


def test_the_environment_of_libreoffice_does_not_reach_the_worker(
    stand_in: Maker, monkeypatch: pytest.MonkeyPatch
) -> None:
    for name in ("PYTHONHOME", "PYTHONPATH", "LD_LIBRARY_PATH"):
        monkeypatch.setenv(name, "/elsewhere")
    wanted = ["PYTHONHOME", "PYTHONPATH", "LD_LIBRARY_PATH", "OMP_NUM_THREADS"]
    program = stand_in(f"{DIES}say([1, [[os.environ.get(name) for name in {wanted!r}]]])\n")
    assert worker(program).call("power", [1]) == [[None, None, None, "1"]]


def test_a_late_worker_is_gone(stand_in: Maker) -> None:
    calls = worker(stand_in(STOPS), timeout=1)
    process = calls._running(time.monotonic() + 10)._process
    assert calls.call("power", [1]).startswith("SY: no answer within 1 s")
    assert process.wait(10) == -signal.SIGKILL


FOLDER = Path(inspect.getfile(calc)).parent


@pytest.mark.parametrize("name", ["pipe.py", "component.py"])
def test_what_runs_inside_libreoffice_is_old_syntax_and_standard_library(name: str) -> None:
    tree = ast.parse((FOLDER / name).read_text(), feature_version=(3, 8))
    imported = {
        alias.name if isinstance(node, ast.Import) else str(node.module)
        for node in ast.walk(tree)
        if isinstance(node, (ast.Import, ast.ImportFrom))
        for alias in node.names
    }
    host = {"uno", "unohelper", "com", "steelyard_pipe"}
    assert {module.partition(".")[0] for module in imported} <= sys.stdlib_module_names | host


@pytest.mark.parametrize("name", sorted(file.name for file in FOLDER.glob("*.py")))
def test_nothing_evaluates_unpickles_or_listens(name: str) -> None:
    tree = ast.parse((FOLDER / name).read_text())
    names = {node.id for node in ast.walk(tree) if isinstance(node, ast.Name)}
    modules = {
        part
        for node in ast.walk(tree)
        if isinstance(node, (ast.Import, ast.ImportFrom))
        for part in [getattr(node, "module", None), *(alias.name for alias in node.names)]
    }
    assert not names & {"eval", "exec", "compile", "__import__"}
    assert not modules & {"pickle", "marshal", "shelve", "socket", "http", "asyncio", "ctypes"}
