"""The functions behind xlwings, driven by xlwings' own converters and VBA writer without Windows."""

from __future__ import annotations

import json
import re
import runpy
import subprocess
import sys
from pathlib import Path
from typing import Any

import pytest

from steelyard.addin import CATALOGUE
from steelyard.addin.excel import udfs
from steelyard.addin.excel.vba import module_source, vba_name

HERE = Path(__file__).parent
CALLS = runpy.run_path(str(HERE / "calls.py"))
MISSING = -2147352572  # how COM hands over an argument that was left out


def as_com(value: Any) -> Any:
    """Return an argument as pywin32 hands it to xlwings."""
    if isinstance(value, dict):
        return value.get("error", MISSING)
    return value


@pytest.fixture(scope="module")
def session() -> dict[str, Any]:
    """What xlwings' Windows side makes of the module: answers, VBA text, what it knows of each function."""
    lines = [json.dumps([name, list(map(as_com, arguments))]) for name, arguments in CALLS["calls"]()]
    command = [sys.executable, "-W", "error", HERE / "stub_com.py"]
    result = subprocess.run(
        command, input="\n".join(lines), capture_output=True, text=True, timeout=120, check=False
    )
    assert result.returncode == 0, result.stderr
    return json.loads(result.stdout)


def test_every_call_gives_the_catalogues_answer(session):
    calls = list(CALLS["calls"]())
    assert len(session["answers"]) == len(calls) > 3 * len(CATALOGUE)
    wrong = []
    for (name, arguments), answer in zip(calls, session["answers"], strict=True):
        found = answer if len(answer) > 1 else answer[0][0] if len(answer[0]) == 1 else answer[0]
        wanted = CALLS["expected"](name, arguments)
        if CALLS["differs"](found, wanted):
            wrong.append((name, arguments, found, wanted))
    assert wrong == []


def test_every_example_gives_an_answer():
    """The plans in column A are of a kind that lacks a few abilities: there a sentence says so."""
    answers = {entry.name: entry.function(*CALLS["plain_arguments"](entry)) for entry in CATALOGUE.values()}
    refused = {name: answer for name, answer in answers.items() if str(answer).startswith("SY: ")}
    lacking = "SY: a plan of kind binomial has no "
    assert {name: answer for name, answer in refused.items() if not answer.startswith(lacking)} == {}


def test_xlwings_writes_the_same_heads(session):
    ours = re.findall(r"^Public (Function \w+\(.*\))$", module_source(CATALOGUE.values()), re.MULTILINE)
    assert re.findall(r"^Function \w+\(.*\)$", session["vba"], re.MULTILINE) == ours


def test_xlwings_calls_the_module_that_the_wrappers_call(session):
    pattern = r'CallUDF\("([^"]+)", "(\w+)"'
    theirs = set(re.findall(pattern, session["vba"]))
    assert theirs == set(re.findall(pattern, module_source(CATALOGUE.values())))
    assert {name for _, name in theirs} == set(CATALOGUE)


def test_texts_and_category_come_from_the_catalogue(session):
    assert session["described"] == {
        entry.name: [14, entry.help, [[vba_name(a.name), a.help] for a in entry.arguments]]
        for entry in CATALOGUE.values()
    }


def test_the_module_holds_a_function_for_every_entry():
    assert {name for name in vars(udfs) if name.startswith("SY_")} == set(CATALOGUE)
    assert all(getattr(udfs, name).__module__ == udfs.__name__ for name in CATALOGUE)


@pytest.mark.parametrize(
    ("cells", "value"),
    [
        (None, None),
        ([[0.05]], 0.05),
        ([[None]], None),
        ([[True]], True),
        ([["#N/A"]], "#N/A"),
        ([[7]], 7),
        ([[-2146826245]], "#GETTING_DATA"),
        ([[-2146826243]], "#SPILL!"),
        ([[-2146826238]], "#CALC!"),
        ([[-2146826240]], "#VALUE!"),
        ([[1.0], [None], [-2146826238]], [[1.0], [None], ["#CALC!"]]),
        ([[1.0, 2.0]], [[1.0, 2.0]]),
    ],
)
def test_cells_of_excel(cells, value):
    assert udfs.from_excel(cells) == value


@pytest.mark.parametrize(
    ("answer", "cells"),
    [
        (7, 7.0),
        (2**40, float(2**40)),
        ("ok", "ok"),
        (None, None),
        ([[1, None], ["a", 0.5]], [[1.0, None], ["a", 0.5]]),
    ],
)
def test_answers_for_excel(answer, cells):
    found = udfs.to_excel(answer)
    assert found == cells
    assert repr(found) == repr(cells)
