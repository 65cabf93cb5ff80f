"""The VBA module of the add-in file: one wrapper per catalogue entry, and a check of what VBA would refuse.

Excel calls the wrappers; each hands the *values* of its arguments to Python, through the loader that
xlwings ships, and shows what comes back. Values, not ranges: `Value2` keeps every digit of a cell that is
formatted as money or as a date, and one call then crosses to Python once.
"""

from __future__ import annotations

import re
from collections.abc import Iterable, Iterator

from steelyard.addin.catalogue import Entry
from steelyard.core import VERSION

MODULE = "steelyard_udfs"
PYTHON_MODULE = "steelyard.addin.excel.udfs"
USER_DEFINED = 14  # Excel's number of the wizard's category for functions that users add
LONGEST_TEXT = 255  # of a description or an argument text, in the file format
LONGEST_LINE = 1023

HELPERS = """\
Private Function SYCells(Optional given As Variant) As Variant
    If IsObject(given) Then
        SYCells = SYValues(given)
    ElseIf IsMissing(given) Then
        SYCells = Empty
    Else
        SYCells = given
    End If
End Function

Private Function SYValues(ByVal given As Object) As Variant
    If given.Areas.Count = 1 Then
        SYValues = given.Value2
    Else
        SYValues = CVErr(xlErrRef)
    End If
End Function

Private Function SYNoAnswer(reason As String) As String
    SYNoAnswer = "SY: no answer from Python, run: steelyard doctor (" & Left$(reason, 180) & ")"
End Function
"""

# The reserved identifiers of [MS-VBAL] 3.3.5.2, in small letters: no name of ours may be one of them.
_WORDS = """
abs addressof and any array as attribute boolean byref byte byval call case cbool cbyte ccur cdate cdbl cdec
cdecl cint circle clng clnglng clngptr close const csng cstr currency cvar cverr date debug decimal declare
defbool defbyte defcur defdate defdbl defdec defint deflng deflnglng deflngptr defobj defsng defstr defvar
dim do doevents double each else elseif empty end endif enum eqv erase error event exit false fix for friend
function get global gosub goto if imp implements in input inputb int integer is lbound len lenb let like
linput lock long longlong longptr loop lset me mid midb mod new next not nothing null object on open option
optional or paramarray preserve print private property pset ptrsafe public put raiseevent redim rem resume
return rset scale seek select set sgn shared single spc static step stop string sub tab then to true type
typeof ubound unlock until variant vba wend while with withevents write xor
"""
RESERVED = frozenset(_WORDS.split())
IDENTIFIER = re.compile(r"[A-Za-z]\w{0,254}", re.ASCII)
# A1 and R1C1 references: Excel reads such a function name as a cell.
CELL = re.compile(r"[A-Z]{1,3}\d+|R\d*C\d*|R\d*|C\d*", re.IGNORECASE | re.ASCII)
HEAD = re.compile(r"^(?:Public |Private )?(?:Function|Sub) (\w+)\(([^)]*)\)")


def vba_name(name: str) -> str:
    """Return an argument name that VBA accepts: reserved words get an underscore.

    Examples
    --------
    >>> vba_name("plan"), vba_name("end")
    ('plan', 'end_')
    """
    return f"{name}_" if name.lower() in RESERVED else name


def module_source(entries: Iterable[Entry]) -> str:
    """Return the source of the wrapper module for these catalogue entries, in alphabetical order."""
    head = f'Attribute VB_Name = "{MODULE}"\nOption Explicit\n\'Steelyard {VERSION}\n'
    wrappers = (_wrapper(entry) for entry in sorted(entries, key=lambda entry: entry.name))
    return "\n".join([head, *wrappers, HELPERS])


def _wrapper(entry: Entry) -> str:
    names = [vba_name(argument.name) for argument in entry.arguments]
    declared = (n if a.required else f"Optional {n}" for n, a in zip(names, entry.arguments, strict=True))
    given = ", ".join(f"SYCells({name})" for name in names)
    description = entry.help.replace('"', '""')
    return f"""\
Public Function {entry.name}({", ".join(declared)})
Attribute {entry.name}.VB_Description = "{description}"
Attribute {entry.name}.VB_ProcData.VB_Invoke_Func = " \\n{USER_DEFINED}"
    On Error GoTo failed
    {entry.name} = XLPy.CallUDF("{PYTHON_MODULE}", "{entry.name}", Array({given}))
    Exit Function
failed:
    {entry.name} = SYNoAnswer(Err.Description)
End Function
"""


def lint_texts(entry: Entry) -> Iterator[str]:
    """Yield what Excel's function wizard could not hold of an entry's texts."""
    texts = {entry.name: entry.help} | {f"{entry.name} {a.name}": a.help for a in entry.arguments}
    for owner, text in texts.items():
        if not 1 <= len(text) <= LONGEST_TEXT:
            yield f"{owner}: a text must have 1 to {LONGEST_TEXT} characters, but has {len(text)}"
        if not text.isprintable():
            yield f"{owner}: a text must be one line of printable characters"


def lint(source: str) -> Iterator[str]:
    r"""Yield what Excel's compiler would refuse in a module; one such line disables every function.

    Examples
    --------
    >>> list(lint("Function SY_A(n, N)\nEnd Function"))
    ['SY_A: two arguments have the same name: n, N']
    """
    for number, line in enumerate(source.splitlines(), 1):
        if len(line) > LONGEST_LINE:
            yield f"line {number} has {len(line)} characters, the most is {LONGEST_LINE}"
        if not line.isascii():
            yield f"line {number} holds a character outside ASCII"
    heads = [match.groups() for match in map(HEAD.match, source.splitlines()) if match]
    procedures = [name for name, _ in heads]
    if twice := _doubled(procedures):
        yield f"two procedures have the same name: {', '.join(twice)}"
    for name, arguments in heads:
        if CELL.fullmatch(name):
            yield f"{name} is also the name of a cell"
        yield from (f"{name}: {fault}" for fault in _name_faults(name))
        yield from (f"{name}: {fault}" for fault in _argument_faults(arguments, procedures))
    if len(heads) != len(re.findall(r"^End (?:Function|Sub)$", source, re.MULTILINE)):
        yield "a procedure has no end"


def _name_faults(name: str) -> Iterator[str]:
    if not IDENTIFIER.fullmatch(name):
        yield f"{name} is no VBA name"
    if name.lower() in RESERVED:
        yield f"{name} is a reserved word of VBA"


def _argument_faults(declared: str, procedures: list[str]) -> Iterator[str]:
    parts = declared.split(", ") if declared else []
    names = [re.sub(r"^(?:Optional |ByVal )*|\(\)| As \w+$", "", part) for part in parts]
    for name in names:
        yield from _name_faults(name)
    if twice := _doubled(names):
        yield f"two arguments have the same name: {', '.join(twice)}"
    hidden = {procedure.lower() for procedure in [*procedures, "XLPy", "failed"]}
    yield from (f"argument {name} hides a name of the module" for name in names if name.lower() in hidden)
    optional = [part.startswith("Optional ") for part in parts]
    if optional != sorted(optional):
        yield "a required argument follows an optional one"


def _doubled(names: list[str]) -> list[str]:
    """Return the names that differ from another one by capitals at most."""
    small = [name.lower() for name in names]
    return [name for name in names if small.count(name.lower()) > 1]
