"""One point, exactly: rational numbers where they stay rational, balls of high precision where not, and `UNDEFINED` where there certainly is no value.

What a witness says is checked here, apart from the boxes that led to it.
"""

from fractions import Fraction

import flint

from rootwright.calculus.balls import Balls, ball, hull, precision
from rootwright.calculus.program import METHODS, needed

BITS = 400
_LARGEST = 4000                 # bits of a rational number that is carried on exactly


class Undefined:
    """No value, certainly."""


UNDEFINED = Undefined()
_RATIONAL = {"add": lambda a, b: a + b, "sub": lambda a, b: a - b, "mul": lambda a, b: a * b, "div": lambda a, b: a / b,
             "neg": lambda a: -a, "abs": abs, "min": min, "max": max, "sign": lambda a: Fraction((a > 0) - (a < 0))}
_COMPARED = {"lt": lambda a, b: a < b, "le": lambda a, b: a <= b, "gt": lambda a, b: a > b, "ge": lambda a, b: a >= b}


def value_at(instructions, nodes, point):
    """{node: Fraction, ball, UNDEFINED, True, False or None} at a point {input: Fraction or ball}."""
    values = {}
    with precision(BITS):
        for node in needed(instructions, nodes):
            instruction = instructions[node]
            values[node] = _value(instruction, [values[arg] for arg in instruction.args], point)
    return values


def _value(instruction, args, point):
    op = instruction.op
    if op == "number":
        return instruction.value
    if op == "input":
        return point[instruction.value]
    if op == "named":
        return args[0]
    if op == "pi":
        return flint.arb.pi()
    if op == "nan":
        return UNDEFINED
    if op == "where":
        return _choice(*args)
    if any(arg is UNDEFINED for arg in args):
        return UNDEFINED
    if op in ("and", "or", "not"):
        return getattr(Balls(), op + "_")(*args)
    if op == "ordered":
        return True
    if all(isinstance(arg, Fraction) for arg in args):
        if op in _COMPARED:
            return _COMPARED[op](*args)
        if op == "div" and args[1] == 0:
            return UNDEFINED
        if op in _RATIONAL:
            exact = _RATIONAL[op](*args)
            if exact.numerator.bit_length() + exact.denominator.bit_length() < _LARGEST:
                return exact
    args = [ball(arg) if isinstance(arg, Fraction) else arg for arg in args]
    if _outside_domain(op, *args):
        return UNDEFINED
    value = getattr(Balls(), METHODS.get(op, op))(*args)
    return _tidy(value) if isinstance(value, flint.arb) else value


def _tidy(value):
    """An exact small whole number as a Fraction."""
    if value.is_exact() and value.is_integer() and abs(value) < 2 ** 60:
        return Fraction(int(float(value)))
    return value


def _choice(condition, a, b):
    if condition is UNDEFINED:
        return UNDEFINED
    if condition is not None:
        return a if condition else b
    if a is UNDEFINED or b is UNDEFINED:
        return UNDEFINED if a is b else flint.arb("nan")
    return hull(*(ball(part) if isinstance(part, Fraction) else part for part in (a, b)))


def _outside_domain(op, a, b=None):
    """True where the operation certainly has no value."""
    if op == "div":
        return b.is_zero()
    if op in ("log", "log10", "log2"):
        return bool(a <= 0)
    if op == "log1p":
        return bool(a <= -1)
    if op == "sqrt":
        return bool(a < 0)
    if op in ("asin", "acos"):
        return bool(abs(a) > 1)
    if op == "acosh":
        return bool(a < 1)
    if op == "atanh":
        return bool(abs(a) >= 1)
    if op == "atan2":
        return a.is_zero() and b.is_zero()
    if op == "pow":
        return bool(a < 0) and not b.contains_integer() or a.is_zero() and bool(b < 0)
    return False


def sign(value):
    """1, -1 or 0 where it is certain, else None."""
    if value is UNDEFINED:
        return None
    if isinstance(value, Fraction):
        return (value > 0) - (value < 0)
    return 1 if value > 0 else -1 if value < 0 else 0 if value.is_zero() else None


def decimal(value):
    """A Fraction as an exact decimal where it has a short one, else as a quotient."""
    numerator, denominator = value.numerator, value.denominator
    twos = fives = 0
    rest = denominator
    while rest % 2 == 0:
        rest, twos = rest // 2, twos + 1
    while rest % 5 == 0:
        rest, fives = rest // 5, fives + 1
    if rest != 1:
        return f"{numerator}/{denominator}"
    if abs(value) < 10 ** 300 and Fraction(repr(float(value))) == value:
        return repr(float(value))
    places = max(twos, fives)
    digits = str(abs(numerator) * 10 ** places // denominator).rjust(places + 1, "0")
    text = digits[:len(digits) - places] + ("." + digits[len(digits) - places:] if places else "")
    return ("-" if numerator < 0 else "") + text
