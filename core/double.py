"""The double plan that meets two risks with the smallest average sample where the claim is just true.

The second stage is as large as the first, or twice as large. Both rejection numbers are the last acceptance
number plus 1, as in the classical double plans. For each pair of acceptance numbers the power and the size
grow with the first stage; so there is a least stage that reaches the power, and from some stage on alpha is
exceeded. In between the average sample has a bound that grows, too: with n items first, m more, and a last
acceptance number c that the first stage alone passes with a chance of at most alpha, it is at least

    n + m (P(X1 > first acceptance number) - alpha).

So pairs, and stages of a pair, that can't beat the best plan found are left out, and none that can is missed.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from fractions import Fraction
from typing import Any

import numpy as np

from steelyard.core.errors import InvalidValue, NoAnswer
from steelyard.core.kind import kind_of
from steelyard.core.need import Need, need_from
from steelyard.core.numbers import typed
from steelyard.core.parameter import Columns, Floats
from steelyard.core.plan import Plan
from steelyard.core.smallest import count_law, plan_for
from steelyard.core.staging import plan_in_stages

RATIOS = (1, 2)
MOST_ACCEPTED = 28
"""The largest acceptance number of the single plan for the same risks; beyond, the search would take long."""

MOST_LAST = 100
"""The largest acceptance number tried after the second stage: more than three times that."""

_NEAR = 1e-10  # relative; chances closer to a bound are compared exactly
_COARSE = 48  # first stages at which all pairs with one last number are looked at
_WAYS = 32  # first stages of one pair tried at a time
_BLOCK = 512
_REACH = 4  # times the single plan's size: larger first stages are not tried

Found = tuple[float, int, int, int, int]
"""Average sample, ratio, first stage, acceptance numbers: in the order of preference."""


def smallest_double(
    kind_name: str, claim: Any, alpha: Any, catch: Any, power: Any, *, ratio: Any = None, lot: Any = None
) -> Plan:
    """Return the double plan that meets two risks with the smallest average sample at the claim.

    Parameters
    ----------
    kind_name : {"binomial", "poisson", "hypergeometric"}
    claim, alpha, catch, power
        As in `steelyard.core.smallest.smallest_plan`; the rate to catch lies above the claim.
    ratio : {1, 2}, optional
        The second stage as a multiple of the first; left out: the better of the two.
    lot : int, optional
        For ``"hypergeometric"``.

    Raises
    ------
    InvalidValue
        When a value is refused.
    NoAnswer
        When there is no such plan, or the two rates are too close for the search.

    Examples
    --------
    >>> import steelyard.core.kinds
    >>> from steelyard.core.text import write_plan
    >>> write_plan(smallest_double("binomial", "1%", "5%", "5%", "90%"))
    'binomial | stages 69 then 69 | accept 0 then 3 | reject 4 then 4 | claim p<=0.01 | alpha 0.05'
    """
    need = need_from(kind_name, claim, alpha, catch, power, extra=lot)
    if need.claim.side != "above":
        raise InvalidValue("claim", "be of the form p<=0.02 for a double plan", str(need.claim))
    ratios = RATIOS if ratio is None else (_ratio(ratio),)
    single = plan_for(need)
    if single.rule.high - 1 > MOST_ACCEPTED:
        message = (
            f"double plans are sought for rates at which a single plan accepts up to {MOST_ACCEPTED}; "
            f"here it would accept {single.rule.high - 1:.0f}: choose a higher rate to catch"
        )
        raise NoAnswer(message)
    most = _REACH * getattr(single.design, kind_of(single).grammar.extent)
    best = min((found for k in ratios if (found := _Search(need, k, most).best())), default=None)
    if best is None:
        message = f"no double plan has {need}"
        raise NoAnswer(message)
    _, k, first, accept, last = best
    numbers = f"{accept} then {last}", f"{last + 1} then {last + 1}"
    return plan_in_stages(
        kind_name, f"{first} then {k * first}", *numbers, str(need.claim), lot, alpha=need.alpha
    )


def _ratio(value: Any) -> int:
    if value in RATIOS:
        return int(value)
    raise InvalidValue("ratio", "be 1 or 2: the second stage as a multiple of the first", value)


@dataclass(frozen=True, slots=True)
class _Search:
    """The search at one ratio of the stages, with first stages of at most `most`."""

    need: Need
    ratio: int
    most: float

    def best(self) -> Found | None:
        """Return the best plan of all pairs of acceptance numbers; None where there is none."""
        best: Found | None = None
        largest, start = self._largest(), 1.0
        for last in range(1, MOST_LAST + 1):
            stop = min(largest, best[0] if best else math.inf)
            if start > stop:
                return best
            stages = np.unique(np.floor(np.geomspace(start, stop, _COARSE)))
            reached = self._power(stages, last, self.need.catches[0]) >= self.need.power * (1 - _NEAR)
            if not reached[0].any():
                return best
            for bound, accept, least, gap in self._promising(stages, last, reached):
                if best is None or bound < best[0]:
                    found = self._cheapest(accept, last, least, gap, best[0] if best else math.inf)
                    best = min(filter(None, (best, found)), default=None)
            start = float(stages[max(int(reached[0].argmax()) - 1, 0)])
        return best

    def _promising(self, stages: Floats, last: int, reached: Any) -> list[tuple[float, int, float, float]]:
        """Return pairs that may be best: bound of the average, first number, least stage and its width."""
        at = reached.argmax(axis=1)
        before = np.maximum(at - 1, 0)
        pairs = np.arange(last)
        size = self._power(stages, last, self.need.claim.value)[pairs, before]
        more = self._beyond(stages, last)[pairs, before] - self.need.alpha
        least = np.where(at > 0, stages[before] + 1, stages[0])
        bound = least * (1 + self.ratio * np.maximum(more, 0))
        fits = reached.any(axis=1) & (size <= self.need.alpha * (1 + _NEAR))
        return sorted(
            (float(bound[a]), int(a), float(least[a]), float(stages[at[a]] - least[a] + 1))
            for a in pairs[fits]
        )

    def _cheapest(self, accept: int, last: int, least: float, gap: float, bound: float) -> Found | None:
        """Return the cheapest first stage of a pair that keeps alpha and costs less than a bound."""
        best: Found | None = None
        least = self._least(accept, last, least, gap)
        while least <= self._largest():
            stages = np.arange(least, min(least + _BLOCK, self._largest() + 1))
            kept = self._compare(stages, accept, last, self.need.claim.value, self.need.alpha) <= 0
            stages = stages[: len(stages) if kept.all() else int(kept.argmin())]
            if not stages.size:
                return best
            open_ = self._open(stages, last, self.need.claim.value)[accept:].sum(axis=0)
            costs = stages * (1 + self.ratio * open_)
            if costs.min() < bound:
                bound = float(costs.min())
                best = bound, self.ratio, int(stages[costs.argmin()]), accept, last
            more = self._beyond(stages[-1:], last)[accept, 0] - self.need.alpha
            if not kept.all() or stages[-1] * (1 + self.ratio * more) >= bound:
                return best
            least += _BLOCK
        return best

    def _least(self, accept: int, last: int, below: float, gap: float) -> float:
        """Return the least first stage that reaches the power: from `below` on, and likely within a gap."""
        step = max(1.0, float(np.ceil(gap / _WAYS)))
        while below <= self._largest():
            stages = np.minimum(below + step * np.arange(_WAYS), self._largest())
            reached = self._compare(stages, accept, last, self.need.catches[0], self.need.power) >= 0
            if not reached.any():
                below, step = float(stages[-1]) + 1, step * _WAYS
                continue
            first = int(reached.argmax())
            if first == 0 or step == 1:
                return float(stages[first])
            below, step = float(stages[first - 1]) + 1, max(1.0, float(np.ceil(step / _WAYS)))
        return math.inf

    def _compare(self, stages: Floats, accept: int, last: int, rate: float, bound: float) -> Floats:
        """Return the signs of the power minus a bound; what floats can't tell is decided exactly."""
        power = self._power(stages, last, rate)[accept]
        sign: Floats = np.sign(power - bound)
        for place in np.flatnonzero(np.abs(power - bound) <= _NEAR * bound):
            sign[place] = self._exact_sign(int(stages[place]), accept, last, rate, bound, sign[place])
        return sign

    def _power(self, stages: Floats, last: int, rate: float) -> Floats:
        """Return the power for all first acceptance numbers from 0, one in each row."""
        law, counts = count_law(self.need.kind), np.arange(1, last + 1)[:, None]
        second = {name: lot - stages for name, lot in self._lot().items()}
        left = np.asarray(rate) if not second else np.clip(rate - counts, 0, *second.values())
        more = law.at_least(last + 1 - counts, {**second, law.amount: self.ratio * stages}, left)
        ways = np.cumsum((self._open(stages, last, rate) * more)[::-1], axis=0)[::-1]
        power: Floats = ways + law.at_least(last + 1, self._first(stages), np.asarray(rate))
        return power

    def _open(self, stages: Floats, last: int, rate: float) -> Floats:
        """Return the chances of the counts 1 … `last` at the first stage, one in each row."""
        law, counts = count_law(self.need.kind), np.arange(1, last + 1)[:, None]
        return law.exactly(counts, self._first(stages), np.asarray(rate))

    def _beyond(self, stages: Floats, last: int) -> Floats:
        """Return the chances of more than 0 … ``last - 1`` at the first stage, at the claim."""
        law, counts = count_law(self.need.kind), np.arange(1, last + 1)[:, None]
        return law.at_least(counts, self._first(stages), np.asarray(self.need.claim.value))

    def _first(self, stages: Floats) -> Columns:
        return {**self._lot(), count_law(self.need.kind).amount: stages}

    def _lot(self) -> Columns:
        extra = self.need.kind.grammar.extra
        return {extra: np.asarray(getattr(self.need.design, extra))} if extra else {}

    def _largest(self) -> float:
        """Return the largest first stage, which leaves room for the second."""
        return min(self.most, float(count_law(self.need.kind).largest(self._lot()) // (1 + self.ratio)))

    def _exact_sign(
        self, stage: int, accept: int, last: int, rate: float, bound: float, close: float
    ) -> float:
        """Return the sign in fractions; a Poisson count, whose chances are irrational, has no ties."""
        law: Any = count_law(self.need.kind)
        lot = {name: int(number) for name, number in self._lot().items()}

        def chances(amount: int, taken: int, found: int) -> Any:
            """Return from a count to its chance among the next items, or None."""
            row = {**{name: number - taken for name, number in lot.items()}, law.amount: amount}
            return law.exact(row, typed(rate) - (found if lot else 0)).point

        first = chances(stage, 0, 0)
        if first(0) is None:
            return close
        passed = sum(Fraction(*first(count)) for count in range(accept + 1))
        for count in range(accept + 1, last + 1):
            second = chances(self.ratio * stage, stage, count)
            allowed = sum(Fraction(*second(more)) for more in range(last - count + 1))
            passed += Fraction(*first(count)) * allowed
        power = 1 - passed
        return float((power > typed(bound)) - (power < typed(bound)))
