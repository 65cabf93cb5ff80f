"""``steelyard verify``: rerun the checks on the user's own machine and file them as a record."""

from __future__ import annotations

import argparse
import getpass
import hashlib
import locale
import os
import platform
import re
import subprocess
import sys
from collections.abc import Iterator, Sequence
from datetime import UTC, datetime
from importlib.metadata import version
from importlib.resources import files
from pathlib import Path

from steelyard.addin import CATALOGUE
from steelyard.core import VERSION
from steelyard.core.errors import SteelyardError
from steelyard.workbooks import checking
from steelyard.workbooks.checking import Accuracy, Check
from steelyard.workbooks.house import Book
from steelyard.workbooks.sheets import record

_NAME = re.compile(r"SY_[A-Z_]+")


def verify(options: argparse.Namespace) -> int:
    """Write the record; exit code 1 if a check failed."""
    target = Path(options.output)
    if target.exists():
        message = f"{target} exists, and a record is never overwritten: choose another name"
        raise SteelyardError(message)
    print("rerunning the checks …", file=sys.stderr)
    published, challenges = checking.published(), checking.challenges()
    program, published, challenges = _through_program(published, challenges, options.skip_program)
    accuracy = checking.accuracy()
    results = list(_results(published, challenges, accuracy, program))
    book = Book(
        "Verification record", "excel", subject="Evidence for software validation", keywords="verification"
    )
    record.add_summary(book, _facts(program), results)
    record.add_checks(
        book, "Published values", "Values printed in standards, handbooks and reference libraries.", published
    )
    record.add_checks(
        book, "Challenges", "Cases where a careless program goes wrong: ties, edges, refusals.", challenges
    )
    record.add_accuracy(book, accuracy, checking.ACCURACY)
    record.add_trace(book, list(_trace([*published, *challenges])))
    record.add_files(book, list(_installed()))
    book.save(target)
    for what, told, fine in results:
        print(f"{'pass' if fine else 'FAIL'}  {what}: {told}")
    print(f"wrote {target}", file=sys.stderr)
    if options.pdf:
        _print_out(target)
    return int(not all(fine for _, _, fine in results))


def _through_program(
    published: list[Check], challenges: list[Check], skip: bool
) -> tuple[str, list[Check], list[Check]]:
    """Run the checks through LibreOffice where it is installed; return its version or why it was not run."""
    from steelyard.addin.calc.soffice import find_tool

    tool = find_tool("soffice")
    if skip or tool is None:
        return "not run: " + ("as asked" if skip else "LibreOffice is not installed"), published, challenges
    found = checking.through_calc([*published, *challenges])
    told = subprocess.run([str(tool), "--version"], capture_output=True, text=True, timeout=60, check=False)
    return told.stdout.strip() or "LibreOffice", found[: len(published)], found[len(published) :]


def _results(
    published: Sequence[Check], challenges: Sequence[Check], accuracy: Sequence[Accuracy], program: str
) -> Iterator[tuple[str, str, bool]]:
    for what, checks in (("Published values", published), ("Challenges", challenges)):
        good = sum(check.verdict == "pass" for check in checks)
        yield what, f"{good} of {len(checks)} pass", good == len(checks)
    run = [check for check in (*published, *challenges) if check.through is not None]
    if run:
        good = sum(check.program_verdict == "pass" for check in run)
        yield (
            "Through the spreadsheet program",
            f"{good} of {len(run)} give the same answer",
            good == len(run),
        )
    worst = max(one.worst for one in accuracy)
    points = sum(one.points for one in accuracy)
    fine = all(one.verdict == "pass" for one in accuracy)
    yield "Accuracy", f"worst relative error {worst:.1e} over {points} random points", fine


def _facts(program: str) -> list[tuple[str, str]]:
    epoch = os.environ.get("SOURCE_DATE_EPOCH")
    now = datetime.fromtimestamp(int(epoch), UTC) if epoch else datetime.now(UTC)
    packages = ", ".join(f"{name} {version(name)}" for name in ("numpy", "scipy", "openpyxl", "xlwings"))
    return [
        ("Date (UTC)", f"{now:%Y-%m-%d %H:%M}"),
        ("Run by user", _user()),
        ("Steelyard", VERSION),
        ("Python", f"{platform.python_version()} ({sys.executable})"),
        ("Packages", packages),
        ("Spreadsheet program", program),
        ("System", f"{platform.platform()}, {platform.machine()}"),
        ("Locale", ".".join(part for part in locale.getlocale() if part) or "C"),
        ("SHA-256 of the checks", checking.data_digest()),
        (
            "Relative error allowed",
            f"{checking.ACCURACY:g}: what the functions promise; decisions need far less",
        ),
        ("Published values", "to half a unit of the last digit printed, unless a remark says why not"),
    ]


def _user() -> str:
    try:
        return getpass.getuser()
    except (OSError, KeyError):
        return "unknown"


def _trace(checks: Sequence[Check]) -> Iterator[tuple[str, int, str]]:
    for name in CATALOGUE:
        touching = [check.name for check in checks if name in _NAME.findall(check.formula)]
        shown = ", ".join(touching[:12]) + (" …" if len(touching) > 12 else "")
        yield name, len(touching), shown or "none in this record; see the project's own tests"


def _installed() -> Iterator[tuple[str, str]]:
    for package in ("core", "addin", "workbooks"):
        root = Path(str(files(f"steelyard.{package}")))
        for file in sorted(root.rglob("*.py")):
            digest = hashlib.sha256(file.read_bytes()).hexdigest()
            yield f"{package}/{file.relative_to(root).as_posix()}", digest


def _print_out(target: Path) -> None:
    from steelyard.addin.calc.soffice import to_pdf

    made = to_pdf(target, target.parent, with_addin=False)
    print(f"wrote {made}", file=sys.stderr)
