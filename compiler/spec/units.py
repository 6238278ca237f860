"""Checks that a spec is consistent in its dimensions. Nothing is converted, ever.

When: the unknown and every parameter and constant in use carries a unit, and `dimensions` is not "label". An output
without a unit has the one that its expression has; definitions always do.

Rules:

* Two quantities that are added, compared, equated or chosen between have the same dimensions and the same scale. kPa
  and Pa differ, and so do cm3/mol and m3/mol, kJ and J, percent and 1. rad is 1; deg is not.
* A literal is dimensionless. Zero fits any unit. A range end, bracket end, start, constant or published value made of
  literals only has the unit of what it bounds; one that uses names must come out in that unit.
* exp, log, sin and the like take and give dimensionless numbers; sqrt and cbrt halve and third the exponents; abs, min,
  max, hypot and where keep the unit of their arguments; sign and atan2 give dimensionless numbers.
* A base with a unit has an exponent that is a rational number, known here: 2, (5/3), 1.852, or a constant of such a
  value. Any other power has a dimensionless base. Exponents are dimensionless.
* A temperature in degC (or degF) is a point on that scale. The difference of two points is in kelvin (for degF, in
  degrees of 5/9 K); a point plus or minus a difference is a point. A point is not scaled, raised, or put into a
  function, so t + 273.15 (a dimensionless literal) and 611*exp(17.6*t/(t + 243)) are refused: such empirical formulas
  need `dimensions = "label"`. Inside a compound unit, as in 1/degC, degC is kelvin.
"""

from dataclasses import dataclass, replace
from fractions import Fraction

from rootwright.operations import OPERATIONS
from rootwright.spec.expression import Apply, Expression, Name, Number, postorder
from rootwright.spec.model import Model
from rootwright.spec.names import PREDEFINED
from rootwright.spec.published import published_expressions
from rootwright.spec.scope import Scope
from rootwright.spec.tables import Findings
from rootwright.spec.unit_text import ONE, Unit, UnitError, parse_unit

_ANY = Unit((), 0.0, origin="any")           # the unit of a literal zero

_SAME = frozenset(["add", "sub", "min", "max", "hypot", "atan2", "lt", "le", "gt", "ge"])
_SYMBOLS = {"add": "+", "sub": "-", "mul": "*", "div": "/", "pow": "^", "lt": "<", "le": "<=", "gt": ">", "ge": ">=",
            "neg": "-"}
_MAX_BITS = 512                              # of the numerator and denominator of an exponent
_SWITCH_OFF = 'dimensions = "label" switches the check off'


def check(model: Model, scope: Scope, findings: Findings) -> Model:
    """The model with `dimensions` settled: "checked", "label", or "none" where some quantity in use has no unit."""
    if model.dimensions == "label":
        return model
    if not _everything_has_a_unit(model, scope):
        return replace(model, dimensions="none")
    _Checker(model, scope, findings).run()
    return replace(model, dimensions="checked")


def _everything_has_a_unit(model, scope):
    unknown = model.unknown
    if unknown is None or unknown.unit is None:
        return False
    expressions = (model.residual, unknown.lower, unknown.upper, unknown.start, *model.require,
                   *(output.expression for output in model.outputs))
    used = scope.reach(name for expression in expressions for name in scope.mentioned(expression))
    return all(item.unit for item in (*model.constants, *model.parameters) if item.name in used)


@dataclass(frozen=True, slots=True)
class _Measure:
    """What is known of a subexpression: its unit (None: unknown, no more errors from it) and its value if rational."""
    unit: Unit | None
    value: Fraction | None = None


_UNCLEAR = _Measure(None)


class _Mismatch(Exception):
    """(node at fault, message, help)."""


class _Checker:
    def __init__(self, model, scope, findings):
        self.model = model
        self.scope = scope
        self.findings = findings
        self.known = {name: _Measure(ONE) for name in PREDEFINED}

    def run(self):
        model = self.model
        for constant in model.constants:
            unit = self._declared(("constants", constant.name), constant.unit)
            value = self._bounded(constant.expression, unit, self.scope.paths[constant.name], "constant")
            self.known[constant.name] = _Measure(unit, value)
        for parameter in model.parameters:
            self.known[parameter.name] = _Measure(self._declared(("parameters", parameter.name), parameter.unit))
        if model.unknown.name:
            self.known[model.unknown.name] = _Measure(self._declared(("unknown",), model.unknown.unit))
        for definition in model.definitions:
            self.known[definition.name] = self._measure(definition.expression, self.scope.paths[definition.name])
        for parameter in model.parameters:
            for index, end in enumerate((parameter.low, parameter.high)):
                path = ("parameters", parameter.name, "range", index)
                self._bounded(end, self._unit_of(parameter.name), path, "range")
        unknown, unit = model.unknown, self._unit_of(model.unknown.name)
        self._bounded(unknown.lower, unit, ("unknown", "bracket", 0), "bracket")
        self._bounded(unknown.upper, unit, ("unknown", "bracket", 1), "bracket")
        self._bounded(unknown.start, unit, ("unknown", "start"), "start")
        for index, condition in enumerate(model.require):
            self._measure(condition, ("domain", "require", index))
        self._measure(model.residual, ("residual", "equation"), is_equation=True)
        for output in model.outputs:
            self._output(output)
        for key, name, expression, path in published_expressions(model.published, self.findings.source):
            self._published(key, name, expression, path)

    def _unit_of(self, name):
        return self.known.get(name, _UNCLEAR).unit

    def _declared(self, path, text):
        """The unit declared in the table at `path`; None where there is none or it cannot be read."""
        if text is None:
            return None
        try:
            return parse_unit(text)
        except UnitError as error:
            self.findings.error((*path, "unit"), error.message, error.help, (error.start, error.end))
            return None

    def _output(self, output):
        path = self.scope.paths.get(output.name)
        if path is None:
            return
        measure = self._measure(output.expression, path)
        declared = self._declared(("outputs", output.name), output.unit)
        if declared and measure.unit and not _fits(measure.unit, declared):
            self.findings.error(("outputs", output.name, "unit"),
                                f"{output.name} is declared in {declared}, and its expression has {measure.unit}",
                                f"nothing is converted: declare {measure.unit}, or multiply by a constant with a unit")
        self.known[output.name] = _Measure(declared or measure.unit)

    def _published(self, key, name, expression, path):
        unit = self._unit_of(name)
        if key == "tolerance":
            unit = unit and unit.difference()
        self._bounded(expression, unit, path, "published value")

    def _bounded(self, expression, unit, path, what):
        """Checks a constant expression against the unit of what it bounds; its value where that is rational."""
        if expression is None:
            return None
        measure = self._measure(expression, path)
        is_bare = not any(name not in PREDEFINED for name in self.scope.mentioned(expression))
        if not is_bare and unit and measure.unit and not _fits(measure.unit, unit):
            self.findings.error(path, f"the {what} has the unit {measure.unit}, where {unit} is needed",
                                "nothing is converted: use one unit for both", (0, len(expression.text)))
        return measure.value

    def _measure(self, expression: Expression | None, path, is_equation=False) -> _Measure:
        """The unit of an expression; reports each place where units clash. What depends on a clash is unclear."""
        if expression is None:
            return _UNCLEAR
        measures = []                # of the nodes whose parent is still to come
        for node in postorder(expression.tree):
            if isinstance(node, Number):
                measures.append(_literal(node))
            elif isinstance(node, Name):
                measures.append(self.known.get(node.name, _UNCLEAR))
            else:
                arguments = measures[-len(node.args):]
                del measures[-len(node.args):]
                try:
                    equation = is_equation and node is expression.tree and "=" in expression.text
                    measures.append(_within_reach(node, _apply(node, arguments, equation)))
                except _Mismatch as mismatch:
                    place, message, help = mismatch.args
                    self.findings.error(path, message, help, (place.start, place.end))
                    measures.append(_UNCLEAR)
        return measures[0]


def _within_reach(node, measure):
    exponents = measure.unit.dimensions if measure.unit else ()
    if any(max(e.numerator.bit_length(), e.denominator.bit_length()) > 64 for _, e in exponents):
        raise _Mismatch(node, "the exponents of the unit are out of reach", _SWITCH_OFF)
    return measure


def _literal(node):
    digits, _, exponent = node.text.lower().partition("e")
    if not digits.strip("0."):
        return _Measure(_ANY, Fraction(0))
    small = len(digits) <= 40 and (not exponent or abs(int(exponent)) <= 40)
    return _Measure(ONE, Fraction(node.text) if small else None)


def _apply(node: Apply, arguments: list[_Measure], is_equation: bool) -> _Measure:
    """The unit of one operation. Raises _Mismatch."""
    op = node.op
    if op == "pow":
        return _power(node, *arguments)
    value = _rational(op, [argument.value for argument in arguments])
    units = [argument.unit for argument in arguments]
    if op == "where":
        return _Measure(_common(node.args[1:], units[1:], "the branches of where"))
    if OPERATIONS[op].kind == "logic" or None in units:
        return _UNCLEAR
    if op in ("add", "sub"):
        if is_equation:
            _common(node.args, units, "the sides of the equation")
            return _UNCLEAR
        return _Measure(_sum(node, *units), value)
    if op in _SAME:
        name = f"the sides of {_SYMBOLS[op]}" if op in _SYMBOLS else f"the arguments of {op}"
        unit = _common(node.args, units, name)
        if op in ("hypot", "atan2"):
            _refuse_points(node, units)
        return _Measure(ONE if op == "atan2" else unit)
    _refuse_points(node, units)
    if op in ("mul", "div"):
        first, second = units
        if _ANY in units:
            return _Measure(_ANY if first is _ANY or op == "mul" else first, value)
        return _Measure(first.times(second, 1 if op == "mul" else -1), value)
    if op in ("neg", "abs"):
        return _Measure(units[0], value)
    if op == "sign":
        return _Measure(ONE)
    if op in ("sqrt", "cbrt"):
        return _Measure(units[0] if units[0] is _ANY else units[0].to_the(Fraction(1, 2 if op == "sqrt" else 3)))
    if not _fits(units[0], ONE):
        raise _Mismatch(node.args[0], f"{op} takes a dimensionless number, not one with the unit {units[0]}",
                        f"divide by a quantity in {units[0]} first; {_SWITCH_OFF}"
                        if units[0].dimensions else _cure(ONE, units[0]))
    return _Measure(ONE)


def _sum(node, first, second):
    """The unit of a sum or difference, with the rules for points on a temperature scale."""
    if _ANY in (first, second):
        return second if first is _ANY else first
    if not (first.origin or second.origin):
        return _common(node.args, [first, second], f"the sides of {_SYMBOLS[node.op]}")
    if first.agrees(second):
        if node.op == "sub":
            return first.difference()
        raise _Mismatch(node, f"two temperatures in {first} are added",
                        f"add a difference in {first.difference()} to one of them; {_SWITCH_OFF}")
    point, step = (first, second) if first.origin else (second, first)
    if step.agrees(point.difference()) and (first.origin or node.op == "add"):
        return point
    return _common(node.args, [first, second], f"the sides of {_SYMBOLS[node.op]}")


def _power(node, base, exponent):
    if base.unit is None or exponent.unit is None:
        return _UNCLEAR
    _refuse_points(node, [base.unit, exponent.unit])
    if not _fits(exponent.unit, ONE):
        raise _Mismatch(node.args[1], f"the exponent has the unit {exponent.unit}", "an exponent is dimensionless")
    value = _rational("pow", [base.value, exponent.value])
    if base.unit is _ANY:
        return _Measure(_ANY, value)
    if base.unit.agrees(ONE):
        return _Measure(ONE, value)
    if exponent.value is None:
        raise _Mismatch(node.args[0], f"the base of a power has the unit {base.unit}, its exponent is no known number",
                        f"make the base dimensionless, or the exponent a number or a constant; {_SWITCH_OFF}")
    return _Measure(base.unit.to_the(exponent.value), value)


def _fits(unit, wanted):
    return unit is _ANY or unit.agrees(wanted)


def _common(nodes, units, name):
    """The unit that all of them have; None where one is unclear. Raises _Mismatch at the first that differs."""
    if None in units:
        return None
    known = [unit for unit in units if unit is not _ANY]
    for node, unit in zip(nodes, units):
        if not _fits(unit, known[0] if known else unit):
            raise _Mismatch(node, f"{name} have different units: {known[0]} and {unit}", _cure(known[0], unit))
    return known[0] if known else _ANY


def _cure(first, second):
    if first.origin or second.origin:
        return f"temperatures on one scale, or differences in {first.difference()}; {_SWITCH_OFF}"
    if first.dimensions == second.dimensions:
        return "nothing is converted: use one unit, or multiply by a constant that has a unit"
    if ONE in (first, second):
        return f"a literal is dimensionless: declare it in [constants] with its unit; {_SWITCH_OFF}"
    return f"check the formula and the units declared; {_SWITCH_OFF}"


def _refuse_points(node, units):
    for argument, unit in zip(node.args, units):
        if unit.origin and unit is not _ANY:
            name = _SYMBOLS.get(node.op, node.op)
            raise _Mismatch(argument, f"{name} is not for a temperature in {unit}, whose zero is a convention",
                            f"use kelvin, or a difference of temperatures; {_SWITCH_OFF}")


def _rational(op, values):
    """The value of an operation on rational numbers, where it is rational and of moderate size; else None."""
    if None in values:
        return None
    try:
        if op == "pow":
            base, exponent = values
            if exponent.denominator != 1 or abs(exponent) > 64:
                return None
            result = base ** int(exponent)
        elif op in ("add", "sub", "mul", "div", "neg"):
            result = {"add": lambda a, b: a + b, "sub": lambda a, b: a - b, "mul": lambda a, b: a * b,
                      "div": lambda a, b: a / b, "neg": lambda a: -a}[op](*values)
        else:
            return None
    except ZeroDivisionError:
        return None
    return result if max(result.numerator.bit_length(), result.denominator.bit_length()) <= _MAX_BITS else None
