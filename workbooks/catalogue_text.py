"""The catalogue of cell functions as text, for the command line and the README."""

from __future__ import annotations

import textwrap

from steelyard.addin.catalogue import CATALOGUE, Entry
from steelyard.core.kind import KINDS

GROUPS = {"make": "Make a plan", "ask": "Ask a plan", "explain": "Explain and check"}


def signature(entry: Entry) -> str:
    """Return a function as it is typed; what may be left out stands in brackets."""
    names = [a.name if a.required else f"[{a.name}]" for a in entry.arguments]
    return f"{entry.name}({', '.join(names)})"


def list_text(width: int = 100) -> str:
    """Return every function with its help, by group, and the kinds of plan."""
    blocks = []
    for group, title in GROUPS.items():
        entries = [entry for entry in CATALOGUE.values() if entry.group == group]
        lines = [title]
        for entry in entries:
            lines += [f"  {signature(entry)}", *_wrapped(entry.help, width, 6)]
        blocks.append("\n".join(lines))
    kinds = [f"  {kind.grammar.kind:<24} {kind.grammar.wording.title}" for kind in KINDS.values()]
    blocks.append("\n".join(["Kinds of plan", *kinds]))
    blocks.append("In LibreOffice Calc the names have a dot: SY.POWER. Ranges may stand for any argument.")
    return "\n\n".join(blocks)


def entry_text(entry: Entry, width: int = 100) -> str:
    """Return one function with its arguments and an example."""
    lines = [signature(entry), *_wrapped(entry.help, width, 2), ""]
    for argument in entry.arguments:
        lines += [f"  {argument.name}", *_wrapped(argument.help, width, 6)]
    calc = entry.example.replace("SY_", "SY.").replace(",", ";")
    lines += ["", f"  Excel  {entry.example}", f"  Calc   {calc}"]
    return "\n".join(lines)


def _wrapped(text: str, width: int, indent: int) -> list[str]:
    margin = " " * indent
    return textwrap.wrap(text, width, initial_indent=margin, subsequent_indent=margin)


def markdown() -> str:
    """Return every function and every kind of plan as the README lists them."""
    blocks = []
    for group, title in GROUPS.items():
        entries = [entry for entry in CATALOGUE.values() if entry.group == group]
        rows = [f"| `{signature(entry)}` | {entry.help} |" for entry in entries]
        blocks.append("\n".join([f"**{title}**", "", "| function | what it gives |", "|---|---|", *rows]))
    kinds = [f"| `{kind.grammar.kind}` | {kind.grammar.wording.title} |" for kind in KINDS.values()]
    blocks.append("\n".join(["**Kinds of plan**", "", "| kind | for |", "|---|---|", *kinds]))
    return "\n\n".join(blocks)
