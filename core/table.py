"""Many plans at once: distinct plans grouped by kind, one vectorised call per kind."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from steelyard.core.kind import KINDS, Kind
from steelyard.core.parameter import Columns, Floats
from steelyard.core.plan import Plan

Question = Callable[..., Floats]


@dataclass(frozen=True, slots=True)
class Group:
    """Plans of one kind: where they stand in the table, and their columns."""

    kind: Kind
    places: NDArray[np.intp]
    columns: Columns


@dataclass(frozen=True, slots=True)
class PlanTable:
    """Plans of several kinds, as a struct of arrays per kind.

    Parameters
    ----------
    groups : tuple of Group
        One group for each kind.
    count : int
        How many plans there are.
    """

    groups: tuple[Group, ...]
    count: int

    @classmethod
    def of(cls, plans: Sequence[Plan]) -> PlanTable:
        """Group plans by kind.

        Parameters
        ----------
        plans : sequence of Plan
            Any kinds, in any order.
        """
        places: dict[str, list[int]] = {}
        for place, plan in enumerate(plans):
            places.setdefault(plan.kind, []).append(place)
        groups = (
            Group(KINDS[name], np.array(found), KINDS[name].columns([plans[i] for i in found]))
            for name, found in places.items()
        )
        return cls(tuple(groups), len(plans))

    def map(self, question: Callable[[Kind], Question], index: NDArray[np.intp], *rates: Floats) -> Floats:
        """Ask a question of many plans at many rates.

        Parameters
        ----------
        question : callable
            From a kind to its vectorised answer, e.g. ``lambda kind: kind.reject``.
        index : ndarray of int
            Which plan stands in each place; -1 for none.
        *rates : ndarray of float
            Values of the parameters; they broadcast with `index`.

        Returns
        -------
        ndarray of float
            In the broadcast shape; NaN where a rate is refused or a place holds no plan.

        Examples
        --------
        >>> from steelyard.core.text import read_plan
        >>> table = PlanTable.of([read_plan("binomial | n 50 | reject x>=4")])
        >>> power = table.map(lambda kind: kind.reject, np.array([[0]]), np.array([[0.02, 0.1]]))
        >>> power.round(4).tolist()
        [[0.0178, 0.7497]]
        """
        if len(self.groups) == 1 and (index >= 0).all():
            return _answer(self.groups[0], question, index, rates)
        shape = np.broadcast_shapes(index.shape, *(rate.shape for rate in rates))
        result = np.full(shape, np.nan)
        if index.ndim == 2 and index.shape[1] == 1:
            self._by_row(result, question, index, rates)
        else:
            self._by_cell(result, question, index, rates)
        return result

    def _by_row(
        self,
        result: Floats,
        question: Callable[[Kind], Question],
        index: NDArray[np.intp],
        rates: tuple[Floats, ...],
    ) -> None:
        """Keep the outer product of plans down and rates across: one call per kind, no flattening."""
        for group in self.groups:
            rows = np.flatnonzero(np.isin(index[:, 0], group.places))
            if len(rows):
                parts = tuple(rate if rate.shape[0] == 1 else rate[rows] for rate in rates)
                place = rows if len(index) > 1 else slice(None)
                result[place] = _answer(group, question, index[rows], parts)

    def _by_cell(
        self,
        result: Floats,
        question: Callable[[Kind], Question],
        index: NDArray[np.intp],
        rates: tuple[Floats, ...],
    ) -> None:
        full = np.broadcast_to(index, result.shape)
        spread = [np.broadcast_to(rate, result.shape) for rate in rates]
        for group in self.groups:
            mask = np.isin(full, group.places)
            if mask.any():
                parts = tuple(rate[mask] for rate in spread)
                result[mask] = _answer(group, question, full[mask], parts)


def _answer(
    group: Group, question: Callable[[Kind], Question], index: NDArray[np.intp], rates: tuple[Floats, ...]
) -> Floats:
    local = np.searchsorted(group.places, index)
    columns = {name: values[local] for name, values in group.columns.items()}
    own = group.kind.parameters
    if not sum(not parameter.optional for parameter in own) <= len(rates) <= len(own):
        return np.full(np.broadcast_shapes(index.shape, *(rate.shape for rate in rates)), np.nan)
    converted = [own[i].convert(rate, columns) for i, rate in enumerate(rates)]
    refused = [np.isnan(rate) for rate in converted]
    if not any(mask.any() for mask in refused):
        return question(group.kind)(columns, *converted)
    safe = [
        np.where(mask, _harmless(own[i]), rate)
        for i, (mask, rate) in enumerate(zip(refused, converted, strict=True))
    ]
    bad = refused[0]
    for mask in refused[1:]:
        bad = bad | mask
    return np.where(bad, np.nan, question(group.kind)(columns, *safe))


def _harmless(parameter: object) -> float:
    """Return a value of the parameter to compute with where the real one was refused."""
    lower, upper = getattr(parameter, "lower", 0.0), getattr(parameter, "upper", 1.0)
    if np.isfinite(lower) and np.isfinite(upper):
        return float(lower + upper) / 2
    return float(lower) + 1.0 if np.isfinite(lower) else 0.0
