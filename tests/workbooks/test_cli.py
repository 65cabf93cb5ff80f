"""The command line as a user types it."""

from __future__ import annotations

import json
import subprocess
import sys

import pytest

from steelyard.core import VERSION
from steelyard.workbooks.cli import COMMANDS, main, parser


def test_help_loads_nothing_heavy():
    heavy = ("numpy", "scipy", "openpyxl", "xlwings")
    code = (
        "import sys; from steelyard.workbooks.cli import parser; parser().format_help(); "
        f"print([name for name in {heavy} if name in sys.modules])"
    )
    found = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert found.stdout.strip() == "[]"


def test_without_a_command_help_is_printed(capsys):
    assert main([]) == 0
    assert "steelyard build requests.xlsx -o book.xlsx" in capsys.readouterr().out


@pytest.mark.parametrize("command", COMMANDS, ids=lambda command: command.name)
def test_every_command_has_help_with_its_example(command, capsys):
    with pytest.raises(SystemExit) as stopped:
        parser().parse_args([command.name, "--help"])
    assert stopped.value.code == 0
    assert command.example in capsys.readouterr().out


def test_a_mistyped_command_gets_a_suggestion(capsys):
    with pytest.raises(SystemExit) as stopped:
        main(["biuld"])
    assert stopped.value.code == 2
    assert "did you mean: steelyard build?" in capsys.readouterr().err


def test_version_lists_what_computes(capsys):
    assert main(["--version"]) == 0
    out = capsys.readouterr().out
    assert out.startswith(f"steelyard {VERSION}\n")
    assert "numpy" in out


def test_functions_lists_the_catalogue_and_explains_one(capsys):
    assert main(["functions"]) == 0
    assert "SY_POWER(plan, rate, [second])" in capsys.readouterr().out
    assert main(["functions", "sy.power"]) == 0
    assert "Calc   =SY.POWER(A2;5%)" in capsys.readouterr().out


def test_an_unknown_function_gets_a_suggestion(capsys):
    assert main(["functions", "SY_POWR"]) == 1
    assert "did you mean SY_POWER?" in capsys.readouterr().err


def test_a_missing_list_is_one_line(tmp_path, capsys):
    assert main(["build", str(tmp_path / "none.csv"), "-o", str(tmp_path / "book.xlsx")]) == 1
    err = capsys.readouterr().err
    assert err.startswith("steelyard: ")
    assert err.count("\n") == 1


def test_a_bad_row_is_told_and_the_others_are_built(tmp_path, capsys):
    source, target = tmp_path / "list.csv", tmp_path / "book.xlsx"
    source.write_text(
        "characteristic,kind,claim,alpha,catch,power,side,lot,n\n"
        "Blocked emitter,binomial,1%,5%,5%,90%,above,,\n"
        "Leak,binomial,1%,5,5%,90%,above,,\n"
    )
    assert main(["build", str(source), "-o", str(target)]) == 2
    captured = capsys.readouterr()
    assert captured.out == f"{target}\n"
    assert "row 3" in captured.err
    assert "alpha" in captured.err
    assert target.exists()


@pytest.mark.parametrize("program", ["calc", "excel"])
def test_addin_file_writes_the_same_bytes_twice(program, tmp_path, capsys):
    files = [tmp_path / "one", tmp_path / "two"]
    for file in files:
        assert main(["addin-file", program, "-o", str(file)]) == 0
    assert files[0].read_bytes() == files[1].read_bytes()
    assert str(files[1]) in capsys.readouterr().out


def test_doctor_reports_as_json(capsys):
    code = main(["doctor", "--json"])
    findings = json.loads(capsys.readouterr().out)
    assert code == int(any(finding["serious"] for finding in findings))
    assert {"Steelyard", "Python", "numpy", "worker"} <= {finding["topic"] for finding in findings}
    assert next(f for f in findings if f["topic"] == "worker")["found"].startswith("answers: first ")
