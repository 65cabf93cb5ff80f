"""Run LibreOffice without a window: recalculate a workbook, print it to PDF.

Every run has a profile of its own, so neither a LibreOffice that is open nor the user's settings are in the
way, and the add-in is lent to that run alone: nothing is installed.

Examples
--------
``recalculate("book.xlsx", "recalculated.xlsx")`` opens the book with Steelyard's functions, calculates every
formula anew whatever values the file holds, and saves it; read the values back with
``openpyxl.load_workbook(..., data_only=True)``.
"""

from __future__ import annotations

import os
import shutil
import subprocess
import tempfile
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path

from steelyard.addin.calc import oxt
from steelyard.addin.calc.pipe import TIMEOUT
from steelyard.core.errors import SteelyardError

_PLACES = (
    "/usr/bin",
    "/usr/local/bin",
    "/opt/libreoffice*/program",
    "/Applications/LibreOffice.app/Contents/MacOS",
    "C:/Program Files/LibreOffice/program",
    "C:/Program Files (x86)/LibreOffice/program",
)
"""Where LibreOffice stands when it is not on the PATH."""

_ALWAYS_RECALCULATE = """\
<?xml version="1.0" encoding="UTF-8"?>
<oor:items xmlns:oor="http://openoffice.org/2001/registry" xmlns:xs="http://www.w3.org/2001/XMLSchema"
  xmlns:xsi="http://www.w3.org/2001/XMLSchema-instance">
<item oor:path="/org.openoffice.Office.Calc/Formula/Load"><prop oor:name="OOXMLRecalcMode" oor:op="fuse">
<value>0</value></prop></item>
<item oor:path="/org.openoffice.Office.Calc/Formula/Load"><prop oor:name="ODFRecalcMode" oor:op="fuse">
<value>0</value></prop></item>
</oor:items>
"""


def find_tool(name: str) -> Path | None:
    """Return the path of a LibreOffice program (``soffice`` or ``unopkg``), or None where there is none."""
    if found := shutil.which(name):
        return Path(found)
    for place in _PLACES:
        anchor = Path(place).anchor
        for folder in sorted(Path(anchor).glob(place[len(anchor) :])):
            for file in (folder / f"{name}.com", folder / f"{name}.exe", folder / name):
                if file.is_file():
                    return file
    return None


def recalculate(
    source: str | os.PathLike[str],
    target: str | os.PathLike[str],
    with_addin: bool = True,
    timeout: float = 120,
) -> Path:
    """Open a workbook in headless Calc, calculate every formula anew and save it.

    Parameters
    ----------
    source : str or path-like
        An .xlsx or .ods file; it is left as it is.
    target : str or path-like
        The file to write; its suffix says the format. Calc writes .xlsx values with 15 digits.
    with_addin : bool
        Whether the ``SY.`` functions are there.
    timeout : float
        Seconds after which LibreOffice is ended.

    Returns
    -------
    pathlib.Path
        The file written.

    Raises
    ------
    SteelyardError
        If LibreOffice is missing, fails, or takes too long.
    """
    target = Path(target)
    with tempfile.TemporaryDirectory(prefix="steelyard-") as folder:
        made = convert(source, target.suffix[1:], Path(folder) / "out", with_addin, timeout)
        shutil.move(made, target)
    return target


def to_pdf(
    source: str | os.PathLike[str],
    folder: str | os.PathLike[str],
    with_addin: bool = True,
    timeout: float = 120,
) -> Path:
    """Recalculate a workbook in headless Calc and print it to a PDF of the same name in a folder."""
    return convert(source, "pdf", Path(folder), with_addin, timeout)


def convert(
    source: str | os.PathLike[str], suffix: str, folder: Path, with_addin: bool = True, timeout: float = 120
) -> Path:
    """Open a workbook in headless Calc, calculate it and save it into a folder under another suffix."""
    with session(with_addin) as command:
        wanted = ["--convert-to", suffix, "--outdir", str(folder), str(Path(source).resolve())]
        output = _run([*command, *wanted], timeout)
    made = folder / f"{Path(source).stem}.{suffix}"
    if not made.is_file():
        message = f"LibreOffice did not turn {source} into a .{suffix} file: {output.strip()[-300:]}"
        raise SteelyardError(message)
    return made


@contextmanager
def session(
    with_addin: bool = True, interpreter: str | None = None, timeout: float = TIMEOUT
) -> Iterator[list[str]]:
    """Yield the command that starts LibreOffice with a fresh profile and, if wanted, with the add-in.

    Parameters
    ----------
    with_addin : bool
        Whether the ``SY.`` functions are there.
    interpreter : str, optional
        The Python that runs the worker; the running one if left out.
    timeout : float
        Seconds until Calc gives a call of the worker up.
    """
    soffice = find_tool("soffice")
    if soffice is None:
        message = "LibreOffice was not found: install it, or put its program folder on the PATH"
        raise SteelyardError(message)
    with tempfile.TemporaryDirectory(prefix="steelyard-", ignore_cleanup_errors=True) as name:
        folder = Path(name)
        settings = folder / "profile" / "user" / "registrymodifications.xcu"
        settings.parent.mkdir(parents=True)
        settings.write_text(_ALWAYS_RECALCULATE, encoding="utf-8")
        command = [
            str(soffice),
            f"-env:UserInstallation={(folder / 'profile').as_uri()}",
            "--headless",
            "--norestore",
            "--nolockcheck",
        ]
        if with_addin:
            addin = oxt.unpack(folder / "addin", interpreter, timeout)
            command += [
                f"-env:URE_MORE_TYPES=<$ORIGIN/types>* {(addin / oxt.IDL).as_uri()}",
                f"-env:URE_MORE_SERVICES=<$ORIGIN/services>* {(addin / oxt.COMPONENTS).as_uri()}",
            ]
        yield command


def _run(command: list[str], timeout: float) -> str:
    """Run LibreOffice to its end; the first start of a new profile may ask (exit 81) to be started again."""
    for _ in range(2):
        try:
            done = subprocess.run(
                command, capture_output=True, text=True, errors="replace", timeout=timeout, check=False
            )
        except subprocess.TimeoutExpired:
            message = f"LibreOffice did not finish within {timeout:g} s"
            raise SteelyardError(message) from None
        if done.returncode != 81:
            break
    return done.stdout + done.stderr
