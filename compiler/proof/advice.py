"""What would make a proof go through: a tighter range or a requirement that shuts out the corner where it fails, or a wider bracket.

The boxes left open, gathered at one end of one variable, say where to cut; the sign at the ends of the bracket says whether it is too narrow.
Everything proposed has been tried: whoever calls this runs the searches on the proposal's model first.
"""

import json
import math
import sys
from dataclasses import dataclass, replace

import numpy as np

from rootwright.spec.expression import parse
from rootwright.spec.model import Model

_MOST = 0.5             # share of the range that a proposal may give up
_MARGIN = 0.05          # beyond the boxes left open, so that their neighbours are not cut off at the very edge
_LEAST = (1e-9, 1e-6, 1e-3)     # shares of the range that are given up at least
_WIDER = ((0.0, 0.02), (0.02, 0.0), (0.0, 0.5), (0.5, 0.0), (1.0, 1.0), (0.0, 8.0), (8.0, 0.0))      # of the bracket, below and above


@dataclass(frozen=True)
class Proposal:
    """A changed Model, and the lines that change a spec to it."""
    model: Model
    lines: tuple[str, ...]


def cuts(model, domain, outcome):
    """Proposals that leave out every open box, the ones that give up least first."""
    needs = [need for need in outcome.open if need != "kink"] or list(outcome.open)
    lefts = [left for need in needs for left in outcome.open[need]]
    if not lefts:
        return []
    ranges, scored = domain.ranges, []
    low, high = (op(np.concatenate([getattr(left, end) for left in lefts]), axis=0) for end, op in (("low", np.min), ("high", np.max)))
    for k, name in enumerate(ranges.names[:-1]):
        for sign, edge, touches in ((1, high[k], low[k] <= ranges.low[k]), (-1, low[k], high[k] >= ranges.high[k])):
            for least in _LEAST if touches else ():
                limit = _rounded(_away(ranges, k, sign, edge + sign * _MARGIN * (high[k] - low[k]), least), sign)
                kept_low, kept_high = ranges.low.copy(), ranges.high.copy()
                (kept_low if sign > 0 else kept_high)[k] = limit
                if ranges.low[k] < limit < ranges.high[k]:
                    lost = 1.0 - float(ranges.widths(kept_low[None], kept_high[None])[0, k])
                    scored.append((lost, name, sign, limit))
    return [_cut(model, domain, name, sign, limit) for lost, name, sign, limit in sorted(scored) if lost <= _MOST]


def _away(ranges, k, sign, limit, least):
    """The limit, but no nearer to its end of the range than some share of it."""
    low, high = ranges.low[k], ranges.high[k]
    ratio = (high / low) ** least if ranges.logs[k] else 1.0
    if sign > 0:
        return max(limit, low * ratio if ranges.logs[k] else low + least * (high - low))
    return min(limit, high / ratio if ranges.logs[k] else high - least * (high - low))


def _cut(model, domain, name, sign, limit):
    """The requirement, and the range as well where the variable is a parameter itself."""
    expression = relative_name(domain, name)
    condition = f"{expression} {'>=' if sign > 0 else '<='} {limit!r}"
    require = json.dumps([*(known.text for known in model.require), condition])
    lines = [f"under [domain] the proof goes through with: require = {require}"]
    changed = replace(model, require=(*model.require, parse(condition, "condition")))
    if expression == name:
        parameter = next(p for p in model.parameters if p.name == name)
        parameter = replace(parameter, **{"low" if sign > 0 else "high": parse(repr(limit))})
        others = tuple(parameter if p.name == name else p for p in model.parameters)
        changed = replace(model, parameters=others)
        lines.insert(0, f"for {name} under [parameters] the proof goes through with: range = [{_number(parameter.low)}, {_number(parameter.high)}]")
    return Proposal(changed, tuple(lines))


def brackets(model):
    """Proposals of wider brackets, and of one with its ends in order."""
    lower, upper = model.unknown.lower.text, model.unknown.upper.text
    texts = [_wider(lower, upper, *shares) for shares in _WIDER]
    swapped = f"min({lower}, {upper})", f"max({lower}, {upper})"
    texts += [_wider(*swapped, 0.02, 0.02)] if not _constant(lower) or not _constant(upper) else [(upper, lower)]
    return [Proposal(replace(model, unknown=replace(model.unknown, lower=parse(low), upper=parse(high))),
                     (f"under [unknown] there is a root in the bracket with: bracket = {json.dumps([low, high])}",)) for low, high in texts]


def _wider(lower, upper, below, above):
    """Texts of the ends moved out by shares of the width, which keeps their unit."""
    if _constant(lower) and _constant(upper):
        low, high = float(lower), float(upper)
        width = high - low
        return (repr(_rounded(low - below * width, -1)) if below else lower, repr(_rounded(high + above * width, 1)) if above else upper)
    return _beyond(lower, upper, below), _beyond(upper, lower, above)


def _beyond(end, other, share):
    """An end moved away from the other one by a share of their distance."""
    if not share:
        return end
    return f"{1 + share!r}*({end})" + ("" if _constant(other) and float(other) == 0.0 else f" - {share!r}*({other})")


def _constant(text):
    try:
        return math.isfinite(float(text))
    except ValueError:
        return False


def _number(expression):
    """An end of a range as TOML."""
    return expression.text if _constant(expression.text) else json.dumps(expression.text)


def relative_name(domain, name):
    """The variable of a proof that stands for a parameter, as an expression: `sag/L` for `sag`."""
    text = name
    for pivot, power in sorted(domain.scaling.powers.get(name, {}).items()) if domain.scaling else ():
        size = abs(power)
        factor = pivot if size == 1 else f"{pivot}^{size}" if size.denominator == 1 else f"{pivot}^({size})"
        text += ("/" if power > 0 else "*") + factor
    return text


def _rounded(value, direction):
    """Three significant digits, rounded up or down."""
    if abs(value) < sys.float_info.min * 1e4:       # no room for four digits
        return math.copysign(1e-300, direction) if value else 0.0
    scale = 10.0 ** (math.floor(math.log10(abs(value))) - 3)
    whole = math.ceil(value / scale) if direction > 0 else math.floor(value / scale)
    return float(f"{whole * scale:.4g}")
