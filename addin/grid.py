"""Tables of power and acceptance: plans and rates as ranges, one vectorised question for all."""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

import numpy as np

from steelyard.addin.plans import table_of
from steelyard.core.kind import Kind
from steelyard.core.parameter import Floats
from steelyard.core.table import PlanTable, Question


def asking(question: Callable[[Kind], Question]) -> Callable[..., Any]:
    """Return the grid twin of a cell function ``(plan, rate, [second])``.

    Cells that it cannot answer (no plan, a text rate, a refused rate) are NaN; the scalar function
    answers them.
    """

    def grid(plan: Any, *rates: Any) -> Any:
        rows = plan if isinstance(plan, list) else [[plan]]
        table, places = table_of(tuple(cell for row in rows for cell in row))
        index = places.reshape(len(rows), len(rows[0]))
        given = [floats(rate) for rate in rates if rate is not None]
        return PlanTable.map(table, question, index, *given).tolist()

    return grid


def floats(cells: Any) -> Floats:
    """Return cells as rows of floats, NaN for everything that is no plain number."""
    rows = cells if isinstance(cells, list) else [[cells]]
    return np.array([[_float(cell) for cell in row] for row in rows], dtype=float)


def _float(cell: Any) -> float:
    return float(cell) if type(cell) in (int, float) else np.nan
