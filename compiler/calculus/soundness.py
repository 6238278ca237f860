"""Numeric checks of a Model: what can be seen to be wrong before anything is compiled, with the place in the spec."""

import math

from rootwright.calculus.closure import close
from rootwright.calculus.constants import NotReal, nearest
from rootwright.calculus.doubles import Doubles
from rootwright.calculus.lower import Lowering
from rootwright.calculus.precision import DOUBLE
from rootwright.calculus.program import Graph, interpret
from rootwright.calculus.sampling import sample
from rootwright.spec.source import load
from rootwright.spec.tables import Findings, TooMany

SAMPLES = 200


def examine(model, data, filename, order=1, precision=DOUBLE):
    """(Closure, warnings) of a checked Model and the bytes it was read from; (None, diagnostics) where a check fails."""
    source, _, _ = load(data, filename)
    examination = _Examination(model, Findings(source), precision)
    try:
        examination.check_constants()
    except TooMany:
        pass                        # as many as anyone wants to read
    if examination.findings.failed:
        return None, examination.findings.in_order()
    closure = close(model, order, precision)
    examination.check_slope(closure)
    examination.check_brackets(closure)
    return None if examination.findings.failed else closure, examination.findings.in_order()


class _Examination:
    def __init__(self, model, findings, precision):
        self.model = model
        self.findings = findings
        self.graph = Graph(precision=precision)
        self.lowering = Lowering(self.graph)
        self.checked = set()

    def check_constants(self):
        """Every number and every part that needs no parameter is a finite real number; ranges are in order."""
        model, declare = self.model, self.lowering.declare
        for constant in model.constants:
            path = ("constants", constant.name)
            if path + ("value",) in self.findings.source.places:
                path += ("value",)
            declare(constant.name, self.graph.named(constant.name, self._checked(constant.expression, path)))
        for parameter in model.parameters:
            self._check_range(parameter)
            declare(parameter.name, self.graph.input(parameter.name))
        declare(model.unknown.name, self.graph.input(model.unknown.name))
        for definition in model.definitions:
            declare(definition.name, self._checked(definition.expression, ("definitions", definition.name)))
        for k, end in enumerate((model.unknown.lower, model.unknown.upper)):
            self._checked(end, ("unknown", "bracket", k))
        if model.unknown.start is not None:
            self._checked(model.unknown.start, ("unknown", "start"))
        for k, condition in enumerate(model.require):
            self._checked(condition, ("domain", "require", k))
        self._checked(model.residual, ("residual", "equation"))
        for output in model.outputs:
            path = ("outputs", output.name)
            if path + ("expression",) in self.findings.source.places:
                path += ("expression",)
            declare(output.name, self._checked(output.expression, path))
        for k, published in enumerate(model.published):
            for table in ("given", "expect", "tolerance"):
                for name, expression in getattr(published, table):
                    path = ("published", k, table, name)
                    self._checked(expression, path if path in self.findings.source.places else path[:-1])

    def _checked(self, expression, path):
        places = {}
        node = self.lowering.lower(expression, places)
        for part, span in places.items():
            if self.graph.is_constant(part) and part not in self.checked:
                self.checked.add(part)
                try:
                    nearest(self.graph, part)
                except NotReal:
                    self.findings.error(path, f"`{expression.text[span[0]:span[1]]}` is not a finite real number",
                                        f"constants must be real and below {self.graph.precision.largest_decimal} in size", span)
                    break
        return node

    def _value(self, node):
        try:
            return nearest(self.graph, node)
        except NotReal:
            return math.nan

    def _check_range(self, parameter):
        path = ("parameters", parameter.name, "range")
        low, high = (self._value(self._checked(end, path + (k,))) for k, end in enumerate((parameter.low, parameter.high)))
        if low > high:
            self.findings.error(path, f"the range of `{parameter.name}` is reversed: {low!r} is above {high!r}",
                                f"write the lower end first: range = [{parameter.high.text}, {parameter.low.text}]")
        elif parameter.spread == "log" and low <= 0.0:
            self.findings.error(path + (0,), f'`{parameter.name}` has spread = "log" and a range that is not positive',
                                'a log spread needs a lower end above 0; or leave the spread linear')

    def check_slope(self, closure):
        node = closure.program.results["slope"]
        if closure.program.instructions[node].op == "number" and closure.program.instructions[node].value == 0:
            self.findings.error(("residual", "equation"), f"the residual does not change with the unknown `{self.model.unknown.name}`",
                                "the unknown must not cancel, nor stand only where the residual is constant in steps")

    def check_brackets(self, closure):
        """The bracket at sampled points of the operating range: an error if none is in order, a warning if some are not."""
        inside = [point for point in sample(closure, SAMPLES) if not _result(closure, "outside", point)]
        if not inside:
            self.findings.warning(("domain", "require"), f"none of {SAMPLES} sampled points of the ranges meets every requirement",
                                  "is the operating range empty? A condition may be the wrong way round")
            return
        ends = [tuple(_result(closure, name, point) for name in closure.kernels["bracket"]) for point in inside]
        bad = [k for k, (low, high, low_error, high_error) in enumerate(ends)
               if not (math.isfinite(low) and math.isfinite(high) and low - high <= low_error + high_error)]
        if bad:
            point, (low, high, *_) = inside[bad[0]], ends[bad[0]]
            where = ", ".join(f"{name} = {value:.6g}" for name, value in point.items())
            everywhere = len(bad) == len(inside)
            message = f"the bracket is [{low:.6g}, {high:.6g}] at {where}"
            message += f": reversed or not finite at every one of {len(inside)} sampled points" if everywhere else \
                f", and wrong at {len(bad)} of {len(inside)} sampled points"
            (self.findings.error if everywhere else self.findings.warning)(
                ("unknown", "bracket"), message, "the lower end must be finite and at or below the upper end; a `require` can shut corners out")


def _result(closure, name, point):
    return interpret(closure.program, Doubles(), point, [name])[name]
