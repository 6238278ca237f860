"""Switches: the places where where, min, max, abs and sign go from one piece to another."""

from rootwright.calculus.differentiate import sweep
from rootwright.calculus.lower import comparisons


def switches(graph, results):
    """Every switch that the results pass, [(guard, left, right)]: a switch where left = right while the guard holds.

    What compares constants only is left out.
    """
    found = {}
    for result in results:
        for node, (_, guard) in sorted(sweep(graph, result).items()):
            instruction = graph.instructions[node]
            if instruction.op in ("min", "max"):
                found[(guard, *instruction.args)] = None
            elif instruction.op in ("abs", "sign"):
                found[(guard, instruction.args[0], graph.number(0))] = None
            elif instruction.op == "where" and graph.instructions[instruction.args[2]].op != "nan":
                for left, right in comparisons(graph, instruction.args[0]):
                    found[(guard, left, right)] = None
    return [switch for switch in found if not all(graph.is_constant(side) for side in switch[1:])]
