"""Two defect rates compared: Fisher, Boschloo, pooled z and its exact form."""

from __future__ import annotations

import math
import random
from fractions import Fraction
from itertools import product

import mpmath
import numpy as np
import published
import pytest
from scipy import stats  # noqa: TID251 - a second implementation, for comparison only

from steelyard.addin import SY_PAIRS, SY_POWER, SY_TWO_BINOMIAL, SY_TWO_SMALLEST
from steelyard.core.bernstein import greatest, stays_within
from steelyard.core.errors import InvalidValue, NoAnswer
from steelyard.core.evidence import decide, limit, p_value
from steelyard.core.kinds.two_binomial import rejected
from steelyard.core.questions import beta, not_rejected, power, region, size
from steelyard.core.review import check, sentences
from steelyard.core.text import read_plan, write_plan
from steelyard.core.two_sizes import smallest_comparison
from steelyard.core.two_tables import TESTS, convex, null_curve

PLAN = "two binomial | n 50 and 60 | claim p2<=p1 | alpha 0.05 | test boschloo"


def plan_of(first: int, second: int, test: str = "fisher", relation: str = "<=", split: str = "half"):
    fields = "" if split == "half" else f" | split {split}"
    return read_plan(
        f"two binomial | n {first} and {second} | claim p2{relation}p1 | alpha 0.05{fields} | test {test}"
    )


@pytest.mark.parametrize(
    ("text", "canonical"),
    [
        (PLAN, PLAN),
        ("Two Binomial|test BOSCHLOO|alpha 5%|claim p2 ≤ p1|n 50 and 60", PLAN),
        ("two binomial | n 9 and 7 | claim p2=p1 | alpha 0.1 | split rarest | test barnard", None),
        ("two binomial | n 9 and 7 | claim p2>=p1 | alpha 0.1 | test z | verdict pass", None),
    ],
)
def test_texts(text, canonical):
    assert write_plan(read_plan(text)) == (canonical or text)
    assert read_plan(canonical or text) == read_plan(text)


@pytest.mark.parametrize(
    ("change", "message"),
    [
        (("50 and 60", "50"), "n must have the form 50 and 60, but got 50"),
        (("50 and 60", "50 and 600"), "n must be a whole number from 1 to 200, but got 600"),
        (("p2<=p1", "p<=p1"), "claim must compare p2 with p1, e.g. p2<=p1, but got p<=p1"),
        (("p2<=p1", "p2<=0.1"), "claim must compare p2 with p1, e.g. p2<=p1, but got p2<=0.1"),
        (("p2<=p1", "p2<=p1+0.1"), "claim must have no margin, e.g. p2<=p1, but got p2<=p1+0.1"),
        ((" | alpha 0.05", ""), "alpha must be written in the plan: the rule follows from it"),
        ((" | claim p2<=p1", ""), "claim must be written in the plan: the rule follows from it"),
        ((" | test boschloo", ""), "test must be written in the plan, but got nothing"),
        (("boschloo", "fischer"), "test must be one of fisher, boschloo, z, barnard, but got fischer (did"),
        (
            ("50 and 60", "2 and 2"),
            "n must be enough that some result rejects p2<=p1 at alpha 0.05, but got 2",
        ),
        (("p2<=p1", "p2=p1 | split nearest"), "split must be half or rarest, but got nearest"),
    ],
)
def test_slips_are_named(change, message):
    with pytest.raises(InvalidValue) as refusal:
        read_plan(PLAN.replace(*change))
    assert str(refusal.value).startswith(message)


# Pairs x1 of n1 against x2 of n2; the published table gives the cells.
PUBLISHED = [
    ("A-K15-01", plan_of(4, 4), "1 vs 3"),
    ("A-K15-02", plan_of(17, 13, relation=">="), "15 vs 3"),
    ("A-K15-03", plan_of(10, 10), "4 vs 8"),
    ("A-K15-04", plan_of(12, 12, relation="=", split="rarest"), "1 vs 9"),
    ("A-K15-05", plan_of(10, 9, "barnard", "=", "rarest"), "2 vs 7"),
    ("A-K15-06", plan_of(15, 11, "barnard", "=", "rarest"), "5 vs 1"),
    ("A-K15-07", plan_of(10, 9, "boschloo"), "2 vs 7"),
]


@pytest.mark.parametrize(
    ("key", "plan", "observed"), PUBLISHED, ids=[published.label(key) for key, *_ in PUBLISHED]
)
def test_published_p_values(key, plan, observed):
    found, row = p_value(plan, observed), published.ROWS[key]
    near = max(0.51 * published.unit(row["computed"]), 1e-12 * found)
    assert abs(found - float(row["computed"])) <= near
    assert abs(found - float(row["published"])) <= max(1.51 * published.unit(row["published"]), 1e-12 * found)


@pytest.mark.parametrize(("first", "second", "pair"), [(10, 9, (2, 7)), (15, 7, (3, 5)), (30, 25, (4, 11))])
def test_p_values_agree_with_scipy(first, second, pair):
    """scipy.stats searches the nuisance rate by shgo: an independent way to the supremum.

    Its Barnard test compares floats, and with the samples changed it may miss a pair that is equally extreme.
    """
    x, y = pair
    table = [[y, x], [second - y, first - x]]
    observed = f"{x} vs {y}"
    greater = stats.fisher_exact(table, alternative="greater")[1]
    assert p_value(plan_of(first, second), observed) == pytest.approx(greater, rel=1e-12)
    both = stats.fisher_exact(table)[1]
    assert p_value(plan_of(first, second, "fisher", "=", "rarest"), observed) == pytest.approx(
        both, rel=1e-10
    )
    found = p_value(plan_of(first, second, "boschloo"), observed)
    assert found == pytest.approx(stats.boschloo_exact(table, alternative="greater").pvalue, rel=1e-6)
    doubled = p_value(plan_of(first, second, "boschloo", "="), observed)
    assert doubled == pytest.approx(stats.boschloo_exact(table).pvalue, rel=1e-6)
    found = p_value(plan_of(first, second, "barnard", "=", "rarest"), observed)
    assert found == pytest.approx(stats.barnard_exact(table, n=1024).pvalue, rel=1e-6)


def fisher_fraction(first, second, x, y):
    total, tail = x + y, 0
    for j in range(y, min(second, total) + 1):
        tail += math.comb(second, j) * math.comb(first, total - j)
    return Fraction(tail, math.comb(first + second, total))


def exact_power(table, rates):
    ways = [
        [math.comb(n - 1, k) * rate**k * (1 - rate) ** (n - 1 - k) for k in range(n)]
        for n, rate in zip(table.shape, rates, strict=True)
    ]
    return sum(ways[0][x] * ways[1][y] for x, y in np.argwhere(table))


@pytest.mark.parametrize(("first", "second"), [(4, 4), (5, 7), (8, 3), (6, 6), (20, 20)])
def test_every_pair_counted_in_rationals(first, second):
    """Fisher's region by its defining inequality, its power at rational rates by all pairs."""
    plan = plan_of(first, second)
    table = rejected(plan)
    for x, y in product(range(first + 1), range(second + 1)):
        assert table[x, y] == (fisher_fraction(first, second, x, y) <= Fraction(1, 20))
    for rates in ((Fraction(1, 4), Fraction(3, 4)), (Fraction(1, 2), Fraction(1, 8))):
        exact = exact_power(table, rates)
        assert power(plan, *map(float, rates)) == pytest.approx(float(exact), rel=1e-13)
        assert not_rejected(plan, *map(float, rates)) == pytest.approx(float(1 - exact), rel=1e-13)


@pytest.mark.parametrize(("first", "second"), [(5, 5), (7, 4), (9, 11)])
@pytest.mark.parametrize("test", ["boschloo", "barnard"])
def test_calibrated_regions_are_the_largest_that_keep_alpha(first, second, test):
    """Pairs are taken in order as exact fractions; sizes are looked up on a fine grid of the common rate."""
    pairs = list(product(range(first + 1), range(second + 1)))

    def evidence(pair):
        x, y = pair
        if test == "boschloo":
            return fisher_fraction(first, second, x, y)
        total = x + y
        if total in (0, first + second):
            return Fraction(0)
        away = Fraction(y, second) - Fraction(x, first)
        z = away * abs(away) / (Fraction(total * (first + second - total)))
        return -z

    rates = np.linspace(0, 1, 2001)
    chances = {(x, y): stats.binom.pmf(x, first, rates) * stats.binom.pmf(y, second, rates) for x, y in pairs}
    expected, chance = set(), np.zeros(rates.shape)
    for value in sorted({evidence(pair) for pair in pairs}):
        new = [p for p in pairs if evidence(p) == value and 0 < sum(p) < first + second]
        chance = chance + sum((chances[pair] for pair in new), np.zeros(rates.shape))
        if chance.max() > 0.05:
            break
        expected |= set(new)
    assert set(map(tuple, np.argwhere(rejected(plan_of(first, second, test))).tolist())) == expected


@pytest.mark.parametrize("test", TESTS)
@pytest.mark.parametrize("relation", ["<=", ">=", "="])
@pytest.mark.parametrize(("first", "second"), [(6, 6), (30, 17), (50, 60)])
def test_size_is_the_greatest_power_over_the_claim(test, relation, first, second):
    plan = plan_of(first, second, test, relation)
    rates = np.linspace(0, 1, 801)
    chances = [power(plan, rate, rate) for rate in rates[::8]]
    found = size(plan)
    assert max(chances) <= found * (1 + 1e-12)
    curve = null_curve(rejected(plan))
    grid = stats.binom.pmf(np.arange(first + second + 1), first + second, rates[:, None]) @ curve
    assert grid.max() <= found * (1 + 1e-11)
    assert found == pytest.approx(grid.max(), rel=2e-3)
    if test != "z":
        assert found <= 0.05 * (1 + 1e-12)
    if relation != "=":
        table = rejected(plan)
        assert convex(table if relation == "<=" else table[::-1, ::-1])
        draw = random.Random(first)
        for _ in range(20):
            low, high = sorted((draw.random(), draw.random()))
            assert power(plan, *((high, low) if relation == "<=" else (low, high))) <= found


def test_a_peak_between_the_points_of_a_grid_is_found():
    """A single count of many has a narrow peak, whose height is known."""
    for degree, m in ((400, 3), (400, 123), (7, 1)):
        curve = np.zeros(degree + 1)
        curve[m] = 1.0
        exact = float(stats.binom.pmf(m, degree, m / degree))
        assert greatest(curve) == pytest.approx(exact, rel=1e-11)
        assert stays_within(curve, exact * (1 + 1e-9))
        assert not stays_within(curve, exact * (1 - 1e-9))


def test_alike_samples_never_reject():
    for test, relation in product(TESTS, ("<=", ">=", "=")):
        table = rejected(plan_of(40, 11, test, relation))
        assert not table[0, 0] and not table[-1, -1]
        assert p_value(plan_of(40, 11, test, relation), "0 vs 0") == 1.0


@pytest.mark.parametrize("test", TESTS)
@pytest.mark.parametrize(
    ("relation", "split"), [("<=", "half"), (">=", "half"), ("=", "half"), ("=", "rarest")]
)
def test_p_is_at_most_alpha_exactly_where_the_plan_rejects(test, relation, split):
    if (test, split) == ("z", "rarest"):
        return
    plan = plan_of(9, 12, test, relation, split)
    for x, y in product(range(10), range(13)):
        assert (p_value(plan, f"{x} vs {y}") <= 0.05) == (
            decide(plan, f"{x} vs {y}") == "claim rejected: fail"
        )


@pytest.mark.parametrize("seed", range(12))
def test_power_to_ten_digits(seed):
    """Domain: 1 to 200 items each, rates 1e-6 to 1 - 1e-6, powers from 1e-250; against 50 digits."""
    draw = random.Random(seed)
    first, second = draw.randint(8, 200), draw.randint(8, 200)
    plan = plan_of(first, second, draw.choice(TESTS), draw.choice(["<=", ">=", "="]))
    rates = [1 / (1 + math.exp(draw.uniform(-13.8, 13.8))) for _ in range(2)]
    table = rejected(plan)
    with mpmath.workdps(50):
        ways = [
            [
                mpmath.binomial(n - 1, k) * mpmath.mpf(p) ** k * (1 - mpmath.mpf(p)) ** (n - 1 - k)
                for k in range(n)
            ]
            for n, p in zip(table.shape, rates, strict=True)
        ]
        sums = [mpmath.fsum(way for way, hit in zip(ways[1], row, strict=True) if hit) for row in table]
        exact = mpmath.fsum(one * rest for one, rest in zip(ways[0], sums, strict=True))
        if exact > mpmath.mpf("1e-250"):
            assert abs(power(plan, *rates) / exact - 1) < 1e-10
        if 1 - exact > mpmath.mpf("1e-30"):
            assert abs(not_rejected(plan, *rates) / (1 - exact) - 1) < 1e-10


@pytest.mark.parametrize(
    ("rates", "side", "ratio", "test"),
    [
        ((0.1, 0.5), "above", 1, "fisher"),
        ((0.1, 0.5), "above", 1, "boschloo"),
        ((0.1, 0.5), "either", 2, "barnard"),
        ((0.7, 0.2), "below", 0.5, "boschloo"),
        ((0.05, 0.6), "above", 1.5, "z"),
    ],
)
def test_the_smallest_samples_are_the_first(rates, side, ratio, test):
    plan = smallest_comparison("two binomial", {"test": test}, rates, 0.8, 0.05, side, ratio)
    first, second = plan.design.n
    assert second == math.ceil(ratio * first)
    assert power(plan, *rates) >= 0.8
    relation = {"above": "<=", "below": ">=", "either": "="}[side]
    for fewer in range(1, first):
        try:
            other = plan_of(fewer, math.ceil(ratio * fewer), test, relation)
        except InvalidValue:
            continue
        assert power(other, *rates) < 0.8


def test_no_samples_are_large_enough():
    with pytest.raises(NoAnswer, match=r"no samples of up to 200 items have power 0.9 there"):
        smallest_comparison("two binomial", {}, ("10%", "12%"), 0.9)
    with pytest.raises(InvalidValue, match=r"rates must make the claim p2<=p1 false, but got 0.2 and 0.1"):
        smallest_comparison("two binomial", {}, (0.2, 0.1), 0.9)


def test_words():
    plan = read_plan(PLAN)
    assert check(plan) == "ok"
    assert check(plan_of(50, 60, "z", "=")) == "size 5.091 % exceeds alpha 5 %"
    told = sentences(plan)
    assert told[1] == "Claim: defect rate of the second sample at most the defect rate of the first sample."
    assert all(len(sentence) <= 255 for test in TESTS for sentence in sentences(plan_of(200, 200, test, "=")))
    assert region(plan).startswith("x1 0: x2 ≥ 5; x1 1: x2 ≥ 7; x1 2: x2 ≥ 9") and len(region(plan)) <= 255
    assert decide(plan, "3 vs 9") == "not rejected: pass"
    assert decide(plan, "3 vs 11") == "claim rejected: fail"
    with pytest.raises(InvalidValue, match=r"observed must have the form 3 vs 9, but got 3"):
        decide(plan, 3)
    with pytest.raises(InvalidValue, match=r"observed must be a whole number from 0 to 60, but got 61"):
        decide(plan, "3 vs 61")
    with pytest.raises(NoAnswer, match=r"beta has no meaning here: the claim p2<=p1 is true at 0.2 and 0.1"):
        beta(plan, 0.2, 0.1)
    with pytest.raises(NoAnswer, match=r"a plan of kind two binomial has no confidence limit"):
        limit(plan, "3 vs 9", "upper")


def test_cells():
    plan = SY_TWO_BINOMIAL(50, 60)
    assert plan == PLAN
    table = SY_POWER([[plan]], [[0.1, 0.1]], [[0.3, 0.1]])
    assert table[0] == [power(read_plan(plan), 0.1, 0.3), power(read_plan(plan), 0.1, 0.1)]
    assert SY_POWER(plan, 0.1) == "SY: rates must be given for p1 and p2, but got 0.1"
    assert SY_PAIRS(plan)[:3] == [
        ["first count", "rejected up to", "rejected from"],
        [0, None, 5],
        [1, None, 7],
    ]
    assert SY_PAIRS("binomial | n 50 | reject x>=4").startswith("SY: a plan of kind binomial has no pairs")
    assert SY_TWO_SMALLEST("two binomial", "10%", "50%", 0.8, 0.05, "above", 1, "fisher").startswith(
        "two binomial | n 19 and 19 |"
    )
    assert SY_TWO_SMALLEST("binomial", 0.1, 0.5, 0.8).endswith(
        "does not compare two samples; see SY_SMALLEST"
    )
