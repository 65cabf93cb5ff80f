"""Sheets as rows of pieces: what reaches the file, and what is refused."""

import re
from itertools import pairwise

import pytest
from python_calamine import CalamineWorkbook

from steelyard.core.errors import InvalidValue, SteelyardError
from steelyard.workbooks import styles
from steelyard.workbooks.formulas import LATER, check_name, spell
from steelyard.workbooks.house import Book, Check, Live, LiveArray, Put, between, choice
from steelyard.workbooks.measure import WIDEST, line_count, text_width

HOSTILE = ['=HYPERLINK("http://example.com")', "+cmd|' /C calc'!A0", "-1+1", "@SUM(1)", "#N/A", "=", "  two "]


@pytest.mark.parametrize("text", HOSTILE)
def test_a_text_stays_a_text(text, saved, tmp_path):
    book = Book("Example")
    book.sheet("One").add(Put(text, "input"))
    formulas, _, parts = saved(book)
    assert (formulas["One"]["A1"].value, formulas["One"]["A1"].data_type) == (text, "s")
    assert b"<f" not in parts["xl/worksheets/sheet1.xml"]
    assert CalamineWorkbook.from_path(tmp_path / "saved.xlsx").get_sheet_by_name("One").to_python() == [
        [text]
    ]


@pytest.mark.parametrize(("host", "text"), [("excel", "=SY_SIZE(A1)"), ("calc", "=SY.SIZE(A1)")])
def test_a_formula_has_its_value_beside_it(host, text, saved):
    book = Book("Example", host)
    book.sheet("One").add(Live("=SY_SIZE(A1)", 0.017812345678901234), Live('=A1&"<&>"', "<&> text"))
    formulas, values, _ = saved(book)
    assert [cell.value for cell in formulas["One"][1]] == [text, '=A1&"<&>"']
    assert [cell.value for cell in values["One"][1]] == [0.017812345678901234, "<&> text"]


@pytest.mark.parametrize("number", [1 / 3, 0.1 + 0.2, 5e-324, 1.7976931348623157e308, -0.0, 46_372, 2**60])
def test_numbers_keep_every_digit(number, saved):
    book = Book("Example")
    book.sheet("One").add(Put(number), Live("=A1", number), LiveArray("=A1:B1", [[number, number]]))
    _, values, _ = saved(book)
    assert [cell.value for cell in values["One"][1]] == [number] * 4


def test_an_array_formula_covers_its_row_with_values(saved):
    book = Book("Example")
    sheet = book.sheet("One")
    sheet.skip(2)
    assert sheet.add(Put("plan"), LiveArray("=SY_POWER(A3,B1:D1)", [[0.1, None, 0.9]], "result power")) == 3
    formulas, values, _ = saved(book)
    master = formulas["One"]["B3"].value
    assert (master.ref, master.text) == ("B3:D3", "=SY_POWER(A3,B1:D1)")
    assert [cell.value for cell in values["One"][3]] == ["plan", 0.1, None, 0.9]


def test_an_array_formula_may_go_down(saved):
    book = Book("Example")
    sheet = book.sheet("One")
    sheet.add(Put("first"), LiveArray("=SY_EXPLAIN(A1)", [["a"], ["b"]], "text"))
    assert sheet.next_row == 3
    formulas, values, _ = saved(book)
    assert formulas["One"]["B1"].value.ref == "B1:B2"
    assert values["One"]["B2"].value == "b"


def test_an_empty_result_is_an_empty_text(saved):
    book = Book("Example")
    book.sheet("One").add(Live("=SY_POWER(A1,B1)", None))
    _, _, parts = saved(book)
    assert b'<c r="A1" s="1" t="str"><f>SY_POWER(A1,B1)</f><v></v></c>' in parts["xl/worksheets/sheet1.xml"]


@pytest.mark.parametrize("value", [float("nan"), float("inf"), True])
def test_what_is_no_number_is_refused(value):
    with pytest.raises(InvalidValue, match=r"One!A1 must be a text or a finite number"):
        Book("Example").sheet("One").add(Put(value))


def test_a_table_can_be_filtered_and_has_no_array(saved):
    book = Book("Example")
    sheet = book.sheet("Register")
    rows = [[Put("leak"), Live("=LEN(A2)", 4)], [Put("flash"), Live("=LEN(A3)", 5)]]
    assert sheet.table("Register", ["Characteristic", "n"], rows) == 1
    formulas, _, _ = saved(book)
    table = formulas["Register"].tables["Register"]
    assert (table.ref, table.autoFilter.ref) == ("A1:B3", "A1:B3")
    assert [column.name for column in table.tableColumns] == ["Characteristic", "n"]
    with pytest.raises(InvalidValue, match="table must hold no array formula"):
        sheet.table("Second", ["a"], [[LiveArray("=A1:B1", [[1, 2]])]])
    with pytest.raises(InvalidValue, match="headings must differ"):
        sheet.table("Third", ["n", "N"], [])


@pytest.mark.parametrize(
    "name", ["AQL10", "OC1", "n1", "R", "c", "R1C1", "rc", "TRUE", "a b", "1st", "", "é"]
)
def test_names_that_are_read_as_something_else_are_refused(name):
    with pytest.raises(InvalidValue, match="name must"):
        check_name(name)


@pytest.mark.parametrize("name", ["claim_rate", "_x", "ABCD1", "plan.text", "RCA", "Power_grid"])
def test_good_names_pass(name, saved):
    book = Book("Example")
    book.name(name, book.sheet("It's one").ref("B7", "D9"))
    formulas, _, _ = saved(book)
    assert formulas.defined_names[name].attr_text == "'It''s one'!$B$7:$D$9"
    with pytest.raises(InvalidValue, match="name must not be taken already"):
        book.name(name.upper(), "One!$A$1")


def test_sheet_titles_are_made_from_any_text():
    book = Book("Example")
    for wanted, title in [
        ("Leak/at 1 bar?", "Leak-at 1 bar."),
        ("leak/at 1 BAR?", "leak-at 1 BAR. (2)"),
        ("x" * 40, "x" * 31),
        ("x" * 40, "x" * 27 + " (2)"),
        ("History", "History (2)"),
        ("'''", "Sheet"),
    ]:
        assert book.free_title(wanted) == title
        book.sheet(title)


def test_drop_downs_show_their_message(saved):
    book = Book("Example")
    sheet = book.sheet("One")
    side = choice(["above", "below"], title="Side", prompt="Where the true rate lies")
    sheet.add(Put("above", "input", check=side), Put(0.05, "input rate", check=between(0, 1)))
    sheet.add(Put("below", "input", check=side))
    sheet.check("C1:C9", between(1, 800, whole=True, blank=True))
    formulas, _, _ = saved(book)
    checks = {str(check.sqref): check for check in formulas["One"].data_validations.dataValidation}
    first, second, third = (checks[area] for area in ("A1:A2", "B1", "C1:C9"))
    assert (first.type, first.formula1) == ("list", '"above,below"')
    assert (first.error, first.prompt) == ("Choose one of: above, below.", "Where the true rate lies")
    assert (second.type, second.formula1, second.formula2, second.allow_blank) == ("decimal", "0", "1", False)
    assert (third.type, third.allow_blank) == ("whole", True)
    assert all(check.showErrorMessage and not check.showDropDown for check in (first, second, third))


def test_messages_fit_into_the_file_format():
    with pytest.raises(InvalidValue, match="prompt must have at most 255 characters"):
        Check("decimal", "0", prompt="x" * 256)
    with pytest.raises(InvalidValue, match="options must hold no comma"):
        choice(["a,b"])


def test_only_inputs_are_unlocked_and_there_is_no_password(saved):
    book = Book("Example")
    sheet = book.sheet("One")
    sheet.add(Put("Claim", "label"), Put(0.02, "input rate"), Live("=B1", 0.02))
    sheet.protect()
    formulas, _, _ = saved(book)
    assert [cell.protection.locked for cell in formulas["One"][1]] == [True, False, True]
    assert formulas["One"].protection.sheet
    assert formulas["One"].protection.password is None


def test_pages_fit_and_are_numbered(saved):
    book = Book("Nuts & bolts", imprint="Steelyard 0.1.0")
    sheet = book.sheet("One")
    sheet.add(Put("Title", "title"))
    sheet.print_setup(landscape=True, repeat="1:1", area="A1:H60")
    sheet.freeze("B2")
    formulas, _, parts = saved(book)
    page = formulas["One"].page_setup
    assert (page.orientation, page.paperSize, page.fitToWidth, page.fitToHeight) == ("landscape", 9, 1, 0)
    assert formulas["One"].sheet_properties.pageSetUpPr.fitToPage
    assert (formulas["One"].print_title_rows, formulas["One"].freeze_panes) == ("$1:$1", "B2")
    assert formulas["One"].print_area == "'One'!$A$1:$H$60"
    xml = parts["xl/worksheets/sheet1.xml"].decode()
    assert "Nuts &amp;&amp; bolts" in xml
    assert "Page &amp;P of &amp;N" in xml


def test_columns_are_as_wide_as_their_texts(saved):
    book = Book("Example")
    sheet = book.sheet("One", {"C": 12})
    words = "rejects the lot when four or more items are defective " * 3
    sheet.add(Put("A title that may run over its neighbours", "title"))
    sheet.add(Put("off-nominal flow"), Put(0.93, "power"), Put(words, "text"), Put(words, "text"))
    sheet.add(Put(words, "text", span=4))
    formulas, _, _ = saved(book)
    widths = {letter: formulas["One"].column_dimensions[letter].width for letter in "ABCD"}
    assert widths["A"] == pytest.approx(text_width("off-nominal flow"), abs=0.01)
    assert widths["C"] == 12
    assert widths["D"] == WIDEST
    lines = line_count(words, 12)
    assert lines >= 10
    assert formulas["One"].row_dimensions[2].height > lines * 12
    assert 2 * 12 < formulas["One"].row_dimensions[3].height < 4 * 12
    assert "A3:D3" in map(str, formulas["One"].merged_cells.ranges)


# Widths in pixels at 13 pixels per em, added up by hand from the advance widths of Arial (from memory).
@pytest.mark.parametrize(("text", "pixels"), [("0000000000", 72.3), ("Will", 20.9), ("", 0.0), ("%", 11.6)])
def test_text_width_adds_up(text, pixels):
    assert text_width(text) == pytest.approx((pixels + 5) / 7, abs=0.03)


def test_every_font_is_the_house_font(saved):
    book = Book("Example")
    for look in styles.LOOKS:
        book.sheet(look).add(*(Put(None, f"{look} {digits}") for digits in styles.DIGITS))
    formulas, _, parts = saved(book)
    assert set(re.findall(r'<name val="([^"]+)"', parts["xl/styles.xml"].decode())) == {"Arial"}
    assert formulas["input"]["A1"].number_format == styles.DIGITS["count"].code


def test_an_unknown_style_is_refused():
    with pytest.raises(InvalidValue, match=r"style must be made of plain, title, .*, but got reslt power"):
        Book("Example").sheet("One").add(Put(1, "reslt power"))


def test_conditional_colours_reach_the_file(saved):
    book = Book("Example", "calc")
    sheet = book.sheet("One")
    sheet.add(Put(0.2), Put(0.9))
    sheet.colour_scale("A1:B1")
    sheet.flag("A1:B1", "=ABS(A1-BINOM.DIST(1,2,A1,TRUE))>1E-9")
    formulas, _, _ = saved(book)
    scale, flag = [rule for rules in formulas["One"].conditional_formatting for rule in rules.rules]
    assert [stop.val for stop in scale.colorScale.cfvo] == [0, 1]
    assert flag.formula == ["ABS(A1-_xlfn.BINOM.DIST(1,2,A1,TRUE))>1E-9"]


def test_links_lead_to_sheets(saved):
    book = Book("Example")
    sheet = book.sheet("One")
    sheet.add(Put("see", "link", link=sheet.ref("A9")))
    formulas, _, _ = saved(book)
    assert formulas["One"]["A1"].hyperlink.location == "'One'!$A$9"


def test_the_document_says_what_it_is(saved):
    book = Book("Plan book", subject="Sampling", description="About", keywords="a, b", imprint="Steelyard 9")
    book.sheet("One")
    formulas, _, _ = saved(book)
    properties = formulas.properties
    assert (properties.title, properties.subject, properties.creator) == (
        "Plan book",
        "Sampling",
        "Steelyard 9",
    )
    assert (properties.description, properties.keywords) == ("About", "a, b")


@pytest.mark.parametrize(
    ("formula", "host", "text"),
    [
        ("=SY_POWER(A2,B$1)", "calc", "=SY.POWER(A2,B$1)"),
        ('="SY_POWER(" & SY_SIZE(A1)', "calc", '="SY_POWER(" & SY.SIZE(A1)'),
        ("='SY_X('!A1+IF(A1,1,2)", "calc", "='SY_X('!A1+IF(A1,1,2)"),
        ("=1-POISSON.DIST(3,A1,TRUE)", "excel", "=1-_xlfn.POISSON.DIST(3,A1,TRUE)"),
        ("=_xlfn.T.INV.2T(0.1,5)", "excel", "=_xlfn.T.INV.2T(0.1,5)"),
        (
            "=SUMPRODUCT(BINOM.DIST({0,1},50,A1,FALSE))",
            "excel",
            "=SUMPRODUCT(_xlfn.BINOM.DIST({0,1},50,A1,FALSE))",
        ),
    ],
)
def test_formulas_are_spelled_for_the_host(formula, host, text):
    assert spell(formula, host) == text


@pytest.mark.parametrize("name", ["LET", "XLOOKUP", "BINOM.DIST.RANGE", "BINOMDIST2"])
def test_a_function_that_not_both_hosts_know_is_refused(name):
    with pytest.raises(SteelyardError, match=f"both Excel and Calc know, but got {name}"):
        spell(f"={name}(1)", "excel")


CALLS = {
    "DIST": {
        **{"BETA": "0.3,2,3,TRUE", "BINOM": "1,4,0.2,TRUE", "CHISQ": "1,3,TRUE", "EXPON": "1,2,TRUE"},
        **{"F": "1,3,4,TRUE", "GAMMA": "1,2,3,TRUE", "HYPGEOM": "1,5,4,20,TRUE", "NEGBINOM": "2,3,0.4,TRUE"},
        **{"NORM": "1,2,3,TRUE", "NORM.S": "1,TRUE", "POISSON": "2,3,TRUE", "T": "1,5,TRUE"},
    },
    "INV": {
        **{"BETA": "0.3,2,3", "BINOM": "4,0.2,0.5", "CHISQ": "0.3,3", "F": "0.3,3,4", "GAMMA": "0.3,2,3"},
        **{"NORM": "0.3,2,3", "NORM.S": "0.3", "T": "0.3,5"},
    },
    "DIST.RT": {"CHISQ": "1,3", "F": "1,3,4", "T": "1,5"},
    "INV.RT": {"CHISQ": "0.3,3", "F": "0.3,3,4"},
    "DIST.2T": {"T": "1,5"},
    "INV.2T": {"T": "0.3,5"},
    "S": {"STDEV": "1,2,4", "VAR": "1,2,4"},
}
OTHERS = {
    **{
        "CONCAT": '"a","b"',
        "IFNA": "1,2",
        "IFS": "TRUE,1",
        "SWITCH": "1,1,2",
        "TEXTJOIN": '",",TRUE,"a","b"',
    },
    "RANK.EQ": "1,A1:A3",
}


@pytest.mark.calc
def test_calc_knows_every_later_function(tmp_path, calc_values):
    calls = {f"{law}.{part}": given for part, laws in CALLS.items() for law, given in laws.items()} | OTHERS
    assert set(calls) == LATER
    book = Book("Example", "calc")
    sheet = book.sheet("One")
    sheet.add(Put(1))
    sheet.rows([Put(name), Live(f"={name}({given})", "not calculated")] for name, given in calls.items())
    book.save(tmp_path / "later.xlsx")
    rows = calc_values(tmp_path / "later.xlsx")["One"].iter_rows(min_row=2, values_only=True)
    found = {name: value for name, value, *_ in rows}
    assert set(found) == LATER
    assert {name: value for name, value in found.items() if isinstance(value, str)} == {
        "CONCAT": "ab",
        "TEXTJOIN": "a,b",
    }
    assert found["BINOM.DIST"] == pytest.approx(0.8192, rel=1e-12)  # 0.8^4 + 4 * 0.2 * 0.8^3


def luminance(colour):
    """Return the relative luminance of a colour (Web Content Accessibility Guidelines, from memory)."""
    parts = [int(colour[i : i + 2], 16) / 255 for i in (0, 2, 4)]
    red, green, blue = [p / 12.92 if p <= 0.04045 else ((p + 0.055) / 1.055) ** 2.4 for p in parts]
    return 0.2126 * red + 0.7152 * green + 0.0722 * blue


def contrast(one, other):
    light, dark = sorted((luminance(one), luminance(other)), reverse=True)
    return (light + 0.05) / (dark + 0.05)


# Contrast of 4.5 for text, 3 for lines: Web Content Accessibility Guidelines, 1.4.3, 1.4.11 (from memory).
@pytest.mark.parametrize("name", styles.LOOKS)
def test_texts_stand_out_from_their_fill(name):
    look = styles.LOOKS[name]
    assert contrast(look.colour, look.fill or styles.WHITE) >= 4.5


def test_digits_stand_out_from_the_colour_scale():
    assert contrast(styles.INK, styles.DEEP) >= 4.5


def test_curves_stand_out_from_paper_and_neighbours_differ_in_grey():
    assert all(contrast(colour, styles.WHITE) >= 3 for colour in styles.CURVES)
    assert all(contrast(one, other) >= 1.3 for one, other in pairwise([*styles.CURVES, styles.CURVES[0]]))
