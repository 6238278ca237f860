"""Elementary functions of whole arrays of doubles, each value enclosed rigorously.

Every function is tabulated on demand: around the middle x0 of a cell its Taylor polynomial has coefficients from ball arithmetic
(F. Johansson, Arb, IEEE Trans. Comput. 66, 2017), and so has the remainder over the cell (Tucker, Validated Numerics, 2011,
chapter 4). What NumPy then does is a handful of multiplications and additions, whose rounding is bounded as in N. J. Higham, Accuracy
and Stability of Numerical Algorithms, 2nd ed. 2002, section 5.1. Where the remainder is no small change, near a
singularity or far out, the value itself comes from ball arithmetic.
"""

import math
import sys
from fractions import Fraction

import flint
import numpy as np

from rootwright.calculus.balls import precision

TERMS = 10                      # terms of a Taylor polynomial
_BITS = 128                     # working precision of the balls
_UNIT = 2.0 ** -53
_SHARP = 2.0 ** -40             # an enclosure wider than this, relative to the value, is replaced by a direct one
_ROUNDING = 2.0 ** -48          # above (2*TERMS + 5)*2^-53: Horner's rule, rounded coefficients and their radii
_TINY = 2.0 ** -1060            # covers every underflow in a polynomial


def down(value):
    return np.nextafter(value, -np.inf)


def up(value):
    return np.nextafter(value, np.inf)


def ends(ball):
    """(low, high) doubles around a ball; everything for a ball without bounds."""
    if not ball.is_finite():
        return -math.inf, math.inf
    middle, radius = float(ball.mid()), ball.rad()
    if radius == 0 and ball == flint.arb(middle):
        return middle, middle
    low, high = float(ball.lower()), float(ball.upper())
    return float(down(low)), float(up(high))


def around(value):
    """The doubles next to a Fraction: (low, high), the same one twice where it is a double."""
    try:
        near = float(value)
    except OverflowError:
        return (sys.float_info.max, math.inf) if value > 0 else (-math.inf, -sys.float_info.max)
    if Fraction(near) == value:
        return near, near
    return (near, float(up(near))) if Fraction(near) < value else (float(down(near)), near)


class Function:
    """One real function f of one variable. `image` maps an array of points to arrays (low, high) around the values.

    `ball` maps an `arb` or an `arb_series` to its image. Cells have the absolute width `grid`, or, where grid is None, cut every binade
    into 64. `exact` holds points with values that are doubles, `tails` (from, to, low, high) where the function is all but constant.
    """

    def __init__(self, ball, grid=None, exact=(), low=-math.inf, high=math.inf, tails=()):
        self.ball, self.grid, self.exact, self.low, self.high, self.tails = ball, grid, exact, low, high, tails
        self.rows = {}
        self.table = np.zeros((64, TERMS + 3))

    def image(self, x):
        x = np.asarray(x, float)
        low, high = np.full(x.shape, -np.inf), np.full(x.shape, np.inf)
        size = np.abs(x)
        within = size < 2000.0 if self.grid is not None else (size > 1e-25) & (size < 1e25)
        inside = np.where(within, x, 1.0)
        keys, inverse = np.unique(self._keys(inside), return_inverse=True)
        rows = self.table_rows(keys)[inverse.reshape(x.shape)]
        row = self.table[rows]
        r = inside - row[..., TERMS + 2]
        value = row[..., TERMS - 1]
        for k in range(TERMS - 2, -1, -1):
            value = value * r + row[..., k]
        size = np.abs(r)
        error = 4.0 * _UNIT * (np.abs(value) + np.abs(row[..., 0])) + _ROUNDING * size * row[..., TERMS + 1] \
            + row[..., TERMS] * (size ** TERMS * (1.0 + _SHARP)) + _TINY
        polynomial = within & (row[..., TERMS] >= 0.0) & (error <= _SHARP * np.abs(value) + _TINY)
        low = np.where(polynomial, down(value - error), low)
        high = np.where(polynomial, up(value + error), high)
        rest = ~polynomial & np.isfinite(x)
        for start, stop, bottom, top in self.tails:
            tail = (x >= start) & (x <= stop)
            low, high, rest = np.where(tail, bottom, low), np.where(tail, top, high), rest & ~tail
        left, places = np.unique(x[rest], return_inverse=True)
        if left.size:
            values = np.array([self.direct(float(point)) for point in left])[places.ravel()]
            low[rest], high[rest] = values[:, 0], values[:, 1]
        for point, at in self.exact:
            low, high = np.where(x == point, at, low), np.where(x == point, at, high)
        return np.maximum(low, self.low), np.minimum(high, self.high)

    def direct(self, x):
        with precision(_BITS):
            return ends(self.ball(flint.arb(x)))

    def _keys(self, x):
        if self.grid is not None:
            return np.rint(x / self.grid).astype(np.int64)
        return x.view(np.int64) >> 46

    def table_rows(self, keys):
        """Index of each key's row of the table; new rows are worked out."""
        fresh = [key for key in keys.tolist() if key not in self.rows]
        for key in fresh:
            if len(self.rows) == len(self.table):
                self.table = np.concatenate([self.table, np.zeros_like(self.table)])
            self.table[len(self.rows)] = self._row(key)
            self.rows[key] = len(self.rows)
        return np.array([self.rows[key] for key in keys.tolist()], dtype=np.intp)

    def _row(self, key):
        """Coefficients, remainder's coefficient (-1: no polynomial here), sum of |c_k| r^(k-1) for k > 0, and the middle."""
        if self.grid is not None:
            middle, radius = key * self.grid, 0.5 * self.grid * (1.0 + 2.0 ** -40)
        else:
            low, high = (np.int64(bits).view(np.float64) for bits in (key << 46, (key << 46) + (1 << 46) - 1))
            middle = float(np.int64((key << 46) + (1 << 45)).view(np.float64))
            radius = float(up(max(abs(high - middle), abs(low - middle))))
        with precision(_BITS):
            flint.ctx.cap = TERMS + 1
            try:
                at = [self.ball(flint.arb_series([start, 1], prec=TERMS + 1))
                      for start in (flint.arb(middle), flint.arb(middle, radius))]
            finally:
                flint.ctx.cap = 10
            coefficients = [ends(at[0][k]) for k in range(TERMS)]
            remainder = ends(at[1][TERMS])
        values = [0.5 * (a + b) for a, b in coefficients]
        slope = sum(abs(c) * radius ** (k - 1) for k, c in enumerate(values) if k) * (1.0 + _SHARP)
        blur = sum((b - a) * radius ** (k - 1) for k, (a, b) in enumerate(coefficients) if k)
        rest = max(abs(remainder[0]), abs(remainder[1]))
        sharp = math.isfinite(slope) and math.isfinite(rest) and math.isfinite(values[0]) and blur <= 8.0 * _UNIT * slope \
            and coefficients[0][1] - coefficients[0][0] <= 6.0 * _UNIT * abs(values[0])
        return [*values, rest, slope, middle] if sharp else [0.0] * TERMS + [-1.0, 0.0, middle]


def _method(name):
    return lambda x: getattr(x, name)()


def _scaled_log(base):
    return lambda x: x.log() / flint.arb(base).log()


def _cbrt(x):
    if isinstance(x, flint.arb_series):
        return (x.log() / 3).exp()
    return flint.arb(0) if x.is_zero() else x.root(3) if x > 0 else -((-x).root(3))


def power(exponent):
    """The function x -> x^exponent, x > 0, of a real exponent given as a ball at any precision (a callable without arguments)."""
    def ball(x):
        if isinstance(x, flint.arb_series):
            return (x.log() * exponent()).exp()
        return x ** exponent()
    return Function(ball, exact=((1.0, 1.0),), low=0.0)


_HALF_TURN = float(up(math.pi / 2))
FUNCTIONS = {
    "exp": Function(_method("exp"), 2.0 ** -6, ((0.0, 1.0),), low=0.0, tails=((-1e300, -746.0, 0.0, 5e-324),)),
    "expm1": Function(_method("expm1") if hasattr(flint.arb_series, "expm1") else
                      (lambda x: x.exp() - 1 if isinstance(x, flint.arb_series) else x.expm1()), 2.0 ** -6, ((0.0, 0.0),), low=-1.0),
    "log": Function(_method("log"), None, ((1.0, 0.0),)),
    "log10": Function(_scaled_log(10), None, ((1.0, 0.0),)),
    "log2": Function(_scaled_log(2), None, ((1.0, 0.0),)),
    "log1p": Function(lambda x: (x + 1).log() if isinstance(x, flint.arb_series) else x.log1p(), None, ((0.0, 0.0),)),
    "sin": Function(_method("sin"), 2.0 ** -6, ((0.0, 0.0),), -1.0, 1.0),
    "cos": Function(_method("cos"), 2.0 ** -6, ((0.0, 1.0),), -1.0, 1.0),
    "tan": Function(_method("tan"), 2.0 ** -6, ((0.0, 0.0),)),
    "asin": Function(_method("asin"), None, ((0.0, 0.0),), -_HALF_TURN, _HALF_TURN),
    "acos": Function(_method("acos"), None, ((1.0, 0.0),), 0.0),
    "atan": Function(_method("atan"), None, ((0.0, 0.0),), -_HALF_TURN, _HALF_TURN),
    "sinh": Function(lambda x: (x.exp() - (-x).exp()) / 2 if isinstance(x, flint.arb_series) else x.sinh(), 2.0 ** -6, ((0.0, 0.0),)),
    "cosh": Function(lambda x: (x.exp() + (-x).exp()) / 2 if isinstance(x, flint.arb_series) else x.cosh(), 2.0 ** -6, ((0.0, 1.0),),
                     low=1.0),
    "tanh": Function(lambda x: 1 - 2 / ((2 * x).exp() + 1) if isinstance(x, flint.arb_series) else x.tanh(), 2.0 ** -6, ((0.0, 0.0),),
                     -1.0, 1.0),
    "asinh": Function(lambda x: (x + (x * x + 1).sqrt()).log() if isinstance(x, flint.arb_series) else x.asinh(), None, ((0.0, 0.0),)),
    "acosh": Function(lambda x: (x + (x * x - 1).sqrt()).log() if isinstance(x, flint.arb_series) else x.acosh(), None, ((1.0, 0.0),),
                      low=0.0),
    "atanh": Function(lambda x: ((1 + x).log() - (1 - x).log()) / 2 if isinstance(x, flint.arb_series) else x.atanh(), None, ((0.0, 0.0),)),
    "erf": Function(_method("erf"), 2.0 ** -6, ((0.0, 0.0),), -1.0, 1.0, ((6.0, 1e300, 1.0 - 2.0 ** -53, 1.0), (-1e300, -6.0, -1.0, 2.0 ** -53 - 1.0))),
    # erfc(x) < exp(-x^2)/(x*sqrt(pi)), and erfc(-x) = 2 - erfc(x).
    "erfc": Function(_method("erfc"), 2.0 ** -8, ((0.0, 1.0),), 0.0, 2.0, ((27.5, 1e300, 0.0, 5e-324), (-1e300, -6.0, 2.0 - 2.0 ** -52, 2.0))),
    "cbrt": Function(_cbrt, None, ((0.0, 0.0), (1.0, 1.0), (-1.0, -1.0))),
}
