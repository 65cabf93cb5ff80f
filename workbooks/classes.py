"""Risk classes: a table that its user owns, from which request rows take alpha, catch and power by name."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace
from pathlib import Path

from steelyard.core.errors import SteelyardError
from steelyard.workbooks.columns import COLUMNS
from steelyard.workbooks.tables import read_table
from steelyard.workbooks.tabular import read_rows

SHEET = "Risk classes"
RISKS = ("alpha", "catch", "power")
"""What a class gives; fields of a request too."""

_BY_NAME = {column.name: column for column in COLUMNS}

CLASS_COLUMNS = (
    replace(_BY_NAME["risk class"], help="Its name, as the request rows say it.", examples=("A", "B"),
            required=True),
    replace(_BY_NAME["note"], name="severity", help="What a failure of this class does.",
            examples=("Stops the use", "Shortens the life")),
    replace(_BY_NAME["alpha"], examples=("5%", "5%")),
    replace(_BY_NAME["catch"], examples=("4%", "10%")),
    replace(_BY_NAME["power"], examples=("95%", "90%")),
)  # fmt: skip


@dataclass(frozen=True, slots=True)
class RiskClass:
    """A class and the risks that its user accepts; what was left empty is None.

    Parameters
    ----------
    risk_class : str
        Its name.
    severity : str, optional
        What a failure does.
    alpha, power : float, optional
        Probabilities.
    catch : str, optional
        The rate to catch, as typed.
    """

    risk_class: str
    severity: str | None = None
    alpha: float | None = None
    catch: str | None = None
    power: float | None = None


@dataclass(frozen=True, slots=True)
class RiskTable:
    """The classes of a file, by their names in lower case."""

    path: Path
    classes: Mapping[str, RiskClass]


def find_classes(requests: Path, classes: Path | None = None) -> RiskTable | None:
    """Return the table in a file of its own, else the one in the workbook that holds the requests.

    Returns
    -------
    RiskTable or None
        None where the requests come without a table.

    Raises
    ------
    SteelyardError
        For a file without such a table, and for a table with any row that can't be used.
    """
    if classes is not None:
        return _read(classes)
    if requests.suffix.lower() == ".csv" or not read_rows(requests, SHEET).found:
        return None
    return _read(requests)


def _read(path: Path) -> RiskTable:
    rows, problems = read_table(path, read_rows(path, SHEET), CLASS_COLUMNS)
    found: dict[str, RiskClass] = {}
    wrong = [str(problem) for problem in problems]
    for number, values in rows:
        one = RiskClass(**values)
        if one.risk_class.casefold() in found:
            wrong.append(f"row {number}: risk class {one.risk_class} twice")
        found[one.risk_class.casefold()] = one
    if wrong or not found:
        message = f"{path.name}, risk classes: {'; '.join(wrong) or 'no class'}"
        raise SteelyardError(message)
    return RiskTable(path, found)
