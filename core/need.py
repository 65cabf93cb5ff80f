"""What a smallest plan must do: keep alpha at a claim and reach a power at the rates to catch."""

from __future__ import annotations

import dataclasses
from dataclasses import dataclass
from typing import Any

from steelyard.core.claims import claim_from
from steelyard.core.designs import design_from, extent_values, kind_named
from steelyard.core.errors import InvalidValue
from steelyard.core.kind import Kind, claim_of, kind_of
from steelyard.core.numbers import read_choice, read_probability, write_number
from steelyard.core.plan import SPLITS, Claim, Plan


@dataclass(frozen=True, slots=True)
class Need:
    """A requirement on a plan whose amount is sought.

    Parameters
    ----------
    kind : Kind
    design : object
        The kind's design; its amount is a placeholder.
    claim : Claim
    catches : tuple of float
        The rates at each of which the power must be reached, where the claim is false.
    alpha, power : float
        The largest size and the least power, ``alpha < power``.
    split : {"half", "nearest", "rarest"}
        How a two-sided test shares alpha.
    whole : bool
        Whether the amount is a whole number.
    """

    kind: Kind
    design: Any
    claim: Claim
    catches: tuple[float, ...]
    alpha: float
    power: float
    split: str = "half"
    whole: bool = True

    def __str__(self) -> str:
        rates = " and ".join(write_number(rate) for rate in self.catches)
        alpha, power = write_number(self.alpha), write_number(self.power)
        return f"alpha {alpha} for the claim {self.claim} and power {power} at {rates}"

    def sized(self, amount: float) -> Any:
        """Return the design with an amount."""
        extent = self.kind.grammar.extent
        field = next(field for field in self.kind.grammar.fields if field.attribute == extent)
        return dataclasses.replace(self.design, **{extent: field.read(amount, field.word)})


def need_from(
    kind_name: str,
    claim: Any,
    alpha: Any,
    catch: Any,
    power: Any,
    *,
    side: str | None = None,
    extra: Any = None,
    split: str = "half",
    whole: bool = True,
) -> Need:
    """Return a requirement from what people type.

    Parameters
    ----------
    kind_name : str
        A registered kind.
    claim : float, int or str
        A rate as typed, or a relation such as ``"p<=2%"``.
    alpha, power : float or str
        Probabilities as typed; the power is the greater.
    catch : float, int, str or sequence of them
        The rate to catch. For ``side="either"`` also a low and a high one, e.g. ``"1% and 5%"``.
        On a finite lot a proportion becomes a whole number of defectives, rounded away from the claim.
    side : {"above", "below", "either"}, optional
        Taken from the claim's relation where it has one, ``"above"`` otherwise.
    extra : int or float, optional
        The lot, or sigma, for kinds that need it.
    split : {"half", "nearest", "rarest"}
        How a two-sided test shares alpha.
    whole : bool
        Whether the amount is a whole number. Only amounts that can be divided, such as units, may be real.

    Raises
    ------
    InvalidValue
        When a value is refused: a catch on the claim's own side, a power that does not exceed alpha.

    Examples
    --------
    >>> need_from("hypergeometric", "1%", "5%", "5%", "90%", extra=60).catches
    (3.0,)
    """
    kind = kind_named(kind_name)
    size = read_probability(alpha, "alpha")
    target = _target(power, size)
    design = design_from(kind, extent_values(kind, kind.grammar.least, extra))
    stated = claim_from(kind, claim, side, design)
    kind.check_claim(stated, design)
    catches = _catches(kind, stated, catch, design)
    split = read_choice(split, "split", SPLITS) if stated.side == "either" else SPLITS[0]
    return Need(kind, design, stated, catches, size, target, split, whole)


def need_of(plan: Plan, catch: Any, power: Any, alpha: float) -> Need:
    """Return the requirement that a plan's claim, and design but for the amount, shall meet.

    Parameters
    ----------
    plan : Plan
    catch, power, alpha
        See `need_from`.
    """
    kind, claim = kind_of(plan), claim_of(plan)
    target, catches = _target(power, alpha), _catches(kind, claim, catch, plan.design)
    return Need(kind, plan.design, claim, catches, alpha, target, plan.split)


def _target(power: Any, alpha: float) -> float:
    target = read_probability(power, "power")
    if target <= alpha:
        raise InvalidValue("power", "be greater than alpha", power)
    return target


def _catches(kind: Kind, claim: Claim, catch: Any, design: Any) -> tuple[float, ...]:
    """Return the rates to catch, each on a side of the claim where the claim is false."""
    typed = catch.split(" and ") if isinstance(catch, str) else catch
    given = list(typed) if isinstance(typed, list | tuple) else [typed]
    if claim.side != "either":
        if len(given) != 1:
            raise InvalidValue("catch", f"be one rate for the claim {claim}", catch)
        return (_catch(kind, claim, given[0], design, claim.side),)
    if len(given) == 1:
        side = "above" if kind.parameters[0].claimed(given[0], ">=", design) > claim.value else "below"
        return (_catch(kind, claim, given[0], design, side),)
    if len(given) != 2:
        raise InvalidValue("catch", "be one rate, or a low and a high one such as 1% and 5%", catch)
    return tuple(
        _catch(kind, claim, rate, design, side) for rate, side in zip(given, ("below", "above"), strict=True)
    )


def _catch(kind: Kind, claim: Claim, value: Any, design: Any, side: str) -> float:
    """Return a rate to catch; on a finite lot it is rounded away from the claim."""
    rate = kind.parameters[0].claimed(value, ">=" if side == "above" else "<=", design)
    if rate > claim.value if side == "above" else rate < claim.value:
        return rate
    which = f"{claim.symbol} = {rate:g}" if isinstance(value, str) or rate != value else ""
    raise InvalidValue("catch", f"lie {side} the claim {claim}", value, which)
