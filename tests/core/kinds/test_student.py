"""Plans for a mean with sigma unknown."""

from __future__ import annotations

import math
from typing import Any

import continuous as exact
import mpmath
import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy import stats  # noqa: TID251 - the general reference library of these tests

from steelyard.core import kinds  # noqa: F401 - registers them
from steelyard.core.errors import InvalidValue, NoAnswer
from steelyard.core.evidence import decide, limit, p_value
from steelyard.core.kind import kind_of
from steelyard.core.making import plan_from_claim, smallest_from
from steelyard.core.native_t import t_power
from steelyard.core.questions import not_rejected, power, size
from steelyard.core.rates import rate_for
from steelyard.core.review import check, sentences
from steelyard.core.table import PlanTable
from steelyard.core.text import read_plan, write_plan

BELOW = "student | n 12 | planning-sigma 0.4 | claim mean>=500 | alpha 0.05 | reject t<=-1.795884818704044"
OPEN = plan_from_claim("student", {"n": 12}, "mean=500", 0.05)


def test_the_text_of_a_plan() -> None:
    plan = plan_from_claim("student", {"n": 12, "planning_sigma": 0.4}, "mean>=500", 0.05)
    assert plan.rule.low == pytest.approx(-1.7958848187040441, rel=1e-14)
    assert write_plan(read_plan(BELOW)) == BELOW
    assert read_plan(write_plan(OPEN)) == OPEN
    assert "planning-sigma" not in write_plan(OPEN)


CHECKS = {"A-K17-13": lambda: smallest_from("student", 0, 0.05, 1, 0.95, extra=1).design.n}


@pytest.mark.parametrize("row", exact.check_rows(CHECKS))
def test_published_size(row: dict[str, str]) -> None:
    assert CHECKS[row["id"]]() == float(row["published"]) == float(row["computed"])


@pytest.mark.parametrize(
    ("claim", "catch", "alpha", "reach"),
    [
        ("mean<=0", 1.0, 0.05, 0.95),
        ("mean=0", 0.5, 0.05, 0.8),
        ("mean=0", -0.5, 0.01, 0.9),
        ("mean>=0", -0.1, 0.05, 0.9),
    ],
)
def test_smallest_plan_against_the_reference_library(
    claim: str, catch: float, alpha: float, reach: float
) -> None:
    """The sizes of scipy's noncentral t, both tails by its upper one, tried one by one."""

    def reaches(n: int) -> bool:
        delta, share = abs(catch) * math.sqrt(n), alpha / 2 if claim[4:] == "=0" else alpha
        t = stats.t.isf(share, n - 1)
        other = stats.nct.sf(t, n - 1, -delta) if share < alpha else 0.0
        return bool(stats.nct.sf(t, n - 1, delta) + other >= reach)

    plan = smallest_from("student", claim, alpha, catch, reach, extra=1)
    assert plan.design.n == next(n for n in range(2, 2000) if reaches(n))
    assert power(plan, catch) >= reach


def test_power_against_fifty_digits() -> None:
    rng = np.random.default_rng(40)
    worst = 0.0
    for _ in range(14):
        n = int(rng.choice([2, 3, 5, 12, 30, 100, 1000, 100_000]))
        sigma, shift = float(10 ** rng.uniform(-2, 2)), float(rng.normal() * 6)
        t = float(rng.choice([-1, 1])) * float(stats.t.isf(10 ** rng.uniform(-5, -0.31), n - 1))
        mean = 10 + shift * sigma / math.sqrt(n)
        plan = read_plan(f"student | n {n} | claim mean=10 | reject t>={t!r}")
        with mpmath.workdps(exact.DIGITS):
            delta = (mpmath.mpf(mean) - 10) * mpmath.sqrt(n) / mpmath.mpf(sigma)
        for found, upper in ((power(plan, mean, sigma), True), (not_rejected(plan, mean, sigma), False)):
            truth = exact.t_tail(t, n - 1, delta, upper)
            if truth > mpmath.mpf("1e-290"):
                worst = max(worst, exact.relative_error(found, truth))
    assert worst < 1e-10


def test_power_by_simulation() -> None:
    rng = np.random.default_rng(41)
    sample = rng.normal(499.7, 0.4, (100_000, 12))
    t = (sample.mean(axis=1) - 500) / sample.std(axis=1, ddof=1) * math.sqrt(12)
    expected = power(read_plan(BELOW), 499.7)
    assert (t <= -1.795884818704044).mean() == pytest.approx(
        expected, abs=4 * math.sqrt(expected * (1 - expected) / 1e5)
    )


def test_both_tails_are_exact_where_one_is_tiny() -> None:
    """A library's series for the far tail gives nothing there; then the sum of both would be nothing."""
    plan = plan_from_claim("student", {"n": 4}, "mean=0", 0.01)
    t = mpmath.mpf(plan.rule.high)
    for mean in (0.1, 4.0, 20.0):
        delta = mpmath.mpf(mean) * 2
        truth = exact.t_tail(float(t), 3, delta, True) + exact.t_tail(-float(t), 3, delta, False)
        assert exact.relative_error(power(plan, mean, 1.0), truth) < 1e-13
        missed = exact.t_tail(float(t), 3, delta, False) - exact.t_tail(-float(t), 3, delta, False)
        assert exact.relative_error(not_rejected(plan, mean, 1.0), missed) < 1e-10


@given(
    n=st.integers(2, 500),
    side=st.sampled_from(["<=", ">=", "="]),
    alpha=st.sampled_from([0.001, 0.05, 0.2]),
    s=st.floats(0.01, 100),
    away=st.floats(-5, 5),
)
def test_p_value_decision_and_limit_agree(n: int, side: str, alpha: float, s: float, away: float) -> None:
    plan = plan_from_claim("student", {"n": n}, f"mean{side}7.5", alpha)
    assert read_plan(write_plan(plan)) == plan
    assert size(plan) == pytest.approx(alpha, rel=1e-10)
    observed = f"mean {7.5 + away * s / math.sqrt(n)!r} s {s!r}"
    rejected = decide(plan, observed) == "claim rejected: fail"
    assert rejected == (p_value(plan, observed) <= alpha)
    lower, upper = (limit(plan, observed, end) for end in ("lower", "upper"))
    outside = (side != ">=" and lower > 7.5) or (side != "<=" and upper < 7.5)
    assert rejected == outside or min(abs(lower - 7.5), abs(upper - 7.5)) < 1e-9


def test_p_value_and_limits_against_the_reference_library() -> None:
    sample = np.array([499.2, 500.1, 499.4, 499.9, 499.6, 500.3, 499.1, 499.8])
    observed = f"mean {float(sample.mean())!r} s {float(sample.std(ddof=1))!r}"
    result = stats.ttest_1samp(sample, 500)
    assert p_value(plan_from_claim("student", {"n": 8}, "mean=500", 0.05), observed) == pytest.approx(
        result.pvalue
    )
    interval = result.confidence_interval(0.95)
    assert limit(plan_from_claim("student", {"n": 8}, "mean=500", 0.05), observed, "lower") == pytest.approx(
        interval.low
    )
    one_sided = stats.ttest_1samp(sample, 500, alternative="less")
    below = plan_from_claim("student", {"n": 8}, "mean>=500", 0.05)
    assert p_value(below, observed) == pytest.approx(one_sided.pvalue)
    assert limit(below, observed, "upper") == pytest.approx(one_sided.confidence_interval(0.95).high)


def test_sigma_comes_from_the_question_or_from_the_plan() -> None:
    known = read_plan(BELOW)
    assert power(known, 499.7) == pytest.approx(0.7848314171075685, rel=1e-12)
    assert power(known, 499.7, 0.8) == power(read_plan(BELOW.replace("0.4", "0.8")), 499.7)
    assert rate_for(known, 0.9) == pytest.approx(499.6389333632914, rel=1e-12)
    with pytest.raises(InvalidValue, match=r"^rates must be given for mean and sigma, but got 499.7$"):
        power(OPEN, 499.7)
    with pytest.raises(
        NoAnswer, match=r"^the power of this plan depends on mean and sigma, so no single rate"
    ):
        rate_for(OPEN, 0.9, "upper")
    with pytest.raises(InvalidValue, match=r"^sigma must be greater than 0, but got 0$"):
        power(OPEN, 499.7, 0)
    with pytest.raises(InvalidValue, match=r"^sigma must be given to find the smallest plan"):
        smallest_from("student", "mean>=500", 0.05, 499.5, 0.9)
    index = np.array([[0], [1]])
    found = PlanTable.of([known, OPEN]).map(lambda kind: kind.reject, index, np.array([[499.7, 500.0]]))
    assert np.isnan(found[1, 0])  # refused by the scalar question
    assert (found[0, 0], found[1, 1]) == pytest.approx((0.7848314171075685, 0.05), rel=1e-12)


@pytest.mark.parametrize(
    ("text", "message"),
    [
        (
            "student | n 1 | claim mean<=5 | reject t>=2",
            "n must be a whole number from 2 to 100000, but got 1",
        ),
        (
            "student | n 5 | reject t>=2",
            "claim must be written in the plan: t counts from it, but got nothing (e.g. claim mean>=500)",
        ),
        (
            "student | n 5 | planning-sigma -1 | claim mean<=5 | reject t>=2",
            "planning-sigma must be greater than 0, but got -1",
        ),
    ],
)
def test_refusals(text: str, message: str) -> None:
    with pytest.raises(InvalidValue) as refusal:
        read_plan(text)
    assert str(refusal.value) == message


@pytest.mark.parametrize("observed", [499.7, "499.7", "mean 499.7", "mean 499.7 s 0", "mean x s 1", None])
def test_refused_observations(observed: Any) -> None:
    with pytest.raises(
        InvalidValue, match=r"^(observed must have the form mean 499.7 s 0.31|s must be greater than 0)"
    ):
        p_value(read_plan(BELOW), observed)


def test_sentences() -> None:
    told = sentences(read_plan(BELOW))
    assert max(map(len, told)) <= 255
    assert "on t = (mean - 500) * sqrt(12) / s of -1.7958848 or less" in " ".join(told)
    assert check(read_plan(BELOW)) == "ok"


def native_value(formula: str, delta: float) -> float:
    """Evaluate the formula of `t_power` by its structure, independent of any spreadsheet."""
    names = {"EXP": np.exp, "phi": stats.norm.cdf, "D": delta}
    python = (
        formula.replace("_xlfn.NORM.S.DIST(", "phi(").replace(",TRUE)", ")").replace("SUMPRODUCT(", "total(")
    )
    start, stop = python.index("$1:$") + 4, python.index(")", python.index("$1:$"))
    rows = np.arange(1, int(python[start:stop]) + 1)[:, None]
    python = python.replace(f"ROW($1:${len(rows)})", "rows").replace("{1,-1}", "signs")
    return float(eval(python, {**names, "rows": rows, "signs": np.array([1, -1]), "total": np.sum}))


@pytest.mark.parametrize("df", [1, 2, 11, 400, 99_999])
@pytest.mark.parametrize("ends", [(-1.8, None), (None, 2.5), (-2.2, 2.2), (-2.2, 2.5)])
def test_native_formula(df: int, ends: tuple[float | None, float | None]) -> None:
    formula = t_power(*ends, df, "D")
    for delta in (-6.0, -1.0, 0.0, 2.5):
        low = stats.nct.sf(-ends[0], df, -delta) if ends[0] else 0.0
        high = stats.nct.sf(ends[1], df, delta) if ends[1] else 0.0
        assert native_value(formula, delta) == pytest.approx(low + high, abs=1e-11)


def test_no_native_formula_where_the_sum_would_be_long_or_sigma_is_unknown() -> None:
    assert t_power(None, 636.6, 1, "D") is None
    assert kind_of(OPEN).native(OPEN, "B2") is None
    assert len(kind_of(OPEN).native(read_plan(BELOW), "B2")) < 255
