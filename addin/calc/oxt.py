"""Write the Calc extension (``.oxt``) from the catalogue; no compiler and no LibreOffice is needed.

An extension is a zip file. LibreOffice reads the plain ``.idl`` text where a compiled type library could
stand, so the interface with one method per cell function is written out as text. All arguments are ``any``:
the only type that takes numbers, texts and ranges alike and may be left out. All results are
``sequence<sequence<any>>``: the only type that serves single cells and array formulas alike.
"""

from __future__ import annotations

import json
import os
import sys
import zipfile
from importlib.resources import files
from pathlib import Path
from xml.sax.saxutils import escape

from steelyard.addin import CATALOGUE
from steelyard.addin.calc.pipe import TIMEOUT
from steelyard.addin.catalogue import Argument, Entry
from steelyard.core import VERSION

IDENTIFIER = "steelyard.calc"
"""The name by which LibreOffice knows the extension."""

COMPONENTS = "steelyard.components"
IDL = "steelyard.idl"

_MANIFEST = f"""\
<?xml version="1.0" encoding="UTF-8"?>
<manifest:manifest xmlns:manifest="http://openoffice.org/2001/manifest">
  <manifest:file-entry manifest:full-path="{IDL}"
    manifest:media-type="application/vnd.sun.star.uno-typelibrary;type=RDB"/>
  <manifest:file-entry manifest:full-path="component.py"
    manifest:media-type="application/vnd.sun.star.uno-component;type=Python"/>
</manifest:manifest>
"""

_COMPONENTS = """\
<?xml version="1.0" encoding="UTF-8"?>
<components xmlns="http://openoffice.org/2010/uno-components">
  <component loader="com.sun.star.loader.Python" uri="component.py">
    <implementation name="steelyardcalc.Functions">
      <service name="com.sun.star.sheet.AddIn"/>
      <service name="SY"/>
    </implementation>
  </component>
</components>
"""

_DESCRIPTION = """\
<?xml version="1.0" encoding="UTF-8"?>
<description xmlns="http://openoffice.org/extensions/description/2006">
  <identifier value="{identifier}"/>
  <version value="{version}"/>
  <display-name><name lang="en">Steelyard {version}: power functions (SY.) for Calc</name></display-name>
</description>
"""

_IDL = """\
module com {{ module sun {{ module star {{ module uno {{ interface XInterface; }}; }}; }}; }};
module steelyardcalc {{
  interface XFunctions {{
{methods}
  }};
}};
"""


def parts(interpreter: str | None = None, timeout: float = TIMEOUT) -> dict[str, bytes]:
    """Return the files of the extension by their names inside it.

    Parameters
    ----------
    interpreter : str, optional
        The Python that runs the worker; the running one if left out.
    timeout : float
        Seconds until Calc gives a call up.
    """
    settings = {"interpreter": interpreter or sys.executable, "version": VERSION, "timeout": timeout}
    code = files("steelyard.addin.calc")
    return {
        "META-INF/manifest.xml": _MANIFEST.encode(),
        "description.xml": _DESCRIPTION.format(identifier=IDENTIFIER, version=escape(VERSION)).encode(),
        IDL: _idl().encode(),
        "component.py": code.joinpath("component.py").read_bytes(),
        "pythonpath/steelyard_pipe.py": code.joinpath("pipe.py").read_bytes(),
        "functions.json": _json({_method(entry): _function(entry) for entry in CATALOGUE.values()}),
        "settings.json": _json(settings),
    }


def write_oxt(path: str | os.PathLike[str], interpreter: str | None = None) -> Path:
    """Write the extension file; the same catalogue and interpreter give the same bytes.

    Parameters
    ----------
    path : str or path-like
        The file to write; one of that name is replaced.
    interpreter : str, optional
        The Python that runs the worker; the running one if left out.

    Returns
    -------
    pathlib.Path
        The file written.
    """
    target = Path(path)
    temporary = target.with_name(f"{target.name}.new")
    try:
        with zipfile.ZipFile(temporary, "w", zipfile.ZIP_DEFLATED) as bundle:
            for name, content in parts(interpreter).items():
                bundle.writestr(_fixed(name), content)
        temporary.replace(target)
    finally:
        temporary.unlink(missing_ok=True)
    return target


def unpack(folder: Path, interpreter: str | None = None, timeout: float = TIMEOUT) -> Path:
    """Lay the extension's files out in a folder, with the list of services that installing would add."""
    for name, content in (parts(interpreter, timeout) | {COMPONENTS: _COMPONENTS.encode()}).items():
        file = folder / name
        file.parent.mkdir(parents=True, exist_ok=True)
        file.write_bytes(content)
    return folder


def _idl() -> str:
    """Return the interface; its arguments are numbered, for a name such as `in` is a word of the IDL."""
    return _IDL.format(methods="\n".join(map(_declaration, CATALOGUE.values())))


def _declaration(entry: Entry) -> str:
    arguments = ", ".join(f"[in] any a{place}" for place in range(len(entry.arguments)))
    return f"    sequence< sequence< any > > {_method(entry)}({arguments});"


def _method(entry: Entry) -> str:
    """Return the method's name: in capitals, for the IDL allows an underscore only there."""
    return entry.method.upper()


def _function(entry: Entry) -> dict[str, object]:
    return {"help": entry.help, "arguments": [_argument(argument) for argument in entry.arguments]}


def _argument(argument: Argument) -> dict[str, object]:
    """Return what the component must know; `zero`: whether a blank means 0, so that a bare 0 is harmless."""
    return {"name": argument.name, "help": argument.help, "zero": argument.default in (0, "0")}


def _json(value: object) -> bytes:
    return json.dumps(value, indent=1, sort_keys=True).encode("ascii") + b"\n"


def _fixed(name: str) -> zipfile.ZipInfo:
    info = zipfile.ZipInfo(name, (1980, 1, 1, 0, 0, 0))
    info.compress_type = zipfile.ZIP_DEFLATED
    info.create_system = 3
    info.external_attr = 0o644 << 16
    return info
