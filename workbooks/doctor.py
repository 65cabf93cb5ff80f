"""What is installed, what is wrong and what to do: the first thing that support asks for."""

from __future__ import annotations

import argparse
import json
import os
import platform
import struct
import subprocess
import sys
import time
from collections.abc import Iterator
from dataclasses import asdict, dataclass
from importlib.metadata import PackageNotFoundError, requires, version
from pathlib import Path

from steelyard.core import VERSION

_PATIENCE = 60
"""Seconds that another program may take to answer."""


@dataclass(frozen=True, slots=True)
class Finding:
    """One line of the report.

    Parameters
    ----------
    topic : str
        What was looked at.
    found : str
        What is there.
    fault : str
        What is wrong and what to do; empty if all is well.
    serious : bool
        Whether the add-in can not work because of it.
    """

    topic: str
    found: str
    fault: str = ""
    serious: bool = False

    def __str__(self) -> str:
        mark = "ok" if not self.fault else "WRONG" if self.serious else "note"
        line = f"{mark:<6}{self.topic:<22}{self.found}"
        return f"{line}\n{'':<6}{'':<22}-> {self.fault}" if self.fault else line


def doctor(options: argparse.Namespace) -> int:
    """Print the report; exit code 1 if the add-in can not work."""
    findings = list(examine())
    if options.json:
        print(json.dumps([asdict(finding) for finding in findings], indent=2))
    else:
        print("\n".join(map(str, findings)))
    return int(any(finding.serious for finding in findings))


def examine() -> Iterator[Finding]:
    """Yield what is found, in the order in which the parts build on each other."""
    yield Finding("Steelyard", VERSION)
    bits = struct.calcsize("P") * 8
    yield Finding("Python", f"{platform.python_version()}, {bits} bit, {sys.executable}")
    yield Finding("System", f"{platform.system()} {platform.release()}, {platform.machine()}")
    yield from _packages()
    yield _worker()
    yield from _calc()
    yield from _excel()


def _packages() -> Iterator[Finding]:
    names = {line.split(";")[0].strip() for line in requires("steelyard") or () if "extra ==" not in line}
    for name in sorted(name.split(">")[0].split("=")[0].split("<")[0].strip() for name in names):
        try:
            yield Finding(name, version(name))
        except PackageNotFoundError:
            yield Finding(name, "missing", "install Steelyard anew with pip", serious=True)


def _worker() -> Finding:
    """Ask a worker process a question, as Calc would."""
    from steelyard.addin.calc.pipe import Worker

    started = time.monotonic()
    worker = Worker(sys.executable, VERSION)
    answer = worker.call("VERSION", [])
    first = time.monotonic() - started
    if answer != VERSION:
        fault = "the functions do not answer: install Steelyard anew in this Python"
        return Finding("worker", str(answer), fault, serious=True)
    started = time.monotonic()
    worker.call("VERSION", [])
    again = time.monotonic() - started
    return Finding("worker", f"answers: first {first:.2f} s, then {again * 1000:.2f} ms")


def _calc() -> Iterator[Finding]:
    from steelyard.addin.calc.oxt import IDENTIFIER
    from steelyard.addin.calc.soffice import find_tool

    program, tool = find_tool("soffice"), find_tool("unopkg")
    if program is None or tool is None:
        yield Finding("LibreOffice", "not found", "install LibreOffice to use the functions in Calc")
        return
    yield Finding("LibreOffice", _output([str(program), "--version"]) or str(program))
    if hasattr(os, "geteuid") and os.geteuid() == 0:
        yield Finding("Calc add-in", "not looked at: LibreOffice's tool does not run as root")
        return
    listed = _output([str(tool), "list"])
    told = listed.partition(f"Identifier: {IDENTIFIER}")[2].partition("Identifier: ")[0]
    if not told:
        yield Finding("Calc add-in", "not installed", "run: steelyard connect calc")
    elif "is registered: no" in told:
        yield Finding(
            "Calc add-in", "installed, but not registered", "run: steelyard connect calc", serious=True
        )
    else:
        release = told.partition("Version: ")[2].partition("\n")[0].strip() or "of unknown version"
        fault = "" if release == VERSION else f"Steelyard is {VERSION}: run: steelyard connect calc"
        yield Finding("Calc add-in", f"{release}, installed for this user", fault, serious=bool(fault))


def _excel() -> Iterator[Finding]:
    from steelyard.addin.excel.machine import Machine, excel_kind, faults
    from steelyard.addin.excel.xlam import INTERPRETER, read_settings

    machine = Machine.this()
    if machine.system != "Windows":
        yield Finding("Excel", "not on this system: Excel calls Python on Windows only")
        return
    if machine.excel:
        yield Finding("Excel", excel_kind())
    for fault in faults(machine):
        yield Finding("Excel", "can not call Python", fault, serious=machine.excel)
    file = machine.startup / "steelyard.xlam"
    if not file.exists():
        yield Finding("Excel add-in", "not installed", "run: steelyard connect excel")
        return
    interpreter = read_settings(file).get(INTERPRETER, "")
    if interpreter and not Path(interpreter).exists():
        fault = f"its Python {interpreter} is gone: run steelyard connect excel again"
        yield Finding("Excel add-in", str(file), fault, serious=True)
    else:
        yield Finding("Excel add-in", f"{file}, answered by {interpreter or 'the Python on the PATH'}")


def _output(command: list[str]) -> str:
    try:
        result = subprocess.run(
            command, capture_output=True, text=True, errors="replace", timeout=_PATIENCE, check=False
        )
    except (OSError, subprocess.TimeoutExpired) as error:
        return str(error)
    return result.stdout.strip()
