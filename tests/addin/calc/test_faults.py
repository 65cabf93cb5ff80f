"""What Calc shows when the worker is killed, stopped, replaced, mad or out of memory, and how it recovers.

One LibreOffice serves all tests. Its worker is a script that looks into a file to see what to be.
"""

from __future__ import annotations

import fcntl
import os
import signal
from collections.abc import Iterator
from pathlib import Path

import pytest
from conftest import StandIn
from office import Office

from steelyard.addin import call
from steelyard.addin.calc.pipe import PAUSE
from steelyard.core import VERSION

pytestmark = [
    pytest.mark.calc,
    pytest.mark.skipif(os.name == "nt", reason="a script cannot stand in for an interpreter on Windows"),
]

TIMEOUT = 5.0
CELLS = 10_000
FEW = 500
PLAN = "binomial | n 50 | claim p<=0.02 | alpha 0.05 | reject x>=4"
AGAIN = "Press Ctrl+Shift+F9 to calculate again."
LATE = f"no answer within {TIMEOUT:g} s, so the helper process was ended. {AGAIN}"

CHAMELEON = """
mode = open(__file__ + ".mode").read()
if mode == "good":
    os.execv(sys.executable, [sys.executable, *sys.argv[1:]])
if mode in ("fragile", "scanty"):
    import resource
    from steelyard.addin import call
    from steelyard.addin.calc.worker import serve
    answered = []
    def fragile(name, args):
        answered.append(name)
        if len(answered) == 150:
            os.kill(os.getpid(), signal.SIGKILL)
        return call(name, args)
    def scanty(name, args):
        resource.setrlimit(resource.RLIMIT_AS, (1 << 30, 1 << 30))
        return bytearray(1 << 31)
    serve(sys.stdin.buffer, sys.stdout.buffer, {"fragile": fragile, "scanty": scanty}[mode], VERSION)
say({"steelyard": "9.9.9", "protocol": 1} if mode == "other" else HELLO)
sys.stdin.readline()
if mode == "rubbish":
    print("0.5")
if mode == "stopped":
    os.kill(os.getpid(), signal.SIGSTOP)
"""

HOLDS_A_LOCK = """
import fcntl
file = open(__file__)
fcntl.flock(file, fcntl.LOCK_EX)
os.set_inheritable(file.fileno(), True)
"""


class Patient:
    """A Calc document of many cells and one of few, one call each, and the worker behind them.

    A third document is a slip to try the worker on.
    """

    def __init__(self, office: Office, program: StandIn) -> None:
        self.office = office
        self.program = program
        self.be("good")
        self.slip = office.open()
        self.documents = {cells: self._document(cells) for cells in (FEW, CELLS)}

    def _document(self, cells: int) -> int:
        document = self.office.open()
        self.office.automatic(document, False)
        formulas = [[f'=SY.POWER("{PLAN}";{row + 1}/{CELLS})'] for row in range(cells)]
        self.office.put(document, f"F1:F{cells}", formulas)
        return int(document)

    def be(self, mode: str) -> None:
        """Say what the next worker is."""
        Path(self.program.path + ".mode").write_text(mode)

    def signal(self, number: signal.Signals) -> None:
        """Send a signal to the running worker."""
        os.kill(self.program.starts[-1], number)

    def recalculate(self, cells: int) -> tuple[float, list[object]]:
        """Calculate every cell anew, as a recalculation of its own; return the seconds and the values."""
        self.office.rest(PAUSE + 0.1)
        seconds = self.office.recalculate(self.documents[cells])
        return seconds, [row[0] for row in self.office.get(self.documents[cells], f"F1:F{cells}")]


@pytest.fixture(scope="module")
def expected() -> list[object]:
    return [call("SY_POWER", [PLAN, (row + 1) / CELLS]) for row in range(CELLS)]


@pytest.fixture(scope="module")
def patient(tmp_path_factory: pytest.TempPathFactory) -> Iterator[Patient]:
    program = StandIn(tmp_path_factory.mktemp("faults") / "stand-in", CHAMELEON)
    with Office(program.path, TIMEOUT) as office:
        yield Patient(office, program)


@pytest.fixture(autouse=True)
def healthy(patient: Patient) -> None:
    """Begin with a worker that works."""
    patient.be("good")
    patient.office.rest(PAUSE + 0.1)
    assert patient.office.compute(patient.slip, "=SY.VERSION()") == VERSION


def test_a_worker_killed_in_the_middle_is_replaced_without_notice(
    patient: Patient, expected: list[object]
) -> None:
    """This worker is killed, as the system would do it, each time it computes its 150th cell."""
    starts = len(patient.program.starts)
    patient.be("fragile")
    patient.signal(signal.SIGKILL)
    assert patient.recalculate(FEW)[1] == expected[:FEW]
    assert len(patient.program.starts) == starts + 4


@pytest.mark.parametrize(
    ("mode", "cells", "message"),
    [
        (
            "dead",
            CELLS,
            f"the helper process ended twice while it computed this cell (out of memory?). {AGAIN}",
        ),
        ("stopped", CELLS, LATE),
        ("rubbish", FEW, f"the helper process sent something that is no answer, so it was ended. {AGAIN}"),
        (
            "other",
            FEW,
            f"this add-in belongs to Steelyard {VERSION}, but Python runs Steelyard 9.9.9. "
            "Run: steelyard connect calc. Then restart LibreOffice.",
        ),
        ("scanty", FEW, "the memory does not suffice for this call: use smaller ranges"),
    ],
    ids=["dead", "stopped", "rubbish", "other", "scanty"],
)
def test_every_cell_says_what_happened_and_the_next_recalculation_is_right(
    patient: Patient, expected: list[object], mode: str, cells: int, message: str
) -> None:
    patient.be(mode)
    patient.signal(signal.SIGKILL)
    seconds, values = patient.recalculate(cells)
    assert set(values) == {f"SY: {message}"}
    assert seconds < 2 * TIMEOUT  # the promise itself
    patient.be("good")
    if mode == "scanty":  # this one still lives
        patient.signal(signal.SIGKILL)
    assert patient.recalculate(FEW)[1] == expected[:FEW]


def test_a_worker_stopped_while_it_waits_costs_one_time_out(patient: Patient, expected: list[object]) -> None:
    patient.signal(signal.SIGSTOP)
    seconds, values = patient.recalculate(CELLS)
    assert seconds < 2 * TIMEOUT  # the promise itself
    assert set(values) == {f"SY: {LATE}"}
    assert patient.recalculate(CELLS)[1] == expected


def test_the_worker_ends_with_calc(tmp_path: Path) -> None:
    """The worker holds a lock on a file as long as it lives; here we wait until the lock is free."""
    program = StandIn(tmp_path / "stand-in", HOLDS_A_LOCK + CHAMELEON)
    Path(program.path + ".mode").write_text("good")
    with Office(program.path) as office:
        assert office.compute(office.open(), "=SY.VERSION()") == VERSION
        with Path(program.path).open() as file:
            with pytest.raises(BlockingIOError):
                fcntl.flock(file, fcntl.LOCK_EX | fcntl.LOCK_NB)
            office.kill()
            fcntl.flock(file, fcntl.LOCK_EX)
