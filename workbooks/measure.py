"""How wide texts are, and column widths and row heights that show them whole."""

from __future__ import annotations

from collections.abc import Mapping
from functools import lru_cache
from typing import Any

from openpyxl.utils import column_index_from_string, get_column_letter

from steelyard.workbooks.pieces import Value
from steelyard.workbooks.styles import SIZE, Look, read_style

# Advance widths of Arial in thousandths of the font size; letters not listed count as wide capitals.
_WIDTHS = {
    191: "'",
    222: "ijl‘’",
    260: "|",
    278: " !,./:;I[\\]ft",
    333: "()-`r·²",
    334: "{}",
    355: '"',
    389: "*",
    400: "°",
    469: "^",
    500: "Jcksvxyz",
    549: "≤≥≠≈±√",
    556: "#$0123456789?L_abdeghnopquäöüéñ–",
    577: "αβµ",
    584: "+<=>~×−",
    611: "FTZ",
    667: "ABEKPSVXY&",
    722: "CDHNRUw",
    778: "GOQ",
    833: "Mm",
    889: "%",
    944: "W",
    1000: "—…→",
    1015: "@",
}
_WIDTH_OF = {letter: width for width, letters in _WIDTHS.items() for letter in letters}
_OTHER = 722
_PIXELS_PER_POINT = 96 / 72
_DIGIT, _PADDING = 7, 5  # pixels: a digit of the normal font (the unit of columns), and a cell's padding
_LINE = 1.26  # height of a line in font sizes

NARROWEST, WIDEST = 6.0, 52.0


@lru_cache(maxsize=4096)
def text_width(text: str, size: float = SIZE, bold: bool = False) -> float:
    """Return the column width that shows one line of text whole.

    Parameters
    ----------
    text : str
        A single line.
    size : float
        Font size in points.
    bold : bool
        Whether the letters are bold.

    Returns
    -------
    float
        In the unit of column widths, the padding of the cell included.

    Examples
    --------
    >>> round(text_width("0000000"), 1)
    7.9
    """
    units = sum([_WIDTH_OF.get(letter, _OTHER) for letter in text])
    pixels = units / 1000 * round(size * _PIXELS_PER_POINT) * (1.08 if bold else 1.0)
    return (pixels + _PADDING) / _DIGIT


def line_count(text: str, width: float, size: float = SIZE, bold: bool = False) -> int:
    """Return how many lines a text takes when a column of this width wraps it at blanks.

    Examples
    --------
    >>> line_count("reject the lot", 10.0)
    2
    """
    if "\n" not in text and text_width(text, size, bold) <= width:
        return 1
    lines = 0
    for paragraph in text.split("\n"):
        line = ""
        for word in paragraph.split(" "):
            longer = f"{line} {word}" if line else word
            if line and text_width(longer, size, bold) > width:
                lines, line = lines + 1, word
            else:
                line = longer
        lines += 1
    return lines


class Fit:
    """Sees what is written to a sheet, and settles its column widths and row heights at the end.

    Parameters
    ----------
    fixed : mapping
        Column letters -> widths that are given; other columns follow their widest cell.
    """

    def __init__(self, fixed: Mapping[str, float]) -> None:
        self._fixed = {column_index_from_string(letters): width for letters, width in fixed.items()}
        self._widest: dict[int, float] = {}
        self._wrapped: list[tuple[int, int, int, str, Look]] = []
        self._heights: dict[int, float] = {}

    def see(self, row: int, column: int, value: Value, style: str, span: int) -> None:
        """Take a cell into account."""
        look, digits, _ = read_style(style)
        if look.wrap and isinstance(value, str):
            self._wrapped.append((row, column, span, value, look))
        elif look.size > SIZE:
            self._heights[row] = look.size * 1.6
        if span > 1 or look.spill or column in self._fixed:
            return
        if isinstance(value, str):
            width = text_width(value, look.size, look.bold)
            if look.wrap and look.bold:  # a heading may take two lines
                longest = max(text_width(word, look.size, True) for word in value.split(" "))
                width = max(longest, width / 2 + 1)
        elif digits is not None:
            width = digits.width
        else:
            width = min(len(str(value)), 11) + 1.0
        self._widest[column] = max(width, self._widest.get(column, NARROWEST))

    def widen(self, column: int, by: float) -> None:
        """Give a fitted column more room."""
        self._widest[column] = self._widest.get(column, NARROWEST) + by

    def settle(self, worksheet: Any) -> None:
        """Set the widths, and the heights that wrapped texts need: not every program fits them on opening."""
        widths = {column: min(width, WIDEST) for column, width in self._widest.items()} | self._fixed
        for column, width in widths.items():
            worksheet.column_dimensions[get_column_letter(column)].width = round(width, 2)
        for row, column, span, text, look in self._wrapped:
            width = sum(widths.get(covered, NARROWEST) for covered in range(column, column + span))
            lines = line_count(text, width, look.size, look.bold)
            if lines > 1:
                self._heights[row] = max(self._heights.get(row, 0.0), lines * look.size * _LINE + 3)
        for row, height in self._heights.items():
            if worksheet.row_dimensions[row].height is None:
                worksheet.row_dimensions[row].height = round(height, 1)
