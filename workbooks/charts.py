"""Charts of curves over a rate or a sample size, with claim, catch and target marked as lines.

Curves differ in dash pattern as well as in colour, so that up to twelve stay apart in grey print. Points are
stored in the chart too (`fill_caches`), so that previewers draw it without calculating.
"""

from __future__ import annotations

import math
import re
from collections.abc import Callable, Sequence
from dataclasses import dataclass
from typing import Any, Literal

from openpyxl.chart import ScatterChart
from openpyxl.chart.axis import ChartLines, NumericAxis
from openpyxl.chart.data_source import (
    AxDataSource,
    NumData,
    NumDataSource,
    NumRef,
    NumVal,
    StrData,
    StrRef,
    StrVal,
)
from openpyxl.chart.marker import Marker
from openpyxl.chart.series import SeriesLabel, XYSeries
from openpyxl.chart.shapes import GraphicalProperties
from openpyxl.chart.text import RichText, Text
from openpyxl.chart.title import Title
from openpyxl.drawing.line import LineProperties
from openpyxl.drawing.text import CharacterProperties, Font, Paragraph, ParagraphProperties, RegularTextRun

from steelyard.workbooks import styles

Role = Literal["curve", "claim", "catch", "target", "points"]

_DASHES = ("solid", "dash", "sysDot", "dashDot", "lgDash", "lgDashDotDot")
_POINT = 12700  # EMU per point
_LEGEND_ROW = 0.5  # cm for about two names
_CELL = re.compile(r"(?:'(?:[^']|'')+'|\w+)!\$[A-Z]{1,3}\$\d+")


@dataclass(frozen=True, slots=True)
class Stroke:
    """How a line is drawn; without a dash only its points are."""

    colour: str
    dash: str
    points: float
    marker: str = "none"


#: Lines that mark something, drawn alike in every chart.
MARKS: dict[str, Stroke] = {
    "claim": Stroke(styles.INK, "sysDash", 1.25),
    "catch": Stroke(styles.RUST, "lgDashDot", 1.25),
    "target": Stroke(styles.SLATE, "dash", 1.0),
    "points": Stroke(styles.RIVER, "", 1.0, marker="circle"),
}


@dataclass(frozen=True, slots=True)
class Curve:
    """One line of a chart.

    Parameters
    ----------
    name : str
        Text of the legend, or a reference to the cell that holds it.
    x, y : str
        References with sheet names, equally long: ``"'Power grid'!$B$4:$K$4"``.
        A line that marks a rate is a pair of cells with x twice and y from 0 to 1.
    role : {"curve", "claim", "catch", "target", "points"}
        Curves get a colour and dash pattern of their own, the others look alike everywhere.
    """

    name: str
    x: str
    y: str
    role: Role = "curve"


@dataclass(frozen=True, slots=True)
class Axis:
    """An axis: its title with the unit, its ends, and the number format of its labels."""

    title: str
    high: float | None = None
    low: float = 0.0
    digits: str = "0%"


def curve_chart(
    title: str, x: Axis, y: Axis, curves: Sequence[Curve], width: float = 17.5, height: float = 8.5
) -> ScatterChart:
    """Return a chart of 1 to 12 curves and any number of marking lines.

    Parameters
    ----------
    title : str
        What the chart shows.
    x, y : Axis
        Without `high` the program chooses the end, which then follows edited cells.
    curves : sequence of Curve
        In the order of the legend.
    width, height : float
        In centimetres, without what the legend adds to the height; a portrait A4 page takes 18.
    """
    chart = ScatterChart()
    chart.scatterStyle, chart.style, chart.roundedCorners = "lineMarker", None, False
    chart.width, chart.height = width, height + _LEGEND_ROW * math.ceil(len(curves) / 2)
    chart.title = _title(title, 11, bold=True)
    chart.legend.position, chart.legend.overlay = "b", False
    chart.legend.txPr = _text(9)
    chart.graphical_properties = GraphicalProperties(solidFill=styles.WHITE, ln=LineProperties(noFill=True))
    _set_axis(chart.x_axis, x, "b")
    _set_axis(chart.y_axis, y, "l")
    number = 0
    for curve in curves:
        stroke = stroke_of(number) if curve.role == "curve" else MARKS[curve.role]
        number += curve.role == "curve"
        chart.series.append(_series(curve, stroke, len(chart.series)))
    return chart


def stroke_of(number: int) -> Stroke:
    """Return colour and dash of the n-th curve; no two of the first 36 are alike.

    Examples
    --------
    >>> stroke_of(0).dash, stroke_of(6).dash
    ('solid', 'dash')
    """
    colours = len(styles.CURVES)
    return Stroke(styles.CURVES[number % colours], _DASHES[(number + number // colours) % len(_DASHES)], 2.0)


def step(low: float, high: float) -> float:
    """Return the distance of axis labels: 1, 2 or 5 times a power of ten, at most ten steps.

    Examples
    --------
    >>> step(0, 0.08), step(0, 1)
    (0.01, 0.1)
    """
    rough = (high - low) / 10
    power = 10.0 ** math.floor(math.log10(rough))
    factor = next(f for f in (1, 2, 5, 10) if f * power >= rough * (1 - 1e-9))
    return float(f"{factor * power:.12g}")


def fill_caches(chart: Any, values: Callable[[str], Sequence[Any]]) -> None:
    """Store the points and names of a chart in it.

    Parameters
    ----------
    chart : openpyxl chart
        Its series refer to cells.
    values : callable
        Gives the values that a reference shows.
    """
    for series in chart.series:
        for reference in (series.xVal.numRef, series.yVal.numRef):
            shown = values(reference.f)
            points = [NumVal(idx=i, v=v) for i, v in enumerate(shown) if isinstance(v, int | float)]
            reference.numCache = NumData(formatCode="General", ptCount=len(shown), pt=points)
        label = series.tx.strRef
        if label is not None:
            text = "".join("" if v is None else str(v) for v in values(label.f))
            label.strCache = StrData(ptCount=1, pt=[StrVal(idx=0, v=text)])


def _series(curve: Curve, stroke: Stroke, index: int) -> XYSeries:
    label = (
        SeriesLabel(strRef=StrRef(f=curve.name)) if _CELL.fullmatch(curve.name) else SeriesLabel(v=curve.name)
    )
    series = XYSeries(idx=index, order=index, tx=label)
    series.xVal = AxDataSource(numRef=NumRef(f=curve.x))
    series.yVal = NumDataSource(numRef=NumRef(f=curve.y))
    series.smooth = False
    series.marker = Marker(symbol=stroke.marker)
    if stroke.marker != "none":
        series.marker.size = 6
        series.marker.graphicalProperties = GraphicalProperties(solidFill=stroke.colour)
    series.graphicalProperties = GraphicalProperties(ln=_line(stroke))
    return series


def _line(stroke: Stroke) -> LineProperties:
    if not stroke.dash:
        return LineProperties(noFill=True)
    return LineProperties(solidFill=stroke.colour, prstDash=stroke.dash, w=int(stroke.points * _POINT))


def _set_axis(axis: NumericAxis, wanted: Axis, place: str) -> None:
    axis.delete, axis.axPos = False, place
    axis.title = _title(wanted.title, 9)
    axis.scaling.min = wanted.low
    if wanted.high is not None:
        axis.scaling.max = wanted.high
        axis.majorUnit = step(wanted.low, wanted.high)
    axis.number_format = wanted.digits
    axis.majorTickMark, axis.tickLblPos, axis.crosses = "out", "low", "min"
    axis.txPr = _text(9)
    axis.majorGridlines = ChartLines(spPr=GraphicalProperties(ln=LineProperties(solidFill="E3E7EA", w=6350)))
    axis.graphicalProperties = GraphicalProperties(ln=LineProperties(solidFill=styles.SLATE, w=9525))


def _letters(size: float, bold: bool = False) -> CharacterProperties:
    return CharacterProperties(
        latin=Font(typeface=styles.FONT), sz=int(size * 100), b=bold, solidFill=styles.INK
    )


def _text(size: float) -> RichText:
    properties = ParagraphProperties(defRPr=_letters(size))
    return RichText(p=[Paragraph(pPr=properties, r=[], endParaRPr=_letters(size))])


def _title(text: str, size: float, bold: bool = False) -> Title:
    letters = _letters(size, bold)
    run = RegularTextRun(rPr=letters, t=text)
    rich = RichText(p=[Paragraph(pPr=ParagraphProperties(defRPr=letters), r=[run])])
    return Title(tx=Text(rich=rich), overlay=False)
