"""The plan book: from planned characteristics to a workbook that computes, checks and justifies them."""

from __future__ import annotations

import hashlib
from collections.abc import Callable, Iterable, Sequence
from dataclasses import dataclass
from difflib import get_close_matches
from pathlib import Path
from typing import Any

from steelyard.core import VERSION
from steelyard.core.errors import InvalidValue
from steelyard.workbooks.classes import RiskTable
from steelyard.workbooks.formulas import Host
from steelyard.workbooks.house import Book
from steelyard.workbooks.plans import Planned
from steelyard.workbooks.sheets.checks import add_checks
from steelyard.workbooks.sheets.classes import add_classes
from steelyard.workbooks.sheets.comparison import add_comparison
from steelyard.workbooks.sheets.grid import add_grid
from steelyard.workbooks.sheets.justification import Source, add_justification
from steelyard.workbooks.sheets.readme import add_readme, fill_readme
from steelyard.workbooks.sheets.register import Register
from steelyard.workbooks.sheets.results import add_results
from steelyard.workbooks.sheets.sizes import add_sizes
from steelyard.workbooks.tables import Problem

JUSTIFIED_BY_DEFAULT = 30

Progress = Callable[[Sequence[Any], str], Iterable[Any]]


@dataclass(frozen=True, slots=True)
class Summary:
    """What a book holds.

    Examples
    --------
    >>> print(Summary(29, 1, 2, 28, 29))
    29 characteristics, 1 justification; 28 of 29 native checks agree; 2 rows refused
    """

    characteristics: int
    justifications: int
    refused: int
    agreeing: int
    checked: int

    def __str__(self) -> str:
        parts = [
            _count(self.characteristics, "characteristic")
            + ", "
            + _count(self.justifications, "justification"),
            f"{self.agreeing} of {_count(self.checked, 'native check')} agree",
        ]
        if self.refused:
            parts.append(f"{_count(self.refused, 'row')} refused")
        return "; ".join(parts)


def _count(number: int, thing: str) -> str:
    return f"{number:,} {thing}{'' if number == 1 else 's'}"


def build_book(
    planned: Sequence[Planned],
    path: Path,
    *,
    host: Host = "excel",
    source: Path | None = None,
    justify: str | Sequence[str] | None = None,
    problems: Sequence[Problem] = (),
    classes: RiskTable | None = None,
    progress: Progress | None = None,
) -> Summary:
    """Write the plan book of a request list.

    Parameters
    ----------
    planned : sequence of Planned
        From `plan_requests`.
    path : Path
        The workbook to write.
    host : {"excel", "calc"}
        Spelling of the formulas: ``SY_POWER`` or ``SY.POWER``.
    source : Path, optional
        The request list, for its name and SHA-256.
    justify : "all" or sequence of str, optional
        Characteristics that get a justification sheet; all of up to 30 if left out, none of more.
    problems : sequence of Problem
        Rows that were refused, listed in *Read me*.
    classes : RiskTable, optional
        The table from which the rows took their risks, shown on a sheet of its own.
    progress : callable, optional
        Shows how far the work on a list of things has come.

    Raises
    ------
    InvalidValue
        For a name in `justify` that no characteristic has.
    """
    chosen = _justified(planned, justify)
    origin = _source(source)
    book = Book(
        f"Plan book: {source.stem}" if source else "Plan book",
        host,
        subject="Inspection by sample: plans, power and risks",
        keywords="sampling inspection, power, hypothesis test",
        imprint=f"Steelyard {VERSION}",
    )
    readme = add_readme(book)
    register = Register(book, planned)
    add_grid(book, register)
    agreeing, checked = add_checks(book, register)
    for add in (add_comparison, add_sizes, add_results):
        add(book, planned)
    add_classes(book, classes)
    steps = progress(chosen, "justifications") if progress else chosen
    titles = [add_justification(book, register, place, origin).title for place in steps]
    summary = Summary(len(planned), len(titles), len(problems), agreeing, checked)
    fill_readme(readme, str(summary), origin, titles, problems)
    book.save(path)
    return summary


def _justified(planned: Sequence[Planned], justify: str | Sequence[str] | None) -> list[int]:
    everything = list(range(len(planned)))
    if justify is None:
        return everything if len(planned) <= JUSTIFIED_BY_DEFAULT else []
    if isinstance(justify, str):
        if justify != "all":
            raise InvalidValue("justify", "be all or a list of characteristics", justify)
        return everything
    places: dict[str, list[int]] = {}
    for place, one in enumerate(planned):
        places.setdefault(one.request.characteristic.lower(), []).append(place)
    for name in justify:
        if name.lower() not in places:
            close = get_close_matches(name.lower(), places, n=1)
            hint = f"did you mean {planned[places[close[0]][0]].request.characteristic}?" if close else ""
            raise InvalidValue("justify", "name characteristics of the request list", name, hint)
    return sorted({place for name in justify for place in places[name.lower()]})


def _source(path: Path | None) -> Source:
    return Source(path.name, hashlib.sha256(path.read_bytes()).hexdigest()) if path else Source()
