"""Boxes narrowed to where a zero may lie.

A zero in a box satisfies 0 in g(c) + sum of s_j (x_j - c_j), where s_j encloses the slope in the variable j over the box: solved for each variable
in turn, as in the interval Newton operator by Gauss-Seidel steps (Moore, Interval Analysis, 1966, section 7.2; Neumaier 1990, section 5.1).
"""

import numpy as np

from rootwright.proof.intervals import Interval
from rootwright.proof.search import may_vanish, outside

_STEPS = 2


def narrowed(domain, index, low, high):
    """(low, high) of boxes that may hold a zero in the operating range, narrowed to it; the others are dropped."""
    chart, opened = domain.charts[index], domain.opened[index]
    keep = ~outside(chart, low, high)
    low, high = low[keep], high[keep]
    values = chart.natural(chart.residual, low, high, opened)
    keep = ~values.definite()
    at = np.nonzero(keep & ~values.undefined & ~values.jump)[0]
    if len(at):
        keep[at] = may_vanish(chart, low[at], high[at], opened)[0]
        at = at[keep[at]]
    for _ in range(_STEPS if len(at) else 0):
        low[at], high[at], empty = _step(chart, low[at], high[at], opened)
        keep[at[empty]] = False
        at = at[~empty]
        if not len(at):
            break
    return low[keep], high[keep]


def _step(chart, low, high, opened):
    """(low, high, empty) after one step over boxes in which the residual is defined and continuous."""
    arithmetic = chart.arithmetic
    below, above = chart.slopes(chart.residual, low, high, opened)
    with np.errstate(all="ignore"):
        centre = np.clip(low + 0.5 * (high - low), low, high)
        value = chart.natural(chart.residual, centre, centre, opened)
        slopes = [Interval(below[:, k], above[:, k]) for k in range(low.shape[1])]
        offsets = [arithmetic.sub(Interval(low[:, k], high[:, k]), Interval(centre[:, k], centre[:, k])) for k in range(low.shape[1])]
        parts = [arithmetic.mul(slope, offset) for slope, offset in zip(slopes, offsets)]
        low, high, empty = low.copy(), high.copy(), np.zeros(len(low), bool)
        for k, slope in enumerate(slopes):
            rest = Interval(value.low, value.high)
            for other, part in enumerate(parts):
                if other != k:
                    rest = arithmetic.add(rest, part)
            near = arithmetic.sub(Interval(centre[:, k], centre[:, k]), arithmetic.div(rest, slope))
            sound = ((slope.low > 0) | (slope.high < 0)) & ~value.undefined & (high[:, k] > low[:, k])
            a = np.where(sound & (near.low > low[:, k]), near.low, low[:, k])
            b = np.where(sound & (near.high < high[:, k]), near.high, high[:, k])
            gone = a > b
            empty |= gone
            low[:, k], high[:, k] = np.where(gone, low[:, k], a), np.where(gone, high[:, k], b)
    return low, high, empty
