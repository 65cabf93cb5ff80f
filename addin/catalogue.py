"""The catalogue: every cell function, defined once.

A cell function is an ordinary typed function. `cell` turns its signature into an `Entry`, which yields
the spreadsheet names, the wizard texts, the help page and the argument checks of every host.
"""

from __future__ import annotations

import inspect
from collections.abc import Callable
from dataclasses import dataclass
from typing import Annotated, Any, get_args, get_origin, get_type_hints

Cells = Any
"""What a spreadsheet hands over: a number, a text, a logical value, None, or rows of these."""


@dataclass(frozen=True, slots=True)
class Word:
    """A kind of argument: what the wizard says of it and how a cell becomes a value.

    Parameters
    ----------
    help : str
        Wizard text, at most 255 characters.
    read : callable
        From one cell and the argument's name to a value; raises a `SteelyardError`.
    whole : bool
        The function takes the range as a whole; it does not run once per cell.
    left_out : str
        What an optional argument without a default of its own then means.
    """

    help: str
    read: Callable[[Any, str], Any]
    whole: bool = False
    left_out: str = "not used"


@dataclass(frozen=True, slots=True)
class Argument:
    """One argument of a cell function.

    Parameters
    ----------
    name : str
        As the wizard shows it.
    help : str
        Its text, 1 to 255 characters.
    required : bool
        A blank cell is refused, never read as 0.
    default : object
        What a blank optional argument stands for.
    many : bool
        A range is welcome: the function answers in its shape, or takes it as a whole.
    """

    name: str
    help: str
    required: bool
    default: Any
    many: bool
    word: Word


@dataclass(frozen=True, slots=True)
class Entry:
    """A cell function: name, texts, arguments, and the plain Python callable behind it."""

    name: str
    group: str
    help: str
    arguments: tuple[Argument, ...]
    example: str
    function: Callable[..., Cells]

    @property
    def method(self) -> str:
        """Name of the method in Calc's add-in."""
        return self.name.removeprefix("SY_").lower()

    @property
    def calc_name(self) -> str:
        """Name in LibreOffice Calc."""
        return self.name.replace("SY_", "SY.", 1)


CATALOGUE: dict[str, Entry] = {}


def add(
    function: Callable[..., Any], answer: Callable[..., Cells], group: str, help: str, example: str
) -> Entry:
    """Enter a function into the catalogue; `answer` is what the hosts call."""
    entry = Entry(function.__name__, group, help, tuple(arguments_of(function)), example, answer)
    CATALOGUE[entry.name] = entry
    return entry


def arguments_of(function: Callable[..., Any]) -> list[Argument]:
    """Return the arguments that a typed function declares."""
    hints = get_type_hints(function, include_extras=True)
    found = []
    for name, parameter in inspect.signature(function).parameters.items():
        word = _word_in(hints[name])
        required = parameter.default is inspect.Parameter.empty
        default = None if required else parameter.default
        meaning = word.left_out if default is None else str(default)
        text = word.help if required else f"{word.help} Left out: {meaning}."
        found.append(Argument(name, text, required, default, True, word))
    return found


def _word_in(hint: Any) -> Word:
    if get_origin(hint) is Annotated:
        return next(part for part in get_args(hint)[1:] if isinstance(part, Word))
    return next(_word_in(part) for part in get_args(hint) if get_origin(part) is Annotated)
