"""Plans in stages, against an inspector who meets every possible lot, published values and fifty digits."""

from __future__ import annotations

import math
import random
from fractions import Fraction

import accuracy
import inspectors
import mpmath
import numpy as np
import published
import pytest
from hypothesis import assume, given
from hypothesis import strategies as st

import steelyard.core.kinds  # noqa: F401 - registers every kind
from steelyard.core.errors import InvalidValue, NoAnswer
from steelyard.core.evidence import decide, limit, p_value
from steelyard.core.kind import kind_of
from steelyard.core.numbers import typed
from steelyard.core.outgoing import average_sample, endings
from steelyard.core.plan import Plan
from steelyard.core.questions import acceptance, critical, power, region, size
from steelyard.core.rates import rate_for
from steelyard.core.review import check, sentences
from steelyard.core.stages import STOPS
from steelyard.core.text import read_plan, write_plan

DOUBLE = "binomial | stages 50 then 50 | accept 1 then 4 | reject 4 then 5 | claim p<=0.02"
MULTIPLE = "binomial | stages 20 then 20 then 20 | accept none then 1 then 3 | reject 3 then 4 then 4"
UNITS = "poisson | stages 12.5 then 25 | accept 1 then 4 | reject 4 then 5 | stop on-reject | claim rate<=0.1"
LOT = (
    "hypergeometric | lot 80 | stages 20 then 20 | accept 0 then 1 | reject 2 then 2 | claim D<=1 | alpha 0.1"
)


@pytest.mark.parametrize(
    "text",
    [
        DOUBLE, MULTIPLE, UNITS, LOT,
        "binomial | stages 10 then 19 | accept 1 then 5 | reject none then 6 | stop on-decision",
        "binomial | stages 50 | accept 3 | reject 4 | stop on-reject | claim p<=0.02 | alpha 0.05",
        "poisson | stages 0.5 | accept 0 | reject 1",
    ],
)  # fmt: skip
def test_canonical_texts_are_written_back_as_they_are(text: str) -> None:
    assert write_plan(read_plan(text)) == text


def test_any_order_and_spaces_are_read() -> None:
    typed_text = " Binomial|REJECT 4 THEN 5 |  stop Stage-End|accept 1  then 4|claim p<=2%| stages 50 then 50"
    assert write_plan(read_plan(typed_text)) == DOUBLE


@pytest.mark.parametrize(
    ("text", "message"),
    [
        ("stages 50 then 50 | reject 4 then 5", "accept must be written in the plan, e.g. accept 1 then 4"),
        ("stages 50 then 50 | accept 1 | reject 4 then 5", "one number, or none, for each of the 2 stages"),
        ("stages 50 then 50 | accept 1 then 4 | reject 4 then 6", "the last acceptance number plus 1"),
        ("stages 50 then 50 | accept 1 then 4 | reject 4 then none", "the last acceptance number plus 1"),
        ("stages 50 then 50 | accept 2 then 1 | reject 4 then 2", "accept must not fall from stage to stage"),
        ("stages 50 then 50 | accept 1 then 4 | reject 6 then 5", "reject must not fall from stage to stage"),
        ("stages 50 then 50 | accept 3 then 4 | reject 4 then 5", "leave some count open after stage 1"),
        ("stages 5 then 5 | accept 1 then 10 | reject 4 then 11", "end with a count that 10 items can show"),
        ("stages 50 then 5.5 | accept 1 then 4 | reject 4 then 5", "stages must be a whole number"),
        ("stages 50 then none | accept 1 then 4 | reject 4 then 5", "stages must be a number"),
        ("stages 9999 | accept 500 | reject 501", "reject must end with 500 at most"),
        ("stages 99 | accept 50 | reject 51 | stop on-decision", "reject must end with 50 at most"),
        ("stages 50 | accept 1.5 | reject 2", "accept must be a whole number of at least 0"),
        ("stages 50 | accept 1 | reject 2 | stop early", "stop must be one of stage-end, on-reject, on-dec"),
        ("stages 50 | accept 1 | reject 2 | claim p>=0.02", "claim must have the form p<=…"),
        ("stages 50 | accept 1 | reject 2 | claim p=0.02", "claim must have the form p<=…"),
        ("stages 50 | accept 1 | reject 2 | claim p<=1", "claim must be false for some p"),
        ("stages 50 | accept 1 | reject 2 | verdict pass", "field must be one of"),
        ("stages 50 | n 50 | accept 1 | reject 2", "plan must have only one of"),
        ("stages " + " then ".join(["5"] * 21) + " | accept 1 | reject 2", "stages must be 20 at most"),
    ],
)  # fmt: skip
def test_refusals_name_the_field_and_what_is_allowed(text: str, message: str) -> None:
    with pytest.raises(InvalidValue) as refusal:
        read_plan(f"binomial | {text}")
    assert message in str(refusal.value)


def test_refusals_of_the_other_laws() -> None:
    with pytest.raises(InvalidValue, match="stages must need 90 items at most in all, the lot, but got 100"):
        read_plan("hypergeometric | lot 90 | stages 50 then 50 | accept 1 then 4 | reject 4 then 5")
    with pytest.raises(InvalidValue, match="stop must be stage-end or on-reject where defects are counted"):
        read_plan("poisson | stages 5 | accept 1 | reject 2 | stop on-decision")
    with pytest.raises(InvalidValue, match="stages must be greater than 0"):
        read_plan("poisson | stages 5 then 0 | accept 1 then 2 | reject 4 then 3")


RULES = [
    ((4, 4), (0, 2), (3, 3)),
    ((4, 4), (0, 2), (None, 3)),
    ((3, 3, 4), (None, 0, 2), (2, 3, 3)),
    ((3, 4, 3), (0, 0, 3), (None, 4, 4)),
    ((5, 2), (0, 3), (3, 4)),
    ((6,), (2,), (3,)),
]


def texts(sizes: tuple[int, ...], accept: tuple, reject: tuple, stop: str) -> str:
    lists = (" then ".join("none" if x is None else str(x) for x in xs) for xs in (sizes, accept, reject))
    return "stages {} | accept {} | reject {} | stop {}".format(*lists, stop)


def fails(verdict: inspectors.Verdict, _: int) -> int:
    return not verdict.passed


def looked_at(verdict: inspectors.Verdict, _: int) -> int:
    return verdict.items


@pytest.mark.parametrize("stop", STOPS)
@pytest.mark.parametrize("rule", RULES, ids=str)
def test_an_inspector_who_meets_every_sequence(rule: tuple, stop: str) -> None:
    every = inspectors.Tally.of(sum(rule[0]), inspectors.staged(*rule, stop))
    plan = read_plan(f"binomial | {texts(*rule, stop)}")
    for rate in (0.0, 0.15, 0.5, 0.9, 1.0):
        failed, items = (every.mean(typed(rate), question) for question in (fails, looked_at))
        assert power(plan, rate) == pytest.approx(float(failed), rel=1e-13, abs=0)
        assert acceptance(plan, rate) == pytest.approx(float(1 - failed), rel=1e-13, abs=0)
        assert average_sample(plan, rate) == pytest.approx(float(items), rel=1e-13)


@pytest.mark.parametrize("stop", STOPS)
@pytest.mark.parametrize("rule", RULES, ids=str)
def test_an_inspector_who_meets_every_lot(rule: tuple, stop: str) -> None:
    every = inspectors.Tally.of(11, inspectors.staged(*rule, stop))
    plan = read_plan(f"hypergeometric | lot 11 | {texts(*rule, stop)}")
    for defectives in (0, 1, 3, 6, 10, 11):
        failed, items = (every.mean_of_lots(defectives, question) for question in (fails, looked_at))
        assert power(plan, defectives) == pytest.approx(float(failed), rel=1e-13, abs=0)
        assert acceptance(plan, defectives) == pytest.approx(float(1 - failed), rel=1e-13, abs=0)
        assert average_sample(plan, defectives) == pytest.approx(float(items), rel=1e-13)


def test_the_ways_to_end_are_those_of_the_inspector() -> None:
    rule = ((3, 4, 3), (0, 0, 3), (None, 4, 4))
    every = inspectors.Tally.of(10, inspectors.staged(*rule, "stage-end"))
    found = endings(read_plan(f"binomial | {texts(*rule, 'stage-end')}"), 0.3)
    for place, amount in enumerate(found.amounts):
        for passed, chances in ((True, found.accepted), (False, found.rejected)):
            exact = every.mean(
                Fraction(3, 10),
                lambda verdict, _, way=(passed, amount): (verdict.passed, verdict.items) == way,
            )
            assert chances[place, 0] == pytest.approx(float(exact), rel=1e-13, abs=0)


def unity(accept: tuple[int, int], chance: float) -> float:
    """Return n1 p of a double plan with n2 = n1 that passes with a chance, both rejection numbers c2 + 1."""
    last = accept[1] + 1
    plan = read_plan(
        f"poisson | stages 1 then 1 | accept {accept[0]} then {accept[1]} | reject {last} then {last}"
    )
    return rate_for(plan, 1 - chance)


def futility(first: str, whole: str) -> Plan:
    """Return a two-stage test that may stop after its first stage only for want of an effect."""
    (r1, n1), (r, n) = (map(int, text.split("/")) for text in (first, whole))
    return read_plan(
        f"binomial | stages {n1} then {n - n1} | accept {r1} then {r} | reject none then {r + 1}"
    )


NIST = read_plan("binomial | stages 50 then 100 | accept 2 then 6 | reject 7 then 7")
OPTIMAL, MINIMAX = futility("1/10", "5/29"), futility("1/15", "5/25")
DOUBLES = {
    "A-K08-01": lambda: endings(NIST, 0.06).accepted[0, 0],
    "A-K08-02": lambda: endings(NIST, 0.06).rejected[0, 0],
    "A-K08-03": lambda: average_sample(NIST, 0.06),
    "A-K08-04": lambda: unity((2, 4), 0.95),
    "A-K08-05": lambda: unity((2, 4), 0.10),
    "A-K08-06": lambda: unity((3, 6), 0.95),
    "A-K08-07": lambda: unity((3, 6), 0.10),
    "A-K08-08": lambda: unity((5, 12), 0.95),
    "A-K08-09": lambda: unity((5, 12), 0.10),
    "A-K08-10": lambda: unity((2, 4), 0.95) / 0.01,
    "A-K08-11": lambda: average_sample(OPTIMAL, 0.1),
    "A-K08-12": lambda: endings(OPTIMAL, 0.1).accepted[0, 0],
    "A-K08-13": lambda: average_sample(MINIMAX, 0.1),
    "A-K08-14": lambda: endings(MINIMAX, 0.1).accepted[0, 0],
    "A-K08-15": lambda: average_sample(futility("0/9", "2/17"), 0.05),
    "A-K08-16": lambda: endings(futility("0/9", "2/17"), 0.05).accepted[0, 0],
    "A-K08-17": lambda: average_sample(futility("6/19", "16/39"), 0.3),
}  # fmt: skip


@pytest.mark.parametrize("key", DOUBLES, ids=published.label)
def test_published_double_plans(key: str) -> None:
    published.agrees(key, DOUBLES[key]())


@pytest.mark.parametrize(
    ("first", "whole", "rates", "alpha", "reached"),
    [
        ("1/10", "5/29", (0.1, 0.3), 0.047, 0.805),
        ("1/15", "5/25", (0.1, 0.3), 0.033, 0.802),
        ("0/9", "2/17", (0.05, 0.25), 0.047, 0.812),
        ("6/19", "16/39", (0.3, 0.5), 0.045, 0.804),
    ],
)
def test_attained_risks_of_two_stage_tests(
    first: str, whole: str, rates: tuple[float, float], alpha: float, reached: float
) -> None:
    """R. Simon, Controlled Clinical Trials 10 (1989) 1-10, plans from memory; risks as recomputed there."""
    plan = futility(first, whole)
    assert round(power(plan, rates[0]), 3) == alpha
    assert round(power(plan, rates[1]), 3) == reached


CODES = {
    "G": ((8,) * 7, (None, 1, 2, 3, 5, 7, 9), (4, 5, 6, 7, 8, 9, 10), "n 32 | reject x>=6", (23.23, 22.59)),
    "K": ((32,) * 7, (1, 4, 8, 12, 17, 21, 25), (7, 10, 13, 17, 20, 23, 26), "n 125 | reject x>=15",
          (79.59, 77.66)),
}  # fmt: skip


@pytest.mark.parametrize(
    ("key", "code", "chance", "place"),
    [
        ("A-K09-01", "G", 0.95, 0),
        ("A-K09-02", "G", 0.10, 1),
        ("A-K09-03", "K", 0.95, 0),
        ("A-K09-04", "K", 0.10, 1),
    ],
    ids=lambda value: published.label(value) if str(value).startswith("A-") else str(value),
)
def test_published_multiple_plans(key: str, code: str, chance: float, place: int) -> None:
    sizes, accept, reject, single, samples = CODES[code]
    plan = read_plan(f"binomial | {texts(sizes, accept, reject, 'stage-end')}")
    rate = rate_for(read_plan(f"binomial | {single}"), 1 - chance)
    published.agrees(key, acceptance(plan, rate))
    assert round(average_sample(plan, rate), 2) == samples[place]


@pytest.mark.parametrize("p", [0.001, 0.02, 0.06, 0.3])
def test_curtailed_single_plan(p: float) -> None:
    """The average with rejection at once, as textbooks write it (Montgomery, ch. 15, from memory)."""
    plan = read_plan("binomial | stages 89 | accept 2 | reject 3 | stop on-reject")
    n, c = 89, 2
    exact = n * accuracy.binomial_tail(c, n, p, False) + (c + 1) / p * accuracy.binomial_tail(
        c + 2, n + 1, p, True
    )
    assert average_sample(plan, p) == pytest.approx(float(exact), rel=1e-13)


def test_average_of_early_stops_by_simulation() -> None:
    """2,000 lots of defects per unit: the average lies within four standard errors."""
    plan = read_plan("poisson | stages 10 then 10 | accept 1 then 4 | reject 4 then 5 | stop on-reject")
    rng, rate, spent = np.random.default_rng(7), 0.25, []
    for _ in range(2000):
        times = np.cumsum(rng.exponential(1 / rate, 40))
        first, both = (times < 10).sum(), (times < 20).sum()
        if first <= 1:
            spent.append(10.0)
        else:
            spent.append(times[3] if first >= 4 else times[4] if both >= 5 else 20.0)
    error = np.std(spent) / math.sqrt(len(spent))
    assert average_sample(plan, rate) == pytest.approx(np.mean(spent), abs=4 * error)


@st.composite
def staged_rules(draw: st.DrawFn, most: int = 12) -> tuple[list[int | None], list[int | None]]:
    """Draw acceptance and rejection numbers that go together."""
    count = draw(st.integers(1, 4))
    accept: list[int | None] = []
    reject: list[int | None] = []
    low, high = -1, draw(st.integers(2, 5))
    for _ in range(count - 1):
        low = draw(st.integers(low, low + 3))
        high = max(high, low + 2, draw(st.integers(high, high + 2)))
        accept.append(None if low < 0 else low)
        reject.append(high)
    last = max([low + 1, *(r for r in reject if r is not None), 1])
    return [*accept, last - 1], [*reject, last]


def exact_power(design: str, sizes: list[float], rule: tuple, rate: float) -> tuple[mpmath.mpf, mpmath.mpf]:
    """Return power and acceptance, from sums over all paths in fifty digits."""
    laws = {
        "binomial": lambda x, n, found, done: accuracy.binomial_pmf(x, n, rate),
        "poisson": lambda x, n, found, done: accuracy.poisson_pmf(x, n * rate),
        "lot": lambda x, n, found, done: accuracy.hypergeometric_pmf(
            x, LOT_SIZE - done, int(rate) - found, n
        ),
    }
    tails = {
        "binomial": lambda x, n, found, done: accuracy.binomial_tail(x, n, rate, True),
        "poisson": lambda x, n, found, done: accuracy.poisson_tail(x, n * rate, True),
        "lot": lambda x, n, found, done: accuracy.hypergeometric_tail(
            x, LOT_SIZE - done, int(rate) - found, n, True
        ),
    }
    point, tail = laws[design], tails[design]
    paths, failed, passed, done = {0: mpmath.mpf(1)}, mpmath.mpf(0), mpmath.mpf(0), 0
    for n, accept, reject in zip(sizes, *rule, strict=True):
        after: dict[int, mpmath.mpf] = {}
        for found, chance in paths.items():
            failed += chance * tail(reject - found, n, found, done)
            for more in range(reject - found):
                after[found + more] = after.get(found + more, 0) + chance * point(more, n, found, done)
        passed += sum(chance for count, chance in after.items() if accept is not None and count <= accept)
        paths = {count: chance for count, chance in after.items() if accept is None or count > accept}
        done += n
    return failed, passed


LOT_SIZE = 20_000


@pytest.mark.parametrize("design", ["binomial", "poisson", "lot"])
def test_accuracy_against_fifty_digits(design: str) -> None:
    """Domain: stages to 5,000 items (2,000 units, lots of 20,000), rates 1e-6 to 0.99, chances to 1e-290."""
    rng, worst = random.Random(11), 0.0
    for _ in range(40):
        count = rng.randint(1, 4)
        sizes = [rng.randint(5, 10 ** rng.randint(1, 3) * 5) for _ in range(count)]
        accept, reject, low, high = [], [], -1, rng.randint(2, 4)
        for _ in range(count - 1):
            low, high = low + rng.randint(0, 3), high + rng.randint(0, 3)
            high = max(high, low + 2)
            accept.append(None if low < 0 else low)
            reject.append(high)
        last = max([*reject, low + 2])
        rule = ([*accept, last - 1], [*reject, last])
        rate = 10.0 ** rng.uniform(-6, 0) * 0.99
        head = {"binomial": "binomial", "poisson": "poisson", "lot": f"hypergeometric | lot {LOT_SIZE}"}[
            design
        ]
        if design == "lot":
            sizes, rate = [min(size, 2000) for size in sizes], float(round(rate * LOT_SIZE))
        try:
            plan = read_plan(f"{head} | {texts(tuple(sizes), *map(tuple, rule), 'stage-end')}")
        except InvalidValue:
            continue
        with mpmath.workdps(accuracy.DIGITS):
            exact = exact_power(design, sizes, rule, rate)
            for computed, true in zip((power(plan, rate), acceptance(plan, rate)), exact, strict=True):
                if true > 1e-290:
                    worst = max(worst, float(abs(computed - true) / true))
    assert worst <= 1e-11


def test_large_plans_stay_in_bounds() -> None:
    """The largest numbers allowed, at any rate."""
    plan = read_plan(
        "binomial | stages 4000 then 4000 | accept 100 then 499 | reject 400 then 500 | stop on-reject"
    )
    rates = np.concatenate([np.geomspace(1e-9, 0.9, 30), [0.0, 1.0]])
    kind = kind_of(plan)
    chances = np.array([kind.reject(kind.columns([plan]), rates), kind.accept(kind.columns([plan]), rates)])
    assert ((chances >= 0) & (chances <= 1)).all()
    assert chances.sum(axis=0) == pytest.approx(1, abs=1e-11)
    average = kind.average_amount(kind.columns([plan]), rates)
    assert ((average > 0) & (average <= 8000 * (1 + 1e-12))).all()


@given(rule=staged_rules(), sizes=st.lists(st.integers(4, 60), min_size=4, max_size=4), rate=st.floats(0, 1))
def test_power_rises_and_both_endings_make_one(rule: tuple, sizes: list[int], rate: float) -> None:
    text = texts(tuple(sizes[: len(rule[0])]), *map(tuple, rule), "stage-end")
    assume(rule[1][-1] <= sum(sizes[: len(rule[0])]))
    plan = read_plan(f"binomial | {text}")
    assert power(plan, rate) + acceptance(plan, rate) == pytest.approx(1, abs=1e-12)
    assert power(plan, min(1, rate * 1.1 + 1e-3)) >= power(plan, rate) * (1 - 1e-12)


def outcomes(plan: Plan) -> list[tuple[str, tuple[int, ...]]]:
    """Return what may be observed until a plan of two stages decides."""
    found = []
    for first in range(int(plan.design.stages[0]) + 1):
        if decide(plan, first).startswith("take"):
            found += [(f"{first}+{more}", (first, more)) for more in range(int(plan.design.stages[1]) + 1)]
        else:
            found.append((str(first), (first,)))
    return found


@pytest.mark.parametrize("reject", ["3 then 4", "none then 4"])
def test_p_values_follow_the_order_of_the_stages(reject: str) -> None:
    plan = read_plan(f"binomial | stages 6 then 5 | accept 0 then 3 | reject {reject} | claim p<=0.1")
    rank, chance = {}, {}
    for text, counts in outcomes(plan):
        decision = decide(plan, text)
        early = 2 - len(counts)
        rank[text] = (
            early if "rejected: fail" in decision and "not" not in decision else -early,
            sum(counts),
        )
        chance[text] = math.prod(
            Fraction(math.comb(n, x)) * Fraction(1, 10) ** x * Fraction(9, 10) ** (n - x)
            for n, x in zip((6, 5), counts, strict=False)
        )
    for text, place in rank.items():
        exact = sum(chance[other] for other, beside in rank.items() if beside >= place)
        assert p_value(plan, text) == pytest.approx(float(exact), rel=1e-12)
        assert (p_value(plan, text) <= size(plan) * (1 + 1e-12)) == decide(plan, text).startswith("claim")


@pytest.mark.parametrize(
    ("observed", "beyond"),
    [("0", "1"), ("2+0", "2+1"), ("2+2", "2+3"), ("3+2", "3+3"), ("4", "5"), ("9", "10")],
)
def test_limits_leave_the_rest_to_what_is_further(observed: str, beyond: str) -> None:
    """The upper limit is where what is at most so extreme, all but the next count and beyond, has 10 %."""

    def p_at(rate: float, outcome: str) -> float:
        return p_value(read_plan(DOUBLE.replace("p<=0.02", f"p<={rate!r}")), outcome)

    plan = read_plan(DOUBLE)
    assert p_at(limit(plan, observed, "upper", 0.9), beyond) == pytest.approx(0.9, rel=1e-12)
    if observed == "0":
        assert limit(plan, observed, "lower", 0.9) == 0
    else:
        assert p_at(limit(plan, observed, "lower", 0.9), observed) == pytest.approx(0.1, rel=1e-12)


def test_limits_in_a_lot_are_whole_numbers() -> None:
    plan = read_plan(
        "hypergeometric | lot 60 | stages 10 then 10 | accept 0 then 2 | reject 3 then 3 | claim D<=3"
    )
    assert limit(plan, "0", "lower", 0.95) == 0
    upper = limit(plan, "0", "upper", 0.95)
    at_most = [math.comb(60 - d, 10) / math.comb(60, 10) for d in range(51)]
    assert upper == max(d for d in range(51) if at_most[d] > 0.05)


def test_decisions_go_on_until_a_stage_decides() -> None:
    plan = read_plan(DOUBLE)
    assert decide(plan, "2") == decide(plan, 2.0) == "take the next 50"
    assert decide(plan, "2+1") == "not rejected: pass"
    assert decide(plan, " 2 + 3 ") == decide(plan, 4) == "claim rejected: fail"
    three = read_plan(MULTIPLE)
    assert decide(three, "0") == "take the next 20"
    assert decide(three, "1+1+1") == "not rejected: pass"
    assert decide(read_plan(UNITS), "2") == "take the next 25"


@pytest.mark.parametrize(
    ("observed", "message"),
    [
        ("1+0", "observed must end with stage 1, which decides, but got 1\\+0"),
        ("2+0+0", "observed must have a count for each of 2 stages at most"),
        ("51", "observed must be a whole number from 0 to 50"),
        ("2+", "observed must be a number"),
        (2.5, "observed must be a whole number"),
    ],
)
def test_impossible_observations_are_refused(observed: object, message: str) -> None:
    with pytest.raises(InvalidValue, match=message):
        decide(read_plan(DOUBLE), observed)


def test_questions_without_an_answer_say_why() -> None:
    plan = read_plan(DOUBLE)
    with pytest.raises(NoAnswer, match="no p-value or limit before the plan has ended: take the next 50"):
        p_value(plan, 2)
    with pytest.raises(NoAnswer, match="a stage that may stop early has no count of the whole stage"):
        p_value(read_plan(UNITS), "2+1")
    with pytest.raises(NoAnswer, match="has no single critical value; see SY_REGION"):
        critical(plan)
    assert region(plan) == "accept 1 then 4; reject 4 then 5"


def test_what_a_reader_is_told() -> None:
    told = sentences(read_plan(DOUBLE))
    assert (
        "Stage 1: inspect 50 items, 50 in all. The lot passes on 1 or fewer defectives in all and fails on "
        "4 or more; otherwise go on to stage 2." in told
    )
    assert "Where the claim is just true, 62.32 items are inspected on average." in told
    long = " then ".join
    many = read_plan(
        f"binomial | stages {long(['9'] * 9)} | accept {long('000011112')} | reject {long('222233333')}"
    )
    assert max(map(len, sentences(many))) <= 255
    assert check(read_plan(f"{DOUBLE} | alpha 0.01")) == "size 4.836 % exceeds alpha 1 %"


def test_algebra_is_a_sum_over_the_ways_to_accept() -> None:
    kind = kind_of(read_plan(DOUBLE))
    assert kind.algebra(read_plan(DOUBLE)) == (
        "1 - sum(C(50,k) p^k (1-p)^(50-k), k=0..1)"
        " - sum(C(50,k) p^k (1-p)^(50-k) sum(C(50,j) p^j (1-p)^(50-j), j=0..4-k), k=2..3)"
    )
    lot = read_plan("hypergeometric | lot 40 | stages 5 then 5 | accept none then 1 | reject 2 then 2")
    assert kind_of(lot).algebra(lot) == (
        "1 - sum(C(D,k) C(40-D,5-k)/C(40,5) sum(C(D-k,j) C(35-D+k,5-j)/C(35,5), j=0..1-k), k=0..1)"
    )
    units = read_plan("poisson | stages 2.5 | accept 1 | reject 2")
    assert kind_of(units).algebra(units) == "1 - sum(exp(-2.5 rate) (2.5 rate)^k/k!, k=0..1)"
    assert kind.algebra(read_plan(MULTIPLE)) is None
