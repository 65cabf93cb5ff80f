"""Plan texts read once: the cell layer's memory of plans and tables. Bounded, and only a memory."""

from __future__ import annotations

import functools
from typing import Any

import numpy as np
from numpy.typing import NDArray

from steelyard.core import kinds  # noqa: F401  (registers every kind)
from steelyard.core.errors import InvalidValue, SteelyardError
from steelyard.core.plan import Plan
from steelyard.core.table import PlanTable
from steelyard.core.text import read_plan

_PLANS, _TABLES = 65_536, 64


@functools.lru_cache(_PLANS)
def _read(text: str) -> Plan | SteelyardError:
    try:
        return read_plan(text)
    except SteelyardError as error:
        return error  # a cache forgets what is raised


def plan_of(value: Any, name: str = "plan") -> Plan:
    """Return the plan that a cell's text describes.

    Raises
    ------
    SteelyardError
        When the cell is no text, or its text is no plan.
    """
    if not isinstance(value, str):
        raise InvalidValue(name, "be plan text such as binomial | n 50 | claim p<=0.02 | reject x>=4", value)
    found = _read(value)
    if isinstance(found, SteelyardError):
        raise found.with_traceback(None)
    return found


def plan_or_none(value: Any) -> Plan | None:
    """Return the plan that a cell's text describes, None where it describes none."""
    found = _read(value) if isinstance(value, str) else None
    return found if isinstance(found, Plan) else None


@functools.lru_cache(_TABLES)
def table_of(cells: tuple[Any, ...]) -> tuple[PlanTable, NDArray[np.intp]]:
    """Return the distinct plans of many cells as a table, and each cell's place in it (-1: no plan)."""
    distinct: dict[Plan, int] = {}
    places = []
    for cell in cells:
        found = plan_or_none(cell)
        places.append(-1 if found is None else distinct.setdefault(found, len(distinct)))
    return PlanTable.of(list(distinct)), np.array(places, dtype=np.intp)


def forget() -> None:
    """Empty the memory; answers are the same with it and without."""
    _read.cache_clear()
    table_of.cache_clear()
