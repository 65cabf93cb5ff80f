"""Request lists: what is read, what is told row by row, and which files are refused as a whole."""

import datetime
import zipfile
from dataclasses import fields

import pytest
from hypothesis import given
from hypothesis import strategies as st
from openpyxl import Workbook, load_workbook

from steelyard.core.errors import SteelyardError
from steelyard.workbooks.columns import COLUMNS
from steelyard.workbooks.requests import Problem, Request, read_requests
from steelyard.workbooks.tabular import read_rows
from steelyard.workbooks.template import write_template

HEADINGS = ["characteristic", "kind", "claim", "alpha", "catch", "power", "side", "lot", "n"]
GOOD = ["Blocked emitter", "binomial", "2%", "5%", "8%", "90%", "above", None, None]


def write_csv(path, *rows, encoding="utf-8"):
    path.write_bytes("\r\n".join(rows).encode(encoding))
    return path


def write_xlsx(path, *rows, formats=None, title="Requests"):
    workbook = Workbook()
    workbook.active.title = title
    for row in rows:
        workbook.active.append(row)
    for ref, code in (formats or {}).items():
        workbook.active[ref].number_format = code
    workbook.save(path)
    return path


def row_of(**changes):
    values = dict(zip(HEADINGS, GOOD, strict=True)) | changes
    return [values[heading] for heading in HEADINGS]


def one_request(tmp_path, **changes):
    requests, problems = read_requests(write_xlsx(tmp_path / "list.xlsx", HEADINGS, row_of(**changes)))
    assert problems == []
    return requests[0]


def one_problem(tmp_path, **changes):
    requests, problems = read_requests(write_xlsx(tmp_path / "list.xlsx", HEADINGS, row_of(**changes)))
    assert requests == []
    return str(problems[0])


def test_every_column_has_a_field_and_every_field_a_column():
    names = [field.name for field in fields(Request)]
    assert names[0] == "row"
    assert names[1:] == [column.field for column in COLUMNS]
    assert len({column.name for column in COLUMNS}) == len(COLUMNS)


def test_a_full_row_is_read(tmp_path):
    path = write_csv(
        tmp_path / "list.csv",
        ",".join(column.name for column in COLUMNS),
        "Leak at 1 bar,hypergeometric,D<=1,0.05,6,0.9,above,60,32,fail,half,,"
        'emitters,A,"QP-07, 4.2",zero defects',
    )
    assert read_requests(path) == (
        [
            Request(
                row=2,
                characteristic="Leak at 1 bar",
                kind="hypergeometric",
                claim="D<=1",
                alpha=0.05,
                catch="6",
                power=0.9,
                side="above",
                lot=60,
                n=32,
                verdict="fail",
                split="half",
                unit="emitters",
                risk_class="A",
                reference="QP-07, 4.2",
                note="zero defects",
            )
        ],
        [],
    )


# What a claim cell holds -> what is kept. Numbers keep their shortest text, percent cells their sign.
@pytest.mark.parametrize(
    ("cell", "code", "claim"),
    [
        ("2%", "General", "2%"),
        ("50 ppm", "General", "50 ppm"),
        (" p<=0.02 ", "General", "p<=0.02"),
        ("D<=8", "General", "D<=8"),
        (0.02, "General", "0.02"),
        (0.02, "0%", "2%"),
        (0.07, "0.00%", "7%"),
        (0.011, "0.0%", "1.1%"),
        (5e-05, "0.0000%", "0.005%"),
        (5e-05, "General", "5e-05"),
        (1, "General", "1"),
        (1, "0%", "100%"),
        (8.0, "0", "8"),
    ],
)
def test_claims_stay_as_typed(cell, code, claim, tmp_path):
    path = write_xlsx(tmp_path / "list.xlsx", HEADINGS, row_of(claim=cell), formats={"C2": code})
    requests, _ = read_requests(path)
    assert requests[0].claim == claim


@given(st.integers(1, 999).map(lambda tenths: f"{tenths // 10}.{tenths % 10}"))
def test_percent_is_read_in_decimals(percent):
    """0.011 is 1.1 %, not 0.011000000000000001."""
    read = next(column for column in COLUMNS if column.name == "alpha").read
    expected = float(f"0.{percent.replace('.', '').zfill(3)}")
    assert read(f"{percent}%", "alpha") == read(f" {percent} % ", "alpha") == expected


@pytest.mark.parametrize(
    ("changes", "field", "value"),
    [
        ({"alpha": 0.05}, "alpha", 0.05),
        ({"alpha": "0.05"}, "alpha", 0.05),
        ({"alpha": "1.1%"}, "alpha", 0.011),
        ({"alpha": None}, "alpha", None),
        ({"kind": " Binomial "}, "kind", "binomial"),
        ({"side": "EITHER"}, "side", "either"),
        ({"n": 50.0}, "n", 50),
        ({"n": "120.5"}, "n", 120.5),
        ({"lot": "800"}, "lot", 800),
        ({"catch": "0.5% and 6%"}, "catch", "0.5% and 6%"),
        ({"characteristic": 4711}, "characteristic", "4711"),
        ({"characteristic": datetime.datetime(2026, 5, 1)}, "characteristic", "2026-05-01"),
        ({"characteristic": True}, "characteristic", "TRUE"),
    ],
)
def test_cells_become_values(changes, field, value, tmp_path):
    assert getattr(one_request(tmp_path, **changes), field) == value


@pytest.mark.parametrize(
    ("changes", "message"),
    [
        (
            {"alpha": 5},
            "row 2: alpha must be a probability between 0 and 1, such as 5% or 0.05, but got 5 "
            "(type 5% or 0.05)",
        ),
        (
            {"alpha": "five"},
            "row 2: alpha must be a probability between 0 and 1, such as 5% or 0.05, but got five",
        ),
        (
            {"alpha": True},
            "row 2: alpha must be a probability between 0 and 1, such as 5% or 0.05, but got TRUE",
        ),
        (
            {"alpha": "#N/A"},
            "row 2: alpha must be a probability between 0 and 1, such as 5% or 0.05, but got #N/A",
        ),
        (
            {"alpha": "=1/20"},
            "row 2: alpha must be a probability between 0 and 1, such as 5% or 0.05, but got "
            "a formula without a stored value",
        ),
        (
            {"kind": "binomal"},
            "row 2: kind must be one of {kinds}, but got binomal (did you mean binomial?)",
        ),
        ({"kind": None}, "row 2: kind must be one of {kinds}, but got nothing"),
        ({"side": "up"}, "row 2: side must be one of above, below, either, but got up"),
        ({"n": 0}, "row 2: n must be a number above 0, but got 0"),
        (
            {"n": "1.000"},
            "row 2: n must be a number above 0, but got 1.000 (write 1000 without a thousands mark)",
        ),
        (
            {"lot": "1,000"},
            "row 2: lot must be a whole number of at least 1, but got 1,000 "
            "(write 1000 without a thousands mark)",
        ),
        ({"lot": 60.5}, "row 2: lot must be a whole number of at least 1, but got 60.5"),
        (
            {"claim": "2,5%"},
            "row 2: claim must be a rate such as 2%, 0.02 or 50 ppm, or a claim such as p<=0.02 or D<=8, "
            "but got 2,5% (write decimals with a point)",
        ),
        (
            {"characteristic": "two\nlines"},
            "row 2: characteristic must be a text of at most 255 characters on one line, "
            "but got 'two\\nlines'",
        ),
    ],
)
def test_problems_name_row_column_value_and_rule(changes, message, tmp_path):
    kinds = ", ".join(next(column for column in COLUMNS if column.name == "kind").choices)
    assert one_problem(tmp_path, **changes) == message.replace("{kinds}", kinds)


def test_long_texts_are_refused(tmp_path):
    problem = one_problem(tmp_path, characteristic="x" * 256)
    assert problem.startswith(
        "row 2: characteristic must be a text of at most 255 characters on one line, but got xx"
    )
    assert len(problem) < 140


def test_good_rows_are_kept_and_all_problems_told(tmp_path):
    path = write_csv(
        tmp_path / "list.csv",
        "Characteristic, KIND ,Claim*,alpha",
        "one,binomial,2%,7",
        "two,binomial,2%,5%",
        "",
        "three,binom,,5%,left over",
    )
    requests, problems = read_requests(path)
    assert [(request.row, request.characteristic) for request in requests] == [(3, "two")]
    assert [(problem.row, problem.column, problem.value) for problem in problems] == [
        (2, "alpha", "7"),
        (5, "kind", "binom"),
        (5, "claim", None),
        (5, "column E", "left over"),
    ]
    assert str(problems[3]) == "row 5: column E must be empty, as it has no heading, but got left over"
    assert isinstance(problems[0], Problem)


@pytest.mark.parametrize(
    ("headings", "message"),
    [
        (
            "characteristic,kind,claims",
            "list.csv: unknown heading claims (did you mean claim?); no heading claim. "
            "The headings are: characteristic, kind, claim, alpha,",
        ),
        ("kind,claim", "list.csv: no heading characteristic. "),
        ("characteristic,kind,claim,Kind", "list.csv: heading kind twice. "),
        ("characteristic,kind,claim,colour", "list.csv: unknown heading colour. "),
    ],
)
def test_wrong_headings_are_refused_with_the_list(headings, message, tmp_path):
    with pytest.raises(SteelyardError) as error:
        read_requests(write_csv(tmp_path / "list.csv", headings, "a,b,c"))
    assert str(error.value).startswith(message)


@pytest.mark.parametrize("mark", [",", ";", "\t"])
def test_the_headings_tell_what_separates(mark, tmp_path):
    path = write_csv(
        tmp_path / "list.csv", mark.join(HEADINGS[:4]), mark.join(["Leak", "binomial", "2%", "0.05"])
    )
    requests, _ = read_requests(path)
    assert (requests[0].claim, requests[0].alpha) == ("2%", 0.05)


def test_a_byte_order_mark_and_quotes_are_understood(tmp_path):
    path = write_csv(
        tmp_path / "list.csv",
        '"characteristic",kind,claim',
        '"Flash, ""barb""",binomial,2%',
        encoding="utf-8-sig",
    )
    assert read_requests(path)[0][0].characteristic == 'Flash, "barb"'


def test_decimal_commas_are_read_where_semicolons_separate(tmp_path):
    path = write_csv(
        tmp_path / "list.csv",
        "characteristic;kind;claim;alpha;catch;n;reference",
        "Leak;binomial;p<=0,02;2,5%;0,5% and 6%;120,5;4,2 and 4.3",
    )
    request = read_requests(path)[0][0]
    assert (request.claim, request.alpha, request.catch) == ("p<=0.02", 0.025, "0.5% and 6%")
    assert (request.n, request.reference) == (120.5, "4,2 and 4.3")


def test_mixed_decimal_marks_are_refused(tmp_path):
    path = write_csv(
        tmp_path / "list.csv", "characteristic;kind;claim;alpha", "a;binomial;0.02;5%", "b;binomial;2%;0,05"
    )
    message = "list.csv must keep to one decimal mark, but has 0.02 in row 2, claim and 0,05 in row 3, alpha"
    with pytest.raises(SteelyardError, match=message):
        read_requests(path)


def test_decimal_commas_elsewhere_are_problems(tmp_path):
    path = write_csv(tmp_path / "list.csv", "characteristic,kind,claim,alpha", 'a,binomial,2%,"0,05"')
    assert str(read_requests(path)[1][0]).endswith("but got 0,05 (write decimals with a point)")


@pytest.mark.parametrize(
    "text", ['=HYPERLINK("http://example.com")', "+cmd|' /C calc'!A0", "-1+1", "@SUM(A1)"]
)
def test_what_looks_like_a_formula_stays_a_text(text, tmp_path):
    path = tmp_path / "list.xlsx"
    workbook = Workbook()
    workbook.active.append(HEADINGS)
    workbook.active.append(GOOD)
    workbook.active["A2"] = text
    workbook.active["A2"].data_type = "s"
    workbook.save(path)
    assert read_requests(path)[0][0].characteristic == text
    quoted = '"' + text.replace('"', '""') + '"'
    path = write_csv(tmp_path / "list.csv", "characteristic,kind,claim", f"{quoted},binomial,2%")
    assert read_requests(path)[0][0].characteristic == text


def test_calculated_formulas_are_read_by_their_value(tmp_path, saved):
    from steelyard.workbooks.house import Book, Live, Put

    book = Book("List")
    sheet = book.sheet("Requests")
    sheet.add(*map(Put, HEADINGS[:4]))
    sheet.add(Put("Leak"), Put("binomial"), Live("=1/50", 0.02, "rate"), Live("=1/20", 0.05))
    sheet.add(Live('=""', ""), Live('=""', ""))
    sheet.add(Put("Flash"), Put("binomial"), Live("=1/50", 0.02), Live('=""', ""))
    saved(book)
    requests, problems = read_requests(tmp_path / "saved.xlsx")
    assert [(request.claim, request.alpha) for request in requests] == [("2%", 0.05), ("0.02", None)]
    assert problems == []


def test_the_sheet_requests_is_read_wherever_it_stands(tmp_path):
    workbook = Workbook()
    workbook.active.append(["not this one"])
    sheet = workbook.create_sheet("requests")
    sheet.append(HEADINGS)
    sheet.append(GOOD)
    workbook.save(tmp_path / "list.xlsx")
    assert len(read_requests(tmp_path / "list.xlsx")[0]) == 1


def test_rows_after_a_false_dimension_are_read(tmp_path):
    path = write_xlsx(tmp_path / "list.xlsx", HEADINGS, GOOD, GOOD)
    replace_part(path, "xl/worksheets/sheet1.xml", b'<dimension ref="A1:I3"', b'<dimension ref="A1:A1"')
    assert len(read_requests(path)[0]) == 2


def replace_part(path, name, old, new):
    with zipfile.ZipFile(path) as archive:
        parts = {entry: archive.read(entry) for entry in archive.namelist()}
    assert old in parts[name]
    parts[name] = parts[name].replace(old, new)
    with zipfile.ZipFile(path, "w", zipfile.ZIP_DEFLATED) as archive:
        for entry, data in parts.items():
            archive.writestr(entry, data)


# Files that are wrong, huge or hostile as a whole


@pytest.mark.parametrize(
    ("name", "content", "message"),
    [
        ("list.ods", b"", r"list.ods must end in .xlsx or .csv"),
        ("list.csv", b"", r"list.csv must hold a row of headings \(characteristic, .*\), but is empty"),
        (
            "list.csv",
            "claim,größe".encode("latin-1"),
            r"list.csv must be text in UTF-8 \(in Excel: save as “CSV UTF-8”\)",
        ),
        ("list.csv", b"claim\0", r"list.csv must be text in UTF-8, but holds binary data"),
        ("list.csv", b"characteristic;kind,claim", r"list.csv must separate its headings by one mark"),
        ("list.csv", b'claim,kind\n"a"b,c\n', r"list.csv is damaged in line 2"),
        (
            "list.csv",
            b"claim\n" + b'"' + b"x" * 140_000 + b'"',
            r"list.csv is damaged in line 2 \(field larger",
        ),
        ("list.csv", b"a" * 25_000_001, r"list.csv is too large: more than 25 MB"),
        ("list.csv", b"claim\n" + b"2%\n" * 10_001, r"list.csv must have at most 10,000 rows"),
        ("list.xlsx", b"PK", r"list.xlsx is no .xlsx workbook"),
    ],
)
def test_a_file_that_cannot_be_used_is_refused(name, content, message, tmp_path):
    (tmp_path / name).write_bytes(content)
    with pytest.raises(SteelyardError, match=message):
        read_requests(tmp_path / name)


def test_a_missing_file_is_refused(tmp_path):
    with pytest.raises(SteelyardError, match=r"list.csv can't be read \(No such file or directory\)"):
        read_requests(tmp_path / "list.csv")


@pytest.mark.parametrize("part", ["xl/workbook.xml", "xl/styles.xml", "xl/worksheets/sheet1.xml"])
def test_a_damaged_workbook_is_refused(part, tmp_path):
    path = write_xlsx(tmp_path / "list.xlsx", HEADINGS, GOOD)
    replace_part(path, part, b"<", b"<<")
    with pytest.raises(SteelyardError, match=r"list.xlsx is damaged"):
        read_requests(path)


def sheet_file(path, rows):
    """Write a workbook whose sheet holds the given XML, however large."""
    write_xlsx(path, HEADINGS, GOOD)
    replace_part(path, "xl/worksheets/sheet1.xml", b"</sheetData>", rows + b"</sheetData>")
    return path


def test_many_blank_rows_end_the_list(tmp_path):
    path = sheet_file(tmp_path / "list.xlsx", b"<row/>" * 500_000 + b"<row><c><v>1</v></c></row>")
    assert len(read_requests(path)[0]) == 1


@pytest.mark.parametrize(
    ("part", "place", "what", "count"),
    [
        ("xl/worksheets/sheet1.xml", b"</sheetData>", b"<row/>", 1_000_000),
        ("xl/worksheets/sheet1.xml", b"</row>", b"<c/>", 700_000),
        ("xl/styles.xml", b"</cellXfs>", b"<xf/>", 100_000),
        ("xl/workbook.xml", b"<definedNames />", b"<a/>", 100_000),
    ],
)
def test_more_than_any_list_holds_is_refused(part, place, what, count, tmp_path):
    path = write_xlsx(tmp_path / "list.xlsx", HEADINGS, GOOD)
    replace_part(path, part, place, what * count + place)
    with pytest.raises(SteelyardError, match=f"list.xlsx holds too much for a request list: {part}"):
        read_requests(path)


def test_a_gap_to_the_last_row_ends_the_list(tmp_path):
    path = sheet_file(tmp_path / "list.xlsx", b'<row r="1048576"><c r="A1048576"><v>1</v></c></row>')
    assert len(read_requests(path)[0]) == 1


def test_a_zip_bomb_is_refused_unread(tmp_path):
    path = sheet_file(tmp_path / "list.xlsx", b" " * 60_000_000)
    assert path.stat().st_size < 200_000
    with pytest.raises(SteelyardError, match=r"list.xlsx is too large: \d+ parts, 60 MB unpacked"):
        read_requests(path)


def test_entities_that_grow_are_refused(tmp_path):
    path = write_xlsx(tmp_path / "list.xlsx", HEADINGS, GOOD)
    bomb = b'<!DOCTYPE worksheet [<!ENTITY a "aaaaaaaaaa">' + b"".join(
        b'<!ENTITY %c "%s">' % (98 + level, b"&%c;" % (97 + level) * 10) for level in range(9)
    )
    replace_part(path, "xl/worksheets/sheet1.xml", b"Blocked emitter", b"&j;")
    replace_part(path, "xl/worksheets/sheet1.xml", b"<worksheet", bomb + b"]><worksheet")
    with pytest.raises(SteelyardError, match=r"list.xlsx is damaged: a part declares a document type"):
        read_requests(path)


def test_blank_rows_are_not_counted_but_keep_their_numbers(tmp_path):
    path = write_csv(tmp_path / "list.csv", "", "claim", "", ",,", "2%")
    assert read_rows(path).found == [(2, ["claim"]), (5, ["2%"])]


# The template


def test_the_template_is_a_request_list(tmp_path):
    write_template(tmp_path / "list.xlsx")
    requests, problems = read_requests(tmp_path / "list.xlsx")
    assert problems == []
    assert [(r.characteristic, r.kind, r.claim, r.catch, r.power) for r in requests] == [
        ("Blocked emitter", "binomial", "2%", "8%", 0.9),
        ("Print defects", "poisson", "0.5", "1.5", 0.9),
    ]


def test_the_template_offers_and_explains_every_column(tmp_path):
    write_template(tmp_path / "list.xlsx")
    workbook = load_workbook(tmp_path / "list.xlsx")
    sheet, explained = workbook["Requests"], workbook["Help"]
    assert [cell.value for cell in sheet[1]] == [column.name for column in COLUMNS]
    checks = {str(check.sqref)[0]: check for check in sheet.data_validations.dataValidation}
    for letter, column in zip("ABCDEFGHIJKLMNOP", COLUMNS, strict=True):
        check = checks[letter]
        assert str(check.sqref) == f"{letter}2:{letter}2001"
        assert check.error == f"{column.name.capitalize()} must be {column.allowed}."
        assert check.showErrorMessage
        assert check.prompt.startswith(column.help)
        if column.choices:
            assert check.formula1 == f'"{",".join(column.choices)}"'
    assert [row[0].value for row in explained.iter_rows(min_row=5)] == [column.name for column in COLUMNS]
    assert sheet["A50"].value is None


def test_the_template_is_the_same_every_day(tmp_path):
    write_template(tmp_path / "a.xlsx")
    write_template(tmp_path / "b.xlsx")
    assert (tmp_path / "a.xlsx").read_bytes() == (tmp_path / "b.xlsx").read_bytes()


@pytest.mark.calc
def test_calc_keeps_the_template_readable(tmp_path, calc_values):
    write_template(tmp_path / "list.xlsx")
    calc_values(tmp_path / "list.xlsx").save(tmp_path / "kept.xlsx")
    assert read_requests(tmp_path / "kept.xlsx") == read_requests(tmp_path / "list.xlsx")
