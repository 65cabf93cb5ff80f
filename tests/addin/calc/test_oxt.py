"""The extension file follows from the catalogue alone and is the same each time."""

from __future__ import annotations

import json
import sys
import zipfile
from pathlib import Path
from xml.etree import ElementTree

import pytest

from steelyard.addin import CATALOGUE
from steelyard.addin.calc import oxt
from steelyard.core import VERSION


@pytest.fixture
def parts(tmp_path: Path) -> dict[str, bytes]:
    """Return the files inside a written extension."""
    with zipfile.ZipFile(oxt.write_oxt(tmp_path / "steelyard.oxt")) as bundle:
        return {name: bundle.read(name) for name in bundle.namelist()}


def test_the_same_catalogue_gives_the_same_bytes(tmp_path: Path) -> None:
    first = oxt.write_oxt(tmp_path / "a.oxt").read_bytes()
    assert oxt.write_oxt(tmp_path / "b.oxt").read_bytes() == first
    assert sorted(file.name for file in tmp_path.iterdir()) == ["a.oxt", "b.oxt"]


def test_every_function_has_its_method_and_its_texts(parts: dict[str, bytes]) -> None:
    idl = parts["steelyard.idl"].decode()
    functions = json.loads(parts["functions.json"])
    assert len(functions) == len(CATALOGUE)
    for entry in CATALOGUE.values():
        method = entry.calc_name.removeprefix("SY.")
        arguments = ", ".join(f"[in] any a{place}" for place in range(len(entry.arguments)))
        assert f"sequence< sequence< any > > {method}({arguments});" in idl
        assert functions[method]["help"] == entry.help
        assert [a["name"] for a in functions[method]["arguments"]] == [a.name for a in entry.arguments]
        assert [a["help"] for a in functions[method]["arguments"]] == [a.help for a in entry.arguments]


def test_a_bare_zero_passes_only_where_a_blank_means_zero(parts: dict[str, bytes]) -> None:
    functions = json.loads(parts["functions.json"])
    for entry in CATALOGUE.values():
        arguments = functions[entry.calc_name.removeprefix("SY.")]["arguments"]
        assert [a["zero"] for a in arguments] == [a.default == 0 for a in entry.arguments]


def test_the_settings_name_the_interpreter_and_the_version(parts: dict[str, bytes], tmp_path: Path) -> None:
    assert json.loads(parts["settings.json"]) == {
        "interpreter": sys.executable,
        "version": VERSION,
        "timeout": 30.0,
    }
    other = oxt.write_oxt(tmp_path / "other.oxt", interpreter="/opt/python")
    with zipfile.ZipFile(other) as bundle:
        assert json.loads(bundle.read("settings.json"))["interpreter"] == "/opt/python"


def test_the_manifest_names_files_that_are_there(parts: dict[str, bytes]) -> None:
    ElementTree.fromstring(parts["description.xml"])
    attribute = "{http://openoffice.org/2001/manifest}full-path"
    entries = list(ElementTree.fromstring(parts["META-INF/manifest.xml"]))
    assert [entry.get(attribute) for entry in entries] == ["steelyard.idl", "component.py"]
    assert {"steelyard.idl", "component.py", "pythonpath/steelyard_pipe.py"} <= parts.keys()


def test_unpacked_it_carries_its_list_of_services(tmp_path: Path) -> None:
    oxt.unpack(tmp_path, interpreter="/opt/python", timeout=2)
    services = ElementTree.fromstring((tmp_path / oxt.COMPONENTS).read_bytes())
    assert [element.get("name") for element in services.iter() if element.tag.endswith("service")] == [
        "com.sun.star.sheet.AddIn",
        "SY",
    ]
    settings = json.loads((tmp_path / "settings.json").read_text())
    assert settings == {"interpreter": "/opt/python", "version": VERSION, "timeout": 2}


def test_a_file_that_cannot_be_written_leaves_nothing_behind(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    old = tmp_path / "steelyard.oxt"
    old.write_bytes(b"old")
    monkeypatch.setattr(oxt, "parts", lambda interpreter: {"name": object()})
    with pytest.raises(TypeError):
        oxt.write_oxt(old)
    assert [file.read_bytes() for file in tmp_path.iterdir()] == [b"old"]
