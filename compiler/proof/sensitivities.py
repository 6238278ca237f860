"""Upper bounds of |dY/dP| over all zeros, by branch and bound: the boxes that hold the largest bound are cut first (Moore, Skelboe).
"""

import numpy as np

from rootwright.calculus.program import evaluate
from rootwright.proof.chart import normalised
from rootwright.proof.intervals import Interval
from rootwright.proof.narrowing import narrowed
from rootwright.proof.search import split

_BOXES = 3000
_WORK = 2_000_000           # operations of the Program, times boxes, where they are many
_ROUND = 96                 # boxes cut in a round


def sensitivity_bounds(domain, closure, limit):
    """{"dY/dP": bound} where a finite one was found."""
    names = [name for name in closure.kernels["jacobian"]
             if closure.program.instructions[closure.program.results[name]].value != 0]
    tops = [_tops(domain, closure, names, limit, index) for index in range(len(domain.charts))] if names else []
    return {name: float(value) for name, value in zip(names, np.max(tops, axis=0)) if np.isfinite(value)} if tops else {}


def _tops(domain, closure, names, limit, index):
    """Bounds over the boxes that one chart looks after."""
    low, high = narrowed(domain, index, *domain.whole())
    bounds = _bounds(domain, closure, names, low, high, index)
    spent, most = 1, max(_ROUND, min(_BOXES, _WORK // len(closure.program.instructions)))
    while spent < most and len(low) and not limit.reached(np.inf):
        with np.errstate(all="ignore"):
            top = bounds.max(axis=0)
            score = np.where(np.isinf(bounds), 2.0, bounds / np.where(top > 0, top, 1.0)).max(axis=1)
        chosen = np.argsort(-score, kind="stable")[:_ROUND]
        chosen = chosen[score[chosen] > 0.7]
        a, b = low[chosen], high[chosen]
        smear = normalised(*domain.charts[index].slopes(domain.charts[index].residual, a, b, domain.opened[index]), a, b) + 0.5
        first, last, stuck = split(a, b, smear, domain.ranges.widths(a, b), domain.ranges.logs)
        fresh = np.tile(~stuck, 2)
        if not fresh.any():
            break
        first, last = narrowed(domain, index, first[fresh], last[fresh])
        rest = np.ones(len(low), bool)
        rest[chosen[~stuck]] = False
        spent += int(fresh.sum())
        limit.take(int(fresh.sum()), "sensitivities", 0, lambda: spent / most)
        fresh_bounds = _bounds(domain, closure, names, first, last, index)
        low, high = np.concatenate([low[rest], first]), np.concatenate([high[rest], last])
        bounds = np.concatenate([bounds[rest], fresh_bounds])
    return bounds.max(axis=0, initial=0.0)


def _bounds(domain, closure, names, low, high, index):
    chart, program = domain.charts[index], closure.program
    size = len(low)
    if not size:
        return np.zeros((0, len(names)))
    inputs = program_inputs(domain, low, high, index)
    roots = [program.results[name] for name in names]
    with np.errstate(all="ignore"):
        values = evaluate(program.instructions, roots, chart.arithmetic, inputs)
    result = np.zeros((size, len(names)))
    for k, node in enumerate(roots):
        value = values[node]
        result[:, k] = np.maximum(np.abs(value.low), np.abs(value.high))
    return np.where(np.isnan(result), np.inf, result)


def program_inputs(domain, low, high, index=0):
    """Inputs of a Closure's Program over boxes of a chart: the parameters, and the unknown with room for its rounding."""
    chart, unknown = domain.charts[index], domain.model.unknown
    first, last = low[:, -1], high[:, -1]
    if index:                           # counted from the upper end
        first, last = np.clip(np.nextafter(1.0 - last, -1.0), 0.0, 1.0), np.clip(np.nextafter(1.0 - first, 2.0), 0.0, 1.0)
    inputs = {name: Interval(low[:, k], high[:, k]) for k, name in enumerate(chart.variables[:-1])}
    for parameter, bounds in zip(domain.model.parameters, domain.bounds):
        if parameter.name not in inputs:            # used by outputs only, or not at all
            inputs[parameter.name] = Interval(*(np.full(len(low), end) for end in bounds))
    lower, upper = (chart.natural(form, low, high) for form in chart.bracket)
    with np.errstate(all="ignore"):     # lower <= (1 - t)*lower + t*upper <= upper, wherever the range is
        bottom = lower.low + first * np.maximum(upper.low - lower.low, 0.0)
        top = np.minimum(upper.high, lower.high + last * np.maximum(upper.high - lower.high, 0.0))
        margin = 1e-12 * np.maximum.reduce([np.abs(end) for end in (lower.low, lower.high, upper.low, upper.high)])
    bottom, top = bottom - margin, top + margin
    inputs[unknown.name] = Interval(np.where(np.isnan(bottom), -np.inf, bottom), np.where(np.isnan(top), np.inf, top))
    return inputs
