"""Derivatives as a handbook writes them: the chain rule through the author's definitions, every line a short formula.

The formulas are for reading. They come from the same derivative rules as the emitted code, and are tidied the way one tidies on
paper: factors of a product gathered, equal ones made powers, quotients written with one stroke.
"""

from dataclasses import dataclass, field
from fractions import Fraction

from rootwright.calculus.differentiate import partials
from rootwright.calculus.lower import Lowering
from rootwright.calculus.program import Graph, needed
from rootwright.operations import OPERATIONS

LONGEST = 400                    # characters; a longer formula is cut
CUT = "..."

_FACTORS = 12                    # of a product that is tidied; a longer one becomes a single factor
_COMPARISONS = {key: row.c.split()[1] for key, row in OPERATIONS.items() if row.kind == "comparison" and key != "ordered"}


def derivative_lines(model):
    """{result: [(name, formula), ...]} for the residual (under a name of its own, the first key) and every output.

    The lines of r hold `r_d = ...` for the definitions d between r and its inputs (the derivative of r through all that uses d), then
    for the unknown and the differentiated parameters; what is zero is left out. Formulas that are a mere number or name are put where
    they are used.
    """
    sheet = _Sheet(model)
    lines = {residual_name(model): sheet.lines(residual_name(model), sheet.residual)}
    for output in model.outputs:
        lines[output.name] = sheet.lines(output.name, sheet.outputs[output.name])
    return lines


def residual_name(model):
    """`g`, or another name where the author uses that."""
    taken = _declared(model)
    return next(name for name in ("g", "G", "h", "r", "residual", "the_residual") if name not in taken)


def _declared(model):
    groups = (model.constants, model.parameters, model.definitions, model.outputs)
    return {model.unknown.name, *(item.name for group in groups for item in group)}


class _Sheet:
    """The expressions of a Model in one Graph, where every definition and output is an input to what uses it."""

    def __init__(self, model):
        self.model = model
        self.graph = graph = Graph()
        self.declared = _declared(model)
        lowering = Lowering(graph)
        for constant in model.constants:
            lowering.declare(constant.name, graph.named(constant.name, lowering.lower(constant.expression)))
        for name in (*(parameter.name for parameter in model.parameters), model.unknown.name):
            lowering.declare(name, graph.input(name))
        self.bodies = {}         # definitions and outputs in order: name -> its expression
        for definition in model.definitions:
            self._enter(lowering, definition)
        self.residual = lowering.lower(model.residual)
        for output in model.outputs:
            self._enter(lowering, output)
        self.outputs = {output.name: self.bodies[output.name] for output in model.outputs}

    def _enter(self, lowering, item):
        self.bodies[item.name] = lowering.lower(item.expression)
        lowering.declare(item.name, self.graph.input(item.name))

    def lines(self, result, body):
        graph, lines, flows = self.graph, [], {}
        self._flow(graph.number(1), body, flows)
        for name in reversed(self.bodies):
            if name in flows and name != result:
                through = flows.pop(name)
                if not self._is_short(through):
                    label = self._label(result, name)
                    lines.append((label, formula(graph, through)))
                    through = graph.input(label)
                self._flow(through, self.bodies[name], flows, name)
        wanted = [self.model.unknown.name, *(p.name for p in self.model.parameters if p.differentiate)]
        return lines + [(self._label(result, name), formula(graph, flows[name])) for name in wanted
                        if name in flows and graph.literal(flows[name]) != 0]

    def _flow(self, weight, body, flows, name=None):
        """Adds weight times the partial derivatives of a body to the derivatives with respect to what it mentions."""
        graph = self.graph
        inputs = [node for node in needed(graph.instructions, [body]) if graph.instructions[node].op == "input"]
        for node, partial in zip(inputs, partials(graph, body, [type(weight)(node) for node in inputs])):
            if name is not None:
                partial = self._mention(partial, body, name)
            mentioned = graph.instructions[node].value
            flows[mentioned] = graph.add(flows.get(mentioned, graph.number(0)), graph.mul(weight, partial))

    def _mention(self, partial, body, name):
        """The partial derivative with the body's own value, where it appears, written as its name."""
        graph = self.graph
        if graph.instructions[body].op in ("input", "number", "named"):
            return partial
        named = {body: graph.input(name)}
        for node in needed(graph.instructions, [partial], [body]):
            instruction = graph.instructions[node]
            args = tuple(named.get(arg, arg) for arg in instruction.args)
            if args != instruction.args:
                named[node] = graph.enter(instruction.op, args, instruction.value)
        return named.get(partial, partial)

    def _is_short(self, node):
        instruction = self.graph.instructions[node]
        if instruction.op == "neg":
            instruction = self.graph.instructions[instruction.args[0]]
        return instruction.op in ("number", "input")

    def _label(self, result, name):
        """`g_x`; with two underscores, which no name of the author's has, where the author uses that."""
        return f"{result}_{name}" if f"{result}_{name}" not in self.declared else f"{result}__{name}"


def formula(graph, node):
    """Text of an instruction, tidied; cut to a hint where it is longer than LONGEST."""
    forms = {}
    for k in needed(graph.instructions, [node]):
        forms[k] = _form(graph, k, forms)
    text = forms[node].text()
    return text if CUT not in text else "(long; the emitted module has it in full)"


@dataclass(frozen=True)
class _Product:
    """coefficient * factor^exponent * ...; a sum is a factor in parentheses."""
    coefficient: Fraction = Fraction(1)
    factors: dict[str, Fraction] = field(default_factory=dict)

    def text(self):
        sign = "-" if self.coefficient < 0 else ""
        above = [_power(base, exponent) for base, exponent in self.factors.items() if exponent > 0]
        below = [_power(base, -exponent) for base, exponent in self.factors.items() if exponent < 0]
        numerator, denominator = _ratio(abs(self.coefficient))
        above = [numerator] + above if numerator != "1" or not above else above
        below = [denominator] + below if denominator != "1" else below
        if not sign and not below and len(above) == 1 and _is_enclosed(above[0]):
            return _clip(above[0][1:-1])
        bottom = "" if not below else f"/{below[0]}" if len(below) == 1 else f"/({'*'.join(below)})"
        return _clip(sign + "*".join(above) + bottom)

    def times(self, other, sign=1):
        """Product with other, or quotient where sign is -1."""
        factors = dict(self.factors)
        for base, exponent in other.factors.items():
            factors[base] = factors.get(base, 0) + sign*exponent
            if factors[base] == 0:
                del factors[base]
        product = _Product(self.coefficient*other.coefficient**sign, factors)._with_squared_roots()
        return product if len(factors) <= _FACTORS else _atom(f"({product.text()})")

    def _with_squared_roots(self):
        """sqrt(a)^2 written as a."""
        for base, exponent in self.factors.items():
            if abs(exponent) == 2 and base.startswith("sqrt(") and _is_enclosed(base[4:]):
                rest = _Product(self.coefficient, {key: power for key, power in self.factors.items() if key != base})
                inside = base[5:-1]
                inner = _Product(Fraction(inside)) if inside.isdecimal() else _atom(inside if inside.isidentifier() else f"({inside})")
                return rest.times(inner, 1 if exponent > 0 else -1)
        return self

    def negative(self):
        return _Product(-self.coefficient, self.factors)


def _form(graph, node, forms):
    instruction = graph.instructions[node]
    op, args = instruction.op, [forms[arg] for arg in instruction.args]
    if op == "number":
        return _Product(instruction.value)
    if op in ("input", "named"):
        return _atom(instruction.value)
    if op in ("pi", "nan"):
        return _atom(op)
    if op == "neg":
        return args[0].negative()
    if op == "mul":
        return args[0].times(args[1])
    if op == "div" and args[1].coefficient:
        return args[0].times(args[1], -1)
    if op in ("add", "sub"):
        return _sum(args[0], args[1] if op == "add" else args[1].negative())
    if op == "pow":
        return _raised(args[0], args[1])
    if op == "where" and _is_guard(graph, instruction):
        return args[1]
    texts = [arg.text() for arg in args]
    if op in _COMPARISONS:
        return _atom(f"({texts[0]} {_COMPARISONS[op]} {texts[1]})")
    if op in ("and", "or"):
        return _atom(f"({texts[0]} {op} {texts[1]})")
    if op == "not":
        return _atom(f"(not {args[0].text()})" if _is_enclosed(texts[0]) else f"(not ({texts[0]}))")
    return _atom(_clip(f"{op}({', '.join(texts)})"))


def _is_guard(graph, choice):
    """True for a choice that only settles what NaN and an exact zero do: a NaN otherwise, or a condition a < 0 or a > 0."""
    condition = graph.instructions[choice.args[0]]
    sides = [graph.instructions[arg] for arg in condition.args]
    return graph.instructions[choice.args[2]].op == "nan" or (
        condition.op == "or" and [side.op for side in sides] == ["lt", "gt"] and sides[0].args == sides[1].args
        and graph.literal(sides[0].args[1]) == 0)


class _PowerText(str):
    """Text of a factor that is a power already: goes in parentheses before it is raised again."""


def _atom(text):
    return _Product(Fraction(1), {text: Fraction(1)})


def _sum(left, right):
    first, second = left.text(), right.text()
    for one, other in ((first, second), (second, first)):
        if other == "1" and one.startswith("expm1(") and _is_enclosed(one[5:]):
            return _atom(f"exp{one[5:]}")
    if right.coefficient < 0:
        return _atom(_clip(f"({first} - {right.negative().text() if len(right.factors) != 1 or right.coefficient != -1 else second[1:]})"))
    return _atom(_clip(f"({first} + {second})"))


def _raised(base, exponent):
    """A power that is no repeated multiplication. Exponents are multiplied only where that holds for every real base."""
    if not exponent.factors and base.coefficient == 1 and list(base.factors.values()) == [1]:
        return _Product(Fraction(1), {next(iter(base.factors)): exponent.coefficient})
    raised, power = base.text(), exponent.text()
    raised = raised if raised.isidentifier() else f"({raised})"
    return _atom(_PowerText(_clip(f"{raised}^{power}" if power.isidentifier() else f"{raised}^({power})")))


def _power(base, exponent):
    if exponent == 1:
        return base
    numerator, denominator = _ratio(exponent)
    base = f"({base})" if isinstance(base, _PowerText) else base
    return f"{base}^{numerator}" if denominator == "1" else f"{base}^({numerator}/{denominator})"


def _ratio(value):
    """(numerator, denominator) as texts: a short fraction, or a decimal over 1."""
    if value.denominator <= 12 and value.numerator < 1000:
        return str(value.numerator), str(value.denominator)
    try:
        return repr(float(value)).removesuffix(".0"), "1"
    except OverflowError:
        return CUT, "1"


def _is_enclosed(text):
    """True for one factor in parentheses."""
    if not text.startswith("("):
        return False
    depth = 0
    for k, character in enumerate(text):
        depth += (character == "(") - (character == ")")
        if depth == 0:
            return k == len(text) - 1
    return False


def _clip(text):
    return text if len(text) <= LONGEST and CUT not in text else CUT
