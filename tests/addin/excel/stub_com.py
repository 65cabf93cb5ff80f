"""Run xlwings' Windows side with stand-ins for pywin32: the real decorators, converters and VBA writer.

Started as a program of its own. Reads calls as JSON lines, prints the answers and the VBA text as JSON.
"""

import ctypes
import io
import json
import sys
import types
from collections import defaultdict
from typing import Any
from unittest.mock import MagicMock

import steelyard.addin  # before this Python claims to run on Windows

NAMES = ("pythoncom", "pywintypes", "win32api", "win32con", "win32event", "win32gui", "win32process")
NAMES += ("win32timezone", "win32com", "win32com.client", "win32com.server", "win32com.server.dispatcher")
NAMES += ("win32com.server.policy", "win32com.server.util")


class Anything:
    """A class that can be made with any arguments, and has any attribute."""

    def __init__(self, *arguments: Any, **options: Any) -> None:
        pass

    def __getattr__(self, name: str) -> Any:
        raise AttributeError(name)


class Stub(types.ModuleType):
    """A module that has a class under every name."""

    def __getattr__(self, name: str) -> Any:
        if name.startswith("__"):
            raise AttributeError(name)
        made = type(name, (Anything,), {})
        setattr(self, name, made)
        return made


def pretend_windows() -> None:
    for name in NAMES:
        module = Stub(name)
        module.__path__ = []
        sys.modules[name] = module
        parent, _, child = name.rpartition(".")
        if parent:
            setattr(sys.modules[parent], child, module)
    sys.modules["pythoncom"].TypeIIDs = defaultdict(Anything)
    ctypes.windll = ctypes.oledll = ctypes.PyDLL = MagicMock()
    sys.modules["pythoncom"].__file__ = "pythoncom"
    sys.platform = "win32"


def main() -> None:
    pretend_windows()
    import xlwings.udfs

    from steelyard.addin.excel import udfs

    assert xlwings.func is xlwings.udfs.xlfunc, "xlwings is still a stub"
    text = io.StringIO()
    xlwings.udfs.generate_vba_wrapper(udfs.__name__, udfs, text, types.SimpleNamespace(Name="steelyard.xlam"))
    answers = []
    for line in sys.stdin:
        name, arguments = json.loads(line)
        answers.append(xlwings.udfs.call_udf(udfs.__name__, name, tuple(arguments)))
    functions = {name: getattr(udfs, name).__xlfunc__ for name in steelyard.addin.CATALOGUE}
    described = {
        name: [
            function["category"],
            function["ret"]["doc"],
            [[a["name"], a["doc"]] for a in function["args"]],
        ]
        for name, function in functions.items()
    }
    print(json.dumps({"answers": answers, "vba": text.getvalue(), "described": described}))


main()
