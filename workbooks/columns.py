"""The columns of a request list: one table from which reader, template, messages and help are made.

A new column is one entry of `COLUMNS` and one field of `steelyard.workbooks.requests.Request`.
"""

from __future__ import annotations

import re
from collections.abc import Callable
from dataclasses import dataclass

import steelyard.core.kinds  # noqa: F401  (fills the register of kinds)
from steelyard.addin import CATALOGUE
from steelyard.addin.catalogue import Entry
from steelyard.core.errors import InvalidValue
from steelyard.core.kind import KINDS
from steelyard.core.numbers import read_choice, read_number, read_probability, read_whole, write_number
from steelyard.core.plan import SIDES, SPLITS, VERDICTS

Cell = float | str
Reader = Callable[[Cell, str], Cell]

LONGEST = 255
_UNPRINTABLE = re.compile(r"[\x00-\x1f\x7f-\x9f\ufffe\uffff]")
_GROUPED = re.compile(r"[1-9]\d{0,2}([.,]\d{3})+")


@dataclass(frozen=True, slots=True)
class Column:
    """One column of a request list.

    Parameters
    ----------
    name : str
        The heading; blanks become ``_`` in the field of `Request`.
    help : str
        What the column says.
    allowed : str
        What a cell may hold, as it follows "must be".
    read : callable
        Turns a cell that is not blank, and the heading, into a value; raises `InvalidValue`.
    examples : tuple
        What is typed into the template's two example rows.
    choices : tuple of str
        Offered as a drop-down.
    required : bool
        Whether heading and cell must be there.
    numeric : bool
        Whether commas between digits are decimal marks.
    style : str
        Number format of the template's cells.
    limits : tuple of float
        Least and greatest number that the template lets in; whole numbers if they are whole.
    """

    name: str
    help: str
    allowed: str
    read: Reader
    examples: tuple[Cell | None, Cell | None] = (None, None)
    choices: tuple[str, ...] = ()
    required: bool = False
    numeric: bool = False
    style: str = ""
    limits: tuple[float, ...] = ()

    @property
    def field(self) -> str:
        """Name of the value in a `Request`."""
        return self.name.replace(" ", "_")


def read_words(cell: Cell, name: str) -> str:
    """Return a text as it was typed; a number becomes its shortest text."""
    text = write_number(cell) if isinstance(cell, int | float) else cell.strip()
    if len(text) > LONGEST:
        rule = f"have at most {LONGEST} characters"
        raise InvalidValue(name, rule, text)
    if _UNPRINTABLE.search(text):
        raise InvalidValue(name, "hold printable characters on one line", repr(text))
    return text


def read_rate(cell: Cell, name: str) -> str:
    """Return a claim or a rate as it was typed; the core reads it together with the kind."""
    text = read_words(cell, name)
    if re.search(r"\d,\d", text):
        raise InvalidValue(name, "have a decimal point", text, "write decimals with a point")
    return text


def read_count(cell: Cell, name: str) -> Cell:
    """Return a number above 0, whole where it is typed so."""
    if isinstance(cell, str) and _GROUPED.fullmatch(cell.strip()):
        raise InvalidValue(name, "be one number", cell, "write 1000 without a thousands mark")
    number = read_number(cell, name)
    if number <= 0:
        raise InvalidValue(name, "lie above 0", cell)
    return int(number) if number.is_integer() else number


def read_lot(cell: Cell, name: str) -> Cell:
    """Return a whole number of items."""
    return read_whole(read_count(cell, name), name, at_least=1)


def _choice(*words: str) -> Reader:
    def read(cell: Cell, name: str) -> Cell:
        return read_choice(" ".join(str(cell).split()), name, words)

    return read


def _one_of(*words: str) -> str:
    return f"one of {', '.join(words)}"


def maker_of(kind: str) -> Entry | None:
    """Return the cell function that makes a plan of a kind from its size and claim; None where there is none.

    Examples
    --------
    >>> maker_of("binomial").name, maker_of("inspected binomial")
    ('SY_BINOMIAL', None)
    """
    entry = CATALOGUE.get(f"SY_{kind.upper()}")
    taken = {argument.name for argument in entry.arguments} if entry else set()
    return entry if {KINDS[kind].grammar.extent, "claim", "alpha"} <= taken else None


_KINDS, _SIDES = tuple(kind for kind in KINDS if maker_of(kind)), tuple(SIDES.values())
_CHANCE = "a probability between 0 and 1, such as 5% or 0.05"
_TEXT = f"a text of at most {LONGEST} characters on one line"

COLUMNS = (
    Column(
        "characteristic",
        "What is inspected; every row makes one plan.",
        _TEXT,
        read_words,
        ("Blocked emitter", "Print defects"),
        required=True,
        style="words",
    ),
    Column(
        "kind",
        "How it is counted or measured: binomial for defective items of a process, poisson for defects "
        "per unit, hypergeometric for defective items in a finite lot.",
        _one_of(*_KINDS),
        _choice(*_KINDS),
        ("binomial", "poisson"),
        choices=_KINDS,
        required=True,
    ),
    Column(
        "claim",
        "The value that the sample is to test. A bare number takes its direction from the side; "
        "p<=2% or D<=8 says it in full.",
        "a rate such as 2%, 0.02 or 50 ppm, or a claim such as p<=0.02 or D<=8",
        read_rate,
        ("2%", 0.5),
        required=True,
        numeric=True,
    ),
    Column(
        "alpha",
        "The accepted risk of rejecting although the claim holds.",
        _CHANCE,
        read_probability,
        ("5%", "5%"),
        numeric=True,
        style="rate",
        limits=(0.0, 1.0),
    ),
    Column(
        "catch",
        "The value that must be caught. Two values, such as 0.5% and 6%, where the side is either.",
        "a rate such as 8%, 0.08 or 200 ppm",
        read_rate,
        ("8%", 1.5),
        numeric=True,
    ),
    Column(
        "power",
        "The wanted chance of rejecting when the catch value is true.",
        "a probability between 0 and 1, such as 90% or 0.9",
        read_probability,
        ("90%", "90%"),
        numeric=True,
        style="rate",
        limits=(0.0, 1.0),
    ),
    Column(
        "side",
        "Where the true value lies when the claim is false.",
        _one_of(*_SIDES),
        _choice(*_SIDES),
        ("above", "above"),
        choices=_SIDES,
    ),
    Column(
        "lot",
        "Number of items in the lot; needed where the kind is hypergeometric.",
        "a whole number of at least 1",
        read_lot,
        numeric=True,
        limits=(1, 1_000_000_000),
    ),
    Column(
        "n",
        "A fixed sample size; left empty, the smallest one that keeps both risks is found.",
        "a number above 0",
        read_count,
        numeric=True,
        limits=(0.0, 1e15),
    ),
    Column(
        "verdict",
        "What rejecting the claim means for the lot; pass in a demonstration.",
        _one_of(*VERDICTS),
        _choice(*VERDICTS),
        choices=VERDICTS,
    ),
    Column(
        "split",
        "How the side either shares alpha between its two ends.",
        _one_of(*SPLITS),
        _choice(*SPLITS),
        choices=SPLITS,
    ),
    Column(
        "sigma",
        "The standard deviation, for kinds that measure.",
        "a number above 0",
        read_count,
        numeric=True,
        limits=(0.0, 1e15),
    ),
    Column(
        "unit",
        "What the numbers count or measure.",
        _TEXT,
        read_words,
        ("emitters", "defects per 100 m"),
        style="words",
    ),
    Column(
        "risk class",
        "A class that gives alpha, catch and power where they are empty.",
        _TEXT,
        read_words,
        style="words",
    ),
    Column(
        "reference",
        "Where the requirement stands.",
        _TEXT,
        read_words,
        ("Drawing 4711, note 3", "Procedure QP-07"),
        style="words",
    ),
    Column(
        "note",
        "Anything else.",
        _TEXT,
        read_words,
        ("An example: type over it", "An example: type over it"),
        style="words",
    ),
)
