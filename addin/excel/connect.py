"""Connect Excel with this Python, and take it away again.

Connecting puts one file, ``steelyard.xlam``, into Excel's start-up folder. Where xlwings' libraries lie
elsewhere than Excel's loader looks, it copies them beside ``python.exe``; the add-in file keeps the list
of these copies, so that disconnecting leaves no trace.
"""

from __future__ import annotations

import shutil
from collections.abc import Sequence
from importlib.metadata import version
from pathlib import Path

from steelyard.addin import CATALOGUE
from steelyard.addin.excel.machine import DLL, Machine, faults
from steelyard.addin.excel.xlam import COPIED, read_settings, write_xlam
from steelyard.core import VERSION
from steelyard.core.errors import SteelyardError

ADDIN = "steelyard.xlam"


def connect_excel(machine: Machine | None = None) -> list[str]:
    """Make the cell functions available in Excel, for this user.

    Parameters
    ----------
    machine : Machine, optional
        The computer to connect; this one by default.

    Returns
    -------
    list of str
        What was done, and what the user will see.

    Raises
    ------
    SteelyardError
        Where something is missing: one sentence with the next step, and nothing is left behind.
    """
    machine = machine or Machine.this()
    for fault in faults(machine):
        raise SteelyardError(fault)
    target = machine.startup / ADDIN
    earlier = _copies_of(target)
    copied = _copy_libraries(machine)
    try:
        machine.startup.mkdir(parents=True, exist_ok=True)
        write_xlam(target, str(machine.interpreter), [str(path) for path in (*earlier, *copied)])
    except BaseException as error:
        _remove(copied)
        if isinstance(error, OSError):
            raise _in_use(target) from error
        raise
    return [
        f"Wrote {target} with {len(CATALOGUE)} functions of Steelyard {VERSION}.",
        f"Excel will call {machine.interpreter} through xlwings {version('xlwings')}.",
        *(f"Copied {path.name} to {path.parent}, where Excel looks for it." for path in copied),
        "Close Excel and start it again.",
        f"Type =SY_VERSION() into a cell: it shows {VERSION}. The first answer takes a few seconds.",
        "The functions stand in the function wizard under User Defined; their names begin with SY_.",
        "A cell that shows #NAME?: Excel did not load the add-in. "
        "A cell that shows SY: no answer from Python: run steelyard doctor.",
    ]


def disconnect_excel(machine: Machine | None = None) -> list[str]:
    """Take the cell functions out of Excel again.

    Raises
    ------
    SteelyardError
        When Excel still has a file open. What is left can be removed by a second call.
    """
    machine = machine or Machine.this()
    if machine.system != "Windows":
        raise SteelyardError(next(iter(faults(machine))))
    target = machine.startup / ADDIN
    if not target.exists():
        return [f"Excel was not connected: there is no {target}."]
    copied = _copies_of(target)
    try:
        _remove([*copied, target])  # the add-in last: it holds the list of the copies
    except OSError as error:
        raise _in_use(target) from error
    return [
        *(f"Removed {path}." for path in (*copied, target)),
        "From its next start on Excel has no SY functions. "
        "Cells keep the values that they show until Excel calculates them anew.",
    ]


def _copies_of(addin: Path) -> list[Path]:
    """Return the copies of xlwings' libraries that an earlier connection made and that still exist."""
    if not addin.exists():
        return []
    named = read_settings(addin).get(COPIED, "").split(";")
    return [path for path in map(Path, filter(None, named)) if DLL.fullmatch(path.name) and path.exists()]


def _copy_libraries(machine: Machine) -> list[Path]:
    folder = machine.interpreter.parent
    copied: list[Path] = []
    try:
        for library in machine.misplaced():
            copied.append(folder / library.name)
            shutil.copyfile(library, copied[-1])
    except OSError as error:
        _remove(copied)
        message = (
            f"{folder} needs a copy of {library.name}, and can not be written to: make a virtual environment "
            "of your own (py -m venv steelyard), install Steelyard there and connect again"
        )
        raise SteelyardError(message) from error
    return copied


def _remove(paths: Sequence[Path]) -> None:
    for path in paths:
        path.unlink(missing_ok=True)


def _in_use(target: Path) -> SteelyardError:
    return SteelyardError(f"{target} can not be changed: close Excel and run the command again")
