"""Recalculating a book without a spreadsheet program: every formula that can be followed, in order."""

from __future__ import annotations

import math
import re
from collections.abc import Callable, Iterable, Iterator, Mapping, Sequence
from dataclasses import dataclass, field
from graphlib import CycleError, TopologicalSorter
from typing import Any

from steelyard.addin import CATALOGUE
from steelyard.addin.cells import MOST_CELLS
from steelyard.workbooks.formula_calls import Unfollowed
from steelyard.workbooks.formula_operators import Raised, give_up
from steelyard.workbooks.formula_tree import Area, Name, Tree, read_formula, references
from steelyard.workbooks.formula_values import NATIVE, Result, evaluate
from steelyard.workbooks.opened import Formula, OpenedBook, Place, cells_of
from steelyard.workbooks.pieces import Value

_SAME = 1e-13  # relative: Calc stores 15 digits, and a search may end at either of two neighbours
_TOGETHER = {"SY_RATE_FOR"}  # a column of questions takes it little longer than one
_CALLED = re.compile(r"([A-Za-z_][\w.]*)\(")

Question = tuple[Any, ...]
"""Name of a function of ours, and its arguments."""

Progress = Callable[[Sequence[Any], str], Iterable[Any]]


@dataclass(slots=True)
class Recalculation:
    """What a recalculation found.

    Attributes
    ----------
    values : dict
        Sheet title -> cell -> new value, of the cells that change.
    changed, unchanged : list of Formula
        Formulas that could be followed, with and without a cell that changes.
    unfollowed : dict
        The others, and what stands in the way.
    """

    values: dict[str, dict[str, Value]] = field(default_factory=dict)
    changed: list[Formula] = field(default_factory=list)
    unchanged: list[Formula] = field(default_factory=list)
    unfollowed: dict[Formula, str] = field(default_factory=dict)


def recalculate(book: OpenedBook, progress: Progress | None = None) -> Recalculation:
    """Compute the formulas of a book that can be followed; nothing is written.

    The formulas are taken in generations: those that need only inputs, those that need only the former, and
    so on. What a formula stored is never an input: one that depends on another that can't be followed is not
    followed either.

    Parameters
    ----------
    book : OpenedBook
        Its inputs may have been edited since its values were stored.
    progress : callable, optional
        Shows how far the work on a list of things has come.
    """
    return _Run(book).run(progress)


class _Later(Exception):
    """An answer that comes with those to other questions."""


class _Run:
    """One recalculation: the cells that formulas fill, their trees, and the values found so far."""

    def __init__(self, book: OpenedBook) -> None:
        self._book = book
        self._titles = {title.lower(): title for title in book.sheets}
        self._names = {(name.sheet.lower(), name.name.lower()): name.text for name in book.names}
        self._filled = {
            (formula.sheet, ref): formula
            for formula in book.formulas()
            for row in formula.places
            for ref in row
        }
        self._fillings: dict[tuple[str, int, int, int, int], list[Formula]] = {}
        self._trees: dict[Formula, Tree] = {}
        self._found: dict[Place, Value] = {}
        self._questions: dict[Question, None] = {}
        self._answers: dict[Question, Value] = {}
        self._result = Recalculation()
        self._sheet = ""

    def run(self, progress: Progress | None) -> Recalculation:
        generations = self._generations()
        for generation in progress(generations, "steps") if progress else generations:
            waiting = [formula for formula in generation if formula not in self._result.unfollowed]
            while waiting:
                waiting = [formula for formula in waiting if not self._follow(formula)]
                self._ask()
        return self._result

    # What a formula refers to: the face that `evaluate` knows

    def area(self, area: Area) -> Result:
        title = self._title(area.sheet)
        if area.one_cell:
            return self._value(title, cells_of(area.left, area.top, area.right, area.bottom)[0][0])
        rows = cells_of(area.left, area.top, area.right, area.bottom)
        return [[self._value(title, ref) for ref in row] for row in rows]

    def named(self, name: Name) -> Tree:
        scopes = [self._title(name.sheet).lower()] if name.sheet else [self._sheet.lower(), ""]
        found = [text for scope in scopes if (text := self._names.get((scope, name.name.lower())))]
        if not found:
            give_up(f"uses the name {name.name}, which the book does not define")
        tree = read_formula(found[0].removeprefix("="))
        for part in references(tree):
            if isinstance(part, Name) or not part.fixed:
                give_up(f"uses the name {name.name}, which does not stand for fixed cells")
        return tree

    def call(self, name: str, arguments: tuple[Result, ...]) -> Result:
        if name not in _TOGETHER or any(isinstance(value, bool | list | None) for value in arguments):
            answer: Result = CATALOGUE[name].function(*arguments)
            return answer
        question = (name, *arguments)
        if question not in self._answers:
            self._questions[question] = None
            raise _Later
        return self._answers[question]

    def _ask(self) -> None:
        """Answer the questions that were put off, each function asked once with columns of arguments."""
        groups: dict[tuple[str, int], list[Question]] = {}
        for question in self._questions:
            groups.setdefault((question[0], len(question)), []).append(question)
        for (name, _), questions in groups.items():
            columns = [[[value] for value in values] for values in zip(*questions, strict=True)][1:]
            answers = CATALOGUE[name].function(*columns)
            rows = answers if isinstance(answers, list) else [[answers]]
            self._answers |= {key: row[0] for key, row in zip(questions, rows, strict=True)}
        self._questions.clear()

    def _title(self, sheet: str) -> str:
        title = self._titles.get(sheet.lower()) if sheet else self._sheet
        return title or give_up(f"refers to a sheet {sheet}, which the book does not have")

    def _value(self, title: str, ref: str) -> Value:
        formula = self._filled.get((title, ref))
        if formula in self._result.unfollowed:
            give_up(f"depends on {formula}, which can't be followed")
        if formula is not None:
            return self._found.get((title, ref))
        return self._book.sheets[title].values.get(ref)

    # The order of the work

    def _generations(self) -> list[tuple[Formula, ...]]:
        """Return the formulas, each in a generation behind those it depends on; circles are set aside."""
        needs = {formula: self._needs(formula) for formula in self._book.formulas()}
        sorter = self._sorted(needs)
        generations = []
        while sorter.is_active():
            generations.append(sorter.get_ready())
            sorter.done(*generations[-1])
        return generations

    def _sorted(self, needs: dict[Formula, list[Formula]]) -> TopologicalSorter[Formula]:
        while True:
            sorter = TopologicalSorter(needs)
            try:
                sorter.prepare()
            except CycleError as error:
                circle = error.args[1]
                path = " → ".join(str(formula) for formula in reversed(circle))
                for formula in circle:
                    self._result.unfollowed[formula] = f"depends on itself: {path}"
                    needs[formula] = []
            else:
                return sorter

    def _needs(self, formula: Formula) -> list[Formula]:
        """Return the formulas that a formula refers to; note its tree, or why it has none."""
        self._sheet = formula.sheet
        try:
            tree = self._tree(formula)
            found: dict[Formula, None] = {}
            for area in self._areas(tree):
                found |= dict.fromkeys(self._filling(area))
        except (Unfollowed, RecursionError) as error:
            self._set_aside(formula, error)
            return []
        self._trees[formula] = tree
        return list(found)

    def _areas(self, tree: Tree) -> Iterator[Area]:
        """Yield the cells and ranges of a tree, those behind names included."""
        for part in references(tree):
            if isinstance(part, Area):
                yield part
            else:
                yield from self._areas(self.named(part))

    def _tree(self, formula: Formula) -> Tree:
        if formula.kind == "dataTable":
            give_up("is a what-if data table")
        if not formula.ours:  # most native formulas are told by their functions, which is fast
            for name in _CALLED.findall(formula.text):
                if name.upper() not in NATIVE:
                    give_up(f"uses {name.removeprefix('_xlfn.').upper()}")
        return read_formula(formula.text)

    def _filling(self, area: Area) -> list[Formula]:
        """Return the formulas that fill cells of an area."""
        place = self._title(area.sheet), area.left, area.top, area.right, area.bottom
        if place not in self._fillings:
            if (area.right - area.left + 1) * (area.bottom - area.top + 1) > MOST_CELLS:
                give_up(f"takes a range of more than {MOST_CELLS:,} cells")
            refs = (ref for row in cells_of(*place[1:]) for ref in row)
            found = (self._filled.get((place[0], ref)) for ref in refs)
            self._fillings[place] = [formula for formula in found if formula is not None]
        return self._fillings[place]

    # The work

    def _follow(self, formula: Formula) -> bool:
        """Compute a formula; return whether that is settled, or has to wait for an answer."""
        self._sheet = formula.sheet
        try:
            cells = self._spread(formula, self._computed(formula))
        except _Later:
            return False
        except (Unfollowed, RecursionError) as error:
            self._set_aside(formula, error)
            return True
        self._found |= {(formula.sheet, ref): value for ref, value in cells.items()}
        self._note(formula, cells)
        return True

    def _computed(self, formula: Formula) -> Result:
        try:
            value = evaluate(self._trees[formula], self)
        except Raised as error:
            return error.fault
        if isinstance(value, list) and formula.kind != "array" and not formula.ours:
            give_up("takes a range where a single value belongs")
        return value

    def _spread(self, formula: Formula, value: Result) -> dict[str, Value]:
        """Return what each cell of a formula shows: a single value in all, or rows that fit."""
        places = formula.places
        if not isinstance(value, list):
            shown = ("" if formula.ours else 0.0) if value is None else value
            return {ref: shown for row in places for ref in row}
        if formula.kind != "array":
            first = value[0][0]
            return {formula.cell.ref: "" if first is None else first}
        if len(value) != len(places) or len(value[0]) != len(places[0]):
            give_up(f"gives {len(value)} by {len(value[0])} cells, but fills {formula.area}")
        return {
            ref: "" if cell is None and ref == formula.cell.ref else cell
            for row, cells in zip(places, value, strict=True)
            for ref, cell in zip(row, cells, strict=True)
        }

    def _set_aside(self, formula: Formula, error: Exception) -> None:
        reason = str(error) if isinstance(error, Unfollowed) else "is nested too deeply"
        self._result.unfollowed[formula] = reason

    def _note(self, formula: Formula, cells: Mapping[str, Value]) -> None:
        """Sort a formula into those that change and those that do not."""
        stored = self._book.sheets[formula.sheet].values
        new = {ref: value for ref, value in cells.items() if not _same(stored.get(ref), value, ref, formula)}
        lacking = [ref for ref in new if ref not in stored]
        if lacking:
            self._result.unfollowed[formula] = f"would fill {lacking[0]}, a cell that the file leaves out"
        elif new:
            self._result.changed.append(formula)
            self._result.values.setdefault(formula.sheet, {}).update(new)
        else:
            self._result.unchanged.append(formula)


def _same(old: Any, new: Any, ref: str, formula: Formula) -> bool:
    """Tell whether a stored value is the new one; behind the first cell of an array nothing is empty text."""
    if ref != formula.cell.ref:
        old, new = (None if value == "" else value for value in (old, new))
    if any(isinstance(value, bool | str | None) for value in (old, new)):
        return type(old) is type(new) and old == new
    return math.isclose(old, new, rel_tol=_SAME)
