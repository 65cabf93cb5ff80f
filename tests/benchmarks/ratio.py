"""Measure how long our code takes as a multiple of a reference, in one run on one machine.

Seconds differ from machine to machine, ratios hardly do. A benchmark is a function that is given a number
of cells and returns two callables, ours and the reference, ready to be timed::

    from ratio import ratio, relative_error

    @ratio("power grid / betainc", limit=1.3, error=relative_error)
    def power_grid(cells):
        plans, rates = grid(cells)
        return lambda: SY_POWER(plans, rates), lambda: special.betainc(a, b, x)
"""

import atexit
import gc
import shutil
import statistics
import tempfile
from collections.abc import Callable, Iterator, Sequence
from contextlib import contextmanager
from dataclasses import dataclass
from pathlib import Path
from time import perf_counter
from typing import Any

import numpy as np

Work = Callable[[], Any]
Benchmark = Callable[[int], tuple[Work, Work]]

ROUNDS = 5
SIZES = (100, 10_000, 1_000_000)
SHORTEST = 0.02  # seconds in one timing: a thousand times what the clock and the loop cost

REGISTRY: dict[str, "Entry"] = {}


@dataclass(frozen=True, slots=True)
class Entry:
    """One registered benchmark."""

    name: str
    benchmark: Benchmark
    sizes: tuple[int, ...]
    limit: float | None
    error: Callable[[Any, Any], float] | None


@dataclass(frozen=True, slots=True)
class Measurement:
    """One benchmark at one size: the median ratio of the rounds, their range, and seconds per call."""

    name: str
    cells: int
    ratio: float
    low: float
    high: float
    ours: float
    reference: float
    error: float | None


def ratio(
    name: str,
    *,
    limit: float | None = None,
    sizes: Sequence[int] = SIZES,
    error: Callable[[Any, Any], float] | None = None,
) -> Callable[[Benchmark], Benchmark]:
    """Register a benchmark.

    Parameters
    ----------
    name : str
        What is compared with what, unique among all benchmarks.
    limit : float, optional
        The highest ratio allowed at the largest size; 1/50 means at least 50 times faster.
    sizes : sequence of int, optional
        Numbers of cells, rising.
    error : callable, optional
        Compares the results of the two callables, so that accuracy is tracked beside time.
    """

    def register(benchmark: Benchmark) -> Benchmark:
        if name in REGISTRY:
            message = f"two benchmarks are called {name!r}"
            raise ValueError(message)
        REGISTRY[name] = Entry(name, benchmark, tuple(sizes), limit, error)
        return benchmark

    return register


def relative_error(ours: Any, reference: Any) -> float:
    """Return the largest relative difference between two arrays, or lists of rows, of positive numbers."""
    reference = np.asarray(reference, dtype=float)
    return float(np.max(np.abs(np.asarray(ours, dtype=float) - reference) / np.abs(reference)))


def scratch() -> Path:
    """Return a new folder for a benchmark's files; it is removed when Python ends."""
    folder = Path(tempfile.mkdtemp(prefix="steelyard-benchmark-"))
    atexit.register(shutil.rmtree, folder, ignore_errors=True)
    return folder


def measure(entry: Entry) -> Iterator[Measurement]:
    """Time a benchmark at each of its sizes."""
    for cells in entry.sizes:
        ours, reference = entry.benchmark(cells)
        # The first call fills caches and imports what is lazy; it also gives the results to compare.
        results = ours(), reference()
        error = entry.error(*results) if entry.error else None
        del results
        repeats = _repeats(ours), _repeats(reference)
        with _no_collection():
            rounds = [(_seconds(ours, repeats[0]), _seconds(reference, repeats[1])) for _ in range(ROUNDS)]
        yield summary(entry.name, cells, rounds, error)


def summary(
    name: str, cells: int, rounds: Sequence[tuple[float, float]], error: float | None = None
) -> Measurement:
    """Condense rounds of (our seconds, reference seconds); each ratio is taken within its own round."""
    ratios = [ours / reference for ours, reference in rounds]
    ours, reference = (statistics.median(column) for column in zip(*rounds, strict=True))
    return Measurement(
        name, cells, statistics.median(ratios), min(ratios), max(ratios), ours, reference, error
    )


def _repeats(work: Work) -> int:
    """Return how many calls fill one timing."""
    return max(1, round(SHORTEST / max(_seconds(work, 1), 1e-7)))


def _seconds(work: Work, repeats: int) -> float:
    start = perf_counter()
    for _ in range(repeats):
        work()
    return (perf_counter() - start) / repeats


@contextmanager
def _no_collection() -> Iterator[None]:
    """Keep the garbage collector from running inside one of the two timings."""
    gc.collect()
    gc.disable()
    try:
        yield
    finally:
        gc.enable()
