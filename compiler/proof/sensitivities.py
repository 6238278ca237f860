"""Upper bounds of |dY/dP| over all zeros, by branch and bound: the boxes that hold the largest bound are cut first (Moore, Skelboe)."""

import numpy as np

from rootwright.calculus.program import evaluate
from rootwright.proof.chart import normalised
from rootwright.proof.intervals import Interval
from rootwright.proof.search import outside, split

_BOXES = 3000
_ROUND = 96                 # boxes cut in a round


def sensitivity_bounds(domain, closure, limit):
    """{"dY/dP": bound} where a finite one was found. Brackets with open ends are left out: a zero may come as near to them as it likes."""
    if domain.opened[0] or len(domain.charts) > 1:
        return {}
    names = [name for name in closure.kernels["jacobian"]
             if closure.program.instructions[closure.program.results[name]].value != 0]
    if not names:
        return {}
    low, high = domain.whole()
    bounds = _bounds(domain, closure, names, low, high)
    spent = 1
    while spent < _BOXES and not limit.reached(np.inf):
        with np.errstate(all="ignore"):
            top = bounds.max(axis=0)
            score = np.where(np.isinf(bounds), 2.0, bounds / np.where(top > 0, top, 1.0)).max(axis=1)
        chosen = np.argsort(-score, kind="stable")[:_ROUND]
        chosen = chosen[score[chosen] > 0.7]
        a, b = low[chosen], high[chosen]
        smear = normalised(*domain.lower.slopes(domain.lower.residual, a, b), a, b) + 0.5
        first, last, stuck = split(a, b, smear, domain.ranges.widths(a, b), domain.ranges.logs)
        fresh = np.tile(~stuck, 2)
        if not fresh.any():
            break
        first, last = _alive(domain, first[fresh], last[fresh])
        rest = np.ones(len(low), bool)
        rest[chosen[~stuck]] = False
        spent += int(fresh.sum())
        limit.take(int(fresh.sum()), "sensitivities", 0, lambda: spent / _BOXES)
        fresh_bounds = _bounds(domain, closure, names, first, last)
        low, high = np.concatenate([low[rest], first]), np.concatenate([high[rest], last])
        bounds = np.concatenate([bounds[rest], fresh_bounds])
    return {name: float(value) for name, value in zip(names, bounds.max(axis=0, initial=0.0)) if np.isfinite(value)}


def _alive(domain, low, high):
    """Boxes that may hold a zero in the operating range."""
    chart = domain.lower
    keep = ~outside(chart, low, high)
    low, high = low[keep], high[keep]
    values = chart.natural(chart.residual, low, high)
    keep = ~values.definite()
    at = np.nonzero(keep & ~values.undefined & ~values.jump)[0]
    if len(at):
        first, last, _, _ = chart.sharp(chart.residual, low[at], high[at])
        keep[at] = ~((first > 0) | (last < 0))
    return low[keep], high[keep]


def _bounds(domain, closure, names, low, high):
    chart, program = domain.lower, closure.program
    size = len(low)
    if not size:
        return np.zeros((0, len(names)))
    inputs = program_inputs(domain, low, high)
    roots = [program.results[name] for name in names]
    with np.errstate(all="ignore"):
        values = evaluate(program.instructions, roots, chart.arithmetic, inputs)
    result = np.zeros((size, len(names)))
    for k, node in enumerate(roots):
        value = values[node]
        result[:, k] = np.maximum(np.abs(value.low), np.abs(value.high))
    return result


def program_inputs(domain, low, high):
    """Inputs of a Closure's Program over boxes: the parameters, and the unknown with room for its rounding."""
    chart, unknown = domain.lower, domain.model.unknown
    inputs = {name: Interval(low[:, k], high[:, k]) for k, name in enumerate(chart.variables[:-1])}
    for parameter, bounds in zip(domain.model.parameters, domain.bounds):
        if parameter.name not in inputs:            # used by outputs only, or not at all
            inputs[parameter.name] = Interval(*(np.full(len(low), end) for end in bounds))
    lower, upper = (chart.natural(form, low, high) for form in chart.bracket)
    with np.errstate(all="ignore"):     # lower <= (1 - t)*lower + t*upper <= upper, wherever the range is
        bottom = lower.low + low[:, -1] * np.maximum(upper.low - lower.low, 0.0)
        top = np.minimum(upper.high, lower.high + high[:, -1] * np.maximum(upper.high - lower.high, 0.0))
        margin = 1e-12 * np.maximum.reduce([np.abs(end) for end in (lower.low, lower.high, upper.low, upper.high)])
    bottom, top = bottom - margin, top + margin
    inputs[unknown.name] = Interval(np.where(np.isnan(bottom), -np.inf, bottom), np.where(np.isnan(top), np.inf, top))
    return inputs
