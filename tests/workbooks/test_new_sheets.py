"""Comparison, Sample size and Results log: what they show is what the cell functions answer."""

import pytest
from demo import Stored, build

from steelyard.addin import (
    SY_BEST,
    SY_CROSSING,
    SY_DECIDE,
    SY_FIELD,
    SY_LIMIT,
    SY_POWER,
    SY_SMALLEST,
)

REQUIREMENT = ("binomial", 0.02, 0.05, 0.08, 0.9)  # of the first row of the demo list


@pytest.fixture(scope="module")
def stored(tmp_path_factory):
    return Stored(build(tmp_path_factory.mktemp("new") / "demo.xlsx", justify=[]))


def rows_below(sheet, heading):
    """Return the rows of values below a heading, each by its column's heading, up to an empty first cell."""
    top = next(cell for row in sheet.iter_rows() for cell in row if cell.value == heading)
    names = [cell.value for cell in sheet[top.row]]
    found = []
    for row in sheet.iter_rows(min_row=top.row + 1, values_only=True):
        if row[top.column - 1] in (None, ""):
            break
        found.append(dict(zip(names, row, strict=True)))
    return found


def power_table(sheet):
    """Return the true values, the plans with their powers, and the numbers of the best plans."""
    section = next(cell.row for cell in sheet["A"] if cell.value == "Power by the true value")
    rates = [cell.value for cell in sheet[section + 1][3:] if cell.value is not None]
    rows = [
        [cell.value for cell in row]
        for row in sheet.iter_rows(min_row=section + 2, max_row=section + 7)
        if row[2].value
    ]
    best = [cell.value for cell in sheet[section + 8][3 : 3 + len(rates)]]
    return rates, [(row[2], row[3 : 3 + len(rates)]) for row in rows], best


def test_the_best_plan_of_the_comparison_is_that_of_the_cell_function(stored):
    rates, plans, best = power_table(stored.values["Comparison"])
    texts = [text for text, _ in plans]
    assert len(texts) >= 4
    for rate, number in zip(rates, best, strict=True):
        if rate > 0:  # where nothing is defective no plan rejects, and the first is named
            assert texts[number - 1] == SY_BEST([[text] for text in texts], rate)
    for text, powers in plans:
        assert powers == [SY_POWER(text, rate) for rate in rates]


def test_crossings_of_the_comparison_are_those_of_the_cell_function(stored):
    first, *others = rows_below(stored.values["Comparison"], "Rejects")
    assert others
    for row in others:
        found = SY_CROSSING(first["Plan"], row["Plan"])
        found = found[0][0] if isinstance(found, list) else found
        assert row["Curve crosses plan 1 at"] == (found if isinstance(found, float) else None)


def test_the_alternative_of_half_the_items_costs_half_and_catches_less(stored):
    plans = {row["Name"]: row for row in rows_below(stored.values["Comparison"], "Rejects")}
    whole, half = plans["As planned"], plans["Half the items"]
    assert (whole["Items at the claim"], half["Items at the claim"]) == (98, 49)
    assert half["Power at the catch"] < whole["Power at the catch"]
    assert half["Beta at the catch"] == pytest.approx(1 - half["Power at the catch"], abs=1e-15)


def test_first_and_lasting_sizes_are_marked(stored):
    sheet = stored.values["Sample size"]
    shown = {row["Smallest"]: row for row in rows_below(sheet, "Smallest")[:2]}
    for order in ("first", "lasting"):
        plan = SY_SMALLEST(*REQUIREMENT, None, order)
        assert (shown[order]["Plan"], shown[order]["Items"]) == (plan, SY_FIELD(plan, "n"))
    marked = [cell.value for cell in sheet["H"] if isinstance(cell.value, float | int)]
    assert marked[:4] == [98, 98, 114, 114]


def test_the_table_of_sizes_says_yes_for_good_from_the_lasting_size_on(stored):
    rows = rows_below(stored.values["Sample size"], "Reject from")
    reached = {row["Items n"]: row["Reaches"] for row in rows}
    assert reached[96] == "no"
    assert reached[98] == "yes"
    assert reached[112] == "no"
    assert {word for n, word in reached.items() if n >= 114} == {"yes"}


def test_decisions_and_limits_of_the_log_are_those_of_the_cell_functions(stored):
    rows = rows_below(stored.values["Results log"], "Decision")
    assert [row["Found"] for row in rows] == [0, 1, 0]
    inspected = found = 0
    for row in rows:
        assert row["Decision"] == SY_DECIDE(row["Plan"], row["Found"])
        assert row["Upper limit for the rate"] == SY_LIMIT(row["Plan"], row["Found"], "upper", 0.95)
        inspected, found = inspected + row["Inspected"], found + row["Found"]
        assert (row["Inspected so far"], row["Found so far"]) == (inspected, found)
        wide = f"binomial | n {inspected} | claim p<=0.5 | reject x>={inspected}"
        assert row["Upper limit so far"] == pytest.approx(SY_LIMIT(wide, found, "upper", 0.95), rel=1e-12)
