"""The sheets of a plan book: blocks of the grid, native formulas, and what screen and paper show."""

import re

import pytest
from demo import Stored, build, demo
from hypothesis import given
from hypothesis import strategies as st
from openpyxl.utils import get_column_letter, range_boundaries

from steelyard.core.questions import power
from steelyard.core.text import read_plan
from steelyard.workbooks import native
from steelyard.workbooks.house import Book
from steelyard.workbooks.measure import line_count, text_width
from steelyard.workbooks.plans import plan_requests
from steelyard.workbooks.requests import Request
from steelyard.workbooks.sheets.grid import MOST_CURVES, STEPS, add_grid, blocks
from steelyard.workbooks.sheets.register import Register
from steelyard.workbooks.sheets.scales import marks, nice, rate_axis, scale_of, table_values
from steelyard.workbooks.terms import across, ask, column, literal


@pytest.fixture(scope="module")
def stored(tmp_path_factory):
    return Stored(build(tmp_path_factory.mktemp("sheets") / "demo.xlsx"))


def requests(count, **fields):
    options = {"kind": "binomial", "claim": "2%", "n": 50} | fields
    return [Request(row, f"Characteristic {row}", **options) for row in range(2, count + 2)]


# Formulas and their values


def test_a_formula_and_its_value_come_from_one_call():
    plans = column("A", 2, ["binomial | n 50 | reject x>=4", "binomial | n 80 | reject x>=4"])
    answers = ask("excel", "POWER", plans, across("$B$1:$C$1", [0.02, 0.1]))
    assert answers.texts == ("SY_POWER(A2,$B$1:$C$1)", "SY_POWER(A3,$B$1:$C$1)")
    assert answers.cells[1] == [
        power(read_plan("binomial | n 80 | reject x>=4"), rate) for rate in (0.02, 0.1)
    ]


def test_a_blank_cell_shows_nothing_instead_of_a_refusal():
    plans = column("A", 2, ["binomial | n 50 | reject x>=4"] * 2)
    rates = column("B", 2, [None, 0.1])
    answers = ask("excel", "POWER", plans, rates, unless_blank=rates)
    assert answers.texts[0] == 'IF(B2="","",SY_POWER(A2,B2))'
    assert answers.values()[0] is None
    assert answers.values()[1] > 0.7


def test_calc_tells_an_empty_cell_from_zero():
    answer = ask(
        "calc", "POWER", column("A", 2, ["binomial | n 50 | reject x>=4"]), column("$B$", 2, [0], "Other")
    )
    assert answer.texts == ("SY_POWER(A2,Other!$B$2:$B$2)",)


def test_constants_are_written_for_the_file():
    assert [literal(value).texts[0] for value in (0.05, 2.0, 1e-6, 'a "b"', None)] == [
        "0.05",
        "2",
        "1E-06",
        '"a ""b"""',
        "",
    ]


# Native formulas


@pytest.mark.parametrize(
    ("text", "rates"),
    [
        ("binomial | n 46372 | reject x>=6", [0.0, 5e-5, 2e-4, 0.01, 1.0]),
        ("binomial | n 80 | reject x<=30 or x>=50", [0.0, 0.3, 0.5, 0.7]),
        ("poisson | units 120 | reject x>=11", [0.0, 0.01, 0.05, 0.2]),
        ("poisson | units 49 | reject x<=168 or x>=225", [2.0, 4.0, 5.0]),
        ("hypergeometric | lot 60 | n 32 | reject x>=1", [0, 1, 3, 60]),
        ("hypergeometric | lot 500 | n 63 | reject x<=59", [450, 490, 500]),
    ],
)
def test_summed_point_probabilities_agree_with_the_tail_functions(text, rates):
    plan = read_plan(text)
    expected = [power(plan, rate) for rate in rates]
    assert native.power_values([plan], [rates])[0] == pytest.approx(expected, rel=1e-11, abs=1e-300)


# The power grid


def test_a_block_holds_one_parameter_and_like_scales():
    for block in blocks(demo()):
        members = [demo()[place] for place in block.places]
        assert len({member.kind.parameters[0].symbol for member in members}) == 1
        assert len(block.rates) <= STEPS + 1
        lots = [member.request.lot for member in members]
        assert all(rate <= (lot or rate) for lot in lots for rate in block.rates)
        assert all(
            block.rates[-1] >= max(marks(member)) * 0.99 for member in members if not member.request.lot
        )
    places = [place for block in blocks(demo()) for place in block.places]
    assert sorted(places) == list(range(len(demo())))


def measured(**fields):
    options = {
        "characteristic": "Wall",
        "kind": "normal",
        "claim": "mean>=0.9",
        "catch": "0.85",
        "power": 0.9,
    }
    (planned,), _ = plan_requests([Request(2, **(options | {"sigma": 0.04} | fields))])
    return planned


def test_a_mean_is_shown_around_its_claim():
    (block,) = blocks([measured(), measured(claim="mean>=0.91")])
    assert 0.75 < block.rates[0] < 0.85
    assert 0.91 < block.rates[-1] < 1.0
    assert len(blocks([measured(), measured(claim="mean>=9", catch="8.5")])) == 2


def test_scales_keep_to_what_is_possible():
    (planned,), _ = plan_requests([Request(2, "Tiny lot", "hypergeometric", "0", 0.05, "1", 0.5, lot=4)])
    assert table_values(planned, 8) == [0.0, 1.0, 2.0]
    spread = measured(kind="spread", claim="0.1", catch="0.2", sigma=None)
    assert min(scale_of(spread, 1.3).values(20)) > 0


@given(st.floats(1e-9, 1e6))
def test_round_numbers_are_the_next_larger(size):
    found = nice(size)
    assert size * (1 - 1e-9) <= found <= size * 2.5
    assert float(f"{found:.2g}") == found


@pytest.mark.parametrize(("end", "digits"), [(0.4, "0%"), (0.04, "0.0%"), (0.0004, "0.000%")])
def test_axis_labels_have_the_decimals_they_need(end, digits):
    assert rate_axis("rate", 0, end, percent=True).digits == digits


def test_axes_begin_and_end_at_labels():
    axis = rate_axis("mean", 0.8125, 0.9375, percent=False)
    assert (axis.low, axis.high, axis.digits) == (0.8, 0.94, "General")


def test_more_plans_than_curves_are_chosen_by_cells():
    planned, _ = plan_requests(requests(MOST_CURVES + 3))
    book = Book("Example")
    sheet = add_grid(book, Register(book, planned))
    assert len(sheet.raw._charts[0].series) == MOST_CURVES
    picks = [cell.value for cell in sheet.raw["A"] if isinstance(cell.value, int)]
    assert picks[-MOST_CURVES:] == list(range(1, MOST_CURVES + 1))


# Justifications


@pytest.mark.parametrize("planned", demo(), ids=lambda planned: planned.request.characteristic)
def test_tables_of_true_values_hold_claim_and_catch(planned):
    values = table_values(planned, 8)
    assert 6 <= len(values) <= 8
    assert values == sorted(set(values))
    assert set(marks(planned)) <= set(values)


MUST_SAY = """\
Document number · Revision · Requirement and source · OD-QP-031 table 2 · Effect of a failure
Risk class, procedure · Lot or population · How items are drawn · Claim (null hypothesis) · Alternative
What passing means · Nominal alpha · Actual size · Power at catch · Beta at catch · Risks accepted by
Inspect 98 items drawn at random · on 5 defectives or more · No second sample
binomial | n 98 | claim p<=0.02 | alpha 0.05 | reject x>=5 · 95 % · 50 % · 10 % · 5 %
Power by native functions · ☐ · Alternatives considered · Request list · SHA-256 of the list
Author · Reviewer · Approver · Signature
at the rate to catch it still passes with probability 9.9483 %.
Not rejecting a claim does not prove it · Nominal alpha 5 %, actual size 4.7333 %. · Fixed before sampling
The risks hold only for random selection and independent items
Where a failure can hurt someone, codes, contracts and a qualified person decide"""


@pytest.mark.parametrize("part", re.split(r" · |\n", MUST_SAY))
def test_a_justification_says_what_it_must(stored, part):
    rows = stored.values["1 Blocked emitter"].iter_rows()
    assert any(part in str(cell.value) for row in rows for cell in row)


def test_a_demonstration_is_cautious_about_its_claim(stored):
    sheet = stored.values["14 Clogs in the sand test"]
    texts = [str(cell.value) for row in sheet.iter_rows(max_col=2) for cell in row]
    assert any("where the claim is just true it passes with probability 4.8495 %" in text for text in texts)
    assert any("The sample contradicts the claim" in text for text in texts)


def test_claim_catch_and_wanted_power_are_marked_in_the_chart(stored):
    names = [series.tx.v for series in stored.formulas["16 Left-hand barb share"]._charts[0].series]
    assert names == [
        "Power: claim rejected",
        "Chance to pass",
        "Claim",
        "Catch, low",
        "Catch, high",
        "Power wanted",
    ]


# Screen and paper


def cells(stored):
    """Yield every cell that shows a text, with its style, width and height."""
    for sheet in stored.values:
        merged = {str(area).split(":")[0]: area for area in sheet.merged_cells.ranges}
        for row in sheet.iter_rows():
            for cell in row:
                if isinstance(cell.value, str) and cell.value:
                    area = merged.get(cell.coordinate)
                    last = area.max_col if area else cell.column
                    yield sheet, cell, sum(width(sheet, n) for n in range(cell.column, last + 1)), last


def width(sheet, column):
    return sheet.column_dimensions[get_column_letter(column)].width


def test_no_text_is_wider_than_its_cell(stored):
    """Wrapped texts have the height for all their lines; titles may run over empty cells."""
    cut = []
    for sheet, cell, room, last in cells(stored):
        size, bold = cell.font.size, cell.font.bold
        if cell.alignment.wrap_text:
            lines = line_count(cell.value, room, size, bold)
            longest = max(text_width(word, size, bold) for word in cell.value.split())
            height = sheet.row_dimensions[cell.row].height
            fits = longest <= room and (height is None or height >= lines * size * 1.2)
        else:
            row = [other.value for other in stored.values[sheet.title][cell.row]]
            filled = [n for n in range(last + 1, len(row) + 1) if row[n - 1] is not None]
            free = (filled or [len(row) + 1])[0] - 1
            fits = text_width(cell.value, size, bold) <= sum(
                width(sheet, n) for n in range(cell.column, free + 1)
            )
        if not fits:
            cut.append((sheet.title, cell.coordinate, cell.value))
    assert cut == []


def test_charts_lie_inside_the_print_area(stored):
    for sheet in stored.formulas:
        left, top, right, bottom = range_boundaries(sheet.print_area.rpartition("!")[2].replace("$", ""))
        for chart in sheet._charts:
            start = chart.anchor._from
            assert (start.col + 1, start.row + 1) >= (left, top)
            across_px = sum(width(sheet, n) * 7 for n in range(start.col + 1, right + 1))
            heights = [sheet.row_dimensions[n].height or 12.75 for n in range(start.row + 1, bottom + 1)]
            assert chart.anchor.ext.width / 9525 <= across_px
            assert chart.anchor.ext.height / 12700 <= sum(heights)


def test_charts_have_titles_axes_and_descriptions(stored):
    for sheet in stored.formulas:
        for chart in sheet._charts:
            assert chart.title is not None
            assert chart.x_axis.title is not None
            assert chart.y_axis.title is not None
            assert not chart.x_axis.delete
            assert not chart.y_axis.delete


def test_curves_differ_by_dash_or_colour(stored):
    for sheet in stored.formulas:
        for chart in sheet._charts:
            lines = [series.graphicalProperties.line for series in chart.series]
            looks = [(str(line.solidFill), line.prstDash) for line in lines]
            curves = [look for look, series in zip(looks, chart.series, strict=True) if series.tx.strRef]
            assert len(set(curves)) == len(curves) <= MOST_CURVES


def test_inputs_are_unlocked_on_protected_sheets(stored):
    sheet = stored.formulas["Register"]
    assert sheet.protection.sheet
    assert not sheet.protection.password
    headings = {cell.value: cell.column for cell in sheet[6]}
    for heading in (
        "Claim",
        "Side",
        "Alpha",
        "Catch",
        "Power wanted",
        "Size, if fixed",
        "Verdict on rejecting",
    ):
        assert not sheet.cell(7, headings[heading]).protection.locked
    for heading in ("Kind", "Plan", "Actual size", "Power at catch", "Native check"):
        assert sheet.cell(7, headings[heading]).protection.locked


def test_choices_show_why_a_word_is_refused(stored):
    checks = stored.formulas["Register"].data_validations.dataValidation
    assert all(check.showErrorMessage and check.error for check in checks)
    assert any(check.formula1 == '"above,below,either"' for check in checks)


def test_the_reader_finds_every_sheet(stored):
    links = [cell.hyperlink.location for cell in stored.formulas["Read me"]["B"] if cell.hyperlink]
    assert links == [f"'{title}'!A1" for title in stored.formulas.sheetnames if title != "Read me"]


def test_headings_repeat_and_widths_fit_paper(stored):
    sheet = stored.formulas["Register"]
    assert (sheet.print_title_rows, sheet.print_title_cols) == ("$5:$6", "$A:$B")
    for title in ("Power grid", "1 Blocked emitter"):
        sheet = stored.formulas[title]
        inches = {"landscape": 10.0, "portrait": 7.27}[
            sheet.page_setup.orientation
        ]  # Letter, A4: the narrower
        _, _, right, _ = range_boundaries(sheet.print_area.rpartition("!")[2].replace("$", ""))
        pixels = sum(width(sheet, n) * 7 for n in range(1, right + 1))
        assert pixels / 96 * sheet.page_setup.scale / 100 <= inches


def test_names_of_sheets_in_links_are_quoted(stored):
    assert all(
        re.fullmatch(r"'[^']+'!A1", cell.hyperlink.location)
        for cell in stored.formulas["Read me"]["B"]
        if cell.hyperlink
    )


def test_each_half_of_a_justification_fits_a_letter_page(stored):
    for title in stored.formulas.sheetnames:
        sheet = stored.formulas[title]
        if not title[0].isdigit():
            continue
        (end,) = [one.id for one in sheet.row_breaks.brk]
        bottom = range_boundaries(sheet.print_area.rpartition("!")[2].replace("$", ""))[3]
        for rows in (range(1, end + 1), range(end + 1, bottom + 1)):
            points = sum(sheet.row_dimensions[row].height or 13.2 for row in rows)
            assert points * sheet.page_setup.scale / 100 <= (11 - 2 * 0.75) * 72
