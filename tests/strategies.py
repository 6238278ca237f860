"""Random expressions of the spec language, parameter values and whole specs, for Hypothesis."""

import json
import math
import re

from hypothesis import strategies as st

from rootwright.operations import OPERATIONS

UNARY = [key for key, row in OPERATIONS.items() if row.kind == "function" and row.arity == (1, 1)]
BINARY = [key for key, row in OPERATIONS.items() if row.kind == "function" and row.arity == (2, 2)]
COMPARISONS = ("<", "<=", ">", ">=")
EXACT = frozenset(("sqrt", "abs", "sign", "min", "max"))       # functions that are the same to the bit everywhere

# Decimals of all magnitudes: exact in binary, not exact, powers of two but for the last digits, huge, tiny, long.
DECIMALS = ("0", "1", "2", "3", "0.5", "0.1", "0.3", "10", "2.51", "1e-3", "7.", ".25", "1e10", "1e-10", "1e-30",
            "1e30", "1e-300", "1e300",
            "0.99999999999999997", "2.00000000000000000001", "3.14159265358979323846264338327950288", "6.02214076e23",
            "123456789.125")
INTEGER_POWERS = ("0", "1", "2", "3", "4", "5", "7", "-1", "-2", "-3", "12", "2.0")
RATIONAL_POWERS = ("0.5", "1.5", "-0.5", "(1/3)", "(2/3)", "0.25", "2.2", "-1.7", "pi")


@st.composite
def expressions(draw, names, functions=None, depth=4):
    """Texts of expressions over `names`; `functions` limits the functions used (all by default)."""
    return _Grower(draw, names, functions).grow(depth)


class _Grower:
    """Grows one expression. A forest of nested strategies would say the same, fifty times slower."""

    def __init__(self, draw, names, functions):
        self.draw = draw
        self.unary = [name for name in UNARY if functions is None or name in functions]
        self.binary = [name for name in BINARY if functions is None or name in functions]
        self.leaves = (*names, *names, *DECIMALS[:9], *DECIMALS, *(("pi",) if functions is None else ()))
        self.kinds = ["leaf", "sum", "sum", "product", "product", "negative", "integer power", "unary", "unary",
                      "extreme", "choice", "shared"]
        self.kinds += ["binary"] if self.binary else []
        self.kinds += ["power", "variable power", "guarded"] if functions is None else []

    def pick(self, values):
        return values[self.draw(st.integers(0, len(values) - 1))]

    def grow(self, depth):
        kind = self.pick(self.kinds if depth else ("leaf",))
        if kind == "leaf":
            return self.pick(self.leaves)
        one = self.grow(depth - 1)
        if kind in ("sum", "product"):
            return f"({one} {self.pick('+-' if kind == 'sum' else '*/')} {self.grow(depth - 1)})"
        if kind == "negative":
            return f"(-{one})"
        if kind == "integer power":
            return f"{_base(one)}^{self.pick(INTEGER_POWERS)}"
        if kind == "power":
            return f"abs({one})^{self.pick(RATIONAL_POWERS)}"
        if kind == "variable power":
            return f"abs({one})^{_base(self.grow(depth - 1))}"
        if kind == "unary":
            return f"{self.pick(self.unary)}({one})"
        if kind in ("binary", "extreme"):
            return f"{self.pick(self.binary if kind == 'binary' else ('min', 'max'))}({one}, {self.grow(depth - 1)})"
        if kind == "choice":
            other, a, b = (self.grow(depth - 1) for _ in range(3))
            return f"where({one} {self.pick(COMPARISONS)} {other}, {a}, {b})"
        return self.pick(SHARED if kind == "shared" else GUARDED).replace("#", _base(one))


# The same value used more than once, with cancellation; and arguments kept inside the domain of a function.
SHARED = ("(# - #)", "(# / #)", "(# * (1 - #))", "((1 + #) - #)", "(#^2 + #)", "(1 / (1 + #^2))", "(#^3 - 3*#)")
GUARDED = ("sqrt(#^2 + 1)", "log(1 + abs(#))", "asin(sin(#))", "acos(#/(1 + abs(#)))", "acosh(1 + #^2)",
           "atanh(#/(1 + abs(#)))",
           "log1p(abs(#))", "where(# > 0, log(#), #)", "where(# < 1, 2, sqrt(#))", "tanh(#)", "erf(#)", "exp(-#^2)",
           "1/cosh(#)")


def _base(text):
    """The text as one operand."""
    return text if text.isidentifier() or text.startswith("(") and text.count("(") == 1 else f"({text})"


RANGES = ((-1e300, 1e300), (-10.0, 10.0), (0.0, 1.0), (0.5, 2.0), (1e-300, 1e300), (0.0, 1e-290), (-1.0, 1.0),
          (1e3, 1e8), (-5e-324, 5e-324))
VALUES = (0.0, -0.0, 5e-324, -5e-324, 1e-310, 2.0**-1022, 1e-300, -1e-300, 1e300, -1e300, 1.0, -1.0, 0.5, 2.0,
          1.0 + 2.0**-52, 1.0 - 2.0**-53,
          0.1, 0.3, 3.0, 10.0, 1e-8, 1e8, math.pi)


@st.composite
def points(draw, ranges):
    """A point {name: double} of a box {name: (low, high)}: ends, special values, exact ties, and any others."""
    point = {}
    for name, (low, high) in ranges.items():
        special = [value for value in (low, high, *VALUES, *point.values()) if low <= value <= high]
        point[name] = draw(st.one_of(st.sampled_from(special), st.floats(low, high), _moderate(low, high)))
    return point


def _moderate(low, high):
    """Values whose size is drawn, rather than their bits."""
    def value(share):
        return min(max(math.copysign(10.0**(abs(share) - 4.0), share), low), high)
    return st.floats(-8.0, 8.0).map(value)


def spec_text(name, equation, ranges, bracket, unknown="x", **tables):
    """A spec as TOML text. `tables`: constants, definitions, outputs (name -> text), require (texts), texts at the top."""
    lines = ["format = 1", f"name = {json.dumps(name)}"]
    lines += [f"{key} = {json.dumps(tables[key])}" for key in ("title", "source", "caution") if key in tables]
    for table in ("constants", "definitions", "outputs"):
        if tables.get(table):
            lines += [f"[{table}]"] + [f"{key} = {json.dumps(text)}"
                                       if table != "outputs" else f"{key} = {{ expression = {json.dumps(text)} }}"
                                       for key, text in tables[table].items()]
    lines += ["[parameters]"] + [f"{key} = {{ range = [{low!r}, {high!r}] }}" for key, (low, high) in ranges.items()]
    lines += ["[unknown]", f"name = {json.dumps(unknown)}", f"bracket = {json.dumps(list(bracket))}"]
    if tables.get("require"):
        lines += ["[domain]", f"require = {json.dumps(list(tables['require']))}"]
    return "\n".join([*lines, "[residual]", f"equation = {json.dumps(equation)}", ""])


@st.composite
def open_specs(draw, functions=None, depth=4, box=None):
    """(spec text, box) of a closure whose residual and output are any expressions; it need not have a root."""
    ranges = box or {name: draw(st.sampled_from(RANGES)) for name in ("a", "b", "x")}
    low, high = ranges["x"]
    residual = draw(expressions(["a", "b", "x", "x"], functions, depth))
    residual = residual if re.search(r"\bx\b", residual) else f"{residual} - x"
    text = spec_text("random", residual, {name: ranges[name] for name in ("a", "b")}, (repr(low), repr(high)),
                     outputs={"w": draw(expressions(["a", "b", "x"], functions, 2)), "total": "a + b"})
    return text, ranges


@st.composite
def solvable_specs(draw, name, functions=None):
    """(spec text, box) of a closure with one root: what rises with x, against a bounded expression in the parameters."""
    ranges = {key: draw(st.sampled_from(((-2.0, 2.0), (0.0, 1.0), (0.5, 2.0)))) for key in ("a", "b")}
    right = draw(expressions(["a", "b"], functions, 3))
    slope = draw(st.sampled_from(("1", "0.1", "(1 + a^2)", "(0.25 + abs(b))")))
    rising = draw(st.sampled_from(("", " + x^3", " + x^3/7", " + max(x, a)", " + x*abs(x)",
                                   " + where(x < b, x, 2*x - b)")
                                  if functions else
                                  ("", " + x^3", " + tanh(x)", " + max(x, a)", " + atan(3*x)", " + sinh(x/4)",
                                   " + where(x < b, x, 2*x - b)")))
    text = spec_text(name, f"{slope}*x{rising} = clipped", ranges, ("-400", "400"),
                     definitions={"clipped": f"max(-30, min(30, {right}))"},
                     outputs={"w": draw(expressions(["a", "b", "x"], functions, 2))})
    return text, ranges
