"""The add-in file: parts, settings, wizard texts, and independent readers that agree on every module."""

from __future__ import annotations

import posixpath
import xml.etree.ElementTree as ET
import zipfile
from pathlib import Path

import pytest
from oletools.olevba import VBA_Parser

from steelyard.addin import CATALOGUE
from steelyard.addin.excel import ovba, vba, xlam
from steelyard.core import VERSION
from steelyard.core.errors import SteelyardError

PYTHON = r"C:\Program Files\Steelyard & Co\python.exe"
X14 = "{http://schemas.microsoft.com/office/spreadsheetml/2009/9/main}"
RELATION = "{http://schemas.openxmlformats.org/officeDocument/2006/relationships}"
TYPES = "{http://schemas.openxmlformats.org/package/2006/content-types}"


@pytest.fixture(scope="module")
def addin(tmp_path_factory) -> Path:
    """An add-in file for a certain Python."""
    return xlam.write_xlam(
        tmp_path_factory.mktemp("xlam") / "steelyard.xlam", PYTHON, [r"C:\x\xlwings64-1.dll"]
    )


@pytest.fixture(scope="module")
def parts(addin) -> dict[str, bytes]:
    """The parts of that file."""
    with zipfile.ZipFile(addin) as package:
        assert package.testzip() is None
        return {name: package.read(name) for name in package.namelist()}


@pytest.fixture(scope="module")
def modules(parts) -> dict[str, str]:
    """The VBA modules of that file."""
    return ovba.sources(parts["xl/vbaProject.bin"])


def test_the_same_bytes_every_time(addin, tmp_path):
    copied = [r"C:\x\xlwings64-1.dll"]
    assert xlam.write_xlam(tmp_path / "again.xlam", PYTHON, copied).read_bytes() == addin.read_bytes()


def test_it_is_an_add_in_of_well_formed_parts(parts):
    types = {
        item.get("PartName"): item.get("ContentType") for item in ET.fromstring(parts["[Content_Types].xml"])
    }
    assert types["/xl/workbook.xml"] == "application/vnd.ms-excel.addin.macroEnabled.main+xml"
    assert types["/xl/vbaProject.bin"] == "application/vnd.ms-office.vbaProject"
    assert {name.lstrip("/") for name in types if name} <= set(parts)
    for name, content in parts.items():
        if name.endswith((".xml", ".rels")):
            ET.fromstring(content)


def test_every_relation_leads_to_a_part(parts):
    for name in [name for name in parts if name.endswith(".rels")]:
        base = posixpath.dirname(posixpath.dirname(name))
        for relation in ET.fromstring(parts[name]):
            assert posixpath.normpath(posixpath.join(base, relation.get("Target"))) in parts


def test_code_names_match_the_document_modules(parts, modules):
    workbook = ET.fromstring(parts[xlam.WORKBOOK])
    sheet = ET.fromstring(parts[xlam.SHEET])
    assert workbook.find(f"{xlam.MAIN}workbookPr").get("codeName") == "ThisWorkbook"
    assert sheet.find(f"{xlam.MAIN}sheetPr").get("codeName") == "Sheet2"
    assert {"ThisWorkbook", "Sheet2"} <= set(modules)


def test_the_settings_sheet(addin, parts):
    (sheet,) = ET.fromstring(parts[xlam.WORKBOOK]).iter(f"{xlam.MAIN}sheet")
    assert sheet.get("name") == "steelyard.conf"
    assert xlam.read_settings(addin) == {
        "Interpreter_Win": PYTHON,
        "PYTHONPATH": r"C:\Program Files\Steelyard & Co",
        "ADD_WORKBOOK_TO_PYTHONPATH": "false",
        "UDF Modules": "steelyard.addin.excel.udfs",
        "Steelyard": VERSION,
        "Copied files": r"C:\x\xlwings64-1.dll",
    }


def test_without_an_interpreter_the_row_is_left_out(tmp_path):
    settings = xlam.read_settings(xlam.write_xlam(tmp_path / "steelyard.xlam"))
    assert "Interpreter_Win" not in settings
    assert settings["PYTHONPATH"] == r"%USERPROFILE%\.steelyard"


def test_the_wizard_texts_are_the_catalogues(parts):
    described = {
        name.get("name"): [text.text for text in name.iter(f"{X14}argumentDescription")]
        for name in ET.fromstring(parts[xlam.WORKBOOK]).iter(f"{X14}definedName")
    }
    assert described == {
        entry.name: [argument.help for argument in entry.arguments]
        for entry in CATALOGUE.values()
        if entry.arguments
    }


def test_nothing_of_the_templates_author_is_left(parts):
    properties = parts[xlam.PROPERTIES].decode()
    assert f"<dc:title>Steelyard {VERSION}</dc:title>" in properties
    assert b"absPath" not in parts[xlam.WORKBOOK]
    assert b"myaddin" not in parts[xlam.WORKBOOK]


def test_the_loader_looks_at_the_add_in_only(modules):
    loader = modules["xlwings"]
    assert loader.startswith('Attribute VB_Name = "xlwings"\r\nOption Private Module\r\n')
    assert 'Public Const PROJECT_NAME As String = "steelyard"' in loader
    assert "ActiveWorkbook" not in loader
    assert 'tail = " -B -P -c ""import sys, os;"' in loader


def test_modules_and_wrappers(modules):
    assert list(modules) == ["ThisWorkbook", "Dictionary", "xlwings", "Sheet2", "steelyard_udfs"]
    assert modules["steelyard_udfs"].splitlines() == vba.module_source(CATALOGUE.values()).splitlines()


def test_olevba_reads_the_same_modules(addin, modules):
    with_ending = VBA_Parser(str(addin)).extract_macros()
    assert {name.rpartition(".")[0]: code for _, _, name, code in with_ending} == modules


def test_a_wrapper_that_vba_would_refuse_stops_the_file(tmp_path, monkeypatch):
    monkeypatch.setattr(vba, "vba_name", str)  # argument names as they are, `end` among them
    bad = tmp_path / "bad.xlam"
    with pytest.raises(SteelyardError, match=r"Excel would refuse the add-in file: .*end is a reserved word"):
        xlam.write_xlam(bad)
    assert list(tmp_path.iterdir()) == []


def test_another_template_is_refused(monkeypatch):
    changes = (("PROJECT_NAME As String", "", 2),)
    monkeypatch.setattr(xlam, "LOADER_CHANGES", changes)
    with pytest.raises(SteelyardError, match="another add-in template than Steelyard knows"):
        xlam.xlam_bytes(CATALOGUE.values(), {})


def test_a_failed_write_keeps_the_old_file(tmp_path, monkeypatch):
    target = tmp_path / "steelyard.xlam"
    target.write_bytes(b"old")
    monkeypatch.setattr(Path, "replace", lambda *_: (_ for _ in ()).throw(PermissionError("in use")))
    with pytest.raises(PermissionError):
        xlam.write_xlam(target)
    assert [path.name for path in tmp_path.iterdir()] == ["steelyard.xlam"]
    assert target.read_bytes() == b"old"


@pytest.mark.parametrize("content", [b"", b"something else"])
def test_settings_of_another_file_are_refused(tmp_path, content):
    other = tmp_path / "other.xlam"
    other.write_bytes(content)
    with pytest.raises(SteelyardError, match=r"other\.xlam is no add-in file of Steelyard: move it"):
        xlam.read_settings(other)
