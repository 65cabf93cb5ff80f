"""What must hold for every plan, whatever its numbers."""

from __future__ import annotations

import math
from typing import Any

import pytest
from hypothesis import assume, given, settings
from hypothesis import strategies as st

from steelyard.addin import SY_ACCEPTANCE, SY_PVALUE, SY_REGION, SY_SIZE, plans
from steelyard.addin import SY_POWER as POWER
from steelyard.core.errors import InvalidValue, NoAnswer
from steelyard.core.evidence import decide, limit, p_value
from steelyard.core.kind import KINDS
from steelyard.core.plan import SPLITS, Claim, Plan
from steelyard.core.questions import not_rejected, power, size
from steelyard.core.regions import make_plan
from steelyard.core.text import read_plan, write_plan

ALPHAS = st.sampled_from((0.001, 0.01, 0.025, 0.05, 0.1, 0.2)) | st.floats(1e-6, 0.4)
SIDED = st.sampled_from(("<=", ">="))
COUNTING = ("binomial", "poisson", "hypergeometric")
LARGEST = {"binomial": 1.0, "poisson": math.inf, "hypergeometric": math.inf}


@st.composite
def questions(draw: Any, relations: Any = SIDED, kinds: tuple[str, ...] = COUNTING) -> dict[str, Any]:
    """Draw a kind, a design, a claim, an alpha and a split: what a plan is made of."""
    name = draw(st.sampled_from(kinds))
    relation, grammar = draw(relations), KINDS[name].grammar
    if name == "hypergeometric":
        lot = draw(st.integers(4, 150))
        design = grammar.design(lot=lot, n=draw(st.integers(1, lot - 1)))
        claim = Claim("D", relation, float(draw(st.integers(1, lot - 1))))
    elif name == "poisson":
        design = grammar.design(units=draw(st.floats(0.1, 100)))
        claim = Claim("rate", relation, draw(st.floats(1e-4, 2)))
    else:
        design = grammar.design(n=draw(st.integers(1, 150)))
        claim = Claim("p", relation, draw(st.floats(1e-4, 0.999)))
    split = draw(st.sampled_from(SPLITS)) if relation == "=" else "half"
    return {"kind_name": name, "design": design, "claim": claim, "alpha": draw(ALPHAS), "split": split}


def made(question: dict[str, Any], **changes: Any) -> Plan:
    """Return the plan; examples that no count can reject are left out."""
    try:
        return make_plan(**{**question, **changes})
    except InvalidValue:
        assume(False)
        raise


def rates_of(plan: Plan) -> st.SearchStrategy[float]:
    """Return possible true rates of a plan."""
    if plan.kind == "hypergeometric":
        return st.integers(0, plan.design.lot).map(float)
    return st.floats(0, 1) if plan.kind == "binomial" else st.floats(0, 5)


def most(plan: Plan) -> int:
    """Return a count that is at least as high as any that is likely."""
    if plan.kind == "poisson":
        mean = plan.design.units * plan.claim.value if plan.claim else 0.0
        return int(mean + 8 * math.sqrt(mean) + 20)
    return int(plan.design.n)


ANY = questions(st.sampled_from(("<=", ">=", "=")))


@given(ANY, st.data())
def test_power_and_acceptance_add_up_to_one(question: dict[str, Any], data: st.DataObject) -> None:
    plan = made(question)
    rate = data.draw(rates_of(plan))
    assert power(plan, rate) + not_rejected(plan, rate) == pytest.approx(1, abs=1e-12)


@given(ANY)
def test_size_is_at_most_alpha_unless_the_split_is_nearest(question: dict[str, Any]) -> None:
    plan = made(question)
    assume(plan.split != "nearest")
    assert size(plan) <= plan.alpha * (1 + 1e-12)


@given(questions(), st.data())
def test_power_of_a_one_sided_plan_is_monotone_in_the_rate(question: dict[str, Any], data: Any) -> None:
    plan = made(question)
    low, high = sorted((data.draw(rates_of(plan)), data.draw(rates_of(plan))))
    if question["claim"].relation == ">=":
        low, high = high, low
    assert power(plan, low) <= power(plan, high) * (1 + 1e-12)


@given(ANY, ALPHAS, st.data())
def test_power_is_monotone_in_alpha(question: dict[str, Any], other: float, data: st.DataObject) -> None:
    low, high = sorted((question["alpha"], other))
    strict, loose = made(question, alpha=low), made(question, alpha=high)
    rate = data.draw(rates_of(strict))
    assert power(strict, rate) <= power(loose, rate) * (1 + 1e-12)


@given(questions(kinds=("binomial",)), st.floats(0, 1))
def test_a_larger_sample_falls_short_by_one_saw_tooth_at_most(question: dict[str, Any], rate: float) -> None:
    """One item more raises the critical count by one at most: the power falls by one chance at most."""
    plan = made(question)
    more = made(question, design=type(plan.design)(n=plan.design.n + 1))
    end = "high" if plan.rule.high is not None else "low"
    moved = getattr(more.rule, end) - getattr(plan.rule, end)
    assert moved in (0, 1)
    n, x = plan.design.n, getattr(plan.rule, end)
    tooth = math.comb(n, int(x)) * rate**x * (1 - rate) ** (n - x)
    assert power(more, rate) >= power(plan, rate) - tooth - 1e-12


@given(ANY)
def test_a_plan_survives_its_text(question: dict[str, Any]) -> None:
    plan = made(question)
    assert read_plan(write_plan(plan)) == plan


@given(ANY, st.data())
def test_the_p_value_is_at_most_alpha_exactly_when_the_plan_rejects(
    question: dict[str, Any], data: st.DataObject
) -> None:
    plan = made(question)
    observed = data.draw(st.integers(0, most(plan)))
    rejected = decide(plan, observed).startswith("claim rejected")
    assert (p_value(plan, observed) <= plan.alpha) == rejected


@given(questions(kinds=("binomial", "poisson")), st.data())
def test_a_confidence_limit_inverts_the_p_value(question: dict[str, Any], data: st.DataObject) -> None:
    """One side of the limit is rejected at alpha, the other is not."""
    plan = made(question)
    observed, side = data.draw(st.integers(0, most(plan))), question["claim"].relation
    end = "lower" if side == "<=" else "upper"
    bound = limit(plan, observed, end)
    assume(1e-6 < bound < LARGEST[plan.kind] * (1 - 1e-6))
    values = [bound * (1 - 1e-9), bound * (1 + 1e-9)]
    p_values = [p_value(_claiming(plan, value), observed) for value in values]
    inside, outside = (1, 0) if end == "lower" else (0, 1)
    assert p_values[inside] > plan.alpha * (1 - 1e-12)
    assert p_values[outside] <= plan.alpha * (1 + 1e-12)


@given(questions(st.just("="), kinds=("binomial", "poisson")), st.data())
def test_two_sided_limits_enclose_every_claim_that_is_not_rejected(
    question: dict[str, Any], data: st.DataObject
) -> None:
    plan = made(question)
    observed = data.draw(st.integers(0, most(plan)))
    try:
        low, high = (limit(plan, observed, end) for end in ("lower", "upper"))
    except NoAnswer:
        assume(False)
    if p_value(plan, observed) > plan.alpha:
        assert low <= plan.claim.value * (1 + 1e-9)
        assert high >= plan.claim.value * (1 - 1e-9)


def _claiming(plan: Plan, value: float) -> Plan:
    claim = Claim(plan.claim.symbol, plan.claim.relation, value)
    return Plan(plan.kind, plan.design, plan.rule, claim, None, plan.split, plan.verdict)


@given(st.integers(1, 60), st.data())
def test_one_stage_is_a_single_plan(n: int, data: st.DataObject) -> None:
    count = data.draw(st.integers(1, n))
    rate = data.draw(st.floats(0, 1))
    staged = read_plan(f"binomial | stages {n} | accept {count - 1} | reject {count}")
    single = read_plan(f"binomial | n {n} | reject x>={count}")
    assert power(staged, rate) == pytest.approx(power(single, rate), rel=1e-11, abs=1e-300)
    assert not_rejected(staged, rate) == pytest.approx(not_rejected(single, rate), rel=1e-11, abs=1e-300)


@settings(max_examples=30)
@given(st.lists(ANY, min_size=1, max_size=4), st.lists(st.floats(0, 1), min_size=1, max_size=4))
def test_a_table_holds_the_answers_to_single_cells(asked: list[dict[str, Any]], rates: list[float]) -> None:
    texts = [write_plan(made(question)) for question in asked]
    table = POWER([[text] for text in texts], [rates])
    expected = [[POWER(text, rate) for rate in rates] for text in texts]
    answers = [table] if not isinstance(table, list) else [cell for row in table for cell in row]
    single = [cell for row in expected for cell in row]
    for answer, alone in zip(answers, single, strict=True):
        assert answer == alone or answer == pytest.approx(alone, rel=1e-13, abs=0)


@settings(max_examples=30)
@given(st.integers(2, 40), st.integers(1, 1000), st.floats(0.01, 0.99))
def test_a_large_lot_is_a_process(n: int, times: int, share: float) -> None:
    """The two laws differ by at most (n - 1)/(lot - 1) in any event (Diaconis and Freedman; from memory)."""
    lot = n * times + 1
    defective = round(share * lot)
    for count in range(1, n):
        drawn = power(read_plan(f"hypergeometric | lot {lot} | n {n} | reject x>={count}"), float(defective))
        process = power(read_plan(f"binomial | n {n} | reject x>={count}"), defective / lot)
        assert abs(drawn - process) <= (n - 1) / (lot - 1) + 1e-12


@settings(max_examples=30)
@given(st.integers(2, 300), st.floats(1e-6, 0.5))
def test_a_rare_defective_is_a_defect(n: int, rate: float) -> None:
    """Le Cam: the chances of any event differ by at most n p^2 (from memory)."""
    for count in range(1, n, max(n // 10, 1)):
        items = power(read_plan(f"binomial | n {n} | reject x>={count}"), rate)
        defects = power(read_plan(f"poisson | units {n} | reject x>={count}"), rate)
        assert abs(items - defects) <= n * rate**2 + 1e-12


@pytest.mark.parametrize("again", [False, True])
def test_the_memory_of_cells_changes_no_answer(again: bool) -> None:
    text = "binomial | n 80 | claim p=0.5 | alpha 0.05 | split rarest | reject x<=30 or x>=50"
    asked = [(POWER, (0.4,)), (SY_ACCEPTANCE, (0.4,)), (SY_SIZE, ()), (SY_PVALUE, (31,)), (SY_REGION, ())]
    before = [function([[text]], *values) for function, values in asked]
    if again:
        plans.forget()
    assert [function([[text]], *values) for function, values in asked] == before
