"""Formulas read as trees and computed: our calls in every spelling, and what may stand around them."""

import pytest
from hypothesis import given
from hypothesis import strategies as st

from steelyard.addin import CATALOGUE, call
from steelyard.workbooks.formula_calls import Unfollowed, as_shown, calls_ours, numbered_links
from steelyard.workbooks.formula_operators import Raised, general
from steelyard.workbooks.formula_tree import Area, read_formula, references
from steelyard.workbooks.formula_values import evaluate
from steelyard.workbooks.opened import cells_of
from steelyard.workbooks.pieces import Fault

PLAN = "binomial | n 50 | claim p<=0.02 | alpha 0.05 | reject x>=4"

# Column A: a plan, a number, a text, a logical value, an error, nothing; column B: rates.
CELLS = {"A1": PLAN, "A2": 0.1, "A3": "Leak", "A4": True, "A5": Fault("#N/A"), "A7": 50.0, "A8": -2.5}
CELLS |= {"B1": 0.05, "B2": 0.1, "B3": "text", "B4": 0.2, "B5": Fault("#DIV/0!")}


class Sheet:
    """Cells for `evaluate`; the name Rate stands for A2."""

    def area(self, area):
        rows = [
            [CELLS.get(ref) for ref in row] for row in cells_of(area.left, area.top, area.right, area.bottom)
        ]
        return rows[0][0] if area.one_cell else rows

    def named(self, name):
        assert name.name == "Rate"
        return read_formula("$A$2")

    def call(self, name, arguments):
        return CATALOGUE[name].function(*arguments)


def value_of(formula):
    return evaluate(read_formula(formula), Sheet())


# Which calls are ours

OURS = [
    "SY_POWER(A1,5%)",
    "sy_power(A1,5%)",
    "SY.POWER(A1,5%)",
    "[1]!SY_POWER(A1,5%)",
    "[12]!sy.Power(A1,5%)",
]
OURS += [r"'C:\add ins\it''s.xlam'!SY_POWER(A1,5%)", "_xludf.SY_POWER(A1,5%)", "_xll.SY_POWER(A1,5%)"]


@pytest.mark.parametrize("formula", OURS)
def test_our_calls_are_known_in_every_spelling(formula):
    assert calls_ours(formula)
    assert as_shown(formula).upper() in ("=SY_POWER(A1,5%)", "=SY.POWER(A1,5%)")
    assert value_of(formula) == call("power", [PLAN, 0.05])


@pytest.mark.parametrize(
    "formula",
    [
        '"SY_POWER(A1)"',
        "ESY_POWER(A1)",
        "A.SY_POWER(A1)",
        "POWER(A1,2)",
        "SY_POWER",
        "'SY_POWER('!A1",
    ],
)
def test_other_calls_are_not_ours(formula):
    assert not calls_ours(formula)


def test_only_the_links_of_our_calls_are_numbered():
    assert numbered_links("[2]!SY_POWER([1]Rates!A1,[3]!OTHER(1))+[4]!sy.size(A1)") == {2, 4}


@pytest.mark.parametrize(
    ("stored", "shown"),
    [
        ('IF( [1]!SY_POWER(A1,  B1)>_xlfn.NORM.S.DIST(1,TRUE),"_xlfn.",)', None),
        ("SORT(_xlfn._xlws.SORT(A1:A3))", "=SORT(SORT(A1:A3))"),
        ("A1 B1", "=A1 B1"),
        ("A1(", "=A1("),
    ],
)
def test_formulas_are_shown_as_people_type_them(stored, shown):
    assert as_shown(stored) == (shown or '=IF( SY_POWER(A1,  B1)>NORM.S.DIST(1,TRUE),"_xlfn.",)')


# Values. What a formula of native functions gives is the programs' own rule (OpenFormula, ODF 1.2 part 2);
# test_roundtrip_calc lets Calc compute the same formulas.

FOLLOWED = [
    ("A1", PLAN),
    ("Rate", 0.1),
    ("SY_SIZE(A1)", call("size", [PLAN])),
    ("SY_POWER(A1,Rate)", call("power", [PLAN, 0.1])),
    ("SY_POWER(SY_BINOMIAL(50,2%),A2)", call("power", [PLAN, 0.1])),
    ("SY_BINOMIAL(A7,2%,,\"above\")", PLAN),
    ("SY_BINOMIAL(A7,2%,,,)", PLAN),
    ("IFERROR(SY_POWER(A1,A5),\"none\")", "none"),
    ("IFERROR(SY_POWER(A1,A2),\"none\")", call("power", [PLAN, 0.1])),
    ("IF(SY_POWER(A1,B1)>0.9,\"ok\",\"no\")", "no"),
    ("ROUND(100*SY_POWER(A1,A2),2)&\" %\"", "74.97 %"),
    ("INDEX(SY_EXPLAIN(A1),2,1)", call("explain", [PLAN])[1][0]),
    ("INDEX(SY_POWER(A1,B1:B2),2)", call("power", [PLAN, 0.1])),
    ("SY_POWER(A1,{0.1})", call("power", [PLAN, 0.1])),
    ("1+2*3^2", 19.0),
    ("-2^2", 4.0),
    ("2^3^2", 64.0),
    ("-A2%", -0.001),
    ("1.1%*100", 1.1),
    ("7-2-1", 4.0),
    ("8/4/2", 1.0),
    ("+A3", "Leak"),
    ("0.1+0.2-0.3", 0.0),
    ("0.1+0.2=0.3", True),
    ("A6+1", 1.0),
    ("A6&\"x\"", "x"),
    ("A6=0", True),
    ("A6=\"\"", True),
    ("A3=\"LEAK\"", True),
    ("A3<>\"leak\"", False),
    ("A3>5", True),
    ("1<2", True),
    ("2>=2", True),
    ("1/3&\"\"", "0.333333333333333"),
    ("A4+1", 2.0),
    ("ISTEXT(A3)", True),
    ("ISTEXT(A6)", False),
    ("ISTEXT(A5)", False),
    ("ISNUMBER(A2)", True),
    ("ISNUMBER(A3)", False),
    ("ISBLANK(A6)", True),
    ("ISBLANK(\"\")", False),
    ("ISERROR(1/0)", True),
    ("ISERROR(A2)", False),
    ("AND(A2>0,A4)", True),
    ("OR(A2<0,A6)", False),
    ("NOT(A2>0)", False),
    ("MIN(A2,B1,B4)", 0.05),
    ("MAX(B1:B4)", 0.2),
    ("SUM(B1:B4,1)", 1.35),
    ("MIN(A6,A3,5)", 5.0),
    ("ABS(A8)", 2.5),
    ("ROUND(2.675,2)", 2.68),
    ("ROUND(A8,0)", -3.0),
    ("ROUND(1234,-2)", 1200.0),
    ("ROUNDUP(-2.1,0)", -3.0),
    ("ROUNDUP(0.1*3*10,0)", 3.0),
    ("ROUNDDOWN(2.99,0)", 2.0),
    ("SUBSTITUTE(B1&\" and \"&B2,\",\",\".\")", "0.05 and 0.1"),
    ("LEFT(A3,2)&LEFT(A3)", "LeL"),
    ("RIGHT(A3,9)&RIGHT(A3,0)", "Leak"),
    ("MID(A3,2,2)&MID(A3,9,1)", "ea"),
    ("LEN(A1)+LEN(A6)+LEN(A2)", 61.0),
    ("FIND(\"a\",A3)", 3.0),
    ("FIND(\"a\",\"aLeak\",2)", 4.0),
    ("IF(A2>1,1)", False),
    ("IF(TRUE(),A3,1/0)", "Leak"),
]  # fmt: skip


@pytest.mark.parametrize(("formula", "value"), FOLLOWED)
def test_a_formula_has_the_value_that_a_program_shows(formula, value):
    found = value_of(formula)
    assert type(found) is type(value)
    assert found == (pytest.approx(value, rel=1e-15) if isinstance(value, float) else value)


def test_ranges_give_rows():
    powers = [[call("power", [PLAN, rate])] for rate in (0.05, 0.1)]
    assert value_of("SY_POWER(A1,B1:B2)") == powers
    assert value_of("SY_POWER(A1,{0.05;0.1})") == powers
    assert value_of("SY_POWER(A1,{0.05,0.1})") == [[powers[0][0], powers[1][0]]]


def test_a_refusal_is_a_value():
    assert value_of("SY_POWER(A3,5%)").startswith("SY: ")
    assert value_of("SY_POWER(A1,A6)") == "SY: rate must be given, but got nothing"


@pytest.mark.parametrize(
    ("formula", "fault"),
    [
        ("A5", "#N/A"),
        ("A5+1", "#N/A"),
        ("SY_POWER(A1,A5)", "#N/A"),
        ("1/0", "#DIV/0!"),
        ("1/A6", "#DIV/0!"),
        ("MAX(B1:B5)", "#DIV/0!"),
        ('MIN("",1)', "#VALUE!"),
        ('FIND("l",A3)', "#VALUE!"),
        ("LEFT(A3,-1)", "#VALUE!"),
        ("MID(A3,0,1)", "#VALUE!"),
        ("INDEX(B1:B4,9)", "#REF!"),
        ("1E300*1E300", "#NUM!"),
        ("0^-1", "#NUM!"),
        ("#N/A", "#N/A"),
    ],
)
def test_error_values_come_out_as_such(formula, fault):
    with pytest.raises(Raised) as raised:
        value_of(formula)
    assert raised.value.fault == fault


@pytest.mark.parametrize(
    ("formula", "reason"),
    [
        ("VLOOKUP(1,A1:B3,2)", "uses VLOOKUP"),
        ("_xlfn.BINOM.DIST(1,2,0.5,TRUE)", "uses BINOM.DIST"),
        ("SY_NOTHING(A1)", "uses SY_NOTHING, a function that there is not"),
        ("A3+1", "takes the text 'Leak' as a number"),
        ("IF(A3,1,2)", "takes the text 'Leak' as a condition"),
        ("A4&\"\"", "takes a logical value as text"),
        ("ISNUMBER(A4)", "asks whether a logical value is a number"),
        ("A4=1", "compares a logical value with another kind"),
        ("A3<\"m\"", "asks which of two texts comes first"),
        ("A1:A3&\"\"", "takes a range where a single value belongs"),
        ("INDEX(B1:B4,0)", "takes a whole row or column by INDEX"),
        ("(-8)^(1/3)", "takes a power that not every program answers alike"),
        ("IF(A2)", "calls IF with 1 arguments"),
        ("ROUND(A2,)", "leaves out an argument"),
        ("SY_POWER(A1,B1:B5)", "takes cells that hold error values"),
        ("SUM(A:A)", r"refers to whole columns or rows \(A:A\)"),
        ("[1]Rates!A1", "refers to another workbook"),
        ("Plans[[#This Row],[Plan]]", r"refers to cells as Plans\[\[#This Row\],\[Plan\]\]: use plain"),
        ("A1 B1", "holds an operator on ranges"),
        ("(A1,B1)", "holds an operator on ranges"),
        ("SUM(A1:INDEX(B1,1))", "uses A1:INDEX"),
        ("SY_POWER(A1", "is written in a way that can't be read here"),
        ("1+", "is written in a way that can't be read here"),
        ("(" * 4000 + "1" + ")" * 4000, "is written in a way that can't be read here"),
    ],
)  # fmt: skip
def test_what_stands_in_the_way_is_named(formula, reason):
    with pytest.raises(Unfollowed, match=f"^{reason}"):
        value_of(formula)


def test_a_fault_of_ours_is_no_value(monkeypatch):
    fault = "SY: an internal fault (NameError): please report the formula"
    monkeypatch.setattr(Sheet, "call", lambda *_: [[0.5, fault]])
    with pytest.raises(Unfollowed, match=r"^meets a fault of SY_SIZE$"):
        value_of("SY_SIZE(A1)")


@pytest.mark.parametrize(
    ("reference", "area"),
    [
        ("B3", Area("", 2, 3, 2, 3, True, False)),
        ("$b$3", Area("", 2, 3, 2, 3, True, True)),
        ("C4:B3", Area("", 2, 3, 3, 4, False, False)),
        ("'It''s 1'!$B$3:$C$4", Area("It's 1", 2, 3, 3, 4, False, True)),
        ("Register!XFD1", Area("Register", 16384, 1, 16384, 1, True, False)),
    ],
)
def test_references_are_read(reference, area):
    assert list(references(read_formula(f"SUM({reference})*2"))) == [area]


@given(st.floats(-1e300, 1e300))
def test_numbers_as_text_keep_fifteen_digits(number):
    assert float(general(number)) == pytest.approx(number, rel=5e-15, abs=5e-324)
    assert "e" not in general(number)


SCALARS = st.sampled_from(
    ["A1", "A2", "A3", "A4", "A5", "A6", "B1:B4", "0.5", '"x"', "TRUE", "#REF!", "5%", "Rate"]
)
SIGNS = st.sampled_from(["+", "-", "*", "/", "^", "&", "=", "<", "<>", ">="])
NATIVES = ["IF", "IFERROR", "ISTEXT", "AND", "MIN", "INDEX", "ROUND", "SUBSTITUTE", "ABS", "VLOOKUP"]
NAMES = st.sampled_from([*NATIVES, "SY_POWER", "SY_SIZE", "SY.BEST", "SY_RULE"])
FORMULAS = st.recursive(
    SCALARS,
    lambda inner: (
        st.tuples(inner, SIGNS, inner).map("".join)
        | st.tuples(NAMES, st.lists(inner | st.just(""), max_size=4)).map(
            lambda call: f"{call[0]}({','.join(call[1])})"
        )
    ),
    max_leaves=8,
)


@given(FORMULAS)
def test_any_formula_has_a_value_an_error_value_or_a_reason(formula):
    try:
        value = value_of(formula)
    except (Raised, Unfollowed) as error:
        assert str(error)
    else:
        assert isinstance(value, float | int | str | list | None)
