"""Write the Excel add-in file, on any system and without Excel.

The template inside the installed xlwings package becomes ``steelyard.xlam``: xlwings' loader under our
name, the wrapper module of `steelyard.addin.excel.vba`, the texts of the function wizard, and a sheet with
settings. Opening such a file needs no trusted access to VBA projects; only importing functions would.
"""

from __future__ import annotations

import io
import re
import xml.etree.ElementTree as ET
import zipfile
from collections.abc import Iterable, Mapping, Sequence
from html import escape
from importlib.metadata import distribution
from pathlib import Path, PureWindowsPath

from steelyard.addin import CATALOGUE
from steelyard.addin.catalogue import Entry
from steelyard.addin.excel import ovba, vba
from steelyard.core import VERSION
from steelyard.core.errors import SteelyardError

PROJECT = "steelyard"  # names the settings sheet and the user's settings folder
SETTINGS_SHEET = f"{PROJECT}.conf"
INTERPRETER, COPIED = "Interpreter_Win", "Copied files"
# A folder without Python modules: something must stand in sys.path there, and nothing would be Excel's
# current folder.
USER_FOLDER = rf"%USERPROFILE%\.{PROJECT}"

WORKBOOK, SHEET = "xl/workbook.xml", "xl/worksheets/sheet1.xml"
VBA_PROJECT, PROPERTIES = "xl/vbaProject.bin", "docProps/core.xml"
MAIN = "{http://schemas.openxmlformats.org/spreadsheetml/2006/main}"
NEW_PROPERTIES = f"""\
<?xml version="1.0" encoding="UTF-8" standalone="yes"?>
<cp:coreProperties xmlns:cp="http://schemas.openxmlformats.org/package/2006/metadata/core-properties" \
xmlns:dc="http://purl.org/dc/elements/1.1/"><dc:title>Steelyard {VERSION}</dc:title>\
<dc:creator>Steelyard</dc:creator><dc:description>The power of a hypothesis test, live in cells.\
</dc:description></cp:coreProperties>"""

# What the loader is changed in, and how often each text must stand there. It looks at the workbook that
# happens to be active, for settings and for the command that starts Python: each workbook would start a
# Python of its own, and one with a settings sheet could name another program. The add-in looks at itself.
# The option -P keeps Excel's current folder out of the search for modules. A private module keeps the
# loader's own functions out of the function wizard.
LOADER_CHANGES = (
    ('Attribute VB_Name = "xlwings"', 'Attribute VB_Name = "xlwings"\nOption Private Module', 1),
    ('PROJECT_NAME As String = "myaddin"', f'PROJECT_NAME As String = "{PROJECT}"', 1),
    ("ActiveWorkbook", "ThisWorkbook", 22),
    ('tail = " -B -c ', 'tail = " -B -P -c ', 1),
)


def settings(interpreter: str | None = None, copied: Sequence[str] = ()) -> dict[str, str]:
    """Return what the settings sheet holds.

    Parameters
    ----------
    interpreter : str, optional
        Path of the ``python.exe`` that answers; without one the loader looks into the user's settings
        folder, then on the PATH.
    copied : sequence of str
        Files put elsewhere for this add-in, to be removed with it.
    """
    found = {
        INTERPRETER: interpreter or "",
        "PYTHONPATH": str(PureWindowsPath(interpreter).parent) if interpreter else USER_FOLDER,
        "ADD_WORKBOOK_TO_PYTHONPATH": "false",
        "UDF Modules": vba.PYTHON_MODULE,
        "Steelyard": VERSION,
        COPIED: ";".join(copied),
    }
    return {key: value for key, value in found.items() if value}


def write_xlam(path: Path, interpreter: str | None = None, copied: Sequence[str] = ()) -> Path:
    """Write the add-in file; the same arguments give the same bytes.

    Parameters
    ----------
    path : Path
        Where to write; an existing file is replaced only by a complete one.
    interpreter, copied
        See `settings`.

    Raises
    ------
    SteelyardError
        When Excel's compiler would refuse the wrappers, or xlwings brings an unexpected template.
    """
    content = xlam_bytes(CATALOGUE.values(), settings(interpreter, copied))
    partial = path.with_name(f"{path.name}.part")
    try:
        partial.write_bytes(content)
        partial.replace(path)
    finally:
        partial.unlink(missing_ok=True)
    return path


def read_settings(path: Path) -> dict[str, str]:
    """Return the settings of an add-in file.

    Raises
    ------
    SteelyardError
        When the file is no add-in file of Steelyard.
    """
    try:
        with zipfile.ZipFile(path) as package:
            rows = ET.fromstring(package.read(SHEET)).iter(f"{MAIN}row")
            cells = [["".join(cell.itertext()) for cell in row] for row in rows]
        return {key: value for key, value in cells}  # noqa: C416 (rows of any other length are refused)
    except (zipfile.BadZipFile, KeyError, ET.ParseError, ValueError) as error:
        message = f"{path} is no add-in file of Steelyard: move it elsewhere and try again"
        raise SteelyardError(message) from error


def xlam_bytes(entries: Iterable[Entry], conf: Mapping[str, str]) -> bytes:
    """Return an add-in file with wrappers for these entries and these settings."""
    entries = sorted(entries, key=lambda entry: entry.name)
    wrappers = vba.module_source(entries)
    faults = [*vba.lint(wrappers), *(fault for entry in entries for fault in vba.lint_texts(entry))]
    if faults:
        message = f"Excel would refuse the add-in file: {'; '.join(faults)}"
        raise SteelyardError(message)
    with zipfile.ZipFile(_xlwings_file("quickstart_addin.xlam")) as template:
        parts = {info.filename: template.read(info) for info in template.infolist()}
    modules = {"xlwings": _loader(), vba.MODULE: wrappers}
    parts[VBA_PROJECT] = ovba.rebuild(parts[VBA_PROJECT], "Steelyard", modules, drop=("Module1",))
    parts[SHEET] = _settings_sheet(parts[SHEET].decode(), conf).encode()
    parts[WORKBOOK] = _workbook(parts[WORKBOOK].decode(), entries).encode()
    parts[PROPERTIES] = NEW_PROPERTIES.encode()
    return _zipped(parts)


def _xlwings_file(name: str) -> Path:
    return Path(str(distribution("xlwings").locate_file(f"xlwings/{name}")))


def _loader() -> str:
    source = _xlwings_file("xlwings_custom_addin.bas").read_text(encoding=ovba.CODE_PAGE)
    for old, new, times in LOADER_CHANGES:
        source = _swapped(source, re.escape(old), new, times)
    return source


def _swapped(text: str, pattern: str, new: str, times: int = 1) -> str:
    """Replace a pattern, which must be found exactly so often: the template must be the one we know."""
    changed, found = re.subn(pattern, lambda _: new, text, flags=re.DOTALL)
    if found != times:
        message = (
            "the installed xlwings brings another add-in template than Steelyard knows: reinstall Steelyard, "
            f"which brings the right one ({pattern} stands {found} times in it)"
        )
        raise SteelyardError(message)
    return changed


def _settings_sheet(sheet: str, conf: Mapping[str, str]) -> str:
    rows = "".join(
        f'<row r="{number}">{_text_cell(f"A{number}", key)}{_text_cell(f"B{number}", value)}</row>'
        for number, (key, value) in enumerate(conf.items(), 1)
    )
    sheet = _swapped(sheet, r'<dimension ref="[^"]*" />', f'<dimension ref="A1:B{len(conf)}" />')
    return _swapped(sheet, r"<sheetData>.*</sheetData>", f"<sheetData>{rows}</sheetData>")


def _text_cell(place: str, text: str) -> str:
    return f'<c r="{place}" t="inlineStr"><is><t>{escape(text)}</t></is></c>'


def _workbook(workbook: str, entries: Iterable[Entry]) -> str:
    workbook = _swapped(workbook, r"<mc:AlternateContent.*</mc:AlternateContent>", "")
    workbook = _swapped(workbook, '"_myaddin.conf"', f'"{SETTINGS_SHEET}"')
    return _swapped(workbook, "<extLst>", f"<extLst>{_argument_texts(entries)}")


def _argument_texts(entries: Iterable[Entry]) -> str:
    """Return the wizard's argument texts as an extension of the workbook part ([MS-XLSX] 2.2.2, 2.6)."""
    names = "".join(
        f'<x14:definedName name="{entry.name}">'
        f'<x14:argumentDescriptions count="{len(entry.arguments)}">'
        + "".join(
            f'<x14:argumentDescription index="{i}">{escape(argument.help)}</x14:argumentDescription>'
            for i, argument in enumerate(entry.arguments)
        )
        + "</x14:argumentDescriptions></x14:definedName>"
        for entry in entries
        if entry.arguments
    )
    return (
        '<ext uri="{8193D73E-4604-4355-AFF4-8A2333D13BE4}"'
        ' xmlns:x14="http://schemas.microsoft.com/office/spreadsheetml/2009/9/main">'
        f"<x14:definedNames>{names}</x14:definedNames></ext>"
    )


def _zipped(parts: Mapping[str, bytes]) -> bytes:
    buffer = io.BytesIO()
    with zipfile.ZipFile(buffer, "w") as package:
        for name, content in parts.items():
            info = zipfile.ZipInfo(name)  # dated 1980
            info.compress_type, info.create_system = zipfile.ZIP_DEFLATED, 0
            package.writestr(info, content)
    return buffer.getvalue()
