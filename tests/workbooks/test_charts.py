"""Charts: what they show, and that they show it without being calculated."""

import math
from xml.etree import ElementTree

import pytest

from steelyard.workbooks import styles
from steelyard.workbooks.charts import step, stroke_of
from steelyard.workbooks.house import Axis, Book, Curve, Live, LiveArray, Put, curve_chart

C = "{http://schemas.openxmlformats.org/drawingml/2006/chart}"
A = "{http://schemas.openxmlformats.org/drawingml/2006/main}"
RATES = [0.0, 0.02, 0.04, 0.08]
POWERS = [0.0, 0.0178, 0.139, None]


def book_with_chart(curves=1):
    book = Book("Example")
    sheet = book.sheet("Power grid")
    top = sheet.add(Put("Plan", "heading"), *(Put(rate, "input rate") for rate in RATES))
    for _ in range(curves):
        row = sheet.next_row
        formula = f"=SY_POWER(A{row},$B${top}:$E${top})"
        sheet.add(
            Live("=SY_BINOMIAL(50,2%)", "binomial | n 50"), LiveArray(formula, [POWERS], "result power")
        )
    sheet.add(Put("claim"), Put(0.02), Put(0))
    sheet.add(None, Put(0.02), Put(1))
    last = sheet.next_row - 1
    xs = sheet.ref(f"B{top}", f"E{top}")
    lines = [Curve(sheet.ref(f"A{r}"), xs, sheet.ref(f"B{r}", f"E{r}")) for r in range(2, 2 + curves)]
    claim = Curve(
        "claim", sheet.ref(f"B{last - 1}", f"B{last}"), sheet.ref(f"C{last - 1}", f"C{last}"), "claim"
    )
    chart = curve_chart(
        "Power",
        Axis("True rate (defectives per item)", 0.08),
        Axis("Power", 1, digits="0.0"),
        [*lines, claim],
    )
    sheet.chart(chart, 'Power of "binomial | n 50" from 0 to 8 %')
    return book


@pytest.fixture
def chart(saved):
    _, _, parts = saved(book_with_chart())
    return ElementTree.fromstring(parts["xl/charts/chart1.xml"])


def texts(element, path):
    return [found.text for found in element.iterfind(path)]


def test_points_and_names_are_stored_in_the_chart(chart):
    curve, claim = chart.iter(f"{C}ser")
    assert texts(curve, f"{C}tx/{C}strRef/{C}f") == ["'Power grid'!$A$2"]
    assert texts(curve, f"{C}tx/{C}strRef/{C}strCache/{C}pt/{C}v") == ["binomial | n 50"]
    assert texts(curve, f"{C}xVal/{C}numRef/{C}f") == ["'Power grid'!$B$1:$E$1"]
    points = curve.findall(f"{C}yVal/{C}numRef/{C}numCache/{C}pt")
    assert {int(point.get("idx")): float(point.find(f"{C}v").text) for point in points} == {
        0: 0.0,
        1: 0.0178,
        2: 0.139,
    }
    assert curve.find(f"{C}yVal/{C}numRef/{C}numCache/{C}ptCount").get("val") == "4"
    assert texts(claim, f"{C}tx/{C}v") == ["claim"]
    assert texts(claim, f"{C}yVal/{C}numRef/{C}numCache/{C}pt/{C}v") == ["0", "1"]


def test_axes_are_there_with_titles_and_ends(chart):
    for axis, title, high, unit, place in zip(
        chart.iter(f"{C}valAx"),
        ["True rate (defectives per item)", "Power"],
        [0.08, 1],
        [0.01, 0.1],
        "bl",
        strict=True,
    ):
        assert texts(axis, f".//{A}t") == [title]
        assert axis.find(f"{C}delete").get("val") == "0"
        assert float(axis.find(f"{C}scaling/{C}max").get("val")) == high
        assert float(axis.find(f"{C}scaling/{C}min").get("val")) == 0
        assert float(axis.find(f"{C}majorUnit").get("val")) == unit
        assert axis.find(f"{C}axPos").get("val") == place
        assert axis.find(f"{C}numFmt").get("sourceLinked") == "0"


def test_lines_and_letters_are_set_in_full(chart):
    strokes = [(line.find(f".//{A}srgbClr").get("val"), line.find(f"{A}prstDash").get("val")) for line in
               chart.iterfind(f".//{C}ser/{C}spPr/{A}ln")]  # fmt: skip
    assert strokes == [(styles.CURVES[0], "solid"), (styles.INK, "sysDash")]
    assert {symbol.get("val") for symbol in chart.iter(f"{C}symbol")} == {"none"}
    assert {smooth.get("val") for smooth in chart.iter(f"{C}smooth")} == {"0"}
    assert {overlay.get("val") for overlay in chart.iter(f"{C}overlay")} == {"0"}
    assert chart.find(f".//{C}legendPos").get("val") == "b"
    letters = [*chart.iter(f"{A}defRPr"), *chart.iter(f"{A}rPr")]
    assert {letter.find(f"{A}latin").get("typeface") for letter in letters} == {"Arial"}
    assert all(800 <= int(letter.get("sz")) <= 1200 for letter in letters)


def descriptions(parts, number):
    drawing = ElementTree.fromstring(parts[f"xl/drawings/drawing{number}.xml"])
    return [element.get("descr") for element in drawing.iter() if element.tag.endswith("cNvPr")]


def test_charts_of_several_sheets_keep_their_descriptions(saved):
    book = book_with_chart()
    book.sheet("No chart").add(Put("text"))
    other = book.sheet("Second")
    other.add(Put(0.0), Put(1.0))
    curve = Curve("line", other.ref("A1", "B1"), other.ref("A1", "B1"), "points")
    other.chart(curve_chart("Dots", Axis("x"), Axis("y"), [curve]), "Second chart", "D5")
    _, _, parts = saved(book)
    assert descriptions(parts, 1) == ['Power of "binomial | n 50" from 0 to 8 %']
    assert descriptions(parts, 2) == ["Second chart"]
    second = ElementTree.fromstring(parts["xl/charts/chart2.xml"])
    assert second.find(f".//{C}symbol").get("val") == "circle"
    assert second.find(f".//{C}scaling/{C}max") is None


def test_a_chart_below_the_rows_does_not_cover_the_next_ones():
    book = book_with_chart(12)
    sheet = book.sheets["Power grid"]
    chart = sheet.raw._charts[0]
    assert sheet.next_row - 16 >= chart.height / 0.53  # a row of 15 points is 0.53 cm high


def test_no_two_of_twelve_curves_look_alike():
    strokes = [stroke_of(number) for number in range(12)]
    assert len({stroke.dash for stroke in strokes[:6]}) == 6
    assert len({(stroke.dash, stroke.colour) for stroke in strokes}) == 12


@pytest.mark.parametrize("high", [1e-6, 0.0004, 0.08, 0.1, 0.15, 0.3, 1, 7, 12, 99, 52_659])
def test_steps_are_few_and_round(high):
    unit = step(0, high)
    assert 4 <= high / unit <= 10.0001
    assert unit / 10 ** math.floor(math.log10(unit) + 1e-9) in (
        pytest.approx(1),
        pytest.approx(2),
        pytest.approx(5),
    )
