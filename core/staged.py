"""What all plans in stages have in common: double and multiple sampling."""

from __future__ import annotations

import dataclasses
import math
from itertools import accumulate
from typing import Any

import numpy as np

from steelyard.core.endings import Endings
from steelyard.core.errors import InvalidValue, NoAnswer
from steelyard.core.kind import REQUIRED, Field, Grammar, Wording
from steelyard.core.observed import read_count
from steelyard.core.parameter import Floats
from steelyard.core.partwise import PartwiseKind
from steelyard.core.plan import Plan
from steelyard.core.rates import rates_for
from steelyard.core.stages import (
    MOST_FOUND,
    MOST_FOUND_EARLY,
    STOPS,
    StageRule,
    Stages,
    read_counts,
    read_stop,
    write_list,
)
from steelyard.core.threshold import CountKind
from steelyard.core.walk import Look

_TIE = 1e-10  # relative; a lot's chance that lies so close to 1 - confidence is equal to it
_MOST_TOLD = 5  # rejection numbers in one sentence
_EARLY = {
    "on-reject": "Inspection stops inside a stage as soon as the lot must fail.",
    "on-decision": "Inspection stops inside a stage as soon as its end can bring only one verdict.",
}


class StagedKind(PartwiseKind):
    """Plans in stages, beside a kind of single plans of the same law.

    Parameters
    ----------
    single : CountKind
        Whose law, parameter and assumptions hold here too.
    """

    def __init__(
        self, single: CountKind, design: type[Stages], fields: tuple[Field, ...], things: str
    ) -> None:
        self.law, self.parameters, self.things = single.law, single.parameters, things
        words = single.grammar
        extra = (f"{words.extra}",) if words.extra else ()
        self.grammar = Grammar(
            kind=f"staged {words.kind}",
            head=words.head,
            marker="stages",
            design=design,
            fields=fields,
            order=(*extra, "stages", "accept", "reject", "stop", "claim", "alpha"),
            rules=("accept", "reject"),
            read_rule=_read_rule,
            write_rule=lambda rule: {"accept": write_list(rule.accept), "reject": write_list(rule.reject)},
            wording=Wording(
                title=f"{words.wording.title}, in stages",
                sample=f"Inspect {things} in stages, each drawn at random when it is needed, "
                f"and count the {words.wording.found} of all stages together.",
                found=words.wording.found,
                assumptions=words.wording.assumptions,
            ),
            extent="stages",
            extra=words.extra,
        )

    def looks(self, plan: Plan) -> tuple[Look, ...]:
        """Return the stages' ends."""
        found: tuple[Look, ...] = plan.rule.looks(plan.design.stages)
        return found

    def all_looks(self, plan: Plan) -> tuple[Look, ...]:
        """Return also the items at which acceptance is certain, if inspection then stops."""
        if plan.design.stop != "on-decision":
            return self.looks(plan)
        found: tuple[Look, ...] = plan.rule.item_looks(plan.design.stages)
        return found

    def stops_early(self, plan: Plan) -> bool:
        """Tell whether inspection stops inside a stage."""
        return bool(plan.design.stop != "stage-end")

    def average(self, plan: Plan, rate: Floats) -> Floats:
        """Return the expected amount inspected, also of lots that can only fail but not yet."""
        if self.stops_early(plan) or None not in plan.rule.reject:
            return super().average(plan, rate)
        return self.endings(plan, rate).average

    def endings(self, plan: Plan, rate: Floats) -> Endings:
        """Return the ways in which inspection may end.

        Without early stopping a lot whose rejection is certain goes on to the stage that may reject it.
        """
        found = super().endings(plan, rate)
        if self.stops_early(plan) or None not in plan.rule.reject:
            return found
        rejected, average = np.zeros_like(found.rejected), found.average
        for stage, chance in enumerate(found.rejected):
            final = next(i for i, number in enumerate(plan.rule.reject) if i >= stage and number is not None)
            rejected[final] += chance
            average = average + (found.amounts[final] - found.amounts[stage]) * chance
        return dataclasses.replace(found, rejected=rejected, average=average)

    def verify(self, plan: Plan) -> None:
        """Refuse numbers that do not go together, and claims that many defectives do not contradict."""
        super().verify(plan)
        plan.rule.check(MOST_FOUND_EARLY if plan.design.stop == "on-decision" else MOST_FOUND)
        most, last = self.law.most({self.law.amount: plan.design.total}), plan.rule.reject[-1]
        if last > most:
            raise InvalidValue("reject", f"end with a count that {most:g} {self.things} can show", last)

    def steps(self, plan: Plan) -> list[tuple[float, int | None, int | None]]:
        """Return the numbers at the stages' ends."""
        ends = accumulate(plan.design.stages)
        return [
            (float(end), *pair) for end, *pair in zip(ends, plan.rule.accept, plan.rule.reject, strict=True)
        ]

    def told(self, plan: Plan) -> str:
        """Return what rejects the claim, stage by stage."""
        ends, found = list(accumulate(plan.design.stages)), self.grammar.wording.found
        given = [pair for pair in zip(plan.rule.reject, ends, strict=True) if pair[0] is not None]
        if len(given) > _MOST_TOLD:
            return f"so many {found} as the stages below say"
        (count, end), *others = given
        first = f"{count} or more {found} in {end:g} {self.things}"
        return ", or ".join([first, *(f"{count} or more in {end:g}" for count, end in others)])

    def remarks(self, plan: Plan) -> list[str]:
        """Return a sentence for each stage, when inspection stops, and how much that is on average."""
        told = []
        for stage, size in enumerate(plan.design.stages, 1):
            end = math.fsum(plan.design.stages[:stage])
            told.append(
                f"Stage {stage}: inspect {size:g} {self.things}, {end:g} in all. "
                f"{self._verdicts(plan, stage)}"
            )
        told += [_EARLY[plan.design.stop]] if self.stops_early(plan) else []
        if plan.claim is not None:
            mean = float(self.average(plan, np.array([plan.claim.value]))[0])
            told.append(f"Where the claim is just true, {mean:.4g} {self.things} are inspected on average.")
        return told

    def _verdicts(self, plan: Plan, stage: int) -> str:
        accept, reject = plan.rule.accept[stage - 1], plan.rule.reject[stage - 1]
        few = f"{accept} or fewer" if accept else "no"
        passes = "" if accept is None else f"passes on {few} {self.grammar.wording.found} in all"
        fails = "" if reject is None else f"fails on {reject} or more"
        verdict = " and ".join(filter(None, [passes, fails]))
        more = "" if stage == len(plan.design.stages) else f"; otherwise go on to stage {stage + 1}"
        return f"The lot {verdict}{more}." if verdict else f"Go on to stage {stage + 1}."

    def read_observed(self, value: Any, plan: Plan) -> tuple[float, ...]:
        """Return the counts of the stages inspected, from ``2+1`` or the first stage's count alone."""
        parts = value.split("+") if isinstance(value, str) else [value]
        sizes = plan.design.stages
        if len(parts) > len(sizes):
            raise InvalidValue("observed", f"have a count for each of {len(sizes)} stages at most", value)
        most = [self.law.most({self.law.amount: size}) for size in sizes]
        counts = tuple(read_count(part, top) for part, top in zip(parts, most, strict=False))
        for stage in range(1, len(counts)):
            if self._decided(plan, counts[:stage]) is not None:
                raise InvalidValue("observed", f"end with stage {stage}, which decides", value)
        return counts

    def outcome(self, plan: Plan, observed: tuple[float, ...]) -> bool | str:
        """Tell whether the claim is rejected, or how much to inspect next."""
        decided = self._decided(plan, observed)
        return f"take the next {plan.design.stages[len(observed)]:g}" if decided is None else decided

    @staticmethod
    def _decided(plan: Plan, observed: tuple[float, ...]) -> bool | None:
        """Tell whether the stage reached rejects (True), accepts (False) or neither (None)."""
        stage, count = len(observed) - 1, sum(observed)
        accept, reject = plan.rule.accept[stage], plan.rule.reject[stage]
        if reject is not None and count >= reject:
            return True
        return False if accept is not None and count <= accept else None

    def follows_split(self, plan: Plan) -> bool:
        """Tell that every such rule has its own p-value: it rejects at one end only."""
        del plan
        return True

    def p_value(self, plan: Plan, observed: tuple[float, ...]) -> float:
        """Return the chance of an outcome at least as extreme, in the order of the stages."""
        cut = self._cut(plan, observed, 0)
        return 1.0 if cut is None else self.size(cut)

    def limit(self, plan: Plan, observed: tuple[float, ...], end: str, miss: float) -> float:
        """Return an exact limit: the rate that leaves the chance `miss` to what was observed and beyond."""
        cut = self._cut(plan, observed, 0 if end == "lower" else 1)
        least, most = self.parameters[0].reach(plan.design)
        if cut is None:
            return least
        whole = self.parameters[0].whole
        miss = miss * (1 + _TIE) if whole else miss
        rate = float(rates_for([cut], [miss if end == "lower" else 1 - miss])[0, 0])
        if math.isnan(rate):
            return most
        return rate - 1 if whole and end == "upper" else rate

    def _cut(self, plan: Plan, observed: tuple[float, ...], more: int) -> Plan | None:
        """Return the plan that rejects on what is as extreme as observed, or `more` so; None if that is sure.

        Raises
        ------
        NoAnswer
            When the plan has not decided yet, or may have stopped inside a stage.
        """
        if self.stops_early(plan):
            message = "no p-value or limit: a stage that may stop early has no count of the whole stage"
            raise NoAnswer(message)
        if (outcome := self.outcome(plan, observed)) not in (True, False):
            message = f"no p-value or limit before the plan has ended: {outcome}"
            raise NoAnswer(message)
        count = int(sum(observed)) + more
        if count == 0:
            return None
        stage = len(observed)
        design = dataclasses.replace(plan.design, stages=plan.design.stages[:stage])
        return dataclasses.replace(plan, design=design, rule=plan.rule.cut(stage, count))


def _read_rule(texts: dict[str, str], design: Stages) -> StageRule:
    accept, reject = (read_counts(texts.get(name), name, len(design.stages)) for name in ("accept", "reject"))
    return StageRule(accept, reject)


def stage_fields(read: Any) -> tuple[Field, ...]:
    """Return the fields of a design in stages."""
    return (
        Field("stages", read, write_list, REQUIRED),
        Field("stop", read_stop, str, STOPS[0]),
    )
