"""Refreshing a book: new stored values for the formulas that can be followed, and nothing else."""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path

from steelyard.workbooks.opened import OpenedBook
from steelyard.workbooks.parts import write_parts
from steelyard.workbooks.pieces import Value
from steelyard.workbooks.recalculation import Progress, recalculate


@dataclass(frozen=True, slots=True)
class Change:
    """A cell whose stored value is a new one."""

    cell: str
    old: Value
    new: Value


@dataclass(frozen=True, slots=True)
class Refreshed:
    """What a refresh did.

    Attributes
    ----------
    changes : tuple of Change
        Cells with a new value.
    changed, unchanged : int
        Formulas that could be followed, with and without such a cell.
    unfollowed : dict
        Formulas with calls of ours that were left as they are -> what stands in the way.
    left : int
        Formulas of the spreadsheet's own that were left to the spreadsheet program.
    """

    changes: tuple[Change, ...]
    changed: int
    unchanged: int
    unfollowed: dict[str, str]
    left: int

    def __str__(self) -> str:
        text = f"{self.changed:,} formulas changed, {self.unchanged:,} unchanged"
        if self.unfollowed:
            text += f", {len(self.unfollowed):,} could not be followed"
        if self.left and self.changed:
            text += (
                f"; on opening the spreadsheet program recalculates its own ({self.left:,} were left to it)"
            )
        return text


def refresh_book(source: Path, target: Path | None = None, progress: Progress | None = None) -> Refreshed:
    """Recompute the stored values of a book whose inputs were edited without a spreadsheet program.

    Our functions are followed, and the common native ones around them. Every other part, cell and byte of the
    book stays as it is. Where values changed and native formulas could not be followed, the book asks for a
    full calculation on opening: open it where the add-in is loaded, or make a share copy of it.

    Parameters
    ----------
    source : Path
        The workbook.
    target : Path, optional
        The file to write; the workbook itself if left out.
    progress : callable, optional
        Shows how far the work on a list of things has come.

    Raises
    ------
    SteelyardError
        Before anything is written, for a file that is no plain .xlsx workbook, is damaged, encrypted, signed,
        or holds macros.

    Notes
    -----
    A blank cell is blank to a function, as in Excel; Calc hands over 0 for a blank cell that is no range.
    """
    book = OpenedBook(source)
    found = recalculate(book, progress)
    changes = [
        Change(f"{title}!{ref}", old, found.values[title][ref])
        for title, sheet in book.sheets.items()
        for ref, old in sheet.values.items()
        if ref in found.values.get(title, {})
    ]
    ours = {str(f): found.unfollowed[f] for f in book.formulas() if f.ours and f in found.unfollowed}
    left = len(found.unfollowed) - len(ours)
    if changes:
        book.store(found.values)
        if left:
            book.package.recalculate_on_opening()
    if changes or target is not None:
        write_parts(target or source.resolve(), book.package.parts)
    return Refreshed(tuple(changes), len(found.changed), len(found.unchanged), ours, left)
