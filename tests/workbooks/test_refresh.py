"""Refreshing a book whose inputs were edited without a spreadsheet program."""

import stat
import sys

import pytest
from demo import LIST
from foreign import PLANS, foreign_book, foreign_parts
from openpyxl import Workbook, load_workbook
from structure import check_structure

from steelyard.addin import call
from steelyard.workbooks.book import build_book
from steelyard.workbooks.cli import main
from steelyard.workbooks.opened import OpenedBook
from steelyard.workbooks.parts import read_parts, write_parts
from steelyard.workbooks.plans import plan_requests
from steelyard.workbooks.refresh import refresh_book
from steelyard.workbooks.requests import read_requests
from steelyard.workbooks.sheetxml import find_cells, store_values
from steelyard.workbooks.xmlbytes import splice

PLAN, DEMONSTRATION, DEFECTS = PLANS


def edit(path, **cells):
    """Type values into cells of the sheet Plan, or of the one that ``sheet`` names."""
    book = OpenedBook(path)
    part = book.sheets[cells.pop("sheet", "Plan")].part
    book.package.parts[part] = store_values(book.package.parts[part], cells)
    write_parts(path, book.package.parts)
    return path


def sheet_of(path, **cells):
    """Write a book with one sheet by openpyxl, which stores no value beside a formula."""
    book = Workbook()
    book.active.title = "Plan"
    for ref, value in cells.items():
        book.active[ref] = value
    book.save(path)
    return path


def shown(path, title="Plan"):
    sheet = load_workbook(path, data_only=True)[title]
    return {cell.coordinate: cell.value for row in sheet.iter_rows() for cell in row}


@pytest.fixture
def foreign(tmp_path):
    return foreign_book(tmp_path / "book.xlsx")


pytestmark = pytest.mark.filterwarnings("ignore:Sparkline Group extension")


def test_a_book_that_is_up_to_date_is_not_touched(foreign):
    before, time = foreign.read_bytes(), foreign.stat().st_mtime_ns
    done = refresh_book(foreign)
    assert (done.changes, done.changed, done.unchanged, done.unfollowed, done.left) == ((), 0, 13, {}, 1)
    assert (foreign.read_bytes(), foreign.stat().st_mtime_ns) == (before, time)


def test_edited_inputs_reach_every_formula_and_nothing_else(tmp_path, foreign):
    """A rate and a shared plan text change: shared, array, mixed, logical and native formulas follow."""
    edit(foreign, B1=0.2, A4=PLAN)
    before = read_parts(foreign)
    done = refresh_book(foreign, tmp_path / "done.xlsx")
    power, passing = call("power", [PLAN, 0.2]), call("power", [DEMONSTRATION, 0.2])
    cells = shown(tmp_path / "done.xlsx")
    assert [cells["B2"], cells["B3"], cells["B4"]] == [power, passing, power]
    assert [cells["C2"], cells["C3"], cells["C4"]] == ["ok", None, True]
    assert cells["E4"] == power * 2
    assert {change.cell for change in done.changes} == {"Plan!B2", "Plan!B3", "Plan!B4", "Plan!E4"}
    assert {change.cell: change.new for change in done.changes}["Plan!B2"] == power
    after = read_parts(tmp_path / "done.xlsx")
    check_structure(after)
    sheet, changed = "xl/worksheets/first.xml", {"B2", "B3", "B4", "E4"}
    assert {part for part in before if before[part] != after[part]} == {sheet, "xl/workbook.xml"}
    assert _without(after[sheet], changed) == _without(before[sheet], changed)


def _without(xml, refs):
    return splice(xml, [(cell.start, cell.stop, b"") for cell in find_cells(xml, refs)])


def test_only_a_left_native_formula_asks_for_a_calculation_on_opening(tmp_path, foreign):
    refresh_book(edit(foreign, B1=0.2))
    assert load_workbook(foreign).calculation.fullCalcOnLoad
    plain = sheet_of(tmp_path / "plain.xlsx", A1=PLAN, B1="=SY_SIZE(A1)", C1="=B1*2")
    parts = read_parts(plain)
    refresh_book(plain)
    assert read_parts(plain)["xl/workbook.xml"] == parts["xl/workbook.xml"]


def test_every_formula_of_ours_in_our_own_books_is_followed(tmp_path):
    """A sheet that uses a native function around our calls has to have it followed."""
    requests, _ = read_requests(LIST)
    kinds = {request.kind + str(request.side): request for request in requests}
    planned, _ = plan_requests(list(kinds.values()))
    for host in ("excel", "calc"):
        build_book(planned, tmp_path / "book.xlsx", host=host, justify="all")
        done = refresh_book(tmp_path / "book.xlsx")
        assert (done.unfollowed, done.changes) == ({}, ())


def test_our_own_book_follows_its_register(tmp_path):
    """Another catch and another alpha: the same numbers as in a book that was built with them."""
    planned, _ = plan_requests(read_requests(LIST)[0][:3])
    build_book(planned, tmp_path / "book.xlsx")
    edit(tmp_path / "book.xlsx", sheet="Register", H7=0.1, G8=0.01)
    done = refresh_book(tmp_path / "book.xlsx")
    assert done.unfollowed == {}
    cells = shown(tmp_path / "book.xlsx", "Register")
    plan = call("smallest", ["binomial", 0.02, 0.05, 0.1, 0.9])
    assert cells["R7"] == plan
    assert cells["AE7"] == 0.1
    assert cells["W7"] == pytest.approx(call("power", [plan, 0.1]), rel=1e-13)
    assert cells["Z7"] == pytest.approx(call("rate_for", [plan, 0.5]), rel=1e-13)
    assert cells["R8"] == call("smallest", ["binomial", 0.05, 0.01, 0.2, 0.8])
    grid = shown(tmp_path / "book.xlsx", "Power grid")
    row = next(ref[1:] for ref, value in grid.items() if value == plan)
    assert grid[f"G{row}"] == pytest.approx(call("power", [plan, grid["G6"]]), rel=1e-13)
    assert plan in shown(tmp_path / "book.xlsx", "1 Blocked emitter").values()
    again = refresh_book(tmp_path / "book.xlsx")
    assert (again.changes, again.unchanged) == ((), done.changed + done.unchanged)


def test_values_that_openpyxl_dropped_come_back(tmp_path, foreign):
    """Names, other sheets, literals, omitted arguments, nesting; everything is missing at first."""
    book = Workbook()
    rates, plan = book.active, book.create_sheet("It's a plan")
    rates.title = "Rates"
    rates.append([0.1, 0.2])
    plan["A1"] = PLAN
    plan["B1"] = "=SY_POWER(A1,Rates!$A$1)"
    plan["B2"] = "=sy.power('it''s a plan'!A1,10%)"
    plan["B3"] = '=IFERROR([1]!SY_POWER(SY_BINOMIAL(50,2%,,"above"),Rates!A1),"no add-in")'
    plan["B4"] = "=SY_POWER(A1,Rate)"
    plan["B5"] = "=SY_POWER(A1,Rates!A1:B1)"
    plan["B6"] = "=SY_SIZE(A9)"
    plan["B7"] = "=SY_EXPLAIN(A1)"
    rates["C1"] = "='It''s a plan'!B4+0"
    book.defined_names["Rate"] = _name("Rate", "Rates!$A$1")
    book.save(tmp_path / "book.xlsx")
    assert refresh_book(tmp_path / "book.xlsx").unfollowed == {}
    cells, power = shown(tmp_path / "book.xlsx", "It's a plan"), call("power", [PLAN, 0.1])
    assert [cells[f"B{row}"] for row in range(1, 6)] == [power] * 5
    assert cells["B6"] == "SY: plan must be given, but got nothing"
    assert cells["B7"] == call("explain", [PLAN])[0][0]
    assert shown(tmp_path / "book.xlsx", "Rates")["C1"] == power


def _name(name, ref):
    from openpyxl.workbook.defined_name import DefinedName

    return DefinedName(name, attr_text=ref)


def test_rates_are_searched_together_as_one_by_one(tmp_path):
    plans = [f"binomial | n {n} | claim p<=0.02 | alpha 0.05 | reject x>=5" for n in range(60, 90, 3)]
    cells = {f"A{row}": plan for row, plan in enumerate(plans, 1)}
    cells |= {f"B{row}": f"=SY_RATE_FOR(A{row},0.9)" for row in range(1, 11)}
    cells |= {"C1": "=SY_RATE_FOR(A1,B12)", "C2": '=SY_RATE_FOR(A1,0.9,"upper")', "C3": "=SY_RATE_FOR(A1,2)"}
    cells["C4"] = '=SY_RATE_FOR(SY_BINOMIAL(60,SY_RATE_FOR(A2,0.5)),0.9)&""'
    refresh_book(sheet_of(tmp_path / "book.xlsx", **cells))
    found = shown(tmp_path / "book.xlsx")
    for row, plan in enumerate(plans, 1):
        assert found[f"B{row}"] == pytest.approx(call("rate_for", [plan, 0.9]), rel=1e-13)
    assert found["C1"] == call("rate_for", [plans[0], None])
    assert found["C2"] == found["B1"]
    assert found["C3"] == call("rate_for", [plans[0], 2])
    nested = call("binomial", [60, call("rate_for", [plans[1], 0.5])])
    assert float(found["C4"]) == pytest.approx(call("rate_for", [nested, 0.9]), rel=1e-13)


# What can't be followed


@pytest.mark.parametrize(
    ("cells", "reason"),
    [
        ({"B1": "=SY_SIZE(VLOOKUP(1,C1:D9,2))"}, "uses VLOOKUP"),
        ({"B1": "=SY_SIZE(C1)", "C1": "=VLOOKUP(1,D1:E9,2)"}, "depends on Plan!C1, which can't be followed"),
        ({"B1": "=SY_SIZE(C1)", "C1": '=T("x")', "C2": "=C1"}, "depends on Plan!C1, which can't be followed"),
        ({"B1": "=SY_SIZE(B1)"}, "depends on itself: Plan!B1 → Plan!B1"),
        ({"B1": "=SY_BEST(A1,C1)", "C1": "=D1+1", "D1": "=SUM(B1:B4)"}, "depends on itself: Plan!"),
        ({"B1": "=SY_SIZE(Elsewhere!A1)"}, "refers to a sheet Elsewhere, which the book does not have"),
        ({"B1": "=SY_SIZE([1]Rates!A1)"}, "refers to another workbook"),
        ({"B1": "=SY_SIZE(Unknown)"}, "uses the name Unknown, which the book does not define"),
        ({"B1": "=SY_SIZE(Moving)"}, "uses the name Moving, which does not stand for fixed cells"),
        ({"B1": "=SY_SIZE(A:A)"}, "refers to whole columns or rows (A:A)"),
        ({"B1": "=SY_SIZE(A1:Z99999)"}, "takes a range of more than 2,000,000 cells"),
        ({"B1": "=SY_SIZE(Plans[Plan])"}, "refers to cells as Plans[Plan]: use plain references"),
        ({"B1": "=SY_WEIGH(A1)"}, "uses SY_WEIGH, a function that there is not"),
        ({"B1": f"=SY_SIZE(A1){'&A1' * 900}"}, "is nested too deeply"),
    ],
)
def test_a_formula_that_cannot_be_followed_is_named_and_left(cells, reason, tmp_path):
    path = sheet_of(tmp_path / "book.xlsx", A1=PLAN, **cells)
    book = OpenedBook(path)
    book.package.parts["xl/workbook.xml"] = book.package.parts["xl/workbook.xml"].replace(
        b"<definedNames />", b'<definedNames><definedName name="Moving">Plan!A1</definedName></definedNames>'
    )
    part = "xl/worksheets/sheet1.xml"
    book.package.parts[part] = before = store_values(book.package.parts[part], {"B1": "stored"})
    write_parts(path, book.package.parts)
    done = refresh_book(path)
    assert list(done.unfollowed) == ["Plan!B1"]
    assert done.unfollowed["Plan!B1"].startswith(reason)
    assert find_cells(read_parts(path)[part], {"B1"})[0].value == "stored"
    assert _without(read_parts(path)[part], set(cells)) == _without(before, set(cells))


def test_a_circle_does_not_stop_the_others(tmp_path):
    cells = {"B1": "=SY_SIZE(B2)", "B2": "=B1", "B3": "=SY_SIZE(A1)", "C1": "=C2", "C2": "=C1", "C3": "=B1"}
    done = refresh_book(sheet_of(tmp_path / "book.xlsx", A1=PLAN, **cells))
    assert list(done.unfollowed) == ["Plan!B1"]
    assert (done.changed, done.left) == (1, 4)


def array_sheet(rows, area):
    cells = "".join(f'<row r="{number}">{row}</row>' for number, row in enumerate(rows, 1))
    formula = f'<f t="array" ref="{area}">SY_POWER(A1,D1:E1)</f>'
    return f'<worksheet xmlns="m"><sheetData>{cells}</sheetData></worksheet>'.replace("FORMULA", formula)


@pytest.mark.parametrize(
    ("rest", "area", "reason"),
    [
        ('<c r="G1"/><c r="H1"/>', "F1:H1", "gives 1 by 2 cells, but fills F1:H1"),
        ("", "F1:G1", "would fill G1, a cell that the file leaves out"),
    ],
)
def test_an_array_that_does_not_fit_is_named_and_left(rest, area, reason, tmp_path):
    parts = foreign_parts()
    plan = f'<c r="A1" t="inlineStr"><is><t>{PLAN.replace("<", "&lt;").replace(">", "&gt;")}</t></is></c>'
    row = f'{plan}<c r="D1"><v>0.1</v></c><c r="E1"><v>0.2</v></c><c r="F1">FORMULA<v>7</v></c>{rest}'
    parts["xl/worksheets/first.xml"] = xml = array_sheet([row], area).encode()
    write_parts(tmp_path / "book.xlsx", parts)
    done = refresh_book(tmp_path / "book.xlsx")
    assert done.unfollowed["Plan!F1"] == reason
    assert read_parts(tmp_path / "book.xlsx")["xl/worksheets/first.xml"] == xml


def test_an_error_value_in_an_input_reaches_the_formula(tmp_path, foreign):
    """A stale number would be worse."""
    parts = foreign_parts()
    sheet = parts["xl/worksheets/first.xml"]
    parts["xl/worksheets/first.xml"] = sheet.replace(
        b'<c r="B1" s="1"><v>0.1</v></c>', b'<c r="B1" s="1" t="e"><v>#N/A</v></c>'
    )
    write_parts(foreign, parts)
    refresh_book(foreign)
    cells = shown(foreign)
    assert [cells["B2"], cells["C2"], cells["E4"]] == ["#N/A"] * 3
    assert cells["F2"] == call("power", [PLAN, 0.05])


# The file and the command


@pytest.mark.skipif(sys.platform == "win32", reason="Windows has no such modes")
def test_in_place_the_mode_of_the_file_stays(foreign):
    foreign.chmod(0o600)
    link = foreign.with_name("link.xlsx")
    link.symlink_to(foreign)
    refresh_book(edit(foreign, B1=0.2).with_name("link.xlsx"))
    assert link.is_symlink()
    assert stat.S_IMODE(foreign.stat().st_mode) == 0o600
    assert shown(foreign)["B2"] == call("power", [PLAN, 0.2])


def test_the_command_lists_what_changed(foreign, capsys):
    edit(foreign, B1=0.2)
    assert main(["refresh", str(foreign)]) == 0
    out, err = capsys.readouterr()
    assert out.splitlines()[0] == f"Plan!B2\t{call('power', [PLAN, 0.1])}\t{call('power', [PLAN, 0.2])}"
    told = "on opening the spreadsheet program recalculates its own (1 were left to it)"
    assert err == f"4 formulas changed, 9 unchanged; {told}\n"
    assert main(["refresh", str(foreign)]) == 0
    assert capsys.readouterr() == ("", "0 formulas changed, 13 unchanged\n")


def test_the_command_names_what_it_left(tmp_path, capsys):
    book = sheet_of(tmp_path / "book.xlsx", A1=PLAN, B1="=SY_SIZE(A1)", B2="=SY_SIZE(NOW())")
    before = book.read_bytes()
    assert main(["refresh", str(book), "-o", str(tmp_path / "done.xlsx")]) == 2
    err = capsys.readouterr().err.splitlines()
    assert err == [
        "steelyard: book.xlsx: Plan!B2 was left as it is: it uses NOW",
        "1 formulas changed, 0 unchanged, 1 could not be followed",
        f"wrote {tmp_path / 'done.xlsx'}",
    ]
    assert book.read_bytes() == before
    assert shown(tmp_path / "done.xlsx")["B1"] == call("size", [PLAN])


def test_the_command_refuses_a_signed_book(foreign, capsys):
    write_parts(foreign, foreign_parts() | {"_xmlsignatures/sig1.xml": b"<Signature/>"})
    assert main(["refresh", str(foreign)]) == 1
    assert capsys.readouterr().err.startswith("steelyard: book.xlsx is signed")
