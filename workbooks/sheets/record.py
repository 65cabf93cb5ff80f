"""The sheets of a verification record: what was run, on what, with which result, and who says so."""

from __future__ import annotations

from collections.abc import Sequence

from steelyard.workbooks.checking import Accuracy, Check
from steelyard.workbooks.house import Book, Put, Sheet, choice

_TICK = choice(("yes", "no"), "Decide", "Choose yes or no.", blank=True)
TO_FILL = (
    ("Intended use", "What these numbers decide in your organisation, and for which products."),
    ("Risk if a number were wrong", "Who would be harmed, and how it would be noticed."),
    ("Functions in scope", "Which functions your workbooks use; every one is traced to its checks overleaf."),
    ("Acceptance criteria", "Fixed beforehand: every check passes; a failure is explained and assessed."),
    ("Deviations", "Every check that failed or was not run, its reason and its consequence."),
    ("Conclusion", "The installed copy is fit for the intended use: yes or no, and with which limits."),
)
DUE = (
    "A new version of Steelyard, Python, numpy, scipy or the spreadsheet program",
    "Another computer, operating system or user profile",
    "A new intended use, or functions that were not in scope",
    "A defect that becomes known",
)
CAUTION = (
    "This record is part of the evidence for software validation; it is not the validation itself. "
    "It shows that the checks listed gave the results listed, on the computer and on the day named."
)


def add_summary(
    book: Book, facts: Sequence[tuple[str, str]], results: Sequence[tuple[str, str, bool]]
) -> Sheet:
    """Add the first sheet: results, what was run on what, and what the user adds."""
    sheet = book.sheet("Record", {"A": 30.0, "B": 52.0, "C": 14.0})
    sheet.add(Put("Verification record", "title"))
    sheet.add(
        Put(
            "The installed copy of Steelyard, checked against published values and exact arithmetic.",
            "subtitle",
        )
    )
    sheet.skip()
    sheet.add(Put(CAUTION, "text", 3))
    _section(sheet, "Results")
    for what, told, fine in results:
        sheet.add(
            Put(what, "label"),
            Put(told, "cell"),
            Put("pass" if fine else "FAIL", "verdict" if fine else "warning"),
        )
    _section(sheet, "What was checked, and on what")
    for what, told in facts:
        sheet.add(Put(what, "label"), Put(told, "cell", 2))
    _section(sheet, "To be filled in by the user")
    for what, hint in TO_FILL:
        sheet.add(Put(what, "label"), Put(hint, "note", 2))
        sheet.add(None, Put(None, "entry", 2), height=32)
    _section(sheet, "A new run is due after")
    for text in DUE:
        sheet.add(None, Put(text, "text", 2))
    _section(sheet, "Signatures")
    sheet.add(*(Put(text, "heading") for text in ("Role", "Name and signature", "Date")))
    for role in ("Run by", "Reviewed by", "Approved by"):
        sheet.add(Put(role, "label"), Put(None, "writing"), Put(None, "writing"), height=28)
    sheet.print_setup()
    sheet.protect()
    return sheet


def _section(sheet: Sheet, title: str) -> None:
    sheet.skip()
    sheet.add(Put(title, "section"))


def add_checks(book: Book, title: str, about: str, checks: Sequence[Check]) -> Sheet:
    """Add a table of checks: formula, expected, computed, difference, verdicts."""
    widths = (11.0, 34.0, 50.0, 20.0, 22.0, 11.0, 11.0, 8.0, 10.0, 17.0, 46.0, 30.0)
    sheet = book.sheet(title, dict(zip("ABCDEFGHIJKL", widths, strict=True)))
    sheet.add(Put(title, "title"))
    sheet.add(Put(about, "subtitle"))
    sheet.skip()
    headings = (
        *("Check", "What is asked", "Formula", "Expected", "Computed", "Difference", "Allowed", "Verdict"),
        *("Through the program", "Status of the source", "Source", "Remark"),
    )
    top = sheet.add(*(Put(text, "heading") for text in headings))
    for check in checks:
        sheet.add(*_row(check))
    sheet.freeze(f"B{top + 1}")
    sheet.print_setup(landscape=True, repeat=f"{top}:{top}")
    sheet.protect()
    return sheet


def _row(check: Check) -> list[Put]:
    number = not isinstance(check.computed, str)
    bad = "warning"
    return [
        Put(check.name, "cell"),
        Put(check.what, "cell"),
        Put(check.formula, "cell"),
        Put(check.expected, "cell"),
        Put(check.computed, "result number" if number else "cell"),
        Put(check.difference, "result tiny"),
        Put(check.tolerance if number else None, "result tiny"),
        Put(check.verdict, "verdict" if check.verdict == "pass" else bad),
        Put(check.program_verdict, "verdict" if check.program_verdict != "FAIL" else bad),
        Put(check.status, "cell"),
        Put(check.source, "cell"),
        Put(check.reason, "cell"),
    ]


def add_accuracy(book: Book, found: Sequence[Accuracy], allowed: float) -> Sheet:
    """Add the accuracy on a random grid."""
    sheet = book.sheet("Accuracy", {"A": 30.0, "B": 10.0, "C": 16.0, "D": 12.0, "E": 10.0, "F": 60.0})
    sheet.add(Put("Accuracy", "title"))
    sheet.add(
        Put(
            "Random plans and rates, against whole-number arithmetic at the exact value of each rate.",
            "subtitle",
        )
    )
    sheet.skip()
    headings = ("Function", "Points", "Worst relative error", "Allowed", "Verdict", "At")
    sheet.add(*(Put(text, "heading") for text in headings))
    for one in found:
        sheet.add(
            Put(one.what, "cell"),
            Put(one.points, "result count"),
            Put(one.worst, "result tiny"),
            Put(allowed, "result tiny"),
            Put(one.verdict, "verdict" if one.verdict == "pass" else "warning"),
            Put(one.where, "cell"),
        )
    sheet.print_setup(landscape=True)
    sheet.protect()
    return sheet


def add_trace(book: Book, trace: Sequence[tuple[str, int, str]]) -> Sheet:
    """Add which checks touch which function."""
    sheet = book.sheet("Trace", {"A": 26.0, "B": 12.0, "C": 90.0})
    sheet.add(Put("From functions to checks", "title"))
    sheet.skip()
    top = sheet.add(*(Put(text, "heading") for text in ("Function", "Checks", "Which")))
    for name, count, which in trace:
        sheet.add(Put(name, "cell"), Put(count, "result count"), Put(which, "cell"))
    sheet.print_setup(repeat=f"{top}:{top}")
    sheet.protect()
    return sheet


def add_files(book: Book, files: Sequence[tuple[str, str]]) -> Sheet:
    """Add the installed files and their hashes."""
    sheet = book.sheet("Files", {"A": 46.0, "B": 72.0})
    sheet.add(Put("Installed files", "title"))
    sheet.skip()
    top = sheet.add(*(Put(text, "heading") for text in ("File", "SHA-256")))
    for name, digest in files:
        sheet.add(Put(name, "cell"), Put(digest, "cell"))
    sheet.print_setup(repeat=f"{top}:{top}")
    sheet.protect()
    return sheet
