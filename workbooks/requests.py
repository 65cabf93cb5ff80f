"""Request lists: what is to be inspected, read into typed rows, with every problem told by row and column.

Only cells and columns are checked here; whether claim, catch and kind fit together is the core's business.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from pathlib import Path

from steelyard.workbooks.classes import RISKS, RiskClass, find_classes
from steelyard.workbooks.columns import COLUMNS, Column
from steelyard.workbooks.tables import Problem, read_table
from steelyard.workbooks.tabular import read_rows

__all__ = ["COLUMNS", "Column", "Problem", "Request", "read_requests"]


@dataclass(frozen=True, slots=True)
class Request:
    """One row of a request list; what was left empty is None.

    Attributes
    ----------
    row : int
        Its number in the file, for messages.
    claim, catch : str
        As typed, e.g. ``"2%"``, ``"0.02"``, ``"50 ppm"``, ``"D<=8"``.
    alpha, power : float
        Probabilities.
    """

    row: int
    characteristic: str
    kind: str
    claim: str
    alpha: float | None = None
    catch: str | None = None
    power: float | None = None
    side: str | None = None
    lot: int | None = None
    n: float | None = None
    verdict: str | None = None
    split: str | None = None
    sigma: float | None = None
    unit: str | None = None
    risk_class: str | None = None
    reference: str | None = None
    note: str | None = None


def read_requests(path: Path, classes: Path | None = None) -> tuple[list[Request], list[Problem]]:
    """Read a request list.

    Parameters
    ----------
    path : Path
        An .xlsx workbook (sheet *Requests*, else its first) or a .csv file in UTF-8, separated by commas,
        semicolons or tabs; decimal commas are understood where semicolons separate.
    classes : Path, optional
        A table of risk classes; left out, that of the workbook's sheet *Risk classes*. It gives alpha, catch
        and power where a row names a class and leaves them empty.

    Returns
    -------
    tuple of (list of Request, list of Problem)
        The good rows, and what is wrong with the others.

    Raises
    ------
    SteelyardError
        When the file as a whole can't be used: unreadable, too large, wrong headings, mixed decimal marks.
        Likewise for a table of risk classes with any row that can't be used.
    """
    rows, problems = read_table(path, read_rows(path), COLUMNS)
    requests = [Request(number, **values) for number, values in rows]
    if not any(request.risk_class for request in requests):
        return requests, problems
    table = find_classes(path, classes)
    good, unknown = _filled(requests, table.classes if table else {})
    return good, sorted([*problems, *unknown], key=lambda problem: problem.row)


def _filled(
    requests: Sequence[Request], classes: Mapping[str, RiskClass]
) -> tuple[list[Request], list[Problem]]:
    """Fill in what rows leave to their class; what is typed in a row wins."""
    good: list[Request] = []
    problems: list[Problem] = []
    for request in requests:
        empty = [name for name in RISKS if getattr(request, name) is None]
        if request.risk_class is None:
            good.append(request)
        elif (found := classes.get(request.risk_class.casefold())) is not None:
            good.append(replace(request, **{name: getattr(found, name) for name in empty}))
        elif classes or empty:
            problems.append(_unknown(request, empty, classes))
        else:  # a mere label: every number stands in the row
            good.append(request)
    return good, problems


def _unknown(request: Request, empty: Sequence[str], classes: Mapping[str, RiskClass]) -> Problem:
    """Return the problem of a class that no table holds."""
    if classes:
        names = ", ".join(one.risk_class for one in classes.values())
        return Problem(request.row, "risk class", request.risk_class, f"one of {names}")
    allowed = "a class of a table of risk classes"
    hint = f"there is no table; give one, or type {', '.join(empty)} in the row"
    return Problem(request.row, "risk class", request.risk_class, allowed, hint)
