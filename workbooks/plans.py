"""From the rows of a request list to plans, with every row that can't be planned told by column and value."""

from __future__ import annotations

import math
from collections.abc import Iterator, Sequence
from contextlib import contextmanager
from dataclasses import dataclass
from typing import Any

import numpy as np

from steelyard.core.claims import claim_from
from steelyard.core.designs import design_from, extent_values, kind_named
from steelyard.core.errors import InvalidValue, SteelyardError
from steelyard.core.kind import Kind, kind_of
from steelyard.core.need import Need, need_from
from steelyard.core.numbers import read_number
from steelyard.core.parameter import Floats
from steelyard.core.plan import SPLITS, VERDICTS, Claim, Plan, split_claim
from steelyard.core.regions import make_plan
from steelyard.core.smallest import plan_for, smallest_sizes
from steelyard.core.text import write_plan
from steelyard.core.threshold import CountKind
from steelyard.workbooks.columns import COLUMNS
from steelyard.workbooks.requests import Problem, Request

ALPHA = 0.05
_COLUMNS = {column.name: column for column in COLUMNS}


@dataclass(frozen=True, slots=True)
class Planned:
    """A request and the plan that answers it.

    Parameters
    ----------
    number : int
        Its place in the book, from 1.
    request : Request
        The row as typed.
    plan : Plan
        Of the size asked for, or the smallest that meets both risks.
    text : str
        The plan's text.
    alpha : float
        Nominal significance level.
    claim : float or str
        The claim's boundary as a cell holds it: a number, or text where only a text says it.
    catches : tuple
        No, one or two rates to catch, likewise.
    own_catches : tuple of float
        The same in the parameter's own unit: a share of a lot as a whole number of items.
    """

    number: int
    request: Request
    plan: Plan
    text: str
    alpha: float
    claim: float | str
    catches: tuple[float | str, ...]
    own_catches: tuple[float, ...]

    @property
    def kind(self) -> Kind:
        """The plan's kind."""
        return kind_of(self.plan)

    @property
    def side(self) -> str:
        """Where the true value lies when the claim is false."""
        assert self.plan.claim is not None
        return self.plan.claim.side

    @property
    def extent(self) -> float:
        """How much is inspected: items, or units."""
        return float(getattr(self.plan.design, self.kind.grammar.extent))

    @property
    def extra(self) -> float | None:
        """The lot, or sigma, where the kind needs one."""
        column = _extra_column(self.kind)
        return getattr(self.request, column) if column else None

    @property
    def native(self) -> bool:
        """Whether the spreadsheet's own functions can give the power."""
        return self.kind.native(self.plan, "A1") is not None


def plan_requests(requests: Sequence[Request]) -> tuple[list[Planned], list[Problem]]:
    """Return the plans of all rows that can be planned, and what is wrong with the others.

    Parameters
    ----------
    requests : sequence of Request
        The good rows of a request list.

    Returns
    -------
    planned : list of Planned
        In the order of the rows, numbered from 1.
    problems : list of Problem
        One for each row left out.
    """
    asked: list[_Asked] = []
    problems: list[Problem] = []
    for request in requests:
        with _noting(problems):
            asked.append(_ask(request))
    planned: list[Planned] = []
    for one, amount in zip(asked, _amounts(asked), strict=True):
        with _noting(problems):
            planned.append(_plan(one, amount, len(planned) + 1))
    return planned, sorted(problems, key=lambda problem: problem.row)


@dataclass(frozen=True, slots=True)
class _Asked:
    """A request as the core reads it; `need` is what a size that is sought must meet."""

    request: Request
    kind: Kind
    design: Any
    claim: Claim
    alpha: float
    need: Need | None

    @property
    def sought(self) -> bool:
        return self.request.n is None


def _ask(request: Request) -> _Asked:
    with _blamed_on("kind", request):
        kind = kind_named(request.kind)
    extra, alpha = _extra(kind, request), request.alpha or ALPHA
    with _blamed_on("n", request):  # where the size is sought, the least one stands in for it
        design = design_from(kind, extent_values(kind, request.n or kind.grammar.least, extra))
    with _blamed_on("claim", request):
        claim = claim_from(kind, request.claim, request.side, design)
        kind.check_claim(claim, design)
    return _Asked(request, kind, design, claim, alpha, _need(kind, request, claim, alpha, extra))


def _extra(kind: Kind, request: Request) -> float | None:
    """Return the lot or sigma, and refuse the one that the kind has no use for."""
    wanted = _extra_column(kind)
    for column in ("lot", "sigma"):
        value = getattr(request, column)
        if value is not None and column != wanted:
            raise _Refused(Problem(request.row, column, value, f"empty for a plan of kind {request.kind}"))
    if wanted and getattr(request, wanted) is None:
        raise _Refused(Problem(request.row, wanted, None, f"given for a plan of kind {request.kind}"))
    return getattr(request, wanted) if wanted else None


def _extra_column(kind: Kind) -> str:
    """Return the column that holds the one number that a kind needs beside the size."""
    return kind.grammar.extra if kind.grammar.extra in ("", "lot") else "sigma"


def _need(kind: Kind, request: Request, claim: Claim, alpha: float, extra: float | None) -> Need | None:
    """Return the rates to catch, each where the claim is false, and the power there."""
    for column in ("catch", "power"):
        if request.n is None and getattr(request, column) is None:
            raise _Refused(Problem(request.row, column, None, "given where n is left empty"))
    if request.catch is None:
        return None
    power = request.power or (1 + alpha) / 2  # at a size that is given no power need be asked for
    split = request.split or SPLITS[0]
    with _blamed_on("catch", request):
        return need_from(request.kind, str(claim), alpha, request.catch, power, extra=extra, split=split)


def _amounts(asked: Sequence[_Asked]) -> list[float]:
    """Return the size of each plan; sizes that are sought on one side are sought together."""
    amounts = [one.request.n or math.nan for one in asked]
    groups: dict[tuple[str, str], list[int]] = {}
    for place, one in enumerate(asked):
        if one.sought and one.claim.side != "either" and isinstance(one.kind, CountKind):
            groups.setdefault((one.request.kind, one.claim.side), []).append(place)
    for (kind, side), places in groups.items():
        for place, amount in zip(
            places, _sought(kind, side, [asked[place] for place in places]), strict=True
        ):
            amounts[place] = float(amount)
    return amounts


def _sought(kind: str, side: str, asked: Sequence[_Asked]) -> Floats:
    needs = [one.need for one in asked if one.need is not None]
    columns = np.array([(need.claim.value, need.alpha, need.catches[0], need.power) for need in needs])
    word = needs[0].kind.grammar.extra
    extra = [getattr(need.design, word) for need in needs] if word else None
    return smallest_sizes(kind, *columns.T, side=side, extra=extra).amount


def _plan(asked: _Asked, amount: float, number: int) -> Planned:
    request, need, kind = asked.request, asked.need, asked.kind
    split, verdict = request.split or SPLITS[0], request.verdict or VERDICTS[0]
    with _blamed_on("catch" if asked.sought else "n", request):
        if need is not None and math.isnan(amount):  # two-sided, or none was found: then this says so
            plan = plan_for(need, verdict=verdict)
        else:
            design = need.sized(amount) if need is not None else asked.design
            plan = make_plan(request.kind, design, asked.claim, asked.alpha, split, verdict)
    catches = [_cell(rate, kind) for rate in (request.catch or "").split(" and ") if rate.strip()]
    return Planned(
        number=number,
        request=request,
        plan=plan,
        text=write_plan(plan),
        alpha=asked.alpha,
        claim=_cell(_boundary(request.claim), kind),
        catches=tuple(catches),
        own_catches=need.catches if need is not None else (),
    )


def _boundary(claim: str) -> str:
    """Return the value of a claim that may be written as a relation."""
    return split_claim(claim)[2] if any(sign in claim for sign in "<>=≤≥") else claim


def _cell(typed: str, kind: Kind) -> float | str:
    """Return what a cell holds for a rate: its number, unless a lot's ``100%`` would then become 1 item."""
    number = read_number(typed, "rate")
    return typed if kind.grammar.extra == "lot" and number >= 1 and typed.rstrip().endswith("%") else number


class _Refused(Exception):
    def __init__(self, problem: Problem) -> None:
        self.problem = problem
        super().__init__(problem)


@contextmanager
def _noting(problems: list[Problem]) -> Iterator[None]:
    """Note why a row is left out, and go on."""
    try:
        yield
    except _Refused as refused:
        problems.append(refused.problem)


@contextmanager
def _blamed_on(column: str, request: Request) -> Iterator[None]:
    """Turn an error into a problem of the column that it names, or of the one given."""
    try:
        yield
    except SteelyardError as error:
        raise _Refused(_problem(error, column, request)) from None


def _problem(error: SteelyardError, column: str, request: Request) -> Problem:
    if isinstance(error, InvalidValue):
        named = error.name if error.name in _COLUMNS else column
        value = getattr(request, _COLUMNS[named].field)
        if error.rule.startswith("be "):
            return Problem(request.row, named, value, error.rule[3:], error.hint)
        return Problem(request.row, named, value, _COLUMNS[named].allowed, f"it must {error.rule}")
    return Problem(request.row, column, getattr(request, column), _COLUMNS[column].allowed, str(error))
