"""From the rows of a request list to plans, with every row that can't be planned told by column and value."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from contextlib import contextmanager
from dataclasses import dataclass
from typing import Any

from steelyard.core.claims import claim_from
from steelyard.core.errors import InvalidValue, SteelyardError
from steelyard.core.kind import Kind, kind_of
from steelyard.core.making import design_from, extent_values, kind_named, plan_from_claim
from steelyard.core.need import need_from
from steelyard.core.numbers import read_number
from steelyard.core.plan import Claim, Plan, split_claim
from steelyard.core.smallest import smallest_plan
from steelyard.core.text import write_plan
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
        word = self.kind.grammar.extra
        return getattr(self.request, word) if word else None


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
    planned: list[Planned] = []
    problems: list[Problem] = []
    for request in requests:
        try:
            planned.append(_plan(request, len(planned) + 1))
        except _Refused as refused:
            problems.append(refused.problem)
    return planned, problems


class _Refused(Exception):  # noqa: N818 (it carries a problem, it is none)
    def __init__(self, problem: Problem) -> None:
        self.problem = problem
        super().__init__(problem)


def _plan(request: Request, number: int) -> Planned:
    with _blamed_on("kind", request):
        kind = kind_named(request.kind)
    extra, alpha = _extra(kind, request), request.alpha or ALPHA
    design = _design(kind, request, extra)
    with _blamed_on("claim", request):
        claim = claim_from(kind, request.claim, request.side, design)
        kind.check_claim(claim, design)
    catches = _catches(kind, request, claim, alpha, extra)
    with _blamed_on("catch" if request.n is None else "n", request):
        plan = (
            _smallest(request, alpha, extra) if request.n is None else _of_size(kind, request, alpha, extra)
        )
    typed = [_cell(rate, kind) for rate in (request.catch or "").split(" and ") if rate.strip()]
    boundary = _cell(_boundary(request.claim), kind)
    return Planned(number, request, plan, write_plan(plan), alpha, boundary, tuple(typed), catches)


def _extra(kind: Kind, request: Request) -> float | None:
    """Return the lot or sigma, and refuse the one that the kind has no use for."""
    wanted = kind.grammar.extra
    for column in ("lot", "sigma"):
        value = getattr(request, column)
        if value is not None and column != wanted:
            raise _Refused(Problem(request.row, column, value, f"empty for a plan of kind {request.kind}"))
    if wanted and getattr(request, wanted) is None:
        raise _Refused(Problem(request.row, wanted, None, f"given for a plan of kind {request.kind}"))
    return getattr(request, wanted) if wanted else None


def _design(kind: Kind, request: Request, extra: float | None) -> Any:
    """Return the design; where the size is sought, one of size 1 stands in."""
    with _blamed_on("n", request):
        return design_from(kind, extent_values(kind, request.n or 1, extra))


def _catches(
    kind: Kind, request: Request, claim: Claim, alpha: float, extra: float | None
) -> tuple[float, ...]:
    """Return the rates to catch in the parameter's own unit, each where the claim is false."""
    for column in ("catch", "power"):
        if request.n is None and getattr(request, column) is None:
            raise _Refused(Problem(request.row, column, None, "given where n is left empty"))
    if request.catch is None:
        return ()
    power = request.power or (1 + alpha) / 2  # of a size that is given the power need not be asked for
    with _blamed_on("catch", request):
        return need_from(kind.grammar.kind, str(claim), alpha, request.catch, power, extra=extra).catches


def _of_size(kind: Kind, request: Request, alpha: float, extra: float | None) -> Plan:
    values = extent_values(kind, request.n, extra)
    return plan_from_claim(request.kind, values, request.claim, alpha, request.side, *_options(request))


def _smallest(request: Request, alpha: float, extra: float | None) -> Plan:
    split, verdict = _options(request)
    return smallest_plan(
        request.kind,
        request.claim,
        alpha,
        request.catch,
        request.power,
        side=request.side,
        extra=extra,
        split=split,
        verdict=verdict,
    )


def _options(request: Request) -> tuple[str, str]:
    return request.split or "half", request.verdict or "fail"


def _boundary(claim: str) -> str:
    """Return the value of a claim that may be written as a relation."""
    return split_claim(claim)[2] if any(sign in claim for sign in "<>=≤≥") else claim


def _cell(typed: str, kind: Kind) -> float | str:
    """Return what a cell holds for a rate: its number, unless a lot's ``100%`` would then become 1 item."""
    number = read_number(typed, "rate")
    return typed if kind.grammar.extra == "lot" and number >= 1 and typed.rstrip().endswith("%") else number


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
