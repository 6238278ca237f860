"""Refuting `slope`: zeros at which the residual's slope is 0, though neither is at a place that anyone can write down.

Three ways. A fold is a regular zero of g and g_t in the share of the bracket and one parameter: Newton's method finds it, Krawczyk's operator proves it
(R. Krawczyk, Computing 4, 1969; R. E. Moore, SIAM J. Numer. Anal. 14, 1977). An inflection keeps its place while a parameter moves: there the slope is 0
by algebra, and the residual changes its sign between two parameters. At a corner with an irrational end both are 0 by algebra.
"""

from fractions import Fraction
from itertools import islice, product

import flint

from rootwright.calculus.balls import ball, precision
from rootwright.calculus.differentiate import partials
from rootwright.proof.cancel import with_inputs
from rootwright.proof.chart import SHARE
from rootwright.proof.crossings import crossing
from rootwright.proof.exact import BITS, UNDEFINED, sign, value_at
from rootwright.proof.ranges import as_ball
from rootwright.proof.witness import in_box, simplest

_STEPS = 40
_RADII = (Fraction(1, 10 ** 12), Fraction(1, 10 ** 16), Fraction(1, 10 ** 9))       # of the share, and of the parameter's range
_STARTS = 8
_FOLDS = 4              # folds that are worked out
_CORNERS = 16


def refute_slope(examiner, starts):
    """(Witness or None, points beside a fold, where two zeros must be); `starts` are [(point, share)] near which slopes vanish."""
    witness = _at_irrational_corner(examiner) or _inflection(examiner, starts)
    if witness:
        return witness, []
    chart = examiner.domain.lower
    folds = []
    for values, share in starts[:_STARTS]:
        point = examiner.points.exact(values)
        for name in chart.variables[:-1] if point and len(folds) < _FOLDS and not examiner.limit.late() else ():
            fold = _fold(examiner, point, share, name)
            folds += [fold] if fold else []
    return (folds[0][0], [point for beside in zip(*(fold[1] for fold in folds)) for point in beside]) if folds else (None, [])


# -- folds

def _fold(examiner, point, share, name):
    """Newton's method in (share, parameter) from a point, and Krawczyk's test where it ends."""
    chart = examiner.domain.lower
    graph, g = chart.graph, chart.residual.nodes[-1]
    inputs = [graph.input(SHARE), graph.input(name)]
    g_t, g_p = partials(graph, g, inputs)
    nodes = [g, g_t, g_p, *partials(graph, g_t, inputs)]
    low, high = (as_ball(end) for end in examiner.points.ends[name])
    with precision(BITS):
        width = high - low
        t, p = ball(Fraction(share)), ball(point[name])
        for _ in range(_STEPS):
            values = _values(examiner, nodes, point, name, t, p)
            step = _solved(values)
            if step is None:
                return None
            t, p = (t - step[0]).mid(), (p - step[1]).mid()
            if not (-1 < t and t < 2):
                return None
            if abs(step[0]) < 1e-40 and abs(step[1]) < 1e-40 * width:
                break
        if not (width > 0 and t > 0 and t < 1 and p > low and p < high):
            return None
        for radius in _RADII:
            radii = ball(radius), (ball(radius) * width).mid()
            if _krawczyk(examiner, nodes, point, name, (t, p), radii):
                return _told(examiner, point, name, (t, p), radii)
    return None


def _values(examiner, nodes, point, name, t, p):
    """Balls of the nodes at a point whose parameter `name` is p; None for what has no value."""
    names = dict(point) | {name: p, SHARE: t, examiner.model.unknown.name: UNDEFINED}
    values = value_at(examiner.domain.lower.graph.instructions, nodes, names)
    return [None if values[node] is UNDEFINED else ball(values[node]) if isinstance(values[node], Fraction) else values[node] for node in nodes]


def _solved(values):
    """Newton's step for g = g_t = 0; None where there is none."""
    if any(value is None or not value.is_finite() for value in values):
        return None
    g, g_t, g_p, g_tt, g_tp = values
    determinant = g_t * g_tp - g_p * g_tt
    if not determinant.is_finite() or determinant.contains(0):
        return None
    return (g * g_tp - g_p * g_t) / determinant, (g_t * g_t - g_tt * g) / determinant


def _krawczyk(examiner, nodes, point, name, centre, radii):
    """True where g and g_t certainly have a common zero within `radii` of the centre, the residual being smooth there."""
    boxes = [flint.arb(middle, radius) for middle, radius in zip(centre, radii)]
    low, high = (as_ball(end) for end in examiner.points.ends[name])
    if not (boxes[0] > 0 and boxes[0] < 1 and boxes[1] >= low and boxes[1] <= high and _smooth(examiner, point, name, *boxes)):
        return False
    at, over = _values(examiner, nodes, point, name, *centre), _values(examiner, nodes, point, name, *boxes)
    if any(value is None or not value.is_finite() for value in (*at, *over)):
        return False
    (a, b), (c, d) = (at[1].mid(), at[2].mid()), (at[3].mid(), at[4].mid())
    determinant = a * d - b * c
    if determinant.contains(0):
        return False
    inverse = ((d / determinant).mid(), (-b / determinant).mid()), ((-c / determinant).mid(), (a / determinant).mid())
    slopes = (over[1], over[2]), (over[3], over[4])
    for row in range(2):
        moved = -(inverse[row][0] * at[0] + inverse[row][1] * at[1])
        for column in range(2):
            rest = (1 if row == column else 0) - (inverse[row][0] * slopes[0][column] + inverse[row][1] * slopes[1][column])
            moved += rest * flint.arb(0, radii[column])
        if not abs(moved) < radii[row]:
            return False
    return True


def _smooth(examiner, point, name, t, p):
    """True where the box meets the requirements, the residual has a value all over it, and no switch is met."""
    chart = examiner.domain.lower
    names = dict(point) | {name: p, SHARE: t, examiner.model.unknown.name: UNDEFINED}
    nodes = [chart.residual.nodes[0], *chart.requirements, *(form.nodes[0] for _, form in chart.switches)]
    values = value_at(chart.graph.instructions, nodes, names)
    residual = values[nodes[0]]
    return residual is not UNDEFINED and (isinstance(residual, Fraction) or residual.is_finite()) \
        and all(values[node] is True for node in chart.requirements) \
        and all(sign(values[form.nodes[0]]) in (1, -1) for _, form in chart.switches)


def _told(examiner, point, name, centre, radii):
    """(Witness, points on both sides of the fold)."""
    ends = [(_rational(middle - radius), _rational(middle + radius)) for middle, radius in zip(centre, radii)]
    box = {key: (value, value) for key, value in point.items()} | {name: _outward(*ends[1])}
    reason = f"Krawczyk's test proves a zero with slope 0 in this box, near {examiner.place(box, sum(ends[0]) / 2)}"
    middle, width = sum(ends[1]) / 2, ends[1][1] - ends[1][0]
    beside = [point | {name: middle + sign_ * width * scale} for scale in (10, 10 ** 4, 10 ** 7, 1) for sign_ in (1, -1)]
    return in_box(box, reason), [{key: _short(value) for key, value in values.items()} for values in beside]


def _rational(value):
    exact = value.mid().fmpq()
    return Fraction(int(exact.p), int(exact.q))


def _short(value):
    return Fraction(f"{float(value):.17g}") if value.denominator > 10 ** 18 else value


def _outward(low, high):
    """Short decimals around an interval."""
    places = Fraction(1)
    while places * 4 > high - low:
        places /= 10
    return low // places * places, -(-high // places) * places


# -- by algebra

def _inflection(examiner, starts):
    """A round place at which the slope is 0 whatever one parameter is, and a sign change of the residual in that parameter."""
    chart = examiner.domain.lower
    graph = chart.graph
    for values, share in starts[:_STARTS]:
        point = examiner.points.exact(values)
        if point is None:
            continue
        margin = Fraction(1, 10 ** 4)
        lower, width = chart.bracket[0].nodes[0], chart.width.nodes[-1]
        known = examiner.at(chart, [lower, width], point)
        places = {simplest(share - margin, share + margin)}
        if isinstance(known[lower], Fraction) and isinstance(known[width], Fraction) and known[width] > 0:
            places.add((simplest(*(known[lower] + (share + side) * known[width] for side in (-margin, margin))) - known[lower]) / known[width])
        for place in sorted(place for place in places if 0 < place < 1):
            for name in chart.variables[:-1]:
                fixed = {key: graph.number(value) for key, value in point.items() if key != name} | {SHARE: graph.number(place)}
                if graph.rational(chart.cancelling.of(with_inputs(graph, chart.slope.nodes[0], fixed))) != 0:
                    continue
                line = [point | {name: value} for value in _line(examiner, name)]
                box = crossing(examiner, chart.residual.nodes[0], place, [other for other in line if examiner.in_range(other)])
                if box and _has_slope(examiner, box, place):
                    return in_box(box, f"the zero at {examiner.place(box, place)} has slope 0")
    return None


def _has_slope(examiner, box, share):
    """True where the derivative, as the rules of differentiation spell it, has a value all over a box: no 0 times infinity is hidden in its 0."""
    chart = examiner.domain.lower
    names = {name: as_ball(low).union(as_ball(high)) if low != high else low for name, (low, high) in box.items()}
    with precision(BITS):
        value = examiner.at(chart, [chart.slope.nodes[0]], names, share)[chart.slope.nodes[0]]
    return value is not UNDEFINED and (isinstance(value, Fraction) or value.is_finite()) and not examiner.meets_switch(box, share)


def _line(examiner, name):
    """Values of one parameter across its range."""
    low, high = (examiner.points.exact({key: pair[side] for key, pair in examiner.points.bounds.items()})[name] for side in (0, 1))
    return [low + (high - low) * Fraction(k, 8) for k in range(9)]


def _at_irrational_corner(examiner):
    """A corner of the range with an irrational end where an end of the bracket is a zero with slope 0, by algebra."""
    chart, model = examiner.domain.lower, examiner.model
    if chart.switches or model.require or all(isinstance(end, Fraction) for pair in examiner.points.ends.values() for end in pair):
        return None
    graph, unknown = chart.graph, model.unknown
    corners = chart.corners()
    for sides in islice(product((0, 1), repeat=len(corners)), _CORNERS):
        inputs = {name: pair[side] for (name, pair), side in zip(corners.items(), sides)}
        for share, opened in ((0, unknown.open_lower), (1, unknown.open_upper)):
            if opened:
                continue
            at = inputs | {SHARE: graph.number(share)}
            nodes = [with_inputs(graph, node, at) for node in (chart.residual.nodes[0], chart.slope.nodes[0])]
            if all(graph.rational(chart.cancelling.of(node)) == 0 for node in nodes):
                box = {name: _around(examiner.points.ends[name][side]) for name, side in zip(corners, sides)}
                if not _has_slope(examiner, box, Fraction(share)):
                    continue
                return in_box(box, f"at this corner of the range the {'upper' if share else 'lower'} end of the bracket is a zero with slope 0")
    return None


def _around(end):
    if isinstance(end, Fraction):
        return end, end
    with precision(BITS):
        middle = _rational(end)
    return _outward(middle - abs(middle) / 10 ** 16, middle + abs(middle) / 10 ** 16)
