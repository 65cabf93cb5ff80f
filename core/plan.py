"""What a plan is: a kind of test, its design, its rule, and the claim that it judges."""

from __future__ import annotations

import math
import re
from dataclasses import dataclass, field, fields
from typing import Any

from steelyard.core.errors import InvalidValue
from steelyard.core.numbers import write_number

SIDES = {"<=": "above", ">=": "below", "=": "either"}
RELATIONS = {side: relation for relation, side in SIDES.items()}
SPLITS = ("half", "nearest", "rarest")
VERDICTS = ("fail", "pass")
_CLAIM = re.compile(r"(?P<symbol>[a-z]\w*)\s*(?P<relation><=|>=|=|≤|≥)\s*(?P<value>\S.*)", re.IGNORECASE)
_SIGNS = {"≤": "<=", "≥": ">="}


@dataclass(frozen=True, slots=True)
class Claim:
    """The null hypothesis on a parameter, e.g. ``p<=0.02``.

    Parameters
    ----------
    symbol : str
        The parameter, e.g. ``"p"``, ``"rate"``, ``"D"``, ``"mean"``.
    relation : {"<=", ">=", "="}
        How the parameter compares with `value` when the claim is true.
    value : float
        The claim's boundary, in the parameter's unit.
    reference : str, optional
        In comparisons the other sample's parameter that `value` is added to.

    Examples
    --------
    >>> claim = Claim("p", "<=", 0.02)
    >>> str(claim), claim.side, claim.holds(0.01), claim.holds(0.05)
    ('p<=0.02', 'above', True, False)
    """

    symbol: str
    relation: str
    value: float
    reference: str = ""

    @property
    def side(self) -> str:
        """Where the true parameter lies when the claim is false: above, below or either."""
        return SIDES[self.relation]

    def holds(self, rate: float, second: float | None = None) -> bool:
        """Tell whether the claim is true at this value of the parameter; a comparison needs both."""
        bound = self.value
        if self.reference and second is not None:
            rate, bound = second, rate + self.value
        if self.relation == "=":
            return rate == bound
        return rate <= bound if self.relation == "<=" else rate >= bound

    @property
    def parts(self) -> tuple[Claim, ...]:
        """The single claims that this one is made of."""
        return (self,)

    def __str__(self) -> str:
        if not self.reference:
            return f"{self.symbol}{self.relation}{write_number(self.value)}"
        shift = "" if self.value == 0 else f"{'+' if self.value > 0 else '-'}{write_number(abs(self.value))}"
        return f"{self.symbol}{self.relation}{self.reference}{shift}"


@dataclass(frozen=True, slots=True)
class JointClaim(Claim):
    """A null hypothesis on two parameters: it is true where both parts are.

    Examples
    --------
    >>> claim = JointClaim("bad", "<=", 0.001, also=Claim("marginal", "<=", 0.05))
    >>> str(claim), claim.holds(0.001, 0.05), claim.holds(0.001, 0.06)
    ('bad<=0.001 and marginal<=0.05', True, False)
    """

    also: Claim = field(kw_only=True)

    @property
    def parts(self) -> tuple[Claim, ...]:
        """The single claims."""
        return Claim(self.symbol, self.relation, self.value), self.also

    def holds(self, rate: float, second: float | None = None) -> bool:
        """Tell whether the claim is true at these values of the two parameters."""
        return second is not None and all(map(Claim.holds, self.parts, (rate, second)))

    def __str__(self) -> str:
        return " and ".join(map(str, self.parts))


@dataclass(frozen=True, slots=True)
class Reject:
    """Reject the claim when the statistic is at most `low` or at least `high`.

    Either end may be None: that tail is empty.

    Examples
    --------
    >>> Reject(None, 4).text("x"), Reject(30, 50).text("x"), Reject(0, None).signs("x")
    ('x>=4', 'x<=30 or x>=50', 'x ≤ 0')
    """

    low: float | None
    high: float | None

    def __post_init__(self) -> None:
        if self.low is None and self.high is None:
            raise InvalidValue("reject", "name at least one end, such as x>=4", None)
        if self.low is not None and self.high is not None and self.low >= self.high:
            raise InvalidValue("reject", "leave room between its two ends", self.text("x"))

    def text(self, statistic: str) -> str:
        """Return the rule as a plan's text writes it."""
        ends = []
        if self.low is not None:
            ends.append(f"{statistic}<={write_number(self.low)}")
        if self.high is not None:
            ends.append(f"{statistic}>={write_number(self.high)}")
        return " or ".join(ends)

    def signs(self, statistic: str) -> str:
        """Return the rule with mathematical signs, as cells show it."""
        return self.text(statistic).replace("<=", " ≤ ").replace(">=", " ≥ ")


@dataclass(frozen=True, slots=True)
class Plan:
    """A decision rule for a sample; its text form is one readable line.

    Parameters
    ----------
    kind : str
        Name of a registered kind, e.g. ``"binomial"``.
    design : object
        The kind's own frozen record of what is inspected, e.g. ``Items(n=50)``.
    rule : object
        What rejects the claim; for plans that compare one statistic with limits a `Reject`.
    claim : Claim, optional
        The null hypothesis; missing where a rule comes from outside.
    alpha : float, optional
        Nominal significance level, strictly between 0 and 1.
    split : {"half", "nearest", "rarest"}
        How a two-sided test shares alpha between its tails.
    verdict : {"fail", "pass"}
        What rejecting the claim means for the lot.
    """

    kind: str
    design: Any
    rule: Any
    claim: Claim | None = None
    alpha: float | None = None
    split: str = "half"
    verdict: str = "fail"


def same_rule(one: Any, other: Any) -> bool:
    """Tell whether two rules are the same; the last digits of a measured end differ between machines."""
    if type(one) is not type(other):
        return False
    pairs = ((getattr(one, field.name), getattr(other, field.name)) for field in fields(one))
    return all(math.isclose(a, b, rel_tol=1e-12) if _measured(a, b) else a == b for a, b in pairs)


def _measured(*values: Any) -> bool:
    return all(isinstance(value, float) for value in values)


def split_claim(text: str) -> tuple[str, str, str]:
    """Return symbol, relation and value text of a claim such as ``p<=0.02``.

    Raises
    ------
    InvalidValue
        When the text has no such form.
    """
    match = _CLAIM.fullmatch(text.strip())
    if match is None:
        raise InvalidValue("claim", "have the form p<=0.02, p>=0.02 or p=0.02", text)
    relation = match["relation"]
    return match["symbol"], _SIGNS.get(relation, relation), match["value"]
