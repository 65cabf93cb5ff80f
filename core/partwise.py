"""Every kind of plan that inspects a sample part by part and may decide after each."""

from __future__ import annotations

from abc import abstractmethod
from collections.abc import Callable, Sequence

import numpy as np

from steelyard.core.endings import Endings
from steelyard.core.errors import InvalidValue
from steelyard.core.kind import Kind
from steelyard.core.law import CountLaw
from steelyard.core.parameter import Columns, Floats
from steelyard.core.plan import Plan
from steelyard.core.priors import Prior
from steelyard.core.walk import Course, Look, ProcessCourse, along


class PartwiseKind(Kind):
    """A kind whose count is looked at several times; many defectives reject the claim.

    The power rises with the rate, so the size lies at the claim's boundary. Proof by coupling: give every
    item a uniform number and call it defective where that lies below the rate; in a finite lot make one more
    item defective. At a higher rate no count is smaller at any look. A sample that rejects at a look has not
    been accepted before, so with counts at least as large it is not accepted before either, and it rejects
    there or earlier.
    """

    law: CountLaw

    @abstractmethod
    def looks(self, plan: Plan) -> tuple[Look, ...]:
        """Return the looks that decide on the lot."""

    def all_looks(self, plan: Plan) -> tuple[Look, ...]:
        """Return the looks at which inspection may end, where they are more than those."""
        return self.looks(plan)

    @abstractmethod
    def stops_early(self, plan: Plan) -> bool:
        """Tell whether inspection stops as soon as the lot must be rejected."""

    def course(self, plan: Plan, rate: Floats, looks: Sequence[Look]) -> Course:
        """Return the counts at their beginning."""
        del plan
        return ProcessCourse(self.law, rate, looks)

    def columns(self, plans: Sequence[Plan]) -> Columns:
        """Return the plans themselves: paths are counted plan by plan."""
        objects = np.empty(len(plans), dtype=object)
        objects[:] = plans
        return {"plan": objects}

    def reject(self, columns: Columns, *rates: Floats) -> Floats:
        """Return the sum over all looks of the chance to reject there."""
        return self._each(columns, rates[0], lambda plan, rate: self._sum(plan, rate, "rejected"))

    def accept(self, columns: Columns, *rates: Floats) -> Floats:
        """Return the sum over all looks of the chance to accept there."""
        return self._each(columns, rates[0], lambda plan, rate: self._sum(plan, rate, "accepted"))

    def passing(self, columns: Columns, *rates: Floats) -> Floats:
        """Return the chance that the lot passes, which is that of not rejecting the claim."""
        return self.accept(columns, *rates)

    def average_amount(self, columns: Columns, *rates: Floats) -> Floats:
        """Return the expected amount inspected."""
        return self._each(columns, rates[0], self.average)

    def average(self, plan: Plan, rate: Floats) -> Floats:
        """Return the expected amount inspected by one plan."""
        looks = self.all_looks(plan)
        course = self.course(plan, rate, looks)
        return np.asarray(along(looks, course, self._spent(plan, course)).sum(axis=0))

    def endings(self, plan: Plan, rate: Floats) -> Endings:
        """Return the ways in which inspection may end."""
        looks = self.all_looks(plan)
        course = self.course(plan, rate, looks)
        spent = self._spent(plan, course)

        def all_three(look: Look) -> Floats:
            return np.array([course.accepted(look), course.rejected(look), spent(look)])

        accepted, rejected, amounts = np.moveaxis(along(looks, course, all_three), 1, 0)
        ends = np.array([look.amount for look in looks[: len(accepted)]])
        return Endings(ends, accepted, rejected, amounts.sum(axis=0))

    def left(self, plan: Plan, rate: Floats, lot: float) -> Floats:
        """Return the defectives expected in what passed lots have left uninspected."""
        looks = self.all_looks(plan)
        course = self.course(plan, rate, looks)
        return np.asarray(
            rate * along(looks, course, lambda look: (lot - look.amount) * course.accepted(look)).sum(axis=0)
        )

    @abstractmethod
    def steps(self, plan: Plan) -> list[tuple[float, int | None, int | None]]:
        """Return amounts inspected, and the acceptance and reject numbers from there on."""

    def prior(self, plan: Plan, a: float, b: float) -> Prior:
        """Return what is known of the rate."""
        return self.law.prior(plan.design, a, b)

    def paths(self, plan: Plan) -> Sequence[tuple[Sequence[Look], bool]]:
        """Return the looks, which reject many."""
        return [(self.looks(plan), True)]

    def rises(self, plan: Plan) -> bool:
        """Tell that the power rises with the parameter."""
        del plan
        return True

    def verify(self, plan: Plan) -> None:
        """Refuse claims that many defectives do not contradict."""
        if plan.claim is None:
            return
        self.check_claim(plan.claim, plan.design)
        if plan.claim.side != "above":
            symbol = self.parameters[0].symbol
            rule = f"have the form {symbol}<=… for a plan that rejects on many {self.grammar.wording.found}"
            raise InvalidValue("claim", rule, str(plan.claim))

    def _spent(self, plan: Plan, course: Course) -> Callable[[Look], Floats]:
        return course.spent_early if self.stops_early(plan) else course.spent

    def _sum(self, plan: Plan, rate: Floats, ending: str) -> Floats:
        looks = self.looks(plan)
        course = self.course(plan, rate, looks)
        chances = along(looks, course, getattr(course, ending))
        total: Floats = np.minimum(chances.sum(axis=0), 1.0)
        return total

    @staticmethod
    def _each(columns: Columns, rates: Floats, answer: Callable[[Plan, Floats], Floats]) -> Floats:
        """Answer plan by plan, each for all of its rates at once."""
        plans = columns["plan"]
        shape = np.broadcast_shapes(plans.shape, rates.shape)
        if plans.size == 1:
            return answer(plans.item(), np.broadcast_to(rates, shape).ravel()).reshape(shape)
        places: dict[Plan, list[int]] = {}
        for place, plan in enumerate(np.broadcast_to(plans, shape).flat):
            places.setdefault(plan, []).append(place)
        flat, result = np.broadcast_to(rates, shape).ravel(), np.empty(shape)
        for plan, own in places.items():
            result.flat[own] = answer(plan, flat[own])
        return result
