"""What an observed result says of a plan's claim: p-value, decision, confidence limits.

All three follow from one p-value (`steelyard.core.splits`), so the p-value is at most alpha exactly when
the plan rejects. A rule from outside is judged, never recomputed: where it is one-sided, the p-value is at
most its size exactly when it rejects; where it is two-sided it must be a region of the plan's split.
"""

from __future__ import annotations

import math
from functools import lru_cache
from typing import Any

from steelyard.core.abilities import Judging, deciding, estimating, judging
from steelyard.core.errors import InvalidValue, NoAnswer
from steelyard.core.kind import claim_of, kind_of
from steelyard.core.numbers import read_choice, read_probability, typed
from steelyard.core.plan import Plan
from steelyard.core.splits import NEAR

LIMIT_ENDS = ("lower", "upper")
LEAST_CONFIDENCE = 1e-6  # what it lacks of 1 must be a number below 1, and well below


def p_value(plan: Plan, observed: Any) -> float:
    """Return the p-value of an observed result under the plan's claim.

    Parameters
    ----------
    plan : Plan
    observed : float, int or str
        What was found, e.g. the count of defectives.

    Raises
    ------
    InvalidValue
        When the plan has no claim, or the result is impossible.
    NoAnswer
        When the kind has no p-value, or the rule is not that of its split.

    Examples
    --------
    >>> from steelyard.core.text import read_plan
    >>> plan = read_plan("binomial | n 50 | claim p<=0.02 | alpha 0.05 | reject x>=4")
    >>> round(p_value(plan, 3), 6), round(p_value(plan, 4), 6)
    (0.078428, 0.017758)
    """
    kind = _judging(plan, "p-value")
    seen = kind.read_observed(observed, plan)
    return _agreeing(kind.p_value(plan, seen), plan.alpha, kind.outcome(plan, seen) is True)


def decide(plan: Plan, observed: Any) -> str:
    """Return the decision on an observed result, and what it means for the lot.

    Examples
    --------
    >>> from steelyard.core.text import read_plan
    >>> plan = read_plan("binomial | n 50 | claim p<=0.02 | alpha 0.05 | reject x>=4")
    >>> decide(plan, 3), decide(plan, 4)
    ('not rejected: pass', 'claim rejected: fail')
    """
    kind = deciding(kind_of(plan))
    outcome = kind.outcome(plan, kind.read_observed(observed, plan))
    if isinstance(outcome, str):
        return outcome
    other = "pass" if plan.verdict == "fail" else "fail"
    return f"claim rejected: {plan.verdict}" if outcome else f"not rejected: {other}"


def limit(plan: Plan, observed: Any, end: Any, confidence: Any = None) -> float:
    """Return an exact confidence limit for the parameter after the sample.

    Parameters
    ----------
    plan : Plan
        One-sided plans give each end at the full confidence, two-sided ones both ends jointly.
    observed : float, int or str
        What was found.
    end : {"lower", "upper"}
    confidence : float or str, optional
        Strictly between 0 and 1; 1 - alpha where left out.

    Returns
    -------
    float
        In the parameter's unit.

    Raises
    ------
    InvalidValue
        When the plan has no claim, the result is impossible, or confidence and alpha are both missing.
    NoAnswer
        When the kind has no limits, or the rule is not that of its split.

    Examples
    --------
    >>> from steelyard.core.text import read_plan
    >>> plan = read_plan("hypergeometric | lot 60 | n 32 | claim D<=0 | reject x>=1")
    >>> limit(plan, 0, "upper", "95%")
    3.0
    """
    kind = _judging(plan, "confidence limit")
    end = read_choice(end, "end", LIMIT_ENDS)
    if confidence is not None:
        wanted = read_probability(confidence, "confidence")
        if wanted < LEAST_CONFIDENCE:
            raise InvalidValue("confidence", f"be at least {LEAST_CONFIDENCE:g}", confidence)
        miss = float(1 - typed(wanted))
    elif plan.alpha is not None:
        miss = plan.alpha
    else:
        raise InvalidValue("confidence", "be given for a plan without alpha", None)
    return kind.limit(plan, kind.read_observed(observed, plan), end, miss)


def estimate(plan: Plan, observed: Any) -> float:
    """Return the estimated fraction outside the plan's limits: unbiased, with the least variance.

    Parameters
    ----------
    plan : Plan
        By measurement, with the values of its limits.
    observed : str or float
        The mean, and s where sigma is unknown, e.g. ``"mean 10.1 s 0.2"``.

    Raises
    ------
    InvalidValue
        When a limit has no value, or the sample is too small.
    NoAnswer
        When the kind has no limits.

    Examples
    --------
    >>> from steelyard.core.text import read_plan
    >>> plan = read_plan("variables | n 20 | upper 10.5 | sigma unknown | accept (upper-mean)/s>=1.926")
    >>> round(estimate(plan, "mean 10.1 s 0.2"), 6)
    0.018091
    """
    kind = estimating(kind_of(plan))
    return kind.estimate(plan, kind.read_observed(observed, plan))


def _judging(plan: Plan, what: str) -> Judging:
    """Return the plan's kind if it can weigh results, and the plan's rule is one that evidence can be for."""
    kind = judging(kind_of(plan), what)
    if claim_of(plan).side == "either" and not _follows_split(plan):
        message = f"no {what}: the rule is not the region that split {plan.split} gives; see SY_CHECK"
        raise NoAnswer(message)
    return kind


@lru_cache(maxsize=1024)
def _follows_split(plan: Plan) -> bool:
    return judging(kind_of(plan), "p-value").follows_split(plan)


def _agreeing(p: float, alpha: float | None, rejected: bool) -> float:
    """Move a p-value that rounding put on the wrong side of alpha to the side that was decided exactly."""
    if alpha is None or abs(p - alpha) > NEAR * alpha:
        return p
    return min(p, alpha) if rejected else max(p, math.nextafter(alpha, 1.0))
