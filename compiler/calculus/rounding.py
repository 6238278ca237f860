"""Running error analysis: instructions that bound the rounding error of other instructions.

For every operation v = op(a, b) the error of v is at most the errors of a and b carried through op, plus the rounding of op itself
(J. H. Wilkinson, Rounding Errors in Algebraic Processes, 1963; N. J. Higham, Accuracy and Stability of Numerical Algorithms,
2nd ed. 2002, section 3.3). All errors are counted in units of u = 2^-53 (2^-24 in single precision), and what is
known when the module is generated is added up there: the error of v is at most

    u * (relative*|v| + absolute + running)

with two numbers and one instruction, so that a product of ten factors costs the emitted code nothing and a sum costs one line.
Decimal constants count with the rounding to the nearest number. Where a product or quotient can underflow inside
the operating range, half the smallest subnormal is counted as well. Terms of second order are kept where a divisor or the argument of a root or
a logarithm is itself uncertain; the rest is covered by the unit in use, which is 8 % above u.
Not counted: an overflow on the way to a finite value, and a comparison in `where` that falls out otherwise than for real
numbers: the bound is that of the piece chosen, and the status says `kink`.
"""

import math
from dataclasses import dataclass, replace
from fractions import Fraction

from rootwright.calculus.constants import NotReal, nearest, nearest_rounding
from rootwright.calculus.magnitude import largest, smallest
from rootwright.calculus.program import CONDITIONS, Node, needed
from rootwright.operations import OPERATIONS


@dataclass(frozen=True, slots=True)
class Error:
    relative: float = 0.0
    absolute: float = 0.0
    running: int | None = None


class Rounding:
    """Builds rounding bounds into a graph. `magnitudes` tells how large its values are over the operating range."""

    def __init__(self, graph, magnitudes):
        self.graph = graph
        self.precision = graph.precision
        self.magnitudes = magnitudes
        self.errors = {}
        self.unit = graph.number(self.precision.unit)
        self.tiniest = graph.number(Fraction(self.precision.smallest))      # keeps a quotient of zeros from being NaN
        self.coarse = 2.0 ** (self.precision.digits - 10)                   # 2^-10 in units of u

    def bound(self, node):
        """Instruction that bounds the absolute rounding error of `node`."""
        return self.graph.mul(self.unit, self._units(node))

    def sign_bound(self, node):
        """Bound on `node` below which its sign is not certain: the part of its error that is not relative to itself."""
        error = self.error(node)
        return self.graph.mul(self.unit, self._total(Error(0.0, error.absolute, error.running), node))

    def error(self, node):
        for step in needed(self.graph.instructions, [node], self.errors):
            if self.graph.instructions[step].op not in CONDITIONS:
                self.errors[step] = self._tidy(self._operation(Node(step)), step)
        return self.errors[node]

    # -- sums of the parts

    def _units(self, node):
        return self._total(self.error(node), node)

    def _total(self, error, node):
        """relative*|v| + absolute + running, as an instruction, in units of u."""
        graph = self.graph
        total = graph.number(0) if error.running is None else error.running
        if error.relative:
            total = self._plus(total, self._scaled(error.relative, self._magnitude(node)))
        if error.absolute:
            total = graph.add(total, graph.number(self._upper(error.absolute)))
        return total

    def _plus(self, total, part):
        """Sum of two bounds, regrouped from left to right."""
        instruction = self.graph.instructions[part]
        if instruction.op == "add":
            return self._plus(self._plus(total, instruction.args[0]), instruction.args[1])
        return self.graph.add(total, part)

    def _parts(self, node):
        """The running part of an operand's error with its relative part made explicit, and its absolute part."""
        error = self.error(node)
        if self.graph.is_constant(node):
            return None, error.absolute + error.relative * abs(nearest(self.graph, node))
        return self._total(Error(error.relative, 0.0, error.running), node) if error.relative or error.running is not None \
            else None, error.absolute

    def _magnitude(self, node):
        """|v|, without fabs where the sign is known over the operating range (a wrong sign outside would not be safe: keep it)."""
        if self.graph.is_constant(node):
            return self.graph.number(abs(Fraction(nearest(self.graph, node))))
        instruction = self.graph.instructions[node]
        if instruction.op in ("exp", "sqrt", "cosh", "abs", "hypot", "erfc"):
            return node
        if instruction.op == "neg":
            return self._magnitude(instruction.args[0])
        return self.graph.abs_(node)

    def _scaled(self, factor, node):
        return self.graph.mul(self.graph.number(self._upper(factor)), node)

    def _upper(self, factor):
        """The factor rounded up to three digits: short in print, and still a bound. Multiples of the smallest normal
        number stay."""
        if factor == int(factor) or factor < self.precision.smallest * 2.0 ** 58 or factor > 1e290:
            return Fraction(factor)
        scale = Fraction(10) ** (2 - math.floor(math.log10(factor)))
        return Fraction(math.ceil(Fraction(factor) * scale)) / scale

    def _tidy(self, error, node):
        """Drop an absolute part that is negligible against |v| over the whole operating range."""
        if error.absolute and error.absolute <= 1e-20 * smallest(self.magnitudes.of(node)):
            return Error(error.relative + 1e-20, 0.0, error.running)
        return error

    # -- one rule an operation

    def _operation(self, node):
        instruction = self.graph.instructions[node]
        if instruction.op in ("input", "nan"):
            return Error()
        if self.graph.is_constant(node):
            return self._constant(node)
        rule = getattr(self, "_" + instruction.op, None)
        error = rule(node, *instruction.args) if rule else self._general(node, instruction)
        return error

    def _constant(self, node):
        try:
            relative = nearest_rounding(self.graph, node)
        except NotReal:             # a constant of a derivative that overflows: infinite, and not in error
            return Error()
        if relative <= 1.0:
            return Error(relative=relative)
        return Error(absolute=self.precision.smallest)       # subnormal, or zero for a constant that is not

    def _underflow(self, node):
        far = smallest(self.magnitudes.of(node)) > self.precision.smallest * 2.0 ** (2*self.precision.digits + 16)
        return 0.0 if far else self.precision.smallest

    def _sum(self, *parts):
        parts = [part for part in parts if part is not None]
        total = parts[0] if parts else None
        for part in parts[1:]:
            total = self._plus(total, part)
        return total

    def _add(self, node, a, b):
        (run_a, abs_a), (run_b, abs_b) = self._parts(a), self._parts(b)
        return Error(1.0, abs_a + abs_b, self._sum(run_a, run_b))

    _sub = _add

    def _neg(self, node, a):
        return self.error(a)

    def _abs(self, node, a):
        return self.error(a)

    def _mul(self, node, a, b):
        one, other = self.error(a), self.error(b)
        for factor, rest in ((a, other), (b, one)):
            if self._is_power_of_two(factor):
                scale = abs(nearest(self.graph, factor))
                return Error(rest.relative, rest.absolute * scale + self._underflow(node),
                             None if rest.running is None else self._scaled(scale, rest.running))
        carried = self._sum(self._carried(one, b), self._carried(other, a))
        if one.running is not None and other.running is not None:       # the product of the two errors
            carried = self._plus(carried, self.graph.mul(self.unit,
                                                             self.graph.mul(one.running, other.running)))
        return Error(one.relative + other.relative + 1.0, self._underflow(node), carried)

    def _is_power_of_two(self, node):
        """True for a constant that is one exactly: multiplying by it makes no error."""
        graph = self.graph
        return graph.is_constant(node) and not self.error(node).relative and abs(math.frexp(nearest(graph, node))[0]) == 0.5

    def _carried(self, error, factor):
        """The non-relative error of one factor times the other factor."""
        part = self._total(Error(0.0, error.absolute, error.running), factor)
        return None if self.graph.literal(part) == 0 else self.graph.mul(part, self._magnitude(factor))

    def _div(self, node, a, b):
        one, other = self.error(a), self.error(b)
        above = self._total(Error(0.0, one.absolute, one.running), a)
        below = self._total(Error(0.0, other.absolute, other.running), b)
        if self.graph.literal(below) != 0:
            above = self._plus(above, self.graph.mul(self._magnitude(node), below))
        running = None if self.graph.literal(above) == 0 else self.graph.div(above, self._certain(b, below))
        return Error(one.relative + other.relative + 1.0, self._underflow(node), running)

    def _certain(self, node, units):
        """|a| less its error, but never 0 or less: what is left of a divisor in the worst case.

        Just |a| where its error is of no account over the whole operating range.
        """
        graph = self.graph
        if not self._is_near_zero(node, units):
            return self._magnitude(node)
        return graph.max_(graph.sub(self._magnitude(node), graph.mul(self.unit, units)), self.tiniest)

    def _is_near_zero(self, node, units):
        """True where the value may come so near to zero in the operating range that its error is no longer small beside it."""
        return largest(self.magnitudes.of(units)) > self.coarse * smallest(self.magnitudes.of(node))

    def _where(self, node, condition, a, b):
        if self.graph.instructions[b].op == "nan":
            return self.error(a)
        one, other = self.error(a), self.error(b)
        if one.running is None and other.running is None and one.absolute == other.absolute == 0.0:
            return Error(max(one.relative, other.relative))
        return Error(running=self.graph.where(condition, self._units(a), self._units(b)))

    def _extreme(self, node, first, a, b):
        """The error of the argument chosen; or, near a tie, what is left of the other's when the distance is taken off."""
        graph, one, other = self.graph, self.error(a), self.error(b)
        if one.running is None and other.running is None and one.absolute == other.absolute == 0.0:
            return Error(max(one.relative, other.relative))
        units, distance = (self._units(a), self._units(b)), graph.div(graph.abs_(graph.sub(a, b)), self.unit)
        chosen = [mine if graph.literal(its) == 0 else graph.max_(mine, graph.sub(its, distance))
                  for mine, its in (units, reversed(units))]
        return Error(running=graph.where(first, *chosen))

    def _min(self, node, a, b):
        return self._extreme(node, self.graph.le(a, b), a, b)

    def _max(self, node, a, b):
        return self._extreme(node, self.graph.ge(a, b), a, b)

    def _sign(self, node, a):
        """Off by 2 at most, where the sign of the argument is not certain."""
        graph = self.graph
        reach = self.sign_bound(a)
        if graph.literal(reach) == 0:
            return Error()
        return Error(running=graph.where(graph.le(graph.abs_(a), reach), graph.div(2, self.unit), 0))

    def _sqrt(self, node, a):
        """|sqrt(a) - sqrt(b)| <= e/sqrt(max(a, e)) for |a - b| <= e."""
        graph, error = self.graph, self.error(a)
        units = self._total(Error(0.0, error.absolute, error.running), a)
        running = None
        if graph.literal(units) != 0:
            floor = graph.max_(graph.mul(self.unit, units), self.tiniest)
            running = graph.div(units, graph.sqrt(graph.max_(a, floor)))
        return Error(error.relative / 2.0 + 1.0, 0.0, running)

    def _exp(self, node, a):
        run, absolute = self._parts(a)
        if run is not None and self._coarse(run):
            run = self.graph.div(self.graph.expm1(self.graph.mul(self.unit, run)), self.unit)
        return Error(2.0 * self.precision.ulps("exp") + absolute, self._underflow(node),
                     None if run is None else self.graph.mul(node, run))

    def _logarithm(self, node, a, scale, op):
        error = self.error(a)
        units = self._total(Error(0.0, error.absolute, error.running), a)
        running = None
        if self.graph.literal(units) != 0:
            running = self._scaled(scale, self.graph.div(units, self._certain(a, units)))
        return Error(2.0 * self.precision.ulps(op), error.relative * scale, running)

    def _log(self, node, a):
        return self._logarithm(node, a, 1.0, "log")

    def _log10(self, node, a):
        return self._logarithm(node, a, 1.0 / math.log(10.0), "log10")

    def _log2(self, node, a):
        return self._logarithm(node, a, 1.0 / math.log(2.0), "log2")

    def _pow(self, node, a, b):
        """a**b: the relative error of a times |b|, and the error of b times |log a|."""
        graph = self.graph
        one, other = self.error(a), self.error(b)
        units = self._total(Error(0.0, one.absolute, one.running), a)
        relative, running = 2.0 * self.precision.ulps("pow"), None
        if graph.is_constant(b):
            relative += abs(nearest(graph, b)) * one.relative
            parts = [None if graph.literal(units) == 0 else
                     graph.mul(self._magnitude(b), graph.div(units, self._certain(a, units)))]
        else:
            parts = [None if graph.literal(units) == 0 and not one.relative else
                     graph.mul(self._magnitude(b), graph.add(graph.div(units, self._certain(a, units)),
                                                             graph.number(Fraction(one.relative))))]
        exponent = self._total(other, b)
        if graph.literal(exponent) != 0:
            low, high = self.magnitudes.of(a)
            if graph.is_constant(b) and 0.0 < low and high < math.inf:
                relative += float(graph.literal(exponent)) * max(abs(math.log(low)), abs(math.log(high)))
            else:
                logarithm = graph.log(graph.max_(a, self.tiniest))
                parts.append(graph.mul(self._magnitude(logarithm), exponent))
        carried = self._sum(*parts)
        if carried is not None:
            running = graph.mul(self._steepest_power(node, a, b, units), carried)
            if self._is_near_zero(a, units) and graph.is_constant(b) and nearest(graph, b) > 0.0:
                error = graph.mul(self.unit, units)         # where a itself is within its error: at most (2*error)^b
                whole = graph.div(graph.apply("pow", graph.mul(2, error), b), self.unit)
                running = graph.where(graph.lt(error, a), running, whole)
        return Error(relative, self._underflow(node), running)

    def _steepest_power(self, node, a, b, units):
        """The power itself; or, with a negative exponent, at what is certain of a base near 0."""
        graph = self.graph
        if self._is_near_zero(a, units) and graph.is_constant(b) and nearest(graph, b) < 0.0:
            return graph.apply("pow", self._certain(a, units), b)
        return self._magnitude(node)

    def _bounded_slope(self, node, a):
        """sin and cos change by no more than their argument does."""
        run, absolute = self._parts(a)
        return Error(2.0 * self.precision.ulps(self.graph.instructions[node].op), absolute, run)

    _sin = _cos = _bounded_slope

    def _function(self, node, a, carry):
        """A function beside a singularity: `carry(units, e)` bounds what the argument's error, e in size, becomes."""
        graph, op = self.graph, self.graph.instructions[node].op
        units = self._units(a)
        error = Error(2.0 * self.precision.ulps(op), self._underflow(node))
        if graph.literal(units) == 0:
            return error
        distance = graph.max_(graph.mul(self.unit, units), self.tiniest)
        return replace(error, running=carry(units, distance))

    def _arc(self, node, a):
        """Beside 1 these are like square roots: |f(a) - f(b)| <= 2*e/sqrt(max(|1 - a^2|, e)) for |a - b| <= e."""
        graph = self.graph
        left = graph.abs_(graph.mul(graph.sub(1, a), graph.add(1, a)))
        return self._function(node, a, lambda units, e: graph.div(graph.mul(2, units), graph.sqrt(graph.max_(left, e))))

    _asin = _acos = _acosh = _arc

    def _cbrt(self, node, a):
        """|cbrt(a) - cbrt(b)| <= 2^(2/3)*e/max(|a|, e)^(2/3) for |a - b| <= e."""
        graph, error = self.graph, self.error(a)
        units = self._total(Error(0.0, error.absolute, error.running), a)
        running = None
        if graph.literal(units) != 0:
            distance = graph.max_(graph.mul(self.unit, units), self.tiniest)
            root = graph.cbrt(graph.max_(graph.abs_(a), distance))
            running = graph.div(self._scaled(1.588, units), graph.mul(root, root))
        return Error(error.relative / 3.0 + 2.0 * self.precision.ulps("cbrt"), 0.0, running)

    def _log1p(self, node, a):
        graph = self.graph
        return self._function(node, a, lambda units, e: graph.div(units, graph.max_(
            graph.sub(graph.add(1, a), e), self.tiniest)))

    def _atanh(self, node, a):
        graph = self.graph
        left = graph.mul(graph.sub(1, a), graph.add(1, a))
        return self._function(node, a, lambda units, e: graph.div(units, graph.max_(
            graph.sub(left, graph.mul(2, e)), self.tiniest)))

    def _tan(self, node, a):
        """tan(a + e) - tan(a) = tan(e)*(1 + tan(a)^2)/(1 - tan(a)*tan(e))."""
        graph = self.graph

        def carry(units, e):
            left = graph.max_(graph.sub(1, graph.mul(graph.abs_(node), e)), self.tiniest)
            return graph.div(graph.mul(units, graph.add(1, graph.mul(node, node))), left)

        return self._function(node, a, carry)

    def _hypot(self, node, a, b):
        """No longer than the errors of both arguments; and as relative as they are."""
        one, other = self.error(a), self.error(b)
        parts = [self._total(Error(0.0, error.absolute, error.running), arg) for error, arg in ((one, a), (other, b))]
        running = self._sum(*(part for part in parts if self.graph.literal(part) != 0))
        return Error(max(one.relative, other.relative) + 2.0 * self.precision.ulps("hypot"), self._underflow(node), running)

    def _atan2(self, node, a, b):
        """The error across the radius, over what is left of it."""
        graph = self.graph
        units = [self._units(a), self._units(b)]
        running = None
        if any(graph.literal(part) != 0 for part in units):
            error = graph.max_(graph.mul(self.unit, graph.add(*units)), self.tiniest)
            radius = graph.max_(graph.hypot(a, b), error)
            levers = [graph.div(graph.max_(graph.abs_(side), error), radius) for side in (b, a)]
            across = graph.add(graph.mul(levers[0], units[0]), graph.mul(levers[1], units[1]))
            running = graph.div(across, graph.max_(graph.sub(radius, error), self.tiniest))
        return Error(2.0 * self.precision.ulps("atan2"), self._underflow(node), running)

    def _coarse(self, units):
        """True where an error may be as large as 2^-10 somewhere in the operating range: not small beside 1."""
        return largest(self.magnitudes.of(units)) > self.coarse

    def _general(self, node, instruction):
        """Any other function, all of one argument: its error times the steepest slope within that error."""
        graph, operation = self.graph, OPERATIONS[instruction.op]
        (a,) = instruction.args
        units = self._units(a)
        if graph.literal(units) == 0:
            return Error(2.0 * self.precision.ulps(instruction.op), self._underflow(node))
        steepest, there = a, node
        if self._coarse(units):
            steepest = _STEEPEST[instruction.op](graph, a, graph.mul(self.unit, units))
            there = graph.apply(instruction.op, steepest)
        (slope,) = operation.pullback(graph, graph.number(1), (steepest,), there)
        return Error(2.0 * self.precision.ulps(instruction.op), self._underflow(node), graph.mul(graph.abs_(slope), units))


def _inward(graph, a, error):
    return graph.max_(graph.sub(graph.abs_(a), error), graph.number(0))


def _outward(graph, a, error):
    return graph.add(graph.abs_(a), error)


# Where within `error` of the argument a function is steepest.
_STEEPEST = {
    "tanh": _inward, "erf": _inward, "atan": _inward, "asinh": _inward, "sinh": _outward, "cosh": _outward,
    "expm1": lambda graph, a, error: graph.add(a, error), "erfc": _inward,
}
