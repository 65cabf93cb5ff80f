"""Install the Calc extension for the current user, and remove it, with LibreOffice's own tool."""

from __future__ import annotations

import subprocess
import sys
import tempfile
from pathlib import Path

from steelyard.addin.calc.oxt import IDENTIFIER, write_oxt
from steelyard.addin.calc.pipe import Worker
from steelyard.addin.calc.soffice import find_tool
from steelyard.core import VERSION
from steelyard.core.errors import SteelyardError

_PATIENCE = 120
"""Seconds that LibreOffice's tool may take; it starts a part of LibreOffice."""


def connect_calc() -> list[str]:
    """Build the extension for this Python and install it in LibreOffice for the current user.

    Returns
    -------
    list of str
        What was done and what the user sees now, line by line.

    Raises
    ------
    SteelyardError
        If LibreOffice is missing, the worker does not answer, or LibreOffice's tool refuses.
        Then nothing has been installed.
    """
    tool = _unopkg()
    answer = Worker(sys.executable, VERSION).call("VERSION", [])
    if answer != VERSION:
        message = f"the functions do not answer, so nothing was installed: {answer}"
        raise SteelyardError(message)
    with tempfile.TemporaryDirectory(prefix="steelyard-") as folder:
        extension = write_oxt(Path(folder) / "steelyard.oxt")  # LibreOffice keeps a copy of its own
        _remove(tool)
        _run(tool, "add", "--suppress-license", str(extension))
    # LibreOffice keeps two copies of its list of extensions and changes over at each start of its tool or
    # of itself. Its very first start looks into the older copy; one more run brings that up to date.
    if IDENTIFIER not in _run(tool, "list"):
        message = "LibreOffice took the extension but does not list it: close LibreOffice and try again"
        raise SteelyardError(message)
    return [
        f"Steelyard {VERSION} is installed in LibreOffice for this user.",
        f"The functions are computed by {sys.executable}; after moving it, connect again.",
        f"Close LibreOffice and open it again. Then type =SY.VERSION() into a cell: it shows {VERSION}.",
        "Function Wizard (Ctrl+F2), category Statistical: all functions begin with SY.",
    ]


def disconnect_calc() -> list[str]:
    """Remove the extension from LibreOffice for the current user.

    Returns
    -------
    list of str
        What was done, line by line.

    Raises
    ------
    SteelyardError
        If LibreOffice is missing or its tool refuses.
    """
    if not _remove(_unopkg()):
        return ["Steelyard was not installed in LibreOffice for this user; nothing to remove."]
    return ["Steelyard is removed from LibreOffice. Close LibreOffice and open it again."]


def _unopkg() -> Path:
    tool = find_tool("unopkg")
    if tool is None:
        message = (
            "LibreOffice was not found: install it, or put its program folder (where unopkg is) on the PATH"
        )
        raise SteelyardError(message)
    return tool


def _remove(tool: Path) -> bool:
    """Remove the extension if it is installed, and tell whether it was."""
    installed = IDENTIFIER in _run(tool, "list")
    if installed:
        _run(tool, "remove", IDENTIFIER)
    return installed


def _run(tool: Path, *arguments: str) -> str:
    """Run LibreOffice's tool and return what it printed."""
    try:
        done = subprocess.run(
            [str(tool), *arguments],
            capture_output=True,
            text=True,
            errors="replace",
            timeout=_PATIENCE,
            check=False,
        )
    except subprocess.TimeoutExpired:
        message = f"unopkg {arguments[0]} took more than {_PATIENCE} s: close LibreOffice and try again"
        raise SteelyardError(message) from None
    if done.returncode != 0:
        raise SteelyardError(_reason(arguments[0], done.stdout + done.stderr))
    return done.stdout


def _reason(command: str, output: str) -> str:
    """Return why LibreOffice's tool failed, in one sentence with the next step."""
    if "as root" in output:
        return (
            "LibreOffice installs nothing for the user root: run this command as the user who works with it"
        )
    told = next((line.strip() for line in output.splitlines() if "ERROR" in line), output.strip())
    return f"unopkg {command} failed ({told[:200]}): close LibreOffice and try again"
