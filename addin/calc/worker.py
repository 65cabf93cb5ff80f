"""The process that computes for LibreOffice Calc: one JSON line in, one JSON line out.

A request is ``[number, name, arguments]``, its answer ``[number, result]``, in ASCII; the first line of all
says which version speaks. Arguments are data: a name is looked up in the catalogue, nothing is evaluated.
The process listens nowhere; it reads from the pipe its parent holds and ends when that pipe closes: at once,
even in the middle of a computation (on Windows after it).
"""

from __future__ import annotations

import json
import os
import select
import sys
import threading
from collections.abc import Callable, Iterable
from typing import Any, BinaryIO

from steelyard.addin.calc.pipe import MAX_CELLS, PROTOCOL

Answer = Callable[[str, list[Any]], Any]

_encode = json.JSONEncoder(allow_nan=False, separators=(",", ":")).encode


def main(output: int) -> None:
    """Serve until the parent goes away.

    Parameters
    ----------
    output : int
        File descriptor of the pipe to the parent.
        Standard output itself has been pointed elsewhere by then, so that a stray ``print`` spoils no answer.
    """
    from steelyard.addin import call
    from steelyard.core import VERSION

    threading.Thread(target=leave_with_parent, daemon=True).start()
    with os.fdopen(output, "wb") as pipe:
        serve(sys.stdin.buffer, pipe, call, VERSION)


def serve(requests: Iterable[bytes], pipe: BinaryIO, answer: Answer, version: str) -> None:
    """Greet, then answer every request in turn."""
    _send(pipe, _encode({"steelyard": version, "protocol": PROTOCOL}))
    for line in requests:
        number, name, arguments = json.loads(line)
        _send(pipe, f"[{number},{_result(answer, name, arguments)}]")


def _result(answer: Answer, name: str, arguments: list[Any]) -> str:
    """Return the answer as JSON, or the refusal that stands in for it."""
    try:
        result = answer(name, arguments)
        if isinstance(result, list) and (cells := sum(map(len, result))) > MAX_CELLS:
            return _encode(f"SY: the result has {cells} cells, but a call returns at most {MAX_CELLS}")
        return _encode(result)
    except MemoryError:
        return _encode("SY: the memory does not suffice for this call: use smaller ranges")
    except (TypeError, ValueError) as error:
        return _encode(f"SY: {name} gave no value that a cell can hold ({type(error).__name__})")


def _send(pipe: BinaryIO, text: str) -> None:
    pipe.write(text.encode("ascii") + b"\n")
    pipe.flush()


def leave_with_parent() -> None:
    """Wait until the other end of standard input is closed, and end the process whatever it does."""
    if hasattr(select, "poll"):
        hangup = select.poll()
        hangup.register(sys.stdin.fileno(), 0)  # no event asked for: a hang-up is always told
        hangup.poll()
        os._exit(0)
