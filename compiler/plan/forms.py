"""Other forms of a residual for the steps: what depends on the parameters alone is worked out once, and divisions by it,
or by what divides more than once, become products. They may differ from the author's form in the last bits; the certificate of a root
is the author's form.
"""

from collections import Counter

from rootwright.calculus.constants import NotReal, nearest
from rootwright.calculus.program import needed
from rootwright.plan.measure import effort

WORTH = 4.0                 # a value that takes less is worked out again rather than kept


def quick(graph, roots, moving):
    """The roots in forms with fewer divisions. `moving` holds what depends on the unknown."""
    divisors = Counter(graph.instructions[node].args[1] for node in needed(graph.instructions, roots)
                       if graph.instructions[node].op == "div" and node in moving)
    known = {}
    for node in needed(graph.instructions, roots):
        instruction = graph.instructions[node]
        if node not in moving or not instruction.args:
            known[node] = node
            continue
        args = [known[arg] for arg in instruction.args]
        if instruction.op == "div" and (instruction.args[1] not in moving or divisors[instruction.args[1]] > 1):
            known[node] = graph.mul(args[0], graph.div(graph.number(1), args[1]))
        else:
            known[node] = graph.enter(instruction.op, args)
        if known[node] != node and node in graph.labels:
            graph.labels.setdefault(known[node], graph.labels[node])
    return [known[root] for root in roots]


def still(graph, roots, moving):
    """What to work out once for the roots: values without the unknown that values with it are made from."""
    found = set()
    for node in needed(graph.instructions, roots):
        args = graph.instructions[node].args if node in moving else ()
        for arg in args:
            if arg not in moving and not graph.is_constant(arg) and graph.instructions[arg].args \
                    and graph.instructions[arg].op not in ("lt", "le", "gt", "ge", "and", "or", "not", "ordered") \
                    and effort(graph.instructions, [arg]) >= WORTH:
                found.add(arg)
    return sorted(found)


def constants_of(graph, first, constants):
    """`constants` with the values of those entered from instruction `first` on."""
    found = dict(constants)
    for node in range(first, len(graph.instructions)):
        if graph.is_constant(node):
            try:
                found[node] = (nearest(graph, node), 0.0)
            except NotReal:
                continue
    return found
