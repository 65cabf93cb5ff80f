"""The wrapper module: what VBA would refuse is found before a file is written."""

from __future__ import annotations

import re

import pytest

from steelyard.addin import CATALOGUE
from steelyard.addin.catalogue import Argument, Entry
from steelyard.addin.excel.vba import lint, lint_texts, module_source, vba_name

ENTRIES = list(CATALOGUE.values())
LINES = module_source(ENTRIES).splitlines()


def head(name: str, arguments: str) -> str:
    return f"Public Function {name}({arguments})\nEnd Function\n"


@pytest.mark.parametrize(
    ("source", "fault"),
    [
        (head("SY_A", "n, N"), "SY_A: two arguments have the same name: n, N"),
        (head("SY_A", "plan, end"), "SY_A: end is a reserved word of VBA"),
        (head("SY_A", "plan, Type"), "SY_A: Type is a reserved word of VBA"),
        (head("SY_A", "_plan"), "SY_A: _plan is no VBA name"),
        (head("SY_A", "größe"), "line 1 holds a character outside ASCII"),
        (head("SY_A", "2nd"), "SY_A: 2nd is no VBA name"),
        (head("SY_A", "Optional rate, plan"), "SY_A: a required argument follows an optional one"),
        (head("SY_A", "sy_a"), "SY_A: argument sy_a hides a name of the module"),
        (head("SY_A", "xlpy"), "SY_A: argument xlpy hides a name of the module"),
        (head("SY_A", "failed"), "SY_A: argument failed hides a name of the module"),
        (head("SY_A", "plan") + head("SY_B", "sy_a"), "SY_B: argument sy_a hides a name of the module"),
        (head("SY_A", "plan") + head("sy_a", "rate"), "two procedures have the same name: SY_A, sy_a"),
        (head("A1", "plan"), "A1 is also the name of a cell"),
        (head("AQL10", "plan"), "AQL10 is also the name of a cell"),
        (head("R1C1", "plan"), "R1C1 is also the name of a cell"),
        (head("Loop", "plan"), "Loop: Loop is a reserved word of VBA"),
        ("Function SY_A(plan)\n", "a procedure has no end"),
        (head("SY_A", "plan") + f"'{'x' * 1023}\n", "line 3 has 1024 characters, the most is 1023"),
    ],
)
def test_lint_finds(source, fault):
    assert fault in list(lint(source))


def test_lint_lets_good_names_pass():
    arguments = "plan, rate, Optional second, Optional end_, Optional n1"
    assert (
        list(
            lint(
                head("SY_POWER", arguments) + head("SY_RATE_FOR", "") + head("Given", "Optional x As Variant")
            )
        )
        == []
    )


def entry(help: str, argument_help: str) -> Entry:
    argument = Argument("plan", argument_help, True, None, True, None)
    return Entry("SY_A", "ask", help, (argument,), "=SY_A(A2)", print)


@pytest.mark.parametrize(
    ("help", "argument_help", "faults"),
    [
        ("Power.", "Plan text.", []),
        ("x" * 255, "≥", []),
        ("", "Plan.", ["SY_A: a text must have 1 to 255 characters, but has 0"]),
        ("Power.", "x" * 256, ["SY_A plan: a text must have 1 to 255 characters, but has 256"]),
        ("two\nlines", "Plan.", ["SY_A: a text must be one line of printable characters"]),
    ],
)
def test_texts_must_fit_the_wizard(help, argument_help, faults):
    assert list(lint_texts(entry(help, argument_help))) == faults


def test_the_catalogue_passes():
    assert list(lint("\n".join(LINES))) == []
    assert [fault for each in ENTRIES for fault in lint_texts(each)] == []


@pytest.mark.parametrize("each", ENTRIES, ids=lambda each: each.name)
def test_a_wrapper_has_the_entrys_arguments_and_hands_all_of_them_on(each):
    start = next(i for i, line in enumerate(LINES) if line.startswith(f"Public Function {each.name}("))
    names = [vba_name(argument.name) for argument in each.arguments]
    declared = LINES[start].partition("(")[2].rstrip(")").split(", ")
    assert [part.removeprefix("Optional ") for part in declared if part] == names
    assert [part.startswith("Optional ") for part in declared if part] == [
        not a.required for a in each.arguments
    ]
    given = ", ".join(f"SYCells({name})" for name in names)
    assert LINES[start + 4] == (
        f'    {each.name} = XLPy.CallUDF("steelyard.addin.excel.udfs", "{each.name}", Array({given}))'
    )


def test_descriptions_are_quoted_as_vba_wants_it():
    lines = module_source([entry('Says "ok".', "Plan.")]).splitlines()
    assert 'Attribute SY_A.VB_Description = "Says ""ok""."' in lines
    assert r'Attribute SY_A.VB_ProcData.VB_Invoke_Func = " \n14"' in lines


def test_wrappers_stand_in_alphabetical_order_and_every_entry_has_one():
    found = [match[1] for match in (re.match(r"Public Function (\w+)", line) for line in LINES) if match]
    assert found == sorted(CATALOGUE)
