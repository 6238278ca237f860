"""Arithmetic of Python floats for `evaluate`: what the emitted module computes, operation by operation."""

import math

from rootwright.runtime import arithmetic


class Doubles:
    """IEEE doubles; conditions are truth values."""

    def number(self, value):
        try:
            return float(value)
        except OverflowError:
            return math.inf if value > 0 else -math.inf

    def pi(self):
        return math.pi

    def nan(self):
        return math.nan

    def add(self, a, b):
        return a + b

    def sub(self, a, b):
        return a - b

    def mul(self, a, b):
        return a * b

    def neg(self, a):
        return -a

    def abs_(self, a):
        return abs(a)

    def where(self, condition, a, b):
        return a if condition else b

    def lt(self, a, b):
        return a < b

    def le(self, a, b):
        return a <= b

    def gt(self, a, b):
        return a > b

    def ge(self, a, b):
        return a >= b

    def and_(self, a, b):
        return a and b

    def or_(self, a, b):
        return a or b

    def not_(self, a):
        return not a

    def __getattr__(self, name):
        """The others are those of the emitted Python module, or of the math module as they are."""
        return getattr(arithmetic, "_" + name.rstrip("_"), None) or getattr(math, name)
