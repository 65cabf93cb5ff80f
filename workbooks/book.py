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
from steelyard.workbooks.formulas import Host
from steelyard.workbooks.house import Book
from steelyard.workbooks.plans import Planned
from steelyard.workbooks.requests import Problem
from steelyard.workbooks.sheets.checks import add_checks
from steelyard.workbooks.sheets.grid import add_grid
from steelyard.workbooks.sheets.justification import Source, add_justification
from steelyard.workbooks.sheets.readme import add_readme, fill_readme
from steelyard.workbooks.sheets.register import AGREES, Register

JUSTIFIED_BY_DEFAULT = 30

Progress = Callable[[Sequence[Any], str], Iterable[Any]]


@dataclass(frozen=True, slots=True)
class Summary:
    """What a book holds."""

    characteristics: int
    justified: int
    refused: int
    agreeing: int

    def __str__(self) -> str:
        refused = f", {self.refused} rows refused" if self.refused else ""
        return (
            f"{self.characteristics} characteristics, {self.justified} justification sheets, "
            f"{self.agreeing} native checks agree{refused}"
        )


def build_book(
    planned: Sequence[Planned],
    path: Path,
    *,
    host: Host = "excel",
    source: Path | None = None,
    justify: str | Sequence[str] | None = None,
    problems: Sequence[Problem] = (),
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
    add_checks(book, register)
    steps = progress(chosen, "justifications") if progress else chosen
    titles = [add_justification(book, register, place, origin).title for place in steps]
    summary = Summary(
        len(planned), len(titles), len(problems), sum(word == AGREES for word in register.values("agrees"))
    )
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
    known = {plan.request.characteristic.lower(): place for place, plan in enumerate(planned)}
    for name in justify:
        if name.lower() not in known:
            close = get_close_matches(name.lower(), known, n=1)
            hint = f"did you mean {planned[known[close[0]]].request.characteristic}?" if close else ""
            raise InvalidValue("justify", "name characteristics of the request list", name, hint)
    return sorted({known[name.lower()] for name in justify})


def _source(path: Path | None) -> Source:
    return Source(path.name, hashlib.sha256(path.read_bytes()).hexdigest()) if path else Source()
