"""Sequential plans for items from a process: the count is compared with two lines after every item."""

from __future__ import annotations

import re
from functools import lru_cache
from typing import Any

import numpy as np

from steelyard.core.errors import InvalidValue
from steelyard.core.kind import REQUIRED, Field, Grammar, Wording, register
from steelyard.core.kinds.binomial import BinomialKind
from steelyard.core.lines import SequentialRule, Truncated, read_end, read_line, read_most
from steelyard.core.numbers import read_whole
from steelyard.core.partwise import PartwiseKind
from steelyard.core.plan import Plan
from steelyard.core.walk import Look

_OBSERVED = re.compile(r"(\d+) inspected,? (\d+) found", re.IGNORECASE)


class SequentialKind(PartwiseKind):
    """Plans that decide after any item; the exact power and average sample, truncation included."""

    law = BinomialKind.law
    parameters = BinomialKind.parameters
    grammar = Grammar(
        kind="sequential binomial",
        head="binomial",
        marker="sequential",
        design=Truncated,
        fields=(Field("sequential", read_most, lambda most: f"to {most}", REQUIRED),),
        order=("sequential", "accept", "reject", "at end", "claim", "alpha"),
        rules=("accept", "reject", "at end"),
        read_rule=lambda texts, design: SequentialRule(
            read_line(texts.get("accept"), "accept"),
            read_line(texts.get("reject"), "reject"),
            read_end(texts.get("at end")),
        ),
        write_rule=lambda rule: {
            "accept": f"x<={rule.accept}",
            "reject": f"x>={rule.reject}",
            "at end": f"accept x<={rule.last}",
        },
        wording=Wording(
            title="defectives among items from a process, one by one",
            sample="Inspect items drawn at random one by one, at most {sequential}, and keep count.",
            found="defectives",
            assumptions=BinomialKind.grammar.wording.assumptions,
        ),
        extent="sequential",
    )

    def looks(self, plan: Plan) -> tuple[Look, ...]:
        """Return the items at which one of the two numbers changes."""
        return _looks(plan.rule, plan.design.sequential)

    def stops_early(self, plan: Plan) -> bool:
        """Tell that the plan stops at the item that rejects."""
        del plan
        return True

    def verify(self, plan: Plan) -> None:
        """Refuse lines that do not go together, and claims that many defectives do not contradict."""
        super().verify(plan)
        plan.rule.check(plan.design.sequential)

    def steps(self, plan: Plan) -> list[tuple[float, int | None, int | None]]:
        """Return the acceptance and reject numbers wherever one changes, and those at the end."""
        return list(plan.rule.steps(plan.design.sequential))

    def told(self, plan: Plan) -> str:
        """Return what rejects the claim."""
        line, most = plan.rule.reject, plan.design.sequential
        found = self.grammar.wording.found
        upper = f"{line.slope:.6g} n + {line.intercept:.6g} {found} or more among n items"
        return f"{upper}, or {plan.rule.last + 1} or more among all {most}"

    def remarks(self, plan: Plan) -> list[str]:
        """Return when the lot passes, and how much is inspected on average."""
        line, most = plan.rule.accept, plan.design.sequential
        told = [
            f"The lot passes as soon as n items show {line.slope:.6g} n - {-line.intercept:.6g} defectives "
            f"or fewer, or at the end, after {most} items, on {plan.rule.last} or fewer."
        ]
        if plan.claim is not None:
            mean = float(self.average(plan, np.array([plan.claim.value]))[0])
            told.append(f"Where the claim is just true, {mean:.4g} items are inspected on average.")
        return told

    def read_observed(self, value: Any, plan: Plan) -> tuple[int, int]:
        """Return items and defectives from ``40 inspected 3 found``."""
        match = _OBSERVED.fullmatch(" ".join(str(value).split()))
        if match is None:
            raise InvalidValue("observed", "have the form 40 inspected 3 found", value)
        items = read_whole(match[1], "observed", 1, plan.design.sequential)
        return items, read_whole(match[2], "observed", 0, items)

    def outcome(self, plan: Plan, observed: tuple[int, int]) -> bool | str:
        """Tell whether the claim is rejected, or that inspection goes on."""
        items, count = observed
        accept, reject = plan.rule.numbers(items)
        if count >= reject or count <= accept:
            return bool(count >= reject)
        if items < plan.design.sequential:
            return "take the next item"
        return bool(count > plan.rule.last)


@lru_cache(maxsize=256)
def _looks(rule: SequentialRule, most: int) -> tuple[Look, ...]:
    return rule.looks(most)


SEQUENTIAL = register(SequentialKind())
