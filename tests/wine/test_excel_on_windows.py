"""The Windows path without Excel: Windows Python, pywin32, xlwings' library and COM server, our functions.

What plays Excel here starts Python with the command that the add-in file's own loader would build, and
hands over what its wrappers would. Not covered: Excel itself, its VBA, 32 bit.
"""

from __future__ import annotations

import json
import re
import runpy
import zipfile
from pathlib import Path
from typing import Any

import pytest

from steelyard.addin import CATALOGUE
from steelyard.addin.excel import ovba, vba, xlam

pytestmark = pytest.mark.wine
CALLS = runpy.run_path(str(Path(__file__).parents[1] / "addin" / "excel" / "calls.py"))
PIECE = re.compile(r'"(?:[^"]|"")*"|[\w.]+(?:\("\w+"\))?')


class Addin:
    """The add-in file as Excel's loader in it would use it."""

    def __init__(self, path: Path) -> None:
        with zipfile.ZipFile(path) as package:
            modules = ovba.sources(package.read(xlam.VBA_PROJECT))
        self.settings = xlam.read_settings(path)
        self.wrappers = modules[vba.MODULE].replace("\r\n", "\n")
        self.loader = modules["xlwings"].replace("\r\n", "\n")

    @property
    def command(self) -> str:
        """The command that starts Python."""
        path = self._assigned("PYTHONPATH", AddExcelDir=self._setting("ADD_WORKBOOK_TO_PYTHONPATH"))
        tail = self._assigned("tail", PYTHONPATH=path.replace("\\", "\\\\"), LicenseKeyEnvString="")
        return f'cmd.exe  /K ""{self.settings[xlam.INTERPRETER]}"{tail}"'

    @property
    def library(self) -> str:
        """Where the loader looks for the 64-bit library first."""
        (name,) = re.findall(r'XLPyDLLName As String = "(xlwings64-[^"]+)"', self.loader)
        return self.settings[xlam.INTERPRETER].rpartition("\\")[0] + "\\" + name

    def _setting(self, key: str) -> str:
        return self.settings.get(key, "")

    def _assigned(self, name: str, **names: str) -> str:
        """Return what the loader's function for the command assigns to a name: texts and names joined."""
        body = self.loader[self.loader.index("Function XLPyCommand") :]
        (expression, *_) = re.findall(rf"^ +{name} = (.*)$", body, re.MULTILINE)
        return "".join(self._value(piece, names) for piece in PIECE.findall(expression))

    def _value(self, piece: str, names: dict[str, str]) -> str:
        if piece.startswith('"'):
            return piece[1:-1].replace('""', '"')
        if piece.startswith("GetConfig("):
            return self._setting(piece.split('"')[1])
        return r"C:\XLSTART\steelyard.xlam" if piece == "ThisWorkbook.FullName" else names[piece]


@pytest.fixture(scope="module")
def connected(windows) -> dict[str, Any]:
    """What connecting said and left, first without and then with an Excel."""
    return windows.run("connect.py", "connect")


@pytest.fixture(scope="module")
def addin(windows, connected) -> Addin:
    """The add-in file that connecting put into Excel's start-up folder."""
    (path,) = [name for name in connected["new"] if name.endswith(r"\Microsoft\Excel\XLSTART\steelyard.xlam")]
    return Addin(windows.local(path))


@pytest.fixture(scope="module")
def answers(windows, addin) -> dict[str, Any]:
    """What came back when Excel's part was played."""
    job = {
        "library": addin.library,
        "command": addin.command,
        "module": vba.PYTHON_MODULE,
        "first": [vba.PYTHON_MODULE, "SY_VERSION", []],
        "calls": [{"function": name, "arguments": arguments} for name, arguments in CALLS["calls"]()],
    }
    path = windows.root / "job.json"
    path.write_text(json.dumps(job), encoding="utf-8")
    return windows.run("excel.py", windows.path(path))


@pytest.fixture(scope="module")
def disconnected(windows, connected, answers) -> dict[str, Any]:
    """What disconnecting said and removed, after everything else."""
    return windows.run("connect.py", "disconnect")


def test_without_excel_connecting_says_so_and_leaves_nothing(connected):
    assert connected["refusal"].startswith("Excel is not installed on this computer")
    assert connected["left"] == []


def test_connecting_puts_the_add_in_and_the_libraries_in_place(windows, connected, addin):
    names = {name.rpartition("\\")[2] for name in connected["new"]}
    assert names == {"steelyard.xlam", "xlwings32-0.37.8.dll", "xlwings64-0.37.8.dll"}
    assert addin.library in connected["new"]
    assert windows.local(addin.settings[xlam.INTERPRETER]) == windows.python
    assert any("Close Excel and start it again" in line for line in connected["lines"])


def test_xlwings_writes_the_same_heads_as_the_file_holds(addin, answers):
    heads = re.findall(r"^Public (Function \w+\(.*\))$", addin.wrappers, re.MULTILINE)
    assert re.findall(r"^Function \w+\(.*\)$", answers["wrappers"], re.MULTILINE) == heads


def test_the_wrappers_call_exactly_the_catalogue(addin):
    called = re.findall(r'CallUDF\("([^"]+)", "(\w+)"', addin.wrappers)
    assert called == [(vba.PYTHON_MODULE, name) for name in sorted(CATALOGUE)]


def test_every_call_gives_the_answer_of_this_side(answers):
    calls = list(CALLS["calls"]())
    wrong = []
    for (name, arguments), found in zip(calls, answers["calls"], strict=True):
        wanted = CALLS["expected"](name, arguments)
        if CALLS["differs"](found, wanted):
            wrong.append((name, arguments, found, wanted))
    assert wrong == []
    assert {name for name, _ in calls} == set(CATALOGUE)
    print(
        f"{len(calls)} calls, {answers['seconds_per_call']} s each; first after {answers['first_seconds']} s"
    )


def test_one_python_answers_and_no_current_folder_holds_its_modules(answers):
    assert answers["same_process"]
    assert "''" not in answers["search_path"]


def test_a_python_that_died_is_started_again(answers):
    assert answers["after_death"] == answers["first"]
    assert answers["new_process"]
    print(f"an answer again {answers['recovery_seconds']} s after the end of Python")


def test_disconnecting_removes_every_file_that_connecting_brought(connected, disconnected):
    assert disconnected["removed"] == connected["new"]
