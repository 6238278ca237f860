"""A small operation tape: reverse-mode derivatives of whatever was computed with its numbers.

A tape does not know what a root is. It follows every operation of a solver's loop, and its derivative is that of the
steps taken. It is here to be compared with.
"""

import math
from array import array


class Tape:
    """The operations recorded: for each, the places of its operands (-1: none) and its derivatives by them."""

    def __init__(self):
        self.clear()

    def clear(self):
        self.left, self.right = array("i"), array("i")
        self.by_left, self.by_right = array("d"), array("d")

    def __len__(self):
        return len(self.left)

    @property
    def size(self):
        """Bytes of the recorded operations: 24 each, as compact as this kind of tape gets."""
        return sum(len(part)*part.itemsize for part in (self.left, self.right, self.by_left, self.by_right))

    def number(self, value):
        """A new independent number."""
        return self.push(value, -1, 0.0, -1, 0.0)

    def push(self, value, left, by_left, right, by_right):
        self.left.append(left)
        self.by_left.append(by_left)
        self.right.append(right)
        self.by_right.append(by_right)
        return Taped(self, value, len(self.left) - 1)

    def gradient(self, result, numbers):
        """Derivatives of the result with respect to independent numbers, by one sweep backwards over the tape."""
        if not isinstance(result, Taped):
            return [0.0 for _ in numbers]
        bar = [0.0]*len(self.left)
        bar[result.place] = 1.0
        left, right, by_left, by_right = self.left, self.right, self.by_left, self.by_right
        for k in range(result.place, -1, -1):
            weight = bar[k]
            if weight != 0.0:
                if left[k] >= 0:
                    bar[left[k]] += weight*by_left[k]
                if right[k] >= 0:
                    bar[right[k]] += weight*by_right[k]
        return [bar[number.place] for number in numbers]


class Taped:
    """A number whose operations go onto its tape; it compares by value, and mixes with plain floats."""

    __slots__ = ("tape", "value", "place")

    def __init__(self, tape, value, place):
        self.tape = tape
        self.value = value
        self.place = place

    def __float__(self):
        return float(self.value)

    def _with(self, value, by_self, other, by_other):
        if isinstance(other, Taped):
            return self.tape.push(value, self.place, by_self, other.place, by_other)
        return self.tape.push(value, self.place, by_self, -1, 0.0)

    def __add__(self, other):
        return self._with(self.value + plain(other), 1.0, other, 1.0)

    __radd__ = __add__

    def __sub__(self, other):
        return self._with(self.value - plain(other), 1.0, other, -1.0)

    def __rsub__(self, other):
        return self._with(other - self.value, -1.0, other, 1.0)

    def __mul__(self, other):
        factor = plain(other)
        return self._with(self.value*factor, factor, other, self.value)

    __rmul__ = __mul__

    def __truediv__(self, other):
        divisor = plain(other)
        quotient = self.value/divisor
        return self._with(quotient, 1.0/divisor, other, -quotient/divisor)

    def __rtruediv__(self, other):
        quotient = other/self.value
        return self._with(quotient, -quotient/self.value, other, 0.0)

    def __neg__(self):
        return self._with(-self.value, -1.0, None, 0.0)

    def __abs__(self):
        return self._with(abs(self.value), math.copysign(1.0, self.value), None, 0.0)

    def __lt__(self, other):
        return self.value < plain(other)

    def __le__(self, other):
        return self.value <= plain(other)

    def __gt__(self, other):
        return self.value > plain(other)

    def __ge__(self, other):
        return self.value >= plain(other)

    def __eq__(self, other):
        return self.value == plain(other)

    __hash__ = None


def plain(value):
    return value.value if isinstance(value, Taped) else value


class TapedMath:
    """Stands in for the module `math`. Functions that only decide or scale (isfinite, ldexp's exponent) see values."""

    # Derivative of each smooth function of one argument, from the argument x and the result y.
    _SMOOTH = {
        "sqrt": lambda x, y: 0.5/y,
        "exp": lambda x, y: y,
        "expm1": lambda x, y: y + 1.0,
        "log": lambda x, y: 1.0/x,
        "log1p": lambda x, y: 1.0/(1.0 + x),
        "log10": lambda x, y: 1.0/(x*math.log(10.0)),
        "log2": lambda x, y: 1.0/(x*math.log(2.0)),
        "sin": lambda x, y: math.cos(x),
        "cos": lambda x, y: -math.sin(x),
        "tan": lambda x, y: 1.0 + y*y,
        "atan": lambda x, y: 1.0/(1.0 + x*x),
        "sinh": lambda x, y: math.cosh(x),
        "cosh": lambda x, y: math.sinh(x),
        "tanh": lambda x, y: 1.0 - y*y,
        "fabs": lambda x, y: math.copysign(1.0, x),
    }

    def __getattr__(self, name):
        original = getattr(math, name)
        if name in self._SMOOTH:
            derivative = self._SMOOTH[name]

            def smooth(x):
                if not isinstance(x, Taped):
                    return original(x)
                y = original(x.value)
                return x.tape.push(y, x.place, derivative(x.value, y), -1, 0.0)
            kept = smooth
        elif callable(original):
            def kept(*arguments):
                return original(*map(plain, arguments))
        else:
            kept = original
        setattr(self, name, kept)       # asked for once
        return kept

    def copysign(self, x, sign):
        return x if math.copysign(1.0, plain(x)) == math.copysign(1.0, plain(sign)) else -x

    def ldexp(self, x, exponent):
        return x*math.ldexp(1.0, exponent)

    def pow(self, x, power):
        y = math.pow(plain(x), plain(power))
        if isinstance(x, Taped):
            by_power = y*math.log(x.value) if isinstance(power, Taped) and x.value > 0.0 else 0.0
            return x._with(y, plain(power)*math.pow(x.value, plain(power) - 1.0), power, by_power)
        return power._with(y, y*math.log(x), None, 0.0) if isinstance(power, Taped) else y


def follow(module):
    """Make an emitted Python module, loaded for this alone, carry taped numbers through its loop; returns it.

    The numbers that only tell when to stop, the bounds of rounding errors and whether a parameter is in range, are
    computed from values: a tape need not hold what no derivative passes through.
    """
    names = module.module.__dict__
    names["math"] = TapedMath()
    names["float"] = lambda value: value if isinstance(value, Taped) else float(value)
    for decides in ("_rounding", "_outside", "_kink"):
        if decides in names:
            names[decides] = _on_values(names[decides])
    return module


def _on_values(function):
    def decide(p, *arguments):
        return function([plain(value) for value in p], *map(plain, arguments))
    return decide
