"""Rigorous arithmetic for `evaluate`: real balls (F. Johansson, Arb: efficient arbitrary-precision midpoint-radius interval arithmetic,
IEEE Trans. Comput. 66, 2017) through python-flint. Every result encloses the exact one; a domain error gives a ball without bounds (NaN)."""

import operator
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


class Balls:
    """Arithmetic of `flint.arb` values at the current precision. Conditions are True, False or None (undecided)."""

    def number(self, value):
        return ball(value)

    def pi(self):
        return flint.arb.pi()

    def nan(self):
        return flint.arb("nan")

    def pow_(self, a, b):
        """Real powers; C's pow at a base of exactly 0."""
        if a.is_zero():
            return flint.arb(0) if b > 0 else flint.arb(1) if b.is_zero() else flint.arb("nan")
        return a ** b if a > 0 or b.is_integer() else flint.arb("nan")

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

    add = staticmethod(operator.add)         # these as they are: most of the time goes into calling them
    sub = staticmethod(operator.sub)
    mul = staticmethod(operator.mul)
    div = staticmethod(operator.truediv)
    neg = staticmethod(operator.neg)
    abs_ = staticmethod(abs)
    lt = _compare("__lt__", "__ge__")
    le = _compare("__le__", "__gt__")
    gt = _compare("__gt__", "__le__")
    ge = _compare("__ge__", "__lt__")
    sqrt = staticmethod(flint.arb.sqrt)
    exp = staticmethod(flint.arb.exp)
    expm1 = staticmethod(flint.arb.expm1)
    log = staticmethod(flint.arb.log)
    log1p = staticmethod(flint.arb.log1p)
    sin = staticmethod(flint.arb.sin)
    cos = staticmethod(flint.arb.cos)
    tan = staticmethod(flint.arb.tan)
    asin = staticmethod(flint.arb.asin)
    acos = staticmethod(flint.arb.acos)
    atan = staticmethod(flint.arb.atan)
    sinh = staticmethod(flint.arb.sinh)
    cosh = staticmethod(flint.arb.cosh)
    tanh = staticmethod(flint.arb.tanh)
    asinh = staticmethod(flint.arb.asinh)
    acosh = staticmethod(flint.arb.acosh)
    atanh = staticmethod(flint.arb.atanh)
    erf = staticmethod(flint.arb.erf)
    erfc = staticmethod(flint.arb.erfc)
