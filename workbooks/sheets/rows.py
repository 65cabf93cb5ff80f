"""What a row of the register holds for one characteristic: formats and formulas that follow its kind of plan."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from typing import Any

from steelyard.addin import CATALOGUE
from steelyard.core.numbers import typed
from steelyard.workbooks import native
from steelyard.workbooks.plans import Planned

Cells = Mapping[str, str]
"""Key of a register column -> the row's cell there."""


def in_lots(planned: Planned) -> bool:
    """Tell whether the parameter is a whole number of items of a finite lot."""
    return planned.kind.grammar.extra == "lot"


def rate_style(planned: Planned) -> str:
    """Return the number format of a plan's parameter."""
    return "rate" if planned.kind.parameters[0].upper == 1.0 else "number"


def typed_style(planned: Planned, value: Any) -> str:
    """Return the number format of a rate as it was typed; a lot's may be a share."""
    share = in_lots(planned) and isinstance(value, float) and 0 < value < 1
    return "rate" if share else rate_style(planned)


def plan_formula(planned: Planned, at: Cells, host: str) -> str:
    """Return the formula of the plan's text: of the size that is given, or the smallest that meets both risks."""
    catch = at["catch"]
    if len(planned.catches) > 1:  # as text, with a decimal point whatever the language of the program
        catch = f'SUBSTITUTE({catch}&" and "&{at["second"]},",",".")'
    smallest = [at["kind"], at["claim"], at["alpha"], catch, at["wanted"], at["side"], '"first"', at["extra"]]
    smallest += [at["split"], at["verdict"]]
    given = {**at, "n": at["fixed"], "units": at["fixed"], "lot": at["extra"], "sigma": at["extra"]}
    entry = CATALOGUE[f"SY_{planned.plan.kind.upper()}"]
    of_size = [given[argument.name] for argument in entry.arguments]
    return f'IF({at["fixed"]}="",{_call("SY_SMALLEST", smallest, host)},{_call(entry.name, of_size, host)})'


def _call(name: str, arguments: Sequence[str], host: str) -> str:
    """Return a call; Calc tells an empty cell from 0 only in a range of one cell."""
    ranges = [f"{cell}:{cell}" if host == "calc" and cell.isalnum() else cell for cell in arguments]
    return f"{name}({','.join(ranges)})"


def own_catch_formula(planned: Planned, cell: str, at: Cells, upper: bool) -> str:
    """Return a rate to catch in the plan's own unit: a share of a lot becomes whole items."""
    if not in_lots(planned):
        return f'IF({cell}="","",{cell})'
    items = f"ROUND({cell}*{at['extra']},6)"
    up, down = f"ROUNDUP({items},0)", f"ROUNDDOWN({items},0)"
    whole = (up if upper else down) if planned.side == "either" else f'IF({at["side"]}="below",{down},{up})'
    return f'IF({cell}="","",IF(AND({cell}>0,{cell}<1),{whole},{cell}))'


def own_catch(planned: Planned, value: float | str | None, upper: bool) -> float | None:
    """Return the value of that formula."""
    if value is None or isinstance(value, str):
        return None
    if not in_lots(planned) or not 0 < value < 1:
        return float(value)
    items = typed(value) * int(planned.extra or 0)
    up = upper if planned.side == "either" else planned.side == "above"
    return float(math.ceil(items) if up else math.floor(items))


def native_formula(planned: Planned, at: Cells, rate: str) -> str:
    """Return the power at the rate in a cell, by the spreadsheet's own functions."""
    grammar = planned.kind.grammar
    design = {grammar.extent: at["size"]} | ({grammar.extra: at["extra"]} if grammar.extra else {})
    return native.power_formula(grammar.kind, at["low"], at["high"], rate, **design)
