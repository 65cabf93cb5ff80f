"""Tables of power and acceptance: plans and rates as ranges, one vectorised question for all."""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

import numpy as np

from steelyard.addin.plans import plan_or_none, table_of
from steelyard.core.evidence import LIMIT_ENDS
from steelyard.core.kind import Kind
from steelyard.core.numbers import MOST
from steelyard.core.parameter import Floats
from steelyard.core.plan import Plan
from steelyard.core.rates import rates_for
from steelyard.core.table import Question


def asking(question: Callable[[Kind], Question]) -> Callable[..., Any]:
    """Return the grid twin of a cell function ``(plan, rate, [second])``.

    Cells that it cannot answer (no plan, a text rate, a refused rate) are NaN; the scalar function
    answers them.
    """

    def grid(plan: Any, *rates: Any) -> Any:
        rows = rows_of(plan)
        table, places = table_of(tuple(cell for row in rows for cell in row))
        index = places.reshape(len(rows), len(rows[0]))
        given = [floats(rate) for rate in rates if rate is not None]
        return table.map(question, index, *given)

    return grid


def rates_grid(plan: Any, power: Any, end: Any = None) -> Any:
    """Return the grid twin of SY_RATE_FOR: one search for all cells with the same power and end."""
    cells: Any = np.broadcast_arrays(
        *(np.array(rows_of(given), dtype=object) for given in (plan, power, end))
    )
    groups: dict[tuple[float, str | None], list[tuple[Plan, tuple[int, ...]]]] = {}
    for place in np.ndindex(cells[0].shape):
        found, goal, side = plan_or_none(cells[0][place]), cells[1][place], cells[2][place]
        if found is not None and type(goal) is float and 0 < goal < 1 and side in (None, *LIMIT_ENDS):
            groups.setdefault((goal, side), []).append((found, place))
    answers = np.full(cells[0].shape, np.nan)
    for (target, wanted), members in groups.items():
        solved = rates_for([found for found, _ in members], [target], wanted)
        for (_, place), rate in zip(members, solved[:, 0], strict=True):
            answers[place] = rate
    return answers


def rows_of(cells: Any) -> list[list[Any]]:
    """Return a single cell as rows, too."""
    return cells if isinstance(cells, list) else [[cells]]


def floats(cells: Any) -> Floats:
    """Return cells as rows of floats, NaN for everything that is no plain number."""
    return np.array([[_float(cell) for cell in row] for row in rows_of(cells)], dtype=float)


def _float(cell: Any) -> float:
    return float(cell) if type(cell) in (int, float) and abs(cell) <= MOST else np.nan
