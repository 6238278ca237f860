"""Interval arithmetic for `evaluate`, whole arrays of boxes at a time (R. E. Moore, Interval Analysis, 1966).

Ends are doubles, rounded outward: IEEE arithmetic rounds correctly, so one step of `nextafter` from its result is a bound, and a sum whose
rounding error is zero (Knuth's two-sum) is left as it is. What a pair of ends cannot say is carried beside it as truth values:

    undefined   at some point of the box the expression may have no value (division by 0, log of 0, ...)
    jump        it may be discontinuous
    nonzero     it is not 0 even where an end is 0 (the half-open interval next to an open end)

The ends enclose the values at all points where there is one. An end may be infinite; the values are finite.
"""

import math

import flint
import numpy as np

from rootwright.calculus.balls import ball
from rootwright.proof.functions import FUNCTIONS, around, down, power, up


class Interval:
    """Arrays `low` and `high` of one shape; `undefined`, `jump` and `nonzero` are arrays, or False everywhere.

    `exact` is the rational number that it stands for, where it is one that the spec has.
    """

    __slots__ = ("low", "high", "undefined", "jump", "nonzero", "exact")

    def __init__(self, low, high, undefined=False, jump=False, nonzero=False, exact=None):
        self.low, self.high, self.undefined, self.jump, self.nonzero, self.exact = low, high, undefined, jump, nonzero, exact

    def flags(self, *others):
        """(undefined, jump) of a value made from this one and others."""
        undefined, jump = self.undefined, self.jump
        for other in others:
            undefined, jump = undefined | other.undefined, jump | other.jump
        return undefined, jump

    def apart(self):
        """True where 0 is certainly no value."""
        return self.nonzero | (self.low > 0.0) | (self.high < 0.0)


class Test:
    """A condition over boxes: where it may hold, and where it may fail."""

    __slots__ = ("yes", "no")

    def __init__(self, yes, no):
        self.yes, self.no = yes, no


def _sum(a, b, step, infinite):
    """End of a sum: a + b, moved one step outward unless it is exact."""
    total = a + b
    part = total - a
    error = (a - (total - part)) + (b - part)
    moved = step(total)
    outward = (error < 0.0) if infinite < 0.0 else (error > 0.0)
    total = np.where(outward | ~np.isfinite(error), moved, total)
    return np.where(np.isnan(total), infinite, total)


class Intervals:
    """Arithmetic of `Interval` values. `parameters` of a power function are kept, so that its table serves every wave."""

    def __init__(self):
        self.powers = {}

    # -- leaves

    def number(self, value):
        low, high = around(value)
        return Interval(np.array([low]), np.array([high]), exact=value)

    def pi(self):
        return Interval(np.array([float(down(math.pi))]), np.array([float(up(math.pi))]))

    def nan(self):
        """Nothing: a value that is never defined, neutral in a hull."""
        return Interval(np.array([np.inf]), np.array([-np.inf]), np.array([True]))

    # -- arithmetic

    def add(self, a, b):
        nonzero = False
        if a.nonzero is not False or b.nonzero is not False:
            nonzero = (((a.low >= 0.0) & (b.low >= 0.0)) | ((a.high <= 0.0) & (b.high <= 0.0))) & (a.apart() | b.apart())
        return Interval(_sum(a.low, b.low, down, -np.inf), _sum(a.high, b.high, up, np.inf), *a.flags(b), nonzero)

    def sub(self, a, b):
        if a is b:
            return self._exactly(a, 0.0)
        return self.add(a, self.neg(b))

    def neg(self, a):
        return Interval(-a.high, -a.low, a.undefined, a.jump, a.nonzero)

    def _exactly(self, a, value):
        """The same value wherever `a` has one."""
        return Interval(np.full_like(a.low, value), np.full_like(a.low, value), a.undefined, a.jump)

    def mul(self, a, b):
        if a is b:
            return self._square(a)
        side, other = _side(a), _side(b)
        low, high = self._outward(*_products(a, b, side, other), a, b)
        if side and other:              # the sign of the product is known, and it is 0 where the smaller ends say so
            nothing = ((a.high if side > 0 else a.low) == 0.0) | ((b.high if other > 0 else b.low) == 0.0)
            low, high = (np.maximum(low, 0.0), high) if side == other else (low, np.minimum(high, 0.0))
        else:
            positive = (a.low >= 0.0) & (b.low >= 0.0) | (a.high <= 0.0) & (b.high <= 0.0)
            negative = (a.low >= 0.0) & (b.high <= 0.0) | (a.high <= 0.0) & (b.low >= 0.0)
            nothing = (a.low == 0.0) & (a.high == 0.0) | (b.low == 0.0) & (b.high == 0.0)
            low, high = np.where(positive, np.maximum(low, 0.0), low), np.where(negative, np.minimum(high, 0.0), high)
        low, high = np.where(nothing, 0.0, low), np.where(nothing, 0.0, high)
        nonzero = False if a.nonzero is False and b.nonzero is False else a.apart() & b.apart()
        return Interval(low, high, *a.flags(b), nonzero)

    def _outward(self, low, high, a, b):
        """Products move outward, but for exact ones: of two short factors (24 bits), or by a power of two far from underflow."""
        for factor in (a, b):
            if factor.low.size == 1 and factor.low.flat[0] == factor.high.flat[0] and abs(math.frexp(factor.low.flat[0])[0]) == 0.5:
                exact_low, exact_high = (np.isfinite(end) & (np.abs(end) > 1e-290) for end in (low, high))
                return np.where(exact_low, low, down(low)), np.where(exact_high, high, up(high))
        exact = _short(a.low) & _short(a.high) & _short(b.low) & _short(b.high)
        if not exact.any():
            return down(low), up(high)
        return np.where(exact, low, down(low)), np.where(exact, high, up(high))

    def _square(self, a):
        small, large = _magnitudes(a)
        low = np.where(_short(small), small * small, np.maximum(down(small * small), 0.0))
        high = np.where(_short(large), large * large, up(large * large))
        return Interval(np.minimum(low, high), high, a.undefined, a.jump, a.apart())

    def _reciprocal(self, b):
        """1/b. Where b may be 0 the quotient may be undefined; if b has one sign otherwise, so has the quotient."""
        with np.errstate(divide="ignore"):
            low, high = down(1.0 / b.high), up(1.0 / b.low)
        unit = np.abs(b.high) == 1.0
        low = np.where(unit, b.high, low)
        high = np.where(np.abs(b.low) == 1.0, b.low, high)
        above, below = (b.low == 0.0) & (b.high > 0.0), (b.high == 0.0) & (b.low < 0.0)
        across = (b.low < 0.0) & (b.high > 0.0) | (b.low == 0.0) & (b.high == 0.0)
        low = np.where(below | across, -np.inf, low)
        high = np.where(above | across, np.inf, high)
        low = np.where((b.low >= 0.0) & ~across, np.maximum(low, 0.0), low)
        high = np.where((b.high <= 0.0) & ~across, np.minimum(high, 0.0), high)
        apart = b.apart()
        plain = bool(np.all(apart & (low != 0.0) & (high != 0.0)))      # then the ends say that it is not 0
        return Interval(low, high, b.undefined | ~apart, b.jump, not plain)

    def div(self, a, b):
        if a is b:
            value = self._exactly(a, 1.0)
            value.undefined = value.undefined | ~b.apart()
            return value
        return self.mul(a, self._reciprocal(b))

    def pow_(self, a, b):
        """Real powers of a base that is not negative; `Graph.power` has made products of small integer exponents."""
        if b.low.size == 1 and (b.low[0] > 0.0 or b.high[0] < 0.0):
            return self._constant_power(a, b)
        exponent_is_positive = b.low > 0.0
        value = self.exp(self.mul(b, self.log(a)))
        at_zero = (a.low <= 0.0) & (a.high >= 0.0)
        low = np.where(at_zero & exponent_is_positive, 0.0, value.low)
        undefined = (a.low < 0.0) | (a.low <= 0.0) & ~a.apart() & ~exponent_is_positive
        return Interval(low, value.high, undefined | a.undefined | b.undefined, a.jump | b.jump, a.apart())

    def _constant_power(self, a, b):
        key = (float(b.low[0]), float(b.high[0]), b.exact)
        if key not in self.powers:
            self.powers[key] = power((lambda: ball(b.exact)) if b.exact is not None else lambda: flint.arb(key[0]).union(flint.arb(key[1])))
        function, positive = self.powers[key], key[0] > 0.0
        low, high = np.maximum(a.low, 0.0), np.maximum(a.high, 0.0)
        at_low, at_high = (_power_at(function, point, positive) for point in (low, high))
        first, last = (at_low, at_high) if positive else (at_high, at_low)
        undefined = (a.low < 0.0) | (False if positive else ~a.apart())
        jump = a.jump
        return Interval(first[0], last[1], a.undefined | undefined, jump, a.apart())

    # -- choice

    def abs_(self, a):
        low, high = _magnitudes(a)
        return Interval(low, high, a.undefined, a.jump, a.nonzero)

    def sign(self, a):
        apart = a.apart()
        low = np.where((a.low > 0.0) | (a.low >= 0.0) & apart, 1.0, np.where((a.low == 0.0), 0.0, -1.0))
        high = np.where((a.high < 0.0) | (a.high <= 0.0) & apart, -1.0, np.where((a.high == 0.0), 0.0, 1.0))
        return Interval(low, high, a.undefined, a.jump | (low != high))

    def min_(self, a, b):
        return Interval(np.minimum(a.low, b.low), np.minimum(a.high, b.high), *a.flags(b))

    def max_(self, a, b):
        return Interval(np.maximum(a.low, b.low), np.maximum(a.high, b.high), *a.flags(b))

    def where(self, test, a, b):
        yes, no = test.yes, test.no
        low = np.minimum(np.where(yes, a.low, np.inf), np.where(no, b.low, np.inf))
        high = np.maximum(np.where(yes, a.high, -np.inf), np.where(no, b.high, -np.inf))
        empty = low > high
        jump = yes & a.jump | no & b.jump
        if not _is_nothing(b):
            jump = jump | yes & no
        nonzero = (~yes | a.apart()) & (~no | b.apart())
        return Interval(np.where(empty, -np.inf, low), np.where(empty, np.inf, high), yes & a.undefined | no & b.undefined | empty,
                        jump, nonzero)

    def lt(self, a, b):
        return Test(a.low < b.high, a.high >= b.low)

    def le(self, a, b):
        return Test(a.low <= b.high, a.high > b.low)

    def gt(self, a, b):
        return self.lt(b, a)

    def ge(self, a, b):
        return self.le(b, a)

    def ordered(self, a, b):
        undefined = a.undefined | b.undefined
        return Test(np.ones_like(a.low + b.low, bool), undefined & np.ones_like(a.low + b.low, bool))

    def and_(self, a, b):
        return Test(a.yes & b.yes, a.no | b.no)

    def or_(self, a, b):
        return Test(a.yes | b.yes, a.no & b.no)

    def not_(self, a):
        return Test(a.no, a.yes)

    # -- functions

    def sqrt(self, a):
        low, high = np.maximum(a.low, 0.0), np.maximum(a.high, 0.0)
        first = np.where((low == 0.0) | (low == 1.0), low, down(np.sqrt(low)))
        last = np.where((high == 0.0) | (high == 1.0), high, up(np.sqrt(high)))
        return Interval(first, last, a.undefined | (a.low < 0.0), a.jump, a.nonzero)

    def hypot(self, a, b):
        return self.sqrt(self.add(self._square(a), self._square(b)))

    def _logarithm(self, name, a, pole):
        """A function that rises from -inf at its pole."""
        shifted = a.low > pole
        low, high = np.maximum(a.low, pole), np.maximum(a.high, pole)
        first, last = _pair(FUNCTIONS[name], np.where(low > pole, low, 1.0), np.where(high > pole, high, 1.0))
        open_pole = (a.low == pole) & a.nonzero if pole == 0.0 else False
        return Interval(np.where(low > pole, first, -np.inf), np.where(high > pole, last, np.inf),
                        a.undefined | ~(shifted | open_pole), a.jump, False if pole == 0.0 else a.nonzero)

    def log(self, a):
        return self._logarithm("log", a, 0.0)

    def log10(self, a):
        return self._logarithm("log10", a, 0.0)

    def log2(self, a):
        return self._logarithm("log2", a, 0.0)

    def log1p(self, a):
        return self._logarithm("log1p", a, -1.0)

    def _rising(self, name, a, below=-np.inf, above=np.inf):
        """A function that rises over its closed domain [below, above]."""
        low, high = np.clip(a.low, below, above), np.clip(a.high, below, above)
        first, last = _pair(FUNCTIONS[name], low, high)
        return Interval(first, last, a.undefined | (a.low < below) | (a.high > above), a.jump)

    def _through_zero(self, name, a, below=-np.inf, above=np.inf):
        """As `_rising`, 0 at 0 and nowhere else."""
        value = self._rising(name, a, below, above)
        value.low, value.high = np.where(a.low >= 0.0, np.maximum(value.low, 0.0), value.low), \
            np.where(a.high <= 0.0, np.minimum(value.high, 0.0), value.high)
        value.nonzero = a.nonzero
        return value

    def exp(self, a):
        value = self._rising("exp", a)
        value.nonzero = np.array([True])        # also where it is smaller than any double
        return value

    def expm1(self, a):
        return self._through_zero("expm1", a)

    def sinh(self, a):
        return self._through_zero("sinh", a)

    def tanh(self, a):
        return self._through_zero("tanh", a)

    def asinh(self, a):
        return self._through_zero("asinh", a)

    def atan(self, a):
        return self._through_zero("atan", a)

    def erf(self, a):
        return self._through_zero("erf", a)

    def cbrt(self, a):
        return self._through_zero("cbrt", a)

    def asin(self, a):
        return self._through_zero("asin", a, -1.0, 1.0)

    def acosh(self, a):
        return self._rising("acosh", a, 1.0)

    def atanh(self, a):
        value = self._through_zero("atanh", a, -1.0, 1.0)
        low, high = np.where(a.low <= -1.0, -np.inf, value.low), np.where(a.high >= 1.0, np.inf, value.high)
        return Interval(low, high, value.undefined | (a.low <= -1.0) | (a.high >= 1.0), a.jump, a.nonzero)

    def _falling(self, name, a, below=-np.inf, above=np.inf):
        low, high = np.clip(a.low, below, above), np.clip(a.high, below, above)
        at_low, at_high = FUNCTIONS[name].image(low), FUNCTIONS[name].image(high)
        return Interval(at_high[0], at_low[1], a.undefined | (a.low < below) | (a.high > above), a.jump)

    def acos(self, a):
        return self._falling("acos", a, -1.0, 1.0)

    def erfc(self, a):
        return self._falling("erfc", a)

    def cosh(self, a):
        small, large = _magnitudes(a)
        first, last = _pair(FUNCTIONS["cosh"], small, large)
        return Interval(first, last, a.undefined, a.jump)

    def _wave(self, name, a, top, bottom):
        """sine or cosine: the ends, and 1 or -1 where a top or bottom may lie between them."""
        with np.errstate(invalid="ignore"):
            at = FUNCTIONS[name].image(a.low), FUNCTIONS[name].image(a.high)
            low, high = np.minimum(at[0][0], at[1][0]), np.maximum(at[0][1], at[1][1])
            low = np.where(_meets(a, bottom, 2.0 * math.pi), -1.0, np.maximum(low, -1.0))
            high = np.where(_meets(a, top, 2.0 * math.pi), 1.0, np.minimum(high, 1.0))
        return Interval(low, high, a.undefined, a.jump)

    def sin(self, a):
        value = self._wave("sin", a, 0.5 * math.pi, -0.5 * math.pi)
        value.nonzero = a.nonzero & (a.low > -3.0) & (a.high < 3.0)
        positive, negative = (a.low >= 0.0) & (a.high < 3.0), (a.high <= 0.0) & (a.low > -3.0)
        value.low = np.where(positive, np.maximum(value.low, 0.0), value.low)
        value.high = np.where(negative, np.minimum(value.high, 0.0), value.high)
        return value

    def cos(self, a):
        return self._wave("cos", a, 0.0, math.pi)

    def tan(self, a):
        with np.errstate(invalid="ignore"):
            pole = _meets(a, 0.5 * math.pi, math.pi)
            first, last = _pair(FUNCTIONS["tan"], np.where(pole, 0.0, a.low), np.where(pole, 0.0, a.high))
        nonzero = a.nonzero & (a.low > -1.5) & (a.high < 1.5) | ~_meets(a, 0.0, math.pi)
        return Interval(np.where(pole, -np.inf, first), np.where(pole, np.inf, last), a.undefined | pole, a.jump, nonzero)

    def atan2(self, y, x):
        """Angle of the point (x, y); it jumps across the negative x axis and has no value at the origin."""
        right = self.atan(self.div(y, x))
        quarter = Interval(np.array([float(down(0.5 * math.pi))]), np.array([float(up(0.5 * math.pi))]))
        turned = self.atan(self.div(x, y))
        above, below = self.sub(quarter, turned), self.sub(self.neg(quarter), turned)
        low, high = np.full_like(right.low, -float(up(math.pi))), np.full_like(right.low, float(up(math.pi)))
        jump = np.ones_like(right.low, bool)
        for where, value in ((y.high < 0.0, below), (y.low > 0.0, above), (x.low > 0.0, right)):
            low, high, jump = np.where(where, value.low, low), np.where(where, value.high, high), jump & ~where
        origin = (x.low <= 0.0) & (x.high >= 0.0) & (y.low <= 0.0) & (y.high >= 0.0)
        undefined, before = y.flags(x)
        return Interval(low, high, undefined | origin, before | jump)


def _short(value):
    """True where a double has no more than 24 bits and a moderate size, so that products of two are exact."""
    return value == value.astype(np.float32)


def _side(a):
    """1 where no interval goes below 0, -1 where none goes above, else 0."""
    return 1 if a.low.min(initial=0.0) >= 0.0 else -1 if a.high.max(initial=0.0) <= 0.0 else 0


def _products(a, b, side, other):
    """Smallest and largest product of the ends, by their signs; 0 times infinity is 0."""
    if side and other:
        low = (a.low if other > 0 else a.high) * (b.low if side > 0 else b.high)
        high = (a.high if other > 0 else a.low) * (b.high if side > 0 else b.low)
        return np.where(np.isnan(low), 0.0, low), np.where(np.isnan(high), 0.0, high)
    if other:
        a, b, side = b, a, other
    if side:
        first, last = (b.low, b.high) if side > 0 else (b.high, b.low)
        ends = [a.low * first, a.high * first, a.low * last, a.high * last]
        ends = [np.where(np.isnan(end), 0.0, end) for end in ends]
        return np.minimum(ends[0], ends[1]), np.maximum(ends[2], ends[3])
    ends = [np.where(np.isnan(end), 0.0, end) for end in (a.low * b.low, a.low * b.high, a.high * b.low, a.high * b.high)]
    return np.minimum(np.minimum(ends[0], ends[1]), np.minimum(ends[2], ends[3])), \
        np.maximum(np.maximum(ends[0], ends[1]), np.maximum(ends[2], ends[3]))


def _magnitudes(a):
    """Arrays of the smallest and the largest absolute value."""
    return np.maximum(np.maximum(a.low, -a.high), 0.0), np.maximum(-a.low, a.high)


def _pair(function, low, high):
    """Lower bound at `low` and upper bound at `high` of a rising function; infinite at infinity unless it is bounded."""
    return function.image(low)[0], function.image(high)[1]


def _power_at(function, point, positive):
    """Enclosure (low, high) of the power at points from 0 to inf."""
    inner = np.where((point > 0.0) & np.isfinite(point), point, 1.0)
    low, high = function.image(inner)
    at_zero, at_infinity = (0.0, np.inf) if positive else (np.inf, 0.0)
    low, high = np.where(point == 0.0, at_zero, low), np.where(point == 0.0, at_zero, high)
    return np.where(np.isinf(point), at_infinity, low), np.where(np.isinf(point), at_infinity, high)


def _meets(a, point, period):
    """True where point + k*period may lie in the interval, for some whole k; generous by far more than the rounding of this very line."""
    margin = 1e-12 * (1.0 + np.maximum(np.abs(a.low), np.abs(a.high)))
    first = np.ceil((a.low - margin - point) / period)
    return ~(first * period + point > a.high + margin)


def _is_nothing(a):
    return a.low.size == 1 and a.low[0] > a.high[0]
