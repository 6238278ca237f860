"""Quotients of two values that are both 0 at an open end: enclosed next to it by Cauchy's mean-value theorem.

Where p and q are 0 at t = 0, continuous from there on, and q' is 0 nowhere, p(t)/q(t) = p'(s)/q'(s) for some s between 0 and t. So sin(x)/x
next to 0 is a value of cos.
"""

import numpy as np

from rootwright.calculus.differentiate import partials
from rootwright.calculus.program import LEAVES, Node, needed
from rootwright.proof.cancel import with_inputs
from rootwright.proof.intervals import Interval


class Limits:
    """The quotients of a node that are 0/0 at t = 0; `node` is the same value with an input in the place of each."""

    def __init__(self, graph, cancelling, root, share):
        self.graph, self.quotients = graph, {}
        name, zero = graph.instructions[share].value, graph.number(0)
        twins = {}
        for step in needed(graph.instructions, [root]):
            instruction = graph.instructions[step]
            args = [twins[arg] for arg in instruction.args]
            twin = Node(step) if instruction.op in LEAVES and not args else graph.enter(instruction.op, args, instruction.value)
            if instruction.op == "div" and all(graph.rational(cancelling.of(with_inputs(graph, arg, {name: zero}))) == 0
                                               for arg in instruction.args):
                twin = graph.input(f"_limit{len(self.quotients)}")
                slopes = [partials(graph, cancelling.of(arg), [share])[0] for arg in instruction.args]
                self.quotients[twin] = (*map(Node, instruction.args), *slopes)
            twins[step] = twin
        self.node = twins[root]

    def values(self, evaluate, nodes, low, high):
        """{input: Interval} of those that the nodes need; `evaluate(nodes, low, high)` gives Intervals."""
        wanted = set(self.quotients) & set(needed(self.graph.instructions, nodes)) if self.quotients else ()
        low = low.copy()
        low[:, -1] = 0.0
        return {self.graph.instructions[twin].value: _quotient(evaluate, self.quotients[twin], low, high) for twin in wanted}


def _quotient(evaluate, nodes, low, high):
    values = evaluate(list(nodes), low, high)
    p, q, p_slope, q_slope = (values[node] for node in nodes)
    with np.errstate(all="ignore"):
        steep = (q_slope.low > 0.0) | (q_slope.high < 0.0)
        undefined = p.undefined | q.undefined | p_slope.undefined | q_slope.undefined
        known = steep & ~np.asarray(undefined) & ~np.asarray(p.jump | q.jump)
        safe = np.where(known, q_slope.low, 1.0), np.where(known, q_slope.high, 1.0)
        size = np.broadcast_shapes(np.shape(known), p_slope.low.shape, (len(low),))
        ends = [np.broadcast_to(p_end / q_end, size) for p_end in (p_slope.low, p_slope.high) for q_end in safe]
        bottom, top = np.nextafter(np.minimum.reduce(ends), -np.inf), np.nextafter(np.maximum.reduce(ends), np.inf)
        known = np.broadcast_to(known, size) & ~np.isnan(bottom) & ~np.isnan(top)
    return Interval(np.where(known, bottom, -np.inf), np.where(known, top, np.inf), ~known, ~known)
