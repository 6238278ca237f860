"""Values of constant instructions: the number of the graph's precision nearest to the exact value, and how far off it is."""

import math
from fractions import Fraction

import flint

from rootwright.calculus.balls import Balls, precision as working_precision
from rootwright.calculus.program import evaluate

_PRECISIONS = (160, 640, 2560)      # bits; the last also resolves the smallest subnormals
_OVERFLOW = flint.arb(2) ** 1025
_UNDERFLOW = flint.arb(2) ** -1080


class NotReal(ValueError):
    """A constant that is not a finite real number."""


def nearest(graph, node):
    """The number nearest to a constant instruction, as a float. Raises NotReal where it is undefined or overflows."""
    return _nearest(graph, node)[0]


def nearest_rounding(graph, node):
    """Relative distance of the nearest number from the exact constant, in units of 2^-digits, rounded up (0: exact)."""
    return _nearest(graph, node)[1]


def _nearest(graph, node):
    if node not in graph.constants:
        graph.constants[node] = _evaluate(graph, node)
    return graph.constants[node]


def _evaluate(graph, node):
    exact = graph.rational(node)
    if exact is not None:
        return _of_fraction(exact, graph.precision)
    for bits in _PRECISIONS:
        with working_precision(bits):
            value = evaluate(graph.instructions, [node], Balls(), {})[node]
            size = abs(value)
            if not value.is_finite() or size > _OVERFLOW:   # no Fraction of what may have a billion digits
                continue
            if size < _UNDERFLOW:
                return 0.0, 0.0 if value.is_zero() else math.inf
            if size.upper() > _OVERFLOW:
                continue
            low, high = (_fraction(end) for end in (value.lower(), value.upper()))
            try:
                if graph.precision.nearest(low) == graph.precision.nearest(high):
                    return _of_fraction((low + high) / 2, graph.precision)
            except OverflowError:
                continue
    raise NotReal


def _of_fraction(exact, precision):
    try:
        value = precision.nearest(exact)
    except OverflowError:
        raise NotReal from None
    if exact == 0 or value == 0.0:
        return value, 0.0 if exact == 0 else math.inf
    return value, float(abs(Fraction(value) - exact) / abs(Fraction(value)) * 2 ** precision.digits) * (1 + 2.0 ** -40)


def _fraction(point):
    """An exact arb (no radius) as a Fraction."""
    mantissa, exponent = point.mid().man_exp()
    return Fraction(int(mantissa)) * Fraction(2) ** int(exponent)
