"""Connecting says in one sentence what is missing; a script plays LibreOffice's tool."""

from __future__ import annotations

import os
from collections.abc import Callable
from pathlib import Path

import pytest

from steelyard.addin.calc import connect, soffice
from steelyard.addin.calc.connect import connect_calc, disconnect_calc
from steelyard.core import VERSION
from steelyard.core.errors import SteelyardError

ROOT = "ERROR: Cannot run unopkg as root without --shared or --bundled option."

INSTALLED = '[ "$1" = list ] && echo "Identifier: steelyard.calc"; exit 0'

INSTALLS = '[ "$1" = list ] && grep -q ^add "$0.calls" && echo "Identifier: steelyard.calc"; exit 0'


@pytest.fixture
def tool(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Callable[[str], Path]:
    """Return a maker of tools that write down how they are called and then run a line of shell."""
    if os.name == "nt":
        pytest.skip("a script cannot stand in for LibreOffice's tool on Windows")

    def make(line: str) -> Path:
        path = tmp_path / "unopkg"
        path.write_text(f'#!/bin/sh\necho "$@" >> {path}.calls\n{line}\n')
        path.chmod(0o755)
        monkeypatch.setattr(connect, "find_tool", lambda name: path)
        return Path(f"{path}.calls")

    return make


def test_connecting_installs_and_says_what_to_do(tool: Callable[[str], Path]) -> None:
    calls = tool(INSTALLS)
    lines = connect_calc()
    assert lines[0] == f"Steelyard {VERSION} is installed in LibreOffice for this user."
    assert f"Then type =SY.VERSION() into a cell: it shows {VERSION}." in "\n".join(lines)
    assert [call.partition(" /")[0] for call in calls.read_text().splitlines()] == [
        "list",
        "add --suppress-license",
        "list",
    ]


def test_an_extension_that_did_not_arrive_is_reported(tool: Callable[[str], Path]) -> None:
    tool("")
    with pytest.raises(SteelyardError, match="LibreOffice took the extension but does not list it"):
        connect_calc()


def test_connecting_again_replaces_what_is_there(tool: Callable[[str], Path]) -> None:
    calls = tool(INSTALLED)
    connect_calc()
    assert [call.split()[0] for call in calls.read_text().splitlines()] == ["list", "remove", "add", "list"]


def test_nothing_is_installed_when_the_functions_do_not_answer(
    tool: Callable[[str], Path], monkeypatch: pytest.MonkeyPatch
) -> None:
    calls = tool("")
    monkeypatch.setattr(connect.sys, "executable", "/gone/python")
    with pytest.raises(
        SteelyardError, match="so nothing was installed: SY: Python was not found at /gone/python"
    ):
        connect_calc()
    assert not calls.exists()


@pytest.mark.parametrize("action", [connect_calc, disconnect_calc])
def test_missing_libreoffice_is_said(
    action: Callable[[], list[str]], monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr(connect, "find_tool", lambda name: None)
    with pytest.raises(
        SteelyardError, match="LibreOffice was not found: install it, or put its program folder"
    ):
        action()


@pytest.mark.parametrize("action", [connect_calc, disconnect_calc])
def test_root_is_told_to_be_somebody(action: Callable[[], list[str]], tool: Callable[[str], Path]) -> None:
    tool(f"echo '{ROOT}' >&2; exit 1")
    with pytest.raises(
        SteelyardError, match="installs nothing for the user root: run this command as the user"
    ):
        action()


def test_any_other_failure_is_quoted(tool: Callable[[str], Path]) -> None:
    tool("echo something; echo 'ERROR: the disk is full' >&2; exit 1")
    with pytest.raises(
        SteelyardError, match=r"unopkg list failed \(ERROR: the disk is full\): close LibreOffice"
    ):
        connect_calc()


def test_a_tool_that_hangs_is_ended(tool: Callable[[str], Path], monkeypatch: pytest.MonkeyPatch) -> None:
    tool("exec sleep 60")
    monkeypatch.setattr(connect, "_PATIENCE", 0.2)
    with pytest.raises(SteelyardError, match=r"unopkg list took more than 0\.2 s"):
        disconnect_calc()


def test_disconnecting_removes_what_is_there(tool: Callable[[str], Path]) -> None:
    calls = tool(INSTALLED)
    assert disconnect_calc() == [
        "Steelyard is removed from LibreOffice. Close LibreOffice and open it again."
    ]
    assert calls.read_text().splitlines() == ["list", "remove steelyard.calc"]


def test_disconnecting_twice_is_no_error(tool: Callable[[str], Path]) -> None:
    calls = tool("echo 'All deployed user extensions:'")
    assert disconnect_calc() == [
        "Steelyard was not installed in LibreOffice for this user; nothing to remove."
    ]
    assert calls.read_text().splitlines() == ["list"]


def test_programs_are_found_in_the_usual_folders(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    program = tmp_path / "libreoffice7.4" / "program" / "soffice"
    program.parent.mkdir(parents=True)
    monkeypatch.setattr(soffice.shutil, "which", lambda name: None)
    monkeypatch.setattr(soffice, "_PLACES", (f"{tmp_path}/libreoffice*/program",))
    assert soffice.find_tool("soffice") is None
    program.touch()
    assert soffice.find_tool("soffice") == program


def test_without_libreoffice_a_recalculation_says_so(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(soffice, "find_tool", lambda name: None)
    with pytest.raises(SteelyardError, match="LibreOffice was not found"):
        soffice.recalculate(tmp_path / "a.xlsx", tmp_path / "b.xlsx")


def test_a_libreoffice_that_hangs_is_ended(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    program = tmp_path / "soffice"
    program.write_text("#!/bin/sh\nexec sleep 60\n")
    program.chmod(0o755)
    monkeypatch.setattr(soffice, "find_tool", lambda name: program)
    with pytest.raises(SteelyardError, match=r"LibreOffice did not finish within 0\.2 s"):
        soffice.recalculate(tmp_path / "a.xlsx", tmp_path / "b.xlsx", timeout=0.2)
