"""The smallest plans against a search that looks at every size in exact arithmetic."""

from __future__ import annotations

import dataclasses
import random
from dataclasses import dataclass
from fractions import Fraction

import brute_sizes as brute
import numpy as np
import pytest

import steelyard.core.kinds  # noqa: F401 - registers them
from steelyard.core import two_sided
from steelyard.core.errors import InvalidValue, NoAnswer
from steelyard.core.numbers import typed
from steelyard.core.plan import SPLITS
from steelyard.core.smallest import Sizes, smallest_plan, smallest_sizes
from steelyard.core.text import write_plan

KINDS = ("binomial", "poisson", "hypergeometric")
SYMBOLS = {"binomial": "p", "poisson": "rate", "hypergeometric": "D"}
AMOUNTS = {"binomial": "n", "poisson": "units", "hypergeometric": "n"}
CASES, TWO_SIDED, TIES, MOST = 2000, 90, 200, 120
RATES = {  # few, because their exact laws are kept
    "binomial": (
        0.005,
        0.01,
        0.02,
        0.03,
        0.05,
        0.08,
        0.1,
        0.15,
        0.2,
        0.3,
        0.4,
        0.5,
        0.6,
        0.75,
        0.9,
        0.95,
        0.98,
    ),
    "poisson": (0.01, 0.02, 0.05, 0.08, 0.1, 0.15, 0.25, 0.4, 0.6, 0.8, 1.0, 1.25, 1.6, 2.0, 2.7, 4.0),
}


@dataclass(frozen=True)
class Asked:
    """One requirement; `largest` is the amount up to which the search by hand looks."""

    kind: str
    side: str
    claim: float
    catches: tuple[float, ...]
    alpha: float
    power: float
    largest: int
    lot: int | None = None
    split: str = "half"

    def at(self, amount: int, rate: float) -> brute.Amount:
        """Return the exact law of an amount at a rate."""
        if self.kind == "binomial":
            return brute.binomial(amount, typed(rate))
        if self.kind == "poisson":
            return brute.poisson(amount * typed(rate))
        assert self.lot is not None
        return brute.hypergeometric(self.lot, int(rate), amount)

    def answers(self) -> tuple[int, int]:
        """Return the first and the lasting amount."""
        alpha, power = typed(self.alpha), typed(self.power)
        met = [
            brute.meets(
                self.at(amount, self.claim),
                [self.at(amount, catch) for catch in self.catches],
                self.side,
                alpha,
                power,
                self.split,
            )
            for amount in range(1, self.largest + 1)
        ]
        return brute.first_and_lasting(met)


def random_case(kind: str, side: str, rng: random.Random) -> Asked:
    """Return a requirement that needs no more than `MOST` items or units, or any part of a small lot."""
    while True:
        lot = rng.randint(5, 70) if kind == "hypergeometric" else None
        claim, *rates = (float(rate) for rate in rng.sample(RATES.get(kind) or range((lot or 0) + 1), 3))
        catches = tuple(sorted(rates[: rng.randint(1, 2) if side == "either" else 1]))
        sides = ["above" if rate > claim else "below" for rate in catches]
        always = side != "either" and claim == (lot if side == "above" else 0)
        if always or sides != (
            ["below", "above"] if len(catches) == 2 else [side if side != "either" else sides[0]]
        ):
            continue
        alpha = rng.choice((0.05, round(rng.uniform(0.001, 0.3), 3)))
        power, split = round(rng.uniform(0.31, 0.995), 3), rng.choice(SPLITS)
        largest = lot or max(brute.enough(kind, claim, catch, alpha, power) for catch in catches)
        if largest <= MOST:
            return Asked(kind, side, claim, catches, alpha, power, largest, lot, split)


def tied(case: Asked, rng: random.Random) -> Asked | None:
    """Return the case with an alpha or a power that some size meets exactly, if a decimal number can."""
    amount = rng.randint(1, min(case.largest, 16))
    laws = case.at(amount, case.claim), case.at(amount, case.catches[0])
    x = rng.randint(0, len(laws[0].weights) - 1)
    low, high = (-1, x) if case.side == "above" else (x, len(laws[0].weights))
    size, power = (Fraction(brute.power(law, low, high), law.total) for law in laws)
    if typed(float(size)) == size and 0 < size < typed(case.power):
        case = dataclasses.replace(case, alpha=float(size))
    elif typed(float(power)) == power and typed(case.alpha) < power < 1:
        case = dataclasses.replace(case, power=float(power))
    else:
        return None
    largest = case.lot or brute.enough(case.kind, case.claim, case.catches[0], case.alpha, case.power)
    return dataclasses.replace(case, largest=largest) if largest <= MOST else None


def found(cases: list[Asked], lasting: bool, whole: bool = True) -> Sizes:
    """Return the sizes of one-sided cases of one kind and side, asked as one array."""
    columns = zip(*((c.claim, c.alpha, c.catches[0], c.power) for c in cases), strict=True)
    lot = np.array([c.lot for c in cases]) if cases[0].lot else None
    claim, alpha, catch, power = (np.array(column) for column in columns)
    return smallest_sizes(
        cases[0].kind, claim, alpha, catch, power, side=cases[0].side, lasting=lasting, extra=lot, whole=whole
    )


@pytest.mark.parametrize("kind", KINDS)
@pytest.mark.parametrize("side", ["above", "below"])
def test_one_sided_sizes_equal_brute_force(kind: str, side: str) -> None:
    rng = random.Random(f"{kind} {side}")
    cases = [random_case(kind, side, rng) for _ in range(CASES // 2)]
    if kind != "poisson":
        ties: list[Asked] = []
        while len(ties) < TIES // 2:
            tie = tied(random_case(kind, side, rng), rng)
            ties += [tie] if tie else []
        cases += ties
    right = [case.answers() for case in cases]
    for lasting in (False, True):
        sizes = found(cases, lasting)
        for case, amounts, amount in zip(cases, right, sizes.amount, strict=True):
            assert amount == amounts[lasting], case


@pytest.mark.parametrize("kind", KINDS)
def test_two_sided_sizes_equal_brute_force(kind: str) -> None:
    rng = random.Random(kind)
    for _ in range(TWO_SIDED):
        case = random_case(kind, "either", rng)
        right = case.answers()
        for lasting in (False, True):
            plan = smallest_plan(
                kind, f"{SYMBOLS[kind]}={case.claim!r}", case.alpha, case.catches, case.power,
                lasting=lasting, extra=case.lot, split=case.split,
            )  # fmt: skip
            assert getattr(plan.design, AMOUNTS[kind]) == right[lasting], case


@pytest.mark.parametrize("lasting", [False, True])
@pytest.mark.parametrize("side", ["above", "below"])
def test_real_amounts_are_least(side: str, lasting: bool) -> None:
    """Just below the first real amount the need is not met; a millionth above the lasting one it is."""
    rng = random.Random(side)
    cases = [random_case("poisson", side, rng) for _ in range(100)]
    real, whole = found(cases, lasting, whole=False), found(cases, lasting)
    assert (whole.amount <= np.ceil(real.amount) if lasting else whole.amount >= real.amount).all()
    for case, amount in zip(cases, real.amount, strict=True):
        alpha, power = typed(case.alpha), typed(case.power)

        def met(units: float, case: Asked = case, alpha: Fraction = alpha, power: Fraction = power) -> bool:
            at = [brute.poisson(typed(units) * typed(rate)) for rate in (case.claim, *case.catches)]
            return brute.meets(at[0], at[1:], side, alpha, power, "half")

        assert met(amount * (1 + 1e-12))
        assert not met(amount * (1 - 1e-12))
        assert not lasting or all(met(amount * (1 + 1e-6 * step)) for step in range(1, 1000, 90))


@pytest.mark.parametrize(
    ("asked", "options", "text"),
    [
        ("binomial 5% 20% 80%", {}, "n 27 | claim p<=0.05 | alpha 0.05 | reject x>=4"),
        ("binomial p<=50ppm 200ppm 90%", {}, "n 46372 | claim p<=5e-05 | alpha 0.05 | reject x>=6"),
        (
            "binomial 50ppm 200ppm 90%",
            {"lasting": True},
            "n 52659 | claim p<=5e-05 | alpha 0.05 | reject x>=7",
        ),
        (
            "binomial p>=5% 0.1% 90%",
            {"verdict": "pass"},
            "n 59 | claim p>=0.05 | alpha 0.05 | reject x<=0 | verdict pass",
        ),
        ("binomial 0 1% 90%", {}, "n 230 | claim p<=0 | alpha 0.05 | reject x>=1"),
        ("binomial p>=1 99% 90%", {}, "n 230 | claim p>=1 | alpha 0.05 | reject x<=229"),
        ("binomial 2% 1 90%", {}, "n 1 | claim p<=0.02 | alpha 0.05 | reject x>=1"),
        ("poisson rate<=0.05 0.2 80%", {}, "units 34 | claim rate<=0.05 | alpha 0.05 | reject x>=5"),
        ("hypergeometric 1% 5% 90%", {"extra": 60}, "lot 60 | n 32 | claim D<=0 | alpha 0.05 | reject x>=1"),
        ("hypergeometric D<=1 2 90%", {"extra": 60}, "lot 60 | n 57 | claim D<=1 | alpha 0.05 | reject x>=2"),
        (
            "hypergeometric D>=20 0 90%",
            {"extra": 20},
            "lot 20 | n 1 | claim D>=20 | alpha 0.05 | reject x<=0",
        ),
    ],
)
def test_plans(asked: str, options: dict[str, object], text: str) -> None:
    kind, claim, catch, power = asked.split()
    assert write_plan(smallest_plan(kind, claim, "5%", catch, power, **options)) == f"{kind} | {text}"


def test_one_catch_or_two_on_a_two_sided_claim() -> None:
    both = smallest_plan("binomial", "p=20%", 0.05, "10% and 35%", 0.9)
    assert write_plan(both) == "binomial | n 137 | claim p=0.2 | alpha 0.05 | reject x<=18 or x>=38"
    one = smallest_plan("binomial", 0.2, 0.05, 0.35, 0.9, side="either")
    assert one.design.n < both.design.n


WRONG_SIDE = "catch must lie {} the claim {}, but got {}"
NO_REAL = "{} must be sought as a whole number{}, but got any real number"


@pytest.mark.parametrize(
    ("asked", "options", "message"),
    [
        ("binomial p<=5% 10% 4%", {}, "power must be greater than alpha, but got 4%"),
        ("binomial p<=5% 1% 90%", {}, WRONG_SIDE.format("above", "p<=0.05", "1% (p = 0.01)")),
        ("binomial p<=5% 5% 90%", {}, WRONG_SIDE.format("above", "p<=0.05", "5% (p = 0.05)")),
        ("binomial p>=5% 10% 90%", {}, WRONG_SIDE.format("below", "p>=0.05", "10% (p = 0.1)")),
        ("hypergeometric 2% 2% 90%", {"extra": 50}, WRONG_SIDE.format("above", "D<=1", "2% (D = 1)")),
        ("binomial p<=1 1 90%", {}, "claim must be false for some p, but got p<=1"),
        ("binomial p<=5% 10% 90%", {"whole": False}, NO_REAL.format("n", "")),
        ("poisson rate=1 2 90%", {"whole": False}, NO_REAL.format("units", " for a two-sided claim")),
        (
            "hypergeometric 2% 4% 90%",
            {},
            "lot must be given for a plan of kind hypergeometric, but got nothing",
        ),
        ("binomial 2% 4% 90%", {"extra": 50}, "must be left out for a plan of kind binomial, but got 50"),
        ("binomal 2% 4% 90%", {}, "(did you mean binomial?)"),
        (
            "binomial p<=0.5 0.50001 90%",
            {},
            "no plan of a size that is allowed has alpha 0.05 for the claim p<=0.5 and power 0.9 at 0.50001",
        ),
    ],
)
def test_refusals(asked: str, options: dict[str, object], message: str) -> None:
    kind, claim, catch, power = asked.split()
    with pytest.raises((InvalidValue, NoAnswer)) as refusal:
        smallest_plan(kind, claim, "5%", catch, power, **options)
    assert str(refusal.value).endswith(message)


@pytest.mark.parametrize(
    ("claim", "catch", "message"),
    [
        ("p=5%", "6% and 9%", "catch must lie below the claim p=0.05, but got 6% (p = 0.06)"),
        ("p<=5%", "10% and 20%", "catch must be one rate for the claim p<=0.05, but got 10% and 20%"),
        ("p=5%", (0.01, 0.1, 0.2), "catch must be one rate, or a low and a high one such as 1% and 5%"),
    ],
)
def test_refused_pairs(claim: str, catch: object, message: str) -> None:
    with pytest.raises(InvalidValue) as refusal:
        smallest_plan("binomial", claim, 0.05, catch, 0.9)
    assert str(refusal.value).startswith(message)


def test_too_many_sizes_for_a_two_sided_claim_are_refused(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setitem(two_sided.MOST_SIZES, "nearest", 50)
    with pytest.raises(NoAnswer, match="more than 50 sizes would have to be looked at"):
        smallest_plan("binomial", "p=0.02", 0.05, 0.03, 0.9, split="nearest")
    with pytest.raises(
        NoAnswer, match="a plan of more than 5000 n for a two-sided claim is sought with split half only"
    ):
        smallest_plan("binomial", "p=0.02", 0.05, 0.021, 0.9, split="rarest")


def test_one_bad_requirement_does_not_spoil_the_others() -> None:
    """In turn: a catch inside the claim, no power above alpha, no rate, too large a plan, and a good one."""
    claims, catches = [[0.05, 0.05, 0.05, 0.5, 0.2]], [[0.01, 0.2, 2.0, 0.5000001, 0.4]]
    sizes = smallest_sizes("binomial", claims, 0.05, catches, [[0.8, 0.05, 0.8, 0.8, 0.8]])
    for answer in (sizes.amount, sizes.reject, sizes.size, sizes.power):
        assert np.isnan(answer).tolist() == [[True, True, True, True, False]]
    assert (sizes.amount[0, 4], sizes.reject[0, 4]) == (35, 12)
    for answer, rate in ((sizes.size, Fraction("0.2")), (sizes.power, Fraction("0.4"))):
        law = brute.binomial(35, rate)
        assert answer[0, 4] == pytest.approx(law.tails[12] / law.total, rel=1e-12)


def test_lots_as_one_array() -> None:
    sizes = smallest_sizes("hypergeometric", 0, 0.05, [5, 4, 25, 20], 0.95, extra=[100, 200, 500, 1000])
    assert sizes.amount.tolist() == [45, 105, 56, 138]
    assert sizes.reject.tolist() == [1, 1, 1, 1]


@pytest.mark.parametrize("lasting", [False, True])
def test_arrays_equal_single_plans(lasting: bool) -> None:
    rng = random.Random(9)
    for side in ("above", "below"):
        cases = [random_case("binomial", side, rng) for _ in range(25)]
        sizes = found(cases, lasting)
        for case, amount, reject in zip(cases, sizes.amount, sizes.reject, strict=True):
            claim = f"p{'<=' if side == 'above' else '>='}{case.claim!r}"
            plan = smallest_plan("binomial", claim, case.alpha, case.catches[0], case.power, lasting=lasting)
            assert (plan.design.n, plan.rule.high if side == "above" else plan.rule.low) == (amount, reject)
