"""The benchmark harness judges as it says, and every benchmark still runs. Nothing is timed here."""

import math

import pytest
from ratio import Entry, ratio, relative_error, summary
from run import load, verdict

ENTRIES = load()
ENTRY = Entry("toy", lambda cells: (int, int), sizes=(100, 10_000), limit=1.3, error=None)


def toy(cells, *ratios):
    return summary("toy", cells, [(2 * ratio, 2.0) for ratio in ratios])


def test_ratios_are_taken_round_by_round():
    measured = summary("toy", 100, [(3.0, 1.0), (4.0, 4.0), (10.0, 5.0)])
    assert (measured.low, measured.ratio, measured.high) == (1.0, 2.0, 3.0)
    assert (measured.ours, measured.reference) == (4.0, 4.0)


@pytest.mark.parametrize(
    ("measured", "baseline", "expected"),
    [
        (toy(10_000, 1.0, 1.2, 1.9), 1.0, ""),
        (toy(10_000, 1.4, 1.5, 1.6), 1.0, "OVER THE LIMIT of 1.3"),
        (toy(100, 1.4, 1.5, 1.6), 1.0, ""),
        (toy(100, 1.51, 1.6, 1.7), 1.0, "SLOWER THAN THE BASELINE, 1"),
        (toy(100, 1.49, 9.0, 9.0), 1.0, ""),
    ],
)
def test_only_the_best_round_can_fail(measured, baseline, expected):
    assert verdict(ENTRY, measured, {"toy": {"100": baseline, "10000": baseline}}) == expected


def test_a_benchmark_without_baseline_passes():
    assert verdict(ENTRY, toy(100, 50.0), {}) == ""


def test_names_are_unique():
    ratio("toy, registered twice")(ENTRY.benchmark)
    try:
        with pytest.raises(ValueError, match="two benchmarks are called 'toy, registered twice'"):
            ratio("toy, registered twice")(ENTRY.benchmark)
    finally:
        del ENTRIES["toy, registered twice"]


def test_relative_error():
    assert relative_error([[1.0, 2.5]], [[1.0, 2.0]]) == 0.25


@pytest.mark.parametrize("name", list(ENTRIES))
def test_the_benchmark_runs(name):
    entry = ENTRIES[name]
    ours, reference = entry.benchmark(entry.sizes[0])
    results = ours(), reference()
    if entry.error:
        assert math.isfinite(entry.error(*results))
