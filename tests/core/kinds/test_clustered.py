"""Plans whose defects come in clusters, against scipy, every sequence, integrals and fifty digits."""

from __future__ import annotations

import math
import random
from fractions import Fraction
from itertools import product

import mpmath
import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy import stats  # noqa: TID251 - a second implementation, for comparison only

from steelyard.addin import SY_CLUSTERED, SY_IN_CLUSTERS, SY_POWER
from steelyard.core import tails_clustered as tails
from steelyard.core.clusters import ClusteredItemsLaw, NegativeBinomialDecimals
from steelyard.core.errors import InvalidValue, NoAnswer
from steelyard.core.evidence import decide, limit, p_value
from steelyard.core.forms import keeping_alpha, plain, resized, with_fields
from steelyard.core.kind import kind_of
from steelyard.core.numbers import typed
from steelyard.core.plan import Claim, Plan
from steelyard.core.questions import not_rejected, power, size
from steelyard.core.rates import rate_for
from steelyard.core.regions import make_plan
from steelyard.core.review import check, sentences
from steelyard.core.text import read_plan, write_plan

PLAIN = "binomial | n 50 | claim p<=0.02 | alpha 0.05 | reject x>=4"
ITEMS = "binomial | n 50 | claim p<=0.02 | alpha 0.05 | cluster 5 | correlation 0.05 | reject x>=4"
DEFECTS = "poisson | units 120 | claim rate<=0.05 | alpha 0.05 | cluster 10 | correlation 0.1 | reject x>=13"
LAW = ClusteredItemsLaw()


@pytest.mark.parametrize(
    "text",
    [
        ITEMS,
        DEFECTS,
        "binomial | n 7 | cluster 50 | correlation 0 | reject x>=4",
        "binomial | n 90 | claim p=0.5 | alpha 0.05 | cluster 9 | correlation 0.3 | split nearest"
        " | reject x<=24 or x>=66",
        "poisson | units 2.5 | claim rate>=4 | cluster 0.5 | correlation 1e-06 | reject x<=1 | verdict pass",
    ],
)
def test_canonical_texts_are_written_back_as_they_are(text: str) -> None:
    assert write_plan(read_plan(text)) == text


@pytest.mark.parametrize(
    ("text", "message"),
    [
        (
            "binomial | n 50 | cluster 5 | reject x>=4",
            "correlation must be written in the plan, but got nothing",
        ),
        (
            "binomial | n 50 | correlation 0.1 | reject x>=4",
            "cluster must be written in the plan, but got nothing",
        ),
        (
            "binomial | n 50 | cluster 5 | correlation 1 | reject x>=4",
            "correlation must be 0, or at least 1e-06 and less than 1, but got 1",
        ),
        (
            "binomial | n 50 | cluster 5.5 | correlation 0 | reject x>=4",
            "cluster must be a whole number from 1 to 2000, but got 5.5",
        ),
        (
            "binomial | n 2001 | cluster 5 | correlation 0 | reject x>=4",
            "n must be at most 2000 where defectives come in clusters, but got 2001",
        ),
        (
            "binomial | n 50 | cluster 5 | correlation 0 | split rarest | reject x>=4",
            "split must be half or nearest where defects come in clusters, but got rarest",
        ),
        (
            "poisson | units 5 | cluster 0 | correlation 0 | reject x>=4",
            "cluster must be greater than 0, but got 0",
        ),
        (
            "binomial | n 50 | misses 0.1 | cluster 5 | correlation 0.1 | reject x>=4",
            "plan must have only one of misses and cluster, but got all of them",
        ),
    ],
)
def test_slips_are_named(text: str, message: str) -> None:
    with pytest.raises(InvalidValue) as refusal:
        read_plan(text)
    assert str(refusal.value) == message


def test_the_same_counts_have_another_size() -> None:
    """Sizes 2.93 % for ten clusters of 5 and 8.66 % for one of 50, where 1.78 % was meant."""
    plan = read_plan(ITEMS)
    assert size(plain(plan)) == pytest.approx(0.017758, abs=5e-7)
    assert size(plan) == pytest.approx(0.0292823, abs=5e-8)
    one = with_fields(plan, "cluster", cluster=50, correlation=0.05)
    assert size(one) == pytest.approx(0.0866124, abs=5e-8)
    assert check(one) == "size 8.661 %; alpha 5 % would give x ≥ 6"
    assert check(keeping_alpha(one)) == "ok"
    assert (
        "Were there no clusters, a true claim would be rejected with probability 1.776 % at most."
        in sentences(one)
    )
    assert all(len(sentence) <= 255 for text in (ITEMS, DEFECTS) for sentence in sentences(read_plan(text)))


def test_cells() -> None:
    assert SY_CLUSTERED(PLAIN, "2%", 0.05, 5) == pytest.approx(0.0292823, abs=5e-8)
    assert SY_CLUSTERED(PLAIN, [[0.02, 0.1]], 0.05, 5) == [[SY_POWER(ITEMS, 0.02), SY_POWER(ITEMS, 0.1)]]
    assert SY_IN_CLUSTERS(PLAIN, 0.05, 5) == ITEMS
    lot = "hypergeometric | lot 800 | n 50 | reject x>=3"
    assert (
        SY_CLUSTERED(lot, 8, 0.05, 5)
        == "SY: a plan of kind hypergeometric has no form with the field cluster"
    )
    inspected = "binomial | n 50 | misses 0.1 | reject x>=4"
    assert SY_CLUSTERED(inspected, 0.1, 0.05, 5).startswith(
        "SY: a plan of kind inspected binomial has no form"
    )
    assert (
        SY_CLUSTERED(PLAIN, 0.1, 0.05, 5.5)
        == "SY: cluster must be a whole number from 1 to 2000, but got 5.5"
    )


@pytest.mark.parametrize("p", [0.001, 0.02, 0.3, 0.9])
@pytest.mark.parametrize(("cluster", "correlation"), [(50, 0.05), (50, 0.6), (10, 0.01), (7, 0.3)])
def test_items_agree_with_scipy(p: float, cluster: int, correlation: float) -> None:
    """scipy.stats.betabinom, convolved over the clusters."""
    chances = np.ones(1)
    for members in [cluster] * (50 // cluster) + [50 % cluster] * (50 % cluster > 0):
        a, b = (rate * (1 - correlation) / correlation for rate in (p, 1 - p))
        chances = np.convolve(chances, stats.betabinom.pmf(np.arange(members + 1), members, a, b))
    plan = with_fields(read_plan(PLAIN), "cluster", cluster=cluster, correlation=correlation)
    assert power(plan, p) == pytest.approx(chances[4:].sum(), rel=1e-10)
    assert not_rejected(plan, p) == pytest.approx(chances[:4].sum(), rel=1e-10)


@pytest.mark.parametrize("rate", [0.001, 0.05, 0.2])
@pytest.mark.parametrize(("cluster", "correlation"), [(10, 0.1), (120, 0.02), (0.5, 0.9), (500, 0.02)])
def test_defects_agree_with_scipy(rate: float, cluster: float, correlation: float) -> None:
    """scipy.stats.nbinom; clusters of more units than are inspected are one."""
    excess = min(cluster, 120) * correlation / (1 - correlation)
    plan = with_fields(read_plan(DEFECTS), "cluster", cluster=cluster, correlation=correlation)
    found = stats.nbinom.sf(12, 120 * rate / excess, 1 / (1 + excess))
    assert power(plan, rate) == pytest.approx(found, rel=1e-10)


def enumerated(n: int, cluster: int, tie: Fraction, p: Fraction) -> list[Fraction]:
    """Return the chances of all counts from every sequence of items; each item makes its like more likely."""
    chances = [Fraction(0)] * (n + 1)
    for sequence in product([1, 0], repeat=n):
        chance = Fraction(1)
        for place, bad in enumerate(sequence):
            before = sequence[place - place % cluster : place]
            same = sum(before) if bad else len(before) - sum(before)
            chance *= ((p if bad else 1 - p) + same * tie) / (1 + len(before) * tie)
        chances[sum(sequence)] += chance
    return chances


@pytest.mark.parametrize(("n", "cluster"), [(6, 3), (7, 3), (5, 8), (4, 1)])
def test_items_agree_with_every_sequence(n: int, cluster: int) -> None:
    p, correlation = 0.15, 0.2
    chances = enumerated(n, cluster, typed(correlation) / (1 - typed(correlation)), typed(p))
    row = {"n": n, "cluster": cluster, "correlation": correlation}
    columns, at = {name: np.asarray(value) for name, value in row.items()}, np.array(p)
    exact = LAW.exact(row, typed(p))
    for x in range(n + 1):
        low, high = sum(chances[: x + 1]), sum(chances[x:])
        assert float(LAW.exactly(x, columns, at)) == pytest.approx(float(chances[x]), rel=1e-13)
        assert float(LAW.at_most(x, columns, at)) == pytest.approx(float(low), rel=1e-13)
        assert float(LAW.at_least(x, columns, at)) == pytest.approx(float(high), rel=1e-13)
        assert exact.compare([(1, "low", x)], low) == 0 == exact.compare([(1, "high", x)], high)
        assert exact.compare([(2, "low", x)], 2 * low - Fraction(1, 10**40)) == 1


def test_correlation_is_the_intraclass_correlation() -> None:
    """The variance of a cluster's count is k p (1-p) (1 + (k-1) correlation)."""
    chances = tails.cluster_pmf(12, np.array([0.2]), 0.15 / 0.85)[0]
    count = np.arange(13)
    mean = (chances * count).sum()
    assert mean == pytest.approx(12 * 0.2, rel=1e-13)
    variance = (chances * (count - mean) ** 2).sum()
    assert variance == pytest.approx(12 * 0.2 * 0.8 * (1 + 11 * 0.15), rel=1e-13)


def test_an_integral_over_the_clusters_own_rates() -> None:
    """One cluster of items: binomial over a beta law; one of units: Poisson over a gamma law."""
    p, rate, tie = 0.02, 0.05, 0.05 / 0.95
    plan = with_fields(read_plan(PLAIN), "cluster", cluster=50, correlation=0.05)
    with mpmath.workdps(30):
        a, b = p / tie, (1 - p) / tie

        def items(r: mpmath.mpf) -> mpmath.mpf:
            low = mpmath.fsum(mpmath.binomial(50, x) * r**x * (1 - r) ** (50 - x) for x in range(4))
            return r ** (a - 1) * (1 - r) ** (b - 1) / mpmath.beta(a, b) * (1 - low)

        def units(r: mpmath.mpf) -> mpmath.mpf:
            low = mpmath.fsum(mpmath.exp(-120 * r) * (120 * r) ** x / mpmath.factorial(x) for x in range(13))
            shape = rate / tie
            return r ** (shape - 1) * mpmath.exp(-r / tie) / mpmath.gamma(shape) / tie**shape * (1 - low)

        wanted = mpmath.quad(items, [0, 0.01, 0.1, 0.5, 1])
        assert power(plan, p) == pytest.approx(float(wanted), rel=1e-8)
        plan = with_fields(read_plan(DEFECTS), "cluster", cluster=120, correlation=0.05)
        wanted = mpmath.quad(units, [0, 0.01, 0.1, 0.5, 1, 5])
        assert power(plan, rate) == pytest.approx(float(wanted), rel=1e-8)


def items_table(n: int, cluster: int, tie: float, p: float) -> list[mpmath.mpf]:
    """Return the chances of all counts; convolved in whole numbers of 10^-60 of the greatest chance."""

    def one(members: int) -> list[int]:
        chances = []
        for x in range(members + 1):
            part = mpmath.binomial(members, x) * mpmath.rf(mpmath.mpf(p) / tie, x)
            chances.append(part * mpmath.rf((1 - mpmath.mpf(p)) / tie, members - x))
        total = mpmath.fsum(chances)
        return [int(chance / total * mpmath.mpf(2) ** 1200) for chance in chances]

    total = [1 << 1200]
    for members in [cluster] * (n // cluster) + [n % cluster]:
        part = one(members)
        longer = [0] * (len(total) + members)
        for i, x in enumerate(total):
            for j, y in enumerate(part):
                longer[i + j] += x * y
        total = [value >> 1200 for value in longer]
    return [mpmath.mpf(value) / mpmath.mpf(2) ** 1200 for value in total]


@pytest.mark.parametrize("seed", range(25))
def test_items_to_ten_digits(seed: int) -> None:
    """Domain: n to 2,000, correlations 1e-6 to 0.99, rates 1e-6 to 1 - 1e-6."""
    draw = random.Random(seed)
    n = round(10 ** draw.uniform(0.3, 2.2)) if seed % 20 else 2000
    cluster = draw.randint(1, min(n, 30)) if seed % 20 else 2000
    p, correlation = draw.choice([10 ** draw.uniform(-6, -0.3), 0.97]), 0.99 * 10 ** draw.uniform(-6, 0)
    with mpmath.workdps(60):
        table = items_table(n, cluster, mpmath.mpf(correlation) / (1 - mpmath.mpf(correlation)), p)
        low, high = [mpmath.mpf(0)], [mpmath.mpf(0)]
        for chance in table:
            low.append(low[-1] + chance)
        for chance in reversed(table):
            high.append(high[-1] + chance)
    columns = {"n": np.asarray(n), "cluster": np.asarray(cluster), "correlation": np.asarray(correlation)}
    count = np.arange(n + 1)
    for found, exact in (
        (LAW.at_most(count, columns, np.array(p)), low[1:]),
        (LAW.at_least(count, columns, np.array(p)), high[:0:-1]),
    ):
        errors = [
            abs(f / e - 1) for f, e in zip(found.tolist(), exact, strict=True) if e > mpmath.mpf("1e-290")
        ]
        assert max(errors) < 1e-10


def defects_tail(x: int, mean: float, excess: float, upper: bool) -> mpmath.mpf:
    """P(X >= x) or P(X <= x), summed on the side away from the mean."""
    shape, more = mpmath.mpf(mean) / mpmath.mpf(excess), mpmath.mpf(excess)
    ratio = more / (1 + more)

    def beyond(k: int, step: int) -> mpmath.mpf:
        if k < 0:
            return mpmath.mpf(0)
        log_chance = mpmath.loggamma(shape + k) - mpmath.loggamma(shape) - mpmath.loggamma(k + 1)
        chance = mpmath.exp(log_chance + k * mpmath.log(ratio) - shape * mpmath.log1p(more))
        term, total = mpmath.mpf(1), mpmath.mpf(0)
        while k >= 0 and term > total * mpmath.mpf(10) ** -30:
            total += term
            term *= (shape + k) / (k + 1) * ratio if step > 0 else k / ((shape + k - 1) * ratio) if k else 0
            k += step
        return chance * total

    if upper:
        return beyond(x, 1) if x > mean else 1 - beyond(x - 1, -1)
    return beyond(x, -1) if x < mean else 1 - beyond(x + 1, 1)


@pytest.mark.parametrize("seed", range(100))
def test_defects_to_ten_digits(seed: int) -> None:
    """Domain: means 1e-4 to 3,000, excess 1e-6 to 30."""
    draw = random.Random(seed)
    mean, excess = 10 ** draw.uniform(-4, 3.4), 10 ** draw.uniform(-6, 1.5)
    spread = math.sqrt(mean * (1 + excess))
    x = max(0, round(mean + draw.choice([-8, -3, 3, 12, 30]) * draw.random() * spread))
    with mpmath.workdps(50):
        pairs = [
            (tails.negative_binomial_at_most(x, mean, excess), defects_tail(x, mean, excess, upper=False)),
            (tails.negative_binomial_at_least(x, mean, excess), defects_tail(x, mean, excess, upper=True)),
        ]
        point = defects_tail(x, mean, excess, upper=True) - defects_tail(x + 1, mean, excess, upper=True)
        for found, exact in pairs:
            if exact > mpmath.mpf("1e-290"):
                assert abs(float(found) / exact - 1) < 1e-11
        if point > mpmath.mpf("1e-20"):
            assert abs(float(tails.negative_binomial_pmf(x, mean, excess)) / point - 1) < 1e-9


def test_decimals_decide_ties() -> None:
    """Mean 2 and excess 1: geometric sums with the chances (x + 1) / 2^(x + 2)."""
    law = NegativeBinomialDecimals(Fraction(2), Fraction(1))
    assert law.compare([(1, "low", 1)], Fraction(1, 2)) == 0
    assert law.compare([(1, "high", 2)], Fraction(1, 2) - Fraction(1, 10**38)) == 1
    assert law.compare_counts(0, 1) == 0 and law.compare_counts(1, 2) == 1 and law.compare_counts(-1, 3) == -1


@given(
    text=st.sampled_from([ITEMS, DEFECTS]),
    cluster=st.integers(1, 60),
    correlation=st.sampled_from([0.0, 1e-6, 0.01, 0.2, 0.9]),
    rate=st.floats(0, 0.9),
)
def test_chances_add_up_and_rise(text: str, cluster: int, correlation: float, rate: float) -> None:
    plan = with_fields(read_plan(text), "cluster", cluster=cluster, correlation=correlation)
    assert power(plan, rate) + not_rejected(plan, rate) == pytest.approx(1, rel=1e-11)
    assert power(plan, rate) <= power(plan, rate + 0.01) * (1 + 1e-11)
    if correlation == 0:
        assert power(plan, rate) == pytest.approx(power(plain(plan), rate), rel=1e-11, abs=1e-300)


@pytest.mark.parametrize(("text", "catch"), [(ITEMS, "10%"), (DEFECTS, 0.15)])
@pytest.mark.parametrize("lasting", [False, True])
def test_the_needed_size(text: str, catch: object, lasting: bool) -> None:
    """The sizes around the answer, one by one."""
    plan = read_plan(text)
    found = resized(plan, catch, "90%", lasting)
    amount = kind_of(plan).grammar.extent
    start = int(getattr(found.design, amount))
    met = [power(sized(plan, amount, start + more), catch) >= 0.9 for more in range(-20, 60)]
    assert check(found) == "ok" and met[20]
    assert all(met[20:]) and not met[19] if lasting else not any(met[:20])


def sized(plan: Plan, amount: str, value: int) -> Plan:
    field = f"{amount} {getattr(plan.design, amount):g}"
    return keeping_alpha(read_plan(write_plan(plan).replace(field, f"{amount} {value}")))


@pytest.mark.parametrize("text", [ITEMS, DEFECTS])
@pytest.mark.parametrize(
    ("relation", "split"), [("<=", "half"), (">=", "half"), ("=", "half"), ("=", "nearest")]
)
def test_p_values_decisions_and_limits_agree(text: str, relation: str, split: str) -> None:
    plan = read_plan(text)
    assert plan.claim is not None
    claim = Claim(plan.claim.symbol, relation, 0.15)
    plan = make_plan(plan.kind, plan.design, claim, 0.05, split)
    for x in (0, 1, 4, 9, 15, 23, 30, 38):
        rejected = decide(plan, x).startswith("claim rejected")
        assert (p_value(plan, x) <= 0.05) == rejected
        lower, upper = (limit(plan, x, end, "95%") for end in ("lower", "upper"))
        outside = {"<=": lower > 0.15, ">=": upper < 0.15, "=": not lower <= 0.15 <= upper}[relation]
        assert outside == rejected


def test_limits_and_rates_reach_their_chances() -> None:
    for text in (ITEMS, DEFECTS):
        plan = read_plan(text)
        count = float(plan.rule.high)
        assert power(plan, limit(plan, count, "lower", "95%")) == pytest.approx(0.05, rel=1e-12)
        assert power(plan, rate_for(plan, 0.9)) == pytest.approx(0.9, rel=1e-12)
    everything = read_plan("binomial | n 20 | claim p<=0.5 | cluster 5 | correlation 0.1 | reject x>=16")
    assert limit(everything, 20, "upper", "95%") == 1 and limit(everything, 0, "lower", "95%") == 0


def test_finite_lots_are_refused() -> None:
    with pytest.raises(NoAnswer, match="a plan of kind hypergeometric has no form with the field cluster"):
        with_fields(
            read_plan("hypergeometric | lot 60 | n 5 | reject x>=1"), "cluster", cluster=5, correlation=0.1
        )
