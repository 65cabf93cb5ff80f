"""
Every cell function with every kind of wrong value that a spreadsheet can hand over.

``python tests/addin/fuzz.py --calls 1000000 --seed 1`` prints the broken promises, each with a call that
shows it. Promised are: no exception, only plain finite numbers, texts and blanks in cells, refusals that
start with "SY: ", stay below 255 characters and report no fault of our own, an answer within a second.
"""

from __future__ import annotations

import argparse
import math
import random
import re
import signal
import sys
import time
from collections import Counter
from collections.abc import Iterator
from dataclasses import dataclass
from typing import Any

from steelyard.addin import CATALOGUE, call
from steelyard.addin.cells import ERRORS, FAULT, LONGEST, REFUSED

SECONDS = 1.0  # of processor time, for one call
HOPELESS = 20  # seconds after which a call is broken off

PLANS = [
    "binomial | n 50 | claim p<=0.02 | alpha 0.05 | reject x>=4",
    "binomial | n 59 | claim p>=0.05 | alpha 0.05 | reject x<=0 | verdict pass",
    "binomial | n 80 | claim p=0.5 | alpha 0.05 | split rarest | reject x<=30 or x>=50",
    "binomial | n 80 | claim p=0.5 | alpha 0.05 | split nearest | reject x<=31 or x>=49",
    "binomial | n 10000000 | claim p<=0.02 | alpha 0.05 | reject x>=200729",
    "binomial | n 125 | reject x>=4",
    "binomial | n 50 | claim p<=0.02 | misses 0.1 | false-alarms 0.01 | reject x>=5",
    "binomial | n 50 | claim p<=0.02 | clusters 10 | correlation 0.1 | reject x>=4",
    "poisson | units 120 | claim rate<=0.05 | alpha 0.05 | reject x>=11",
    "poisson | units 0.1 | claim rate=1e-05 | reject x>=1",
    "hypergeometric | lot 800 | n 50 | claim D<=8 | alpha 0.05 | reject x>=3",
    "hypergeometric | lot 60 | n 32 | claim D<=0 | alpha 0.05 | reject x>=1",
    "hypergeometric | lot 1000000000 | n 100000 | claim D<=100000 | reject x>=20",
    "normal | n 12 | sigma 0.4 | claim mean>=500 | alpha 0.05 | reject mean<=499.8100686631404",
    "student | n 12 | planning-sigma 0.4 | claim mean>=500 | alpha 0.05 | reject t<=-1.795884818704044",
    "spread | n 12 | claim sigma<=0.4 | alpha 0.05 | reject s>=0.534961511923071",
    "binomial | stages 50 then 50 | accept 1 then 4 | reject 4 then 5 | claim p<=0.02",
    "binomial | stages 20 then 20 then 20 | accept none then 1 then 3 | reject 3 then 4 then 4",
    "binomial | sequential to 120 | accept x<=0.04*n-0.94 | reject x>=0.04*n+1.21 | at end accept x<=3",
    "variables | n 20 | upper 10.5 | sigma unknown | accept (upper-mean)/s>=1.926 | claim p<=0.01",
    "two binomial | n 50 and 60 | claim p2<=p1 | alpha 0.05 | test boschloo",
    "until 3 defectives | claim p<=0.02 | reject inspected<=40",
    "life | time 2300 | claim life<=1000 | alpha 0.1 | reject failures<=0 | verdict pass",
    "three-class | n 5 | reject bad>=1 or marginal>=2",
    *(f"binomial | n {n} | claim p<=0.01 | alpha 0.05 | reject x>=3" for n in (82, 400)),
]
NUMBERS = [
    0, 1, -1, 2, 3, 8, 50, 800, 0.5, 0.05, 0.01, 0.001, 1e-9, 5e-324, 1e-300, 0.999999, 1.5, 50.5, 1e5,
    10**7, 10**9, 1e15, 2.0**53, 1e16, 1e300, -1e300, 10**400, math.inf, -math.inf, math.nan, -0.0, 499.7,
    0.4, 1.33,
]  # fmt: skip
TEXTS = [
    "", " ", "5%", "2 %", "1.1%", "50 ppm", "-5%", "0,05", "1e999", "nan", "inf", "--", "TRUE", "p<=2%",
    "p>=5%", "p=50%", "P<=", "D<=8", "rate<=0.05", "mean>=500", "sigma<=0.4", "life<=1000", "p2<=p1",
    "bad<=0.001 and marginal<=0.05", "<=0.02", "lower", "upper", "first", "lasting", "above", "below",
    "either", "half", "rarest", "nearest", "fail", "pass", "any", "independent", "all", "right", "replaced",
    "removed", "ppk", "coverage", "boschloo", "fisher", "z", "binomial", "poisson", "hypergeometric",
    "normal", "student", "spread", "variables", "until", "two binomial", "life", "three-class",
    "50 then 50", "1 then 4", "4 then 5", "none then 2", "4 and 6", "stage-end", "on-reject",
    "mean 499.7 s 0.31", "mean 499.7", "2 then 1", "tighten 2 of 5 | resume 5 | stop 5 | reduce 30 by 2",
    "never", "B2", "$B$2", "A1:B2", "n", "claim", "alpha", "SY: refused", "x" * 300, "é≤≥∞\x00\ud800",
    "1" * 400, "٣", "1_000", *sorted(ERRORS),
]  # fmt: skip
SENSIBLE: dict[str, list[Any]] = {
    "rate": [0, 0.01, 0.02, "5%", 0.1, 0.5, 1, 8, 499.5, 0.6],
    "second": [None, None, 0.05, 0.4],
    "claim": [0.01, 0.02, "p<=2%", "p>=5%", "p=50%", "D<=8", "rate<=0.05", "mean>=500", "sigma<=0.4", 0.4],
    "catch": [0.05, "10%", 0.02, 499.5, 20],
    "alpha": [None, 0.05, 0.01, "5%", 1e-12],
    "power": [0.9, "90%", 0.5, 0.99, 0.999999],
    "confidence": [None, 0.95, "99%"],
    "observed": [0, 1, 3, 50, "mean 499.7 s 0.31", 499.7, "2 and 5"],
    "n": [1, 2, 5, 20, 50, 125, 1000, 100_000, 10_000_000],
    "lot": [2, 60, 800, 1000, 100_000, 10**9],
    "units": [0.1, 120, 1e6, 1e12],
    "kind": ["binomial", "poisson", "hypergeometric", "normal", "student", "spread", "two binomial"],
    "side": [None, "above", "below", "either"],
    "split": [None, "half", "nearest", "rarest"],
    "verdict": [None, "fail", "pass"],
    "end": [None, "lower", "upper"],
    "sizes": ["50 then 50", [[50], [50]], 50, " then ".join(["20"] * 7), [[1]] * 300],
    "accepts": ["1 then 4", [[1], [4]], 3, "none then none"],
    "rejects": ["4 then 5", [[4], [5]], 4, "2 then 1"],
    "defectives": [1, 3, 20, "replaced", "removed"],
    "sigma": [None, 0.4, "known"],
    "target": [1.33, 0.95],
    "reject_from": [None, 0, 4, 499.5],
    "reject_to": [None, 20],
    "lot_or_sigma": [None, 800, 0.4],
    "field": ["n", "claim", "alpha", "lot"],
    "cell": ["B2"],
}
JUNK = "|<>=.,;%-+*/() 0123456789eEnNaxpDs≤é\n\t"


@dataclass(frozen=True, slots=True)
class Fault:
    """A broken promise: what it is, and the call that shows it."""

    what: str
    name: str
    arguments: tuple[Any, ...]


class TooLong(BaseException):
    """Breaks off a call; no Exception, so that nobody swallows it."""


def mutated(text: str, rng: random.Random) -> str:
    """Return a plan's text with characters or fields deleted, doubled, swapped or put in."""
    for _ in range(rng.choice((1, 1, 1, 2, 4))):
        parts: list[str] = rng.choice((list(text), text.split("|"), text.split(" ")))
        glue = "" if len(parts) == len(text) else "|" if text.count("|") == len(parts) - 1 else " "
        place = rng.randrange(len(parts) or 1)
        match rng.randrange(5):
            case 0 if parts:
                del parts[place]
            case 1 if parts:
                parts.insert(place, parts[place])
            case 2 if parts:
                other = rng.randrange(len(parts))
                parts[place], parts[other] = parts[other], parts[place]
            case 3:
                parts.insert(place, rng.choice(JUNK))
            case _ if parts:
                fields = rng.choice(PLANS).split(rng.choice("| "))
                parts[place] = str(rng.choice([*fields, *NUMBERS]))
        text = glue.join(parts)
    return text


def any_cell(rng: random.Random) -> Any:
    """Return one cell of any content."""
    match rng.randrange(8):
        case 0:
            return None
        case 1:
            return rng.choice((True, False))
        case 2:
            return rng.choice(TEXTS)
        case 3:
            return mutated(rng.choice(PLANS), rng)
        case 4:
            return rng.choice((rng.random(), rng.uniform(-1e3, 1e3), 10 ** rng.uniform(-320, 300)))
        case 5:
            return rng.randrange(-3, 200)
        case _:
            return rng.choice(NUMBERS)


def good_cell(name: str, rng: random.Random) -> Any:
    """Return a cell that the argument often takes."""
    if name.startswith(("plan", "normal", "tightened", "reduced", "score")):
        text = rng.choice(PLANS)
        return mutated(text, rng) if rng.random() < 0.3 else text
    return rng.choice(SENSIBLE.get(name) or NUMBERS + TEXTS)


def argument(name: str, rng: random.Random) -> Any:
    """Return what a spreadsheet may hand over for an argument: a cell or a range, even a ragged one."""

    def one(inside: bool = True) -> Any:
        cell = good_cell(name, rng) if rng.random() < 0.8 else any_cell(rng)
        return cell[0][0] if inside and isinstance(cell, list) else cell

    dice = rng.random()
    if dice < 0.85:
        return one(inside=False)
    if dice < 0.97:
        rows, columns = rng.choice(((1, 1), (1, 3), (3, 1), (2, 2)))
        return [[one() for _ in range(columns)] for _ in range(rows)]
    return rng.choice(([], [[]], [[one()], []], [[one(), one()], [one()]], [one(), one()]))


def calls(number: int, rng: random.Random) -> Iterator[tuple[str, list[Any]]]:
    """Yield calls of all functions in turn."""
    names = list(CATALOGUE)
    for place in range(number):
        name = names[place % len(names)]
        arguments = [argument(a.name, rng) for a in CATALOGUE[name].arguments]
        if rng.random() < 0.2:
            del arguments[rng.randrange(len(arguments) + 1) :]
        if rng.random() < 0.01:
            arguments.append(any_cell(rng))
        yield name, arguments


def complaint(answer: Any, inside: bool = False) -> str | None:
    """Return what is wrong with an answer, None if all is well."""
    if isinstance(answer, list) and not inside:
        if not answer or not all(isinstance(row, list) and len(row) == len(answer[0]) for row in answer):
            return "uneven rows"
        found = (complaint(cell, True) for row in answer for cell in row)
        return next((what for what in found if what), None)
    if answer is None:
        return None if inside else "a blank for a single cell"
    if type(answer) is float:
        return None if math.isfinite(answer) else f"the number {answer}"
    if type(answer) is str:
        if FAULT in answer:
            return answer
        if answer.startswith(REFUSED) and "too large to compute" in answer:
            return "no limit caught it: " + answer
        return None if len(answer) <= LONGEST else f"a text of {len(answer)} characters"
    return None if type(answer) is int else f"a cell of type {type(answer).__name__}"


def faults_of(name: str, arguments: list[Any], seconds: float = math.inf) -> Iterator[str]:
    """Make one call and yield the promises that it breaks."""
    start = time.process_time()
    try:
        wrong = complaint(call(name, arguments))
    except TooLong:
        wrong = "hangs"
    except Exception as error:  # noqa: BLE001 - to find these is what it is for
        wrong = f"{type(error).__name__}: {error}"
    spent = time.process_time() - start
    if wrong:
        yield wrong
    elif spent > seconds:
        yield f"takes {spent:.1f} s"


def search(number: int, seed: int, seconds: float = math.inf) -> Iterator[Fault]:
    """Make many calls and yield the broken promises."""
    rng = random.Random(seed)
    for name, arguments in calls(number, rng):
        for what in faults_of(name, arguments, seconds):
            yield Fault(what, name, tuple(arguments))


def _break_off(*_: Any) -> None:
    raise TooLong


def main() -> int:
    """Search and print; the exit code tells whether anything was found."""
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--calls", type=int, default=1_000_000)
    parser.add_argument("--seed", type=int, default=1)
    parser.add_argument("--each", type=int, default=3, help="examples shown of one kind of fault")
    options = parser.parse_args()
    signal.signal(signal.SIGPROF, _break_off)
    rng, seen, start = random.Random(options.seed), Counter[str](), time.monotonic()
    for name, arguments in calls(options.calls, rng):
        signal.setitimer(signal.ITIMER_PROF, HOPELESS)
        for what in faults_of(name, arguments, SECONDS):
            signal.setitimer(signal.ITIMER_PROF, 0)
            key = f"{name} {'slow' if what.startswith(('takes', 'hangs')) else what}"
            seen[key] += 1
            if seen[key] <= options.each:
                print(what, "in", name, re.sub(r"0{30,}", "0…0", ascii(arguments))[:600], flush=True)
    signal.setitimer(signal.ITIMER_PROF, 0)
    print(
        f"{options.calls} calls, seed {options.seed}, {time.monotonic() - start:.0f} s; faults: {dict(seen)}"
    )
    return 1 if seen else 0


if __name__ == "__main__":
    sys.exit(main())
