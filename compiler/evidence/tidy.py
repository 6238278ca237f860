"""Instructions as a formula on paper: factors of a product gathered and equal ones made powers, equal terms of a sum
added, quotients written with one stroke. For reading only; what is computed is printed by `emit/`.
"""

from dataclasses import dataclass, field
from fractions import Fraction

from rootwright.calculus.program import needed

LONGEST = 400                    # characters; a longer formula is not written out
TOO_LONG = "(long; the emitted module has it in full)"

_MOST = 40                       # terms of a sum or factors of a product
_CUT = "..."
_COMPARISONS = {"lt": "<", "le": "<=", "gt": ">", "ge": ">="}


def formula(graph, node, forms):
    """Text of an instruction of a Graph, tidied; TOO_LONG where it is longer than LONGEST.

    `forms` is kept between calls for one graph: it holds what is tidied already.
    """
    for k in needed(graph.instructions, [node], forms):
        forms[k] = _form(graph, graph.instructions[k], forms)
    text = forms[node].text()
    return TOO_LONG if _CUT in text else text


@dataclass(frozen=True)
class _Product:
    """coefficient * factor^exponent * ...; a factor that is a sum is in parentheses."""
    coefficient: Fraction = Fraction(1)
    factors: dict[str, Fraction] = field(default_factory=dict)

    def text(self):
        """Text without its sign."""
        above = [_power(base, exponent) for base, exponent in self.factors.items() if exponent > 0]
        below = [_power(base, -exponent) for base, exponent in self.factors.items() if exponent < 0]
        numerator, denominator = _ratio(abs(self.coefficient))
        above = [numerator] + above if numerator != "1" or not above else above
        below = [denominator] + below if denominator != "1" else below
        bottom = "" if not below else f"/{below[0]}" if len(below) == 1 else f"/({'*'.join(below)})"
        return _clip("*".join(above) + bottom)

    def times(self, other, sign):
        factors = dict(self.factors)
        for base, exponent in other.factors.items():
            factors[base] = factors.get(base, 0) + sign*exponent
            if factors[base] == 0:
                del factors[base]
        product = _Product(self.coefficient*other.coefficient**sign, factors)
        for base, exponent in factors.items():
            if abs(exponent) == 2 and base.startswith("sqrt(") and _is_enclosed(base[4:]):      # sqrt(a)^2 = a
                del factors[base]
                inside = base[5:-1]
                squared = _Product(Fraction(inside)) if inside.isdecimal() else _factor(_enclosed(inside))
                return product.times(squared, 1 if exponent > 0 else -1)
        return product if len(factors) <= _MOST else _factor(_CUT)


def _factor(text):
    return _Product(factors={text: Fraction(1)})


class _Power(str):
    """Factor that is a power already: it goes into parentheses before it is raised again."""


class _Form:
    """A sum of products."""

    def __init__(self, *terms):
        self.terms = [term for term in terms if term.coefficient]

    def text(self):
        if not self.terms:
            return "0"
        leading = next((term for term in self.terms if term.coefficient > 0), None)
        terms = sorted(self.terms, key=lambda term: term is not leading)
        if len(terms) == 1 and terms[0].coefficient == 1 and _is_enclosed(terms[0].text()):
            return terms[0].text()[1:-1]
        signs = ["-" if term.coefficient < 0 else "+" for term in terms]
        first = terms[0].text() if signs[0] == "+" else f"-{terms[0].text()}"
        return _clip(first + "".join(f" {sign} {term.text()}" for sign, term in zip(signs[1:], terms[1:])))

    def product(self):
        """The form as one product: a sum becomes a factor in parentheses."""
        if len(self.terms) == 1:
            return self.terms[0]
        return _factor(f"({self.text()})") if self.terms else _Product(Fraction(0))

    def plus(self, other, sign):
        sums = {frozenset(term.factors.items()): term for term in self.terms}
        for term in other.terms:
            key = frozenset(term.factors.items())
            before = sums[key].coefficient if key in sums else 0
            sums[key] = _Product(before + sign*term.coefficient, term.factors)
        if len(sums) > _MOST:
            return _atom(_CUT)
        return _Form(*_exponentials(sums))

    def times(self, other, sign=1):
        return _Form(self.product().times(other.product(), sign))


def _exponentials(sums):
    """The terms of a sum, expm1(a) + 1 among them written as exp(a)."""
    one = sums.get(frozenset())
    for key, term in sums.items():
        if one is not None and term.coefficient == one.coefficient and len(term.factors) == 1:
            ((base, exponent),) = term.factors.items()
            if exponent == 1 and base.startswith("expm1(") and _is_enclosed(base[5:]):
                sums[key] = _Product(term.coefficient, {f"exp{base[5:]}": Fraction(1)})
                sums[frozenset()] = _Product(Fraction(0))
                break
    return sums.values()


def _form(graph, instruction, forms):
    op, args = instruction.op, [forms[arg] for arg in instruction.args]
    if op == "number":
        return _Form(_Product(instruction.value))
    if op in ("input", "named"):
        return _atom(instruction.value)
    if op in ("pi", "nan"):
        return _atom(op)
    if op == "neg":
        return _Form().plus(args[0], -1)
    if op == "mul" or op == "div" and args[1].terms:
        return args[0].times(args[1], 1 if op == "mul" else -1)
    if op in ("add", "sub"):
        return args[0].plus(args[1], 1 if op == "add" else -1)
    if op == "pow":
        return _raised(args[0], args[1])
    if op == "where" and _is_guard(graph, instruction):
        return args[1]
    texts = [arg.text() for arg in args]
    if op in _COMPARISONS:
        return _atom(f"({texts[0]} {_COMPARISONS[op]} {texts[1]})")
    if op in ("and", "or"):
        return _atom(f"({' '.join([_enclosed(texts[0]), op, _enclosed(texts[1])])})")
    if op == "not":
        return _atom(f"(not {_enclosed(texts[0])})")
    return _atom(f"{op}({', '.join(texts)})")


def _is_guard(graph, choice):
    """True for a choice that only settles what NaN or an exact zero does: else NaN, or condition a < 0 or a > 0."""
    condition = graph.instructions[choice.args[0]]
    sides = [graph.instructions[arg] for arg in condition.args]
    return graph.instructions[choice.args[2]].op == "nan" or (
        condition.op == "or" and [side.op for side in sides] == ["lt", "gt"] and sides[0].args == sides[1].args
        and graph.literal(sides[0].args[1]) == 0)


def _atom(text):
    return _Form(_factor(_clip(text)))


def _raised(base, exponent):
    """A power that is no repeated multiplication. Exponents multiply only where that holds for every real base."""
    inside, power = base.product(), exponent.product()
    if not power.factors and inside.coefficient == 1 and list(inside.factors.values()) == [1]:
        return _Form(_Product(factors={next(iter(inside.factors)): power.coefficient}))
    return _atom(_Power(f"{_enclosed(base.text())}^{_enclosed(exponent.text())}"))


def _power(base, exponent):
    if exponent == 1:
        return base
    base = f"({base})" if isinstance(base, _Power) else base
    numerator, denominator = _ratio(exponent, thirds_only=True)
    return f"{base}^{numerator}" if denominator == "1" else f"{base}^({numerator}/{denominator})"


def _ratio(value, thirds_only=False):
    """(numerator, denominator) as texts: a short fraction (thirds_only: unless a decimal is short), else a decimal."""
    decimal = 1000 % value.denominator == 0 and value.denominator > 1
    better = decimal and (thirds_only or value.denominator % 5 == 0)
    if value.denominator <= 12 and value.numerator < 1000 and not better:
        return str(value.numerator), str(value.denominator)
    try:
        return repr(float(value)).removesuffix(".0"), "1"
    except OverflowError:
        return _CUT, "1"


def _enclosed(text):
    return text if text.isidentifier() or text.replace(".", "", 1).isdecimal() or _is_enclosed(text) else f"({text})"


def _is_enclosed(text):
    """True for a text whose first parenthesis is closed by its last character."""
    if not text.startswith("("):
        return False
    depth = 0
    for k, character in enumerate(text):
        depth += (character == "(") - (character == ")")
        if depth == 0:
            return k == len(text) - 1
    return False


def _clip(text):
    return text if len(text) <= LONGEST and _CUT not in text else _CUT
