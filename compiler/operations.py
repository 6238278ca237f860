"""The operation table: every operation of the language, one row each.

Each row says how many arguments the operation takes, where it is defined, how its adjoint flows back to its arguments,
how it is spelled in each target, how accurate the library function is, and what it costs. Parser, units, derivatives,
rounding bounds, interpreters and printers all read this table and hold no list of operations of their own.

A pullback `(g, adj, args, v) -> contributions` is the derivative rule: given the adjoint `adj` of the value `v`, it
returns what flows to each argument, written with the graph builder `g` (see `calculus/program.py`). None means nothing;
`Gated` means only where a condition holds, so that nothing of an argument that was not chosen is ever used.
"""

from dataclasses import dataclass
from typing import Callable


@dataclass(frozen=True, slots=True)
class Operation:
    kind: str                       # "infix" | "function" | "comparison" | "logic" | "choice"
    arity: tuple[int, int | None]   # fewest and most arguments; None: any number
    domain: str                     # where the value is real and finite, for the documentation
    c: str                          # spelling with {0}, {1} for the arguments
    python: str
    pullback: Callable | None       # derivative rule; None: piecewise constant
    ulps: float                     # accuracy of the operation in ulp, as stated in every emitted header
    cost: int                       # in multiplications, roughly


@dataclass(frozen=True, slots=True)
class Gated:
    """What flows to an argument while a condition holds, and only then."""
    part: int
    condition: int


def _where_positive(g, adj, args, v):
    """Adjoints of a**b with a variable exponent: b*a**(b-1), and a**b*log(a), which tends to 0 with a where b > 0."""
    a, b = args
    at_zero = g.where(g.gt(b, 0), g.number(0), g.nan())
    logarithm = g.where(g.or_(g.lt(a, 0), g.gt(a, 0)), g.mul(v, g.log(a)), at_zero)
    power = None if g.is_constant(a) else g.mul(adj, g.mul(b, g.pow(a, g.sub(b, 1))))
    return power, None if g.is_constant(b) else g.mul(adj, g.mul(v, g.log(a)) if g.is_constant(a) else logarithm)


def _hypotenuse(g, adj, args, v):
    scaled = g.div(adj, v)
    return tuple(g.mul(scaled, a) for a in args)


def _arctangent(g, adj, args, v):
    """x/r^2 and -y/r^2, with no square of r, which would leave the range of doubles long before the derivatives do."""
    y, x = args
    radius = g.hypot(y, x)
    scaled = g.div(adj, radius)
    return g.mul(scaled, g.div(x, radius)), g.neg(g.mul(scaled, g.div(y, radius)))


def _quotient(g, adj, args, v):
    scaled = g.div(adj, args[1])
    return scaled, g.neg(g.mul(scaled, v))


def _extreme(test):
    """Adjoint of min and max: all of it to the argument that was chosen."""
    def pullback(g, adj, args, v):
        first = getattr(g, test)(args[0], args[1])
        return Gated(adj, first), Gated(adj, g.not_(first))
    return pullback


def _choice(g, adj, args, v):
    condition = args[0]
    return None, Gated(adj, condition), Gated(adj, g.not_(condition))


def _hyperbolic_secant_squared(g, adj, args, v):
    """1/cosh(a)^2 as 4*e/(1 + e)^2 with e = exp(-2*abs(a)): no overflow, and no cancellation where tanh is close to 1."""
    decay = g.exp(g.mul(-2, g.abs_(args[0])))
    above = g.add(1, decay)
    return (g.mul(adj, g.div(g.mul(4, decay), g.mul(above, above))),)


def _one_minus_square(g, a):
    return g.mul(g.sub(1, a), g.add(1, a))


def _gauss(sign):
    """erf' = 2/sqrt(pi)*exp(-a^2)."""
    def pullback(g, adj, args, v):
        factor = g.div(g.number(2 * sign), g.sqrt(g.pi()))
        return (g.mul(adj, g.mul(factor, g.exp(g.neg(g.mul(args[0], args[0]))))),)
    return pullback


def _logarithm(base):
    """d log_b(a)/da = (1/log b)/a."""
    def pullback(g, adj, args, v):
        return (g.div(g.mul(adj, g.div(1, g.log(g.number(base)))), args[0]),)
    return pullback


def _function(ulps, cost, pullback, name, domain="everywhere", python=None, arity=1):
    arguments = ", ".join("{%d}" % i for i in range(arity))
    return Operation("function", (arity, arity), domain, f"{name}({arguments})", f"{python or 'math.' + name}({arguments})",
                     pullback, ulps, cost)


# Accuracies: IEEE 754 for arithmetic and sqrt (half an ulp); the others are the largest errors that the GNU C library
# manual lists for x86-64 (section "Known Maximum Errors in Math Functions"), from memory, plus one ulp of margin where it lists 2 or more.
OPERATIONS: dict[str, Operation] = {
    "add": Operation("infix", (2, 2), "everywhere", "{0} + {1}", "{0} + {1}", lambda g, adj, a, v: (adj, adj), 0.5, 1),
    "sub": Operation("infix", (2, 2), "everywhere", "{0} - {1}", "{0} - {1}", lambda g, adj, a, v: (adj, g.neg(adj)), 0.5, 1),
    "mul": Operation("infix", (2, 2), "everywhere", "{0}*{1}", "{0}*{1}",
                     lambda g, adj, a, v: (g.mul(adj, a[1]), g.mul(adj, a[0])), 0.5, 1),
    "div": Operation("infix", (2, 2), "divisor not 0", "{0}/{1}", "_div({0}, {1})", _quotient, 0.5, 4),
    "neg": Operation("infix", (1, 1), "everywhere", "-{0}", "-{0}", lambda g, adj, a, v: (g.neg(adj),), 0.0, 0),
    "pow": Operation("infix", (2, 2), "base >= 0, or an integer exponent; base not 0 with a negative exponent",
                     "pow({0}, {1})", "_pow({0}, {1})", _where_positive, 1.0, 40),
    "lt": Operation("comparison", (2, 2), "everywhere", "{0} < {1}", "{0} < {1}", None, 0.0, 1),
    "le": Operation("comparison", (2, 2), "everywhere", "{0} <= {1}", "{0} <= {1}", None, 0.0, 1),
    "gt": Operation("comparison", (2, 2), "everywhere", "{0} > {1}", "{0} > {1}", None, 0.0, 1),
    "ge": Operation("comparison", (2, 2), "everywhere", "{0} >= {1}", "{0} >= {1}", None, 0.0, 1),
    "ordered": Operation("comparison", (2, 2), "everywhere", "!isunordered({0}, {1})", "_ordered({0}, {1})", None, 0.0, 1),
    "and": Operation("logic", (2, 2), "everywhere", "{0} && {1}", "{0} and {1}", None, 0.0, 1),
    "or": Operation("logic", (2, 2), "everywhere", "{0} || {1}", "{0} or {1}", None, 0.0, 1),
    "not": Operation("logic", (1, 1), "everywhere", "!{0}", "not {0}", None, 0.0, 0),
    "where": Operation("choice", (3, 3), "the branch chosen", "{0} ? {1} : {2}", "{1} if {0} else {2}", _choice, 0.0, 1),
    "sqrt": _function(0.5, 10, lambda g, adj, a, v: (g.div(adj, g.mul(2, v)),), "sqrt", "a >= 0", "_sqrt"),
    "cbrt": _function(4.0, 20, lambda g, adj, a, v: (g.div(adj, g.mul(3, g.mul(v, v))),), "cbrt"),
    "exp": _function(1.0, 15, lambda g, adj, a, v: (g.mul(adj, v),), "exp", "a < 709.78", "_exp"),
    "expm1": _function(1.0, 20, lambda g, adj, a, v: (g.mul(adj, g.exp(a[0])),), "expm1", "a < 709.78", "_expm1"),
    "log": _function(1.0, 15, lambda g, adj, a, v: (g.div(adj, a[0]),), "log", "a > 0", "_log"),
    "log10": _function(2.0, 20, _logarithm(10), "log10", "a > 0", "_log10"),
    "log2": _function(1.0, 15, _logarithm(2), "log2", "a > 0", "_log2"),
    "log1p": _function(1.0, 20, lambda g, adj, a, v: (g.div(adj, g.add(1, a[0])),), "log1p", "a > -1", "_log1p"),
    "sin": _function(1.0, 20, lambda g, adj, a, v: (g.mul(adj, g.cos(a[0])),), "sin", python="_sin"),
    "cos": _function(1.0, 20, lambda g, adj, a, v: (g.neg(g.mul(adj, g.sin(a[0]))),), "cos", python="_cos"),
    "tan": _function(1.0, 30, lambda g, adj, a, v: (g.mul(adj, g.add(1, g.mul(v, v))),), "tan", "not at odd multiples of pi/2", "_tan"),
    "asin": _function(1.0, 25, lambda g, adj, a, v: (g.div(adj, g.sqrt(_one_minus_square(g, a[0]))),), "asin", "-1 <= a <= 1", "_asin"),
    "acos": _function(1.0, 25, lambda g, adj, a, v: (g.neg(g.div(adj, g.sqrt(_one_minus_square(g, a[0])))),), "acos", "-1 <= a <= 1", "_acos"),
    "atan": _function(1.0, 25, lambda g, adj, a, v: (g.div(adj, g.add(1, g.mul(a[0], a[0]))),), "atan"),
    "atan2": _function(1.0, 30, _arctangent, "atan2", "not both 0", arity=2),
    "sinh": _function(3.0, 25, lambda g, adj, a, v: (g.mul(adj, g.cosh(a[0])),), "sinh", "abs(a) < 710.47", "_sinh"),
    "cosh": _function(3.0, 25, lambda g, adj, a, v: (g.mul(adj, g.sinh(a[0])),), "cosh", "abs(a) < 710.47", "_cosh"),
    "tanh": _function(3.0, 25, _hyperbolic_secant_squared, "tanh"),
    "asinh": _function(3.0, 30, lambda g, adj, a, v: (g.div(adj, g.hypot(g.number(1), a[0])),), "asinh"),
    "acosh": _function(3.0, 30, lambda g, adj, a, v: (g.div(adj, g.mul(g.sqrt(g.sub(a[0], 1)), g.sqrt(g.add(a[0], 1)))),), "acosh", "a >= 1", "_acosh"),
    "atanh": _function(3.0, 30, lambda g, adj, a, v: (g.div(adj, _one_minus_square(g, a[0])),), "atanh", "-1 < a < 1", "_atanh"),
    "erf": _function(1.0, 25, _gauss(1), "erf"),
    "erfc": _function(6.0, 30, _gauss(-1), "erfc"),
    "hypot": _function(1.0, 20, _hypotenuse, "hypot", arity=2),
    "abs": Operation("function", (1, 1), "everywhere", "fabs({0})", "abs({0})",
                     lambda g, adj, a, v: (g.where(g.lt(a[0], 0), g.neg(adj), adj),), 0.0, 1),
    "sign": Operation("function", (1, 1), "everywhere", "rw_sign({0})", "_sign({0})", None, 0.0, 1),
    "min": Operation("function", (2, None), "everywhere", "rw_min({0}, {1})", "_min({0}, {1})", _extreme("le"), 0.0, 1),
    "max": Operation("function", (2, None), "everywhere", "rw_max({0}, {1})", "_max({0}, {1})", _extreme("ge"), 0.0, 1),
}
