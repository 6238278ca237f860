"""Second derivatives for reference: second differences of roots solved again, with no symbolic derivative anywhere.

With shifts of 2^-120 of a parameter's size and values good to 2^-348, a second difference is good to 2^-108 of the
result over the parameters' sizes; its truncation is 2^-120 of the third derivative or better.
"""

from itertools import combinations_with_replacement

import flint

from rootwright.calculus.balls import ball, precision
from rootwright.evidence.reference import FINE, KINK, Derivative, Differences

STEP = -120                     # shift of a parameter, 2^STEP of its size
_UNDEFINED = Derivative(None, "undefined")


def second_derivatives(reference, point, x):
    """{(result, parameter, parameter): Derivative} for the pairs of differentiated parameters, the earlier one first.

    `point` and `x` as for `Reference.derivatives`. `why` there is none: "kink" where the second differences of both
    sides disagree, "unbounded" where they grow as the step shrinks, "undefined" for anything else.
    """
    return _SecondDifferences(reference, point, x).all()


class _SecondDifferences(Differences):
    def all(self):
        with precision(FINE):
            center = self._center()
            self.moved = {(): center}
            parameters = [parameter for parameter in self.model.parameters if parameter.differentiate]
            self.steps = {parameter.name: self._size(parameter) * flint.arb(2) ** STEP for parameter in parameters}
            self.reach = {parameter.name: self._reach(parameter) for parameter in parameters}
            found = {}
            for p, q in combinations_with_replacement([parameter.name for parameter in parameters], 2):
                for result in self.model.results:
                    if center is None or not center[result].is_finite():
                        found[result, p, q] = _UNDEFINED
                    else:
                        found[result, p, q] = self._pure(result, p) if p == q else self._mixed(result, p, q)
            return found

    def _value(self, result, **steps):
        """Ball of a result where parameters are moved by so many steps; None where it is undefined."""
        key = tuple((name, count) for name, count in steps.items() if count)
        if key not in self.moved:
            shift = {name: ball(self.point[name]) + count * self.steps[name] for name, count in key}
            self.moved[key] = self._results(self._place(shift))
        values = self.moved[key]
        return values[result] if values is not None and values[result].is_finite() else None

    def _pure(self, result, p):
        middle, square, floor = self._value(result), self.steps[p] ** 2, self._floor(result, p, p)

        def one_sided(k):
            values = [self._value(result, **{p: k * side}) for side in (1, 2)]
            return None if None in values else (values[1] - 2 * values[0] + middle) / (k * k * square)

        def central(k):
            return (self._value(result, **{p: k}) - 2 * middle + self._value(result, **{p: -k})) / (k * k * square)

        above, below = one_sided(1), one_sided(-1)
        if above is None and below is None:
            return _UNDEFINED
        if above is None or below is None:
            side = 1 if below is None else -1
            return _converged(one_sided(side), one_sided(2 * side), floor)
        fine = central(1)
        if not _agree(fine, central(2), floor):
            return _converged(fine, central(2), floor)
        return _settled(fine, floor) if _agree(above, below, floor) else Derivative(None, "kink")

    def _mixed(self, result, p, q):
        middle, area, floor = self._value(result), self.steps[p] * self.steps[q], self._floor(result, p, q)

        def quadrant(j, k):
            corner, one, other = (self._value(result, **steps) for steps in ({p: j, q: k}, {p: j}, {q: k}))
            missing = corner is None or one is None or other is None
            return None if missing else (corner - one - other + middle) / (j * k * area)

        above, below = quadrant(1, 1), quadrant(-1, -1)
        if above is not None and below is not None:
            return _settled((above + below) / 2, floor) if _agree(above, below, floor) else _UNDEFINED
        for j, k in ((1, 1), (-1, -1), (1, -1), (-1, 1)):
            fine = quadrant(j, k)
            if fine is not None:
                return _converged(fine, quadrant(2 * j, 2 * k), floor)
        return _UNDEFINED

    def _floor(self, result, p, q):
        """A second derivative below this is nothing against the result and its slopes: 2^-20 of what would change them
        by as much as they are over the reach of the parameters."""
        middle = self._value(result)
        heights = [abs(middle.mid())]
        for name in (p, q):
            for side in (self._value(result, **{name: 1}), self._value(result, **{name: -1})):
                if side is not None:
                    heights.append(abs(((side - middle) / self.steps[name]).mid()) * self.reach[name])
        return max(heights) / (self.reach[p] * self.reach[q]) * flint.arb(2) ** -20

    def _reach(self, parameter):
        """By how much a parameter changes: its size, or a share of its range where that is measured by differences."""
        size = self._size(parameter)
        return size if parameter.spread == "log" else max(size, self._width(parameter) / 1024)


def _agree(one, other, floor):
    gap = one - other
    return abs(gap.mid()) <= max(abs(one.mid()), abs(other.mid()), floor) * KINK + 2 * gap.rad()


def _converged(fine, coarse, floor):
    """The finer of two differences, if the step does not matter."""
    if coarse is not None and _agree(fine, coarse, floor):
        return _settled(fine, floor)
    grows = coarse is not None and abs(fine.mid()) > abs(coarse.mid()) * 1.01
    return Derivative(None, "unbounded" if grows else "undefined")


def _settled(value, floor):
    """The derivative, if its ball is small against it or against the floor; 0 where the ball holds 0."""
    if not value.is_finite() or value.rad() > max(abs(value.mid()), floor) * flint.arb(2) ** -60:
        return _UNDEFINED
    return Derivative(0.0 if value.contains(0) else float(value.mid()))
