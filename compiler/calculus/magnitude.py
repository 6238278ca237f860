"""How large every value of a Program can be over the operating range: interval arithmetic in plain floats.

Good to a few units in the last place, which is all its one use needs: deciding at compile time where underflow, or a small
divisor, can be left out of a rounding bound. It proves nothing.
"""

import math

from rootwright.calculus.program import evaluate

EVERYTHING = (-math.inf, math.inf)


class Magnitudes:
    """Magnitudes of the values of a graph; `inputs` maps names to (low, high)."""

    def __init__(self, graph, inputs):
        self.graph = graph
        self.inputs = inputs
        self.known = {}

    def of(self, node):
        """(low, high) of a value, worked out with all it depends on and kept."""
        if node not in self.known:
            evaluate(self.graph.instructions, [node], Intervals(), self.inputs, self.known)
        return self.known[node]


def smallest(interval):
    """The smallest absolute value in an interval."""
    low, high = interval
    return max(low, -high, 0.0)


def largest(interval):
    return max(-interval[0], interval[1])


def _hull(values):
    values = list(values)
    return EVERYTHING if any(math.isnan(v) for v in values) else (min(values), max(values))


def _apply(function, value, otherwise):
    try:
        return function(value)
    except (ValueError, OverflowError):
        return otherwise


def _increasing(function, below=-math.inf, above=math.inf):
    """A non-decreasing function; the limits hold outside its domain or where it overflows."""
    def image(self, a):
        return (_apply(function, a[0], below), _apply(function, a[1], above))
    return image


class Intervals:
    """Arithmetic of intervals (low, high) for `evaluate`."""

    def number(self, value):
        try:
            value = float(value)
        except OverflowError:
            return EVERYTHING
        return (value, value)

    def pi(self):
        return (math.pi, math.pi)

    def nan(self):
        return (math.inf, -math.inf)        # the empty interval: neutral in a hull

    def add(self, a, b):
        return _hull((a[0] + b[0], a[1] + b[1]))

    def sub(self, a, b):
        return _hull((a[0] - b[1], a[1] - b[0]))

    def mul(self, a, b):
        return _hull(x * y for x in a for y in b)

    def div(self, a, b):
        if b[0] <= 0.0 <= b[1]:
            return EVERYTHING
        return _hull(x / y for x in a for y in b)

    def neg(self, a):
        return (-a[1], -a[0])

    def abs_(self, a):
        return (smallest(a), largest(a))

    def sign(self, a):
        return (-1.0, 1.0)

    def pow_(self, a, b):
        if a[0] < 0.0:
            return EVERYTHING
        return self.exp(self.mul(b, self.log(a)))

    def min_(self, a, b):
        return (min(a[0], b[0]), min(a[1], b[1]))

    def max_(self, a, b):
        return (max(a[0], b[0]), max(a[1], b[1]))

    def where(self, condition, a, b):
        return (min(a[0], b[0]), max(a[1], b[1]))

    def hypot(self, a, b):
        return (math.hypot(smallest(a), smallest(b)), math.hypot(largest(a), largest(b)))

    def cosh(self, a):
        return tuple(_apply(math.cosh, v, math.inf) for v in self.abs_(a))

    def acos(self, a):
        return (0.0, math.pi)

    def erfc(self, a):
        return (math.erfc(a[1]), math.erfc(a[0]))

    def sin(self, a):
        return (-1.0, 1.0)

    cos = sin

    def tan(self, a):
        return EVERYTHING

    def atan2(self, a, b):
        return (-math.pi, math.pi)

    def _condition(self, *args):
        return None

    lt = le = gt = ge = ordered = and_ = or_ = not_ = _condition

    sqrt = _increasing(math.sqrt, below=0.0)
    cbrt = _increasing(math.cbrt)
    exp = _increasing(math.exp)
    expm1 = _increasing(math.expm1)
    log = _increasing(math.log)
    log10 = _increasing(math.log10)
    log2 = _increasing(math.log2)
    log1p = _increasing(math.log1p)
    asin = _increasing(math.asin, below=-math.pi / 2, above=math.pi / 2)
    atan = _increasing(math.atan)
    sinh = _increasing(math.sinh)
    tanh = _increasing(math.tanh)
    asinh = _increasing(math.asinh)
    acosh = _increasing(math.acosh, below=0.0)
    atanh = _increasing(math.atanh)
    erf = _increasing(math.erf)
