"""What this computer has of all that Excel functions in Python need, and what is missing."""

from __future__ import annotations

import os
import platform
import re
import subprocess
import sys
from collections.abc import Callable, Iterator
from dataclasses import dataclass
from importlib.metadata import distribution
from pathlib import Path

DLL = re.compile(r"xlwings(?:32|64)-[\d.]+\.dll")
PROBE = "import pythoncom, win32com.client, xlwings, steelyard.addin.excel.udfs"
PROBE_SECONDS = 120  # a first start with a virus scanner looking at every file


@dataclass(frozen=True, slots=True)
class Machine:
    """A computer to connect Excel on.

    Parameters
    ----------
    system : str
        As `platform.system` names it.
    interpreter : Path
        The ``python.exe`` that is to answer Excel.
    base : Path
        The installation that the interpreter belongs to, where it is a virtual environment.
    startup : Path
        Excel's start-up folder of this user.
    excel : bool
        Whether Excel is installed.
    dlls : tuple of Path
        The libraries that xlwings was installed with; Excel loads the one for its own bitness.
    import_fault : callable
        Tries to import everything in the interpreter; returns the error's last line, or "".
    """

    system: str
    interpreter: Path
    base: Path
    startup: Path
    excel: bool
    dlls: tuple[Path, ...]
    import_fault: Callable[[Path], str]

    @classmethod
    def this(cls) -> Machine:
        """Return the computer and the Python that run now."""
        roaming = os.environ.get("APPDATA") or Path.home() / "AppData" / "Roaming"
        files = distribution("xlwings").files or ()
        return cls(
            system=platform.system(),
            interpreter=Path(sys.executable),
            base=Path(sys.base_prefix),
            startup=Path(roaming, "Microsoft", "Excel", "XLSTART"),
            excel=_excel_is_registered(),
            dlls=tuple(Path(str(file.locate())).resolve() for file in files if DLL.fullmatch(file.name)),
            import_fault=_import_fault,
        )

    def misplaced(self) -> tuple[Path, ...]:
        """Return the libraries that Excel's loader would not find: not beside the interpreter, nor above."""
        folders = (self.interpreter.parent, self.interpreter.parent.parent)
        return tuple(dll for dll in self.dlls if not any((folder / dll.name).exists() for folder in folders))


def faults(machine: Machine) -> Iterator[str]:
    """Yield what keeps Excel from calling this Python, each with the next step; the worst first."""
    python = machine.interpreter
    if machine.system != "Windows":
        yield (
            f"Excel calls Python on Windows only, and this is {machine.system or 'another system'}: run "
            "steelyard connect calc for LibreOffice, or write a file for a Windows computer with "
            "steelyard addin-file excel -o steelyard.xlam"
        )
        return
    if not machine.excel:
        yield "Excel is not installed on this computer: run steelyard connect calc for LibreOffice instead"
    if "WindowsApps" in (*python.parts, *machine.base.parts):
        yield (
            f"Excel can not start the Python of the Microsoft Store ({python}): install Python with the "
            "installer of python.org, and Steelyard in it"
        )
    if not str(python).isascii() or set("%;") & set(str(python)):
        yield (
            f"Excel can not start a Python whose path holds letters outside ASCII, % or ; ({python}): make a "
            "virtual environment in a folder with a plain name"
        )
    if not machine.dlls:
        yield (
            "xlwings was installed without its library for Excel: run "
            "python -m pip install --force-reinstall xlwings"
        )
    if fault := machine.import_fault(python):
        yield (
            f"Python can not load what Excel calls ({fault}): run "
            "python -m pip install --force-reinstall pywin32 xlwings"
        )


def _excel_is_registered() -> bool:
    if sys.platform != "win32":
        return False
    import winreg

    try:
        winreg.CloseKey(winreg.OpenKey(winreg.HKEY_CLASSES_ROOT, r"Excel.Application\CLSID"))
    except OSError:
        return False
    return True


def excel_kind() -> str:
    """Return where Excel starts from and who installed it; an Excel of the Microsoft Store runs fenced in."""
    if sys.platform != "win32":
        return ""
    import winreg

    try:
        key = r"SOFTWARE\Microsoft\Windows\CurrentVersion\App Paths\excel.exe"
        path = winreg.QueryValue(winreg.HKEY_LOCAL_MACHINE, key)
    except OSError:
        return "installed, but not where Windows lists its programs"
    kind = "Microsoft Store" if "WindowsApps" in path else "desktop"
    bits = 32 if "(x86)" in path else 64
    return f"{kind}, probably {bits} bit, {path}"


def _import_fault(python: Path) -> str:
    command = [str(python), "-B", "-P", "-c", PROBE]
    try:
        result = subprocess.run(
            command, capture_output=True, text=True, errors="replace", timeout=PROBE_SECONDS, check=False
        )
    except (OSError, subprocess.TimeoutExpired) as error:
        return str(error)
    lines = result.stderr.strip().splitlines()
    return "" if result.returncode == 0 else (lines or [f"exit code {result.returncode}"])[-1]
