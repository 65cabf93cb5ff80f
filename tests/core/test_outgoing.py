"""Average outgoing quality, its limit and the average total inspected."""

from __future__ import annotations

from collections.abc import Callable
from fractions import Fraction
from functools import partial

import inspectors
import numpy as np
import published
import pytest

import steelyard.core.kinds  # noqa: F401 - registers every kind
from steelyard.core.errors import InvalidValue, NoAnswer
from steelyard.core.outgoing import Rectified, average_sample, outgoing, outgoing_limit, total_inspected
from steelyard.core.questions import acceptance
from steelyard.core.rates import rate_for
from steelyard.core.stages import STOPS
from steelyard.core.text import read_plan

NIST = read_plan("binomial | n 52 | reject x>=4")
MANY = 10**12  # a lot so large that the factor (N - n)/N is 1


def without_factor(rate: float) -> float:
    return rate * acceptance(NIST, rate)


def factor(accept: int) -> float:
    return outgoing_limit(read_plan(f"poisson | units 1 | reject x>={accept + 1}"), MANY)[0]


def limit_percent(n: int, accept: int, lot: int = MANY) -> float:
    return 100 * outgoing_limit(read_plan(f"poisson | units {n} | reject x>={accept + 1}"), lot)[0]


PUBLISHED = {
    "A-K07-01": lambda: without_factor(0.02),
    "A-K07-02": lambda: without_factor(0.06),
    "A-K07-03": lambda: without_factor(0.10),
    "A-K07-04": lambda: outgoing(NIST, 0.03, 10_000),
    "A-K07-05": lambda: total_inspected(NIST, 0.01, 10_000),
    "A-K07-06": lambda: total_inspected(NIST, 0.03, 10_000),
    "A-K07-07": lambda: total_inspected(NIST, 0.05, 10_000),
    "A-K07-08": lambda: total_inspected(NIST, 0.10, 10_000),
    "A-K07-09": lambda: total_inspected(NIST, 0.14, 10_000),
    "A-K07-10": lambda: outgoing(read_plan("binomial | n 89 | reject x>=3"), 0.01, 10_000),
    "A-K07-11": lambda: factor(1),
    "A-K07-12": lambda: factor(3),
    "A-K07-13": lambda: factor(5),
    "A-K07-14": lambda: factor(10),
    "A-K07-15": lambda: limit_percent(20, 0),
    "A-K07-16": lambda: limit_percent(125, 3),
    "A-K07-17": lambda: limit_percent(50, 1),
    "A-K07-18": lambda: limit_percent(13, 2),
    "A-K12-01": lambda: limit_percent(65, 3, 5000),
    "A-K12-02": lambda: 100 * rate_for(read_plan("poisson | units 65 | reject x>=4"), 0.9),
}  # fmt: skip


@pytest.mark.parametrize("key", PUBLISHED, ids=published.label)
def test_published_figures(key: str) -> None:
    published.agrees(key, PUBLISHED[key]())


def test_a_finite_lot_is_summed_over_what_its_sample_finds() -> None:
    """The short cut p Pa (N - n)/N would give 0.01087: passed samples hold fewer defectives than others."""
    plan = read_plan("hypergeometric | lot 200 | n 50 | reject x>=2")
    assert round(outgoing(plan, 8), 5) == 0.01316
    assert round(8 / 200 * acceptance(plan, 8) * 150 / 200, 5) == 0.01087


RULES = [
    ((4,), (1,), (2,)),
    ((3, 3), (0, 2), (3, 3)),
    ((3, 3), (0, 1), (None, 2)),
    ((2, 3, 2), (None, 0, 2), (2, 3, 3)),
]


def texts(sizes: tuple, accept: tuple, reject: tuple, stop: str) -> str:
    lists = (" then ".join("none" if x is None else str(x) for x in xs) for xs in (sizes, accept, reject))
    return "stages {} | accept {} | reject {} | stop {}".format(*lists, stop)


def leaving(mean: Callable, size: int) -> dict[str, float]:
    """Return outgoing quality and total inspected, from what becomes of every lot."""
    kept = mean(lambda verdict, came: came - verdict.found if verdict.passed else 0)
    came = mean(lambda verdict, came: came)
    removed = kept / (size - came + kept) if size - came + kept else Fraction(0)
    total = mean(lambda verdict, came: verdict.items if verdict.passed else size)
    return {"replaced": float(kept / size), "removed": float(removed), "total": float(total)}


@pytest.mark.parametrize("stop", STOPS)
@pytest.mark.parametrize("rule", RULES, ids=str)
def test_an_inspector_who_meets_every_lot(rule: tuple, stop: str) -> None:
    lot = read_plan(f"hypergeometric | lot 10 | {texts(*rule, stop)}")
    sample = read_plan(f"binomial | {texts(*rule, stop)}")
    every = inspectors.Tally.of(10, inspectors.staged(*rule, stop))
    for defectives in (0, 1, 2, 5, 9, 10):
        found = leaving(partial(every.mean_of_lots, defectives), 10)
        assert outgoing(lot, defectives) == pytest.approx(found["replaced"], rel=1e-12, abs=0)
        assert outgoing(lot, defectives, None, "removed") == pytest.approx(found["removed"], rel=1e-12, abs=0)
        assert total_inspected(lot, defectives) == pytest.approx(found["total"], rel=1e-12)
    for rate in (Fraction(0), Fraction(1, 5), Fraction(7, 10), Fraction(1)):
        found = leaving(partial(every.mean, rate), 10)
        assert outgoing(sample, float(rate), 10) == pytest.approx(found["replaced"], rel=1e-12, abs=0)
        assert outgoing(sample, float(rate), 10, "removed") == pytest.approx(
            found["removed"], rel=1e-12, abs=0
        )
        assert total_inspected(sample, float(rate), 10) == pytest.approx(found["total"], rel=1e-12)


def test_a_single_plan_is_a_plan_of_one_stage() -> None:
    for head, rate, lot in (
        ("binomial", 0.04, 900),
        ("poisson", 0.04, 900),
        ("hypergeometric | lot 900", 30, None),
    ):
        amount = "units" if head == "poisson" else "n"
        single = read_plan(f"{head} | {amount} 60 | reject x>=4")
        staged = read_plan(f"{head} | stages 60 | accept 3 | reject 4")
        for question in (outgoing, total_inspected):
            assert question(single, rate, lot) == pytest.approx(question(staged, rate, lot), rel=1e-13)
        (limit, where), (same, there) = outgoing_limit(single, lot), outgoing_limit(staged, lot)
        assert limit == pytest.approx(same, rel=1e-13)
        assert where == pytest.approx(there, rel=1e-6)  # the curve is flat there
        assert average_sample(single, rate) == average_sample(staged, rate) == 60


def test_a_plan_that_inspects_the_whole_lot_leaves_nothing() -> None:
    plan = read_plan("hypergeometric | lot 20 | n 20 | reject x>=3")
    assert outgoing(plan, 2) == 0
    assert outgoing_limit(plan) == (0.0, 0.0)


def test_a_demonstration_passes_the_lot_by_rejecting() -> None:
    shown = read_plan("binomial | n 59 | claim p>=0.05 | reject x<=0 | verdict pass")
    plain = read_plan("binomial | n 59 | reject x>=1")
    assert outgoing(shown, 0.01, 5000) == outgoing(plain, 0.01, 5000)


@pytest.mark.parametrize("defectives", ["replaced", "removed"])
@pytest.mark.parametrize(
    "text",
    [
        "hypergeometric | lot 300 | n 40 | reject x>=3",
        "hypergeometric | lot 120 | stages 20 then 40 | accept 0 then 3 | reject 3 then 4",
        "hypergeometric | lot 60 | stages 2 then 8 then 9 | accept 0 then 1 then 5 | reject 2 then 6 then 6",
    ],
)
def test_the_limit_in_a_lot_is_the_greatest_of_all(text: str, defectives: str) -> None:
    plan = read_plan(text)
    every = Rectified.of(plan, None, defectives).quality(np.arange(plan.design.lot + 1.0))
    limit, where = outgoing_limit(plan, None, defectives)
    assert limit == pytest.approx(every.max(), rel=1e-13)
    assert where == every.argmax()


@pytest.mark.parametrize(
    "text",
    [
        "binomial | n 52 | reject x>=4",
        "binomial | stages 3 then 300 | accept 0 then 40 | reject 3 then 41",
        "binomial | stages 20 then 20 then 20 | accept none then 1 then 3 | reject 3 then 4 then 4",
        "poisson | stages 0.1 then 50 | accept 0 then 4 | reject 2 then 5",
        "binomial | n 100000 | reject x>=3",
    ],
)
def test_the_limit_of_a_process_is_not_exceeded(text: str) -> None:
    plan, lot = read_plan(text), 200_000
    most, where = outgoing_limit(plan, lot)
    grid = np.geomspace(1e-8, 0.999, 20_000) * (60 if "poisson" in text else 1)
    values = Rectified.of(plan, lot).quality(grid)
    assert values.max() <= most * (1 + 1e-12)
    assert most == pytest.approx(values.max(), rel=1e-6)
    assert most == pytest.approx(outgoing(plan, where, lot), rel=1e-13)


def test_the_formula_of_removed_defectives() -> None:
    n, lot, p = 52, 10_000, 0.05
    pa = acceptance(NIST, p)
    written = p * pa * (lot - n) / (lot - n * p - (1 - pa) * p * (lot - n))
    assert outgoing(NIST, p, lot, "removed") == pytest.approx(written, rel=1e-13)


@pytest.mark.parametrize(
    ("text", "lot", "defectives", "message"),
    [
        (
            "binomial | n 52 | reject x>=4",
            None,
            "replaced",
            "lot must be given for a plan that does not name it",
        ),
        (
            "binomial | n 52 | reject x>=4",
            51,
            "replaced",
            "lot must hold at least the 52 that the plan may inspect",
        ),
        (
            "hypergeometric | lot 90 | n 9 | reject x>=1",
            80,
            "replaced",
            "lot must be the plan's own 90, or left out",
        ),
        ("poisson | units 9 | reject x>=4", 80, "removed", "be replaced where defects are counted"),
        ("binomial | n 52 | reject x>=4", 80, "kept", "defectives must be one of replaced, removed"),
    ],
)
def test_what_makes_no_sense_is_refused(text: str, lot: object, defectives: str, message: str) -> None:
    with pytest.raises(InvalidValue) as refusal:
        outgoing(read_plan(text), 0.01 if "hyper" not in text else 1, lot, defectives)
    assert message in str(refusal.value)


@pytest.mark.parametrize(
    "text",
    [
        "binomial | n 52 | claim p>=0.1 | reject x<=1",
        "binomial | n 52 | claim p=0.1 | reject x>=12",
        "binomial | n 52 | misses 0.1 | reject x>=4",
    ],
)
def test_plans_that_rectify_nothing_are_refused(text: str) -> None:
    with pytest.raises(NoAnswer):
        outgoing(read_plan(text), 0.01, 1000)
