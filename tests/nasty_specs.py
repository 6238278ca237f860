"""Valid specs that are hard to read, to emit or to solve, with points, roots to 50 digits and expected statuses."""

from functools import cache

import mpmath as mp

from problem_specs import WORKING_DIGITS, Point, Problem, as_double, digits, exactly, spec, zero

# As written inside a TOML string. In this order: ends of comments in C, of strings, backslashes, trigraphs, line ends
# of several kinds, marks of shells, formats and templates, a right-to-left override, invisible marks, other letters.
HOSTILE = " ".join((
    r"*/ /* // \" ' \"\"\" ''' \\ \\n \\u0041 ??/ ??\\ \n#error here \r#include <x> \f \u2028 \u2029 \u0085",
    r"`ls` $(ls) ${x} %s %n {0} {x!r} {{ 7*7 }} {% raw %} {# #} <%= x %> &lt; <script>alert(1)</script>",
    r"\u202Eabc\u202C \u200B \uFEFF \u03B8\u00B2 \u6C34 \U0001F30A \t and a backslash at the end \\"))


@cache
def nasty():
    return (*_roots_at_ends(), *_magnitudes(), *_switches(), *_without_root(), *_shapes(), *_names(), *_texts())


def _problem(name, equation, bracket, parameters, *points, **more):
    return Problem(name, spec(name, equation, bracket, parameters, **more), points)


def _inverses(function, *decimals):
    """Points over a parameter `a` whose root is a known function of it."""
    return tuple(Point({"a": a}, exactly(function, a)) for a in decimals)


def _zeros(function, lower, upper, *decimals):
    """Points over a parameter `a` whose root is the zero of function(x, a)."""
    return tuple(Point({"a": a}, zero(lambda x: function(x, as_double(a)), lower, upper)) for a in decimals)


def _roots_at_ends():
    return (
        _problem("lower_end", "x*exp(x) = a", ("0", "1"), {"a": (0, 2)},
                 Point({"a": "0"}, "0"), Point({"a": "-0.0"}, "0"), *_inverses(mp.lambertw, "1", "1e-300")),
        # The end is the root itself, rounded down or up.
        _problem("upper_end", "x^2 = a", ("0", "sqrt(a)"), {"a": (1, 10)},
                 *_inverses(mp.sqrt, "2", "3", "4", "5", "7")),
        _problem("both_ends_meet", "x = b", ("a", "a"), {"a": (0, 9), "b": (0, 9)},
                 Point({"a": "3", "b": "3"}, "3"),
                 Point({"a": "0", "b": "0"}, "0"),
                 Point({"a": "3", "b": "4"}, None, ("no_sign_change",))),
        _problem("signed_zero", "x*(1 + x^2) = a", ("-1", "1"), {"a": (-1, 1)},
                 Point({"a": "0"}, "0"), Point({"a": "-0.0"}, "0"), *_inverses(mp.mpf, "1e-310", "-5e-324")),
        _problem("poles_at_both_ends", "tan(x) = a", ("-pi/2", "pi/2"), {"a": (-1e12, 1e12)},
                 *_inverses(mp.atan, "0", "1", "-1", "1e6", "-1e12"), ends="open"),
        _problem("pole_at_lower_end", "log(x) = a", ("0", "10"), {"a": (-700, 2)},
                 *_inverses(mp.exp, "0", "1", "-1", "-50", "-700"), ends="open-lower"),
        # 0/0 at the open end.
        _problem("removable_at_open_end", "sin(x)/x = a", ("0", "pi"), {"a": (0.01, 0.99)},
                 *_zeros(lambda x, a: mp.sin(x)/x - a, "0.1", "3.14", "0.5", "0.99", "0.01"), ends="open-lower"),
    )


def _magnitudes():
    return (
        _problem("huge", "x^3 = a", ("1", "1e102"), {"a": (1, 1e305)},
                 *_inverses(lambda a: mp.root(a, 3), "1e300", "1e305", "27", "1")),
        _problem("tiny", "x^2 = a", ("0", "1"), {"a": (0, 1)}, *_inverses(mp.sqrt, "1e-290", "1e-200", "1e-20", "1")),
        _problem("all_doubles", "log(x) = a", ("1e-300", "1e300"), {"a": (-690, 690)},
                 *_inverses(mp.exp, "-690", "-1", "0", "690")),
        _problem("across_zero", "atan(x - a) = 0", ("-1e300", "1e300"), {"a": (-1e300, 1e300)},
                 *_inverses(mp.mpf, "1e-5", "-3", "1e200", "0")),
        _problem("subnormal_bracket", "x = a", ("-1e-320", "1e-318"), {"a": (-1e-320, 1e-318)},
                 *_inverses(mp.mpf, "5e-324", "1e-319", "-1e-320", "0")),
        _problem("far_tail", "erfc(x) = a", ("0", "26"), {"a": (1e-290, 1)},
                 *_zeros(lambda x, a: mp.erfc(x) - a, "-0.1", "26", "1e-290", "1e-10", "0.5"), Point({"a": "1"}, "0")),
        _problem("no_overflow_between", "hypot(x, a) = b", ("0", "b"), {"a": (0, 1e300), "b": (1e-300, 1e300)},
                 *(Point({"a": a, "b": b}, exactly(lambda u, v: mp.sqrt(v*v - u*u), a, b))
                   for a, b in (("3e200", "5e200"), ("3e-200", "5e-200"), ("0", "1")))),
        _problem("close_to_one", "log1p(x) = a", ("-0.5", "1"), {"a": (-0.6, 0.6)},
                 *_inverses(mp.expm1, "1e-20", "-1e-300", "0.5")),
    )


def _switches():
    # Slope k between k - 1 and k, so that the value at k is k*(k + 1)/2.
    staircase = "820 + 41*(x - 40)"
    for k in range(40, 0, -1):
        staircase = f"where(x < {k}, {k*(k - 1)//2} + {k}*(x - {k - 1}), {staircase})"
    wide, box = ("-4", "4"), {"a": (-4, 4)}
    inside, middle = ("0", "4"), {"a": (0.5, 3.5)}
    return (
        _problem("deep_choice", f"{staircase} = a", ("-1", "60"), {"a": (0, 900)},
                 Point({"a": "0.5"}, "0.5"),
                 Point({"a": "861"}, "41"),
                 Point({"a": "91"}, "13", ("kink",)),
                 *_inverses(lambda a: 13 + (a - 91)/14, "100")),
        _problem("tie_of_max", "max(x, 2*x) = a", wide, box,
                 Point({"a": "0"}, "0", ("kink",)), Point({"a": "1"}, "0.5"), Point({"a": "-1"}, "-1")),
        _problem("tie_of_parameters", "x = min(a, b, 3)", wide, {"a": (-4, 4), "b": (-4, 4)},
                 Point({"a": "1", "b": "1"}, "1", ("kink",)), Point({"a": "1", "b": "2"}, "1")),
        _problem("corner_of_abs", "abs(x) + 2*x = a", wide, box,
                 Point({"a": "0"}, "0", ("kink",)), Point({"a": "3"}, "1"), Point({"a": "-3"}, "-3")),
        # The branch not chosen is not a number.
        _problem("unchosen_branch", "where(x > 0, sqrt(x), x) = a", ("-4", "30"), {"a": (-4, 5)},
                 Point({"a": "4"}, "16"), Point({"a": "-1"}, "-1")),
        _problem("condition_joined", "where(x > 1 and not (x >= 2 or a < 0), x^2, x) = a", ("0", "1.99"), {"a": (0, 3)},
                 Point({"a": "0.5"}, "0.5"), *_inverses(mp.sqrt, "3")),
        _problem("step", "where(x < a, x - 9, x + 9)", inside, middle,
                 Point({"a": "1"}, None, ("jump",)), Point({"a": "1.1"}, None, ("jump",))),
        _problem("pole_inside", "1/(x - a)", inside, middle, Point({"a": "1.1"}, None, ("jump",))),
        _problem("sign_of_zero", "sign(x - a)*(1 + x^2)", inside, middle,
                 Point({"a": "1"}, "1", ("flat+kink", "jump"))),
        _problem("flat_cubic", "(x - a)^3", inside, middle,
                 Point({"a": "1.1"}, exactly(mp.mpf, "1.1"), ("flat",), "1e-15")),
        _problem("double_root_at_end", "(x - 1)^2 = a", ("1", "4"), {"a": (0, 4)},
                 Point({"a": "0"}, "1", ("flat",), "1e-15"), Point({"a": "4"}, "3")),
    )


def _without_root():
    return (
        _problem("no_sign_change", "x^2 + a", ("0", "2"), {"a": (-4, 4)},
                 Point({"a": "1"}, None, ("no_sign_change",)), Point({"a": "-1"}, "1")),
        _problem("reversed_bracket", "x = 1", ("a", "b"), {"a": (0, 3), "b": (0, 3)},
                 Point({"a": "2", "b": "0"}, None, ("bad_bracket",)), Point({"a": "0", "b": "2"}, "1")),
        _problem("undefined_by_parameter", "x = log(a)", ("-9", "9"), {"a": (-1, 9)},
                 Point({"a": "-1"}, None, ("not_finite",)),
                 Point({"a": "0"}, None, ("not_finite", "no_sign_change")),        # infinite of one sign
                 Point({"a": "1"}, "0")),
        _problem("undefined_at_end", "sqrt(x) = a", ("-1", "4"), {"a": (0.5, 2)},
                 Point({"a": "1"}, None, ("not_finite",))),
        _problem("infinite_bracket", "x = 1", ("0", "1/a"), {"a": (0, 1)},
                 Point({"a": "0"}, None, ("not_finite", "bad_bracket")), Point({"a": "0.25"}, "1")),
    )


def _shapes():
    forty = {f"p{i}": repr(i/8) for i in range(40)}
    with mp.workdps(WORKING_DIGITS):
        total = mp.fsum((i + 1)*mp.mpf(i)/8 for i in range(40))
    series = " + ".join(f"a/({i} + x)" for i in range(1, 201))
    nested = "x"
    for _ in range(150):
        nested = f"(0.5*{nested} + 0.5)"
    every = ("sqrt(x) + cbrt(x) + exp(-x) + expm1(x/9) + log(x) + log10(x) + log2(x) + log1p(x) + sin(x/9) + cos(x/9)"
             " + tan(x/9) + asin(x/9) + acos(x/9) + atan(x) + atan2(x, 2) + sinh(x/9) + cosh(x/9) + tanh(x) + asinh(x)"
             " + acosh(1 + x) + atanh(x/9) + erf(x) - erfc(x) + abs(x) + min(x, 9, 8) + max(x, 0) + hypot(x, 3) = a")
    return (
        _problem("forty_parameters", "x + x^3 = " + " + ".join(f"{i + 1}*{name}" for i, name in enumerate(forty)),
                 ("-50", "50"), {name: (-9, 9) for name in forty},
                 Point(forty, zero(lambda x: x + x**3 - total, 0, 50))),
        _problem("two_hundred_terms", f"{series} = 1", ("0", "1e6"), {"a": (0.2, 1000)},
                 *_zeros(lambda x, a: mp.fsum(a/(i + x) for i in range(1, 201)) - 1, 0, "1e6", "0.25", "2", "1000")),
        # The slope is 2^-150: in doubles the residual is zero in the whole bracket.
        _problem("deep_parentheses", f"{nested} = 1 + a", ("0", "2"), {"a": (0, 0.1)},
                 Point({"a": "0"}, "1", ("solved", "flat"), "1")),
        _problem("powers", "x = a + 2^3^2 - -2^2 + 2^-3 + 0^0 + cbrt(-8) + (-2)^3 + 4**0.5", ("0", "999"),
                 {"a": (0, 9)}, Point({"a": "0"}, "509.125")),
        _problem("number_forms", "+x = .5 +\n 5. + 1E+2*a\t- +0.25e-0", ("-1000", "1000"), {"a": (0, 9)},
                 Point({"a": "1"}, "105.25")),
        _problem("every_function", every, ("0.1", "7"), {"a": (15, 60)},
                 *_zeros(lambda x, a: _every_function(x) - a, "0.1", 7, "20", "40")),
        _problem("start_outside", "x^3 - 2*x = a", ("2", "4"), {"a": (4.5, 50)},
                 *_zeros(lambda x, a: x**3 - 2*x - a, 2, 4, "5"), start="-100*a"),
        _problem("outputs_of_parameters", "x = a*b", ("-100", "100"), {"a": (-9, 9), "mode": (0, 3), "b": (-9, 9)},
                 Point({"a": "2", "mode": "1", "b": "4"}, "8"),
                 unselected=("mode",), outputs={"three": "3", "only_a": "a^2", "again": "only_a + mode*x"}),
    )


def _every_function(x):
    nine = x/9
    return mp.fsum((
        mp.sqrt(x), mp.cbrt(x), mp.exp(-x), mp.expm1(nine), mp.log(x), mp.log(x)/mp.log(10), mp.log(x)/mp.log(2),
        mp.log1p(x), mp.sin(nine), mp.cos(nine), mp.tan(nine), mp.asin(nine), mp.acos(nine), mp.atan(x), mp.atan2(x, 2),
        mp.sinh(nine), mp.cosh(nine), mp.tanh(x), mp.asinh(x), mp.acosh(1 + x), mp.atanh(nine), mp.erf(x), -mp.erfc(x),
        x, x, x, mp.sqrt(x*x + 9)))


def _names():
    """Names that emitted code or its surroundings might use for something of their own: all of them the author's."""
    of_a_solver = "e I p r x t1 jac slope lower upper start y U".split()
    sums = {
        "names_of_c": "NAN INFINITY NULL HUGE_VAL M_PI DBL_EPSILON EOF size_t main stdin",
        "names_of_python": "self math list len range print object type abs_1 inf nan",
        "names_of_the_trade": "g g_x residual bracket tolerance noise step point lane n N m M i j p_dot y_bar hess",
        # Differing in case only, looking like temporaries, as long as a line.
        "names_alike": "a A t0 T0 t_0 v1 v_1 v10 a" + "bc_d"*24,
    }
    return (
        _problem("names_of_a_solver", "root + root^3/9 = d + w + t2 + p + r + x + t1 + start + y + U", ("-9", "9"),
                 {name: (0, 1) for name in of_a_solver},
                 Point({name: "0.25" for name in of_a_solver}, zero(lambda x: x + x**3/9 - mp.mpf(45)/16, 0, 9)),
                 unknown="root", definitions={"d": "e + I", "w": "jac*slope", "t2": "lower + upper"}),
        *(_problem(name, "dp = " + " + ".join(taken.split()), ("-99", "99"), {key: (0, 1) for key in taken.split()},
                   Point({key: "0.25" for key in taken.split()}, digits(mp.mpf(len(taken.split()))/4)),
                   unknown="dp", outputs={"jac": f"dp + {taken.split()[0]}"}) for name, taken in sums.items()),
    )


def _texts():
    text = f'''\
format = 1
name = "texts"
title = "{HOSTILE}"
source = "{HOSTILE}"
caution = """
{HOSTILE}

second paragraph */ \\"""
*/ """
[constants]
k = {{ value = 2, about = "{HOSTILE}" }}
[parameters]
a = {{ range = [0, 9], about = "{HOSTILE}" }}
[unknown]
name = "x"
bracket = ["0", "9"]
about = "{HOSTILE}"
[residual]
equation = "x = a/k"
[outputs]
twice = {{ expression = "2*x", about = "{HOSTILE}" }}
[[published]]
given = {{ a = 6 }}
expect = {{ x = 3 }}
tolerance = 1e-12
source = "exact: 6/2 {HOSTILE}"
'''
    return (Problem("texts", text, (Point({"a": "6"}, "3"),)),)
