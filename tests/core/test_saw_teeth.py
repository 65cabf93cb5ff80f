"""Size and power against the amount, and the plans between the first and the lasting size."""

from __future__ import annotations

import numpy as np
import pytest

import steelyard.core.kinds  # noqa: F401 - registers them
from steelyard.core import saw_teeth
from steelyard.core.errors import NoAnswer
from steelyard.core.need import need_from
from steelyard.core.plan import Plan
from steelyard.core.questions import power, size
from steelyard.core.regions import make_plan
from steelyard.core.saw_teeth import candidates, size_curve
from steelyard.core.smallest import smallest_amount

NEEDS = [
    need_from("binomial", "5%", 0.05, "20%", 0.8),
    need_from("binomial", "p>=20%", 0.05, "5%", 0.9),
    need_from("binomial", "p=20%", 0.05, "10% and 40%", 0.8, split="rarest"),
    need_from("poisson", "rate<=0.05", 0.1, 0.2, 0.9),
    need_from("poisson", "rate<=3", 0.1, 4, 0.9),
    need_from("hypergeometric", "D<=3", 0.05, 12, 0.8, extra=90),
    need_from("hypergeometric", "D=20", 0.05, "8 and 40", 0.8, extra=90),
]


def plan_at(need: object, amount: float) -> Plan:
    kind = need.kind.grammar.kind
    return make_plan(kind, need.sized(amount), need.claim, need.alpha, need.split)


@pytest.mark.parametrize("need", NEEDS, ids=str)
def test_the_curve_is_that_of_the_plans(need: object) -> None:
    lasting = smallest_amount(need, lasting=True)
    curve = size_curve(need, np.arange(1, lasting + 3))
    for row, amount in enumerate(curve.amount):
        ends = curve.low[row], curve.high[row]
        if np.isnan(ends).all():
            assert (curve.size[row], curve.power[row]) == (0, 0)
            continue
        plan = plan_at(need, amount)
        assert (plan.rule.low, plan.rule.high) == tuple(None if np.isnan(end) else end for end in ends)
        assert curve.size[row] == pytest.approx(size(plan), rel=1e-12)
        assert curve.power[row] == pytest.approx(min(power(plan, rate) for rate in need.catches), rel=1e-12)
        assert curve.met[row] == (curve.power[row] >= need.power)
    assert curve.amount[curve.met.argmax()] == smallest_amount(need)
    assert curve.met[-3:].all()
    assert lasting == 1 or not curve.met[-4]


@pytest.mark.parametrize("need", NEEDS, ids=str)
def test_candidates_are_all_amounts_that_meet_the_need(need: object) -> None:
    found = candidates(need)
    assert found[0].least == smallest_amount(need)
    assert found[-1].least <= smallest_amount(need, lasting=True) <= found[-1].most
    listed = [amount for one in found for amount in np.arange(one.least, one.most + 1)]
    curve = size_curve(need, np.arange(1, found[-1].most + 1))
    assert listed == curve.amount[curve.met].tolist()
    for one in found:
        assert plan_at(need, one.least).rule == plan_at(need, one.most).rule == one.rule


def test_the_last_candidate_ends_where_its_rule_does() -> None:
    need = NEEDS[0]
    last = candidates(need)[-1]
    assert plan_at(need, last.most + 1).rule != last.rule


def test_a_list_that_would_be_too_long_is_refused(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(saw_teeth, "MOST_AMOUNTS", 5)
    with pytest.raises(NoAnswer, match="27 and 33, lie too far apart for a list"):
        candidates(NEEDS[0])
