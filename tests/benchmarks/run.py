"""Run the benchmarks: ``python tests/benchmarks/run.py [--only TEXT] [--save]``.

Prints a table of ratios and exits with 1 if one has clearly grown against baseline.json or passes its limit.
"""

import argparse
import importlib
import json
import math
import sys
from collections.abc import Sequence
from pathlib import Path

from ratio import REGISTRY, Entry, Measurement, measure

HERE = Path(__file__).resolve().parent
BASELINE = HERE / "baseline.json"
CLEARLY = 1.5  # times the baseline's ratio, in the best of the rounds: noise slows some rounds, never all

Baseline = dict[str, dict[str, float]]

HEADER = f"{'ours / reference':<44}{'cells':>10}{'ratio':>10}{'from':>10}{'to':>10}{'ours s':>10}{'error':>9}"


def load() -> dict[str, Entry]:
    """Import every benchmark module and return all benchmarks by name."""
    for module in sorted(HERE.glob("bench_*.py")):
        importlib.import_module(module.stem)
    return REGISTRY


def row(measured: Measurement, finding: str) -> str:
    """Return one line of the table."""
    numbers = "".join(f"{x:>10.3g}" for x in (measured.ratio, measured.low, measured.high, measured.ours))
    error = "" if measured.error is None else f"{measured.error:.1e}"
    return f"{measured.name:<44}{measured.cells:>10}{numbers}{error:>9}  {finding}".rstrip()


def verdict(entry: Entry, measured: Measurement, baseline: Baseline) -> str:
    """Say what is wrong with a measurement; empty when nothing is."""
    if entry.limit is not None and measured.cells == entry.sizes[-1] and measured.low > entry.limit:
        return f"OVER THE LIMIT of {entry.limit:.3g}"
    before = baseline.get(entry.name, {}).get(str(measured.cells), math.inf)
    if measured.low > CLEARLY * before:
        return f"SLOWER THAN THE BASELINE, {before:.3g}"
    return ""


def save(baseline: Baseline, measured: Sequence[Measurement]) -> None:
    """Write the ratios just measured over those of the same benchmarks in the baseline."""
    for one in measured:
        baseline.setdefault(one.name, {})[str(one.cells)] = float(f"{one.ratio:.3g}")
    known = {name: ratios for name, ratios in sorted(baseline.items()) if name in REGISTRY}
    temporary = BASELINE.with_suffix(".new")
    temporary.write_text(json.dumps(known, indent=2, ensure_ascii=False) + "\n", encoding="utf-8")
    temporary.replace(BASELINE)


def main(arguments: Sequence[str] | None = None) -> int:
    """Run the benchmarks asked for and return the exit code."""
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    parser.add_argument("--only", default="", metavar="TEXT", help="only benchmarks whose name holds TEXT")
    parser.add_argument("--save", action="store_true", help="make the ratios measured the new baseline")
    options = parser.parse_args(arguments)
    baseline: Baseline = json.loads(BASELINE.read_text(encoding="utf-8"))
    print(HEADER)
    measured, failed = [], 0
    for entry in load().values():
        if options.only not in entry.name:
            continue
        for one in measure(entry):
            finding = verdict(entry, one, baseline)
            failed += bool(finding)
            measured.append(one)
            print(row(one, finding), flush=True)
    if options.save:
        save(baseline, measured)
    print(f"{len(measured)} ratios, {failed} too high")
    return min(failed, 1)


if __name__ == "__main__":
    sys.exit(main())
