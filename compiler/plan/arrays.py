"""Arithmetic of many points at once for `evaluate`, with the same bits on every machine.

Sums, products, quotients and square roots are those of IEEE 754 wherever they are computed. Every other function goes
through the one that emitted Python modules call, point by point.
"""

import numpy as np

from rootwright.calculus.doubles import Doubles

_DOUBLES = Doubles()


class Arrays:
    """Values are float arrays of one length, or scalars; conditions are arrays of truth values."""

    def number(self, value):
        return np.float64(_DOUBLES.number(value))

    def pi(self):
        return np.float64(np.pi)

    def nan(self):
        return np.float64(np.nan)

    def add(self, a, b):
        return a + b

    def sub(self, a, b):
        return a - b

    def mul(self, a, b):
        return a * b

    def div(self, a, b):
        return np.divide(a, b)

    def neg(self, a):
        return -a

    def sqrt(self, a):
        return np.sqrt(a)

    def abs_(self, a):
        return np.abs(a)

    def where(self, condition, a, b):
        return np.where(condition, a, b)

    def lt(self, a, b):
        return np.less(a, b)

    def le(self, a, b):
        return np.less_equal(a, b)

    def gt(self, a, b):
        return np.greater(a, b)

    def ge(self, a, b):
        return np.greater_equal(a, b)

    def and_(self, a, b):
        return np.logical_and(a, b)

    def or_(self, a, b):
        return np.logical_or(a, b)

    def not_(self, a):
        return np.logical_not(a)

    def __getattr__(self, name):
        function = getattr(_DOUBLES, name)

        def apply(*args):
            if all(np.ndim(arg) == 0 for arg in args):
                return np.float64(function(*map(float, args)))
            columns = [column.tolist() for column in np.broadcast_arrays(*args)]
            return np.array([function(*row) for row in zip(*columns)], dtype=float)

        self.__dict__[name] = apply
        return apply
