"""Refuting `kink`: two points of the operating range, close together, between which a zero certainly crosses a switch.

Over the box of the two points the residual is defined, continuous and of one slope in a part of the bracket at whose ends it has different
signs, so that its zero there is a continuous function of the parameters. Where left - right of a switch has different signs at
the zeros of the two points, it is 0 at the zero of some point between them.
"""

from fractions import Fraction

import numpy as np

from rootwright.proof.exact import decimal, sign
from rootwright.proof.witness import Witness
from rootwright.proof.search import judge_inside

_HALVINGS = 40
_CLOSE = 26             # halvings after which the two points are close enough to be looked at


def refute_kink(examiner):
    """Witness of a zero on a switch, or None. Brackets with open ends are not looked at."""
    domain = examiner.domain
    if domain.opened[0] or len(domain.charts) > 1:
        return None
    points = [point for point in map(examiner.points.exact, examiner.points.corners(12)) if point and examiner.in_range(point)]
    zeros = [(point, _zero(examiner, point)) for point in points]
    zeros = [(point, zero) for point, zero in zeros if zero is not None]
    for guard, form in domain.lower.switches:
        if examiner.limit.late():
            break
        signs = [_side(examiner, form, point, zero) for point, zero in zeros]
        below = next((place for place, side in zip(zeros, signs) if side == -1), None)
        above = next((place for place, side in zip(zeros, signs) if side == 1), None)
        if below and above:
            witness = _between(examiner, guard, form, below, above)
            if witness:
                return witness
    return None


def _zero(examiner, point):
    """(a, b): shares of the bracket between which the residual changes its sign, close together; None where it does not."""
    chart = examiner.domain.lower
    node = chart.residual.nodes[0]
    a, b = Fraction(0), Fraction(1)
    first, last = (sign(examiner.at(chart, [node], point, share)[node]) for share in (a, b))
    if None in (first, last) or first * last >= 0:
        return None
    for _ in range(_HALVINGS):
        middle = (a + b) / 2
        here = sign(examiner.at(chart, [node], point, middle)[node])
        if here is None:
            break
        if here == 0:
            step = (b - a) / 8
            return middle - step, middle + step
        a, b = (middle, b) if here == first else (a, middle)
    return a, b


def _boxes(examiner, points, shares):
    """The box around some points and shares."""
    chart = examiner.domain.lower
    low = [min(float(np.nextafter(float(point[name]), -np.inf)) for point in points) for name in chart.variables[:-1]]
    high = [max(float(np.nextafter(float(point[name]), np.inf)) for point in points) for name in chart.variables[:-1]]
    return np.array([[*low, float(min(shares))]]), np.array([[*high, float(max(shares))]])


def _side(examiner, form, point, zero):
    """Sign of left - right at the zero of a point; 0 where it is not certain."""
    values = examiner.domain.lower.natural(form, *_boxes(examiner, [point], zero))
    if values.undefined[0] or values.jump[0]:
        return 0
    return 1 if values.low[0] > 0 else -1 if values.high[0] < 0 else 0


def _between(examiner, guard, form, below, above):
    for halving in range(_HALVINGS):
        if halving >= _CLOSE and _crosses(examiner, guard, form, below, above):
            (point, _), (other, _) = below, above
            return Witness(tuple((name, decimal(value)) for name, value in point.items()), "a zero crosses a switch on the way to "
                           + ", ".join(f"{name} = {decimal(value)}" for name, value in other.items() if value != point[name]))
        middle = examiner.points.exact({name: float((below[0][name] + above[0][name]) / 2) for name in below[0]})
        zero = _zero(examiner, middle) if middle and examiner.in_range(middle) else None
        side = _side(examiner, form, middle, zero) if zero else 0
        if side == 0:
            return None if not _crosses(examiner, guard, form, below, above) else \
                Witness(tuple((name, decimal(value)) for name, value in middle.items()), "a zero crosses a switch near this point")
        if side < 0:
            below = middle, zero
        else:
            above = middle, zero
    return None


def _crosses(examiner, guard, form, below, above):
    """True where the box of two points and their zeros certainly holds a zero on the switch."""
    chart = examiner.domain.lower
    shares = sorted((*below[1], *above[1]))
    margin = (shares[-1] - shares[0]) * 4 + Fraction(1, 10 ** 9)
    shares = max(shares[0] - margin, Fraction(0)), min(shares[-1] + margin, Fraction(1))
    low, high = _boxes(examiner, [below[0], above[0]], shares)
    if any(np.any(chart.evaluate([node], low, high)[node].no) for node in chart.requirements):
        return False
    judged = judge_inside(chart, low, high, False)
    if judged.undefined[0] or judged.jump[0] or judged.rise[0] == 0:
        return False
    signs = []
    for share in (low[0, -1], high[0, -1]):
        end_low, end_high = low.copy(), high.copy()
        end_low[:, -1] = end_high[:, -1] = share
        values = chart.natural(chart.residual, end_low, end_high)
        signs.append(1 if values.low[0] > 0 else -1 if values.high[0] < 0 else 0)
    if signs[0] * signs[1] >= 0:
        return False
    if guard is not None and np.any(chart.evaluate([guard], low, high)[guard].no):
        return False
    values = chart.natural(form, low, high)
    return not values.undefined[0] and not values.jump[0] \
        and _side(examiner, form, *below) < 0 < _side(examiner, form, *above)
