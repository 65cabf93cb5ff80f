"""Measure the add-in in headless Calc: ``python tests/addin/calc/speed.py``; run by hand, asserts nothing.

Recalculates 10,000 cells of power as row formulas and as one formula, beside the same 10,000 cells by Calc's
own BINOM.DIST, each time with new rates so that no result is remembered; then the cost of a call, the start
of the worker, and the time until the first right answer after it was killed.

Recalculations are measured in processor time of LibreOffice and the worker together, as Linux counts it:
on a machine that does other work too, the clock says little.
"""

from __future__ import annotations

import itertools
import os
import signal
import statistics
import sys
import tempfile
from collections.abc import Callable
from pathlib import Path
from time import perf_counter

from conftest import StandIn
from office import Office
from openpyxl.utils import get_column_letter

from steelyard.addin.calc.pipe import Worker
from steelyard.core import VERSION

ROUNDS = 7
fresh = itertools.count(1)


def plan(row: int) -> str:
    return f"binomial | n {50 + row} | claim p<=0.02 | alpha 0.05 | reject x>=4"


def grid(
    office: Office, rows: int, columns: int, height: int = 1, native: bool = False
) -> Callable[[], float]:
    """Lay out a grid of power, a formula for so many rows, and return what recalculates it."""
    document = office.open()
    office.automatic(document, False)
    last = get_column_letter(columns + 1)
    names = [get_column_letter(column + 2) for column in range(columns)]
    office.put(document, f"A2:A{rows + 1}", [[50 + row if native else plan(row)] for row in range(rows)])
    if native:
        formula = "=BINOM.DIST($A{0}-4;$A{0};1-{1}$1;TRUE())"
        table = [[formula.format(row + 2, name) for name in names] for row in range(rows)]
        office.put(document, f"B2:{last}{rows + 1}", table)
    else:
        for first in range(2, rows + 2, height):
            end = first + height - 1
            office.array(document, f"B{first}:{last}{end}", f"=SY.POWER($A{first}:$A{end};$B$1:${last}$1)")

    def recalculate() -> float:
        rates = [(column + 1) / (columns * 10) + next(fresh) * 1e-9 for column in range(columns)]
        office.put(document, f"B1:{last}1", [rates])
        return processor_time(office, document)

    return recalculate


def processor_time(office: Office, document: int) -> float:
    """Recalculate a document and return the seconds that all processes of this session computed."""
    before = _processor_time(office.pid)
    office.recalculate(document)
    return _processor_time(office.pid) - before


def _processor_time(process: int) -> float:
    tasks = list(Path(f"/proc/{process}/task").iterdir())
    own = sum(int((task / "schedstat").read_text().split()[0]) for task in tasks) / 1e9
    children = itertools.chain.from_iterable((task / "children").read_text().split() for task in tasks)
    return own + sum(_processor_time(int(child)) for child in children)


def show(what: str, seconds: list[float], unit: float = 1e3, name: str = "ms") -> None:
    low, middle, high = (f(seconds) * unit for f in (min, statistics.median, max))
    print(f"{what:<46}{middle:>9.3g} {name}   ({low:.3g} to {high:.3g})")


def main() -> None:
    with Office() as office:
        native = grid(office, 100, 100, native=True)
        for rows, columns, height in ((100, 100, 1), (1000, 10, 1), (100, 100, 100)):
            ours = grid(office, rows, columns, height)
            pairs = [(ours(), native()) for _ in range(ROUNDS + 1)][1:]
            show(f"{rows // height} formulas of {height} x {columns} cells", [pair[0] for pair in pairs])
            show("10,000 cells of BINOM.DIST", [pair[1] for pair in pairs])
            show("    ratio, round by round", [a / b for a, b in pairs], 1, "times")
        document = office.open()
        office.automatic(document, False)
        for what, formula in (
            ("SY.VERSION()", "=SY.VERSION()"),
            ("SY.POWER(plan;rate)", "=SY.POWER(B$1;A1+C$1)"),
        ):
            office.put(document, "A1:B1", [[0.05, plan(0)]])
            office.put(document, "A1:A1000", [[row / 2000] for row in range(1, 1001)])
            office.put(document, "D1:D1000", [[formula.replace("A1", f"A{row}")] for row in range(1, 1001)])
            times = []
            for _ in range(ROUNDS):
                office.put(document, "C1", [[next(fresh) * 1e-9]])
                times.append(processor_time(office, document) / 1000)
            show(f"one call of {what}", times, 1e6, "us")
    show("start of the worker to its first answer", [_start() for _ in range(ROUNDS)], 1, "s")
    show("first right answer after a kill", [_recover() for _ in range(ROUNDS)], 1, "s")


def _start() -> float:
    start = perf_counter()
    assert Worker(sys.executable, VERSION).call("VERSION", []) == VERSION
    return perf_counter() - start


def _recover() -> float:
    with tempfile.TemporaryDirectory() as folder:
        program = StandIn(
            Path(folder) / "worker", "os.execv(sys.executable, [sys.executable, *sys.argv[1:]])"
        )
        worker = Worker(program.path, VERSION)
        assert worker.call("VERSION", []) == VERSION
        os.kill(program.starts[-1], signal.SIGKILL)
        start = perf_counter()
        assert worker.call("VERSION", []) == VERSION
        return perf_counter() - start


if __name__ == "__main__":
    main()
