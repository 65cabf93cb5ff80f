"""LibreOffice as an independent reader of the add-in file, and as another VBA that runs its wrappers.

The wrappers run in a workbook made of the add-in's parts, with a stand-in for xlwings' loader (which needs
Windows) that writes down what a wrapper hands to Python.
"""

from __future__ import annotations

import json
import re
import runpy
import shutil
import subprocess
import zipfile
from html import escape
from pathlib import Path
from typing import Any

import pytest

from steelyard.addin import CATALOGUE
from steelyard.addin.excel import ovba, vba, xlam

pytestmark = pytest.mark.calc
HERE = Path(__file__).parent

PYTHON = """\
Attribute VB_Name = "xlwings"
Function XLPy()
    Set XLPy = New Dictionary
End Function
"""
NO_PYTHON = """\
Attribute VB_Name = "xlwings"
Function XLPy()
    Err.Raise 1000, , "Could not load xlwings64.dll"
End Function
"""
# Writes each argument as its VarType and its value, or the number of rows and columns.
RECORDER = """\
Public Function CallUDF(module As String, name As String, arguments As Variant) As Variant
    Dim i As Integer, shown As String, value As Variant
    shown = module & " " & name
    For i = LBound(arguments) To UBound(arguments)
        value = arguments(i)
        shown = shown & "; " & VarType(value)
        If IsArray(value) Then
            shown = shown & " " & UBound(value, 1) & "x" & UBound(value, 2)
        ElseIf Not IsError(value) Then
            shown = shown & " " & value
        End If
    Next
    CallUDF = shown
End Function
"""
# What the recorder must show: VarType 0 is an empty cell or an argument left out, 5 a number, 8 a text,
# 8204 an array of cells.
FORMULAS = {
    "SY_VERSION()": "SY_VERSION",
    "SY_POWER(B1,C1)": "SY_POWER; 8 a plan; 5 0.05; 0 ",
    "SY_POWER(B1,C1:C3,7)": "SY_POWER; 8 a plan; 8204 3x1; 5 7",
    "SY_POWER(B1,C1:D3)": "SY_POWER; 8 a plan; 8204 3x2; 0 ",
    "SY_POWER(B1,C3)": "SY_POWER; 8 a plan; 0 ; 0 ",
    'SY_LIMIT(B1,2,"upper")': "SY_LIMIT; 8 a plan; 5 2; 8 upper; 0 ",
}


def workbook(addin: Path, loader: str) -> bytes:
    """Return a macro workbook with the add-in's wrappers, a stand-in for the loader, and formulas."""
    with zipfile.ZipFile(addin) as package:
        parts = {name: package.read(name) for name in package.namelist()}
    modules = ovba.sources(parts[xlam.VBA_PROJECT])
    head = modules["Dictionary"].partition("Attribute VB_Description")[0]
    wrappers = modules[vba.MODULE].replace(".Value2", ".Value")  # which LibreOffice 7.4 lacks
    changed = {"Dictionary": head + RECORDER, "xlwings": loader, vba.MODULE: wrappers}
    parts[xlam.VBA_PROJECT] = ovba.rebuild(parts[xlam.VBA_PROJECT], "Steelyard", changed)
    types = parts["[Content_Types].xml"]
    parts["[Content_Types].xml"] = types.replace(b"addin.macroEnabled", b"sheet.macroEnabled")
    cells = '<row r="1"><c r="B1" t="inlineStr"><is><t>a plan</t></is></c><c r="C1"><v>0.05</v></c></row>'
    cells += "".join(
        f'<row r="{row}"><c r="A{row}"><f>{escape(text)}</f></c></row>'
        for row, text in enumerate(FORMULAS, 10)
    )
    data = f"<sheetData>{cells}</sheetData>".encode()
    parts[xlam.SHEET] = re.sub(rb"<sheetData>.*</sheetData>", lambda _: data, parts[xlam.SHEET])
    return xlam._zipped(parts)


@pytest.fixture(scope="module")
def read(tmp_path_factory) -> list[dict[str, Any]]:
    """What LibreOffice finds in the add-in, and in the workbooks with and without a Python."""
    office = runpy.run_path(str(HERE.parent / "calc" / "office.py"))
    folder = tmp_path_factory.mktemp("libreoffice")
    addin = xlam.write_xlam(folder / "steelyard.xlam")
    (folder / "python.xlsm").write_bytes(workbook(addin, PYTHON))
    (folder / "no-python.xlsm").write_bytes(workbook(addin, NO_PYTHON))
    command = [
        office["python_with_uno"](),
        HERE / "read_in_calc.py",
        shutil.which("soffice"),
        folder / "profile",
    ]
    files = [addin, folder / "python.xlsm", folder / "no-python.xlsm"]
    result = subprocess.run([*command, *files], capture_output=True, text=True, timeout=180, check=False)
    assert result.returncode == 0, result.stderr
    return json.loads(result.stdout.splitlines()[-1])


def statements(source: str) -> list[str]:
    """Return the lines of a module that are neither attributes nor comments: LibreOffice rewrites these."""
    lines = (line.rstrip() for line in source.splitlines())
    return [line for line in lines if line and not re.match(r"Attribute |\s*'|Rem |Option VBASupport", line)]


def test_libreoffice_reads_the_same_modules(read, tmp_path):
    with zipfile.ZipFile(xlam.write_xlam(tmp_path / "steelyard.xlam")) as package:
        modules = ovba.sources(package.read(xlam.VBA_PROJECT))
    assert set(read[0]["modules"]) == set(modules)
    for name, source in modules.items():
        if name != "Dictionary":  # a class, whose head LibreOffice writes in its own words
            assert statements(read[0]["modules"][name]) == statements(source), name
    assert "Private Function dict_GetFormattedKey" in read[0]["modules"]["Dictionary"]


def test_wrappers_hand_over_values_in_another_vba(read):
    module = vba.PYTHON_MODULE
    assert dict(zip(FORMULAS, read[1]["formulas"], strict=True)) == {
        formula: f"{module} {shown}" for formula, shown in FORMULAS.items()
    }


def test_without_python_every_cell_says_so(read):
    refusal = "SY: no answer from Python, run: steelyard doctor (Could not load xlwings64.dll)"
    assert read[2]["formulas"] == [refusal] * len(FORMULAS)


def test_every_formula_of_this_module_is_in_the_catalogue():
    assert {formula.partition("(")[0] for formula in FORMULAS} <= set(CATALOGUE)
