"""Connecting and disconnecting, on an invented Windows computer."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

import pytest

from steelyard.addin.excel import connect, machine, xlam
from steelyard.addin.excel.connect import connect_excel, disconnect_excel
from steelyard.addin.excel.machine import Machine, faults
from steelyard.core import VERSION
from steelyard.core.errors import SteelyardError

DLLS = ("xlwings32-0.37.8.dll", "xlwings64-0.37.8.dll")


@pytest.fixture
def computer(tmp_path) -> Machine:
    """A computer with everything in place: a virtual environment whose root holds xlwings' libraries."""
    scripts = tmp_path / "venv" / "Scripts"
    scripts.mkdir(parents=True)
    dlls = tuple(tmp_path / "venv" / name for name in DLLS)
    for dll in dlls:
        dll.write_bytes(b"library")
    return Machine(
        system="Windows",
        interpreter=scripts / "python.exe",
        base=tmp_path / "Python311",
        startup=tmp_path / "XLSTART",
        excel=True,
        dlls=dlls,
        import_fault=lambda _: "",
    )


@pytest.fixture
def scattered(computer, tmp_path) -> Machine:
    """The same computer, with the libraries where Excel's loader does not look."""
    away = tmp_path / "AppData" / "Python311"
    away.mkdir(parents=True)
    return replace(computer, dlls=tuple(dll.rename(away / dll.name) for dll in computer.dlls))


def everything_below(folder: Path) -> set[str]:
    return {str(path.relative_to(folder)) for path in folder.rglob("*") if path.is_file()}


def test_connecting_writes_one_file_and_says_what_will_be_seen(computer, tmp_path):
    before = everything_below(tmp_path)
    lines = connect_excel(computer)
    assert everything_below(tmp_path) - before == {"XLSTART/steelyard.xlam"}
    settings = xlam.read_settings(computer.startup / "steelyard.xlam")
    assert settings["Interpreter_Win"] == str(computer.interpreter)
    assert "Copied files" not in settings
    assert (
        f"Type =SY_VERSION() into a cell: it shows {VERSION}. The first answer takes a few seconds." in lines
    )


def test_disconnecting_leaves_no_trace(computer, tmp_path):
    before = everything_below(tmp_path)
    connect_excel(computer)
    assert disconnect_excel(computer)[0] == f"Removed {computer.startup / 'steelyard.xlam'}."
    assert everything_below(tmp_path) == before


def test_disconnecting_what_is_not_connected(computer):
    assert disconnect_excel(computer) == [
        f"Excel was not connected: there is no {computer.startup / 'steelyard.xlam'}."
    ]


def test_libraries_are_copied_where_the_loader_looks_and_removed_again(scattered, tmp_path):
    before = everything_below(tmp_path)
    lines = connect_excel(scattered)
    assert everything_below(tmp_path) - before == {
        "XLSTART/steelyard.xlam",
        *(f"venv/Scripts/{name}" for name in DLLS),
    }
    assert sum(line.startswith("Copied xlwings") for line in lines) == 2
    disconnect_excel(scattered)
    assert everything_below(tmp_path) == before


def test_connecting_twice_still_knows_the_copies(scattered, tmp_path):
    before = everything_below(tmp_path)
    connect_excel(scattered)
    connect_excel(scattered)
    disconnect_excel(scattered)
    assert everything_below(tmp_path) == before


def test_connecting_another_python_removes_the_first_ones_copies_with_the_add_in(scattered, tmp_path):
    before = everything_below(tmp_path)
    connect_excel(scattered)
    other = tmp_path / "other" / "python.exe"
    other.parent.mkdir()
    connect_excel(replace(scattered, interpreter=other))
    disconnect_excel(replace(scattered, interpreter=other))
    assert everything_below(tmp_path) == before


def test_only_libraries_of_xlwings_are_ever_removed(computer, tmp_path):
    precious = tmp_path / "precious.txt"
    precious.write_text("keep")
    computer.startup.mkdir()
    xlam.write_xlam(computer.startup / "steelyard.xlam", copied=[str(precious)])
    disconnect_excel(computer)
    assert precious.read_text() == "keep"


@pytest.mark.parametrize("system", ["Linux", "Darwin", ""])
def test_other_systems_hear_what_to_do_instead(computer, tmp_path, system):
    before = everything_below(tmp_path)
    elsewhere = replace(computer, system=system)
    with pytest.raises(SteelyardError, match=r"Windows only.*steelyard addin-file excel -o steelyard\.xlam"):
        connect_excel(elsewhere)
    with pytest.raises(SteelyardError, match="Windows only"):
        disconnect_excel(elsewhere)
    assert everything_below(tmp_path) == before


@pytest.mark.parametrize(
    ("change", "message"),
    [
        ({"excel": False}, "Excel is not installed on this computer: run steelyard connect calc"),
        ({"dlls": ()}, "without its library for Excel: run python -m pip install --force-reinstall xlwings"),
        ({"base": Path("C:/Program Files/WindowsApps/Python")}, "Python of the Microsoft Store"),
        ({"interpreter": Path("/users/jürgen/python.exe")}, "letters outside ASCII"),
        (
            {"interpreter": Path("/100%/python.exe")},
            "make a virtual environment in a folder with a plain name",
        ),
        (
            {"import_fault": lambda _: "ImportError: DLL load failed"},
            r"\(ImportError: DLL load failed\): run python",
        ),
    ],
)
def test_what_is_missing_is_one_sentence_and_nothing_is_left(computer, tmp_path, change, message):
    before = everything_below(tmp_path)
    with pytest.raises(SteelyardError, match=message):
        connect_excel(replace(computer, **change))
    assert everything_below(tmp_path) == before
    assert not computer.startup.exists()


def test_a_folder_that_can_not_be_written_to_leaves_nothing(scattered, tmp_path, monkeypatch):
    def refuse(source, target):
        Path(target).write_bytes(b"lib")
        raise PermissionError(target)

    before = everything_below(tmp_path)
    monkeypatch.setattr(connect.shutil, "copyfile", refuse)
    with pytest.raises(SteelyardError, match="can not be written to: make a virtual environment"):
        connect_excel(scattered)
    assert everything_below(tmp_path) == before


def test_a_running_excel_is_named_and_the_copies_are_undone(scattered, tmp_path, monkeypatch):
    def in_use(*_):
        raise PermissionError("in use")

    before = everything_below(tmp_path)
    monkeypatch.setattr(connect, "write_xlam", in_use)
    with pytest.raises(SteelyardError, match="close Excel and run the command again"):
        connect_excel(scattered)
    assert everything_below(tmp_path) == before


def test_disconnecting_under_a_running_excel_can_be_repeated(computer, tmp_path, monkeypatch):
    before = everything_below(tmp_path)
    connect_excel(computer)
    with monkeypatch.context() as running:
        running.setattr(connect, "_remove", lambda _: (_ for _ in ()).throw(PermissionError("in use")))
        with pytest.raises(SteelyardError, match="close Excel and run the command again"):
            disconnect_excel(computer)
    disconnect_excel(computer)
    assert everything_below(tmp_path) == before


def test_a_file_of_someone_else_under_our_name_is_left_alone(computer):
    computer.startup.mkdir()
    other = computer.startup / "steelyard.xlam"
    other.write_bytes(b"not ours")
    with pytest.raises(SteelyardError, match="is no add-in file of Steelyard"):
        connect_excel(computer)
    assert other.read_bytes() == b"not ours"


def test_a_complete_computer_has_no_faults(computer):
    assert list(faults(computer)) == []


def test_this_computer_is_described():
    this = Machine.this()
    assert this.startup.parts[-3:] == ("Microsoft", "Excel", "XLSTART")
    assert this.interpreter.exists()


def test_an_import_that_fails_is_told_by_its_last_line(monkeypatch):
    monkeypatch.setattr(machine, "PROBE", "raise ImportError('no pythoncom')")
    assert machine._import_fault(Machine.this().interpreter) == "ImportError: no pythoncom"
    monkeypatch.setattr(machine, "PROBE", "pass")
    assert machine._import_fault(Machine.this().interpreter) == ""
    assert "No such file" in machine._import_fault(Path("nowhere", "python.exe"))
