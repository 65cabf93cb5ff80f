"""A page of labelled lines about one characteristic, linked to its row of the register."""

from __future__ import annotations

from steelyard.workbooks.house import Live, Put, Sheet
from steelyard.workbooks.sheets import rows
from steelyard.workbooks.sheets.register import Register
from steelyard.workbooks.terms import Terms, ask, literal

WIDE = 9
"""Columns of a page: one of labels, the others for values."""

VALUES = WIDE - 1


class Page:
    """What the sections of a page are made of.

    Parameters
    ----------
    sheet : Sheet
        What is written to.
    register : Register
    place : int
        The characteristic's place in the register.
    """

    def __init__(self, sheet: Sheet, register: Register, place: int) -> None:
        self.sheet, self.register, self.place = sheet, register, place
        self.planned = register.planned[place]
        self.host = sheet.book.host
        self.plan = register.term("plan", place)
        self.explained = ask(self.host, "EXPLAIN", self.plan)
        self.style = rows.rate_style(self.planned)
        self.parameter = self.planned.kind.parameters[0]

    def section(self, text: str) -> None:
        """Begin a section."""
        self.sheet.skip()
        self.sheet.add(Put(text, "section"))

    def line(self, label: str, piece: Put | Live) -> None:
        """Write a label and what belongs to it."""
        self.sheet.add(Put(label, "label"), piece)

    def blank(self, text: str | None = None) -> Put:
        """Return a line to be filled in."""
        return Put(text, "writing words", VALUES)

    def link(self, key: str, style: str, span: int = 1) -> Live:
        """Return a cell of the register, shown here too."""
        term = self.register.term(key, self.place)
        text, value = term.texts[0], term.values()[0]
        return Live(f"={text}" if value is not None else f'=IF({text}="","",{text})', value, style, span)

    def typed(self, key: str) -> Live:
        """Return a rate of the register in the form in which it was typed."""
        style = rows.typed_style(self.planned, self.register.value(key, self.place))
        return self.link(key, f"result {style}")

    def sentence(self, number: int) -> Live:
        """Return one of the sentences of SY_EXPLAIN, or why there is no plan."""
        plan, text = self.plan.texts[0], self.explained.texts[0]
        formula = f'=IF(LEFT({plan},3)="SY:",{plan},INDEX({text},{number},1))'
        return Live(formula, self.explained.cells[number - 1][0], "text", VALUES)

    def by_word(self, key: str, texts: dict[str, str]) -> Live:
        """Return the text that belongs to the word in a cell of the register."""
        term = self.register.term(key, self.place)
        *others, last = texts.values()
        formula = literal(last).texts[0]
        for word, text in zip(texts, others, strict=False):
            formula = f'IF({term.texts[0]}="{word}",{literal(text).texts[0]},{formula})'
        return Live(f"={formula}", texts[term.values()[0]], "text", VALUES)


def wide(terms: Terms, style: str, span: int) -> Live:
    """Return a formula in a cell over several columns."""
    return Live(f"={terms.texts[0]}", terms.cells[0][0], style, span)


def told(*parts: str | Terms) -> Live:
    """Return a line of words and of probabilities in percent."""
    texts, shown = [], []
    for part in parts:
        if isinstance(part, Terms):
            texts.append(f"ROUND(100*{part.texts[0]},4)")
            shown.append(f"{round(100 * part.cells[0][0], 4):g}")
        else:
            texts.append(literal(part).texts[0])
            shown.append(part)
    return Live(f"={'&'.join(texts)}", "".join(shown), "text", WIDE)
