"""Parameters that matter only together: a value through which they act on the equation, taken as one variable.

Where every way from a parameter to the residual and to the bracket leads through one value (a dominator of the instructions, T. Lengauer
and R. E. Tarjan, ACM TOPLAS 1, 1979), that value is all that the equation knows of it. A proof for all numbers that the value can have, whatever the
other parameters are, holds for every point of the operating range: it may prove more than is asked for, never less.
"""

from dataclasses import dataclass

import numpy as np

from rootwright.calculus.program import needed

NAME = "_group"             # names of a spec begin with a letter
_BITS_OF_A_DOUBLE = 63


@dataclass(frozen=True)
class Group:
    name: str
    node: int
    absorbed: tuple[str, ...]       # parameters that act through the value only


def groups(graph, roots, names, unknown):
    """Values free of `unknown` (names of inputs) that stand for parameters in `names`, those that stand for most first.

    At least two parameters, or one that the value uses in several places and alone.
    """
    found, taken = [], set()
    while True:
        best = None
        for node in needed(graph.instructions, roots, taken):
            if graph.instructions[node].op in ("input", "number", "pi", "named", "nan") or graph.is_constant(node):
                continue
            inside = _inputs(graph, [node], taken)
            if not inside or inside & unknown or not inside <= names or node in roots:
                continue
            absorbed = inside - _inputs(graph, roots, taken | {node})
            if len(absorbed) < 2 and not (absorbed == inside and _uses(graph, node, taken) > 1):
                continue
            key = (len(absorbed), -len(inside), node)
            if best is None or key > best[0]:
                best = key, node, absorbed
        if best is None:
            return tuple(found)
        _, node, absorbed = best
        found.append(Group(f"{NAME}{len(found)}", node, tuple(sorted(absorbed))))
        taken = taken | {node}


def _inputs(graph, roots, known):
    """Names of the inputs that the roots depend on, not by way of what is known."""
    return {graph.instructions[node].value for node in needed(graph.instructions, [root for root in roots if root not in known], known)
            if graph.instructions[node].op == "input"}


def _uses(graph, node, known):
    """Places where inputs are used below a node."""
    return sum(graph.instructions[arg].op == "input" for step in needed(graph.instructions, [node], known)
               for arg in graph.instructions[step].args)


def shaved(outside, low, high):
    """Ranges (low, high) of variables, less what `outside(low, high)` finds to lie out of the operating range whatever the others are."""
    low, high = low.copy(), high.copy()
    for k in range(len(low) - 1):
        for side in (0, 1):
            first, last = _place(low[k]), _place(high[k])
            least, most = (first, last) if side == 0 else (last, first)     # from the end that is cut to the other
            kept = least
            for _ in range(_BITS_OF_A_DOUBLE):
                middle = (kept + most) // 2
                if middle in (kept, most):
                    break
                a, b = low.copy(), high.copy()
                (b if side == 0 else a)[k] = _double(middle)
                if outside(a[None], b[None])[0]:
                    kept = middle
                else:
                    most = middle
            (low if side == 0 else high)[k] = _double(kept)
    return low, high


def _place(value):
    """Doubles as whole numbers in their order."""
    bits = int(np.float64(value).view(np.int64))
    return bits if bits >= 0 else -(bits & 0x7FFFFFFFFFFFFFFF)


def _double(place):
    return float(np.int64(place).view(np.float64)) if place >= 0 else -float(np.int64(-place).view(np.float64))
