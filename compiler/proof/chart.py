"""The equation over boxes of parameters and of the share of the bracket: forms, their derivatives, and their enclosures.

The unknown is written as lower + t*(upper - lower), so that every point of a box lies in its own bracket and what cancels at an end
does so exactly. An open upper end has a chart of its own, which counts t from there.

An enclosure is the intersection of natural ones (Moore), of the ends of the box where the form is monotone, and of the mean-value form in
what is left (A. Neumaier, Interval Methods for Systems of Equations, 1990, section 2.3).
"""

from dataclasses import dataclass

import flint
import numpy as np

from rootwright.calculus.balls import Balls, precision
from rootwright.calculus.differentiate import partials, sweep
from rootwright.calculus.lower import COMPARISONS, Lowering
from rootwright.calculus.program import Graph, evaluate, needed
from rootwright.proof.cancel import Cancelling, domain
from rootwright.proof.functions import ends
from rootwright.proof.intervals import Interval, Intervals

SHARE = "_share"            # the input t: names of a spec begin with a letter
_BITS = 200


@dataclass(frozen=True)
class Form:
    """Equal expressions of one function, as the author wrote it first; the last is differentiated. `domain` as of `cancel.domain`."""
    nodes: tuple[int, ...]
    domain: tuple | None


@dataclass(frozen=True)
class Values:
    """Enclosures of a form over boxes: arrays of one length."""
    low: np.ndarray
    high: np.ndarray
    undefined: np.ndarray
    jump: np.ndarray
    nonzero: np.ndarray

    def definite(self):
        """True where the form is defined and of one sign, not 0."""
        return ~self.undefined & ((self.low > 0) | (self.high < 0) | self.nonzero & ((self.low >= 0) | (self.high <= 0)))


class Chart:
    """`variables` are the names of the inputs in order, the share of the bracket last. `fixed` parameters are 1."""

    def __init__(self, model, fixed=(), from_upper=False):
        self.model = model
        self.graph = graph = Graph()
        self.arithmetic = Intervals()
        self.constants = {}
        unknown, share = graph.input(model.unknown.name), graph.input(SHARE)
        free = self._lowering(fixed, unknown)
        lower, upper = free.lower(model.unknown.lower), free.lower(model.unknown.upper)
        width = graph.sub(upper, lower)
        inside = graph.sub(upper, graph.mul(share, width)) if from_upper else graph.add(lower, graph.mul(share, width))
        bound = self._lowering(fixed, inside)
        residuals = [self._lowering(fixed, node).lower(model.residual) for node in (inside, lower, upper)]
        outputs = []
        for output in model.outputs:
            outputs.append(bound.lower(output.expression))
            bound.declare(output.name, outputs[-1])
        self.requirements = [bound.lower(condition) for condition in model.require]
        self.slacks = [graph.sub(*reversed(pair)) for condition in self.requirements for pair in self._at_most(condition)]
        switches = self._switches([residuals[0], *outputs])
        roots = [*residuals, width, lower, upper, *self.slacks, *(node for _, node in switches)]
        self.cancelling = Cancelling(graph, roots)
        self.residual, self.at_lower, self.at_upper, self.width = (self._form(node) for node in (*residuals, width))
        self.bracket = [self._form(lower), self._form(upper)]
        self.slack_forms = [self._form(node) for node in self.slacks]
        self.switches = [(guard, self._form(node)) for guard, node in switches]
        used = needed(graph.instructions, [*residuals, *self.requirements, lower, upper, *(node for _, node in switches)])
        names = {graph.instructions[node].value for node in used if graph.instructions[node].op == "input"}
        self.variables = [p.name for p in model.parameters if p.name in names and p.name not in fixed] + [SHARE]
        self.gradients = {}
        self.slope = Form((self._gradient(self.residual.nodes[-1])[-1],), None)
        self.relaxed = {end: self._relaxed(form) for end, form in (("lower", self.at_lower), ("upper", self.at_upper))}

    def _lowering(self, fixed, unknown):
        graph, model = self.graph, self.model
        lowering = Lowering(graph)
        for constant in model.constants:
            lowering.declare(constant.name, graph.named(constant.name, lowering.lower(constant.expression)))
        for parameter in model.parameters:
            lowering.declare(parameter.name, graph.number(1) if parameter.name in fixed else graph.input(parameter.name))
        lowering.declare(model.unknown.name, unknown)
        for definition in model.definitions:
            lowering.declare(definition.name, lowering.lower(definition.expression))
        return lowering

    def _form(self, node):
        twin = self.cancelling.of(node)
        conditions = domain(self.graph, node)
        if conditions is not None:
            conditions = tuple((kind, self.cancelling.of(arg)) for kind, arg in conditions)
        return Form((node,) if twin == node else (node, twin), conditions)

    def _at_most(self, condition):
        """(a, b) of every a <= b or a < b that must hold for the condition to hold."""
        instruction = self.graph.instructions[condition]
        if instruction.op == "and":
            return [pair for arg in instruction.args for pair in self._at_most(arg)]
        if instruction.op in ("le", "lt"):
            return [instruction.args]
        return [instruction.args[::-1]] if instruction.op in ("ge", "gt") else []

    def _switches(self, results):
        """(guard, left - right) of every switch: see `calculus/closure.py`."""
        graph, switches = self.graph, {}
        for result in results:
            for node, (_, guard) in sorted(sweep(graph, result).items()):
                instruction = graph.instructions[node]
                if instruction.op in ("min", "max"):
                    switches[(guard, *instruction.args)] = None
                elif instruction.op in ("abs", "sign"):
                    switches[(guard, instruction.args[0], graph.number(0))] = None
                elif instruction.op == "where" and graph.instructions[instruction.args[2]].op != "nan":
                    for left, right in self._comparisons(instruction.args[0]):
                        switches[(guard, left, right)] = None
        return [(guard, graph.sub(left, right)) for guard, left, right in switches
                if not (graph.is_constant(left) and graph.is_constant(right))]

    def _comparisons(self, condition):
        instruction = self.graph.instructions[condition]
        if instruction.op in COMPARISONS:
            return [instruction.args]
        return [pair for arg in instruction.args for pair in self._comparisons(arg)]

    def _relaxed(self, form):
        """[(sign, form)]: the residual at an end less or plus a slack, where that cancels. With slack >= 0 it bounds the residual."""
        graph, node = self.graph, form.nodes[-1]
        found = []
        for slack in self.slack_forms:
            for sign, other in ((-1, graph.sub(node, slack.nodes[-1])), (1, graph.add(node, slack.nodes[-1]))):
                twin = self.cancelling.of(other)
                if self._cost(twin) < self._cost(node):
                    found.append((sign, Form((twin,), None)))
        return found

    def _cost(self, node):
        return len(needed(self.graph.instructions, [node]))

    def _gradient(self, node):
        if node not in self.gradients:
            inputs = [self.graph.input(name) for name in self.variables]
            self.gradients[node] = partials(self.graph, node, inputs)
        return self.gradients[node]

    # -- evaluation

    def evaluate(self, nodes, low, high, opened=False):
        """{node: Interval} over boxes low, high of shape (boxes, variables); `opened` where t = 0 is left out."""
        self._know(nodes)
        inputs = {name: Interval(low[:, k], high[:, k]) for k, name in enumerate(self.variables)}
        if opened:
            inputs[SHARE].nonzero = np.ones(len(low), bool)
        with np.errstate(all="ignore"):
            return evaluate(self.graph.instructions, nodes, self.arithmetic, inputs, dict(self.constants))

    def _know(self, nodes):
        """Constants among what the nodes depend on, from ball arithmetic."""
        graph = self.graph
        for node in needed(graph.instructions, nodes, self.constants):
            if graph.is_constant(node):
                with precision(_BITS):
                    value = evaluate(graph.instructions, [node], Balls(), {})[node]
                    low, high = ends(value)
                undefined = False if value.is_finite() else np.array([True])
                self.constants[node] = Interval(np.array([low]), np.array([high]), undefined)

    def natural(self, form, low, high, opened=False):
        """Values of a form by plain interval evaluation of all its expressions."""
        values = self.evaluate(form.nodes, low, high, opened)
        return self._values(form, values, low, high, opened)

    def _values(self, form, values, low, high, opened):
        size = len(low)
        parts = [values[node] for node in form.nodes]
        bottom, top = np.full(size, -np.inf), np.full(size, np.inf)
        jump, nonzero = np.ones(size, bool), np.zeros(size, bool)
        for part in parts:
            bottom, top = np.maximum(bottom, part.low), np.minimum(top, part.high)
            jump, nonzero = jump & part.jump, nonzero | part.nonzero
        undefined = np.broadcast_to(parts[0].undefined | np.zeros(size, bool), (size,)).copy()
        if form.domain is not None and undefined.any():
            at = np.nonzero(undefined)[0]
            undefined[at] = ~self._in_domain(form, low[at], high[at], opened)
        bottom, top = np.where(bottom > top, -np.inf, bottom), np.where(bottom > top, np.inf, top)
        return Values(bottom, top, undefined, jump, nonzero)

    def _in_domain(self, form, low, high, opened):
        values = self.evaluate([node for _, node in form.domain], low, high, opened)
        fine = np.ones(len(low), bool)
        for kind, node in form.domain:
            value = values[node]
            fine &= value.apart() if kind == "nonzero" else \
                (value.low > 0) | (value.low >= 0) & value.nonzero if kind == "positive" else value.low >= 0
        return fine

    def slopes(self, form, low, high, opened=False):
        """Enclosures (low, high) of the partial derivatives, arrays (boxes, variables)."""
        nodes = self._gradient(form.nodes[-1])
        values = self.evaluate(nodes, low, high, opened)
        size = len(low)
        below = np.stack([np.broadcast_to(values[node].low, size) for node in nodes], axis=1)
        above = np.stack([np.broadcast_to(values[node].high, size) for node in nodes], axis=1)
        return below, above

    def sharp(self, form, low, high, opened=False):
        """(low, high) of a form that is defined and continuous over the boxes, and the slopes used.

        Ends of the box in the variables of a monotone form, the mean-value form in the others.
        """
        below, above = self.slopes(form, low, high, opened)
        rising, falling = below >= 0, above <= 0
        if opened:
            rising[:, -1] = falling[:, -1] = False
        bottom = np.where(rising, low, np.where(falling, high, low)), np.where(rising, low, np.where(falling, high, high))
        top = np.where(rising, high, np.where(falling, low, low)), np.where(rising, high, np.where(falling, low, high))
        both = np.concatenate([bottom[0], top[0]]), np.concatenate([bottom[1], top[1]])
        centre = _centres(*both)
        values = self.natural(form, np.concatenate([both[0], centre]), np.concatenate([both[1], centre]), opened)
        size = len(low)
        reach = mean_value(np.tile(below, (2, 1)), np.tile(above, (2, 1)), *both, centre)
        with np.errstate(all="ignore"):
            first = np.maximum(values.low[:size], np.nextafter(values.low[2 * size:3 * size] + reach[0][:size], -np.inf))
            last = np.minimum(values.high[size:2 * size], np.nextafter(values.high[3 * size:] + reach[1][size:], np.inf))
        first = np.where(np.isnan(first), values.low[:size], first)
        last = np.where(np.isnan(last), values.high[size:2 * size], last)
        return first, last, below, above


def mean_value(below, above, low, high, centre):
    """Enclosure (low, high) of the sum of slope times distance from the centre over boxes."""
    with np.errstate(all="ignore"):
        left, right = np.nextafter(low - centre, -np.inf), np.nextafter(high - centre, np.inf)
        left, right = np.where(low == centre, 0.0, left), np.where(high == centre, 0.0, right)
        products = [np.where(np.isnan(p), 0.0, p) for p in (below * left, below * right, above * left, above * right)]
        bottom = np.nextafter(np.minimum.reduce(products), -np.inf)
        top = np.nextafter(np.maximum.reduce(products), np.inf)
        nothing = (left == 0.0) & (right == 0.0)
        bottom, top = np.where(nothing, 0.0, bottom), np.where(nothing, 0.0, top)
        count = bottom.shape[1]
        total_low, total_high = bottom[:, 0], top[:, 0]
        for k in range(1, count):
            total_low = np.nextafter(total_low + bottom[:, k], -np.inf)
            total_high = np.nextafter(total_high + top[:, k], np.inf)
    return np.where(np.isnan(total_low), -np.inf, total_low), np.where(np.isnan(total_high), np.inf, total_high)


def _centres(low, high):
    with np.errstate(all="ignore"):
        centre = low + 0.5 * (high - low)
    return np.where(np.isfinite(centre), np.clip(centre, low, high), low)
