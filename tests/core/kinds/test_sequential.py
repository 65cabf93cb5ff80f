"""Sequential plans, against an inspector who meets every sequence, item by item, and published values."""

from __future__ import annotations

import math
import random
from fractions import Fraction

import inspectors
import mpmath
import numpy as np
import published
import pytest

import steelyard.core.kinds  # noqa: F401 - registers every kind
from steelyard.core.errors import InvalidValue, NoAnswer
from steelyard.core.evidence import decide, limit, p_value
from steelyard.core.kind import kind_of
from steelyard.core.lines import Line, SequentialRule, Truncated, wald_lines
from steelyard.core.numbers import typed
from steelyard.core.outgoing import average_sample, endings, outgoing, outgoing_limit, steps, total_inspected
from steelyard.core.plan import Plan
from steelyard.core.questions import acceptance, power, region, size
from steelyard.core.review import sentences
from steelyard.core.sequential import sequential_plan
from steelyard.core.text import read_plan, write_plan

TEXT = "binomial | sequential to 120 | accept x<=0.04*n-0.94 | reject x>=0.04*n+1.21 | at end accept x<=3"


@pytest.mark.parametrize(
    "text",
    [
        TEXT,
        f"{TEXT} | claim p<=0.01 | alpha 0.05",
        "binomial | sequential to 9000 | accept x<=4e-05*n-1.5 | reject x>=4e-05*n+2 | at end accept x<=1",
    ],
)
def test_canonical_texts_are_written_back_as_they_are(text: str) -> None:
    assert write_plan(read_plan(text)) == text


def test_spaces_case_and_signs_are_free() -> None:
    free = "Binomial|AT END accept x ≤ 3|sequential to 120|reject X >= 0.04 * n + 1.21|accept x≤.04*n - 0.94"
    assert write_plan(read_plan(free)) == TEXT


@pytest.mark.parametrize(
    ("old", "new", "message"),
    [
        ("to 120", "to 0", "sequential must be a whole number from 1 to 1000000"),
        ("to 120", "120.5", "sequential must be a whole number"),
        ("accept x<=0.04*n-0.94 | ", "", "accept must be written in the plan, e.g. accept x<=0.04*n-0.94"),
        ("x<=0.04*n-0.94", "x>=0.04*n-0.94", "accept must have the form x<=0.04*n-0.94"),
        ("x<=0.04*n-0.94", "x<=4", "accept must have the form x<=0.04*n-0.94"),
        ("x<=0.04*n-0.94", "x<=0.04*n", "accept must start below 0: before the first item"),
        ("x>=0.04*n+1.21", "x>=0.04*n-0.1", "reject must start above 0"),
        ("x>=0.04*n+1.21", "x>=1.5*n+1.21", "reject must have a slope between 0 and 1"),
        ("x>=0.04*n+1.21", "x>=0.04*n+0.01", "accept and reject must be more than 1 and at most"),
        ("x>=0.04*n+1.21", "x>=0.02*n+1.21", "accept and reject must be more than 1 and at most"),
        (" | at end accept x<=3", "", "at end must be written in the plan, e.g. at end accept x<=3"),
        ("at end accept x<=3", "at end reject x>=4", "at end must have the form accept x<=3"),
        ("at end accept x<=3", "at end accept x<=2", "at end must accept up to 3 to 6, which the lines"),
        ("at end accept x<=3", "at end accept x<=7", "at end must accept up to 3 to 6, which the lines"),
        ("to 120", "to 99999", "reject must not pass 150 before the end"),
        ("at end accept x<=3", "at end accept x<=3 | claim p>=0.1", "claim must have the form p<=…"),
    ],
)  # fmt: skip
def test_refusals_name_the_field(old: str, new: str, message: str) -> None:
    with pytest.raises(InvalidValue) as refusal:
        read_plan(TEXT.replace(old, new))
    assert message in str(refusal.value)


LINES = [
    ("0.25", "-0.6", "1.1", 12, 3),
    ("0.25", "-0.5", "0.75", 12, 2),
    ("0.4", "-0.9", "0.6", 11, 4),
    ("0.1", "-0.35", "1", 13, 1),
    ("0.5", "-1", "1", 10, 5),
]


@pytest.mark.parametrize("lines", LINES, ids=str)
def test_an_inspector_who_meets_every_sequence(lines: tuple) -> None:
    slope, low, high, most, last = lines
    inspect = inspectors.sequential(Fraction(slope), Fraction(low), Fraction(high), most, last)
    plan = read_plan(
        f"binomial | sequential to {most} | accept x<={slope}*n{low} | reject x>={slope}*n+{high}"
        f" | at end accept x<={last}"
    )
    every, lot = inspectors.Tally.of(most, inspect), most + 5
    for rate in (0.0, 0.1, 0.45, 0.9, 1.0):
        at = typed(rate)
        failed = every.mean(at, lambda verdict, _: not verdict.passed)
        items = every.mean(at, lambda verdict, _: verdict.items)
        total = every.mean(at, lambda verdict, _: verdict.items if verdict.passed else most + 5)
        assert power(plan, rate) == pytest.approx(float(failed), rel=1e-12, abs=0)
        assert acceptance(plan, rate) == pytest.approx(float(1 - failed), rel=1e-12, abs=0)
        assert average_sample(plan, rate) == pytest.approx(float(items), rel=1e-12)
        assert total_inspected(plan, rate, lot) == pytest.approx(float(total), rel=1e-12)


def item_by_item(rule: SequentialRule, most: int, rate: object) -> tuple:
    """Return power, acceptance and average sample: one step for every item, no look left out."""
    one = rate / rate if rate else 1
    states, failed, passed, spent = {0: one}, 0 * one, 0 * one, 0 * one
    for n in range(1, most + 1):
        accept, reject = rule.numbers(n)
        after: dict[int, object] = {}
        for count, chance in states.items():
            spent += chance
            after[count] = after.get(count, 0) + chance * (1 - rate)
            after[count + 1] = after.get(count + 1, 0) + chance * rate
        failed += sum(chance for count, chance in after.items() if count >= reject)
        passed += sum(chance for count, chance in after.items() if count <= accept)
        states = {count: chance for count, chance in after.items() if accept < count < reject}
    passed += sum(chance for count, chance in states.items() if count <= rule.last)
    failed += sum(chance for count, chance in states.items() if count > rule.last)
    return failed, passed, spent


def test_accuracy_against_fifty_digits() -> None:
    """Domain: up to 1,500 items, lines 2 to 12 counts apart, rates 1e-5 to 0.9, chances from 1e-290."""
    rng, worst = random.Random(3), 0.0
    with mpmath.workdps(60):
        for _ in range(8):
            slope = round(10 ** rng.uniform(-3, -0.3), 6)
            lines = Line(slope, -round(rng.uniform(0.1, 6), 3)), Line(slope, round(rng.uniform(1, 6), 3))
            most = min(int(rng.uniform(5, 40) / slope), 1500)
            low, high = SequentialRule(*lines, 0).numbers(most)
            rule = SequentialRule(*lines, rng.randrange(max(low, 0), min(high, most)))
            plan = Plan("sequential binomial", Truncated(most), rule)
            rate = min(slope * 10 ** rng.uniform(-1.5, 1), 0.9)
            exact = item_by_item(rule, most, mpmath.mpf(rate))
            ours = power(plan, rate), acceptance(plan, rate), average_sample(plan, rate)
            for computed, true in zip(ours, exact, strict=True):
                if true > 1e-290:
                    worst = max(worst, float(abs(computed - true) / true))
    assert worst <= 1e-11


def test_two_hundred_rates_at_a_thousand_items() -> None:
    rule = SequentialRule(*wald_lines(0.01, 0.05, 0.1, 0.9), 40)
    plan = Plan("sequential binomial", Truncated(1000), rule)
    kind, rates = kind_of(plan), np.linspace(0.001, 0.3, 200)
    columns = kind.columns([plan])
    found = kind.reject(columns, rates), kind.accept(columns, rates), kind.average_amount(columns, rates)
    for place in (0, 40, 199):
        exact = item_by_item(rule, 1000, float(rates[place]))
        assert [column[place] for column in found] == pytest.approx(exact, rel=1e-11)


def test_the_average_obeys_walds_identity() -> None:
    """Average sample times rate is the expected count at the end (A. Wald, 1944, from memory)."""
    plan = sequential_plan("1%", "5%", "6%", "90%", 2500)  # hardly a sample goes on to the end
    looks = kind_of(plan).looks(plan)
    for rate in (0.001, 0.02, 0.06, 0.3):
        found = endings(plan, rate)
        count = sum(
            look.accept * accepted + look.reject * rejected
            for look, accepted, rejected in zip(
                looks, found.accepted[:, 0], found.rejected[:, 0], strict=True
            )
        )
        assert average_sample(plan, rate) * rate == pytest.approx(count, rel=1e-10)


SPRT = {
    "A-K10-01": lambda: -wald_lines(0.01, 0.05, 0.10, 0.90)[0].intercept,
    "A-K10-02": lambda: wald_lines(0.01, 0.05, 0.10, 0.90)[1].intercept,
    "A-K10-03": lambda: wald_lines(0.01, 0.05, 0.10, 0.90)[0].slope,
    "A-K10-04": lambda: numbers(0.10, 24)[0],
    "A-K10-05": lambda: numbers(0.10, 24)[1],
    "A-K10-06": lambda: numbers(0.06, 46)[0],
    "A-K10-07": lambda: numbers(0.06, 46)[1],
    "A-K10-08": lambda: wald_lines(0.1, 0.02, 0.3, 0.97)[1].intercept,
}  # fmt: skip


def numbers(catch: float, n: int) -> tuple[int, int]:
    return SequentialRule(*wald_lines(0.01, 0.05, catch, 0.90), 0).numbers(n)


@pytest.mark.parametrize("key", SPRT, ids=published.label)
def test_published_lines(key: str) -> None:
    published.agrees(key, SPRT[key]())


def test_walds_bound_is_the_ratio_of_power_and_alpha() -> None:
    """A-K10-09: A = (1 - beta)/alpha = 18, from the distance of the reject line."""
    low, high = 0.01, 0.1
    line = wald_lines(low, 0.05, high, 0.90)[1]
    ratio = math.log(high / low) + math.log1p(-low) - math.log1p(-high)
    assert math.exp(line.intercept * ratio) == pytest.approx(float(published.ROWS["A-K10-09"]["computed"]))


def test_a_line_that_passes_a_whole_number_by_a_hair() -> None:
    """NIST's table prints 2 at n = 20, where the line passes 2.00033: in full precision it is 3."""
    assert round(float(wald_lines(0.01, 0.05, 0.10, 0.90)[1].at(20)), 5) == 2.00033
    assert numbers(0.10, 20)[1] == 3
    assert numbers(0.10, 19)[1] == 2


def test_ties_of_line_and_count_are_decided_on_the_decimals_as_typed() -> None:
    """After 50 items 0.02 n - 1 is 0 and 0.02 n + 1 is 2, in decimals; both counts decide."""
    rule = SequentialRule(Line(0.02, -1.0), Line(0.02, 1.0), 5)
    assert rule.numbers(49) == (-1, 2)
    assert rule.numbers(50) == (0, 2)
    assert rule.numbers(51) == (0, 3)
    assert rule.numbers(350) == (6, 8)


@pytest.mark.parametrize(
    ("observed", "decision"),
    [
        ("1 inspected 1 found", "take the next item"),
        ("2 inspected 2 found", "claim rejected: fail"),
        ("23 inspected 0 found", "take the next item"),
        ("24 inspected 0 found", "not rejected: pass"),
        ("40 inspected 3 found", "claim rejected: fail"),
        ("45 inspected, 3 found", "take the next item"),
        ("120 inspected 4 found", "claim rejected: fail"),
        ("120 inspected 3 found", "not rejected: pass"),
    ],
)
def test_decisions_at_every_item(observed: str, decision: str) -> None:
    assert decide(read_plan(TEXT), observed) == decision


@pytest.mark.parametrize(
    ("observed", "message"),
    [
        ("3", "observed must have the form 40 inspected 3 found"),
        ("121 inspected 3 found", "observed must be a whole number from 1 to 120"),
        ("3 inspected 4 found", "observed must be a whole number from 0 to 3"),
    ],
)
def test_impossible_observations_are_refused(observed: str, message: str) -> None:
    with pytest.raises(InvalidValue, match=message):
        decide(read_plan(TEXT), observed)


def test_the_inspectors_table_changes_where_a_number_does() -> None:
    plan = read_plan(TEXT)
    table = steps(plan)
    assert table[:4] == [(1.0, None, 2), (20.0, None, 3), (24.0, 0, 3), (45.0, 0, 4)]
    assert table[-1] == (120.0, 3, 4)
    for n in range(1, 120):
        _, accept, reject = [row for row in table if row[0] <= n][-1]
        assert plan.rule.numbers(n) == (-1 if accept is None else accept, reject)


def test_the_plan_for_two_risks() -> None:
    plan = sequential_plan("1%", "5%", "5%", "90%")
    assert plan.design.sequential == 2 * 132  # twice the single plan, n 132 and x>=4
    assert size(plan) <= 0.05
    assert power(plan, 0.05) > 0.9
    assert average_sample(plan, 0.01) < 90
    assert len(write_plan(plan)) < 255
    assert read_plan(write_plan(plan)) == plan
    short = sequential_plan("1%", "5%", "5%", "90%", 132)
    assert short.rule.last == 3
    assert size(short) <= 0.05 < size(read_plan(write_plan(short).replace("x<=3", "x<=2")))


@pytest.mark.parametrize(
    ("arguments", "message"),
    [
        (("0%", "5%", "5%", "90%"), "claim must be of the form p<=0.02, above 0"),
        (("p>=5%", "5%", "1%", "90%"), "claim must be of the form p<=0.02, above 0"),
        (("1%", "5%", 1, "90%"), "catch must be less than 1"),
        (("1%", "5%", "5%", "90%", 0), "stop_at must be a whole number from 1"),
        (("1%", "5%", "1.2%", "90%"), "reject must not pass 150 before the end"),
    ],
)
def test_what_makes_no_sense_is_refused(arguments: tuple, message: str) -> None:
    with pytest.raises(InvalidValue) as refusal:
        sequential_plan(*arguments)
    assert message in str(refusal.value)


def test_every_other_question() -> None:
    plan = read_plan(f"{TEXT} | claim p<=0.01 | alpha 0.05")
    assert region(plan) == "accept x ≤ 0.04*n-0.94; reject x ≥ 0.04*n+1.21; at end accept x ≤ 3"
    assert max(map(len, sentences(plan))) <= 255
    assert "Where the claim is just true, 30.2 items are inspected on average." in sentences(plan)
    assert kind_of(plan).native(plan, "B2") is None
    with pytest.raises(NoAnswer, match="a plan of kind sequential binomial has no p-value"):
        p_value(plan, "24 inspected 0 found")
    with pytest.raises(NoAnswer, match="has no confidence limit"):
        limit(plan, "24 inspected 0 found", "upper")
    most, where = outgoing_limit(plan, 1000)
    assert most == pytest.approx(outgoing(plan, where, 1000), rel=1e-13)
    assert most >= max(outgoing(plan, p / 100, 1000) for p in range(1, 30))
