"""The solver core in C: the same decisions as in Python on the same kernels, strict compilers, sanitizers."""

import math
import subprocess
from itertools import product

import pytest

from corpus import APS, SPECIAL
from solver_harness import (FEATURES, INF, NAN, STATUS, STRICT, Problem, callback_source, compile_c, formula,
                            have_compiler, bend_c, point_source, python_core, solve, solve_c)
from test_solver import BRACKETS, liar, line, problem, step

pytestmark = pytest.mark.skipif(not have_compiler(), reason="needs gcc")


def same(first, second):
    """Equal to the last bit; NaN equals NaN, and -0.0 is not 0.0."""
    return repr(first) == repr(second)


@pytest.mark.parametrize("cases", [APS, SPECIAL], ids=["published", "special"])
def test_c_and_python_agree_to_the_last_bit_on_the_corpus(cases):
    for case in cases:
        assert same(solve(problem(case)), solve_c(problem(case))), case


@pytest.mark.parametrize("lower, upper", BRACKETS)
def test_c_and_python_agree_where_every_slope_misleads(lower, upper):
    for seed in range(20):
        at = 0.5 * lower + 0.5 * upper if seed % 2 else 0.9 * lower + 0.1 * upper
        lies = liar(seed, lower, upper, at)
        assert same(solve(lies), solve_c(lies)), seed


def test_c_and_python_agree_from_any_start():
    kepler = formula("x - 0.9*sin(x) - 0.3", ("-0.6", "1.2"))
    guided = formula("x - 0.9*sin(x) - 0.3", ("-0.6", "1.2"), features=("START",), start=0.8)
    for start in (NAN, -1e9, -0.6, 0.0, 0.5, 1.2, INF, -INF):
        assert same(solve(kepler, start), solve_c(kepler, start))
        assert same(solve(guided, start), solve_c(guided, start))


@pytest.mark.parametrize("hostile", [
    line(0.5, NAN, 1.0), line(0.5, 0.0, INF), line(0.5, 1.0, 0.0), step(0.1), step(0.1, limit=12),
    step(1e-300, limit=5),
    line(0.5, 0.5 + 1e-15, 0.5 - 1e-15, lower_rounding=1e-15, upper_rounding=1.5e-15),
    line(0.25, features=("SWITCHES",), kink=lambda x, error_bound: x == 0.25 and error_bound == 0.0),
    Problem(0.0, 1.0, lambda x: ({0.0: -1.0, 1.0: 1.0}.get(x, NAN), 1.0)),
    Problem(0.0, 1.0, lambda x: (NAN, NAN)),
    Problem(0.0, 1.0, lambda x: (NAN, NAN), features=("OPEN_LOWER", "OPEN_UPPER")),
    Problem(0.0, 1.0, lambda x: (NAN if 0.4 < x < 0.6 else x - 0.3, 0.0), lambda x: (1e-17, NAN, NAN)),
    Problem(-1.0, 3.0, lambda x: (-INF if x < 0.5 else INF if x > 1.5 else x - 0.75, 1.0)),
    Problem(0.0, 2.0, lambda x: (x * x - 2.0, NAN), lambda x: (INF, NAN, NAN)),
    Problem(0.0, 1.0, lambda x: (x + 1e-11, 1.0), lambda x: (1e-12, 0.0, 0.0), lower_rounding=1e-11),
    Problem(0.0, 1.0, lambda x: (x - 0.3, 1.0), lambda x: (INF, INF, INF), upper_rounding=INF),
])
def test_c_and_python_agree_on_hostile_kernels(hostile):
    assert same(solve(hostile), solve_c(hostile))


def test_flatness_is_judged_alike():
    bend = python_core(line(0.5))["_bend"]
    values = (0.0, 1e-300, 1e-16, 0.25, 1.0, 1e300)
    for *numbers, curvature in product((*values, INF, NAN), (*values, INF, NAN), (*values, INF, NAN), (*values, INF, NAN), values):
        one, other = bend_c(*numbers, curvature), bend(None, 0.0, *numbers, curvature)
        assert one == other or one != one and other != other, numbers


@pytest.mark.parametrize("straight", [True, False])
def test_where_the_curvature_overflows_the_slopes_beside_the_root_decide(straight):
    """log(x) = -690: the second derivative 1/x^2 overflows, and the curve is straight within the error, or is not."""
    root = math.exp(-690.0)
    hostile = Problem(1e-310, 1e-290, lambda x: (math.log(x) + 690.0, 1.0/x),
                      lambda x: (1e-13 if straight else 0.5, 1e-16/x, -INF))
    outcome = solve(hostile)
    assert outcome.root == pytest.approx(root, rel=1e-12) or not straight
    assert (outcome.status & STATUS["FLAT"] == 0) == straight
    assert same(outcome, solve_c(hostile))


@pytest.mark.parametrize("chosen", list(product((False, True), repeat=len(FEATURES))))
def test_every_choice_of_blocks_compiles_without_a_warning(chosen, tmp_path):
    flags = [f"-DRW_{name}=1" for name, wanted in zip(FEATURES, chosen) if wanted]
    assert compile_c(callback_source(), tmp_path / "solver.o", "-c", "-std=c99", "-O2", "-Wmissing-prototypes", *STRICT,
                     *flags) == ""


@pytest.mark.parametrize("flags", [(), tuple(f"-DRW_{name}=1" for name in FEATURES)], ids=["plain", "all blocks"])
def test_the_source_is_c99_under_the_analyzer_and_cpp17(flags, tmp_path):
    assert compile_c(callback_source(), tmp_path / "solver.o", "-c", "-std=c99", "-O2", "-fanalyzer", *STRICT,
                     *flags) == ""
    assert compile_c(callback_source(), tmp_path / "solver.o", "-c", "-x", "c++", "-std=c++17", "-O2", *STRICT, *flags,
                     compiler="g++") == ""


# The same kernels by hand in both languages, with nothing but + - * / and comparisons: p[0] chooses.

_NATIVE = point_source() + r"""
#include <fenv.h>
#include <stdio.h>

#define RW_LIMIT 200

static void rw_bracket(const double p[], double end[2], double rounding[2])
{
    end[0] = p[1];
    end[1] = p[2];
    rounding[0] = 0.0;
    rounding[1] = 0.0;
}

static double rw_residual(const double p[], double x, double *slope)
{
    if (p[0] < 0.5) {
        *slope = 3.0 * x * x - 2.0;
        return (x * x - 2.0) * x - 5.0;
    }
    if (p[0] < 1.5) {
        *slope = -1.0 / (x * x);
        return 1.0 / x - 3.0;
    }
    if (p[0] < 2.5) {
        *slope = 0.0;
        return x < 1e-9 ? -1.0 : 2.0;
    }
    if (p[0] < 3.5) {
        *slope = x > 0.2 && x < 0.9 ? (double)NAN : 1.0;
        return x > 0.2 && x < 0.9 ? (double)NAN : x - 0.15;
    }
    *slope = 1e200;
    return 1e200 * x - 1e-110;
}

static double rw_rounding(const double p[], double x, double *slope_rounding, double *curvature)
{
    *slope_rounding = 0.0;
    *curvature = 0.0;
    if (p[0] < 0.5) {
        *slope_rounding = 4e-16 * (3.0 * x * x + 2.0);
        *curvature = 6.0 * x;
        return 4e-16 * (x * x * fabs(x) + 2.0 * fabs(x) + 5.0);
    }
    if (p[0] < 1.5) {
        *slope_rounding = 4e-16 / (x * x);
        *curvature = 2.0 / (x * x * x);
        return 2e-16 * (1.0 / fabs(x) + 3.0);
    }
    return p[0] < 2.5 ? 0.0 : p[0] < 3.5 ? 1e-16 * fabs(x) : 2e-16 * (1e200 * fabs(x));
}

#include "solver.c"

int main(void)
{
    static const double given[][3] = {POINTS};
    size_t i;
    for (i = 0; i < sizeof given / sizeof given[0]; i++) {
        rw_point r;
        memset(&r, 0xA5, sizeof r);
        rw_clear(&r);
        feclearexcept(FE_ALL_EXCEPT);
        (void)rw_locate(given[i], NAN, &r);
        printf("%a %a %a %a %a %a %d %d %d %d\n", r.y[0], r.residual, r.slope, r.error_bound, r.lower, r.upper,
               r.iterations, r.evaluations, r.status, fetestexcept(FE_INVALID | FE_DIVBYZERO | FE_OVERFLOW) != 0);
    }
    return rw_is_flat(rw_bend(given[0], 0.0, 0.0, 1.0, 0.0, 0.0, 0.0));
}
"""

_POINTS = [(0, 2, 3), (0, -1e100, 1e100), (0, 2, 2), (0, 3, 2), (0, 0, 1.5), (1, 0.1, 1), (1, 1e-300, 1e300),
           (1, -1, 2), (2, -1, 1), (2, 1e-300, 1e300), (3, 0, 1), (3, 0.1, 1e308), (4, 1e-320, 1e-300),
           (4, -1e-300, 1e-305)]
_RAISING = ((1, 1e-300, 1e300), (3, 0.1, 1e308))        # the kernel itself overflows, or is not a number


def _native(kind, lower, upper):
    def residual(x):
        return (((x * x - 2.0) * x - 5.0, 3.0 * x * x - 2.0),
                (1.0 / x - 3.0, -1.0 / (x * x)) if kind == 1 else None,
                (-1.0 if x < 1e-9 else 2.0, 0.0),
                (NAN, NAN) if 0.2 < x < 0.9 else (x - 0.15, 1.0),
                (1e200 * x - 1e-110, 1e200))[kind]

    def rounding(x):
        return ((4e-16 * (x * x * abs(x) + 2.0 * abs(x) + 5.0), 4e-16 * (3.0 * x * x + 2.0), 6.0 * x),
                (2e-16 * (1.0 / abs(x) + 3.0), 4e-16 / (x * x), 2.0 / (x * x * x)) if kind == 1 else None,
                (0.0, 0.0, 0.0), (1e-16 * abs(x), 0.0, 0.0), (2e-16 * (1e200 * abs(x)), 0.0, 0.0))[kind]

    def guarded(kernel, length):
        def call(x):
            try:
                return kernel(x)
            except ZeroDivisionError:
                return (math.copysign(INF, x), -INF, math.copysign(INF, x))[:length]
        return call

    return Problem(float(lower), float(upper), guarded(residual, 2), guarded(rounding, 3))


_SANITIZED = ("-O1", "-g", "-fsanitize=address,undefined", "-fno-sanitize-recover=all")


@pytest.mark.parametrize("flags", [("-O2",), _SANITIZED], ids=["optimised", "sanitized"])
def test_kernels_written_twice_give_the_same_bits_status_and_evaluations(flags, tmp_path):
    points = ", ".join("{%r, %r, %r}" % tuple(map(float, point)) for point in _POINTS)
    program = tmp_path / "solver"
    assert compile_c(_NATIVE.replace("POINTS", points), program, "-std=c99", *STRICT, *flags) == ""
    done = subprocess.run([program], capture_output=True, text=True)
    assert (done.returncode, done.stderr) == (0, "")
    lines = done.stdout.splitlines()
    assert len(lines) == len(_POINTS)
    for point, words in zip(_POINTS, map(str.split, lines)):
        outcome = solve(_native(*point))
        floats = [outcome.root, outcome.residual, outcome.slope, outcome.error_bound, outcome.lower, outcome.upper]
        assert [repr(float.fromhex(word.replace("-nan", "nan"))) for word in words[:6]] \
            == [repr(value) for value in floats], point
        assert [int(word) for word in words[6:9]] == [outcome.iterations, outcome.evaluations, outcome.status], point
        if outcome.status == 0 and point not in _RAISING:
            assert words[9] == "0", f"{point} raised a floating-point exception"


def test_every_failure_leaves_nans_and_its_status():
    seen = {solve_c(kernel).status for kernel in (
        line(0.5, NAN, 1.0), line(0.5, 1.0, 0.0), line(2.0), step(0.1), step(0.1, limit=4))}
    assert seen == {STATUS[word] for word in
                    ("NOT_FINITE", "BAD_BRACKET", "NO_SIGN_CHANGE", "JUMP", "ITERATION_LIMIT")}
