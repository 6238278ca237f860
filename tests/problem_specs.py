"""Published root-finding problems as spec texts, with their points and their roots to 50 digits.

The 154 problems of Alefeld, G. E., Potra, F. A. and Shi, Y., Algorithm 748: Enclosing Zeros of Continuous Functions,
ACM Trans. Math. Softw. 21 (1995), 327-344; and the other real functions with brackets that SciPy's own tests of its
root finders use: its "original" ones, and those of Chandrupatla, T. R., Adv. Eng. Softw. 28 (1997), 145-149.

Roots are those of the equation as written (decimals exact) at parameters rounded to double, which is what a module is
given. They are computed here from formulas in mpmath that share nothing with the compiler.
"""

import json
from functools import cache
from typing import NamedTuple

import mpmath as mp

DIGITS = 50
WORKING_DIGITS = 70


class Point(NamedTuple):
    given: dict[str, str]                        # parameter -> decimal
    root: str | None                             # decimal of 50 digits; None: there is none to find
    status: tuple[str, ...] = ("solved",)        # words of eval's status column, any of which is right
    within: str = "0"                            # distance from `root` in which every number is a zero in doubles


class Problem(NamedTuple):
    id: str
    text: str                                    # the spec file
    points: tuple[Point, ...]


def spec(name, equation, bracket, parameters, *, unknown="x", definitions=None, outputs=None, unselected=(), require=(),
         **keys):
    """A spec text. `parameters`: name -> (low, high); `unselected`: those without derivatives; `keys`: of [unknown]."""
    lines = ["format = 1", f"name = {json.dumps(name)}", "[parameters]"]
    for parameter, (low, high) in parameters.items():
        differentiate = ", differentiate = false" if parameter in unselected else ""
        lines.append(f"{parameter} = {{ range = [{_end(low)}, {_end(high)}]{differentiate} }}")
    for heading, table in (("definitions", definitions), ("outputs", outputs)):
        if table:
            lines.append(f"[{heading}]")
            lines += [f"{key} = {json.dumps(text)}" if heading == "definitions" else
                      f"{key} = {{ expression = {json.dumps(text)} }}" for key, text in table.items()]
    lines += ["[unknown]", f"name = {json.dumps(unknown)}", f"bracket = {json.dumps(list(bracket))}"]
    lines += [f"{key} = {json.dumps(value)}" for key, value in keys.items()]
    if require:
        lines += ["[domain]", f"require = {json.dumps(list(require))}"]
    lines += ["[residual]", f"equation = {json.dumps(equation)}"]
    return "\n".join(lines) + "\n"


def _end(value):
    return json.dumps(value) if isinstance(value, str) else repr(value)


def as_double(text):
    """The double next to a decimal, exactly, as mpmath holds it."""
    return mp.mpf(float(text))


def digits(value):
    return mp.nstr(mp.mpf(value), DIGITS, strip_zeros=True)


def zero(function, lower, upper):
    """The zero of `function` between two numbers where its sign differs, to 50 digits, as a decimal."""
    with mp.workdps(WORKING_DIGITS):
        a, b = mp.mpf(lower), mp.mpf(upper)
        rising = function(a) < 0
        if rising == (function(b) < 0):
            raise ValueError("no change of sign")
        for _ in range(70):
            middle = (a + b)/2
            a, b = (middle, b) if (function(middle) < 0) == rising else (a, middle)
        tolerance = mp.mpf(10)**(-2*WORKING_DIGITS)
        root = mp.findroot(function, (a, b), solver="secant", tol=tolerance, maxsteps=60, verify=False)
        step = abs(root)*mp.mpf(10)**-(DIGITS + 2)
        if (function(root - step) < 0) != rising or (function(root + step) < 0) == rising:
            raise ValueError("the zero is not settled to 50 digits")
        return digits(root)


def exactly(function, *decimals):
    """`function` of the doubles next to decimals, to 50 digits, as a decimal."""
    with mp.workdps(WORKING_DIGITS):
        return digits(function(*(as_double(text) for text in decimals)))


def _counts(name, equation, function, bracket, counts):
    """A family over an integer n, its roots found between the bracket's ends (numbers or decimals)."""
    points = tuple(Point({"n": str(n)}, zero(lambda x: function(x, mp.mpf(n)), *bracket)) for n in counts)
    return Problem(name, spec(name, equation, bracket, {"n": (1, 1000)}), points)


@cache
def alefeld_potra_shi():
    """The 154 problems, one a point, family by family as numbered in the paper."""
    return (
        Problem("aps01", spec("aps01", "sin(x) = s*x", ("pi/2", "pi"), {"s": (0.4, 0.6)}),
                (Point({"s": "0.5"}, zero(lambda x: mp.sin(x) - x/2, 1.6, 3.1)),)),
        _poles(),
        Problem("aps03", spec("aps03", "a*x*exp(b*x)", ("-9", "31"), {"a": (-200, -40), "b": (-3, -1)}),
                tuple(Point({"a": a, "b": b}, "0") for a, b in (("-40", "-1"), ("-100", "-2"), ("-200", "-3")))),
        Problem("aps04", spec("aps04", "x^n - a", ("0", "5"), {"n": (4, 12), "a": (0.2, 1)}),
                tuple(Point({"n": str(n), "a": a}, exactly(lambda v: mp.root(v, n), a))
                      for a in ("0.2", "1") for n in (4, 6, 8, 10, 12))),
        *(Problem(f"aps04_{n}", spec(f"aps04_{n}", f"x^{n} - a", ("-0.95", "4.05"), {"a": (0.5, 2)}),
                  (Point({"a": "1"}, "1"),)) for n in (8, 10, 12, 14)),
        Problem("aps05", spec("aps05", "sin(x) - s", ("0", "1.5"), {"s": (0, 0.9)}),
                (Point({"s": "0.5"}, exactly(mp.asin, "0.5")),)),
        _counts("aps06", "2*x*exp(-n) - 2*exp(-n*x) + 1", lambda x, n: 2*x*mp.exp(-n) - 2*mp.exp(-n*x) + 1,
                ("0", "1"), (1, 2, 3, 4, 5, 20, 40, 60, 80, 100)),
        _counts("aps07", "(1 + (1 - n)^2)*x - (1 - n*x)^2", lambda x, n: (1 + (1 - n)**2)*x - (1 - n*x)**2,
                ("0", "1"), (5, 10, 20)),
        _counts("aps08", "x^2 - (1 - x)^n", lambda x, n: x**2 - (1 - x)**n, ("0", "1"), (2, 5, 10, 15, 20)),
        _counts("aps09", "(1 + (1 - n)^4)*x - (1 - n*x)^4", lambda x, n: (1 + (1 - n)**4)*x - (1 - n*x)**4,
                ("0", "1"), (1, 2, 4, 5, 8, 15, 20)),
        _counts("aps10", "exp(-n*x)*(x - 1) + x^n", lambda x, n: mp.exp(-n*x)*(x - 1) + x**n,
                ("0", "1"), (1, 5, 10, 15, 20)),
        Problem("aps11", spec("aps11", "(n*x - 1)/((n - 1)*x)", ("0.01", "1"), {"n": (2, 20)}),
                tuple(Point({"n": str(n)}, exactly(lambda v: 1/v, str(n))) for n in (2, 5, 15, 20))),
        Problem("aps12", spec("aps12", "x^(1/n) - n^(1/n)", ("1", "100"), {"n": (2, 33)}),
                tuple(Point({"n": str(n)}, str(n)) for n in (*range(2, 7), *range(7, 34, 2)))),
        # Zero to double precision in a whole neighbourhood of 0: exp(-1/x^2) is below 1e-308 there.
        Problem("aps13", spec("aps13", "where(x^2 < 1/709.78, 0, c*x/exp(1/x^2))", ("-1", "4"), {"c": (0.5, 2)}),
                (Point({"c": "1"}, "0", ("flat", "flat+kink"), "0.03754"),)),
        _sine_beside_constant(),
        _exponential_between_constants(),
    )


def _poles():
    """Between the poles at k^2 and (k + 1)^2; first and second derivative are small at the root."""
    terms = " + ".join(f"({2*i - 5})^2/(x - {i*i})^3" for i in range(1, 21))

    def function(x):
        return -2*mp.fsum(mp.mpf(2*i - 5)**2/(x - i*i)**3 for i in range(1, 21))

    text = spec("aps02", f"-2*({terms})", ("k^2 + 1e-9", "(k + 1)^2 - 1e-9"), {"k": (1, 10)}, unselected=("k",))
    edge = mp.mpf("1e-9")
    return Problem("aps02", text, tuple(
        Point({"k": str(k)}, zero(function, k*k + edge, (k + 1)**2 - edge)) for k in range(1, 11)))


def _sine_beside_constant():
    root = zero(lambda x: x/mp.mpf("1.5") + mp.sin(x) - 1, "0", "1.5")
    text = spec("aps14", "where(x <= 0, -n/20, n/20*(x/1.5 + sin(x) - 1))", ("-1000", "pi/2"), {"n": (1, 40)})
    return Problem("aps14", text, tuple(Point({"n": str(n)}, root) for n in range(1, 41)))


def _exponential_between_constants():
    pieces = "where(x < 0, -0.859, where(x > 2*1e-3/(1 + n), exp(1) - 1.859, exp((n + 1)*x/2*1000) - 1.859))"
    text = spec("aps15", pieces, ("-1000", "1e-4"), {"n": (20, 1000)})
    return Problem("aps15", text, tuple(
        Point({"n": str(n)}, exactly(lambda v: 2*mp.log(mp.mpf("1.859"))/(1000*(v + 1)), str(n)))
        for n in (*range(20, 41), *range(100, 1001, 100))))


@cache
def scipy_collection():
    """SciPy's "original" functions but for the random one, and Chandrupatla's functions with all their brackets."""
    ends = ("0.5", "sqrt(3)")
    # In f4 and f5 the sign changes across a step and a pole, on which the value is replaced by zero.
    met = ("flat+kink", "jump")
    return (
        Problem("original1", spec("original1", "x*(x - c)", ends, {"c": (0.6, 1.7)}), (Point({"c": "1"}, "1"),)),
        Problem("original2", spec("original2", "x^2 - c", ends, {"c": (0.3, 2.9)}), (Point({"c": "1"}, "1"),)),
        Problem("original3", spec("original3", "x*(x - c)*(x - 2)*(x - 3)", ends, {"c": (0.6, 1.7)}),
                (Point({"c": "1"}, "1"),)),
        Problem("original4", spec("original4", "where(x > 1, c + 0.1*x, where(x < 1, -c + 0.1*x, 0))", ends,
                                  {"c": (0.5, 2)}), (Point({"c": "1"}, "1", met),)),
        Problem("original5", spec("original5", "where(x < 1 or x > 1, c/(1 - x), 0)", ends, {"c": (0.5, 2)}),
                (Point({"c": "1"}, "1", met),)),
        *_chandrupatla(),
    )


def _chandrupatla():
    ordinary = (("2", "3"), ("1", "10"), ("1", "100"), ("-1e4", "1e4"), ("-1e10", "1e10"))
    wide = (("1e-4", "1e4"), ("1e-6", "1e6"), ("1e-10", "1e10"), ("1e-12", "1e12"))
    far = (("0", "5"), ("-10", "10"), ("-1e4", "1e4"), ("-1e6", "1e6"), ("-1e10", "1e10"))
    near = (("-1", "4"), ("-2", "5"), ("-1", "10"), ("-5", "50"), ("-10", "100"))
    positive = (("2e-4", "2"), ("2e-4", "3"), ("2e-4", "9"), ("2e-4", "27"), ("2e-4", "81"))
    flat = ("flat",)

    def eighth(x):
        xi = as_double("0.61489")
        return -(3062*(1 - xi)*mp.exp(-x))/(xi + (1 - xi)*mp.exp(-x)) - 1013 + 1628/x

    def ninth(x):
        return mp.exp(x) - 2 - mp.mpf("0.01")/x**2 + mp.mpf("0.000002")/x**3

    return (
        _brackets("fun1", "x^3 - 2*x - c", "5", ordinary, zero(lambda x: x**3 - 2*x - 5, 2, 3)),
        _brackets("fun2", "1 - c/x^2", "1", (("0.5", "1.51"), *wide), "1"),
        _brackets("fun3", "(x - c)^3", "3", far, "3", flat, "2e-15"),
        _brackets("fun4", "6*(x - c)^5", "2", far, "2", flat, "2e-15"),
        # Powers of x that underflow to zero around the root.
        _brackets("fun5", "(x - c)^9", "0", near, "0", flat, "2e-36"),
        _brackets("fun6", "(x - c)^19", "0", near, "0", flat, "2e-17"),
        _brackets("fun7", "where(abs(x) < 3.8e-4, 0, c*x*exp(-x^-2))", "1", near, "0", ("flat", "flat+kink"), "0.0376"),
        _brackets("fun8", "-(3062*(1 - c)*exp(-x))/(c + (1 - c)*exp(-x)) - 1013 + 1628/x", "0.61489", positive,
                  zero(eighth, "0.5", "2")),
        _brackets("fun9", "exp(x) - c - 0.01/x^2 + 0.000002/x^3", "2", (("2e-4", "1"), *positive[1:]),
                  zero(ninth, "0.5", "1")),
    )


def _brackets(name, equation, c, ends, root, status=("solved",), within="0"):
    """One function with many brackets: their ends are parameters without derivatives."""
    box = {"c": (-10, 10), "lo": (-1e10, 1e10), "hi": (-1e10, 1e12)}
    text = spec(name, equation, ("lo", "hi"), box, unselected=("lo", "hi"), require=("lo < hi",))
    return Problem(name, text, tuple(Point({"c": c, "lo": lo, "hi": hi}, root, status, within) for lo, hi in ends))
