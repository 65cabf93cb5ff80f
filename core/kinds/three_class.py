"""Three-class plans: items are good, marginal or bad, as in the microbiology of food.

A measurement above the limit M makes an item bad, one above m and up to M marginal. The numbers of bad and of
marginal items among n are trinomial with two parameters. The lot is rejected on too many of either.

The power rises with either rate. Give every item a uniform number; the numbers from 0 up to the rate that is
kept belong to its class, those from there on to the other one. Then a higher other rate turns good items into
worse ones and changes no other item. So the size of a claim that limits both rates lies at its corner.

References
----------
D. F. Bray, D. A. Lyon and I. W. Burr, "Three class attributes plans in acceptance sampling", Technometrics 15
(1973), 575-585 (from memory).
"""

from __future__ import annotations

import re
from collections.abc import Callable, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np

from steelyard.core import tails
from steelyard.core.errors import InvalidValue
from steelyard.core.kind import REQUIRED, Field, Grammar, Kind, Wording, claim_of, register
from steelyard.core.numbers import read_whole, write_number
from steelyard.core.parameter import Columns, Floats, Parameter
from steelyard.core.plan import Claim, JointClaim, Plan, split_claim

MOST_ITEMS = 100_000
MOST_BAD = 1_000  # the power is a sum over the bad items that do not reject
_END = re.compile(r"(bad|marginal)\s*>=\s*(\d+)")
_OBSERVED = re.compile(r"bad\s*=?\s*(\d+)[\s,]+marginal\s*=?\s*(\d+)")
_ROUNDING = 1e-15

Tail = Callable[[Any, Any, Any], Floats]


@dataclass(frozen=True, slots=True)
class Graded:
    """`n` items inspected, each good, marginal or bad."""

    n: int


@dataclass(frozen=True, slots=True)
class TooMany:
    """The numbers of bad and of marginal items from which on the claim is rejected; None for any number."""

    bad: int | None
    marginal: int | None

    def __str__(self) -> str:
        ends = (("bad", self.bad), ("marginal", self.marginal))
        return " or ".join(f"{name}>={count}" for name, count in ends if count is not None)


@dataclass(frozen=True, slots=True)
class Grades:
    """What was observed."""

    bad: int
    marginal: int


def _read_rule(texts: dict[str, str], design: Graded) -> TooMany:
    """Return the rule that ``bad>=1 or marginal>=2`` describes."""
    del design
    text = texts.get("reject")
    if text is None:
        raise InvalidValue("reject", "be written in the plan, e.g. reject bad>=1 or marginal>=2", None)
    ends: dict[str, int] = {}
    for part in text.lower().replace("≥", ">=").split(" or "):
        match = _END.fullmatch(part.strip())
        if match is None or match[1] in ends:
            raise InvalidValue("reject", "have the form bad>=1 or marginal>=2", text)
        ends[match[1]] = int(match[2])
    return TooMany(ends.get("bad"), ends.get("marginal"))


class ThreeClassKind(Kind):
    """Plans that count bad and marginal items."""

    grammar = Grammar(
        kind="three-class",
        head="three-class",
        marker="n",
        design=Graded,
        fields=(Field("n", lambda text, name: read_whole(text, name, 1, MOST_ITEMS), default=REQUIRED),),
        order=("n", "claim", "alpha", "reject", "verdict"),
        rules=("reject",),
        read_rule=_read_rule,
        write_rule=lambda rule: {"reject": str(rule)},
        wording=Wording(
            title="good, marginal and bad items",
            sample="Inspect {n} items drawn at random. Count those above the limit M as bad, and those above "
            "m and up to M as marginal.",
            found="bad or marginal items",
            assumptions=(
                "Every item is drawn at random and has the same chance of being chosen.",
                "Items are bad or marginal independently of each other, at one rate each.",
                "The lot is at least ten times the sample, or the claim is about the process.",
                "The method of measurement puts every item into its right class.",
            ),
        ),
    )
    parameters = (
        Parameter("bad", "rate of bad items", "proportion between 0 and 1", 0.0, 1.0),
        Parameter("marginal", "rate of marginal items", "proportion between 0 and 1", 0.0, 1.0),
    )

    def columns(self, plans: Sequence[Plan]) -> Columns:
        """Return the sizes and the numbers that reject; a missing one is NaN."""
        return {
            "n": np.array([plan.design.n for plan in plans], dtype=float),
            "bad": np.array([plan.rule.bad for plan in plans], dtype=float),
            "marginal": np.array([plan.rule.marginal for plan in plans], dtype=float),
            "pass": np.array([plan.verdict == "pass" for plan in plans]),
        }

    def reject(self, columns: Columns, *rates: Floats) -> Floats:
        """Return the chance of too many bad items, or of too many marginal ones beside fewer bad ones."""
        n, bad, marginal = columns["n"], columns["bad"], columns["marginal"]
        alone = tails.binomial_at_least(np.nan_to_num(marginal, nan=np.inf), n, rates[1])
        worst = tails.binomial_at_least(np.nan_to_num(bad), n, rates[0])
        beside = self._beside(columns, rates, tails.binomial_at_least, np.nan_to_num(marginal, nan=np.inf))
        return self._possible(np.where(np.isnan(bad), alone, np.minimum(worst + beside, 1.0)), rates)

    def accept(self, columns: Columns, *rates: Floats) -> Floats:
        """Return the chance of few bad items and few marginal ones."""
        most = np.nan_to_num(columns["marginal"], nan=np.inf) - 1
        alone = tails.binomial_at_most(most, columns["n"], rates[1])
        beside = self._beside(columns, rates, tails.binomial_at_most, most)
        return self._possible(np.where(np.isnan(columns["bad"]), alone, np.minimum(beside, 1.0)), rates)

    @staticmethod
    def _beside(columns: Columns, rates: Sequence[Floats], tail: Tail, count: Floats) -> Floats:
        """Return the chance of a tail of the marginal items beside any number of bad ones that is allowed."""
        n, (bad, marginal) = columns["n"], rates
        worst = np.nan_to_num(columns["bad"])
        left = np.where(bad < 1, 1.0 - bad, 1.0)
        share = np.minimum(marginal / left, 1.0)
        total = np.zeros(np.broadcast_shapes(n.shape, bad.shape, marginal.shape))
        for found in range(int(worst.max())):
            chance = tails.binomial_pmf(found, n, bad) * tail(count, np.maximum(n - found, 0.0), share)
            total = total + np.where(found < worst, chance, 0.0)
        return total

    @staticmethod
    def _possible(chance: Floats, rates: Sequence[Floats]) -> Floats:
        """Return NaN where more than all items would be bad or marginal."""
        return np.asarray(np.where(rates[0] + rates[1] <= 1 + _ROUNDING, chance, np.nan))

    def check_rates(self, *rates: float) -> None:
        """Raise when more than all items would be bad or marginal."""
        if sum(rates) > 1 + _ROUNDING:
            both = " and ".join(map(write_number, rates))
            raise InvalidValue("bad and marginal", "add up to at most 1", both)

    def average_amount(self, columns: Columns, *rates: Floats) -> Floats:
        """Return the size of the sample, whatever the rates."""
        shape = np.broadcast_shapes(columns["n"].shape, *(rate.shape for rate in rates))
        return np.broadcast_to(columns["n"], shape).astype(float)

    def read_claim(self, text: str, design: Any) -> Claim:
        """Return a claim that limits both rates, such as ``bad<=0.001 and marginal<=0.05``."""
        parts = [self._part(part) for part in text.lower().split(" and ")]
        if [part.symbol for part in parts] != ["bad", "marginal"]:
            raise InvalidValue("claim", "have the form bad<=0.1% and marginal<=5%", text)
        first, second = parts
        self.check_rates(first.value, second.value)
        return JointClaim(first.symbol, first.relation, first.value, also=second)

    def _part(self, text: str) -> Claim:
        symbol, relation, value = split_claim(text)
        if relation != "<=":
            raise InvalidValue("claim", "limit both rates with <=", text)
        found = [parameter for parameter in self.parameters if parameter.symbol == symbol]
        return Claim(symbol, relation, found[0].read(value) if found else 0.0)

    def check_claim(self, claim: Claim, design: Any) -> None:
        """Raise when the claim is true whatever the rates."""
        if isinstance(claim, JointClaim) and claim.value >= 1 and claim.also.value >= 1:
            raise InvalidValue("claim", "be false for some rates", str(claim))

    def size(self, plan: Plan) -> float:
        """Return the power at the claim's corner, where both rates are as high as it allows."""
        corner = (np.array([part.value]) for part in claim_of(plan).parts)
        return float(self.reject(self.columns([plan]), *corner)[0])

    def rises(self, plan: Plan) -> bool:
        """Tell that the power rises with either rate."""
        del plan
        return True

    def verify(self, plan: Plan) -> None:
        """Refuse rules that can never or always reject."""
        n, rule = plan.design.n, plan.rule
        for name, count in (("bad", rule.bad), ("marginal", rule.marginal)):
            if count is not None and not 1 <= count <= n:
                raise InvalidValue("reject", f"name from 1 to {n} {name} items", str(rule))
        if rule.bad is not None and rule.bad > MOST_BAD:
            raise InvalidValue("reject", f"name at most {MOST_BAD} bad items", str(rule))

    def told(self, plan: Plan) -> str:
        """Return in words what rejects the claim."""
        ends = (("bad", plan.rule.bad), ("marginal", plan.rule.marginal))
        return ", or ".join(f"{count} or more {name} items" for name, count in ends if count is not None)

    def read_observed(self, value: Any, plan: Plan) -> Grades:
        """Return what was observed, from ``bad 0 marginal 1``."""
        match = _OBSERVED.fullmatch(" ".join(str(value).lower().split()))
        if match is None:
            raise InvalidValue("observed", "have the form bad 0 marginal 1", value)
        found = Grades(int(match[1]), int(match[2]))
        if found.bad + found.marginal > plan.design.n:
            raise InvalidValue("observed", f"be at most {plan.design.n} items together", value)
        return found

    def outcome(self, plan: Plan, observed: Grades) -> bool:
        """Tell whether there are too many bad or marginal items."""
        pairs = ((observed.bad, plan.rule.bad), (observed.marginal, plan.rule.marginal))
        return any(most is not None and count >= most for count, most in pairs)

    def algebra(self, plan: Plan) -> str | None:
        """Return 1 minus the sum over all ways to be accepted."""
        n, rule = plan.design.n, plan.rule
        if rule.bad is None or rule.marginal is None:
            return None
        rest = "1-bad-marginal"
        if rule.bad == 1:
            return f"1 - sum(C({n},k) marginal^k ({rest})^({n}-k), k=0..{rule.marginal - 1})"
        term = f"C({n},j) bad^j C({n}-j,k) marginal^k ({rest})^({n}-j-k)"
        return f"1 - sum(sum({term}, k=0..{rule.marginal - 1}), j=0..{rule.bad - 1})"


THREE_CLASS = register(ThreeClassKind())
