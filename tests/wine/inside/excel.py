"""Play Excel: start Python through xlwings' own library and call functions as the VBA wrappers do.

Reads a job (a JSON file), prints the answers as JSON. Runs in the Windows Python.
"""

import ctypes
import json
import sys
import time
from pathlib import Path

import pythoncom
import win32com.client
from pywintypes import com_error

MISSING = win32com.client.VARIANT(pythoncom.VT_ERROR, -2147352572)
# What xlwings itself would write for the module, asked of the Python that answers Excel.
WRAPPERS = """
import io, types
from steelyard.addin.excel import udfs
from xlwings.udfs import generate_vba_wrapper
out = io.StringIO()
generate_vba_wrapper(udfs.__name__, udfs, out, types.SimpleNamespace(Name="steelyard.xlam"))
text = out.getvalue()
"""
VT_DISPATCH, VT_BSTR = 9, 8
ACTIVATE, KILL = 1, -1


class Variant(ctypes.Structure):
    _fields_ = [("kind", ctypes.c_ushort), ("padding", ctypes.c_ushort * 3), ("value", ctypes.c_void_p * 2)]


class Library:
    """xlwings' library, called as the loader declares it: ByRef Variant, ByVal String, Long."""

    def __init__(self, path: str) -> None:
        self.function = ctypes.WinDLL(path).XLPyDLLActivateAuto
        self.function.argtypes = [ctypes.POINTER(Variant), ctypes.c_void_p, ctypes.c_long]
        self.function.restype = ctypes.c_long
        self.strings = ctypes.WinDLL("oleaut32").SysAllocStringByteLen
        self.strings.argtypes = [ctypes.c_char_p, ctypes.c_uint]
        self.strings.restype = ctypes.c_void_p

    def call(self, command: str, mode: int = ACTIVATE):
        result, text = Variant(), command.encode("mbcs")
        code = self.function(ctypes.byref(result), self.strings(text, len(text)), mode)
        if result.kind == VT_BSTR:
            raise RuntimeError(ctypes.wstring_at(result.value[0]))
        if code or result.kind != VT_DISPATCH:
            return None
        pointer = pythoncom.ObjectFromAddress(result.value[0], pythoncom.IID_IDispatch)
        return win32com.client.Dispatch(pointer)


def argument(value):
    """Return a value of the job as VBA hands it over.

    An error value goes as its number, which is what xlwings' side makes of one; pywin32 can send no error
    but the one that stands for a missing argument.
    """
    if isinstance(value, dict):
        return value.get("error", MISSING)
    return tuple(map(tuple, value)) if isinstance(value, list) else value


def process_of(server) -> str:
    return server.Str(server.Eval("__import__('os').getpid()"))


def end(server) -> None:
    """Let the Python behind a connection die, as a crash would."""
    try:
        server.Exec("import os; os._exit(1)")
    except com_error:
        return


def main(job) -> None:
    pythoncom.CoInitialize()
    library = Library(job["library"])
    begun = time.perf_counter()
    server = library.call(job["command"])
    first = server.CallUDF(*job["first"])
    answers = {"first": first, "first_seconds": round(time.perf_counter() - begun, 2)}
    begun = time.perf_counter()
    answers["calls"] = [
        server.CallUDF(job["module"], call["function"], tuple(map(argument, call["arguments"])))
        for call in job["calls"]
    ]
    answers["seconds_per_call"] = round((time.perf_counter() - begun) / max(len(job["calls"]), 1), 5)
    names = server.Dict()
    server.Exec(WRAPPERS, names)
    answers["wrappers"] = server.Str(server.GetItem(names, "text"))
    answers["search_path"] = server.Str(server.Eval("__import__('sys').path"))
    process = process_of(server)
    answers["same_process"] = process_of(library.call(job["command"])) == process
    end(server)
    begun = time.perf_counter()
    server = library.call(job["command"])
    answers["after_death"] = server.CallUDF(*job["first"])
    answers["new_process"] = process_of(server) != process
    answers["recovery_seconds"] = round(time.perf_counter() - begun, 2)
    del server
    library.call(job["command"], KILL)
    print(json.dumps(answers))


main(json.loads(Path(sys.argv[1]).read_text(encoding="utf-8")))
