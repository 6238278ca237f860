"""No zero where the residual jumps: the pieces that meet at a switch, looked at one by one.

Where left - right of a switch is positive, the residual is the piece chosen there, and so it is where it is negative or 0. A piece has no zero in a
box if its enclosure leaves out 0, or if it is a product of such factors and of factors of left - right: `where(x > a, x - a, -1)` is
0 nowhere, though its values come as near to 0 from both sides as one likes.
"""

import numpy as np

from rootwright.calculus.lower import COMPARISONS
from rootwright.calculus.program import CONDITIONS, LEAVES, needed
from rootwright.proof.cancel import factors

_TRUTH = {"lt": lambda s: s < 0, "le": lambda s: s <= 0, "gt": lambda s: s > 0, "ge": lambda s: s >= 0}


def clears_jumps(chart, suspects, parts, low, high, opened):
    """True where the residual is 0 nowhere in parts [(a, b)] of the bracket's share at the thin box of a point.

    `suspects` are the pieces (a, b) of these parts, two arrays, in which a zero could not be ruled out.
    """
    for a, b in parts:
        box = low.copy(), high.copy()
        box[0][:, -1], box[1][:, -1] = a, b
        within = (suspects[0] >= a) & (suspects[1] <= b)
        pieces = np.repeat(low, within.sum(), 0), np.repeat(high, within.sum(), 0)
        pieces[0][:, -1], pieces[1][:, -1] = suspects[0][within], suspects[1][within]
        if not chart.natural(chart.residual, *pieces, opened).nonzero.all() and not _pieces_clear(chart, box, opened):
            return False
    return True


def _pieces_clear(chart, box, opened):
    graph, root = chart.graph, chart.residual.nodes[0]
    values = chart.evaluate([root], *box, opened)
    steps = {node: step for node, step in ((node, _step(graph, node, values)) for node in needed(graph.instructions, [root])) if step is not None}
    if not steps:
        return False
    first = next(iter(steps.values()))
    turns = {}                  # step -> sign of its left - right relative to that of the first
    for node, step in steps.items():
        ratio = graph.rational(chart.cancelling.of(graph.div(step, first)))
        if not ratio:
            return False
        turns[node] = 1 if ratio > 0 else -1
    for side in (1, 0, -1):
        piece = _piece(graph, root, {node: side * turn for node, turn in turns.items()})
        if not _nonzero(chart, piece, first if side else None, box, opened):
            return False
    return True


def _step(graph, node, values):
    """left - right of a switch that is not decided over the box; None for other instructions."""
    instruction = graph.instructions[node]
    if instruction.op in COMPARISONS and np.all(values[node].yes & values[node].no):
        return graph.sub(*instruction.args)
    if instruction.op == "sign" and values[node].low.min() < values[node].high.max():
        return instruction.args[0]
    if instruction.op == "atan2":
        y, x = (values[arg] for arg in instruction.args)
        if np.all(x.high < 0.0) and np.all((y.low <= 0.0) & (y.high >= 0.0)):
            return instruction.args[0]
    return None


def _piece(graph, root, sides):
    """The node with every step decided: `sides` maps it to the sign of its left - right."""
    twins = {}
    for node in needed(graph.instructions, [root]):
        instruction = graph.instructions[node]
        args = [twins[arg] for arg in instruction.args]
        if node in sides and instruction.op == "sign":
            twin = graph.number(sides[node])
        elif node in sides and instruction.op == "atan2":
            turned, turn = graph.atan(graph.div(*args)), graph.pi()
            twin = graph.add(turned, turn) if sides[node] >= 0 else graph.sub(turned, turn)
        elif node in sides:
            twin = _TRUTH[instruction.op](sides[node])
        elif instruction.op in LEAVES:
            twin = node if instruction.op != "named" else graph.enter("named", args, instruction.value)
        elif instruction.op in CONDITIONS:
            twin = _decided(graph, instruction.op, args)
        elif instruction.op == "where" and graph.instructions[instruction.args[2]].op == "nan":
            twin = args[1]              # where it has a value, it has this one
        elif instruction.op == "where" and isinstance(args[0], bool):
            twin = args[1] if args[0] else args[2]
        else:
            twin = graph.enter(instruction.op, args)
        twins[node] = twin
    return twins[root]


def _decided(graph, op, args):
    """A condition of which parts are known: True or False, or what is left of it."""
    known = [arg for arg in args if isinstance(arg, bool)]
    rest = [arg for arg in args if not isinstance(arg, bool)]
    if not known:
        return graph.enter(op, args)
    if op == "not":
        return not known[0]
    if op == "and":
        return False if False in known else rest[0] if rest else True
    return True if True in known else rest[0] if rest else False


def _nonzero(chart, node, apart, box, opened):
    """True where a value is 0 nowhere in the box, given that `apart` (a node or None) is not."""
    free = _factors(chart, apart) if apart is not None else ()
    nodes = [factor for factor in (_factors(chart, node) if _may_vanish(chart, node, box, opened) else ()) if factor not in free]
    return not any(_may_vanish(chart, factor, box, opened) for factor in nodes)


def _factors(chart, node):
    constant, found = factors(chart.graph, (chart.cancelling.expanded(node) or [chart.cancelling.of(node)])[0])
    return [*found, *([] if chart.graph.rational(constant) else [constant])]


def _may_vanish(chart, node, box, opened):
    value = chart.evaluate([node], *box, opened)[node]
    return not np.all(value.apart())
