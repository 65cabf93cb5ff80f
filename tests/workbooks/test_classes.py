"""Risk classes: which numbers rows take from them, what is refused, and what the book shows."""

import pytest
from openpyxl import Workbook, load_workbook

from steelyard.core.errors import SteelyardError
from steelyard.workbooks.cli import main
from steelyard.workbooks.requests import read_requests
from steelyard.workbooks.template import write_template

CLASSES = """\
risk class,severity,alpha,catch,power
A,Stops the use,5%,4%,95%
Minor,Shortens the life,10%,10%,
"""
LIST = """\
characteristic,kind,claim,risk class,alpha,catch,power
"""


@pytest.fixture
def read(tmp_path):
    """Read rows of a list together with a table of classes."""

    def read_rows(*rows, classes=CLASSES):
        (tmp_path / "list.csv").write_text(LIST + "\n".join(rows), encoding="utf-8")
        (tmp_path / "classes.csv").write_text(classes, encoding="utf-8")
        return read_requests(tmp_path / "list.csv", tmp_path / "classes.csv" if classes else None)

    return read_rows


def risks(request):
    return request.alpha, request.catch, request.power


@pytest.mark.parametrize(
    ("row", "expected"),
    [
        ("Leak,binomial,1%,A,,,", (0.05, "4%", 0.95)),
        ("Leak,binomial,1%,a,,,", (0.05, "4%", 0.95)),
        ("Leak,binomial,1%,A,1%,,80%", (0.01, "4%", 0.8)),
        ("Leak,binomial,1%,Minor,,8%,", (0.1, "8%", None)),
        ("Leak,binomial,1%,,,8%,90%", (None, "8%", 0.9)),
    ],
)
def test_a_class_gives_what_its_row_leaves_empty(read, row, expected):
    (request,), problems = read(row)
    assert problems == []
    assert risks(request) == expected


def test_an_unknown_class_is_told_and_the_other_rows_are_read(read):
    requests, problems = read("Leak,binomial,1%,Mino,,,", "Flash,binomial,1%,A,,,")
    assert [request.characteristic for request in requests] == ["Flash"]
    assert [str(one) for one in problems] == ["row 2: risk class must be one of A, Minor, but got Mino"]


def test_without_a_table_a_class_is_a_label_of_rows_that_hold_their_numbers(read):
    requests, problems = read("Leak,binomial,1%,A,5%,4%,95%", "Flash,binomial,1%,A,,4%,95%", classes="")
    assert [request.characteristic for request in requests] == ["Leak"]
    (problem,) = problems
    assert (problem.row, problem.column, problem.value) == (3, "risk class", "A")
    assert str(problem).endswith("(there is no table; give one, or type alpha in the row)")


@pytest.mark.parametrize(
    ("classes", "message"),
    [
        ("risk class,alpha\nA,5\n", "row 2: alpha must be a probability"),
        ("risk class,alpha\nA,5%\na,1%\n", "row 3: risk class a twice"),
        ("risk class,alhpa\nA,5%\n", "did you mean alpha?"),
        ("risk class,alpha\n", "no class"),
        ("alpha\n5%\n", "no heading risk class"),
    ],
)
def test_a_table_with_a_mistake_is_refused_as_a_whole(read, classes, message):
    with pytest.raises(SteelyardError, match=message.replace("?", r"\?")):
        read("Leak,binomial,1%,A,,,", classes=classes)


def workbook(path, *classes):
    book = Workbook()
    book.active.title = "Requests"
    book.active.append(LIST.strip().split(","))
    book.active.append(["Leak", "binomial", 0.01, "A", None, None, None])
    if classes:
        sheet = book.create_sheet("Risk classes")
        for row in classes:
            sheet.append(row)
    book.save(path)
    return path


def test_a_workbook_brings_its_own_table(tmp_path):
    path = workbook(
        tmp_path / "list.xlsx", ["Risk class", "Alpha", "Catch", "Power"], ["A", 0.05, 0.04, 0.95]
    )
    (request,), problems = read_requests(path)
    assert problems == []
    assert risks(request) == (0.05, "0.04", 0.95)
    assert read_requests(workbook(tmp_path / "bare.xlsx"))[0] == []


def test_the_template_has_a_table_to_fill_in(tmp_path):
    write_template(tmp_path / "list.xlsx")
    book = load_workbook(tmp_path / "list.xlsx")
    assert [cell.value for cell in book["Risk classes"][1]] == CLASSES.split("\n")[0].split(",")
    headings = {cell.value: cell.column for cell in book["Requests"][1]}
    for name, value in {"risk class": "b", "alpha": None, "catch": None, "power": None}.items():
        book["Requests"].cell(2, headings[name]).value = value
    book.save(tmp_path / "list.xlsx")
    requests, problems = read_requests(tmp_path / "list.xlsx")
    assert problems == []
    assert risks(requests[0]) == (0.05, "10%", 0.9)


def test_the_book_shows_the_table_and_the_class_of_each_row(tmp_path):
    source, classes, target = tmp_path / "list.csv", tmp_path / "classes.csv", tmp_path / "book.xlsx"
    source.write_text(f"{LIST}Leak,binomial,1%,A,,,\n", encoding="utf-8")
    classes.write_text(CLASSES, encoding="utf-8")
    assert main(["build", str(source), "--classes", str(classes), "-o", str(target)]) == 0
    book = load_workbook(target, data_only=True)
    assert [[cell.value for cell in row] for row in book["Risk classes"]["A7:E8"]] == [
        ["A", "Stops the use", 0.05, "4%", 0.95],
        ["Minor", "Shortens the life", 0.1, "10%", None],
    ]
    row = {
        head.value: cell.value for head, cell in zip(book["Register"][6], book["Register"][7], strict=True)
    }
    assert (row["Risk class"], row["Alpha"], row["Catch"], row["Power wanted"]) == ("A", 0.05, 0.04, 0.95)
    assert "claim p<=0.01 | alpha 0.05" in row["Plan"]
    links = [cell.value for cell in book["Read me"]["B"] if cell.hyperlink]
    assert links == [title for title in book.sheetnames if title != "Read me"]
