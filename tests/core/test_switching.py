"""Switching rules, against a simulation, closed formulas and chains small enough for paper."""

from __future__ import annotations

import math

import numpy as np
import pytest

import steelyard.core.kinds  # noqa: F401 - registers every kind
from steelyard.core.chains import stationary
from steelyard.core.errors import InvalidValue, NoAnswer
from steelyard.core.outgoing import average_sample
from steelyard.core.questions import acceptance, power
from steelyard.core.switching import Scheme, answer, long_run, lots_to_stop
from steelyard.core.switching_rules import STANDARD, Rules, read_rules
from steelyard.core.text import read_plan

NORMAL = read_plan("binomial | n 125 | reject x>=4")
TIGHTENED = read_plan("binomial | n 125 | reject x>=3")
REDUCED = read_plan("binomial | n 50 | reject x>=3")
SCORE = read_plan("binomial | n 125 | reject x>=3")


@pytest.mark.parametrize("rate", [0.001, 0.01, 0.02, 0.03, 0.1])
@pytest.mark.parametrize(("within", "resume"), [(5, 5), (3, 4), (2, 1)])
def test_tightened_and_normal_alone(rate: float, within: int, resume: int) -> None:
    """T. W. Calvin's formula (J. Quality Technology 9, 1977; Schilling and Neubauer, ch. 17, from memory)."""
    s, t = within - 1, resume
    pn, pt = acceptance(NORMAL, rate), acceptance(TIGHTENED, rate)
    i = (2 - pn**s) / ((1 - pn) * (1 - pn**s))
    u = (1 - pt**t) / (pt**t * (1 - pt))
    rules = read_rules(f"tighten 2 of {within} | resume {resume} | stop never")
    found = long_run(Scheme(NORMAL, TIGHTENED, None, rules), rate)
    assert found.acceptance == pytest.approx((pn * i + pt * u) / (i + u), rel=1e-11)
    assert found.shares["normal"] == pytest.approx(i / (i + u), rel=1e-11)
    assert found.shares["reduced"] == 0
    assert found.sample == pytest.approx(125, rel=1e-14)


def test_one_lot_switches_either_way() -> None:
    """With 1 of 1 and 1 the inspection in force depends on the lot before alone."""
    rate = 0.02
    out, back = power(NORMAL, rate), acceptance(TIGHTENED, rate)
    found = long_run(
        Scheme(NORMAL, TIGHTENED, None, read_rules("tighten 1 of 1 | resume 1 | stop never")), rate
    )
    assert found.shares["tightened"] == pytest.approx(out / (out + back), rel=1e-13)


@pytest.mark.parametrize("rate", [0.005, 0.03])
def test_lots_to_the_first_stop(rate: float) -> None:
    """With 1 of 1, never back, and stop 1: a geometric wait under each inspection."""
    rules = Rules(tighten=1, within=1, resume=10**6, stop=1, reduce=None)
    expected = 1 / power(NORMAL, rate) + 1 / power(TIGHTENED, rate)
    with pytest.raises(InvalidValue, match="rules must need no more than 400 states"):
        lots_to_stop(Scheme(NORMAL, TIGHTENED, None, rules), rate)
    rules = Rules(tighten=1, within=1, resume=300, stop=1, reduce=None)
    leave = acceptance(TIGHTENED, rate) ** 300
    failed = power(TIGHTENED, rate)
    spell = (1 - leave) / failed  # lots of one spell of tightened inspection
    expected = (1 / power(NORMAL, rate) + spell) / (1 - leave)
    assert lots_to_stop(Scheme(NORMAL, TIGHTENED, None, rules), rate) == pytest.approx(expected, rel=1e-11)


class Inspector:
    """Someone who follows the rules lot by lot, with lists and counters."""

    def __init__(self, rules: Rules, has_reduced: bool) -> None:
        self.rules, self.has_reduced = rules, has_reduced
        self.start("normal")

    def start(self, mode: str) -> None:
        self.mode, self.history, self.score, self.failed = mode, [], 0.0, 0

    def see(self, accepted: bool, scored: bool) -> bool:
        """Take a lot's outcome; tell whether inspection is discontinued."""
        self.history.append(accepted)
        if self.mode == "normal":
            self.score = self.score + self.rules.by if accepted and scored else 0
            if self.history[-self.rules.within :].count(False) >= self.rules.tighten:
                self.start("tightened")
            elif self.has_reduced and self.rules.reduce is not None and self.score >= self.rules.reduce:
                self.start("reduced")
        elif self.mode == "tightened":
            self.failed += not accepted
            if self.rules.stop is not None and self.failed >= self.rules.stop:
                self.start("tightened")
                return True
            if len(self.history) >= self.rules.resume and all(self.history[-self.rules.resume :]):
                self.start("normal")
        elif not accepted:
            self.start("normal")
        return False


@pytest.mark.parametrize(
    ("rules", "rate", "score"),
    [
        (STANDARD, 0.012, None),
        (STANDARD, 0.02, None),
        (read_rules("tighten 3 of 4 | resume 2 | stop 3 | reduce 10 by 3"), 0.018, SCORE),
        (read_rules("tighten 2 of 3 | resume 3 | stop never | reduce 5"), 0.015, SCORE),
    ],
    ids=str,
)
def test_an_inspector_of_many_lots(rules: Rules, rate: float, score: object) -> None:
    """120,000 simulated lots: every share lies within five standard errors, taken from batches."""
    scheme = Scheme(NORMAL, TIGHTENED, REDUCED, rules, score)
    rng, inspector = np.random.default_rng(5), Inspector(rules, True)
    plans = {"normal": (125, 3), "tightened": (125, 2), "reduced": (50, 2)}
    counts = {mode: rng.binomial(n, rate, 120_000) for mode, (n, _) in plans.items()}
    modes, accepted = [], []
    for lot in range(120_000):
        mode = inspector.mode
        count = counts[mode][lot]
        modes.append(mode)
        accepted.append(count <= plans[mode][1])
        inspector.see(bool(accepted[-1]), score is None or bool(count <= 2))
    found = long_run(scheme, rate)
    compare = {"acceptance": np.array(accepted, dtype=float)}
    compare |= {mode: np.array([m == mode for m in modes], dtype=float) for mode in plans}
    for name, series in compare.items():
        batches = series.reshape(60, -1).mean(axis=1)
        error = batches.std(ddof=1) / math.sqrt(60)
        expected = found.acceptance if name == "acceptance" else found.shares[name]
        assert series.mean() == pytest.approx(expected, abs=5 * error + 1e-4)


def test_an_inspector_until_the_stop() -> None:
    """2,000 simulated schemes: the mean number of lots lies within four standard errors."""
    rate, rng = 0.025, np.random.default_rng(8)
    lengths = []
    for _ in range(2000):
        inspector, lots, stopped = Inspector(STANDARD, True), 0, False
        while not stopped:
            plan = {"normal": (125, 3), "tightened": (125, 2), "reduced": (50, 2)}[inspector.mode]
            lots += 1
            stopped = inspector.see(bool(rng.binomial(plan[0], rate) <= plan[1]), True)
        lengths.append(lots)
    error = np.std(lengths) / math.sqrt(len(lengths))
    assert lots_to_stop(Scheme(NORMAL, TIGHTENED, REDUCED), rate) == pytest.approx(
        np.mean(lengths), abs=4 * error
    )


def test_lots_that_never_or_always_fail() -> None:
    scheme = Scheme(NORMAL, TIGHTENED, REDUCED)
    best, worst = long_run(scheme, 0), long_run(scheme, 1)
    assert (best.acceptance, best.sample, best.shares["reduced"]) == (1, 50, 1)
    assert (worst.acceptance, worst.sample, worst.shares["tightened"]) == (0, 125, 1)
    assert lots_to_stop(scheme, 1) == 7  # two under normal, five under tightened inspection
    with pytest.raises(NoAnswer, match="inspection is never discontinued at this rate"):
        lots_to_stop(scheme, 0)
    with pytest.raises(NoAnswer, match="inspection is never discontinued"):
        lots_to_stop(Scheme(NORMAL, TIGHTENED, None, read_rules("stop never")), 0.1)


def test_small_shares_keep_their_digits() -> None:
    """Tightened inspection at 10 ppm: about the chance of two failures within five lots."""
    rate = 1e-5
    failed = power(NORMAL, rate)
    found = long_run(Scheme(NORMAL, TIGHTENED, None, read_rules("stop never")), rate)
    spell, first = 5 / acceptance(TIGHTENED, rate) ** 0, 1 / (4 * failed * failed)
    assert found.shares["tightened"] == pytest.approx(spell / first, rel=1e-4)
    assert found.shares["tightened"] < 1e-20


def test_the_long_run_of_a_random_chain() -> None:
    rng = np.random.default_rng(2)
    matrix = rng.dirichlet(np.ones(7) * 0.3, size=7)
    weights = stationary(matrix)
    assert weights @ matrix == pytest.approx(weights, rel=1e-12)
    assert weights.sum() == pytest.approx(1)


def test_every_answer() -> None:
    scheme = Scheme(NORMAL, TIGHTENED, REDUCED)
    found = long_run(scheme, "1.5%")
    assert answer(scheme, "1.5%", "acceptance") == found.acceptance
    assert answer(scheme, "1.5%", "lots") == lots_to_stop(scheme, "1.5%")
    assert sum(answer(scheme, "1.5%", mode) for mode in found.shares) == pytest.approx(1)
    average = sum(
        found.shares[mode] * n for mode, n in (("normal", 125), ("tightened", 125), ("reduced", 50))
    )
    assert answer(scheme, "1.5%", "sample") == pytest.approx(average)


def test_plans_in_stages_switch_too() -> None:
    double = read_plan("binomial | stages 80 then 80 | accept 1 then 4 | reject 4 then 5")
    found = long_run(Scheme(double, TIGHTENED), 0.01)
    shares = found.shares["normal"] * average_sample(double, 0.01) + found.shares["tightened"] * 125
    assert found.sample == pytest.approx(shares)


@pytest.mark.parametrize(
    ("text", "message"),
    [
        ("tighten 3 of 2", "tighten must name no more lots than it looks at, but got 3 of 2"),
        ("tighten two", "tighten must have the form 2 of 5, but got two"),
        ("loosen 5", "rules must be one of tighten, resume, stop, reduce, but got loosen"),
        ("resume 0", "resume must be a whole number of at least 1"),
        ("stop 5 | stop 4", "stop must be written once"),
        ("reduce -1", "reduce must have the form 30 by 2, both above 0"),
    ],
)
def test_rules_are_read_with_care(text: str, message: str) -> None:
    with pytest.raises(InvalidValue) as refusal:
        read_rules(text)
    assert message in str(refusal.value)


def test_rules_are_written_as_they_are_read() -> None:
    for text in (
        "tighten 2 of 5 | resume 5 | stop 5 | reduce 30 by 2",
        "tighten 1 of 3 | resume 2 | stop never | reduce never",
    ):
        assert str(read_rules(text)) == text
    assert str(read_rules("REDUCE 10")) == "tighten 2 of 5 | resume 5 | stop 5 | reduce 10 by 1"


def test_plans_that_do_not_go_together_are_refused() -> None:
    with pytest.raises(InvalidValue, match="plans must be about the same parameter, but got p and rate"):
        Scheme(NORMAL, read_plan("poisson | units 5 | reject x>=2"))
    with pytest.raises(InvalidValue, match="score_plan must accept less often than the normal plan"):
        long_run(Scheme(NORMAL, TIGHTENED, REDUCED, STANDARD, REDUCED), 0.03)
