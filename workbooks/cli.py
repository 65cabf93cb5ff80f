"""The command line: requests in, workbooks out. Data goes to stdout, talk to stderr.

Nothing heavy is imported before a command needs it: ``steelyard --help`` answers at once.
"""

from __future__ import annotations

import argparse
import os
import sys
from collections.abc import Sequence
from dataclasses import dataclass
from difflib import get_close_matches
from importlib import import_module
from typing import Any

EPILOG = """\
examples:
  steelyard demo                                 build the plan book of the demo list
  steelyard template -o requests.xlsx            write an empty request list to fill in
  steelyard build requests.xlsx -o book.xlsx     build a plan book from a request list
  steelyard share book.xlsx -o copy.xlsx         write a copy that needs no add-in
  steelyard functions SY_POWER                   what a cell function takes and gives

exit codes:
  0  done
  1  nothing was written, or a check failed
  2  written, but some rows were refused; or the command line was not understood
"""


@dataclass(frozen=True, slots=True)
class Command:
    """A command: where its code is, and what it takes.

    Parameters
    ----------
    name, help, example : str
        As ``--help`` shows them.
    target : str
        ``"module.function"`` below `steelyard.workbooks`, imported only when the command runs.
    takes : tuple of (tuple of str, dict)
        Arguments for `argparse`.
    """

    name: str
    help: str
    example: str
    target: str
    takes: tuple[tuple[tuple[str, ...], dict[str, Any]], ...] = ()

    def run(self, options: argparse.Namespace) -> int:
        """Import the command's code and run it; return the exit code."""
        module, _, function = self.target.rpartition(".")
        code: int = getattr(import_module(f"steelyard.workbooks.{module}"), function)(options)
        return code


def takes(*names: str, **options: Any) -> tuple[tuple[str, ...], dict[str, Any]]:
    """Return one argument of a command."""
    return names, options


HOST = takes(
    "--host",
    choices=("excel", "calc"),
    default="excel",
    help="spelling of the formulas: SY_POWER or SY.POWER",
)
PROGRAM = takes("program", choices=("calc", "excel"), help="LibreOffice Calc, or Excel on Windows")
BOOK = takes("book", metavar="BOOK.xlsx", help="a workbook with SY formulas")


def output(default: str | None = None) -> tuple[tuple[str, ...], dict[str, Any]]:
    """Return the ``-o`` argument."""
    if default is None:
        return takes("-o", "--output", required=True, metavar="FILE", help="file to write")
    return takes("-o", "--output", default=default, metavar="FILE", help=f"file to write (default {default})")


COMMANDS = (
    Command(
        "demo",
        "write the demo list and build its plan book",
        "steelyard demo",
        "commands.demo",
        (
            takes(
                "-o", "--output", default="demo-book.xlsx", metavar="FILE", help="plan book (demo-book.xlsx)"
            ),
            takes(
                "--list", default="demo-requests.csv", metavar="FILE", help="demo list (demo-requests.csv)"
            ),
            HOST,
        ),
    ),
    Command(
        "template",
        "write an empty request list with drop-downs, help and examples",
        "steelyard template -o requests.xlsx",
        "commands.template",
        (output("requests.xlsx"),),
    ),
    Command(
        "build",
        "build a plan book from a request list",
        "steelyard build requests.xlsx -o book.xlsx --justify all",
        "commands.build",
        (
            takes("requests", metavar="REQUESTS", help="request list, .xlsx or .csv"),
            output(),
            HOST,
            takes(
                "--classes",
                metavar="FILE",
                help="table of risk classes, .csv or .xlsx (default: the list's own sheet Risk classes)",
            ),
            takes(
                "--justify", metavar="A,B,C", help="characteristics that get a justification sheet, or: all"
            ),
        ),
    ),
    Command(
        "refresh",
        "recompute the stored values of a book that was edited without a spreadsheet program",
        "steelyard refresh book.xlsx",
        "commands.refresh",
        (
            BOOK,
            takes("-o", "--output", metavar="FILE", help="file to write (default: the workbook itself)"),
        ),
    ),
    Command(
        "share",
        "write a copy that needs no add-in: values instead of SY formulas",
        "steelyard share book.xlsx -o copy.xlsx",
        "commands.share",
        (BOOK, output()),
    ),
    Command(
        "functions",
        "print the catalogue of cell functions, or one entry",
        "steelyard functions SY_POWER",
        "commands.functions",
        (takes("name", nargs="?", metavar="NAME", help="a function, e.g. SY_POWER"),),
    ),
    Command(
        "verify",
        "rerun the published checks on this computer and file them as a record",
        "steelyard verify -o record.xlsx --pdf",
        "verify.verify",
        (
            output(),
            takes("--pdf", action="store_true", help="also print the record to a PDF (needs LibreOffice)"),
            takes("--skip-program", action="store_true", help="do not run the checks through LibreOffice"),
        ),
    ),
    Command(
        "connect",
        "put the functions into Calc or Excel for the current user",
        "steelyard connect calc",
        "hosts.connect",
        (PROGRAM,),
    ),
    Command(
        "disconnect",
        "take the functions out of Calc or Excel again",
        "steelyard disconnect calc",
        "hosts.disconnect",
        (PROGRAM,),
    ),
    Command(
        "addin-file",
        "write the add-in file alone, on any system",
        "steelyard addin-file excel -o steelyard.xlam",
        "hosts.addin_file",
        (
            PROGRAM,
            takes("-o", "--output", metavar="FILE", help="file to write (steelyard.oxt or steelyard.xlam)"),
            takes("--interpreter", metavar="PYTHON", help="the Python that is to answer"),
        ),
    ),
    Command(
        "doctor",
        "tell what is installed, what is wrong, and what to do",
        "steelyard doctor --json",
        "doctor.doctor",
        (takes("--json", action="store_true", help="print the report as JSON, for support"),),
    ),
)


def parser() -> argparse.ArgumentParser:
    """Return the parser of the whole command line."""
    top = argparse.ArgumentParser(
        prog="steelyard",
        description="Plan inspections by sample: sizes, risks and power, live in spreadsheet cells.",
        epilog=EPILOG,
        formatter_class=lambda prog: argparse.RawDescriptionHelpFormatter(prog, max_help_position=14),
    )
    top.add_argument("--version", action="store_true", help="print the versions in use")
    top.add_argument("--debug", action="store_true", help="show the traceback of an error")
    added = top.add_subparsers(title="commands", metavar="COMMAND", dest="command")
    for command in COMMANDS:
        made = added.add_parser(
            command.name,
            help=command.help,
            description=f"{command.help[0].upper()}{command.help[1:]}.",
            epilog=f"example:\n  {command.example}",
            formatter_class=argparse.RawDescriptionHelpFormatter,
        )
        for names, options in command.takes:
            made.add_argument(*names, **options)
        made.set_defaults(run=command.run)
    return top


def main(arguments: Sequence[str] | None = None) -> int:
    """Run the command line and return its exit code.

    Parameters
    ----------
    arguments : sequence of str, optional
        The words after ``steelyard``; the process's own if left out.
    """
    given = list(sys.argv[1:] if arguments is None else arguments)
    _suggest(given)
    options = parser().parse_args(given)
    if options.version:
        return Command("version", "", "", "commands.versions").run(options)
    if options.command is None:
        parser().print_help()
        return 0
    try:
        return int(options.run(options))
    except BrokenPipeError:
        os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())
        return 1
    except (ValueError, OSError) as error:
        if options.debug:
            raise
        return _refuse(error)


def _refuse(error: Exception) -> int:
    """Tell what was refused in one line; an unexpected ValueError keeps its traceback."""
    from steelyard.core.errors import SteelyardError

    if not isinstance(error, SteelyardError | OSError):
        raise error
    print(f"steelyard: {error}", file=sys.stderr)
    return 1


def _suggest(given: Sequence[str]) -> None:
    """Say what was probably meant before argparse refuses an unknown command."""
    names = [command.name for command in COMMANDS]
    word = next((word for word in given if not word.startswith("-")), None)
    if word is not None and word not in names:
        close = get_close_matches(word, names, n=1)
        if close:
            print(f"steelyard: did you mean: steelyard {close[0]}?", file=sys.stderr)
