"""Values that are 0 somewhere between two points of the operating range, by the intermediate value theorem.

On the way from one point to the other one parameter is changed at a time, so that what is found is one decimal that nobody can write
down, in a small interval, with all others given.
"""

from fractions import Fraction

import numpy as np

from rootwright.calculus.program import needed
from rootwright.proof.cancel import factors
from rootwright.proof.chart import SHARE
from rootwright.proof.exact import sign
from rootwright.proof.functions import ends
from rootwright.proof.ranges import as_ball
from rootwright.proof.witness import in_box

_HALVINGS = 56
_POINTS = 12
_SHARES = tuple(Fraction(k, 4) for k in (2, 1, 3))


def crossing(examiner, node, share=Fraction(0), points=None):
    """{parameter: (low, high)}: a box of points, one of which certainly makes `node` 0 at a share of the bracket; None where none was found.

    A parameter that does not vary has one number twice; so has every one where the zero is at an exact point.
    """
    signs = {1: [], -1: []}
    for point in examiner.inside(_POINTS) if points is None else points:
        known = _sign(examiner, node, point, share)
        if known == 0:
            return {name: (value, value) for name, value in point.items()}
        if known:
            signs[known].append(point)
    if not (signs[1] and signs[-1]):
        return None
    first, last = signs[1][0], signs[-1][0]
    near = dict(first)
    for name in first:
        far = near | {name: last[name]}
        known = _sign(examiner, node, far, share)
        if known != 1:
            return _narrowed(examiner, node, share, near, far, name) if known is not None else None
        near = far
    return None


def _sign(examiner, node, point, share):
    return sign(examiner.at(examiner.domain.lower, [node], point, share)[node])


def _narrowed(examiner, node, share, positive, negative, name):
    """The box between two points that differ in one parameter, made small."""
    values = [examiner.at(examiner.domain.lower, [node], point, share)[node] for point in (positive, negative)]
    if all(isinstance(value, Fraction) for value in values):        # exact where the value is linear in the parameter
        part = values[0] / (values[0] - values[1])
        point = positive | {name: positive[name] + part * (negative[name] - positive[name])}
        if _sign(examiner, node, point, share) == 0:
            return {key: (value, value) for key, value in point.items()} if examiner.in_range(point) else None
    for _ in range(_HALVINGS):
        middle = examiner.points.exact(positive | {name: float((positive[name] + negative[name]) / 2)})
        if middle is None or middle in (positive, negative):
            break
        known = _sign(examiner, node, middle, share)
        if known == 0:
            return {key: (value, value) for key, value in middle.items()} if examiner.in_range(middle) else None
        if known is None:
            break
        positive, negative = (middle, negative) if known > 0 else (positive, middle)
    box = {key: tuple(sorted((positive[key], negative[key]))) for key in positive}
    return box if _continuous(examiner, node, box, share) else None


def arrays(examiner, box, shares):
    """(low, high) of doubles around a box of Fractions and (low, high) of the share."""
    names = examiner.domain.lower.variables[:-1]
    low = [ends(as_ball(box[name][0]))[0] for name in names]
    high = [ends(as_ball(box[name][1]))[1] for name in names]
    return np.array([[*low, ends(as_ball(shares[0]))[0]]]), np.array([[*high, ends(as_ball(shares[1]))[1]]])


def met(examiner, low, high):
    """True where every requirement holds all over a box."""
    chart = examiner.domain.lower
    return not any(np.any(chart.evaluate([node], low, high)[node].no) for node in chart.requirements)


def _continuous(examiner, node, box, share):
    low, high = arrays(examiner, box, (share, share))
    value = examiner.domain.lower.evaluate([node], low, high)[node]
    return met(examiner, low, high) and not np.any(value.undefined) and not np.any(value.jump)


def refute_divisors(examiner):
    """Witness that a divisor of the residual is 0 between points of the range; None where none is found."""
    chart, unknown = examiner.domain.lower, examiner.model.unknown
    tried = set()
    places = [(chart.residual, share) for share in _SHARES]
    places += [(chart.at_lower, Fraction(0))] * (not unknown.open_lower) + [(chart.at_upper, Fraction(1))] * (not unknown.open_upper)
    for form, share in places:
        for kind, node in form.domain or ():
            for factor in factors(chart.graph, node)[1] if kind == "nonzero" else ():
                moves = chart.graph.input(SHARE) in needed(chart.graph.instructions, [factor])
                if (factor, share if moves else None) not in tried:
                    tried.add((factor, share if moves else None))
                    box = crossing(examiner, factor, share)
                    if box:
                        return in_box(box, f"a divisor is 0, at {examiner.place(box, share)}")
    return None


def refute_parameter_switch(examiner):
    """Witness of a switch on parameters alone, met where the residual has a zero (which is known of the whole range); None where none is found."""
    chart = examiner.domain.lower
    share = chart.graph.input(SHARE)
    for guard, form in chart.switches:
        if guard is None and share not in needed(chart.graph.instructions, form.nodes):
            box = crossing(examiner, form.nodes[-1])
            if box:
                return in_box(box, "a switch on parameters alone is met, and there is a zero")
    return None
