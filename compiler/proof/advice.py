"""A requirement that shuts out the corner where a proof fails: the boxes left open, gathered at one end of one variable.

What is proposed has been tried: with it the searches leave nothing open.
"""

import math
import sys
from dataclasses import replace

import numpy as np

from rootwright.spec.expression import parse

_MOST = 0.5             # share of the range that a proposal may give up
_MARGIN = 0.05          # beyond the boxes left open, so that their neighbours are not cut off at the very edge


def proposals(domain, outcome):
    """Conditions that leave out every open box, the one that gives up least first."""
    lefts = [left for need, boxes in outcome.open.items() if need != "kink" for left in boxes]
    if not lefts:
        return []
    ranges, scored = domain.ranges, []
    low, high = (op(np.concatenate([getattr(left, end) for left in lefts]), axis=0) for end, op in (("low", np.min), ("high", np.max)))
    for k, name in enumerate(ranges.names[:-1]):
        expression = relative_name(domain, name)
        for sign, edge, touches in ((1, high[k], low[k] <= ranges.low[k]), (-1, low[k], high[k] >= ranges.high[k])):
            limit = _rounded(edge + sign * _MARGIN * (high[k] - low[k]), sign)
            kept_low, kept_high = ranges.low.copy(), ranges.high.copy()
            (kept_low if sign > 0 else kept_high)[k] = limit
            if touches and ranges.low[k] < limit < ranges.high[k]:
                lost = 1.0 - float(ranges.widths(kept_low[None], kept_high[None])[0, k])
                scored.append((lost, f"{expression} {'>=' if sign > 0 else '<='} {limit!r}"))
    return [condition for lost, condition in sorted(scored) if lost <= _MOST]


def relative_name(domain, name):
    """The variable of a proof that stands for a parameter, as an expression: `sag/L` for `sag`."""
    text = name
    for pivot, power in sorted(domain.scaling.powers.get(name, {}).items()) if domain.scaling else ():
        size = abs(power)
        factor = pivot if size == 1 else f"{pivot}^{size}" if size.denominator == 1 else f"{pivot}^({size})"
        text += ("/" if power > 0 else "*") + factor
    return text


def with_requirement(model, condition):
    return replace(model, require=(*model.require, parse(condition, "condition")))


def _rounded(value, direction):
    """Three significant digits, rounded up or down."""
    if abs(value) < sys.float_info.min * 1e4:       # no room for four digits
        return math.copysign(1e-300, direction) if value else 0.0
    scale = 10.0 ** (math.floor(math.log10(abs(value))) - 3)
    whole = math.ceil(value / scale) if direction > 0 else math.floor(value / scale)
    return float(f"{whole * scale:.4g}")
