"""Derivatives by one reverse sweep over the instructions (the chain rule from the result back to the inputs).

The sweep yields the derivative with respect to every value at once, so a residual of many parameters costs no more than
one of few, and the derivative with respect to a definition is a value of its own: code generated from it reads like the
chain rule on paper. Every rule comes from the operation table.
"""

from heapq import heappop, heappush

from rootwright.calculus.program import Node
from rootwright.operations import OPERATIONS, Gated


def sweep(graph, result):
    """Adjoint and guard of every value that `result` depends on: {node: (derivative of result, guard)}.

    The guard is None, or a condition outside of which the value belongs to a branch that was not chosen: its local derivatives
    may then be NaN, so nothing of it may be used unguarded. Branches are gated where they leave `where`, `min` and `max`, never multiplied by 0.
    """
    adjoints = {result: (graph.number(1), None)}
    pending = [-result]                     # a heap: every value is visited after all that use it
    while pending:
        node = Node(-heappop(pending))
        for arg, contribution, guard in _contributions(graph, node, *adjoints[node]):
            if arg in adjoints:
                adjoints[arg] = _merge(graph, adjoints[arg], (contribution, guard))
            else:
                adjoints[arg] = (contribution, guard)
                heappush(pending, -arg)
    return adjoints


def partials(graph, result, inputs):
    """Partial derivatives of `result` with respect to the input nodes, 0 where it does not depend on one."""
    adjoints = sweep(graph, result)
    return [gated(graph, *adjoints[node]) if node in adjoints else graph.number(0) for node in inputs]


def gated(graph, value, guard):
    """The value where its guard holds, else 0."""
    return value if guard is None else graph.where(guard, value, 0)


def _contributions(graph, node, adjoint, guard):
    instruction = graph.instructions[node]
    if instruction.op == "where" and graph.instructions[instruction.args[2]].op == "nan":
        return [(instruction.args[1], adjoint, guard)]      # the guard against NaN operands: a NaN needs no derivative
    flows = []
    if instruction.op in OPERATIONS and OPERATIONS[instruction.op].pullback is not None:
        parts = OPERATIONS[instruction.op].pullback(graph, adjoint, instruction.args, node)
        for arg, part in zip(instruction.args, parts):
            if isinstance(part, Gated):
                flows.append((arg, part.part, _both(graph, guard, part.condition)))
            elif part is not None:
                flows.append((arg, part, guard))
    return [flow for flow in flows if not graph.is_constant(flow[0])]


def _both(graph, guard, condition):
    return condition if guard is None else graph.and_(guard, condition)


def _merge(graph, one, other):
    """Sum of two contributions to one value; where their guards differ, each is gated by its own."""
    (a, guard_a), (b, guard_b) = one, other
    if guard_a == guard_b:
        return graph.add(a, b), guard_a
    if guard_a is None or guard_b is None:
        guard = None
    elif guard_a == graph.not_(guard_b) or guard_b == graph.not_(guard_a):
        return graph.where(guard_a, a, b), None
    else:
        guard = graph.or_(guard_a, guard_b)
    return graph.add(gated(graph, a, guard_a), gated(graph, b, guard_b)), guard
