"""Switching between normal, tightened and reduced inspection: the composite scheme in the long run.

Lots come one after the other at one rate, each inspected by the plan in force. The rules, given as numbers:

- from normal to tightened once so many of so many successive lots (or fewer) were not accepted;
- from tightened back to normal once so many lots in a row were accepted;
- discontinued once so many lots in all were not accepted while tightened inspection was in force;
- from normal to reduced once a score reaches its target: every accepted lot adds to it, any other lot sets it
  back to 0, and where a score plan is given, a lot that this plan would not accept does, too;
- from reduced back to normal at the first lot that is not accepted.

Whenever normal or tightened inspection begins, its counts begin anew. All that the next lot depends on is a
state, so the scheme is a Markov chain. After a discontinuation inspection is taken to begin again with
tightened inspection; what is said of the long run holds under this restart, and per lot.

References
----------
ISO 2859-1, 9, for the rules; K. S. Stephens and K. E. Larson, Industrial Quality Control 24 (1967), for the
chain (both from memory).
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from typing import Any

import numpy as np

from steelyard.core.chains import stationary
from steelyard.core.errors import InvalidValue, NoAnswer
from steelyard.core.kind import kind_of
from steelyard.core.numbers import read_choice
from steelyard.core.outgoing import average_sample
from steelyard.core.parameter import Floats
from steelyard.core.plan import Plan
from steelyard.core.questions import acceptance, not_rejected, power
from steelyard.core.switching_rules import STANDARD, Rules

ANSWERS = ("acceptance", "sample", "normal", "tightened", "reduced", "lots")
NORMAL, TIGHTENED, REDUCED = "normal", "tightened", "reduced"

_MOST_STATES = 400

State = tuple[str, Any, int]
"""The inspection in force, and what its rules remember."""


@dataclass(frozen=True, slots=True)
class Scheme:
    """The plans of a scheme and its rules.

    Parameters
    ----------
    normal, tightened : Plan
    reduced : Plan, optional
        Without it inspection is never reduced.
    rules : Rules
    score_plan : Plan, optional
        For the same sample as the normal plan, but accepting less often: what it accepts adds to the score.

    Raises
    ------
    InvalidValue
        When the plans are about different parameters.
    """

    normal: Plan
    tightened: Plan
    reduced: Plan | None = None
    rules: Rules = STANDARD
    score_plan: Plan | None = None

    def __post_init__(self) -> None:
        plans = filter(None, (self.normal, self.tightened, self.reduced, self.score_plan))
        symbols = list(dict.fromkeys(kind_of(plan).parameters[0].symbol for plan in plans))
        if len(symbols) > 1:
            raise InvalidValue("plans", "be about the same parameter", " and ".join(symbols))


@dataclass(frozen=True, slots=True)
class LongRun:
    """A scheme in the long run at one rate, per lot.

    Parameters
    ----------
    acceptance : float
        The share of lots that are accepted.
    sample : float
        The average sample.
    shares : dict
        The shares of lots under normal, tightened and reduced inspection.
    """

    acceptance: float
    sample: float
    shares: dict[str, float]


def long_run(scheme: Scheme, rate: Any) -> LongRun:
    """Return how a scheme behaves in the long run if all lots come at one rate.

    Examples
    --------
    >>> import steelyard.core.kinds
    >>> from steelyard.core.text import read_plan
    >>> plans = [read_plan(f"binomial | n {n} | reject x>={r}") for n, r in ((125, 4), (125, 3), (50, 2))]
    >>> found = long_run(Scheme(*plans), "1%")
    >>> round(found.acceptance, 4), {mode: round(share, 4) for mode, share in found.shares.items()}
    (0.9426, {'normal': 0.6337, 'tightened': 0.0228, 'reduced': 0.3434})
    """
    chances = _Chances.of(scheme, rate)
    states, matrix = _chain(scheme, chances, restart=True)
    weights = stationary(matrix)
    shares = {
        mode: float(sum(w for w, state in zip(weights, states, strict=True) if state[0] == mode))
        for mode in (NORMAL, TIGHTENED, REDUCED)
    }
    plans = {NORMAL: scheme.normal, TIGHTENED: scheme.tightened, REDUCED: scheme.reduced}
    used = [(mode, plan) for mode, plan in plans.items() if plan is not None]
    return LongRun(
        acceptance=sum(shares[mode] * chances.accept[mode] for mode, _ in used),
        sample=sum(shares[mode] * average_sample(plan, rate) for mode, plan in used),
        shares=shares,
    )


def lots_to_stop(scheme: Scheme, rate: Any) -> float:
    """Return the mean number of lots from the start, with normal inspection, to the discontinuation.

    Raises
    ------
    NoAnswer
        When it never is.

    Examples
    --------
    >>> import steelyard.core.kinds
    >>> from steelyard.core.text import read_plan
    >>> plans = [read_plan(f"binomial | n 125 | reject x>={r}") for r in (4, 3)]
    >>> round(lots_to_stop(Scheme(*plans), "3%"), 3)
    10.891
    """
    states, matrix = _chain(scheme, _Chances.of(scheme, rate), restart=False)
    weights = dict(zip(states, stationary(matrix), strict=True))
    stopped = weights.pop(_STOPPED, 0.0)
    if scheme.rules.stop is None or stopped == 0:
        message = "inspection is never discontinued at this rate"
        raise NoAnswer(message)
    return float(sum(weights.values()) / stopped)


def answer(scheme: Scheme, rate: Any, question: str) -> float:
    """Return one figure of a scheme.

    Parameters
    ----------
    scheme : Scheme
    rate : float, int or str
    question : {"acceptance", "sample", "normal", "tightened", "reduced", "lots"}
        The long-run share of lots accepted; the average sample per lot; the share of lots under an
        inspection; the mean number of lots until inspection is discontinued.
    """
    question = read_choice(question, "answer", ANSWERS)
    if question == "lots":
        return lots_to_stop(scheme, rate)
    found = long_run(scheme, rate)
    return found.shares[question] if question in found.shares else float(getattr(found, question))


@dataclass(frozen=True, slots=True)
class _Chances:
    """What may happen to a lot under each inspection; `score` is the chance to add to the score."""

    accept: dict[str, float]
    fail: dict[str, float]
    score: float

    @classmethod
    def of(cls, scheme: Scheme, rate: Any) -> _Chances:
        plans = {NORMAL: scheme.normal, TIGHTENED: scheme.tightened, REDUCED: scheme.reduced or scheme.normal}
        accept = {mode: acceptance(plan, rate) for mode, plan in plans.items()}
        fail = {
            mode: power(plan, rate) if plan.verdict == "fail" else not_rejected(plan, rate)
            for mode, plan in plans.items()
        }
        score = accept[NORMAL] if scheme.score_plan is None else acceptance(scheme.score_plan, rate)
        if score > accept[NORMAL] * (1 + 1e-9):
            raise InvalidValue("score_plan", "accept less often than the normal plan", f"{score:.6g}")
        return cls(accept, fail, min(score, accept[NORMAL]))


_FRESH: State = (NORMAL, (), 0)
_TIGHT: State = (TIGHTENED, 0, 0)
_REDUCED: State = (REDUCED, 0, 0)
_STOPPED: State = ("stopped", 0, 0)


def _chain(scheme: Scheme, chances: _Chances, restart: bool) -> tuple[list[State], Floats]:
    """Return the states that can be reached, the first one first, and their transition matrix."""
    ways: dict[State, list[tuple[State, float]]] = {}
    waiting = [_FRESH]
    while waiting:
        state = waiting.pop()
        if state in ways:
            continue
        ways[state] = list(_next(state, scheme, chances, restart))
        waiting += [after for after, _ in ways[state]]
        if len(ways) > _MOST_STATES:
            raise InvalidValue("rules", f"need no more than {_MOST_STATES} states", str(scheme.rules))
    places = {state: place for place, state in enumerate(ways)}
    matrix = np.zeros((len(ways), len(ways)))
    for state, afters in ways.items():
        for after, chance in afters:
            matrix[places[state], places[after]] += chance
    return list(ways), matrix


def _next(state: State, scheme: Scheme, chances: _Chances, restart: bool) -> Iterator[tuple[State, float]]:
    mode = state[0]
    if mode == NORMAL:
        yield from _after_normal(state, scheme, chances)
    elif mode == TIGHTENED:
        yield from _after_tightened(state, scheme.rules, chances, restart)
    elif mode == REDUCED:
        yield _REDUCED, chances.accept[REDUCED]
        yield _FRESH, chances.fail[REDUCED]
    else:
        yield _FRESH, 1.0


def _after_normal(state: State, scheme: Scheme, chances: _Chances) -> Iterator[tuple[State, float]]:
    """Yield what follows; the state knows how many lots ago others were not accepted, and the score."""
    rules, (_, ages, steps) = scheme.rules, state
    older = tuple(age + 1 for age in ages if age + 1 < rules.within)
    tightens = len(ages) + 1 >= rules.tighten
    yield _TIGHT if tightens else (NORMAL, (1, *older), 0), chances.fail[NORMAL]
    if scheme.reduced is None or rules.reduce is None:
        yield (NORMAL, older, 0), chances.accept[NORMAL]
        return
    reduces = steps + 1 >= rules.steps
    yield _REDUCED if reduces else (NORMAL, older, steps + 1), chances.score
    yield (NORMAL, older, 0), chances.accept[NORMAL] - chances.score


def _after_tightened(
    state: State, rules: Rules, chances: _Chances, restart: bool
) -> Iterator[tuple[State, float]]:
    """Yield what follows; the state knows the lots not accepted so far, and the run of accepted ones."""
    _, failed, run = state
    yield _FRESH if run + 1 >= rules.resume else (TIGHTENED, failed, run + 1), chances.accept[TIGHTENED]
    if rules.stop is None:
        yield _TIGHT, chances.fail[TIGHTENED]
    elif failed + 1 < rules.stop:
        yield (TIGHTENED, failed + 1, 0), chances.fail[TIGHTENED]
    else:
        yield _TIGHT if restart else _STOPPED, chances.fail[TIGHTENED]
