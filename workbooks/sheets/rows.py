"""What a row of the register holds: formats and formulas that follow the kind of plan."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import Any

from steelyard.workbooks import native
from steelyard.workbooks.columns import maker_of
from steelyard.workbooks.plans import Planned

Cells = Mapping[str, str]
"""Key of a register column -> the row's cell there."""


def in_lots(planned: Planned) -> bool:
    """Tell whether the parameter is a whole number of items of a finite lot."""
    return planned.kind.grammar.extra == "lot"


def rate_style(planned: Planned) -> str:
    """Return the number format of a plan's parameter where it is typed."""
    return "rate" if planned.kind.parameters[0].upper == 1.0 else "number"


def result_style(planned: Planned) -> str:
    """Return the number format of a computed value of the parameter."""
    if in_lots(planned):
        return "count"
    return "risk" if rate_style(planned) == "rate" else "value"


def typed_style(planned: Planned, value: Any) -> str:
    """Return the number format of a rate as it was typed; a lot's may be a share."""
    share = in_lots(planned) and isinstance(value, float) and 0 < value < 1
    return "rate" if share else rate_style(planned)


def plan_formula(planned: Planned, at: Cells, host: str) -> str:
    """Return the formula of the plan: of the size that is given, or the smallest that meets both risks."""
    catch = at["catch"]
    if len(planned.catches) > 1:  # as text, with a decimal point whatever the language of the program
        catch = f'SUBSTITUTE({catch}&" and "&{at["second"]},",",".")'
    smallest = [at["kind"], at["claim"], at["alpha"], catch, at["wanted"], at["side"], '"first"', at["extra"]]
    smallest += [at["split"], at["verdict"]]
    given = {**at, **dict.fromkeys(("n", "units"), at["fixed"])}
    given |= dict.fromkeys(("lot", "sigma", "planning_sigma"), at["extra"])
    entry = maker_of(planned.plan.kind)
    assert entry is not None
    of_size = [given[argument.name] for argument in entry.arguments]
    return f'IF({at["fixed"]}="",{_call("SY_SMALLEST", smallest, host)},{_call(entry.name, of_size, host)})'


def _call(name: str, arguments: Sequence[str], host: str) -> str:
    """Return a call; Calc tells an empty cell from 0 only in a range of one cell."""
    ranges = [f"{cell}:{cell}" if host == "calc" and cell.isalnum() else cell for cell in arguments]
    return f"{name}({','.join(ranges)})"


def own_catch_formula(planned: Planned, number: int, cell: str, at: Cells) -> str:
    """Return a rate to catch in the plan's own unit: a share of a lot is rounded away from the claim."""
    if not in_lots(planned):
        return f'IF({cell}="","",{cell})'
    items = f"ROUND({cell}*{at['extra']},6)"
    up, down = f"ROUNDUP({items},0)", f"ROUNDDOWN({items},0)"
    whole = f'IF({at["side"]}="below",{down},{up})'
    if planned.side == "either" and len(planned.own_catches) > number:
        assert planned.plan.claim is not None
        whole = up if planned.own_catches[number] > planned.plan.claim.value else down
    return f'IF({cell}="","",IF(AND({cell}>0,{cell}<1),{whole},{cell}))'


def native_formula(planned: Planned, at: Cells, rate: str) -> str:
    """Return the power at the rate in a cell by the spreadsheet's own functions; empty if there is none."""
    if not native.follows(planned.plan):
        return planned.kind.native(planned.plan, rate) or ""
    grammar = planned.kind.grammar
    design = {grammar.extent: at["size"]} | ({grammar.extra: at["extra"]} if grammar.extra else {})
    return native.power_formula(grammar.kind, at["low"], at["high"], rate, **design)
