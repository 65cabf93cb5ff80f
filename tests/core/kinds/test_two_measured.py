"""Two means and two standard deviations compared."""

from __future__ import annotations

import mpmath
import numpy as np
import published
import pytest
from scipy import stats  # noqa: TID251 - a second implementation, for comparison only

from steelyard.addin import SY_POWER, SY_TWO_MEANS, SY_TWO_SMALLEST, SY_TWO_SPREADS
from steelyard.core.errors import InvalidValue
from steelyard.core.evidence import decide, p_value
from steelyard.core.kind import kind_of
from steelyard.core.questions import not_rejected, power, region, size
from steelyard.core.review import sentences
from steelyard.core.tails_two import f_at_least, f_at_most, f_quantile
from steelyard.core.text import read_plan, write_plan
from steelyard.core.two_sizes import smallest_comparison

WELCH = "two means | n 5 and 12 | planning-sigma 1 and 3 | claim mean2<=mean1 | alpha 0.05 | test welch"
POOLED = "two means | n 20 and 20 | planning-sigma 1 | claim mean2=mean1 | alpha 0.05 | test t"
SPREADS = "two spreads | n 12 and 15 | claim sigma2<=sigma1 | alpha 0.05"
FOUND = "mean 20.14458 s 6.4147 vs mean 30.48101 s 6.10771"


@pytest.mark.parametrize("text", [WELCH, POOLED, SPREADS])
def test_texts(text):
    assert write_plan(read_plan(text)) == text
    head, *fields = text.upper().split(" | ")
    assert read_plan("|".join([head, *reversed(fields)])) == read_plan(text)


@pytest.mark.parametrize(
    ("text", "message"),
    [
        (WELCH.replace("5 and 12", "5"), "n must have the form 12 and 15, but got 5"),
        (
            WELCH.replace("1 and 3", "1 and 300"),
            "planning-sigma must be greater than 0, neither more than 100",
        ),
        (
            WELCH.replace("welch", "wilch"),
            "test must be one of t, welch, but got wilch (did you mean welch?)",
        ),
        (SPREADS.replace("12 and", "1 and"), "n must be a whole number from 2 to 1000, but got 1"),
        (SPREADS.replace("sigma2<", "sigma<"), "claim must compare sigma2 with sigma1, e.g. sigma2<=sigma1"),
    ],
)
def test_slips_are_named(text, message):
    with pytest.raises(InvalidValue) as refusal:
        read_plan(text)
    assert str(refusal.value).startswith(message)


def test_published_power_of_the_pooled_t():
    """The source ignores the far tail, a chance of 2.25e-7 here."""
    assert power(read_plan(POOLED), 0, 1) == pytest.approx(
        float(published.ROWS["A-K17-01"]["published"]), abs=5e-7
    )


@pytest.mark.parametrize(
    ("key", "difference", "alpha", "target"),
    [
        ("A-K17-02", 1, 0.05, 0.9),
        ("A-K17-04", 0.5, 0.05, 0.8),
        ("A-K17-05", 0.5, 0.01, 0.8),
        ("A-K17-06", 0.8, 0.01, 0.8),
    ],
)
def test_published_sample_sizes(key, difference, alpha, target):
    """The sources give real numbers or the nearest one; the plan takes the next whole number."""
    found = smallest_comparison(
        "two means", {"planning_sigma": 1, "test": "t"}, (0, difference), target, alpha, "either"
    )
    assert found.design.n == (np.ceil(float(published.ROWS[key]["computed"])),) * 2


def test_published_degrees_of_freedom():
    plan = read_plan(
        WELCH.replace("5 and 12", "249 and 79").replace("sigma 1 and 3", "sigma 6.41470 and 6.10771")
    )
    published.agrees("A-K17-14", float(plan.design.estimate(6.41470**2, 6.10771**2)[1]))
    expected = stats.ttest_ind_from_stats(20.14458, 6.4147, 249, 30.48101, 6.10771, 79, equal_var=False)
    assert p_value(plan, FOUND) == pytest.approx(expected.pvalue / 2, rel=1e-9)


def test_published_f():
    published.agrees("A-K18-07", float(f_quantile(0.05, 10, 8, "high")))
    plan = read_plan("two spreads | n 240 and 240 | claim sigma2<=sigma1 | alpha 0.05")
    published.agrees("A-K18-06", kind_of(plan).statistic(plan, ((61.854,), (65.549,))))


@pytest.mark.parametrize("test", ["t", "welch"])
@pytest.mark.parametrize(
    ("n", "sigmas", "difference"), [((5, 12), (1, 3), 2.0), ((9, 4), (2, 1), 0.0), ((6, 6), (1, 1), -1.0)]
)
def test_power_against_a_double_integral(test, n, sigmas, difference):
    """The trapezoidal rule over the logarithms of both sample variances, and the normal law in between."""
    plan = read_plan(
        f"two means | n {n[0]} and {n[1]} | planning-sigma {sigmas[0]} and {sigmas[1]}"
        f" | claim mean2<=mean1 | alpha 0.05 | test {test}"
    )
    logs = np.linspace(-30, 6, 361)
    laws = [np.exp(logs) * stats.chi2.pdf(np.exp(logs), items - 1) for items in n]
    v = [sigma**2 * np.exp(logs) / (items - 1) for sigma, items in zip(sigmas, n, strict=True)]
    first, second = v[0][:, None], v[1][None]
    if test == "t":
        error = np.sqrt(((n[0] - 1) * first + (n[1] - 1) * second) / (sum(n) - 2) * (1 / n[0] + 1 / n[1]))
        df = np.full(error.shape, sum(n) - 2.0)
    else:
        a, b = first / n[0], second / n[1]
        error, df = np.sqrt(a + b), (a + b) ** 2 / (a**2 / (n[0] - 1) + b**2 / (n[1] - 1))
    true = np.sqrt(sigmas[0] ** 2 / n[0] + sigmas[1] ** 2 / n[1])
    tail = stats.norm.sf((stats.t.isf(0.05, df) * error - difference) / true)
    exact = (laws[0][:, None] * laws[1][None] * tail).sum() * (logs[1] - logs[0]) ** 2
    assert power(plan, 1.0, 1.0 + difference) == pytest.approx(exact, rel=1e-8)
    assert not_rejected(plan, 1.0, 1.0 + difference) == pytest.approx(1 - exact, rel=1e-8)


def test_sizes():
    assert size(read_plan(POOLED)) == pytest.approx(0.05, rel=1e-12)
    assert size(read_plan(WELCH)) == pytest.approx(0.0490848, abs=1e-7)
    assert size(read_plan(WELCH.replace("welch", "t"))) == pytest.approx(0.0137312, abs=1e-7)
    assert size(read_plan(SPREADS)) == 0.05


@pytest.mark.parametrize(("over", "under", "x"), [(9, 4, 0.2), (999, 1, 3.0), (50, 60, 6.0), (3, 999, 40.0)])
def test_f_to_ten_digits(over, under, x):
    """Domain: 1 to 999 degrees of freedom, tails from 1e-100."""
    with mpmath.workdps(50):
        z = mpmath.mpf(over) * mpmath.mpf(x) / (mpmath.mpf(over) * mpmath.mpf(x) + under)
        low = mpmath.betainc(mpmath.mpf(over) / 2, mpmath.mpf(under) / 2, 0, z, regularized=True)
        high = mpmath.betainc(mpmath.mpf(over) / 2, mpmath.mpf(under) / 2, z, 1, regularized=True)
    assert float(f_at_most(x, over, under)) == pytest.approx(float(low), rel=1e-10)
    assert float(f_at_least(x, over, under)) == pytest.approx(float(high), rel=1e-10)


@pytest.mark.parametrize("relation", ["<=", ">=", "="])
def test_power_of_f_agrees_with_scipy(relation):
    plan = read_plan(SPREADS.replace("<=", relation))
    share = 0.025 if relation == "=" else 0.05
    high, low = stats.f(14, 11).isf(share), stats.f(14, 11).ppf(share)
    scale = (2 / 3.1) ** 2
    parts = {"<=": [stats.f(14, 11).sf(high * scale)], ">=": [stats.f(14, 11).cdf(low * scale)]}
    exact = sum(parts.get(relation, parts["<="] + parts[">="]))
    assert power(plan, 2, 3.1) == pytest.approx(exact, rel=1e-10)
    assert not_rejected(plan, 2, 3.1) == pytest.approx(1 - exact, rel=1e-10)


def test_decisions_follow_p():
    for text in (WELCH, POOLED):
        for mean in (0.5, 1.5, 2.5, 3.5, 9.0):
            seen = f"mean 1 s 1.1 vs mean {mean} s 2.1"
            rejected = decide(read_plan(text), seen) == "claim rejected: fail"
            assert (p_value(read_plan(text), seen) <= 0.05) == rejected
    for s in (0.3, 0.6, 0.8, 2.0):
        plan = read_plan(SPREADS)
        assert (p_value(plan, f"s 0.4 vs s {s}") <= 0.05) == (
            decide(plan, f"s 0.4 vs s {s}") != "not rejected: pass"
        )


def test_words():
    for text in (WELCH, POOLED, SPREADS):
        assert all(len(sentence) <= 255 for sentence in sentences(read_plan(text)))
    assert region(read_plan(SPREADS)) == "F ≥ 2.7386482"
    assert region(read_plan(POOLED)) == "t ≤ -2.02439 or t ≥ 2.02439"


def test_cells():
    assert SY_TWO_MEANS(5, 12, "1 and 3") == WELCH
    assert SY_TWO_SPREADS(12, 15) == SPREADS
    assert SY_POWER(WELCH, 1, 3) == power(read_plan(WELCH), 1, 3)
    found = SY_TWO_SMALLEST("two spreads", 1, 1.5, 0.8)
    assert found == "two spreads | n 40 and 40 | claim sigma2<=sigma1 | alpha 0.05"
    found = SY_TWO_SMALLEST("two means", 0, 1, 0.9, 0.05, "either", 1, "t", 1)
    assert found.startswith("two means | n 23 and 23 | planning-sigma 1 |")
