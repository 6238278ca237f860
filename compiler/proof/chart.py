"""The equation over boxes of parameters and of the share of the bracket: forms, their derivatives, and their enclosures.

The unknown is written as lower + t*(upper - lower), so that every point of a box lies in its own bracket and what cancels at an end
does so exactly. An open upper end has a chart of its own, which counts t from there.

An enclosure is the intersection of natural ones (Moore), of the ends of the box where the form is monotone, and of the mean-value form in
what is left (A. Neumaier, Interval Methods for Systems of Equations, 1990, section 2.3).
"""

from dataclasses import dataclass
from fractions import Fraction
from functools import cached_property

import numpy as np

from rootwright.calculus.balls import Balls, precision
from rootwright.calculus.differentiate import partials
from rootwright.calculus.lower import Lowering
from rootwright.calculus.program import Graph, Node, evaluate, needed
from rootwright.calculus.switches import switches
from rootwright.proof.cancel import Cancelling, domain, factors, substituted, with_inputs
from rootwright.proof.functions import ends
from rootwright.proof.groups import groups
from rootwright.proof.intervals import Interval, Intervals
from rootwright.proof.limits import Limits

_SWITCHING = ("where", "min", "max", "abs", "sign")
SHARE = "_share"            # the input t: names of a spec begin with a letter
_BITS = 200
_LONGEST = 120              # operations of a relaxed form
_LONGER = 10                # that a relaxed form may have more than the form itself
_RATIOS = 3                 # multiples of a slack that are tried
_CURVED = 3                 # variables of a form up to which its second derivatives are used
_SHORTER = 0.75             # of the operations of a derivative that an equal of it may have


@dataclass(frozen=True)
class Form:
    """Equal expressions of one function, as the author wrote it first; the last is differentiated.

    `domain` as of `cancel.domain`; empty where the function is known to have a value, or it does not matter where it has none.
    """
    nodes: tuple[int, ...]
    domain: tuple | None


@dataclass(frozen=True)
class Factor:
    form: Form
    count: int
    relaxed: tuple              # (sign, Form, Form of the slack): see `Chart._relaxed`


@dataclass(frozen=True)
class Values:
    """Enclosures of a form over boxes: arrays of one length."""
    low: np.ndarray
    high: np.ndarray
    undefined: np.ndarray
    jump: np.ndarray
    nonzero: np.ndarray
    regular: np.ndarray         # what is differentiated is defined and continuous: `Chart.sharp` may be asked

    def definite(self):
        """True where the form is defined and of one sign, not 0."""
        return ~self.undefined & ((self.low > 0) | (self.high < 0) | self.nonzero & ((self.low >= 0) | (self.high <= 0)))


class Chart:
    """`variables` are the names of the inputs in order, the share of the bracket last. `fixed` parameters are 1.

    With `edges` a range ends where its decimals say, not at the next double: its ends are requirements as well. `grouped`: parameters
    that matter only together are one variable (`groups`); a requirement on them apart is left out.
    """

    def __init__(self, model, fixed=(), from_upper=False, edges=False, grouped=False):
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
        free_residual = free.lower(model.residual)
        self.groups = ()
        if grouped:
            self.groups, replaced = self._grouped(free_residual, residuals[0], lower, upper, outputs, unknown)
            residuals = [replaced(node) for node in residuals]
            free_residual, lower, upper, width, inside = map(replaced, (free_residual, lower, upper, width, inside))
            outputs = [replaced(node) for node in outputs]
            self.every_requirement, kept = self.requirements, [replaced(node) for node in self.requirements]
            self.requirements = [node for node in kept if not self._inputs([node]) & self.absorbed]
        self.slacks = [slack for condition in self.requirements for pair in self._at_most(condition)
                       for slack in self._slacks(graph.sub(*reversed(pair)), 1)]
        self.slacks += self._edges(free) if edges else []
        passed = [(guard, graph.sub(left, right)) for guard, left, right in switches(graph, [residuals[0], *outputs])]
        roots = [*residuals, width, lower, upper, *self.slacks, *(node for _, node in passed)]
        roots.append(free_residual)
        self.cancelling, self.expanding = Cancelling(graph, roots), Cancelling(graph, roots, exponentials=True)
        self.residual = self._form(residuals[0])
        self.limits, self.limit_names = None, ()
        if from_upper or model.unknown.open_lower:
            self.limits = Limits(graph, self.cancelling, residuals[0], share)
            first, *others = self.residual.nodes
            if self.limits.quotients:
                self.limit_names = tuple(graph.instructions[node].value for node in self.limits.quotients)
                self.residual = Form((first, self.limits.node, *(others or [first])), self.residual.domain)
        self.at_lower, self.at_upper, self.width = (self._form(node, True) for node in (*residuals[1:], width))
        self.bracket = [self._form(lower), self._form(upper)]
        self.slack_forms = [self._form(node) for node in self.slacks]
        self.switches = [(guard, self._form(node)) for guard, node in passed]
        names = self._inputs([*residuals, *self.requirements, lower, upper, *(node for _, node in passed)])
        self.variables = [name for name in (*(p.name for p in model.parameters), *(group.name for group in self.groups)) if name in names]
        self.variables.append(SHARE)
        self.steps_along = self._steps_along(self.residual.nodes[0], share)
        self.gradients, self.hessians, self.beside = {}, {}, {}
        self._along = free_residual, inside, -1 if from_upper else 1

    @cached_property
    def slope(self):
        """g_x, all over the bracket."""
        return self._slope(*self._along)

    @cached_property
    def effort(self):
        """Operations of g_x and its derivatives."""
        node = self.slope.nodes[-1]
        return len(needed(self.graph.instructions, [node, *self._gradient(node)]))

    @cached_property
    def whole(self):
        """The residual inside the bracket, as a factor."""
        return Factor(self.residual, 1, self._relaxed(self.residual.nodes[-1]))

    @cached_property
    def products(self):
        """{"lower", "upper", "width": the residual at an end, the bracket's width, in factors}."""
        return {name: self._product(form) for name, form in
                (("lower", self.at_lower), ("upper", self.at_upper), ("width", self.width))}

    def prepare(self, limit=None):
        """Works out, in an order that is always the same, what cancels: all processes that judge boxes then use the same forms.

        Left where it is when the time of a `Limit` is over.
        """
        if limit and limit.reached(np.inf):
            return
        factors_ = [self.whole, *(factor for product in self.products.values() for factor in (product[0], *product[2]))]
        forms = [self.slope, *(factor.form for factor in factors_), *(part[1] for factor in factors_ for part in factor.relaxed)]
        for form in forms:
            if limit and limit.reached(np.inf):
                return
            node = form.nodes[-1]
            self.gradients[node] = [self._shortest(part) for part in self._gradient(node)]

    def _inputs(self, nodes):
        """Names of the inputs that nodes depend on."""
        instructions = self.graph.instructions
        return {instructions[node].value for node in needed(instructions, nodes) if instructions[node].op == "input"}

    def _grouped(self, free_residual, residual, lower, upper, outputs, unknown):
        """(groups, function that puts them into a node). Only values without switches are taken, which are claimed about apart."""
        graph, instructions = self.graph, self.graph.instructions
        roots = [free_residual, lower, upper]
        for guard, left, right in switches(graph, [residual, *outputs]):
            roots += [left, right] + ([guard] if guard is not None else [])
        names = {p.name for p in self.model.parameters}
        found = [group for group in groups(graph, roots, names, {self.model.unknown.name, SHARE})
                 if not any(instructions[node].op in _SWITCHING for node in needed(instructions, [group.node]))]
        self.absorbed = {name for group in found for name in group.absorbed}
        values = {Node(group.node): graph.input(group.name) for group in found}
        return tuple(found), lambda node: substituted(graph, node, values)

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

    def _edges(self, lowering):
        """end - parameter and parameter - end, for the ends of ranges that are no doubles."""
        graph, slacks = self.graph, []
        for parameter in self.model.parameters:
            node = graph.input(parameter.name)
            for end, slack in ((lowering.lower(parameter.low), lambda end: graph.sub(node, end)),
                               (lowering.lower(parameter.high), lambda end: graph.sub(end, node))):
                value = graph.rational(end)
                if value is None or Fraction(float(value)) != value:
                    slacks.append(slack(end))
        return slacks

    def _form(self, node, expand=False):
        twin = self.cancelling.of(node)
        expanded = self._expanded(node) if expand else []
        conditions = domain(self.graph, node)
        if conditions is not None:
            conditions = tuple((kind, self.cancelling.of(arg)) for kind, arg in conditions)
        others = [other for other in dict.fromkeys(expanded) if other not in (node, twin)]
        return Form((node, *others, twin) if twin != node else (node, *others), conditions)

    def _slope(self, free, inside, direction):
        """The residual's derivative with respect to the unknown: taken before the share comes in, and by the share over the width.

        Wherever the residual is defined and continuous an enclosure holds for all difference quotients, infinite slopes included.
        """
        graph, name = self.graph, self.model.unknown.name
        (node,) = partials(graph, free, [graph.input(name)])
        along = self._gradient(self.residual.nodes[-1])[-1]
        forms = [node, self.cancelling.of(node), *self._expanded(node)]
        forms = [substituted(graph, form, {graph.input(name): inside}) for form in forms]
        forms += [self.cancelling.of(forms[0]), graph.div(along, graph.mul(direction, self.width.nodes[-1]))]
        others = sorted(dict.fromkeys(forms[1:]), key=lambda form: (-self._cost(form), form))
        if self._cost(others[-1]) > _LONGEST:
            others = others[-1:]
        return Form((forms[0], *(form for form in others if form != forms[0])), ())

    def _at_most(self, condition):
        """(a, b) of every a <= b or a < b that must hold for the condition to hold."""
        instruction = self.graph.instructions[condition]
        if instruction.op == "and":
            return [pair for arg in instruction.args for pair in self._at_most(arg)]
        if instruction.op in ("le", "lt"):
            return [instruction.args]
        return [instruction.args[::-1]] if instruction.op in ("ge", "gt") else []

    def _steps_along(self, node, share):
        """True where the residual may jump on the way along the bracket: a choice on parameters alone is made once."""
        instructions = self.graph.instructions
        moved = set()
        for step in needed(instructions, [node]):
            instruction = instructions[step]
            if step == share or moved & set(instruction.args):
                moved.add(step)
            if instruction.op == "where" and instructions[instruction.args[2]].op != "nan" and instruction.args[0] in moved \
                    or instruction.op in ("sign", "atan2") and moved & set(instruction.args):
                return True
        return False

    def _slacks(self, node, sign):
        """What is not negative (sign 1: not positive) where the node is not: each part of a max that pulls it down stands for the whole."""
        graph = self.graph
        op, args = graph.instructions[node].op, [Node(arg) for arg in graph.instructions[node].args]
        if op == ("min" if sign > 0 else "max"):
            return [part for arg in args for part in self._slacks(arg, sign)]
        if op in ("add", "sub"):
            return [graph.apply(op, a, b) for a in self._slacks(args[0], sign) for b in self._slacks(args[1], sign if op == "add" else -sign)]
        if op == "neg":
            return [graph.neg(part) for part in self._slacks(args[0], -sign)]
        return [node]

    def _product(self, form):
        """(the form itself, its constant factor, the others)."""
        constant, counts = factors(self.graph, (self._expanded(form.nodes[-1]) or form.nodes)[-1])
        whole = Factor(form, 1, self._relaxed(form.nodes[-1]))
        return whole, constant, [Factor(Form((node,), ()), count, ()) for node, count in counts.items()]

    def _relaxed(self, node):
        """[(sign, form, slack)]: the node less a multiple m of a slack. With slack >= 0 it bounds the node from below for m > 0, else from above."""
        found = []
        for slack in self.slack_forms:
            ratios = self.cancelling.common(node, slack.nodes[-1]) or self.expanding.ratios(node, slack.nodes[-1])
            for ratio in sorted(set(ratios), key=lambda ratio: (-ratios.count(ratio), ratio))[:_RATIOS]:
                other = self.cancelling.combined(node, slack.nodes[-1], -ratio)
                nodes = dict.fromkeys([self.cancelling.of(other), *self._expanded(other)])
                longest = max(_LONGEST, self._cost(node) + _LONGER)
                nodes = tuple(twin for twin in nodes if self._cost(twin) <= longest)
                cancelled = min(map(self._cost, nodes), default=longest) < self._cost(node) + self._cost(slack.nodes[-1])
                if nodes and cancelled and ratio:
                    found.append((-1 if ratio > 0 else 1, Form(nodes, ()), slack))
        return tuple(found)

    def _expanded(self, node):
        if self._cost(node) > _LONGEST:
            return []
        return self.expanding.expanded(self.cancelling.of(node))

    def _cost(self, node):
        return len(needed(self.graph.instructions, [node]))

    def _gradient(self, node):
        if node not in self.gradients:
            inputs = [self.graph.input(name) for name in self.variables]
            self.gradients[node] = partials(self.graph, node, inputs)
        return self.gradients[node]

    def at_point(self, form, point):
        """The form at exact parameters {name: Fraction}, written anew, so that what they cancel is gone."""
        graph = self.graph
        numbers = {name: graph.number(value) for name, value in point.items()}
        node = with_inputs(graph, form.nodes[0], numbers)
        return Form((node, *self._expanded(node), self.cancelling.of(node)), None)

    def corners(self):
        """{parameter: (low, high)} as nodes, of all that are inputs of the chart."""
        lowering = self._lowering((), self.graph.input(self.model.unknown.name))
        return {p.name: (lowering.lower(p.low), lowering.lower(p.high)) for p in self.model.parameters}

    def _shortest(self, node):
        """A much shorter equal of a derivative where there is one: what cancels there encloses better, and faster.

        One that is hardly shorter stands beside it (`beside`).
        """
        other = min(self._expanded(node), key=self._cost, default=node)
        if self._cost(other) <= _SHORTER * self._cost(node):
            return other
        if self._cost(other) <= self._cost(node) and other != node:
            self.beside[node] = other
        return node

    # -- evaluation

    def evaluate(self, nodes, low, high, opened=False):
        """{node: Interval} over boxes low, high of shape (boxes, variables); `opened` where t = 0 is left out."""
        self._know(nodes)
        inputs = {name: Interval(low[:, k], high[:, k]) for k, name in enumerate(self.variables)}
        if opened:
            inputs[SHARE].nonzero = np.ones(len(low), bool)
        if self.limits:
            inputs |= self.limits.values(self.evaluate, nodes, low, high)
        with np.errstate(all="ignore"):
            return evaluate(self.graph.instructions, nodes, self.arithmetic, inputs, dict(self.constants))

    def _know(self, nodes):
        """Constants among what the nodes depend on, from ball arithmetic."""
        graph = self.graph
        for node in needed(graph.instructions, nodes, self.constants):
            exact = graph.rational(node)
            if exact is not None:
                self.constants[node] = self.arithmetic.number(exact)
            elif graph.is_constant(node):
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
            jump, nonzero = jump & part.jump, nonzero | part.nonzero & ~np.asarray(part.undefined)     # a form says nothing where it has no value
        undefined = np.broadcast_to(parts[0].undefined | np.zeros(size, bool), (size,)).copy()
        if form.domain is not None and undefined.any():
            at = np.nonzero(undefined)[0]
            undefined[at] = ~self._in_domain(form, low[at], high[at], opened)
        bottom, top = np.where(bottom > top, -np.inf, bottom), np.where(bottom > top, np.inf, top)
        last = parts[-1]
        regular = ~(undefined | jump) if form.domain != () else np.broadcast_to(~np.asarray(last.undefined | last.jump), (size,))
        return Values(bottom, top, undefined, jump, nonzero, regular)

    def _in_domain(self, form, low, high, opened):
        """True where every condition on the domain holds all over the box."""
        fine = np.ones(len(low), bool)
        for kind, node in form.domain:
            left = np.nonzero(fine)[0]
            fine[left] = self._holds(kind, node, low[left], high[left], opened)[0]
        return fine

    def _holds(self, kind, node, low, high, opened):
        """(where a condition holds all over the box, slopes of its left side where that had to be asked: boxes, low, high)."""
        value = self.evaluate([node], low, high, opened)[node]
        size = len(low)
        bottom, top = np.broadcast_to(value.low, size).copy(), np.broadcast_to(value.high, size).copy()
        nonzero = np.broadcast_to(value.nonzero, size)
        left = np.nonzero(~_met(kind, bottom, top, nonzero) & ~np.broadcast_to(value.jump, size))[0]
        slopes = None
        if len(left):
            bottom[left], top[left], *slopes = self.sharp(Form((node,), None), low[left], high[left], opened)
        return _met(kind, bottom, top, nonzero), (left, slopes)

    def trouble(self, form, low, high, opened=False):
        """How much each variable moves the conditions on the domain that do not hold: (boxes, variables), ones where it is not known."""
        smear = np.zeros(low.shape)
        for kind, node in form.domain or ():
            holds, (left, slopes) = self._holds(kind, node, low, high, opened)
            if slopes:
                part = normalised(*slopes, low[left], high[left])
                part[holds[left]] = 0.0
                smear[left] += part
        return np.where(smear.max(axis=1, keepdims=True) > 0, smear, 1.0)

    def slopes(self, form, low, high, opened=False):
        """Enclosures (low, high) of the partial derivatives, arrays (boxes, variables)."""
        nodes = self._gradient(form.nodes[-1])
        beside = [self.beside.get(node, node) for node in nodes]
        values = self.evaluate([*nodes, *beside], low, high, opened)
        size = len(low)
        with np.errstate(invalid="ignore"):
            below = np.stack([np.broadcast_to(np.maximum(values[a].low, values[b].low), size) for a, b in zip(nodes, beside)], axis=1)
            above = np.stack([np.broadcast_to(np.minimum(values[a].high, values[b].high), size) for a, b in zip(nodes, beside)], axis=1)
        return np.minimum(below, above), np.maximum(below, above)

    def moves(self, form):
        """1 for the variables that a form depends on, else 0."""
        return np.array([float(self.graph.literal(node) != 0) for node in self._gradient(form.nodes[-1])])

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


    def sharper(self, form, low, high, opened=False):
        """As `sharp`; where that leaves the sign open and the middle of the box has one, Taylor's form of second order as well."""
        first, last, below, above = self.sharp(form, low, high, opened)
        at = np.nonzero((first <= 0) & (last >= 0))[0]
        moving = [k for k, moves in enumerate(self.moves(form)) if moves]
        if not len(at) or not 0 < len(moving) <= _CURVED:
            return first, last, below, above
        rising, falling = below[at] >= 0, above[at] <= 0
        if opened:
            rising[:, -1] = falling[:, -1] = False
        centre = _centres(low[at], high[at])
        middle = self.natural(form, centre, centre, opened)
        positive = middle.low > 0
        some = positive | (middle.high < 0)
        at, rising, falling, positive = at[some], rising[some], falling[some], positive[some, None]
        if len(at):
            to_low = np.where(positive, rising, falling)
            to_high = np.where(positive, falling, rising) & ~to_low
            a, b = np.where(to_high, high[at], low[at]), np.where(to_low, low[at], high[at])
            bottom, top = self._taylor(form, moving, a, b, opened)
            positive = positive[:, 0]
            first[at] = np.where(positive, np.maximum(first[at], bottom), first[at])
            last[at] = np.where(positive, last[at], np.minimum(last[at], top))
        return first, last, below, above

    def _taylor(self, form, moving, low, high, opened):
        """(low, high) of a form over boxes by f(c) + f'(c) (x - c) + f''(box) (x - c)^2/2 (Neumaier, as above; Moore, section 3.4)."""
        node, size, arithmetic = form.nodes[-1], len(low), self.arithmetic
        gradient, hessian = self._gradient(node), self._hessian(node, moving)
        centre = _centres(low, high)
        at_centre = self.evaluate([gradient[k] for k in moving], centre, centre, opened)
        over = self.evaluate([*(gradient[k] for k in moving), *hessian.values()], low, high, opened)
        value = self.natural(form, centre, centre, opened)
        with np.errstate(all="ignore"):
            total = Interval(value.low, value.high)
            smooth = ~value.undefined
            step = {k: Interval(np.where(low[:, k] == centre[:, k], 0.0, np.nextafter(low[:, k] - centre[:, k], -np.inf)),
                                np.where(high[:, k] == centre[:, k], 0.0, np.nextafter(high[:, k] - centre[:, k], np.inf))) for k in moving}
            for k in moving:
                total = arithmetic.add(total, arithmetic.mul(at_centre[gradient[k]], step[k]))
                smooth = smooth & ~over[gradient[k]].undefined & ~over[gradient[k]].jump
            for (i, k), second in hessian.items():
                square = arithmetic.mul(step[i], step[k])
                part = arithmetic.mul(over[second], square)
                half = arithmetic.mul(part, arithmetic.number(Fraction(1, 2))) if i == k else part
                total = arithmetic.add(total, half)
                smooth = smooth & ~over[second].undefined & ~over[second].jump
        smooth = np.broadcast_to(smooth, size)
        return np.where(smooth, total.low, -np.inf), np.where(smooth, total.high, np.inf)

    def _hessian(self, node, moving):
        """{(i, k): second derivative by the variables i <= k}."""
        if node not in self.hessians:
            inputs = [self.graph.input(self.variables[k]) for k in moving]
            self.hessians[node] = {(i, k): part for i in moving
                                   for k, part in zip(moving, partials(self.graph, self._gradient(node)[i], inputs)) if i <= k}
        return self.hessians[node]


def _met(kind, low, high, nonzero):
    if kind == "nonzero":
        return nonzero | (low > 0) | (high < 0)
    return low >= 0 if kind == "not negative" else (low > 0) | (low >= 0) & nonzero


def normalised(below, above, low, high):
    """Maximal smear (R. B. Kearfott, Rigorous Global Search, 1996): slope times width, each box's largest 1; only infinite ones count where
    there are any, and all alike where there is nothing."""
    with np.errstate(all="ignore"):
        smear = np.maximum(np.abs(below), np.abs(above)) * (high - low)
        smear = np.where(np.isnan(smear), 0.0, smear)
        total = smear.max(axis=1, keepdims=True)
        return np.where(np.isinf(total), np.isinf(smear), np.where(total > 0, smear / total, 1.0))


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
