"""What each command does: thin, over the modules that do the work."""

from __future__ import annotations

import argparse
import platform
import sys
import time
from importlib.metadata import version
from importlib.resources import files
from pathlib import Path

from steelyard.core import VERSION


def versions(options: argparse.Namespace) -> int:
    """Print the versions in use."""
    del options
    print(f"steelyard {VERSION}")
    print(f"Python {platform.python_version()}, {platform.system()} {platform.machine()}")
    for package in ("numpy", "scipy", "openpyxl", "xlwings"):
        print(f"{package} {version(package)}")
    return 0


def demo(options: argparse.Namespace) -> int:
    """Write the demo list and build its book."""
    target = Path(options.list)
    target.write_bytes((files("steelyard.workbooks") / "data" / "demo_requests.csv").read_bytes())
    print(f"wrote {target}", file=sys.stderr)
    options.requests, options.justify, options.classes = str(target), "all", None
    return build(options)


def template(options: argparse.Namespace) -> int:
    """Write an empty request list."""
    from steelyard.workbooks.template import write_template

    write_template(Path(options.output))
    print(f"wrote {options.output}", file=sys.stderr)
    print(f"next: fill it in, then: steelyard build {options.output} -o book.xlsx", file=sys.stderr)
    return 0


def build(options: argparse.Namespace) -> int:
    """Build a plan book; every refused row is told, the others are built."""
    from steelyard.workbooks.book import build_book
    from steelyard.workbooks.classes import find_classes
    from steelyard.workbooks.plans import plan_requests
    from steelyard.workbooks.progress import progress
    from steelyard.workbooks.requests import read_requests

    started = time.monotonic()
    source, target = Path(options.requests), Path(options.output)
    given = Path(options.classes) if options.classes else None
    requests, problems = read_requests(source, given)
    planned, refused = plan_requests(requests)
    problems = sorted([*problems, *refused], key=lambda problem: problem.row)
    for problem in problems:
        print(f"steelyard: {source.name}: {problem}", file=sys.stderr)
    if not planned:
        print("steelyard: no row could be planned; nothing was written", file=sys.stderr)
        return 1
    named = any(one.request.risk_class for one in planned)
    summary = build_book(
        planned,
        target,
        host=options.host,
        source=source,
        justify=_names(options.justify),
        problems=problems,
        classes=find_classes(source, given) if named else None,
        progress=progress,
    )
    print(f"{summary} ({time.monotonic() - started:.1f} s)", file=sys.stderr)
    print(target)
    return 2 if problems else 0


def _names(text: str | None) -> str | list[str] | None:
    """Return the characteristics to justify: all, a list, or None for the book's own choice."""
    if text is None or text.strip().lower() == "all":
        return text and "all"
    return [name.strip() for name in text.split(",") if name.strip()]


def refresh(options: argparse.Namespace) -> int:
    """Recompute stored values; every changed cell is a line on stdout, every formula left is told."""
    from steelyard.workbooks.progress import progress
    from steelyard.workbooks.refresh import refresh_book

    source = Path(options.book)
    target = Path(options.output) if options.output else None
    done = refresh_book(source, target, progress)
    for change in done.changes:
        print(change.cell, *("" if value is None else value for value in (change.old, change.new)), sep="\t")
    for cell, reason in done.unfollowed.items():
        print(f"steelyard: {source.name}: {cell} was left as it is: it {reason}", file=sys.stderr)
    print(done, file=sys.stderr)
    if target is not None:
        print(f"wrote {target}", file=sys.stderr)
    return 2 if done.unfollowed else 0


def share(options: argparse.Namespace) -> int:
    """Write a share copy."""
    from steelyard.workbooks.share import share_book

    print(share_book(Path(options.book), Path(options.output)), file=sys.stderr)
    print(options.output)
    return 0


def functions(options: argparse.Namespace) -> int:
    """Print the catalogue, or one entry with an example."""
    from steelyard.addin import CATALOGUE
    from steelyard.workbooks.catalogue_text import entry_text, list_text

    if options.name is None:
        print(list_text())
        return 0
    wanted = options.name.upper().replace("SY.", "SY_")
    wanted = wanted if wanted.startswith("SY_") else f"SY_{wanted}"
    if wanted in CATALOGUE:
        print(entry_text(CATALOGUE[wanted]))
        return 0
    from difflib import get_close_matches

    close = get_close_matches(wanted, CATALOGUE, n=1)
    hint = f"; did you mean {close[0]}?" if close else ""
    print(f"steelyard: there is no function {options.name}{hint}", file=sys.stderr)
    return 1
