"""Model to Closure: everything a module computes, as one Program with an entry for each kernel.

Kernels, and their results in order:

    bracket    lower, upper, lower_rounding, upper_rounding
    residual   g, slope                       g and its derivative with respect to the unknown
    rounding   rounding, slope_rounding, curvature       bounds of the rounding errors of g and slope, and the second derivative of g
    outside    outside                        condition: a parameter outside its range, or a `require` that fails
    kink       kink                           condition: the root lies on a switch (needs the input `error_bound`)
    start      start                          the author's start
    outputs    one a output
    jacobian   M*N partial derivatives of the results, row-major (order 1 and 2)
    hessian    M*N*N second derivatives of the results (order 2)
"""

import math
import struct
from dataclasses import dataclass
from fractions import Fraction

from rootwright.calculus.constants import NotReal, nearest
from rootwright.calculus.differentiate import gated, partials, sweep
from rootwright.calculus.lower import Lowering, comparisons
from rootwright.calculus.magnitude import Magnitudes
from rootwright.calculus.precision import DOUBLE, Precision
from rootwright.calculus.program import Graph, Program
from rootwright.calculus.rounding import Rounding
from rootwright.calculus.second_order import hessian
from rootwright.calculus.switches import switches
from rootwright.spec.model import Model


@dataclass(frozen=True, slots=True)
class Promise:
    """What was proved over the operating range, in plain lines; the claims proved for real numbers, and those proved for the
    module's doubles besides; the SHA-256 of the certificate that says so."""
    lines: tuple[str, ...]
    proved: tuple[str, ...]
    computed: tuple[str, ...]
    digest: str


@dataclass(frozen=True)
class Closure:
    """A Model with all it computes. `kernels` maps a kernel to its results, which are results of the Program."""
    model: Model
    program: Program
    kernels: dict[str, tuple[str, ...]]
    ranges: tuple[tuple[float, float], ...]     # the parameters' ranges, rounded
    limit: int                                  # evaluations that always suffice
    constants: dict[int, tuple[float, float]]   # constant instruction -> nearest number, relative rounding in 2^-digits
    order: int                                  # derivatives up to this order: 0, 1 or 2
    precision: Precision = DOUBLE
    promise: Promise | None = None              # set where a certificate came along


def close(model, order=1, precision=DOUBLE):
    """Closure of a checked Model with derivatives up to `order`. Raises NotReal where a constant is not finite and real."""
    return _Closing(model, order, precision).closure()


class _Closing:
    def __init__(self, model, order, precision):
        self.model, self.order = model, order
        self.graph = graph = Graph(precision=precision)
        self.lowering = Lowering(graph)
        for constant in model.constants:
            node = graph.named(constant.name, self.lowering.lower(constant.expression))
            nearest(graph, node)
            self.lowering.declare(constant.name, node)
        self.parameters = {}
        self.ranges = {}
        for parameter in model.parameters:
            self.parameters[parameter.name] = graph.input(parameter.name)
            self.lowering.declare(parameter.name, self.parameters[parameter.name])
            ends = (self.lowering.lower(parameter.low), self.lowering.lower(parameter.high))
            self.ranges[parameter.name] = tuple(nearest(graph, end) for end in ends)
        self.unknown = graph.input(model.unknown.name)
        self.lowering.declare(model.unknown.name, self.unknown)
        for definition in model.definitions:
            self._declare(definition.name, self.lowering.lower(definition.expression))
        self.kernels = {}
        self.results = {}

    def _declare(self, name, node):
        self.lowering.declare(name, node)
        self._name(node, name)

    def label(self, node, name):
        """Name what we derive, unless the name is the author's for something else."""
        if name not in self.lowering.names:
            self._name(node, name)

    def _name(self, node, name):
        """Name an instruction, unless it has a name or needs none."""
        if self.graph.instructions[node].op not in ("input", "number", "named", "pi", "nan"):
            self.graph.labels.setdefault(node, name)

    def _kernel(self, kernel, **results):
        self.kernels[kernel] = tuple(results)
        self.results.update(results)

    def closure(self):
        graph, lower, model = self.graph, self.lowering.lower, self.model
        g = lower(model.residual)
        ends = [lower(model.unknown.lower), lower(model.unknown.upper)]
        outputs = {}
        for output in model.outputs:
            outputs[output.name] = lower(output.expression)
            self._declare(output.name, outputs[output.name])
        require = [lower(condition) for condition in model.require]
        start = None if model.unknown.start is None else lower(model.unknown.start)

        self.authored = len(graph.instructions)
        slope = self._derivatives("g", g)
        (curvature,) = partials(graph, slope, [self.unknown])
        jacobian = self._jacobian(g, slope, outputs) if self.order >= 1 else {}

        magnitudes = Magnitudes(graph, self.ranges)
        places = [magnitudes.of(end) for end in ends]
        rounding = running(graph, self.ranges, model.unknown.name, places)

        self._kernel("bracket", lower=ends[0], upper=ends[1],
                     lower_rounding=rounding.bound(ends[0]), upper_rounding=rounding.bound(ends[1]))
        self._kernel("residual", g=g, slope=slope)
        self._kernel("rounding", rounding=rounding.bound(g), slope_rounding=rounding.bound(slope), curvature=curvature)
        self._kernel("outside", outside=self._outside(require))
        kink = self._kink([g, *outputs.values()], rounding)
        if kink is not None:
            self._kernel("kink", kink=kink)
        if start is not None:
            self._kernel("start", start=start)
        if outputs:
            self._kernel("outputs", **outputs)
        if self.order >= 1:
            self._kernel("jacobian", **jacobian)
        if self.order == 2:
            roots = list(jacobian.values())[:len(self.parameters)]
            self._kernel("hessian", **hessian(self, g, slope, outputs, roots, rounding.magnitudes))

        for node in range(len(graph.instructions)):
            if graph.is_constant(node):
                _touch(graph, node)
        program = Program(tuple(graph.instructions), dict(graph.labels), self.results)
        return Closure(model, program, self.kernels, tuple(self.ranges.values()), limit(*places, graph.precision),
                       dict(graph.constants), self.order, graph.precision)

    def _derivatives(self, prefix, result):
        """Derivative with respect to the unknown; the adjoints of definitions and parameters get names."""
        adjoints = sweep(self.graph, result)
        for name, node in self.lowering.names.items():
            if node in adjoints and node != result and adjoints[node][0] >= self.authored:
                self.label(gated(self.graph, *adjoints[node]), f"{prefix}_{name}")
        if self.unknown not in adjoints:
            return self.graph.number(0)
        return gated(self.graph, *adjoints[self.unknown])

    def _jacobian(self, g, slope, outputs):
        """dY/dP of every result: -g_P/g_x for the unknown, f_P + f_x*dx/dP for an output f; 0 where not differentiated."""
        graph, unknown = self.graph, self.model.unknown.name
        wanted = [parameter.differentiate for parameter in self.model.parameters]
        nodes = list(self.parameters.values())
        entries = {}
        roots = [graph.neg(graph.div(g_p, slope)) if want else graph.number(0)
                 for g_p, want in zip(partials(graph, g, nodes), wanted)]
        for name, root in zip(self.parameters, roots):
            self.label(root, f"{unknown}_{name}")
        entries[unknown] = roots
        for name, node in outputs.items():
            self._derivatives(name, node)
            along, *direct = partials(graph, node, [self.unknown, *nodes])
            entries[name] = [graph.add(f_p, graph.mul(along, root)) if want else graph.number(0)
                             for f_p, root, want in zip(direct, roots, wanted)]
        return {f"d{result}/d{parameter}": entry for result, row in entries.items()
                for parameter, entry in zip(self.parameters, row)}

    def _outside(self, require):
        """Condition: not (all parameters in their ranges and every requirement holds); true where a parameter is NaN."""
        graph = self.graph
        inside = None
        for name, (low, high) in self.ranges.items():
            node = self.parameters[name]
            for test, end in (("ge", low), ("le", high)):
                within = graph.apply(test, node, graph.number(Fraction(end)))
                inside = within if inside is None else graph.and_(inside, within)
        for condition in require:
            for left, right in comparisons(graph, condition):
                if not (self.lowering.is_finite(left) and self.lowering.is_finite(right)):
                    inside = graph.and_(inside, graph.apply("ordered", left, right))
            inside = graph.and_(inside, condition)
        return graph.not_(inside)

    def _kink(self, results, rounding):
        """Condition: at some switch, |left - right| is within its rounding error and what the root's error bound moves it by."""
        graph = self.graph
        kink = None
        for guard, left, right in switches(graph, results):
            distance = graph.sub(left, right)
            (rate,) = partials(graph, distance, [self.unknown])
            reach = graph.add(rounding.sign_bound(distance),
                              graph.mul(graph.abs_(rate), graph.input("error_bound")))
            near = graph.le(graph.abs_(distance), reach)
            near = near if guard is None else graph.and_(guard, near)
            kink = near if kink is None else graph.or_(kink, near)
        return kink


def running(graph, ranges, unknown, places):
    """Rounding bounds over the box of ranges {parameter: (low, high)}; places: (low, high) of either end of the bracket."""
    return Rounding(graph, Magnitudes(graph, ranges | {unknown: (places[0][0], places[1][1])}))


def _touch(graph, node):
    """Make sure that the value of a constant is known; a derivative's constant that overflows is infinite, as at run time."""
    try:
        nearest(graph, node)
    except NotReal:
        exact = graph.literal(node)
        if exact is not None:
            graph.constants[node] = (math.inf if exact > 0 else -math.inf, 0.0)


def limit(lower, upper, precision=DOUBLE):
    """Evaluations that always suffice: three a halving of the number of numbers in the bracket, both ends, and the closing
    ones.

    Only a bracket that does not depend on the parameters gives fewer than the general 200 (104 in single precision).
    """
    general = 3 * precision.bits + 8
    if lower[0] != lower[1] or upper[0] != upper[1]:
        return general
    numbers = _ordinal(upper[1], precision) - _ordinal(lower[0], precision)
    return min(general, 3 * max(1, numbers.bit_length()) + 5)


def _ordinal(value, precision):
    """Position of a number in the ordered list of all of a precision, that is of its bits read as a whole number."""
    integer, real = {64: "qd", 32: "if"}[precision.bits]
    (bits,) = struct.unpack(f"<{integer}", struct.pack(f"<{real}", value))
    return bits if bits >= 0 else -(bits & (2 ** (precision.bits - 1) - 1))
