"""Connect Excel on this Windows, or disconnect it; prints JSON. Runs in the Windows Python."""

import contextlib
import ctypes
import json
import sys
import winreg

from steelyard.addin.excel.connect import connect_excel, disconnect_excel
from steelyard.addin.excel.machine import Machine
from steelyard.core.errors import SteelyardError

# Wine starts its desktop with the first program that asks for it. It would inherit the pipes of the program
# that connecting starts, and keep them open as long as this one lives.
ctypes.windll.user32.GetDesktopWindow()

EXCEL = r"Software\Classes\Excel.Application\CLSID"
machine = Machine.this()


def files():
    """Return every file of Excel's start-up folder and of Python's."""
    folders = (machine.startup, machine.interpreter.parent)
    return {
        str(path) for folder in folders if folder.exists() for path in folder.rglob("*") if path.is_file()
    }


def connect():
    """Be refused as long as there is no Excel, then connect."""
    before = files()
    with contextlib.suppress(FileNotFoundError):
        winreg.DeleteKey(winreg.HKEY_LOCAL_MACHINE, EXCEL)
    try:
        connect_excel()
        refusal = ""
    except SteelyardError as error:
        refusal = str(error)
    left = files() - before
    winreg.CloseKey(winreg.CreateKey(winreg.HKEY_LOCAL_MACHINE, EXCEL))
    lines = connect_excel()
    return {"refusal": refusal, "left": sorted(left), "lines": lines, "new": sorted(files() - before)}


def disconnect():
    """Disconnect, and tell which files went."""
    before = files()
    lines = disconnect_excel()
    return {"lines": lines, "removed": sorted(before - files())}


print(json.dumps({"connect": connect, "disconnect": disconnect}[sys.argv[1]]()))
