"""A search for one point at which a value has the wrong sign: the boxes that promise most are cut first.

The searches that prove cut all boxes alike and may come to an end long before a sliver of the range is resolved. Here only the few boxes go on whose
enclosures reach farthest to the wrong side (best first; Moore and Skelboe).
"""

import numpy as np

from rootwright.proof.search import at_share, outside

_KEPT = 24              # boxes in a round
_ROUNDS = 28            # for each parameter


def wrong_sign(domain, low, high, targets, inside=False):
    """{variable: double} where one of the targets, [(form, right sign)], seems to have the wrong sign; None where no such place is found.

    `low` and `high` are boxes of the domain; only `inside` the bracket the share varies, and is told as well.
    """
    chart, ranges = domain.lower, domain.ranges
    if not inside:
        low, high = at_share(low, high, 0.0)
    for _ in range(_ROUNDS * low.shape[1]):
        score = _reach(chart, low, high, targets)
        score[outside(chart, low, high)] = -np.inf
        order = np.argsort(-score, kind="stable")[:_KEPT]
        order = order[score[order] > 0.0]
        if not len(order):
            return None
        low, high = low[order], high[order]
        middle = 0.5 * low + 0.5 * high
        found = (_reach(chart, middle, middle, targets, True) > 0.0) & ~outside(chart, middle, middle)
        if found.any():
            return dict(zip(ranges.names, middle[np.argmax(found)].tolist()))
        widths = np.where(high > low, ranges.widths(low, high), -1.0)
        rows, choice = np.arange(len(low)), np.argmax(widths, axis=1)
        first_high, second_low = high.copy(), low.copy()
        first_high[rows, choice] = second_low[rows, choice] = middle[rows, choice]
        low, high = np.concatenate([low, second_low]), np.concatenate([first_high, high])
    return None


def _reach(chart, low, high, targets, certain=False):
    """How far the values reach to the wrong side over boxes, or, certainly, at points."""
    reach = np.full(len(low), -np.inf)
    for form, sign in targets:
        values = chart.natural(form, low, high)
        wrong = (-values.low if sign > 0 else values.high) if not certain else (-values.high if sign > 0 else values.low)
        reach = np.maximum(reach, np.where(values.undefined & certain, -np.inf, wrong))
    return reach
