"""Rigorous arithmetic for `evaluate`: real balls (F. Johansson, Arb: efficient arbitrary-precision midpoint-radius interval arithmetic,
IEEE Trans. Comput. 66, 2017) through python-flint. Every result encloses the exact one; a domain error gives a ball without bounds (NaN)."""

from contextlib import contextmanager

import flint


@contextmanager
def precision(bits):
    """Work with this many bits inside the block."""
    before = flint.ctx.prec
    flint.ctx.prec = bits
    try:
        yield
    finally:
        flint.ctx.prec = before


def ball(value):
    """The ball of an exact number: int, Fraction or float."""
    numerator, denominator = value.as_integer_ratio()
    return flint.arb(flint.fmpq(numerator, denominator))


def hull(a, b):
    return a.union(b)


def _compare(test, opposite):
    """True or False where the balls decide it, None where they overlap or are not finite."""
    def comparison(self, a, b):
        if not (a.is_finite() and b.is_finite()):
            return None
        return True if getattr(a, test)(b) else False if getattr(a, opposite)(b) else None
    return comparison


def _function(name):
    def image(self, a):
        return getattr(a, name)()
    return image


class Balls:
    """Arithmetic of `flint.arb` values at the current precision. Conditions are True, False or None (undecided)."""

    def number(self, value):
        return ball(value)

    def pi(self):
        return flint.arb.pi()

    def nan(self):
        return flint.arb("nan")

    def add(self, a, b):
        return a + b

    def sub(self, a, b):
        return a - b

    def mul(self, a, b):
        return a * b

    def div(self, a, b):
        return a / b

    def neg(self, a):
        return -a

    def pow_(self, a, b):
        """Real powers; C's pow at a base of exactly 0."""
        if a.is_zero():
            return flint.arb(0) if b > 0 else flint.arb(1) if b.is_zero() else flint.arb("nan")
        return a ** b if a > 0 or b.is_integer() else flint.arb("nan")

    def abs_(self, a):
        return abs(a)

    def sign(self, a):
        if a.is_nan():
            return a
        return flint.arb(1) if a > 0 else flint.arb(-1) if a < 0 else flint.arb(0) if a.is_zero() else flint.arb(0, 1)

    def min_(self, a, b):
        return a.min(b)

    def max_(self, a, b):
        return a.max(b)

    def where(self, condition, a, b):
        return hull(a, b) if condition is None else a if condition else b

    def ordered(self, a, b):
        return True if a.is_finite() and b.is_finite() else None

    def and_(self, a, b):
        return False if a is False or b is False else None if a is None or b is None else True

    def or_(self, a, b):
        return True if a is True or b is True else None if a is None or b is None else False

    def not_(self, a):
        return None if a is None else not a

    def cbrt(self, a):
        return flint.arb(0) if a.is_zero() else a.root(3) if a > 0 else -((-a).root(3)) if a < 0 else flint.arb("nan")

    def log10(self, a):
        return a.log() / flint.arb(10).log()

    def log2(self, a):
        return a.log() / flint.arb(2).log()

    def atan2(self, a, b):
        return flint.arb("nan") if a.is_nan() or b.is_nan() else flint.arb.atan2(a, b)

    def hypot(self, a, b):
        return (a * a + b * b).sqrt()

    lt = _compare("__lt__", "__ge__")
    le = _compare("__le__", "__gt__")
    gt = _compare("__gt__", "__le__")
    ge = _compare("__ge__", "__lt__")
    sqrt = _function("sqrt")
    exp = _function("exp")
    expm1 = _function("expm1")
    log = _function("log")
    log1p = _function("log1p")
    sin = _function("sin")
    cos = _function("cos")
    tan = _function("tan")
    asin = _function("asin")
    acos = _function("acos")
    atan = _function("atan")
    sinh = _function("sinh")
    cosh = _function("cosh")
    tanh = _function("tanh")
    asinh = _function("asinh")
    acosh = _function("acosh")
    atanh = _function("atanh")
    erf = _function("erf")
    erfc = _function("erfc")
