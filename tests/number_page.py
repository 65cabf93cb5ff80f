"""
Writes tests/NUMBERS.md: per kind of plan its domain, the largest error found, and how it was checked.

``python tests/number_page.py`` measures anew, on the same random plans every time.
"""

from __future__ import annotations

import math
import random
import sys
from collections.abc import Callable, Iterator
from dataclasses import dataclass
from pathlib import Path

import mpmath

HERE = Path(__file__).parent
sys.path.insert(0, str(HERE / "core"))

from accuracy import binomial_pmf, binomial_tail, hypergeometric_tail, poisson_tail  # noqa: E402
from continuous import chi_square_tail, normal_tail, t_tail  # noqa: E402

from steelyard.core import kinds  # noqa: E402, F401
from steelyard.core.questions import not_rejected, power  # noqa: E402
from steelyard.core.text import read_plan  # noqa: E402

PLANS = 400
DEEPEST = mpmath.mpf("1e-290")
SHALLOW = mpmath.mpf("1e-30")

Case = tuple[str, float, mpmath.mpf, mpmath.mpf]  # plan text, rate, exact power, exact chance of the other


@dataclass(frozen=True, slots=True)
class Check:
    """How one kind of plan is checked."""

    kind: str
    domain: str
    how: str
    draw: Callable[[random.Random], Case]


def rate(rng: random.Random) -> float:
    """Return a rate from 1e-7 to 0.999999, small ones as often as large ones."""
    return rng.choice((10 ** rng.uniform(-7, -0.01), rng.uniform(0.001, 0.999999)))


def near(rng: random.Random, mean: float, deviation: float, top: int) -> int:
    """Return a count from 1 to `top`, mostly within some deviations of the mean."""
    return min(max(round(mean + rng.uniform(-12, 12) * deviation), 1), top)


def binomial(rng: random.Random) -> Case:
    n, p = round(10 ** rng.uniform(0.3, 5)), rate(rng)
    x = near(rng, n * p, math.sqrt(n * p * (1 - p)), n)
    both = (binomial_tail(x, n, p, True), binomial_tail(x - 1, n, p, False))
    return f"binomial | n {n} | reject x>={x}", p, *both


def poisson(rng: random.Random) -> Case:
    units, per_unit = 10 ** rng.randint(0, 4), 10 ** rng.uniform(-6, 0.5)
    mean = units * per_unit
    x = near(rng, mean, math.sqrt(mean) + 1, 10**6)
    both = (poisson_tail(x, mean, True), poisson_tail(x - 1, mean, False))
    return f"poisson | units {units} | reject x>={x}", mean / units, *both


def hypergeometric(rng: random.Random) -> Case:
    lot = round(10 ** rng.uniform(1, 5))
    n, defectives = rng.randint(2, lot - 1), rng.randint(1, lot - 1)
    mean = n * defectives / lot
    deviation = math.sqrt(mean * (1 - defectives / lot) * (lot - n) / (lot - 1))
    x = near(rng, mean, deviation, min(n, defectives))
    both = (
        hypergeometric_tail(x, lot, defectives, n, True),
        hypergeometric_tail(x - 1, lot, defectives, n, False),
    )
    return f"hypergeometric | lot {lot} | n {n} | reject x>={x}", float(defectives), *both


def until(rng: random.Random) -> Case:
    wanted, p = rng.randint(1, 50), 10 ** rng.uniform(-4, -0.5)
    most = max(round(wanted / p * 10 ** rng.uniform(-0.6, 0.6)), wanted)
    both = (binomial_tail(wanted, most, p, True), binomial_tail(wanted - 1, most, p, False))
    return f"until {wanted} defectives | claim p<=0.02 | reject inspected<={most}", p, *both


def staged(rng: random.Random) -> Case:
    n, c = rng.randint(5, 60), rng.randint(0, 3)
    reject, last, p = c + rng.randint(2, 4), 0, 10 ** rng.uniform(-3, -0.3)
    last = reject + rng.randint(0, 4)
    with mpmath.workdps(50):
        fails = binomial_tail(reject, n, p, True) if reject <= n else mpmath.mpf(0)
        passes = binomial_tail(c, n, p, False)
        for seen in range(c + 1, min(reject, n + 1)):
            here, short = binomial_pmf(seen, n, p), last - seen
            fails += here * (binomial_tail(short, n, p, True) if short <= n else 0)
            passes += here * (binomial_tail(short - 1, n, p, False) if short <= n else 1)
    text = f"binomial | stages {n} then {n} | accept {c} then {last - 1} | reject {reject} then {last}"
    return text, p, fails, passes


def normal(rng: random.Random) -> Case:
    n, limit, mean = rng.choice((1, 4, 16, 64)), rng.uniform(-4, 4), rng.uniform(-4, 4)
    with mpmath.workdps(50):
        z = (mpmath.mpf(limit) - mpmath.mpf(mean)) * mpmath.sqrt(n)
        both = (normal_tail(z, True), normal_tail(z, False))
    return f"normal | n {n} | sigma 1 | reject mean>={limit!r}", mean, *both


def spread(rng: random.Random) -> Case:
    n, sigma, limit = rng.randint(2, 300), 10 ** rng.uniform(-0.3, 0.3), 1.25
    with mpmath.workdps(50):
        x = (n - 1) * (mpmath.mpf(limit) / mpmath.mpf(sigma)) ** 2
        both = (chi_square_tail(x, n - 1, True), chi_square_tail(x, n - 1, False))
    return f"spread | n {n} | claim sigma<=1 | reject s>={limit}", sigma, *both


def student(rng: random.Random) -> Case:
    n, t, mean = rng.choice((4, 9, 16, 25)), rng.uniform(0.5, 6), rng.uniform(0, 1.5)
    delta = mpmath.mpf(mean) * round(math.sqrt(n))
    both = (t_tail(t, n - 1, delta, True), t_tail(t, n - 1, delta, False))
    return f"student | n {n} | planning-sigma 1 | claim mean<=0 | reject t>={t!r}", mean, *both


CHECKS = (
    Check("binomial", "n 1 to 10,000,000; p 0 to 1", "50 digits, n to 100,000", binomial),
    Check("poisson", "units to 1e9; mean to 1e9", "50 digits, mean to 30,000", poisson),
    Check("hypergeometric", "lot 2 to 1,000,000", "50 digits, lots to 100,000", hypergeometric),
    Check("until", "1 to 10,000 defectives", "50 digits, as binomial tails", until),
    Check("staged binomial", "counts as in a single plan", "50 digits, two stages summed up", staged),
    Check("normal", "any mean; sigma above 0", "50 digits", normal),
    Check("spread", "n from 2; sigma above 0", "50 digits, n to 300", spread),
    Check("student", "n from 2; any mean", "integral to 30 digits or more, n to 25", student),
)


def errors(check: Check, plans: int) -> Iterator[tuple[mpmath.mpf, float]]:
    """Yield every exact chance with the relative error of ours."""
    rng = random.Random(f"numbers {check.kind}")
    for _ in range(plans):
        text, value, *exact = check.draw(rng)
        plan = read_plan(text)
        for chance, ours in zip(exact, (power(plan, value), not_rejected(plan, value)), strict=True):
            if chance > DEEPEST:
                yield chance, float(abs(ours / chance - 1))


def row(check: Check) -> str:
    """Return the table's row of a kind."""
    plans = PLANS // 8 if check.kind == "student" else PLANS
    found = list(errors(check, plans))
    shallow = max((error for chance, error in found if chance >= SHALLOW), default=0.0)
    deep = max((error for chance, error in found if chance < SHALLOW), default=None)
    below = "none drawn" if deep is None else f"{deep:.0e}"
    return f"| {check.kind} | {check.domain} | {shallow:.0e} | {below} | {check.how}, {plans} random plans |"


def page() -> str:
    """Return the whole page."""
    return "\n".join(
        (
            "# How right the numbers are",
            "",
            "Largest relative error of the chances to reject and not to, at the exact value of the rate.",
            "Written by `python tests/number_page.py`; do not edit.",
            "",
            "| kind | domain | chances from 1e-30 | chances from 1e-290 | checked |",
            "|---|---|---|---|---|",
            *map(row, CHECKS),
            "",
            "Critical counts and sample sizes have no error: the defining inequality decides them exactly.",
            "The other kinds are held by the tests in `tests/core/kinds`, each against its own references.",
            "",
        )
    )


if __name__ == "__main__":
    (HERE / "NUMBERS.md").write_text(page(), encoding="utf-8")
