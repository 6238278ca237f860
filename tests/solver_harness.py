"""Both solver cores alone: the same kernels, in Python, are run by runtime/solver.py and by runtime/solver.c.

A kernel is a Problem: a residual with its slope, a rounding bound, and a bracket. The C core calls it back through
ctypes, so both cores see the same bits and must take the same decisions. `formula` makes a Problem from an expression
of the spec language by arithmetic of its own (`Jet`), independent of the compiler's derivatives and rounding bounds.
"""

import ctypes
import functools
import math
import shutil
import subprocess
import tempfile
from dataclasses import dataclass, field
from fractions import Fraction
from importlib import resources
from pathlib import Path
from typing import Callable

from rootwright.emit.assemble import resolve
from rootwright.spec.expression import Name, Number, parse, postorder

NAN, INF = math.nan, math.inf
FEATURES = ("SWITCHES", "OPEN_LOWER", "OPEN_UPPER", "START")
STATUS = {"FLAT": 2, "KINK": 4, "NOT_FINITE": -1, "NO_SIGN_CHANGE": -2, "ITERATION_LIMIT": -3, "BAD_BRACKET": -4,
          "JUMP": -5}
STRICT = ["-pedantic", "-Wall", "-Wextra", "-Wconversion", "-Wfloat-conversion", "-Wdouble-promotion", "-Wshadow",
          "-Wfloat-equal", "-Wcast-qual", "-Wvla", "-Wduplicated-branches", "-Werror", "-ffp-contract=off"]


@dataclass(frozen=True)
class Problem:
    lower: float
    upper: float
    residual: Callable                          # x -> (g, slope)
    rounding: Callable = lambda x: (0.0, 0.0, 0.0)   # x -> (bound of g, bound of the slope, curvature)
    lower_rounding: float = 0.0
    upper_rounding: float = 0.0
    features: tuple = ()                        # of FEATURES
    kink: Callable = lambda x, error_bound: False
    start: float = NAN                          # the author's start
    limit: int = 200


@dataclass
class Outcome:
    y: list = field(default_factory=lambda: [NAN])
    residual: float = NAN
    slope: float = NAN
    error_bound: float = NAN
    lower: float = NAN
    upper: float = NAN
    iterations: int = 0
    evaluations: int = 0
    status: int = -1

    @property
    def root(self):
        return self.y[0]


# -- the Python core

@functools.cache
def _python_code(features):
    text = resources.files("rootwright.runtime").joinpath("solver.py").read_text(encoding="utf-8")
    return compile(resolve(text, {name: name in features for name in (*FEATURES, "OUTPUTS")}), "solver.py", "exec")


def python_core(problem):
    """The functions of runtime/solver.py around the problem's kernels."""
    import struct

    names = {"math": math, "struct": struct, "LIMIT": problem.limit, **STATUS,
             "_bracket": lambda p: (problem.lower, problem.upper, problem.lower_rounding, problem.upper_rounding),
             "_residual": lambda p, x: problem.residual(x), "_rounding": lambda p, x: problem.rounding(x),
             "_kink": lambda p, x, error_bound: problem.kink(x, error_bound), "_start": lambda p: problem.start}
    exec(_python_code(tuple(problem.features)), names)
    return names


def solve(problem, start=NAN):
    """The Python core's Outcome."""
    outcome = Outcome()
    status = python_core(problem)["_locate"]((), start, outcome)
    assert status == outcome.status
    return outcome


# -- the C core

_POINT = r"""
#include <float.h>
#include <math.h>
#include <stddef.h>
#include <stdint.h>
#include <string.h>

#define RW_M 1
enum {
    RW_FLAT = 2, RW_KINK = 4, RW_NOT_FINITE = -1, RW_NO_SIGN_CHANGE = -2, RW_ITERATION_LIMIT = -3, RW_BAD_BRACKET = -4,
    RW_JUMP = -5
};
typedef struct {
    double y[RW_M];
    double residual, slope, error_bound, lower, upper;
    int iterations, evaluations, status;
} rw_point;
"""

_CALLBACKS = _POINT + r"""
typedef struct {
    double end[2], rounding[2], start;
    int limit;
    double (*residual)(double, double *);
    double (*rounding_bound)(double, double *, double *);
    int (*kink)(double, double);
} harness;

static const harness *now;

#define RW_LIMIT now->limit

static void rw_bracket(const double p[], double end[2], double rounding[2])
{
    (void)p;
    memcpy(end, now->end, sizeof now->end);
    memcpy(rounding, now->rounding, sizeof now->rounding);
}

static double rw_residual(const double p[], double x, double *slope)
{
    (void)p;
    return now->residual(x, slope);
}

static double rw_rounding(const double p[], double x, double *slope_rounding, double *curvature)
{
    (void)p;
    return now->rounding_bound(x, slope_rounding, curvature);
}

#if RW_SWITCHES
static int rw_kink(const double p[], double x, double error_bound)
{
    (void)p;
    return now->kink(x, error_bound);
}
#endif

#if RW_START
static double rw_start(const double p[])
{
    (void)p;
    return now->start;
}
#endif

#include "solver.c"

#ifdef __cplusplus
extern "C" {
#endif
int harness_solve(const harness *h, double start, rw_point *r);
double harness_bend(double g, double slope, double rounding, double slope_rounding, double curvature);
#ifdef __cplusplus
}
#endif

int harness_solve(const harness *h, double start, rw_point *r)
{
    now = h;
    rw_clear(r);
    return rw_locate(&start, start, r);
}

double harness_bend(double g, double slope, double rounding, double slope_rounding, double curvature)
{
    return rw_bend(&g, 0.0, g, slope, rounding, slope_rounding, curvature);
}
"""

_Residual = ctypes.CFUNCTYPE(ctypes.c_double, ctypes.c_double, ctypes.POINTER(ctypes.c_double))
_Rounding = ctypes.CFUNCTYPE(ctypes.c_double, ctypes.c_double, ctypes.POINTER(ctypes.c_double),
                             ctypes.POINTER(ctypes.c_double))
_Kink = ctypes.CFUNCTYPE(ctypes.c_int, ctypes.c_double, ctypes.c_double)


class _Harness(ctypes.Structure):
    _fields_ = [("end", ctypes.c_double * 2), ("rounding", ctypes.c_double * 2), ("start", ctypes.c_double),
                ("limit", ctypes.c_int), ("residual", _Residual), ("rounding_bound", _Rounding), ("kink", _Kink)]


class _Point(ctypes.Structure):
    _fields_ = [("y", ctypes.c_double * 1), ("residual", ctypes.c_double), ("slope", ctypes.c_double),
                ("error_bound", ctypes.c_double), ("lower", ctypes.c_double), ("upper", ctypes.c_double),
                ("iterations", ctypes.c_int), ("evaluations", ctypes.c_int), ("status", ctypes.c_int)]


def have_compiler():
    return shutil.which("gcc") is not None


def compile_c(source, output, *flags, compiler="gcc"):
    """Compiles C text that includes solver.c; returns the compiler's messages, empty when it is content."""
    with tempfile.TemporaryDirectory() as folder:
        path = Path(folder) / "harness.c"
        path.write_text(source, encoding="utf-8")
        runtime = Path(str(resources.files("rootwright.runtime")))
        command = [compiler, *flags, "-I", runtime, path, "-o", output, "-lm"]
        done = subprocess.run(command, capture_output=True, text=True)
    return done.stderr if done.returncode or done.stderr else ""


def callback_source():
    return _CALLBACKS


def point_source():
    return _POINT


_folder = None


@functools.cache
def _library(features):
    global _folder
    _folder = _folder or tempfile.TemporaryDirectory()
    path = Path(_folder.name) / ("solver" + "_".join(("", *features)) + ".so")
    messages = compile_c(_CALLBACKS, path, "-std=c99", "-O2", "-shared", "-fPIC", "-Wmissing-prototypes", *STRICT,
                         *(f"-DRW_{name}=1" for name in features))
    assert not messages, messages
    library = ctypes.CDLL(str(path))
    library.harness_solve.argtypes = [ctypes.POINTER(_Harness), ctypes.c_double, ctypes.POINTER(_Point)]
    library.harness_bend.argtypes = [ctypes.c_double] * 5
    library.harness_bend.restype = ctypes.c_double
    return library


def solve_c(problem, start=NAN):
    """The C core's Outcome."""
    def residual(x, slope):
        g, slope[0] = problem.residual(x)
        return g

    def rounding(x, slope_rounding, curvature):
        bound, slope_rounding[0], curvature[0] = problem.rounding(x)
        return bound

    h = _Harness((ctypes.c_double * 2)(problem.lower, problem.upper),
                 (ctypes.c_double * 2)(problem.lower_rounding, problem.upper_rounding), problem.start, problem.limit,
                 _Residual(residual), _Rounding(rounding),
                 _Kink(lambda x, error_bound: int(problem.kink(x, error_bound))))
    point = _Point()
    library = _library(tuple(sorted(problem.features)))
    assert library.harness_solve(ctypes.byref(h), start, ctypes.byref(point)) == point.status
    return Outcome([point.y[0]], *(getattr(point, name) for name, _ in _Point._fields_[1:]))


def bend_c(*numbers):
    return _library(()).harness_bend(*numbers)


# -- formulas: value, two derivatives, and bounds of the rounding errors of value and slope

_U = 2.0**-53 * 1.01
_TINY = 2.0**-1074


@dataclass(frozen=True)
class Jet:
    """v, d = dv/dx, c = d2v/dx2; e and f bound the rounding errors of v and d (running error analysis, N. J. Higham,
    Accuracy and Stability of Numerical Algorithms, 2nd ed. 2002, section 3.3)."""
    v: float
    d: float = 0.0
    c: float = 0.0
    e: float = 0.0
    f: float = 0.0


def _quotient(a, b):
    if b != 0.0:
        return a / b
    return NAN if a == 0.0 or math.isnan(a) else math.copysign(INF, a) * math.copysign(1.0, b)


def _guard(function, *arguments):
    try:
        return function(*arguments)
    except OverflowError:
        return INF
    except (ValueError, ZeroDivisionError):
        return NAN


def _add(a, b):
    v, d = a.v + b.v, a.d + b.d
    return Jet(v, d, a.c + b.c, a.e + b.e + _U * abs(v), a.f + b.f + _U * abs(d))


def _neg(a):
    return Jet(-a.v, -a.d, -a.c, a.e, a.f)


def _mul(a, b):
    v, d = a.v * b.v, a.d * b.v + a.v * b.d
    e = abs(a.v) * b.e + abs(b.v) * a.e + a.e * b.e + _U * abs(v) + _TINY
    f = (abs(a.d) * b.e + abs(b.v) * a.f + abs(a.v) * b.f + abs(b.d) * a.e
         + 3.0 * _U * (abs(a.d * b.v) + abs(a.v * b.d)) + _TINY)
    return Jet(v, d, a.c * b.v + 2.0 * a.d * b.d + a.v * b.c, e, f)


def _div(a, b):
    v = _quotient(a.v, b.v)
    d = _quotient(a.d - v * b.d, b.v)
    least = abs(b.v) - b.e
    e = _quotient(a.e + abs(v) * b.e, least) + _U * abs(v) + _TINY
    f = (_quotient(a.f + abs(v) * b.f + e * abs(b.d) + abs(d) * b.e, least)
         + 4.0 * _U * _quotient(abs(a.d) + abs(v * b.d), abs(b.v)) + _TINY)
    return Jet(v, d, _quotient(a.c - 2.0 * d * b.d - v * b.c, b.v), e, f) if least > 0.0 else \
        Jet(v, d, NAN, INF, INF)


def _chain(a, v, first, second, ulps=2.0):
    """f(a) from f, f', f'' at a.v, each good to `ulps`."""
    d = first * a.d
    e = 2.0 * ulps * _U * abs(v) + _TINY
    if a.e > 0.0:
        e += abs(first) * a.e + 0.5 * abs(second) * a.e * a.e
    f = abs(first) * a.f + abs(second) * a.e * abs(a.d) + (2.0 * ulps + 1.0) * _U * abs(d) + _TINY
    return Jet(v, d, second * a.d * a.d + first * a.c, e, f)


def _exp(a):
    v = _guard(math.exp, a.v)
    return _chain(a, v, v, v)


def _log(a):
    v = _guard(math.log, a.v) if a.v != 0.0 else -INF
    return _chain(a, v, _quotient(1.0, a.v), -_quotient(1.0, a.v * a.v))


def _sin(a):
    v, w = _guard(math.sin, a.v), _guard(math.cos, a.v)
    return _chain(a, v, w, -v)


def _cos(a):
    v, w = _guard(math.cos, a.v), _guard(math.sin, a.v)
    return _chain(a, v, -w, -v)


def _sqrt(a):
    v = _guard(math.sqrt, a.v)
    return _chain(a, v, _quotient(0.5, v), -_quotient(0.25, v * a.v))


def _cbrt(a):
    v = math.copysign(abs(a.v) ** (1.0 / 3.0), a.v)
    return _chain(a, v, _quotient(1.0, 3.0 * v * v), -_quotient(2.0, 9.0 * v * v * a.v), 8.0)


def _abs(a):
    return a if a.v > 0.0 else _neg(a)


def _pow(a, b):
    if b.d == 0.0 and b.v == int(b.v) and 0.0 < b.v <= 64.0:
        product = a
        for _ in range(int(b.v) - 1):
            product = _mul(product, a)
        return product
    if b.d == 0.0:
        v = _guard(math.pow, a.v, b.v)
        jet = _chain(a, v, b.v * _guard(math.pow, a.v, b.v - 1.0),
                     b.v * (b.v - 1.0) * _guard(math.pow, a.v, b.v - 2.0))
        return Jet(jet.v, jet.d, jet.c, jet.e + b.e * abs(v * _guard(math.log, a.v)), jet.f)
    return _exp(_mul(b, _log(a)))


def _where(test, a, b):
    return a if test else b


_OPERATIONS = {
    "add": _add, "sub": lambda a, b: _add(a, _neg(b)), "mul": _mul, "div": _div, "neg": _neg, "pow": _pow,
    "exp": _exp, "log": _log, "sin": _sin, "cos": _cos, "sqrt": _sqrt, "cbrt": _cbrt, "abs": _abs, "where": _where,
    "lt": lambda a, b: a.v < b.v, "le": lambda a, b: a.v <= b.v, "gt": lambda a, b: a.v > b.v,
    "ge": lambda a, b: a.v >= b.v, "and": lambda a, b: a and b, "or": lambda a, b: a or b, "not": lambda a: not a,
}


def _constant(text):
    v = float(text)
    return Jet(v, e=0.0 if math.isfinite(v) and Fraction(text) == Fraction(v) else _U * abs(v) + _TINY)


def evaluate(tree, values, operations=_OPERATIONS, number=_constant):
    """An expression tree over any arithmetic; `values` by name."""
    stack = []
    for node in postorder(tree):
        if isinstance(node, Number):
            stack.append(number(node.text))
        elif isinstance(node, Name):
            stack.append(values[node.name])
        else:
            arguments = stack[len(stack) - len(node.args):]
            del stack[len(stack) - len(node.args):]
            stack.append(operations[node.op](*arguments))
    return stack.pop()


def formula(equation, bracket, unknown="x", **more):
    """A Problem from an equation and two bracket ends in the spec language; the ends' roundings are bounded too."""
    tree = parse(equation, "equation").tree
    pi = Jet(math.pi, e=2.0**-52)
    lower, upper = (evaluate(parse(end).tree, {"pi": pi}) for end in bracket)

    @functools.lru_cache(maxsize=4)
    def jet(x):
        return evaluate(tree, {unknown: Jet(x, 1.0), "pi": pi})

    return Problem(lower.v, upper.v, lambda x: (jet(x).v, jet(x).d), lambda x: (jet(x).e, jet(x).f, jet(x).c),
                   lower.e, upper.e, **more)
